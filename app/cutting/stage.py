"""A stage: its axes from base to head, and how dial readings turn what is mounted on it.

v_lab = R1 R2 … Rn U v_crystal, with Ri the right-handed turn about axis i by sense · (dial − zero), axis 1 fixed to the
base. The axes are given as they lie in the laboratory with every dial at its zero.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError, located

FloatArray = npt.NDArray[np.float64]

MOST_AXES: Final = 3
WITHIN: Final = 1e-9
"""Degrees by which a dial may be beyond its travel through rounding."""


@dataclass(frozen=True)
class Axis:
    """One axis of a stage.

    Attributes:
        name: as it stands on the stage.
        vector: unit vector, laboratory frame, with every axis at zero.
        low, high: travel of the dial, degrees.
        zero: dial reading at which the axis is at zero.
        sense: 1 where a growing reading turns right-handed about the vector, −1 where it turns the other way.
    """

    name: str
    vector: FloatArray
    low: float
    high: float
    zero: float = 0.0
    sense: int = 1

    def read_dial(self, angle: float) -> float | None:
        """The dial reading nearest to zero, within travel, that is a turn by ``angle`` degrees; None where none is."""
        base = self.zero + self.sense * angle
        # Every representative within travel; the one with the least way from zero.
        lowest = int(np.ceil((self.low - WITHIN - base) / 360.0))
        highest = int(np.floor((self.high + WITHIN - base) / 360.0))
        if lowest > highest:
            return None
        wanted = int(np.clip(np.rint((self.zero - base) / 360.0), lowest, highest))
        return float(np.clip(base + 360.0 * wanted, self.low, self.high))

    def find_angle(self, dial: float) -> float:
        """The right-handed turn in degrees at a dial reading."""
        return self.sense * (dial - self.zero)


def build_axis(name: str, vector: npt.ArrayLike, low: float, high: float, zero: float = 0.0, sense: int = 1) -> Axis:
    """An axis, checked. Raises InputError at ``axis``, ``low``, ``high``, ``zero`` or ``sense``."""
    given = np.asarray(vector, dtype=np.float64)
    size = float(np.max(np.abs(given))) if given.shape == (3,) else 0.0
    if given.shape != (3,) or not np.all(np.isfinite(given)) or size == 0.0:
        raise InputError("An axis is a vector of three numbers, not all zero.", field="axis")
    scaled = given / size
    if not low <= high:
        raise InputError(
            f"The travel of {name or 'the axis'} ends at {high:g}, below its beginning at {low:g}.",
            field="high",
            hint="Give the lower end of the dial first.",
        )
    if sense not in (1, -1):
        raise InputError("The sense of a dial is 1 or -1.", field="sense")
    return Axis(name, scaled / float(np.linalg.norm(scaled)), float(low), float(high), float(zero), int(sense))


def check_axes(axes: Sequence[Axis]) -> None:
    """Refuse a stage with no axis or more than three."""
    if not 1 <= len(axes) <= MOST_AXES:
        raise InputError(f"A stage has one to {MOST_AXES} axes, not {len(axes)}.", field="axes")


def turn_about(vector: FloatArray, angles: npt.ArrayLike) -> FloatArray:
    """Right-handed rotations by degrees about a unit vector, shape (..., 3, 3) (Rodrigues' formula)."""
    turn = np.deg2rad(np.asarray(angles, dtype=np.float64))[..., None, None]
    x, y, z = vector
    cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    rotations: FloatArray = np.eye(3) + np.sin(turn) * cross + (1.0 - np.cos(turn)) * (cross @ cross)
    return rotations


def compute_turn(axes: Sequence[Axis], dials: Sequence[float]) -> FloatArray:
    """R1 R2 … Rn at dial readings, shape (3, 3). Raises InputError at ``angles`` where their number differs."""
    if len(dials) != len(axes):
        raise InputError(
            f"There are {len(dials)} dial readings for {len(axes)} axes.",
            field="angles",
            hint="Give one for every axis, in their order from the base.",
        )
    turn = np.eye(3)
    for axis, dial in zip(axes, dials, strict=True):
        turn = turn @ turn_about(axis.vector, axis.find_angle(dial))
    return turn


def find_axes_in_lab(axes: Sequence[Axis], dials: Sequence[float]) -> FloatArray:
    """Where the axes lie in the laboratory at dial readings, shape (n, 3)."""
    turn, placed = np.eye(3), []
    for axis, dial in zip(axes, dials, strict=True):
        placed.append(turn @ axis.vector)
        turn = turn @ turn_about(axis.vector, axis.find_angle(dial))
    return np.array(placed)


def read_lab(given: npt.ArrayLike, field: str) -> FloatArray:
    """A laboratory direction as a unit vector. Raises InputError at ``field``."""
    with located(field):
        vector = np.asarray(given, dtype=np.float64)
        size = float(np.max(np.abs(vector))) if vector.shape == (3,) else 0.0
        if vector.shape != (3,) or not np.all(np.isfinite(vector)) or size == 0.0:
            raise InputError("A direction in the laboratory is three numbers, not all zero.")
        scaled = vector / size
        unit: FloatArray = scaled / np.linalg.norm(scaled)
        return unit
