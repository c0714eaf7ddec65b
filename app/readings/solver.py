"""Weighted linear least squares with its rank told, never a silent pseudo-inverse.

Å. Björck, Numerical Methods for Least Squares Problems (1996), sections 2.4, 2.7 and 4.4: a QR factor with the rows
in descending order and column pivoting keeps its accuracy when weights differ by many orders; rank, condition and the
unseen combinations come from singular values.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.linalg import qr

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

RANK_TOLERANCE: Final = 1e-6
"""A singular value below this part of the largest: rounding of the directions could decide."""


@dataclass(frozen=True)
class Solution:
    """A least-squares solution of design · x = observed, both whitened.

    Attributes:
        solution: shape (k,); of least norm where the rank is not full.
        covariance: shape (k, k), (XᵀX)⁻¹ on the seen space.
        rank: number of combinations that are seen.
        condition: largest over smallest singular value; infinite where the rank is not full.
        unseen: shape (k, k − rank), orthonormal columns that alter no observation.
    """

    solution: FloatArray
    covariance: FloatArray
    rank: int
    condition: float
    unseen: FloatArray


def solve_least_squares(
    design: FloatArray,
    observed: FloatArray,
    tolerance: float = RANK_TOLERANCE,
    *,
    unweighted: FloatArray | None = None,
) -> Solution:
    """Solve for x by a design of shape (N, k) and observations of shape (N,), both already whitened.

    Args:
        design, observed: whitened.
        tolerance: part of the largest singular value below which a combination counts as unseen.
        unweighted: the design before whitening. Rounding of a direction changes a row by a part of itself, whatever
            its weight, so rows that are plainly independent stay so however far their weights lie apart: a
            combination is seen when the whitened design or the rows at equal length show it.
    """
    count, unknowns = design.shape
    if unknowns == 0 or count == 0:
        empty = np.zeros((unknowns, unknowns))
        return Solution(np.zeros(unknowns), empty, 0, np.inf if unknowns else 1.0, np.eye(unknowns))
    if not (np.all(np.isfinite(design)) and np.all(np.isfinite(observed))):
        raise InputError(
            "The readings and their standard deviations leave the range of numbers when they are weighed.",
            field="readings",
            hint="Look for a value or a sigma that is extremely large or small.",
        )
    order = np.argsort(-np.max(np.abs(design), axis=1), kind="stable")
    design, observed = design[order], observed[order]
    orthogonal, triangle, pivots = qr(design, mode="economic", pivoting=True)
    parts = np.linalg.svd(triangle)
    # The columns of the triangle are those of the design in pivoted order.
    directions = np.zeros_like(parts.Vh)
    directions[:, pivots] = parts.Vh
    sizes = np.zeros(unknowns)
    sizes[: len(parts.S)] = parts.S
    rank, unseen = _find_rank(sizes, directions, tolerance)
    if rank < unknowns and unweighted is not None:
        lengths = np.linalg.norm(unweighted, axis=1, keepdims=True)
        rows = unweighted / np.where(lengths > tolerance * np.max(lengths), lengths, np.max(lengths) or 1.0)
        plain = np.linalg.svd(np.linalg.qr(rows, mode="r"))
        plain_sizes = np.zeros(unknowns)
        plain_sizes[: len(plain.S)] = plain.S
        plain_rank, plain_unseen = _find_rank(plain_sizes, plain.Vh, tolerance)
        if plain_rank > rank:
            rank, unseen = plain_rank, plain_unseen
    if rank == unknowns:
        inverse = np.zeros((unknowns, unknowns))
        # Of a triangle, the same back substitution as scipy's solve_triangular, which wakes threads for four numbers.
        inverse[pivots] = np.linalg.solve(triangle, np.eye(unknowns))
        solution = inverse @ (orthogonal.T @ observed)
        return Solution(solution, inverse @ inverse.T, rank, float(sizes[0] / sizes[-1]), unseen)
    kept = sizes > tolerance * sizes[0]
    weighted = directions[kept].T / sizes[kept]
    solution = weighted @ (parts.U[:, : len(parts.S)][:, kept[: len(parts.S)]].T @ (orthogonal.T @ observed))
    return Solution(solution, weighted @ weighted.T, rank, np.inf, unseen)


def _find_rank(sizes: FloatArray, directions: FloatArray, tolerance: float) -> tuple[int, FloatArray]:
    seen = sizes > tolerance * sizes[0]
    return int(np.sum(seen)), directions[~seen].T
