"""Other ways to show the nine cells: six digits, the formula form, the dot diagram, and what a screen reader says.

The dot diagram is that of the printed forms of the handbooks (J. F. Nye, Physical Properties of Crystals, 1957,
table 3 and appendix E): a small dot is a cell that is zero, a heavy dot one that is not, joined dots are equal, and an
open circle is the negative of the heavy dot to which it is joined. A cell that is another combination of cells has a
heavy dot in a ring, which is our own sign.
"""

from __future__ import annotations

import re
from typing import Any, Final, Literal

import numpy as np

from app.tensor.lock import NO_OTHER_VALUE, CellLock, format_relation
from app.tensor.printing import print_value

Dot = Literal["zero", "heavy", "open", "ringed"]
Run = tuple[str, str]

SYMBOL: Final = "a"
"""The letter of a cell in the formula form, whatever the property is called."""

_NAME: Final = re.compile(r"[123xyz]{2}(?![\w.])")
_ALONE: Final = re.compile(r"(−?)([123xyz]{2})")
_MINUS: Final = re.compile(r"−\s?(?=[\w.(])")
_EFFECT: Final = re.compile(rf" (?:turns .*|{NO_OTHER_VALUE}|together leave it no other value)$")
_PLACES: Final = {"1": 1, "2": 2, "3": 3, "x": 1, "y": 2, "z": 3}


def view_cell(label: str, lock: CellLock, value: float, sigma: float | None, free: tuple[int, ...]) -> dict[str, Any]:
    """What every view shows of one cell.

    Args:
        label: "12" in the crystal frame, "xy" in a specimen's.
        lock: its state, reason and what it equals.
        value, sigma: its number; sigma is None where it is not known.
        free: positions of the crystal frame's free cells, to which the lock's terms belong.

    Returns:
        ``six`` (six digits), ``value`` and ``sigma`` (bare), ``formula`` (runs), ``dot`` and ``joined`` (the label
        that the dot is joined to), ``spoken`` (a name for screen readers) and, of a cell in a specimen frame, ``sum``
        (its value by the free cells of the crystal frame).
    """
    zero = lock.state == "zero"
    dot, joined = find_dot(lock)
    view: dict[str, Any] = {
        "six": "0" if zero else print_value(value),
        "value": 0.0 if zero else value,
        "sigma": sigma if sigma is not None and np.isfinite(sigma) and not zero else None,
        "formula": write_formula(label, lock),
        "dot": dot,
        "joined": joined,
        "spoken": speak_cell(label, lock, "0" if zero else print_value(value, view_sigma(sigma))),
    }
    if label[0] in "xyz":
        sizes = {place: float(term) for place, term in zip(free, lock.terms, strict=True) if abs(term) > 5e-5}
        view["sum"] = f"{label} = {format_relation(sizes, None) or '0'}"
    return view


def view_sigma(sigma: float | None) -> float | None:
    """A standard deviation as it is printed with: None where it is not known or has no end."""
    return sigma if sigma is not None and np.isfinite(sigma) else None


def find_dot(lock: CellLock) -> tuple[Dot, str | None]:
    """The sign of a cell in the dot diagram, and the label of the cell that it is joined to."""
    if lock.state == "zero":
        return "zero", None
    if lock.state == "free":
        return "heavy", None
    alone = _ALONE.fullmatch(lock.equals or "")
    if alone is None:
        return "ringed", None
    return ("open" if alone[1] else "heavy"), alone[2]


def write_formula(label: str, lock: CellLock) -> list[Run]:
    """A cell in the formula form, as runs of text and role: a11, 0, −a12, or 0.5 a11 − 0.5 a22.

    A longer sum, or one in a specimen frame, would not fit into a cell: it keeps its own name, and ``sum`` says more.
    """
    if lock.state == "zero":
        return [("0", "plain")]
    names = _NAME.findall(lock.equals or "")
    if lock.equals is None or len(names) > 2 or (label[0] in "xyz" and len(names) > 1):
        return [(SYMBOL, "symbol"), (label, "sub")]
    runs: list[Run] = []
    text, at = lock.equals.replace("·", "\u2009"), 0
    for found in _NAME.finditer(text):
        if found.start() > at:
            runs.append((text[at : found.start()], "plain"))
        runs += [(SYMBOL, "symbol"), (found[0], "sub")]
        at = found.end()
    if at < len(text):
        runs.append((text[at:], "plain"))
    return runs


def speak(text: str) -> str:
    """A sentence for a screen reader, many of which pass over the minus sign."""
    return _MINUS.sub("minus ", text)


def speak_cell(label: str, lock: CellLock, number: str) -> str:
    """Like "row 1 column 3, zero, locked by the half-turn about x2"."""
    place = f"row {_PLACES[label[0]]} column {_PLACES[label[1]]}"
    if lock.state == "free":
        return f"{place}, {speak(number)}, free"
    cause = lock.because.split(": ", 1)[1]
    of_itself = cause.startswith("the tensor is ")
    reason = f"locked because {cause}" if of_itself else f"locked by {_EFFECT.sub('', cause)}"
    if lock.state == "zero":
        return f"{place}, zero, {reason}"
    return speak(f"{place}, {number}, equal to {lock.equals}, {reason}")
