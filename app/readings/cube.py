"""Which single cube carries the most readings.

A cube is measured between its three pairs of faces, and, with bevels, along its six face diagonals and its four body
diagonals: thirteen directions of one piece. Six face diagonals alone have condition 2 for a triclinic crystal however
the cube lies; where symmetry ties cells, how it lies decides.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.errors import InputError
from app.readings.candidates import Candidates, list_candidates
from app.readings.information import build_planned_rows
from app.readings.solver import RANK_TOLERANCE
from app.tensor.form import build_form
from app.tensor.kind import Kind

FloatArray = npt.NDArray[np.float64]

HIGHEST_INDEX: Final = 3
MOST_CUBES: Final = 20_000
ALIKE: Final = 1.1
"""Conditions are graded by this factor; within a grade the simpler cube is better."""

_TIE: Final = 1e-6

DIAGONALS: Final = np.vstack(
    [
        np.eye(3),
        [[0, 1, 1], [0, 1, -1], [1, 0, 1], [1, 0, -1], [1, 1, 0], [1, -1, 0]],
        [[1, 1, 1], [1, 1, -1], [1, -1, 1], [-1, 1, 1]],
    ]
)
"""In the cube's own axes: three edges, six face diagonals, four body diagonals."""


@dataclass(frozen=True)
class Cube:
    """One way to lay a cube.

    Attributes:
        faces: normals of the three pairs of faces as they are named; None for a third that no low index is near.
        off: shape (3,), degrees from each named direction to the cube's own axis; NaN where there is no name.
        axes: shape (3, 3), the cube's axes as rows, crystal frame, right-handed.
        readings: shape (13, 3), unit vectors of edges, face diagonals and body diagonals.
        face_rank: number of combinations of cells that readings between the faces alone see.
        rank: the same of all thirteen.
        condition: of all thirteen, equally good, on the orthonormal basis; None where they do not determine all.
    """

    faces: tuple[Direction | None, Direction | None, Direction | None]
    off: FloatArray
    axes: FloatArray
    readings: FloatArray
    face_rank: int
    rank: int
    condition: float | None


def find_cubes(
    crystal: Crystal, kind: Kind, max_index: int = 2, within: float = 1.0, most: int = 5
) -> tuple[Cube, ...]:
    """The cubes with faces of low index that see most, best first.

    First comes what sees the most combinations with all thirteen readings, then with the faces alone, then the better
    condition, in grades of 10 %, then the simplest indices. The first face is exact; the second is made perpendicular
    to it, the third to both.

    Args:
        crystal, kind: of the tensor.
        max_index: of the two faces that are named, 1 to 3; the third may be any.
        within: degrees by which the second may differ from its name, and the third to bear one.
        most: how many to list.

    Raises:
        InputError: a crystal without a cell, an index or an angle out of range.
    """
    if not 1 <= max_index <= HIGHEST_INDEX:
        raise InputError(
            f"The largest index of the faces is {max_index}.",
            field="max_index",
            hint=f"It lies between 1 and {HIGHEST_INDEX}.",
        )
    if not 0.0 <= within <= 10.0:
        raise InputError("The angle lies between 0 and 10 degrees.", field="within")
    candidates = list_candidates(crystal, max_index)
    form = build_form(crystal, kind)
    pairs = _find_pairs(candidates, within)
    axes = _build_axes(candidates.vectors[pairs[:, 0]], candidates.vectors[pairs[:, 1]])
    directions = DIAGONALS @ axes
    directions /= np.linalg.norm(directions, axis=-1, keepdims=True)
    rows = build_planned_rows(form, directions.reshape(-1, 3), np.zeros((3, 3)), 1.0, 0.0).plain
    designs = rows.reshape(len(axes), len(DIAGONALS), form.count)
    sizes = np.linalg.svd(designs, compute_uv=False)
    face_sizes = np.linalg.svd(designs[:, :3], compute_uv=False)
    # Beside 1, the length of a row: a cube that sees nothing has rank 0.
    rank, face_rank = (np.sum(values > RANK_TOLERANCE, axis=1) for values in (sizes, face_sizes))
    full = rank == form.count
    condition = np.where(full, sizes[:, 0] / np.where(full, sizes[:, -1], 1.0), np.inf)
    grade = np.floor(np.log(np.where(full, condition, 1.0)) / np.log(ALIKE) + _TIE)
    order = np.lexsort((np.arange(len(axes)), grade, -face_rank, -rank))
    found: list[Cube] = []
    for place in order.tolist():
        if len(found) == most:
            break
        if any(_is_same(axes[place], cube.axes) for cube in found):
            continue
        faces, off = _name_faces(candidates, axes[place], pairs[place], within)
        known = float(condition[place]) if full[place] else None
        found.append(Cube(faces, off, axes[place], directions[place], int(face_rank[place]), int(rank[place]), known))
    return tuple(found)


def _find_pairs(candidates: Candidates, within: float) -> npt.NDArray[np.int64]:
    """Pairs of candidates (m, 2) that are perpendicular, the simplest first."""
    cosines = np.abs(candidates.vectors @ candidates.vectors.T)
    first, second = np.nonzero(cosines <= np.sin(np.deg2rad(within)) + 1e-12)
    later = second > first
    pairs = np.column_stack([first[later], second[later]])
    sizes = np.array([float(np.sum(np.square(direction.values))) for direction in candidates.directions])
    order = np.argsort(sizes[pairs].sum(axis=1), kind="stable")
    return pairs[order[:MOST_CUBES]]


def _build_axes(first: FloatArray, second: FloatArray) -> FloatArray:
    across = second - first * np.sum(first * second, axis=1, keepdims=True)
    across /= np.linalg.norm(across, axis=1, keepdims=True)
    return np.stack([first, across, np.cross(first, across)], axis=1)


def _is_same(first: FloatArray, second: FloatArray) -> bool:
    """Whether two cubes have the same faces."""
    return bool(np.all(np.max(np.abs(first @ second.T), axis=1) > 1.0 - 1e-9))


def _name_faces(
    candidates: Candidates, axes: FloatArray, pair: npt.NDArray[np.int64], within: float
) -> tuple[tuple[Direction | None, Direction | None, Direction | None], FloatArray]:
    sines = np.linalg.norm(np.cross(candidates.vectors, axes[2]), axis=1)
    angles = np.rad2deg(np.arcsin(np.minimum(sines, 1.0)))
    third = int(np.argmax(angles <= np.min(angles) + _TIE))
    named = angles[third] <= within
    second_off = np.rad2deg(np.arcsin(np.linalg.norm(np.cross(candidates.vectors[pair[1]], axes[1]))))
    faces = (
        candidates.directions[pair[0]],
        candidates.directions[pair[1]],
        candidates.directions[third] if named else None,
    )
    return faces, np.array([0.0, second_off, angles[third] if named else np.nan])
