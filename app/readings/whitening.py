"""The covariance V of a set of readings, held as a diagonal plus terms of low rank, and its whitening.

V = diag(sigma²) + Σ_bars (s² J Jᵀ + T) + Σ_batches r² p pᵀ. A bar adds rank nine at the most and a batch rank one, so V
is never formed: with V = D^½ (1 + Z Zᵀ) D^½, the inverse root of 1 + Z Zᵀ follows from the thin singular value
decomposition of Z (Woodbury's identity in its symmetric form; Golub and Van Loan, Matrix Computations, 2013, 2.1.4).
The cost is linear in the number of readings.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.readings.prediction import second_order_factors, turn_derivatives
from app.readings.reading_set import ReadingSet

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]


@dataclass(frozen=True)
class _Block:
    """Bars of one size: the readings of each, and the root that whitens them."""

    members: IntArray  # (bars, size)
    vectors: FloatArray  # (bars, size, rank)
    factors: FloatArray  # (bars, rank): 1/√(1 + λ) − 1

    def apply(self, array: FloatArray) -> None:
        parts = array[self.members]
        inner = np.swapaxes(self.vectors, -1, -2) @ parts * self.factors[..., None]
        array[self.members] = parts + self.vectors @ inner


@dataclass(frozen=True)
class Whitening:
    """W with W V Wᵀ = 1.

    Attributes:
        variances: shape (N,), the diagonal of V.
        scale: shape (N,), D^−½.
        blocks: whitening of the bars, after the scale.
        shared: the batches, as one block over all readings, after the bars; None without batches.
    """

    variances: FloatArray
    scale: FloatArray
    blocks: tuple[_Block, ...]
    shared: _Block | None

    def whiten(self, array: FloatArray) -> FloatArray:
        """W · array, for an array of shape (N,) or (N, k)."""
        result = (array.T * self.scale).T
        columns = result[:, None] if result.ndim == 1 else result
        columns = np.ascontiguousarray(columns)
        for block in self.blocks:
            block.apply(columns)
        if self.shared is not None:
            self.shared.apply(columns)
        return columns[:, 0] if result.ndim == 1 else columns

    def whiten_transposed(self, array: FloatArray) -> FloatArray:
        """Wᵀ · array, for an array of shape (N, k): with ``whiten`` before it, V⁻¹."""
        columns = np.array(array)
        if self.shared is not None:
            self.shared.apply(columns)
        for block in self.blocks:
            block.apply(columns)
        return columns * self.scale[:, None]


def build_whitening(readings: ReadingSet, matrix: FloatArray, predicted: FloatArray) -> Whitening:
    """V at a tensor (3, 3) and its predictions (N,), ready to whiten with; unit weights where no sigma is given."""
    count = len(readings)
    if readings.sigma is None:
        return Whitening(np.ones(count), np.ones(count), (), None)
    diagonal = np.square(readings.sigma)
    variances = diagonal.copy()
    blocks: list[_Block] = []
    scale = 1.0 / readings.sigma
    turned = readings.turn_sigma > 0
    if np.any(turned):
        turn = readings.turn_sigma[:, None]
        factors = np.hstack(
            [turn * turn_derivatives(readings, matrix), turn**2 * second_order_factors(readings, matrix)]
        )
        own = np.sum(np.square(factors), axis=1)
        variances = variances + own
        alone, groups = _group_bars(readings.bars, turned)
        scale = np.where(alone, 1.0 / np.sqrt(diagonal + own), scale)
        blocks = [_build_block(members, factors[members] * scale[members][..., None]) for members in groups]
    shared = None
    used = np.unique(readings.batches[readings.batches >= 0])
    if len(used):
        columns = np.zeros((count, len(used)))
        for column, batch in enumerate(used):
            inside = readings.batches == batch
            columns[inside, column] = readings.batch_sigma[batch] * predicted[inside]
        variances = variances + np.sum(np.square(columns), axis=1)
        whitened = Whitening(variances, scale, tuple(blocks), None).whiten(columns)
        shared = _build_block(np.arange(count)[None, :], whitened[None])
    return Whitening(variances, scale, tuple(blocks), shared)


def _build_block(members: IntArray, factors: FloatArray) -> _Block:
    parts = np.linalg.svd(factors, full_matrices=False)
    return _Block(members, parts.U, 1.0 / np.sqrt(1.0 + np.square(parts.S)) - 1.0)


def _group_bars(bars: IntArray, turned: npt.NDArray[np.bool_]) -> tuple[npt.NDArray[np.bool_], list[IntArray]]:
    """Readings that are alone on a turned bar, and the turned bars of several readings, grouped by their number."""
    order = np.argsort(bars, kind="stable")
    _, starts, sizes = np.unique(bars[order], return_index=True, return_counts=True)
    alone = np.zeros(len(bars), dtype=bool)
    alone[order[starts[sizes == 1]]] = True
    groups = []
    for size in np.unique(sizes[sizes > 1]):
        members = order[starts[sizes == size][:, None] + np.arange(size)]
        members = members[turned[members[:, 0]]]
        if len(members):
            groups.append(members.astype(np.int64))
    return alone & turned, groups
