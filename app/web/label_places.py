"""Places for the texts of a drawing so that no two stand on each other, found the same way every time.

Texts are placed in the order of their rank. Each first tries the place that it was given, then places around it, near
ones first; what may be missing is left out where there is no room at its own place, what must be there goes on to the
nearest free place. Widths come from a table of advances, so that the server needs no browser to know them.
"""

from __future__ import annotations

import math
from typing import Final

from app.web.strokes import HEIGHT, WIDTH, Shape

Box = tuple[float, float, float, float]
"""Left, top, right and bottom in drawing units."""

_ADVANCES: Final[dict[str, int]] = {
    sign: advance
    for signs, advance in (
        ("ijl", 222),
        (" .,:;f/tI[]|!\u00b7", 278),
        ("r()-", 333),
        ("°", 400),
        ("ckJsvxyz", 500),
        ("abdeghnopqu0123456789LP", 556),
        ("FTZ", 611),
        ("ABEKPSVXY+=<>~\u2212\u00b1\u00d7", 667),
        ("wCDHNRU", 722),
        ("GOQ", 778),
        ("mM", 833),
        ("W%", 944),
    )
    for sign in signs
}
"""Advances of the usual sans face in thousandths of its size (the metrics that Helvetica, Arial and Liberation Sans
share; from memory, rounded up within a group)."""

_WIDEST: Final = 667
"""Of a sign that is not in the table; combining marks have none."""

_ALLOWANCE: Final = 1.06
"""Other faces of the style sheet are a little wider."""

SIZES: Final[dict[str, float]] = {"tip": 19.0, "level": 13.0, "remark": 17.0}
"""Of the classes of text whose size is not the usual one (static/tensor.css)."""

USUAL_SIZE: Final = 15.0
SYMBOL: Final = 1.25
SUB_SIZE: Final = 11.0
ASCENT: Final = 0.74
DESCENT: Final = 0.22

_RANKS: Final = ("tip", "probe", "principal-letter", "crystal-letter", "symmetry-letter", "tip-place", "dimension-text")
MAY_BE_MISSING: Final = ("remark", "level", "dimension-text", "tip-place")
"""Texts that are left out rather than moved far away from what they belong to."""

_NEAR: Final = 64.0
"""How far a text that may be missing may be moved."""

_WAYS: Final = tuple((math.cos(turn), math.sin(turn)) for turn in (math.pi * step / 4.0 for step in range(8)))
_DISTANCES: Final = (12.0, 20.0, 28.0, 38.0, 50.0, 64.0, 80.0, 100.0, 124.0, 152.0, 184.0, 220.0)


def measure_width(runs: list[list[str]], size: float) -> float:
    """Width in drawing units of runs [text, role] in a face of that size."""
    width = 0.0
    for text, role in runs:
        scale = size * SYMBOL if role == "symbol" else (SUB_SIZE if role == "sub" else size)
        for sign in text:
            if not 0x300 <= ord(sign) < 0x370:
                width += _ADVANCES.get(sign, _WIDEST) * scale
    return width / 1000.0 * _ALLOWANCE


def find_size(name: str) -> float:
    """The size of a text by its class."""
    return SIZES.get(name.split(" ")[0], USUAL_SIZE)


def find_box(text: Shape) -> Box:
    """The box about a text as the page draws it: its baseline at y, or turned about its middle."""
    size = find_size(text["class"])
    width = measure_width(text["runs"], size)
    tall = size * SYMBOL if any(role == "symbol" for _, role in text["runs"]) else size
    x, y = float(text["x"]), float(text["y"])
    if "rotate" in text:
        turn = math.radians(text["rotate"])
        cosine, sine = abs(math.cos(turn)), abs(math.sin(turn))
        height = (ASCENT + DESCENT) * tall
        across, down = (width * cosine + height * sine) / 2.0, (width * sine + height * cosine) / 2.0
        return x - across, y - down, x + across, y + down
    left = {"start": x, "middle": x - width / 2.0, "end": x - width}[text["anchor"]]
    return left, y - ASCENT * tall, left + width, y + DESCENT * tall


def overlap(first: Box, second: Box) -> bool:
    """Whether two boxes share any room."""
    return first[0] < second[2] and second[0] < first[2] and first[1] < second[3] and second[1] < first[3]


def place_labels(texts: list[Shape], width: float = WIDTH, height: float = HEIGHT) -> list[Shape]:
    """The texts where they do not collide, in the order given; what has no room is not among them.

    Args:
        texts: as of ``app.web.overlay``: class, x, y, runs, anchor, rotate.
        width, height: of the drawing, beyond which a moved text does not go.
    """
    taken: list[Box] = []
    placed: dict[int, Shape] = {}
    for number in sorted(range(len(texts)), key=lambda number: _rank(texts[number])):
        text = texts[number]
        if not any(run[0] for run in text["runs"]):
            placed[number] = text
            continue
        found = _find_place(text, find_box(text), taken, width, height)
        if found is None:
            continue
        box, right, down = found
        taken.append(box)
        moved = right or down
        placed[number] = {**text, "x": round(text["x"] + right, 1), "y": round(text["y"] + down, 1)} if moved else text
    return [placed[number] for number in sorted(placed)]


def _rank(text: Shape) -> int:
    name = text["class"].split(" ")[0]
    return _RANKS.index(name) if name in _RANKS else len(_RANKS)


def _find_place(
    text: Shape, box: Box, taken: list[Box], width: float, height: float
) -> tuple[Box, float, float] | None:
    """A free place for a box and how far it is moved; None where there is none for a text that may be missing."""
    if not any(overlap(box, other) for other in taken):
        return box, 0.0, 0.0
    name = text["class"].split(" ")[0]
    may_miss = name in MAY_BE_MISSING
    # A number lies on its line, and a length on its own.
    if may_miss and "rotate" in text:
        return None
    for distance in _DISTANCES:
        if may_miss and distance > _NEAR:
            return None
        for cosine, sine in _WAYS:
            right, down = round(distance * cosine, 1), round(distance * sine, 1)
            moved = box[0] + right, box[1] + down, box[2] + right, box[3] + down
            outside = moved[0] < 0.0 or moved[1] < 0.0 or moved[2] > width or moved[3] > height
            if not outside and not any(overlap(moved, other) for other in taken):
                return moved, right, down
    return None if may_miss else (box, 0.0, 0.0)
