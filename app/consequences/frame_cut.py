"""The cut that best tells apart the tensors that may have been meant.

It leaves the least overlap of the answers, Σ_{j<k} w_j w_k exp(−Δ²_jk / 8σ²), Δ the difference of what two answers
predict: Bhattacharyya's coefficient of two normal distributions of one width σ (A. Bhattacharyya, Bull. Calcutta Math.
Soc. 35 (1943) 99, from memory). Unlike a variance it does not let one far pair outweigh two near ones.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices
from app.crystal.lattice import compute_directions, list_indices
from app.tensor.values import compute_rod_values, compute_values

FloatArray = npt.NDArray[np.float64]
ReadingKind = Literal["along", "rod"]

LARGEST_INDEX: Final = 6
MOST_ANSWERS: Final = 60
"""Of more answers the likeliest are told apart first."""

AS_GOOD: Final = 1e-3
"""Overlaps that differ by less are equal, and the lower indices win, a normal before a row."""


@dataclass(frozen=True)
class NextCut:
    """The reading that best tells several answers apart.

    Attributes:
        direction: index form.
        vector: shape (3,), unit vector in the crystal's own frame.
        predicted: shape (s,), per answer, in their order.
        overlap: what it leaves of the overlap that there is without it, 0 to 1.
    """

    direction: str
    vector: FloatArray
    predicted: FloatArray
    overlap: float


def predict_readings(matrix: FloatArray, directions: FloatArray, as_rods: npt.NDArray[np.bool_]) -> FloatArray:
    """NᵀAn, or 1/(nᵀA⁻¹n) where ``as_rods``, shape (m,), for unit vectors (m, 3); NaN where that has no value."""
    values = compute_values(matrix, directions)
    if np.any(as_rods):
        values = np.where(as_rods, compute_rod_values(matrix, directions), values)
    return values


def choose_next_cut(
    crystal: Crystal,
    matrices: Sequence[FloatArray],
    kinds: Sequence[ReadingKind | None],
    weights: FloatArray,
    sigma: float,
    max_index: int,
) -> NextCut | None:
    """The row or normal of low indices along which a reading leaves the least overlap.

    Args:
        crystal: with a cell.
        matrices: of at least two answers, the likeliest first, shape (3, 3) each.
        kinds: how each answer takes a reading.
        weights: shape (s,).
        sigma: expected of the reading.
        max_index: up to which rows and normals are looked at.

    Returns:
        the cut; None where none tells any two of the answers apart.
    """
    indices = list_indices(max_index)
    texts: list[str] = []
    blocks: list[FloatArray] = []
    for kind in ("normal", "row"):
        texts += [format_indices(kind, triple) for triple in indices.tolist()]
        blocks.append(compute_directions(crystal, kind, indices))
    vectors = np.concatenate(blocks)
    predicted = np.array(
        [
            predict_readings(matrix, vectors, np.full(len(vectors), way == "rod"))
            for matrix, way in zip(matrices, kinds, strict=True)
        ]
    )
    first, second = np.triu_indices(min(len(matrices), MOST_ANSWERS), 1)
    shares = weights[first] * weights[second]
    gaps = (predicted[first] - predicted[second]) / sigma
    # Predictions may be farther apart than a square can hold; they then do not overlap at all.
    with np.errstate(over="ignore"):
        overlaps = shares @ np.exp(-np.square(gaps) / 8.0) / np.sum(shares)
    overlaps = np.where(np.all(np.isfinite(predicted), axis=0), overlaps, np.inf)
    least = float(np.min(overlaps))
    if not least < 1.0 - 1e-9:
        return None
    sizes = np.concatenate([np.sum(np.square(indices), axis=1)] * 2)
    good = np.flatnonzero(overlaps <= least + AS_GOOD)
    best = int(good[np.argmin(sizes[good])])
    return NextCut(texts[best], vectors[best], predicted[:, best], float(overlaps[best]))
