"""Tensors at several values of a variable: their cells as polynomials, under the symmetry, with covariance.

Components are interpolated, never angles or principal values: those follow from the components. One generalised least
squares for all free cells at once, because the cells of one measured tensor are correlated (Å. Björck, Numerical
Methods for Least Squares Problems, 1996, section 4.4).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.special import chdtrc

from app.errors import InputError, located
from app.series.polynomial import (
    LowerDegreeTest,
    Variable,
    check_degree,
    compare_degrees,
    scale_variable,
    solve_weighted,
)
from app.tensor.estimate import Estimate, build_estimate
from app.tensor.form import Form
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]

_SINGULAR: Final = 1e-12


@dataclass(frozen=True)
class TensorState:
    """A tensor at one value of the variable.

    Attributes:
        t: the variable, in the caller's unit.
        tensor: made to obey the crystal, in the crystal frame of the whole series, with covariance or without.
    """

    t: float
    tensor: PropertyTensor


@dataclass(frozen=True)
class TensorFit:
    """Polynomials of one degree through the free cells.

    Attributes:
        form: which cells are free.
        variable: the measured range.
        coefficients: shape (degree + 1, k), of the powers of u = (t − centre) / half.
        covariance: shape ((degree + 1) k, (degree + 1) k), the cell running fastest; None where nothing is known.
        covariance_from: "sigma", "scatter" (unit weights on an orthonormal basis, scaled by χ²/dof) or None.
        residuals: shape (n, k), observed − fitted free cells.
        standardised: shape (n, k), the same by the standard deviation of each residual; NaN at leverage 1; None where
            nothing is known of the uncertainty.
        chi2: weighted sum of squares; with unit weights, squared Frobenius norm of the residual tensors.
        dof: observations less coefficients.
        p_value: of χ²; None without sigma or at dof 0.
        test: F against the next lower degree, of all cells together.
        frame: the sentence of the crystal frame.
        unit: of the tensors.
    """

    form: Form
    variable: Variable
    coefficients: FloatArray
    covariance: FloatArray | None
    covariance_from: Literal["sigma", "scatter"] | None
    residuals: FloatArray
    standardised: FloatArray | None
    chi2: float
    dof: int
    p_value: float | None
    test: LowerDegreeTest | None
    frame: str
    unit: str | None

    @property
    def degree(self) -> int:
        """The degree."""
        return len(self.coefficients) - 1

    @property
    def scale(self) -> float | None:
        """√(χ²/dof), None at dof 0."""
        return float(np.sqrt(self.chi2 / self.dof)) if self.dof else None


@dataclass(frozen=True)
class TensorCurve:
    """The tensor at T values of the variable.

    Attributes:
        t: shape (T,).
        free: shape (T, k), values of the free cells.
        free_covariance: shape (T, k, k), or None.
        estimates: the tensor at every t with its covariance, in the crystal frame.
        extrapolated: shape (T,), whether t lies beyond the measured range.
    """

    t: FloatArray
    free: FloatArray
    free_covariance: FloatArray | None
    estimates: tuple[Estimate, ...]
    extrapolated: npt.NDArray[np.bool_]

    @property
    def matrices(self) -> FloatArray:
        """Shape (T, 3, 3)."""
        return np.array([estimate.matrix for estimate in self.estimates]).reshape(-1, 3, 3)


def fit_tensors(states: Sequence[TensorState], degree: int) -> TensorFit:
    """One weighted least squares of the free cells as polynomials of one degree.

    Args:
        states: of one crystal and one kind of tensor, with covariance all or none, in any order; repeats are allowed.
        degree: 0 or more.

    Raises:
        InputError: at ``states[i].…`` or ``degree``: tensors of unlike form, covariances of some only or singular, or
            too few different values of t.
    """
    if not states:
        raise InputError("There are no states.", field="states", hint="Give the tensor at one value of t or more.")
    with located("states"):
        t = np.array([state.t for state in states], dtype=np.float64)
        variable = scale_variable(t)
        _check_alike(states)
        if states[0].tensor.form.count == 0:
            raise InputError("Symmetry lets no cell of this kind of tensor be other than zero: nothing can change.")
    check_degree(variable, degree, "tensors")
    form = states[0].tensor.form
    free = np.array([state.tensor.free for state in states])
    whitening, known = _build_whitening(states, form)
    powers = variable.compute_powers(t, degree)
    coefficients, covariance, chi2 = _solve(powers, whitening, free)
    width = form.count
    dof = (len(t) - degree - 1) * width
    gain = 0.0
    if degree:
        top = coefficients[-1]
        gain = float(top @ np.linalg.solve(covariance[-width:, -width:], top))
    residuals = free - powers @ coefficients
    source: Literal["sigma", "scatter"] | None = "sigma" if known else ("scatter" if dof else None)
    scatter = 1.0 if known or not dof else chi2 / dof
    kept = None if source is None else covariance * scatter
    estimate = states[0].tensor.estimate
    return TensorFit(
        form=form,
        variable=variable,
        coefficients=coefficients,
        covariance=kept,
        covariance_from=source,
        residuals=residuals,
        standardised=None if kept is None else _standardise(residuals, powers, kept, whitening, scatter),
        chi2=chi2,
        dof=dof,
        p_value=float(chdtrc(dof, chi2)) if known and dof else None,
        test=compare_degrees(gain, width if degree else 0, chi2, dof),
        frame=estimate.frame,
        unit=estimate.unit,
    )


def _solve(powers: FloatArray, whitening: FloatArray, free: FloatArray) -> tuple[FloatArray, FloatArray, float]:
    """Coefficients (degree + 1, k), their covariance with the cell running fastest, and χ²."""
    # The changes from the first tensor: cells that do not change have no slope, not one of rounding.
    start = free[0]
    rows = powers.shape[0] * free.shape[1]
    # Block i of the rows is powers[i] ⊗ W_i.
    design = np.einsum("nd,nij->nidj", powers, whitening).reshape(rows, -1)
    observed = np.einsum("nij,nj->ni", whitening, free - start).reshape(-1)
    unit = float(np.max(np.abs(whitening)))
    solution, covariance = solve_weighted(design / unit, observed / unit)
    left = observed - design @ solution
    coefficients = solution.reshape(powers.shape[1], -1).copy()
    coefficients[0] += start
    return coefficients, covariance / unit / unit, float(left @ left)


def _check_alike(states: Sequence[TensorState]) -> None:
    first = states[0].tensor
    carrying = sum(state.tensor.free_covariance is not None for state in states)
    for index, state in enumerate(states):
        form, own = first.form, state.tensor
        if own.form.kind != form.kind or own.form.free != form.free or not np.allclose(own.form.basis, form.basis):
            raise InputError(
                "This tensor has not the form of the first one.",
                field=f"[{index}].tensor",
                hint="Give tensors of one kind, under one group and in one crystal frame.",
            )
        if own.estimate.unit != first.estimate.unit:
            raise InputError(
                f"This tensor is in {own.estimate.unit}, the first one in {first.estimate.unit}.",
                field=f"[{index}].tensor.unit",
                hint="Convert all of them to one unit.",
            )
        if own.free_covariance is None and carrying:
            raise InputError(
                f"This tensor has no covariance, where {carrying} of {len(states)} have one.",
                field=f"[{index}].tensor.covariance",
                hint="Give the covariance of all tensors or of none.",
            )


def _build_whitening(states: Sequence[TensorState], form: Form) -> tuple[FloatArray, bool]:
    """W of every state, (n, k, k), with WᵀW its inverse covariance, and whether it comes from covariances."""
    covariances = [state.tensor.free_covariance for state in states if state.tensor.free_covariance is not None]
    if not covariances:
        # Unit weights where every tensor counts alike whatever its frame: on an orthonormal basis of the form.
        return np.tile(np.linalg.inv(form.free_from_orthonormal), (len(states), 1, 1)), False
    every = np.array(covariances)
    deviations = np.sqrt(np.diagonal(every, axis1=1, axis2=2))
    safe = np.where(deviations > 0.0, deviations, 1.0)
    correlations = every / safe[:, :, None] / safe[:, None, :]
    smallest = np.linalg.eigvalsh(correlations)[:, 0]
    bad = np.flatnonzero((smallest <= _SINGULAR) | ~np.all(deviations > 0.0, axis=1))
    if len(bad):
        raise InputError(
            "The covariance of this tensor leaves a combination of its cells without uncertainty.",
            field=f"states[{bad[0]}].tensor.covariance",
            hint="Give a covariance that is positive definite, or leave out all covariances.",
        )
    factors = np.linalg.cholesky(correlations)
    return np.linalg.inv(factors) / safe[:, None, :], True


def _standardise(
    residuals: FloatArray, powers: FloatArray, covariance: FloatArray, whitening: FloatArray, scatter: float
) -> FloatArray:
    width = residuals.shape[1]
    blocks = covariance.reshape(powers.shape[1], width, powers.shape[1], width)
    explained = np.einsum("nd,diei,ne->ni", powers, blocks, powers)
    inverse = np.linalg.inv(whitening)
    own = np.sum(np.square(inverse), axis=2)
    # With unit weights both parts are in units of the scatter, which the covariance has in it already.
    left = own * scatter - explained
    deviations = np.sqrt(np.where(left > 1e-9 * own * scatter, left, np.nan))
    standardised: FloatArray = residuals / deviations
    return standardised


def evaluate_tensors(fit: TensorFit, t: npt.ArrayLike) -> TensorCurve:
    """The tensor at values of the variable, shape (T,).

    Raises:
        InputError: at ``at[i]``, where the polynomials leave the range of numbers.
    """
    places = np.asarray(t, dtype=np.float64).reshape(-1)
    powers = fit.variable.compute_powers(places, fit.degree)
    width = fit.form.count
    covariance = None
    with np.errstate(over="ignore", invalid="ignore"):
        free = powers @ fit.coefficients
        finite = np.all(np.isfinite(free), axis=1)
        if fit.covariance is not None:
            blocks = fit.covariance.reshape(fit.degree + 1, width, fit.degree + 1, width)
            covariance = np.einsum("td,diej,te->tij", powers, blocks, powers)
            finite &= np.all(np.isfinite(covariance), axis=(1, 2))
    if not np.all(finite):
        index = int(np.argmin(finite))
        raise InputError(
            f"At t = {places[index]:g} the polynomials leave the range of numbers.",
            field=f"at[{index}]",
            hint="Ask for a t within the measured range.",
        )
    estimates = tuple(
        build_estimate(fit.form, values, None if covariance is None else covariance[index], fit.frame, fit.unit)
        for index, values in enumerate(free)
    )
    return TensorCurve(places, free, covariance, estimates, fit.variable.is_outside(places))
