"""The keys of the pages: the one table from which the list on ``?`` is made.

A test looks for every key that a script handles, and a test in a browser presses every key that stands here.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

EVERY: Final = "every page"


@dataclass(frozen=True)
class KeyEntry:
    """Keys that do one thing.

    Attributes:
        name: what a test calls it.
        shown: the keys as they are printed, alternatives apart.
        keys: names of the keys as a browser tells them.
        does: a plain line.
        page: key of the page, or every page.
        place: where the keyboard must be; empty is anywhere but in a field.
        letter: whether it is a single letter or sign that can be switched off.
    """

    name: str
    shown: tuple[str, ...]
    keys: tuple[str, ...]
    does: str
    page: str = EVERY
    place: str = ""
    letter: bool = False


SAMPLE_PAGES: Final = "the pages of a sample"
PICTURE: Final = "in the picture"
PROBE: Final = "on the probe"
DISC: Final = "in the stereogram"
FIELD: Final = "in a field"

KEYS: Final[tuple[KeyEntry, ...]] = (
    KeyEntry("help", ("?",), ("?",), "show this list", letter=True),
    KeyEntry("close", ("Esc",), ("Escape",), "close a list, a note or the full window"),
    KeyEntry("undo", ("Ctrl Z",), ("z",), "undo the last change of the sample", SAMPLE_PAGES),
    KeyEntry("redo", ("Ctrl Y", "Ctrl Shift Z"), ("y", "z"), "redo it", SAMPLE_PAGES),
    KeyEntry("strip-reset", ("Esc",), ("Escape",), "take back what was typed about the crystal", SAMPLE_PAGES, FIELD),
    KeyEntry("surface-quadric", ("Q",), ("q",), "show the quadric", "tensor", letter=True),
    KeyEntry("surface-value", ("V",), ("v",), "show the value surface", "tensor", letter=True),
    KeyEntry("surface-flux", ("F",), ("f",), "show the flux surface", "tensor", letter=True),
    KeyEntry("slow-turn", ("T",), ("t",), "turn slowly from the crystal frame, or stop", "tensor", letter=True),
    KeyEntry("full-window", ("W",), ("w",), "fill the window with the picture, or leave it", "tensor", letter=True),
    KeyEntry("large-type", ("L",), ("l",), "large type, in the full window", "tensor", letter=True),
    KeyEntry(
        "turn",
        ("←", "→", "↑", "↓"),
        ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"),
        "turn the specimen by a degree",
        "tensor",
        PICTURE,
    ),
    KeyEntry("turn-about-z", (",", "."), (",", "."), "turn it about z", "tensor", PICTURE),
    KeyEntry(
        "look",
        ("Shift ←", "Shift →", "Shift ↑", "Shift ↓"),
        ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"),
        "look from elsewhere; no number changes",
        "tensor",
        PICTURE,
    ),
    KeyEntry("reset", ("Home",), ("Home",), "go back to the start", "tensor", PICTURE),
    KeyEntry("catch", ("C",), ("c",), "gentle catch on or off", "tensor", PICTURE, letter=True),
    KeyEntry("probe", ("P",), ("p",), "put the probe on the surface, or away", "tensor", letter=True),
    KeyEntry(
        "move-probe",
        ("←", "→", "↑", "↓"),
        ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"),
        "move the probe by a degree, with Shift by ten",
        "tensor",
        PROBE,
    ),
    KeyEntry(
        "move-cursor",
        ("←", "→", "↑", "↓"),
        ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"),
        "move the cursor by a degree, with Shift by ten",
        "tensor",
        DISC,
    ),
    KeyEntry("put-on-cursor", ("Enter",), ("Enter",), "put the chosen axis where the cursor is", "tensor", DISC),
    KeyEntry("take-cell", ("Enter",), ("Enter",), "take the number typed into a cell", "tensor", FIELD),
    KeyEntry("leave-cell", ("Esc",), ("Escape",), "leave the cell as it was", "tensor", FIELD),
    KeyEntry(
        "grid-down", ("↓", "Enter"), ("ArrowDown", "Enter"), "next row; at the end Enter adds one", "readings", FIELD
    ),
    KeyEntry("grid-up", ("↑",), ("ArrowUp",), "row above", "readings", FIELD),
    KeyEntry("take-field", ("Enter",), ("Enter",), "take what was typed about the part", "cut", FIELD),
    KeyEntry("cut-for-mark", ("Enter", "Space"), ("Enter", " "), "cut for the mark that is chosen", "cut", "on a mark"),
)
"""Tab and Shift Tab walk through everything, Space and Enter press: that is the browser's and is not listed twice."""

_PAGE_NAMES: Final = {"tensor": "Tensor", "readings": "Readings", "cut": "Cut", "series": "Series", "sheet": "Sheet"}


def list_keys(page: str, has_sample: bool) -> list[tuple[str, list[KeyEntry]]]:
    """The table for one page: headings with their entries, the page's own first."""
    own = [entry for entry in KEYS if entry.page == page]
    sample = [entry for entry in KEYS if entry.page == SAMPLE_PAGES and has_sample]
    every = [entry for entry in KEYS if entry.page == EVERY]
    groups = [(f"On this page, {_PAGE_NAMES.get(page, page)}", own), ("On every page", every + sample)]
    return [(heading, entries) for heading, entries in groups if entries]
