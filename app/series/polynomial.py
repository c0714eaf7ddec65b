"""Weighted polynomials through what was measured at several values of a variable, with covariance.

The variable t is centred and scaled before any power of it is taken: u = (t − centre) / half runs from −1 to 1 over
the measured range, so that 293 to 1400 K and 4e14 to 7e14 Hz are equally well conditioned (Å. Björck, Numerical Methods
for Least Squares Problems, 1996, sections 2.4 and 4.4: rows in descending order and column pivoting keep the accuracy
of a QR factor where weights differ by many orders).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.linalg import qr
from scipy.special import chdtrc, fdtrc

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

MAX_DEGREE: Final = 8
LARGEST_VARIABLE: Final = 1e60
SMALLEST_SPAN: Final = 1e-60
RANK_TOLERANCE: Final = 1e-9
"""Of the powers of u at the measured places: a smaller singular value, and rounding would decide the polynomial."""


@dataclass(frozen=True)
class Variable:
    """The variable of a series, as far as it was measured.

    Attributes:
        lowest, highest: the measured range, in the caller's unit of t.
        centre, half: u = (t − centre) / half.
        places: shape (m,), the different values of t, ascending.
    """

    lowest: float
    highest: float
    centre: float
    half: float
    places: FloatArray

    def reduce(self, t: FloatArray) -> FloatArray:
        """U at t, shape as given."""
        with np.errstate(over="ignore"):
            return (t - self.centre) / self.half

    def compute_powers(self, t: FloatArray, degree: int) -> FloatArray:
        """The powers u⁰ … u^degree, shape (..., degree + 1)."""
        with np.errstate(over="ignore", invalid="ignore"):
            powers: FloatArray = self.reduce(t)[..., None] ** np.arange(degree + 1)
        return powers

    def compute_slopes(self, t: FloatArray, degree: int) -> FloatArray:
        """Their derivatives by t, shape (..., degree + 1)."""
        slopes = np.zeros((*np.shape(t), degree + 1))
        with np.errstate(over="ignore", invalid="ignore"):
            if degree:
                slopes[..., 1:] = self.compute_powers(t, degree - 1) * np.arange(1, degree + 1) / self.half
        return slopes

    def is_outside(self, t: FloatArray) -> npt.NDArray[np.bool_]:
        """Whether each t lies beyond what was measured."""
        outside: npt.NDArray[np.bool_] = (t < self.lowest) | (t > self.highest)
        return outside


def scale_variable(t: FloatArray) -> Variable:
    """The variable measured at t, shape (n,), n ≥ 1.

    Raises:
        InputError: at ``[i].t``, a value that is not finite or too large.
    """
    bad = np.flatnonzero(~(np.abs(t) <= LARGEST_VARIABLE))
    if len(bad):
        raise InputError(
            f"The variable t is a finite number of at most {LARGEST_VARIABLE:g} in size.", field=f"[{bad[0]}].t"
        )
    places = np.unique(t)
    lowest, highest = float(places[0]), float(places[-1])
    half = highest / 2.0 - lowest / 2.0
    if half == 0.0:
        return Variable(lowest, highest, lowest, 1.0, places)
    if half < SMALLEST_SPAN:
        raise InputError(
            f"All values of t lie within {SMALLEST_SPAN:g} of each other.", hint="Use a smaller unit of t."
        )
    return Variable(lowest, highest, lowest / 2.0 + highest / 2.0, half, places)


def check_degree(variable: Variable, degree: int, states: str = "states") -> None:
    """Refuse a degree that the measured places cannot carry.

    Raises:
        InputError: at ``degree``.
    """
    most = min(len(variable.places) - 1, MAX_DEGREE)
    if not 0 <= degree <= MAX_DEGREE:
        raise InputError(f"The degree is a whole number from 0 to {MAX_DEGREE}.", field="degree")
    if degree > most:
        count = len(variable.places)
        raise InputError(
            f"A polynomial of degree {degree} needs {states} at {degree + 1} different values of t; here "
            f"{'is one' if count == 1 else f'are {count}'}.",
            field="degree",
            hint=f"Give a degree of at most {most}, or measure at more values of t.",
        )
    powers = variable.compute_powers(variable.places, degree)
    sizes = np.linalg.svd(powers / np.linalg.norm(powers, axis=0), compute_uv=False)
    if sizes[-1] < RANK_TOLERANCE * sizes[0]:
        raise InputError(
            f"Some values of t lie so close together that rounding would decide a polynomial of degree {degree}.",
            field="degree",
            hint="Give a lower degree, or the same t to repeated measurements.",
        )


@dataclass(frozen=True)
class LowerDegreeTest:
    """Whether the highest power is needed: the fit against the same one of the next lower degree.

    Attributes:
        value: F = (Δχ² / extra) / (χ² / dof).
        extra: number of coefficients given up.
        dof: degrees of freedom of the fit.
        p_value: probability of so large an F or a larger one if the lower degree holds.
    """

    value: float
    extra: int
    dof: int
    p_value: float


def compare_degrees(gain: float, extra: int, chi2: float, dof: int) -> LowerDegreeTest | None:
    """The F-test; None where nothing is left over, or nothing to compare with."""
    if dof <= 0 or extra <= 0 or not chi2 > 0.0:
        return None
    value = gain / extra / (chi2 / dof)
    if not np.isfinite(value):
        return None
    return LowerDegreeTest(float(value), extra, dof, float(fdtrc(extra, dof, value)))


@dataclass(frozen=True)
class Polynomial:
    """One quantity as a polynomial in u.

    Attributes:
        variable: what u is.
        coefficients: shape (degree + 1,), of u⁰, u¹, …, in the quantity's unit.
        covariance: shape (degree + 1, degree + 1); None where nothing is known of the uncertainty.
        covariance_from: "sigma" (as given), "scatter" (unit weights, scaled by χ²/dof) or None.
        residuals: shape (n,), observed − fitted.
        chi2: weighted sum of squares; with unit weights in the square of the quantity's unit.
        dof: observations less coefficients.
        test: against the next lower degree.
    """

    variable: Variable
    coefficients: FloatArray
    covariance: FloatArray | None
    covariance_from: Literal["sigma", "scatter"] | None
    residuals: FloatArray
    chi2: float
    dof: int
    test: LowerDegreeTest | None

    @property
    def degree(self) -> int:
        """The degree."""
        return len(self.coefficients) - 1

    @property
    def scale(self) -> float | None:
        """√(χ²/dof), None at dof 0."""
        return float(np.sqrt(self.chi2 / self.dof)) if self.dof else None

    @property
    def p_value(self) -> float | None:
        """Probability of such a χ² or a larger one; None without sigma or at dof 0."""
        if self.covariance_from != "sigma" or not self.dof:
            return None
        return float(chdtrc(self.dof, self.chi2))

    def evaluate(self, t: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray | None]:
        """Value and derivative by t, each of shape (...), and the covariance of the two, shape (..., 2, 2)."""
        rows = np.stack(
            [self.variable.compute_powers(t, self.degree), self.variable.compute_slopes(t, self.degree)], axis=-2
        )
        with np.errstate(over="ignore", invalid="ignore"):
            both = rows @ self.coefficients
            covariance = None
            if self.covariance is not None:
                covariance = rows @ self.covariance @ np.swapaxes(rows, -1, -2)
        return both[..., 0], both[..., 1], covariance


def fit_polynomial(
    variable: Variable, t: FloatArray, values: FloatArray, sigma: FloatArray | None, degree: int
) -> Polynomial:
    """Weighted least squares of one quantity.

    Args:
        variable: of these t; the degree has been checked against it.
        t, values: shape (n,).
        sigma: shape (n,), standard deviations above zero: weights 1/σ² and covariance from them. None: unit weights and
            covariance scaled by χ²/dof, none at dof 0.
        degree: 0 or more.
    """
    # The changes from one of the values: a quantity that does not change has no slope, not one of rounding.
    start = float(values[0])
    weights = np.ones(len(t)) if sigma is None else 1.0 / sigma
    # The largest weight is taken out and put back, so that no square leaves the range of numbers.
    unit = float(np.max(weights))
    powers = variable.compute_powers(t, degree)
    solution, covariance = solve_weighted(powers * (weights / unit)[:, None], (values - start) * (weights / unit))
    residuals = values - start - powers @ solution
    chi2 = float(np.sum(np.square(residuals * weights)))
    covariance = covariance / unit / unit
    gain = float(solution[-1] ** 2 / covariance[-1, -1]) if degree else 0.0
    dof = len(t) - degree - 1
    solution[0] += start
    known: Literal["sigma", "scatter"] | None = "sigma" if sigma is not None else ("scatter" if dof else None)
    kept = {"sigma": covariance, "scatter": covariance * (chi2 / dof if dof else 0.0), None: None}[known]
    test = compare_degrees(gain, 1 if degree else 0, chi2, dof)
    return Polynomial(variable, solution, kept, known, residuals, chi2, dof, test)


def solve_weighted(design: FloatArray, observed: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Least squares of a whitened design (N, m) of full rank: the solution (m,) and its covariance (m, m)."""
    order = np.argsort(-np.max(np.abs(design), axis=1), kind="stable")
    orthogonal, triangle, pivots = qr(design[order], mode="economic", pivoting=True)
    unknowns = design.shape[1]
    inverse, solution = np.zeros((unknowns, unknowns)), np.zeros(unknowns)
    # Of a triangle, elimination finds nothing to do and this is back substitution.
    inverse[pivots] = np.linalg.solve(triangle, np.eye(unknowns))
    solution[pivots] = np.linalg.solve(triangle, orthogonal.T @ observed[order])
    return solution, inverse @ inverse.T
