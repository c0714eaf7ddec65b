"""Principal values and axes of the symmetric part, with the truth about those that are not determined.

Equal principal values have no axes of their own. Equal means within rounding, or, where a covariance is known and
symmetry does not hold the axes, that the data cannot tell the values apart (χ² at 95 %): then the axis is marked.
First-order errors of an eigensystem: G. H. Golub and C. F. Van Loan, Matrix Computations (2013), section 8.1:
dλ_i = p_iᵀ dA p_i, and p_i turns toward p_j by p_iᵀ dA p_j / (λ_i − λ_j).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.special import chdtri

from app.tensor.estimate import Estimate

FloatArray = npt.NDArray[np.float64]
Shape = Literal["isotropic", "uniaxial", "biaxial"]

EQUAL_TOLERANCE: Final = 1e-9
"""Two principal values closer than this part of the largest one are equal within rounding."""

DISTINCT_LEVEL: Final = 0.95
"""Principal values count as distinct where the data exclude equality at this level."""


@dataclass(frozen=True)
class Principal:
    """The principal axes of a symmetric part.

    Attributes:
        values: shape (3,), descending.
        axes: shape (3, 3), unit vectors as rows, right-handed, in the estimate's frame.
        arbitrary: for each axis whether it is not determined: any in its plane, or any at all.
        shape: "isotropic", "uniaxial" or "biaxial".
        sigma: shape (3,), standard deviations of the values; None without covariance.
        axis_sigma: shape (3, 3), entry i j the standard deviation in degrees of the turn of axis i toward axis j, 0 on
            the diagonal, NaN where the two values are equal; None without covariance.
    """

    values: FloatArray
    axes: FloatArray
    arbitrary: tuple[bool, bool, bool]
    shape: Shape
    sigma: FloatArray | None
    axis_sigma: FloatArray | None


def find_principal(estimate: Estimate) -> Principal:
    """Principal values and axes of the symmetric part of an estimate."""
    symmetric = (estimate.matrix + estimate.matrix.T) / 2.0
    scale = float(np.max(np.abs(symmetric))) or 1.0
    ascending, vectors = np.linalg.eigh(symmetric / scale)
    values, axes = ascending[::-1] * scale, vectors.T[::-1]
    tolerance = EQUAL_TOLERANCE * float(np.max(np.abs(values)))
    equal = np.abs(values[:, None] - values[None, :]) <= tolerance
    if equal[0, 1] and equal[1, 2]:
        equal[:] = True
    axes = _choose_axes(axes, equal)
    sigma = axis_sigma = None
    groups = equal.copy()
    if estimate.covariance is not None:
        sigma = estimate.value_sigma(axes)
        axis_sigma = _compute_axis_sigma(estimate, values, axes, equal)
        groups |= _find_indistinct(estimate, axes, equal)
    alone = np.sum(groups, axis=1) == 1
    shape: Shape = "biaxial" if np.all(alone) else ("isotropic" if np.all(groups) else "uniaxial")
    arbitrary = (not alone[0], not alone[1], not alone[2])
    return Principal(values, axes, arbitrary, shape, sigma, axis_sigma)


def _choose_axes(axes: FloatArray, equal: npt.NDArray[np.bool_]) -> FloatArray:
    """One repeatable choice of signs, and of the axes within a space of equal values."""
    chosen = axes.copy()
    if np.all(equal):
        return np.eye(3)
    for first, second in ((0, 1), (1, 2)):
        if equal[first, second]:
            alone = axes[3 - first - second]
            start = np.eye(3)[int(np.argmin(np.abs(alone)))]
            across = start - alone * (alone @ start)
            chosen[first] = across / np.linalg.norm(across)
            chosen[second] = np.cross(alone, chosen[first])
    largest = np.argmax(np.abs(chosen) > np.max(np.abs(chosen), axis=1, keepdims=True) - 1e-9, axis=1)
    chosen *= np.sign(chosen[np.arange(3), largest])[:, None]
    if np.linalg.det(chosen) < 0:
        chosen[2] = -chosen[2]
    return chosen + 0.0


def _symmetric_outer(first: FloatArray, second: FloatArray) -> FloatArray:
    outer = (first[..., :, None] * second[..., None, :] + second[..., :, None] * first[..., None, :]) / 2.0
    return outer.reshape(*outer.shape[:-2], 9)


def _compute_axis_sigma(
    estimate: Estimate, values: FloatArray, axes: FloatArray, equal: npt.NDArray[np.bool_]
) -> FloatArray:
    spread = estimate.propagate(_symmetric_outer(axes[:, None, :], axes[None, :, :]))
    assert spread is not None
    gaps = np.abs(values[:, None] - values[None, :])
    turns = np.rad2deg(spread / np.where(equal, 1.0, gaps))
    turns = np.where(equal, np.nan, turns)
    np.fill_diagonal(turns, 0.0)
    return turns


def _find_indistinct(estimate: Estimate, axes: FloatArray, equal: npt.NDArray[np.bool_]) -> npt.NDArray[np.bool_]:
    """Which pairs of values the data cannot tell apart, where no symmetry holds their axes."""
    groups = np.zeros((3, 3), dtype=bool)
    if np.any(equal & ~np.eye(3, dtype=bool)):
        return groups
    closest: tuple[float, int, int] | None = None
    rotatable = 0
    for first, second in ((0, 1), (1, 2), (0, 2)):
        difference = _symmetric_outer(axes[first], axes[first]) - _symmetric_outer(axes[second], axes[second])
        mixed = 2.0 * _symmetric_outer(axes[first], axes[second])
        chi2, rank = _test_zero(estimate, np.array([difference, mixed]))
        if rank == 2:
            rotatable += 1
            if closest is None or chi2 < closest[0]:
                closest = (chi2, first, second)
    if closest is None or closest[0] > chdtri(2, 1.0 - DISTINCT_LEVEL):
        return groups
    groups[closest[1], closest[2]] = groups[closest[2], closest[1]] = True
    if rotatable == 3:
        deviator = np.eye(9) - np.outer(np.eye(3).ravel(), np.eye(3).ravel()) / 3.0
        pairs = [(0, 0), (1, 1), (0, 1), (0, 2), (1, 2)]
        functionals = np.array([_symmetric_outer(axes[i], axes[j]) for i, j in pairs]) @ deviator
        chi2, rank = _test_zero(estimate, functionals)
        if rank == 5 and chi2 <= chdtri(5, 1.0 - DISTINCT_LEVEL):
            groups[:] = True
    return groups


def _test_zero(estimate: Estimate, functionals: FloatArray) -> tuple[float, int]:
    """χ² of linear functionals (m, 9) of the tensor against zero, and the rank of their covariance."""
    assert estimate.covariance is not None
    values = functionals @ estimate.matrix.ravel()
    covariance = functionals @ estimate.covariance @ functionals.T
    variances, vectors = np.linalg.eigh(covariance)
    # Beside the largest variance of any cell: a combination that symmetry holds at zero has none.
    kept = variances > 1e-18 * max(float(np.max(np.diag(estimate.covariance))), 1e-300)
    projected = vectors[:, kept].T @ values
    return float(np.sum(projected**2 / variances[kept])), int(np.sum(kept))
