"""Directions in a crystal: rows [uvw], plane normals (hkl), their four-index forms, and plain vectors.

A row [u v w] runs along u a + v b + w c; (h k l) is the normal of the plane, along h a* + k b* + l c*. They are
different things in every cell that is not cubic, so a Direction keeps which one it is.
Four-index forms: International Tables for Crystallography A (2016), section 1.3.2.3 (planes, i = −h−k), and the
Weber symbols of rows, [u v t w] = (u − t) a + (v − t) b + w c with t = −u−v.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]
DirectionKind = Literal["row", "normal", "vector", "specimen"]

INDEX_LIMIT: Final = 1e9
TEXT_LIMIT: Final = 200
FOUR_INDEX_TOLERANCE: Final = 1e-6

_BRACKETS: Final = {"[": ("]", "row"), "(": (")", "normal")}
_FAMILY_BRACKETS: Final = {"{": "a set of equivalent planes", "<": "a set of equivalent rows", "⟨": "a set of rows"}
_OVERBARS: Final = "\u0304\u0305"
_NUMBER: Final = re.compile(r"[+-]?(?:\d+(?:\.\d*)?|\.\d+)(?:[eE][+-]?\d{1,3})?(?:/\d+(?:\.\d*)?)?")
_COMPACT: Final = re.compile(rf"([+-]?)(\d)([{_OVERBARS}]?)")
_EXAMPLES: Final = "Write [1 0 -1] for a row, (1 0 -1) for a plane's normal."


@dataclass(frozen=True)
class Direction:
    """A direction as it was named.

    Attributes:
        kind: "row" (coefficients of a b c), "normal" (coefficients of a* b* c*), "vector" (crystal frame) or
            "specimen" (specimen frame).
        values: three numbers; their common length does not matter.
        four_index: whether it was written with four indices, which only hexagonal axes allow.
        text: what was typed, where it was typed.
    """

    kind: DirectionKind
    values: tuple[float, float, float]
    four_index: bool = False
    text: str | None = None


def read_direction(given: Any) -> Direction:
    """A Direction from what a caller gives: text, three numbers, {"xyz": […]} or {"specimen": […]}.

    Raises:
        InputError: with the reason and what to write instead.
    """
    if isinstance(given, Direction):
        return given
    if isinstance(given, str):
        return parse_direction(given)
    if isinstance(given, Mapping):
        if set(given) == {"xyz"}:
            return Direction("vector", _read_vector(given["xyz"], "xyz"))
        if set(given) == {"specimen"}:
            return Direction("specimen", _read_vector(given["specimen"], "specimen"))
        raise InputError(
            "A direction in braces has one key: xyz (crystal frame) or specimen (specimen frame).",
            hint='Write {"xyz": [0, 0, 1]} or {"specimen": [0, 0, 1]}.',
        )
    return Direction("vector", _read_vector(given, ""))


def _read_vector(given: Any, field: str) -> tuple[float, float, float]:
    refusal = InputError(
        "A direction is a text like [1 0 -1] or (1 0 -1), or a list of three finite numbers.", field=field or None
    )
    if isinstance(given, str | bytes | Mapping) or not isinstance(given, Iterable):
        raise refusal
    items = list(given)
    if len(items) != 3 or any(
        isinstance(item, bool | np.bool_) or not isinstance(item, int | float | np.number) for item in items
    ):
        raise refusal
    try:
        x, y, z = (float(item) for item in items)
    except (TypeError, ValueError, OverflowError):
        raise refusal from None
    if not all(np.isfinite(value) for value in (x, y, z)):
        raise refusal
    if x == y == z == 0.0:
        raise InputError("A direction cannot be the zero vector.", field=field or None)
    return (x, y, z)


def parse_direction(text: str) -> Direction:
    """Read ``[1 0 -1]``, ``[10-1]``, ``[1,0,-1]``, ``[1 0 1̄]``, ``(h k i l)``, ``[u v t w]``.

    Non-integers are allowed where the indices are separated. Four indices are checked (t = −u−v, i = −h−k) and
    turned into three.

    Raises:
        InputError: no or unlike brackets, a family {hkl} or <uvw>, indices run together so that they cannot be
            told apart, the wrong number of them, or all zero.
    """
    if len(text) > TEXT_LIMIT:
        raise InputError(f"A direction has at most {TEXT_LIMIT} characters.", hint=_EXAMPLES)
    plain = text.strip().replace("\u2212", "-").replace("\u2013", "-").replace("\u2010", "-")
    if plain[:1] in _FAMILY_BRACKETS:
        raise InputError(
            f"“{text.strip()}” names {_FAMILY_BRACKETS[plain[0]]}, not one direction.",
            hint="Name one member of it: [u v w] for a row, (h k l) for a plane's normal.",
        )
    if plain[:1] not in _BRACKETS or len(plain) < 3 or plain[-1] != _BRACKETS[plain[0]][0]:
        raise InputError(f"“{text.strip()}” does not say whether it is a row or a plane's normal.", hint=_EXAMPLES)
    kind: DirectionKind = "row" if plain[0] == "[" else "normal"
    indices = _split_indices(plain[1:-1], text.strip())
    if not any(indices):
        raise InputError(f"“{text.strip()}” has only zeros, so it has no direction.", hint=_EXAMPLES)
    if any(abs(index) > INDEX_LIMIT for index in indices):
        raise InputError(f"An index is at most {INDEX_LIMIT:g} in size.", hint=_EXAMPLES)
    if len(indices) == 4:
        return Direction(kind, _reduce_four_indices(kind, indices, text.strip()), True, text.strip())
    first, second, third = indices
    return Direction(kind, (first, second, third), False, text.strip())


def _split_indices(inner: str, shown: str) -> list[float]:
    parts = [part for part in re.split(r"[\s,;]+", inner.strip()) if part]
    if len(parts) == 1:
        matches = list(_COMPACT.finditer(parts[0]))
        if not matches or "".join(match.group(0) for match in matches) != parts[0]:
            raise InputError(f"The indices in “{shown}” cannot be read.", hint=f"Separate them. {_EXAMPLES}")
        if any(match.group(1) and match.group(3) for match in matches):
            raise InputError(f"An index in “{shown}” has both a sign and a bar.", hint=_EXAMPLES)
        values = [
            -float(match.group(2)) if match.group(1) == "-" or match.group(3) else float(match.group(2))
            for match in matches
        ]
    else:
        values = [_read_index(part, shown) for part in parts]
    if len(values) not in (3, 4):
        hint = "Separate every index from the next. " if len(parts) < 3 else ""
        raise InputError(
            f"“{shown}” has {len(values)} indices where three or four are needed.", hint=f"{hint}{_EXAMPLES}"
        )
    return values


def _read_index(part: str, shown: str) -> float:
    bars = sum(part.count(bar) for bar in _OVERBARS)
    plain = part.translate({ord(bar): None for bar in _OVERBARS})
    digits = sum(character.isdigit() for character in plain)
    if _NUMBER.fullmatch(plain) is None or (bars and (bars != digits or plain[0] in "+-")):
        raise InputError(f"The index “{part}” in “{shown}” cannot be read.", hint=_EXAMPLES)
    numerator, _, denominator = plain.partition("/")
    value = float(numerator)
    if denominator:
        if float(denominator) == 0:
            raise InputError(f"The index “{part}” in “{shown}” divides by zero.", hint=_EXAMPLES)
        value /= float(denominator)
    return -value if bars else value


def _reduce_four_indices(kind: DirectionKind, indices: Sequence[float], shown: str) -> tuple[float, float, float]:
    first, second, third, last = indices
    scale = max(abs(index) for index in indices)
    if abs(first + second + third) > FOUR_INDEX_TOLERANCE * scale:
        wanted = format_number(-(first + second))
        raise InputError(
            f"In “{shown}” the third of four indices must be {wanted}, minus the sum of the first two.",
            hint="Mend it, or give three indices.",
        )
    if kind == "row":
        return (first - third, second - third, last)
    return (first, second, last)


def format_number(value: float) -> str:
    """The shortest text of an index: 1 rather than 1.0."""
    return str(int(value)) if value == int(value) and abs(value) < 1e15 else repr(float(value))


def format_indices(kind: Literal["row", "normal"], indices: Iterable[float]) -> str:
    """Index form that every reader of directions takes back: ``[1 0 -1]`` or ``(1 0 -1)``."""
    inner = " ".join(format_number(float(index)) for index in indices)
    return f"[{inner}]" if kind == "row" else f"({inner})"


def typeset_indices(text: str) -> str:
    """An index form as the sentences print it: ``n(−201)`` for a normal, ``[−201]`` for a row.

    Single digits are run together, longer indices stay separated; the sign is a true minus.
    """
    inner = text[1:-1].split()
    joined = ("" if all(len(part.lstrip("-")) == 1 for part in inner) else " ").join(inner).replace("-", "−")
    return f"[{joined}]" if text[0] == "[" else f"n({joined})"
