"""Rows and planes of low index near the directions that were sought, one of each set of equivalents."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices
from app.crystal.lattice import TIE, compute_directions, list_indices
from app.cutting.level import Locus
from app.cutting.seek import Condition, compute_all_values

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

KEPT: Final = 1e-9
"""An operation keeps a tensor if no cell moves by more than this part of the largest."""


@dataclass(frozen=True)
class Nearby:
    """A row or plane of low index near the answer.

    Attributes:
        text: its index form; of several equivalents the one with the simplest indices.
        off: angle to the nearest direction of the answer, degrees.
        values: shape (conditions,), nᵀAn of every condition.
    """

    text: str
    off: float
    values: FloatArray


def list_nearby(
    crystal: Crystal,
    locus: Locus,
    conditions: Sequence[Condition],
    kind: Literal["row", "normal"],
    within: float = 2.0,
    max_index: int = 3,
) -> list[Nearby]:
    """Rows, or plane normals, within so many degrees of the answer, nearest first, simple indices first among equals.

    Directions that an operation of the point group brings to each other are one where that operation leaves the value
    of every condition as it is, along every direction; an axial tensor changes sign under improper operations. There
    are none in a crystal without a cell, or where there is no answer.

    Args:
        crystal: cell and group.
        locus: the answer, in the crystal frame.
        conditions: whose values are wanted.
        kind: rows [uvw] or plane normals (hkl).
        within: degrees, 0 to 90.
        max_index: the largest index.
    """
    if crystal.M is None or locus.is_empty:
        return []
    indices = _drop_equivalents(list_indices(max_index), _list_keepers(crystal, conditions, kind))
    directions = compute_directions(crystal, kind, indices)
    off = measure_distances(locus, directions)
    near = np.flatnonzero(off <= within + TIE)
    order = near[np.argsort(np.rint(off[near] / TIE), kind="stable")]
    values = compute_all_values(conditions, directions[order])
    return [
        Nearby(format_indices(kind, indices[place].tolist()), float(off[place]), values[row])
        for row, place in enumerate(order.tolist())
    ]


def measure_distances(locus: Locus, directions: FloatArray) -> FloatArray:
    """Angles in degrees, 0 to 90, between unit vectors (k, 3) and the nearest line of a locus that is not empty."""
    if locus.everywhere:
        return np.zeros(len(directions))
    distances = [track.find_distances(directions) for track in locus.tracks]
    if len(locus.lines):
        across = np.linalg.norm(np.cross(directions[:, None, :], locus.lines), axis=-1)
        distances.append(np.rad2deg(np.min(np.arctan2(across, np.abs(directions @ locus.lines.T)), axis=1)))
    nearest: FloatArray = np.min(distances, axis=0)
    return nearest


def _list_keepers(crystal: Crystal, conditions: Sequence[Condition], kind: Literal["row", "normal"]) -> IntArray:
    """Matrices (g, 3, 3) that bring columns of indices to those of equivalents, of all operations that keep values."""
    keeps = np.ones(len(crystal.rotations), dtype=bool)
    for condition in conditions:
        size = float(np.max(np.abs(condition.matrix))) or 1.0
        symmetric = (condition.matrix / size + condition.matrix.T / size) / 2.0
        turned = crystal.rotations @ symmetric @ np.swapaxes(crystal.rotations, -1, -2)
        keeps &= np.max(np.abs(turned - symmetric), axis=(-2, -1)) <= KEPT
    matrices = np.rint(crystal.group.operations[keeps]).astype(np.int64)
    # (hkl) goes to (hkl) W⁻¹, and with every operation its inverse is in the group.
    return matrices if kind == "row" else np.swapaxes(matrices, -1, -2)


def _drop_equivalents(indices: IntArray, matrices: IntArray) -> IntArray:
    """The first of every set that the matrices, or a change of all signs, bring to each other."""
    images = np.einsum("gij,kj->kgi", matrices, indices)
    base = 2 * int(np.max(np.abs(images))) + 1
    # One number for each triple; opposite triples have opposite numbers.
    keys = images @ np.array([base * base, base, 1])
    first = np.unique(np.max(np.abs(keys), axis=1), return_index=True)[1]
    return indices[np.sort(first)]
