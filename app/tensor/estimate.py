"""A tensor with its covariance, frame and unit, carried through pose, inverse and value: the one home of σ.

First-order propagation: for y = f(T), var y = J Σ Jᵀ with J the derivative of y by the nine cells in row order
(JCGM 100:2008, section 5.2.2). Σ is kept for all nine cells, so a locked cell has its own σ and its correlations.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.form import Form
from app.tensor.values import compute_rod_values, is_singular

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Estimate:
    """A tensor as it is known.

    Attributes:
        matrix: shape (3, 3).
        covariance: shape (9, 9) over the cells in row order; None where nothing is known of the uncertainty.
        frame: the sentence that says which axes the matrix refers to.
        unit: the unit's text; None where it is the caller's own.
    """

    matrix: FloatArray
    covariance: FloatArray | None
    frame: str
    unit: str | None = None

    @property
    def sigma_matrix(self) -> FloatArray | None:
        """Standard deviation of every cell, shape (3, 3)."""
        if self.covariance is None:
            return None
        return _root(np.diag(self.covariance)).reshape(3, 3)

    def turn(self, pose: FloatArray, frame: str) -> Estimate:
        """The same tensor in the frame whose axes are the rows of C: C T Cᵀ."""
        turned = pose @ self.matrix @ pose.T
        if self.covariance is None:
            return Estimate(turned, None, frame, self.unit)
        both = np.kron(pose, pose)
        return Estimate(turned, both @ self.covariance @ both.T, frame, self.unit)

    def invert(self, unit: str | None = None) -> Estimate:
        """T⁻¹ with dT⁻¹ = −T⁻¹ dT T⁻¹.

        Raises:
            InputError: the tensor has no inverse.
        """
        if is_singular(self.matrix):
            raise InputError("The tensor has no inverse: one of its principal values is zero.")
        inverse = np.asarray(np.linalg.inv(self.matrix), dtype=np.float64)
        if self.covariance is None:
            return Estimate(inverse, None, self.frame, unit)
        derivative = -np.kron(inverse, inverse.T)
        return Estimate(inverse, derivative @ self.covariance @ derivative.T, self.frame, unit)

    def propagate(self, derivatives: FloatArray) -> FloatArray | None:
        """σ of quantities whose derivatives by the nine cells have shape (..., 9); shape (...)."""
        if self.covariance is None:
            return None
        variances = np.einsum("...i,...i->...", derivatives @ self.covariance, derivatives)
        return _root(variances)

    def value_sigma(self, causes: FloatArray, effects: FloatArray | None = None) -> FloatArray | None:
        """σ of nᵀTn (or mᵀTn with ``effects`` m), shape (...), for unit vectors (..., 3)."""
        outer = (causes if effects is None else effects)[..., :, None] * causes[..., None, :]
        return self.propagate(outer.reshape(*outer.shape[:-2], 9))

    def rod_sigma(self, directions: FloatArray) -> FloatArray | None:
        """σ of 1/(nᵀT⁻¹n), shape (...); NaN where that has no value."""
        if self.covariance is None:
            return None
        rods = compute_rod_values(self.matrix, directions)
        if is_singular(self.matrix):
            return rods
        inverse = np.linalg.inv(self.matrix)
        left, right = rods[..., None] * (directions @ inverse), rods[..., None] * (directions @ inverse.T)
        derivative = left[..., :, None] * right[..., None, :]
        return self.propagate(derivative.reshape(*derivative.shape[:-2], 9))


def build_estimate(
    form: Form, free_values: FloatArray, free_covariance: FloatArray | None, frame: str, unit: str | None = None
) -> Estimate:
    """An Estimate from the free cells of a form, shape (k,), and their covariance, shape (k, k)."""
    matrix = form.expand(free_values)
    if free_covariance is None:
        return Estimate(matrix, None, frame, unit)
    flat = form.basis.reshape(form.count, 9)
    return Estimate(matrix, flat.T @ free_covariance @ flat, frame, unit)


def check_covariance(covariance: npt.ArrayLike, count: int) -> FloatArray:
    """A covariance over the free cells, shape (k, k), checked to be one.

    Raises:
        InputError: wrong shape, not finite, not symmetric or not positive semidefinite.
    """
    try:
        matrix = np.array(covariance, dtype=np.float64)
    except (TypeError, ValueError):
        matrix = np.empty(0)
    if count == 0 and matrix.size == 0:
        return np.zeros((0, 0))
    if matrix.shape != (count, count) or not np.all(np.isfinite(matrix)):
        raise InputError(
            f"The covariance is {count} rows of {count} finite numbers, over the free cells in their order.",
            field="covariance",
        )
    deviations = np.sqrt(np.abs(np.diag(matrix)))
    scale = np.outer(deviations, deviations)
    if np.any(np.abs(matrix - matrix.T) > 1e-9 * (scale + np.max(np.abs(matrix)) * 1e-12)):
        raise InputError("The covariance is not symmetric.", field="covariance", hint="Entry i j must equal entry j i.")
    symmetric = matrix / 2.0 + matrix.T / 2.0
    safe = np.where(deviations > 0, deviations, 1.0)
    smallest = float(np.min(np.linalg.eigvalsh(symmetric / np.outer(safe, safe))))
    if np.any(np.diag(matrix) < 0) or smallest < -1e-9:
        raise InputError(
            "The covariance is not positive semidefinite: some combination of cells would have a negative variance.",
            field="covariance",
            hint="Variances stand on the diagonal; no correlation is larger than 1.",
        )
    return symmetric


def _root(variances: FloatArray) -> FloatArray:
    # Rounding can leave a variance that is zero by symmetry slightly negative.
    roots: FloatArray = np.sqrt(np.maximum(variances, 0.0))
    return roots
