"""Combinations of cells that a set of readings cannot see, and a reading that would see each."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, format_indices
from app.crystal.lattice import compute_directions, list_indices
from app.readings.reading import Reading
from app.tensor.form import Form

FloatArray = npt.NDArray[np.float64]

GOOD_ENOUGH: Final = 0.6
"""A simple direction is suggested when it sees this part of what the best one would."""


@dataclass(frozen=True)
class Unseen:
    """A change of the tensor that alters no reading.

    Attributes:
        combination: shape (k,), the change of the free cells in their order, of unit Frobenius norm.
        matrix: shape (3, 3), the same change as a matrix in the crystal frame.
        suggestion: a reading (without value) that would see it.
    """

    combination: FloatArray
    matrix: FloatArray
    suggestion: Reading


def describe_unseen(crystal: Crystal, form: Form, space: FloatArray) -> tuple[Unseen, ...]:
    """One Unseen for every dimension of ``space`` (k, d), columns of coordinates in the form's orthonormal basis.

    The space is given in echelon form, so that each combination involves as few free cells as can be.
    """
    combinations = _reduce_columns(form.free_from_orthonormal @ space)
    found = []
    for column in combinations.T:
        matrix = form.expand(column)
        size = float(np.linalg.norm(matrix))
        found.append(Unseen(column / size, matrix / size, _suggest(crystal, matrix / size)))
    return tuple(found)


def _reduce_columns(columns: FloatArray) -> FloatArray:
    """Reduced column echelon form, with the largest remaining entry as pivot."""
    reduced = columns.copy()
    open_rows = np.ones(len(reduced), dtype=bool)
    for number in range(reduced.shape[1]):
        sizes = np.abs(reduced[:, number:]) * open_rows[:, None]
        row, offset = np.unravel_index(int(np.argmax(sizes)), sizes.shape)
        chosen = number + int(offset)
        reduced[:, [number, chosen]] = reduced[:, [chosen, number]]
        reduced[:, number] /= reduced[row, number]
        for other in range(reduced.shape[1]):
            if other != number:
                reduced[:, other] -= reduced[:, number] * reduced[row, other]
        open_rows[row] = False
    return np.where(np.abs(reduced) < 1e-12, 0.0, reduced)


def list_simple_directions(crystal: Crystal, max_index: int = 2) -> list[tuple[Direction, FloatArray]]:
    """Rows and normals up to an index, simplest first, with unit vectors; a few vectors where there is no cell."""
    if crystal.M is None:
        triples = list_indices(1).astype(np.float64)
        units = triples / np.linalg.norm(triples, axis=1, keepdims=True)
        return [
            (Direction("vector", (float(x), float(y), float(z))), unit)
            for (x, y, z), unit in zip(triples, units, strict=True)
        ]
    indices = list_indices(max_index)
    kinds: tuple[Literal["row", "normal"], ...] = ("row", "normal")
    units_of = {kind: compute_directions(crystal, kind, indices) for kind in kinds}
    directions = []
    for number, triple in enumerate(indices.tolist()):
        for kind in kinds:
            values = (float(triple[0]), float(triple[1]), float(triple[2]))
            directions.append((Direction(kind, values, text=format_indices(kind, triple)), units_of[kind][number]))
    return directions


def _suggest(crystal: Crystal, change: FloatArray) -> Reading:
    simple = list_simple_directions(crystal)
    units = np.array([unit for _, unit in simple])
    symmetric = (change + change.T) / 2.0
    best = float(np.max(np.abs(np.linalg.eigvalsh(symmetric))))
    if best > 0.05:
        seen = np.abs(np.einsum("ni,ij,nj->n", units, symmetric, units))
        chosen = int(np.argmax(seen >= GOOD_ENOUGH * np.max(seen)))
        return Reading("along", None, direction=simple[chosen][0])
    # A change without symmetric part shows only in an effect across its cause.
    few = min(len(simple), 40)
    products = np.abs(units[:few] @ change @ units[:few].T)
    products[np.abs(units[:few] @ units[:few].T) > 0.5] = 0.0
    effect, cause = np.unravel_index(int(np.argmax(products >= GOOD_ENOUGH * np.max(products))), products.shape)
    return Reading("across", None, direction=simple[int(cause)][0], second=simple[int(effect)][0])
