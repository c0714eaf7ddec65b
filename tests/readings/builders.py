"""Crystals, directions and seeded readings that the tests of this folder share."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import Direction, parse_direction
from app.readings.reading import Reading

FloatArray = npt.NDArray[np.float64]

# The invented monoclinic conductivity that W1 and W5 of the worked numbers use.
MONOCLINIC = build_crystal([12.214, 3.0371, 5.7981, 90, 103.83, 90], "2/m")
MONOCLINIC_MATRIX = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
TRICLINIC = build_crystal([7.1, 8.2, 9.3, 81, 95, 107], "1")
TETRAGONAL = build_crystal([5, 5, 7, 90, 90, 90], "4/mmm")


def vector(values: Sequence[float] | FloatArray) -> Direction:
    """A direction by its components in the crystal frame."""
    x, y, z = (float(value) for value in values)
    return Direction("vector", (x, y, z))


def random_units(rng: np.random.Generator, count: int) -> FloatArray:
    """Unit vectors, uniform on the sphere."""
    vectors = rng.normal(size=(count, 3))
    return vectors / np.linalg.norm(vectors, axis=1, keepdims=True)


def along(text: str, value: float, **more: Any) -> Reading:
    """A reading of nᵀAn along a row or normal."""
    return Reading("along", value, parse_direction(text), **more)


def true_value(kind: str, matrix: FloatArray, n: FloatArray, m: FloatArray) -> float:
    """What each kind of reading is, written out here once more, straight from the interface's table."""
    return float(
        {
            "along": lambda: n @ matrix @ n,
            "across": lambda: m @ matrix @ n,
            "difference": lambda: n @ matrix @ n - m @ matrix @ m,
            "mean": lambda: np.trace(matrix) / 3,
            "rod": lambda: 1 / (n @ np.linalg.inv(matrix) @ n),
            "sheet": lambda: np.sqrt(np.linalg.det(matrix) / (m @ matrix @ m)),
        }[kind]()
    )


def build_reading(kind: str, value: float, n: FloatArray, m: FloatArray, **more: Any) -> Reading:
    """A reading with the directions that its kind takes."""
    return Reading(
        kind,  # type: ignore[arg-type]
        value,
        vector(n) if kind in ("along", "across", "difference", "rod") else None,
        vector(m) if kind in ("across", "difference", "sheet") else None,
        **more,
    )


def mixed_readings(
    rng: np.random.Generator, matrix: FloatArray, count: int, kinds: Sequence[str], noise: float, **more: Any
) -> list[Reading]:
    """``count`` readings along random directions, the kinds in turn, with normal noise."""
    ns, ms = random_units(rng, count), random_units(rng, count)
    readings = []
    for index in range(count):
        kind = kinds[index % len(kinds)]
        value = true_value(kind, matrix, ns[index], ms[index]) + noise * rng.normal()
        readings.append(build_reading(kind, value, ns[index], ms[index], **more))
    return readings


def obey(crystal: Crystal, matrix: FloatArray) -> FloatArray:
    """The plain average of R T Rᵀ over the group."""
    return np.mean(crystal.rotations @ matrix @ np.swapaxes(crystal.rotations, -1, -2), axis=0)
