"""Directions along which a next bar could be cut."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.spatial import cKDTree

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.crystal.lattice import compute_directions, list_indices
from app.errors import InputError, located
from app.tensor.pose import Pose, resolve_direction

FloatArray = npt.NDArray[np.float64]

MAX_CANDIDATES: Final = 20_000
HIGHEST_INDEX: Final = 12
"""Rows and normals up to it are some 13,000."""

PARALLEL: Final = 1e-8
"""Radians; two directions nearer than this are one."""

_GOLDEN_ANGLE: Final = np.pi * (3.0 - np.sqrt(5.0))


@dataclass(frozen=True)
class Candidates:
    """Directions to choose from.

    Attributes:
        directions: as they are named, n of them.
        vectors: shape (n, 3), unit vectors in the crystal frame.
        continuous: whether they stand for the whole sphere, between them too.
    """

    directions: tuple[Direction, ...]
    vectors: FloatArray
    continuous: bool = False

    def __len__(self) -> int:
        return len(self.directions)


def list_candidates(crystal: Crystal, max_index: int) -> Candidates:
    """All plane normals and rows up to an index, one of each pair of opposites, the simplest first.

    Where a normal and a row are parallel only the simpler is listed, and the normal where both are equally simple:
    a face can be cut and checked by X-rays, a row only by way of faces.

    Raises:
        InputError: a crystal without a cell, or an index out of range.
    """
    if not 1 <= max_index <= HIGHEST_INDEX:
        raise InputError(
            f"The largest index of the candidates is {max_index}.",
            field="max_index",
            hint=f"It lies between 1 and {HIGHEST_INDEX}.",
        )
    crystal.require_basis()
    triples = list_indices(max_index)
    # Normal and row of the same indices stand side by side.
    vectors = np.stack(
        [compute_directions(crystal, "normal", triples), compute_directions(crystal, "row", triples)], axis=1
    ).reshape(-1, 3)
    kept = _find_distinct(vectors)
    directions = []
    for position in kept.tolist():
        first, second, third = (float(index) for index in triples[position // 2])
        directions.append(Direction("row" if position % 2 else "normal", (first, second, third)))
    return Candidates(tuple(directions), vectors[kept])


def _find_distinct(vectors: FloatArray) -> npt.NDArray[np.int64]:
    """Positions of the vectors that are not parallel to an earlier one."""
    # The products n nᵀ do not know n from −n; their distance is √2 sin of the angle between.
    products = (vectors[:, :, None] * vectors[:, None, :]).reshape(-1, 9)
    pairs = cKDTree(products).query_pairs(np.sqrt(2.0) * PARALLEL, output_type="ndarray")
    distinct = np.ones(len(vectors), dtype=bool)
    distinct[np.max(pairs, axis=1)] = False
    return np.flatnonzero(distinct)


def resolve_candidates(crystal: Crystal, directions: Sequence[Direction], pose: Pose) -> Candidates:
    """Named directions as candidates, in their order; those in the specimen frame by ``pose``.

    Raises:
        InputError: none or too many of them, or one that means nothing in this crystal, with its place like ``[3]``.
    """
    if not directions:
        raise InputError("There are no candidates to choose from.", hint="List at least one direction.")
    if len(directions) > MAX_CANDIDATES:
        raise InputError(f"There are more than {MAX_CANDIDATES} candidates.", hint="List fewer.")
    vectors = np.zeros((len(directions), 3))
    for index, direction in enumerate(directions):
        with located(f"[{index}]"):
            vectors[index] = resolve_direction(crystal, direction, pose)
    return Candidates(tuple(directions), vectors)


def spread_candidates(count: int) -> Candidates:
    """Directions spread evenly over the half sphere x3 > 0, as a start for choosing on the whole sphere.

    A spiral by the golden angle (Á. González, Math. Geosci. 42 (2010) 49).
    """
    height = (np.arange(count) + 0.5) / count
    radius = np.sqrt(1.0 - np.square(height))
    angle = _GOLDEN_ANGLE * np.arange(count)
    return name_vectors(np.column_stack([radius * np.cos(angle), radius * np.sin(angle), height]))


def name_vectors(vectors: FloatArray) -> Candidates:
    """Points of the sphere (n, 3) as candidates that stand for the sphere."""
    directions = tuple(Direction("vector", (float(x), float(y), float(z))) for x, y, z in vectors)
    return Candidates(directions, vectors, continuous=True)
