"""The expansion tensor from cells against a variable, with its covariance.

α is the symmetric part of Ṁ M⁻¹, with M the cell in the crystal frame and the dot the derivative by the variable. Since
G = MᵀM gives ½ M⁻ᵀ Ġ M⁻¹ for it, no rule of attachment enters but through the directions of the axes (after J. F. Nye,
Physical Properties of Crystals, ch. VI, and the cells' metric; derived here). The trace is the rate of the logarithm of
the volume.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.cell import FLATNESS_LIMIT, PARAMETER_NAMES, compute_metric
from app.errors import InputError
from app.series.cell_parameters import FrameMotion, compute_motion
from app.series.cell_series import CellSeries
from app.series.polynomial import Polynomial, check_degree, fit_polynomial
from app.tensor.estimate import Estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind

FloatArray = npt.NDArray[np.float64]

FORM_TOLERANCE: Final = 1e-10

_TRACE: Final = np.eye(3).ravel()


@dataclass(frozen=True)
class CellFit:
    """A polynomial of one degree through each independent cell parameter.

    Attributes:
        series: what was fitted.
        polynomials: one per independent parameter.
    """

    series: CellSeries
    polynomials: tuple[Polynomial, ...]

    @property
    def degree(self) -> int:
        """Of every polynomial."""
        return self.polynomials[0].degree

    @property
    def covariance_from(self) -> str | None:
        """ "sigma", "scatter" or None, of every polynomial."""
        return self.polynomials[0].covariance_from

    @property
    def residuals(self) -> FloatArray:
        """Observed − fitted of all six parameters made to obey, shape (n, 6), angstrom and degrees."""
        free = np.stack([polynomial.residuals for polynomial in self.polynomials], axis=-1)
        spread: FloatArray = free @ self.series.independent.embedding.T
        return spread


@dataclass(frozen=True)
class ExpansionCurve:
    """The expansion tensor and the cell at T values of the variable, in the crystal frame as it stands at each.

    Attributes:
        fit: where they come from.
        t: shape (T,).
        motion: cells (T, 6), M (T, 3, 3) and how M moves with the parameters.
        rates: shape (T, k), the derivatives of the independent parameters by t.
        joint: shape (T, k, 2, 2), covariance of each parameter and its rate; None where nothing is known.
        alpha: shape (T, 3, 3), per unit of t.
        derivative: shape (T, 9, k, 2), of alpha's cells by each parameter and its rate.
        extrapolated: shape (T,), whether t lies beyond the measured range.
    """

    fit: CellFit
    t: FloatArray
    motion: FrameMotion
    rates: FloatArray
    joint: FloatArray | None
    alpha: FloatArray
    derivative: FloatArray
    extrapolated: npt.NDArray[np.bool_]

    @property
    def covariance(self) -> FloatArray | None:
        """Of alpha's nine cells, shape (T, 9, 9)."""
        if self.joint is None:
            return None
        covariance: FloatArray = np.einsum(
            "tajx,tjxy,tbjy->tab", self.derivative, self.joint, self.derivative, optimize=True
        )
        return covariance

    @property
    def estimates(self) -> list[Estimate]:
        """Alpha at every t with its covariance."""
        covariance = self.covariance
        sentence = self.fit.series.crystal.frame_sentence
        return [
            Estimate(matrix, None if covariance is None else covariance[index], sentence)
            for index, matrix in enumerate(self.alpha)
        ]

    @property
    def volume_rate(self) -> FloatArray:
        """Volume expansion (1/V) dV/dt, shape (T,): the trace of alpha."""
        rate: FloatArray = np.trace(self.alpha, axis1=-2, axis2=-1)
        return rate

    @property
    def volume_rate_sigma(self) -> FloatArray | None:
        """Its standard deviation, shape (T,)."""
        if self.joint is None:
            return None
        return self.propagate(np.einsum("a,tajx->tjx", _TRACE, self.derivative))

    @property
    def cell_sigma(self) -> FloatArray | None:
        """Standard deviations of the six parameters, shape (T, 6); 0 for one that symmetry fixes."""
        if self.joint is None:
            return None
        deviations = np.sqrt(np.maximum(self.joint[..., 0, 0], 0.0))
        spread: FloatArray = deviations @ self.fit.series.independent.embedding.T
        return spread

    def propagate(self, derivative: FloatArray) -> FloatArray:
        """σ, shape (T,), of a quantity whose derivatives by each parameter and its rate have shape (T, k, 2)."""
        assert self.joint is not None
        variances = np.einsum("tjx,tjxy,tjy->t", derivative, self.joint, derivative, optimize=True)
        deviations: FloatArray = np.sqrt(np.maximum(variances, 0.0))
        return deviations


