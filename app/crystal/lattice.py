"""Rows and planes of low index, and the ones nearest to a direction."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

TIE: Final = 1e-7
"""Angles in degrees that differ by less are equal, and the simpler index wins."""

TIE_COSINE: Final = 1e-6
"""Cosines further apart than this belong to angles further apart than TIE."""


@dataclass(frozen=True)
class NearDirection:
    """A row or normal near a direction.

    Attributes:
        text: its index form.
        off: the angle to the direction's line, degrees, 0 to 90.
    """

    text: str
    off: float


@lru_cache(maxsize=16)
def list_indices(max_index: int) -> IntArray:
    """All triples of whole numbers without common divisor up to ``max_index``, one of each pair of opposites.

    Shape (n, 3), the smallest sum of squares first, then the larger leading index; the first index that is not zero
    is positive unless that makes more indices negative.
    """
    span = np.arange(-max_index, max_index + 1)
    grid = np.stack(np.meshgrid(span, span, span, indexing="ij"), axis=-1).reshape(-1, 3)
    primitive = grid[np.gcd.reduce(grid, axis=1) == 1]
    kept = primitive[[_is_kept(triple) for triple in primitive.tolist()]]
    order = sorted(range(len(kept)), key=lambda row: (int(np.sum(kept[row] ** 2)), [-int(v) for v in kept[row]]))
    ordered: IntArray = kept[order].astype(np.int64)
    ordered.setflags(write=False)
    return ordered


def _is_kept(triple: list[int]) -> bool:
    negatives = sum(value < 0 for value in triple)
    positives = sum(value > 0 for value in triple)
    if negatives != positives:
        return negatives < positives
    return next(value for value in triple if value) > 0


def compute_directions(crystal: Crystal, kind: Literal["row", "normal"], indices: npt.NDArray[np.number]) -> FloatArray:
    """Unit vectors (..., 3) in the crystal frame of rows or normals with indices (..., 3)."""
    return _compute_units(_basis_of(crystal, kind), indices)


def list_directions(crystal: Crystal, kind: Literal["row", "normal"], max_index: int) -> FloatArray:
    """The directions of ``list_indices``, shape (n, 3): kept for every lattice, so they cannot be written to."""
    return _list_directions(_basis_of(crystal, kind).tobytes(), max_index)


@lru_cache(maxsize=64)
def _list_directions(content: bytes, max_index: int) -> FloatArray:
    directions = _compute_units(np.frombuffer(content, dtype=np.float64).reshape(3, 3), list_indices(max_index))
    directions.setflags(write=False)
    return directions


def _basis_of(crystal: Crystal, kind: Literal["row", "normal"]) -> FloatArray:
    return crystal.require_basis() if kind == "row" else crystal.reciprocal


def _compute_units(basis: FloatArray, indices: npt.NDArray[np.number]) -> FloatArray:
    vectors = np.asarray(indices, dtype=np.float64) @ basis.T
    unit: FloatArray = vectors / np.linalg.norm(vectors, axis=-1, keepdims=True)
    return unit


def find_nearest(
    crystal: Crystal, direction: FloatArray, kind: Literal["row", "normal"], max_index: int = 5
) -> NearDirection:
    """The row or normal whose line is nearest to a unit vector (3,); of equally near ones the simplest.

    Its index form points the way that ``direction`` does.
    """
    return find_all_nearest(crystal, direction[None], kind, max_index)[0]


def find_all_nearest(
    crystal: Crystal, directions: FloatArray, kind: Literal["row", "normal"], max_index: int = 5
) -> list[NearDirection]:
    """``find_nearest`` for each of unit vectors (m, 3)."""
    indices = list_indices(max_index)
    vectors = list_directions(crystal, kind, max_index)
    cosines = directions @ vectors.T
    sizes = np.abs(cosines)
    found = []
    for direction, along, size in zip(directions, cosines, sizes, strict=True):
        # More than can tie is kept by the cosine, which has no digits left at small angles.
        near = np.flatnonzero(size >= np.max(size) - TIE_COSINE)
        same = vectors[near] * np.where(along[near] < 0.0, -1.0, 1.0)[:, None]
        # Twice the angle whose tangent is the difference over the sum: digits are kept at every angle (W. Kahan).
        apart, together = np.linalg.norm(same - direction, axis=1), np.linalg.norm(same + direction, axis=1)
        angles = np.rad2deg(2.0 * np.arctan2(apart, together))
        first = int(np.argmax(angles <= float(np.min(angles)) + TIE))
        best = int(near[first])
        sense = -1 if along[best] < -1e-12 else 1
        found.append(NearDirection(format_indices(kind, (sense * indices[best]).tolist()), float(angles[first])))
    return found
