"""Strain of every measured cell from a reference cell: the stretch, which no frame rule enters, or the linear form.

With F = M M0⁻¹ the stretch is U − 1, U = √(FᵀF), the right stretch tensor of the polar decomposition F = R U (C.
Truesdell and W. Noll, The Non-Linear Field Theories of Mechanics, 1965, section 23, from memory): what turning the cell
as a whole does is in R. The linear form ½(F + Fᵀ) − 1 keeps a part of that turn, so it depends on how the frame is
attached to the cell.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal, get_args

import numpy as np
import numpy.typing as npt

from app.crystal.cell import compute_metric
from app.errors import InputError
from app.series.cell_parameters import FrameMotion, compute_motion
from app.series.cell_series import CellSeries

FloatArray = npt.NDArray[np.float64]
StrainMeasure = Literal["stretch", "linear"]
MEASURES: Final = get_args(StrainMeasure)


@dataclass(frozen=True)
class Strains:
    """Strain of every state from the reference, in the crystal frame of the reference.

    Attributes:
        measure: "stretch" (U − 1) or "linear" (½(F + Fᵀ) − 1, which depends on the frame rule).
        matrices: shape (n, 3, 3).
        sigma: shape (n, 3, 3), from the standard deviations of the state and of the reference; None without them. A
            state's difference from itself has none.
    """

    measure: StrainMeasure
    matrices: FloatArray
    sigma: FloatArray | None


def compute_strains(series: CellSeries, measure: StrainMeasure = "stretch") -> Strains:
    """Strain of every measured cell, made to obey the group, from the reference's.

    Raises:
        InputError: an unknown measure.
    """
    if measure not in MEASURES:
        raise InputError(
            f"There is no measure of strain “{measure}”.", field="strain", hint=f"It is {' or '.join(MEASURES)}."
        )
    motion = compute_motion(series.cells, series.independent, series.rule)
    inverse = np.linalg.inv(motion.M[series.reference])
    if measure == "linear":
        gradient = (motion.M - motion.M[series.reference]) @ inverse
        matrices = (gradient + np.swapaxes(gradient, -1, -2)) / 2.0
        own, back = _differentiate_linear(motion, gradient + np.eye(3), series.reference)
    else:
        metric = compute_metric(series.cells)
        # The difference of the metrics first: what is left of it is exact where strains are small.
        change = inverse.T @ (metric - metric[series.reference]) @ inverse
        values, vectors = np.linalg.eigh((change + np.swapaxes(change, -1, -2)) / 2.0)
        roots = np.sqrt(1.0 + values)
        stretches = values / (1.0 + roots)
        matrices = (vectors * stretches[:, None, :]) @ np.swapaxes(vectors, -1, -2)
        matrices = (matrices + np.swapaxes(matrices, -1, -2)) / 2.0
        own, back = _differentiate_stretch(motion, change + np.eye(3), inverse, vectors, roots, series.reference)
    if series.sigma is None:
        return Strains(measure, matrices, None)
    variances = np.square(series.sigma)
    spread = np.einsum("njab,nj->nab", np.square(own), variances)
    spread += np.einsum("njab,j->nab", np.square(back), variances[series.reference])
    spread[series.reference] = 0.0
    return Strains(measure, matrices, np.sqrt(spread))


def _differentiate_linear(motion: FrameMotion, gradient: FloatArray, reference: int) -> tuple[FloatArray, FloatArray]:
    """Derivatives (n, k, 3, 3) by the state's parameters and by the reference's."""
    own = motion.gradients @ gradient[:, None]
    back = -gradient[:, None] @ motion.gradients[reference]
    return (own + np.swapaxes(own, -1, -2)) / 2.0, (back + np.swapaxes(back, -1, -2)) / 2.0


def _differentiate_stretch(
    motion: FrameMotion,
    squared: FloatArray,
    inverse: FloatArray,
    vectors: FloatArray,
    roots: FloatArray,
    reference: int,
) -> tuple[FloatArray, FloatArray]:
    """The same of √C: in the axes of C its change is dC_ij / (u_i + u_j)."""
    forward = (motion.M @ inverse)[:, None]
    own = 2.0 * np.swapaxes(forward, -1, -2) @ motion.strains @ forward
    turned = squared[:, None] @ motion.gradients[reference]
    back = -(turned + np.swapaxes(turned, -1, -2))
    sums = roots[:, :, None] + roots[:, None, :]
    rotation = vectors[:, None]

    def take_root(change: FloatArray) -> FloatArray:
        inner = np.swapaxes(rotation, -1, -2) @ change @ rotation / sums[:, None]
        root: FloatArray = rotation @ inner @ np.swapaxes(rotation, -1, -2)
        return root

    return take_root(own), take_root(back)