def fit_cells(series: CellSeries, degree: int) -> CellFit:
    """Weighted polynomials of one degree through the independent cell parameters.

    With standard deviations, weights 1/σ² and covariance from them; without, unit weights and covariance scaled by
    χ²/dof of each parameter, none at dof 0.

    Raises:
        InputError: at ``degree``, one that the series cannot carry.
    """
    check_degree(series.variable, degree)
    polynomials = [
        fit_polynomial(
            series.variable, series.t, values, None if series.sigma is None else series.sigma[:, column], degree
        )
        for column, values in enumerate(series.free.T)
    ]
    return CellFit(series, tuple(polynomials))


def compute_expansion(fit: CellFit, t: npt.ArrayLike) -> ExpansionCurve:
    """Alpha at values of the variable, shape (T,).

    Raises:
        InputError: at ``at[i]``, where the polynomials give no cell (far beyond the measured range).
    """
    places = np.asarray(t, dtype=np.float64).reshape(-1)
    series = fit.series
    parts = [polynomial.evaluate(places) for polynomial in fit.polynomials]
    free, rates = (np.stack([np.asarray(part[which]) for part in parts], axis=-1) for which in (0, 1))
    joint = None
    if fit.covariance_from is not None:
        joint = np.stack([np.asarray(part[2], dtype=np.float64) for part in parts], axis=1)
    with np.errstate(invalid="ignore"):
        cells = series.independent.expand(free)
    extrapolated = series.variable.is_outside(places)
    _refuse_impossible(places, cells, rates, joint, extrapolated)
    motion = compute_motion(cells, series.independent, series.rule)
    alpha = np.einsum("tjab,tj->tab", motion.strains, rates)
    curvature = motion.differentiate_strains(series.independent)
    by_value = np.einsum("tijab,ti->tjab", curvature, rates)
    derivative = np.stack([by_value, motion.strains], axis=-1)
    alpha, derivative = _make_exact(series, motion.strains, curvature, alpha, derivative)
    count = len(series.independent.positions)
    flat = np.moveaxis(derivative.reshape(len(places), count, 9, 2), 2, 1)
    return ExpansionCurve(fit, places, motion, rates, joint, alpha, flat, extrapolated)


def _make_exact(
    series: CellSeries, strains: FloatArray, curvature: FloatArray, alpha: FloatArray, derivative: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """The same without the rounding against symmetry, where the frame stands still in the operations."""
    form = build_form(series.crystal, Kind())

    def keeps(matrices: FloatArray) -> bool:
        size = float(np.max(np.abs(matrices), initial=0.0))
        return float(np.max(np.abs(form.project(matrices) - matrices), initial=0.0)) <= FORM_TOLERANCE * size

    # With a rule like x3=c in a rhombohedral cell the threefold axis itself moves in the frame.
    if not (keeps(strains) and keeps(curvature)):
        return alpha, derivative
    exact = form.expand(form.pick(np.moveaxis(derivative, -1, -3)))
    return form.expand(form.pick(alpha)), np.moveaxis(exact, -3, -1)


def _refuse_impossible(
    t: FloatArray,
    cells: FloatArray,
    rates: FloatArray,
    joint: FloatArray | None,
    extrapolated: npt.NDArray[np.bool_],
) -> None:
    finite = np.all(np.isfinite(cells), axis=1) & np.all(np.isfinite(rates), axis=1)
    if joint is not None:
        finite &= np.all(np.isfinite(joint), axis=(1, 2, 3))
    safe = np.where(finite[:, None], cells, np.array([1.0, 1.0, 1.0, 90.0, 90.0, 90.0]))
    inside = np.all((safe[:, :3] > 1e-3) & (safe[:, :3] < 1e6), axis=1) & np.all(
        (safe[:, 3:] > 0.0) & (safe[:, 3:] < 180.0), axis=1
    )
    unit = compute_metric(np.concatenate([np.ones((len(safe), 3)), safe[:, 3:]], axis=1))
    possible = finite & inside & (np.linalg.det(unit) > FLATNESS_LIMIT**2)
    if np.all(possible):
        return
    index = int(np.argmin(possible))
    shown = ", ".join(f"{name} {value:.6g}" for name, value in zip(PARAMETER_NAMES, cells[index], strict=True))
    shown = shown if finite[index] else "they leave the range of numbers"
    where = "far beyond the measured range" if extrapolated[index] else "between the measured values"
    raise InputError(
        f"At t = {t[index]:g}, {where}, the polynomials give no cell ({shown}).",
        field=f"at[{index}]",
        hint="Ask for a t within the measured range, or give a lower degree.",
    )
