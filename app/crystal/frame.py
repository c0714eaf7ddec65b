"""Frame rules: how the orthonormal crystal frame x1 x2 x3 is attached to the cell.

A rule puts one axis along a row of the lattice and another along a plane normal perpendicular to it; the third
completes a right-handed set. ``x3=c x2=b*`` is the default. M has a, b, c in the frame as its columns, so
v_frame = M (u v w)ᵀ and a normal is M⁻ᵀ (h k l)ᵀ.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.direction import Direction, format_indices, parse_direction, typeset_indices
from app.errors import InputError, located

FloatArray = npt.NDArray[np.float64]

DEFAULT_RULE: Final = "x3=c x2=b*"
LETTERS: Final = ("a", "b", "c")
PERPENDICULAR_TOLERANCE: Final = 1e-9

_ASSIGNMENT: Final = re.compile(r"x([123])\s*=\s*([abc]\*?|\[[^\]]*\]|\([^)]*\))")
_HINT: Final = (
    "Write one axis along a cell edge and another along a reciprocal edge of another letter, like x3=c x2=b*, "
    "or one along a row and another along a plane normal perpendicular to it, like x3=[1 1 1] x1=(1 -1 0)."
)


@dataclass(frozen=True)
class FrameRule:
    """One axis along a row, another along a normal.

    Attributes:
        row_axis, normal_axis: 0, 1 or 2 for x1, x2, x3.
        row, normal: the indices.
        text: the rule in its one spelling, row first.
    """

    row_axis: int
    row: Direction
    normal_axis: int
    normal: Direction
    text: str

    @property
    def sentence(self) -> str:
        """The sentence that stands beside every number that depends on axes."""
        third = 3 - self.row_axis - self.normal_axis
        first, second = (third + 1) % 3, (third + 2) % 3
        return (
            f"x{self.row_axis + 1} along {_name(self.row)}, x{self.normal_axis + 1} along {_name(self.normal)}, "
            f"x{third + 1} = x{first + 1} × x{second + 1}"
        )

    @property
    def uses_four_indices(self) -> bool:
        """Whether an index of the rule was written with four numbers."""
        return self.row.four_index or self.normal.four_index


def _name(direction: Direction) -> str:
    if direction.text in _LETTER_DIRECTIONS:
        return str(direction.text)
    kind = "row" if direction.kind == "row" else "normal"
    return typeset_indices(format_indices(kind, direction.values))  # type: ignore[arg-type]


def _letter_direction(letter: str) -> Direction:
    values = tuple(1.0 if name == letter[0] else 0.0 for name in LETTERS)
    return Direction("normal" if letter.endswith("*") else "row", values, False, letter)  # type: ignore[arg-type]


_LETTER_DIRECTIONS: Final = {letter: _letter_direction(letter) for name in LETTERS for letter in (name, f"{name}*")}


def parse_frame_rule(text: str | None) -> FrameRule:
    """Read a rule like ``x3=c x2=b*`` or ``x3=[1 1 1] x1=(1 -1 0)``; the order of the two parts is free.

    Raises:
        InputError: not two parts, the same axis twice, not one row and one normal, or a row and a normal that are
            not perpendicular.
    """
    shown = (DEFAULT_RULE if text is None else text).strip()
    if len(shown) > 400:
        raise InputError("A frame rule has at most 400 characters.", field="frame", hint=_HINT)
    parts = list(_ASSIGNMENT.finditer(shown))
    rest = re.sub(r"[\s,;]+", "", _ASSIGNMENT.sub("", shown))
    if len(parts) != 2 or rest:
        raise InputError(f"The frame rule “{shown}” cannot be read.", field="frame", hint=_HINT)
    assigned: dict[str, tuple[int, Direction]] = {}
    for part in parts:
        with located("frame"):
            written = part.group(2)
            direction = _LETTER_DIRECTIONS.get(written) or parse_direction(written)
        assigned[direction.kind] = (int(part.group(1)) - 1, direction)
    if len(assigned) != 2:
        raise InputError(
            f"The frame rule “{shown}” needs one row and one plane normal, not two of a kind.",
            field="frame",
            hint=_HINT,
        )
    (row_axis, row), (normal_axis, normal) = assigned["row"], assigned["normal"]
    if row_axis == normal_axis:
        raise InputError(f"The frame rule “{shown}” names x{row_axis + 1} twice.", field="frame", hint=_HINT)
    product = float(np.dot(row.values, normal.values))
    scale = float(np.linalg.norm(row.values) * np.linalg.norm(normal.values))
    if abs(product) > PERPENDICULAR_TOLERANCE * scale:
        raise InputError(
            f"In the frame rule “{shown}” the row and the normal are not perpendicular: "
            f"their indices multiply to {product:g}, not 0.",
            field="frame",
            hint=_HINT,
        )
    spelled = f"x{row_axis + 1}={_spell(row)} x{normal_axis + 1}={_spell(normal)}"
    return FrameRule(row_axis, row, normal_axis, normal, spelled)


def _spell(direction: Direction) -> str:
    if direction.text in _LETTER_DIRECTIONS:
        return str(direction.text)
    return format_indices("row" if direction.kind == "row" else "normal", direction.values)


def list_letter_rules() -> list[FrameRule]:
    """The 36 rules that put one axis along a cell edge and another along a reciprocal edge of another letter."""
    return [
        parse_frame_rule(f"x{first + 1}={direct} x{second + 1}={reciprocal}*")
        for first in range(3)
        for second in range(3)
        if first != second
        for direct in LETTERS
        for reciprocal in LETTERS
        if direct != reciprocal
    ]


def compute_basis(metric: FloatArray, rule: FrameRule, start: FloatArray | None = None) -> FloatArray:
    """M, shape (..., 3, 3): a, b, c in the crystal frame as columns, from metrics of shape (..., 3, 3).

    ``start`` is any right-handed basis with this metric, where one is known that is better than the metric.
    """
    if start is None:
        # The transposed Cholesky factor is one.
        start = np.swapaxes(np.linalg.cholesky(metric), -1, -2)
    row = start @ np.asarray(rule.row.values)
    normal = np.linalg.solve(np.swapaxes(start, -1, -2), np.asarray(rule.normal.values)[..., None])[..., 0]
    row = row / np.linalg.norm(row, axis=-1, keepdims=True)
    normal = normal - row * np.sum(row * normal, axis=-1, keepdims=True)
    normal = normal / np.linalg.norm(normal, axis=-1, keepdims=True)
    third = 3 - rule.row_axis - rule.normal_axis
    axes = np.zeros_like(start)
    axes[..., rule.row_axis, :] = row
    axes[..., rule.normal_axis, :] = normal
    axes[..., third, :] = np.cross(axes[..., (third + 1) % 3, :], axes[..., (third + 2) % 3, :])
    basis: FloatArray = axes @ start
    # Entries that are zero by construction come out as rounding; a clean zero keeps later cells clean.
    size = np.max(np.abs(basis), axis=(-2, -1), keepdims=True)
    return np.where(np.abs(basis) < 4e-16 * size, 0.0, basis)
