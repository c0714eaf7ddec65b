"""Operations of a point group by readable names: "half-turn about [0 1 0]", "mirror across [1 0 0]"."""

from __future__ import annotations

from dataclasses import dataclass
from math import gcd
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.direction import format_indices

FloatArray = npt.NDArray[np.float64]

TURN_NAMES: Final = {2: "half-turn", 3: "third-turn", 4: "quarter-turn", 6: "sixth-turn"}
INDEX_LIMIT: Final = 60

_LIMITING_NAMES: Final = {
    "∞": ("any turn about x3",),
    "∞m": ("any turn about x3", "mirror across any direction at right angles to x3"),
    "∞2": ("any turn about x3", "half-turn about any direction at right angles to x3"),
    "∞/m": ("any turn about x3", "mirror across x3", "inversion"),
    "∞/mm": (
        "any turn about x3",
        "mirror across x3",
        "mirror across any direction at right angles to x3",
        "half-turn about any direction at right angles to x3",
        "inversion",
    ),
    "∞∞": ("any turn about any direction",),
    "∞∞m": ("any turn about any direction", "mirror across any direction", "inversion"),
}


@dataclass(frozen=True)
class Operation:
    """One operation of a point group.

    Attributes:
        name: readable, with the axis as a row of the lattice (a mirror's axis is its normal).
        matrix: shape (3, 3), orthogonal, crystal frame, active: v goes to matrix · v.
        axis: unit vector in the crystal frame about which the turn is right-handed by a positive angle; None for
            the identity and the inversion.
        turn: 1, 2, 3, 4 or 6 for a turn by 360°/turn; 7 for the stand-in of an infinite axis.
        improper: whether the inversion is joined to the turn (a mirror is a half-turn with inversion).
    """

    name: str
    matrix: FloatArray
    axis: FloatArray | None
    turn: int
    improper: bool


def list_limiting_names(symbol: str) -> list[str]:
    """Readable names of the operations of a limiting group."""
    return list(_LIMITING_NAMES[symbol])


def find_turn(matrix: FloatArray) -> tuple[FloatArray | None, float, bool]:
    """Axis (unit vector, right-handed), angle in degrees (0 to 180) and whether an inversion is joined."""
    improper = bool(np.linalg.det(matrix) < 0)
    proper = -matrix if improper else matrix
    # Twice the axis times the sine of the angle; with the cosine from the trace the angle keeps its digits near 0.
    skew = np.array([proper[2, 1] - proper[1, 2], proper[0, 2] - proper[2, 0], proper[1, 0] - proper[0, 1]])
    size = float(np.linalg.norm(skew))
    angle = float(np.rad2deg(np.arctan2(size, np.trace(proper) - 1.0)))
    if angle < 1e-6:
        return None, 0.0, improper
    if size > 1e-6:
        return skew / size, angle, improper
    # A half-turn is 2 n nᵀ − 1: its axis is the column of n nᵀ with the largest diagonal entry.
    outer = (proper + np.eye(3)) / 2.0
    column = outer[:, int(np.argmax(np.diag(outer)))]
    return column / np.linalg.norm(column), 180.0, improper


def describe_operation(matrix: FloatArray, basis: FloatArray | None) -> Operation:
    """Name an orthogonal matrix (crystal frame) by its turn and, with M as ``basis``, by its row of the lattice."""
    axis, angle, improper = find_turn(matrix)
    if axis is None:
        return Operation("inversion" if improper else "identity", matrix, None, 1, improper)
    turn = next((order for order in (2, 3, 4, 6) if abs(angle - 360.0 / order) < 1e-3), 7)
    if turn == 2:
        axis = _choose_sense(axis, basis)
    where = _name_axis(axis, basis)
    if turn == 7:
        name = f"turn about {where}"
    elif turn == 2 and improper:
        name = f"mirror across {where}"
    else:
        name = f"{TURN_NAMES[turn]}{' with inversion' if improper else ''} about {where}"
    return Operation(name, matrix, axis, turn, improper)


def _choose_sense(axis: FloatArray, basis: FloatArray | None) -> FloatArray:
    components = axis if basis is None else np.linalg.solve(basis, axis)
    significant = components[np.abs(components) > 1e-6 * np.max(np.abs(components))]
    return -axis if significant[0] < 0 else axis


def _name_axis(axis: FloatArray, basis: FloatArray | None) -> str:
    if basis is not None:
        components = np.asarray(np.linalg.solve(basis, axis), dtype=np.float64)
        indices = find_integer_indices(components)
        if indices is not None:
            return format_indices("row", indices)
    for number in range(3):
        if abs(abs(axis[number]) - 1.0) < 1e-9:
            return f"{'−' if axis[number] < 0 else ''}x{number + 1}"
    return "(" + ", ".join(f"{component:.4f}" for component in axis) + ")"


def find_integer_indices(components: FloatArray, tolerance: float = 1e-6) -> tuple[int, int, int] | None:
    """The smallest whole numbers in the ratio of three components; None where none up to the limit fit."""
    scaled = components / np.max(np.abs(components))
    for factor in range(1, INDEX_LIMIT + 1):
        trial = scaled * factor
        rounded = np.rint(trial)
        if np.all(np.abs(trial - rounded) < tolerance * factor):
            divisor = gcd(*(abs(int(value)) for value in rounded))
            first, second, third = (int(value) // divisor for value in rounded)
            return first, second, third
    return None
