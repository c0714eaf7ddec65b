"""Weighted polynomials against numpy's own, and against polynomials whose coefficients are known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from app.errors import InputError
from app.series.polynomial import Variable, check_degree, fit_polynomial, scale_variable

RANDOM = np.random.default_rng(20260601)


def in_powers_of_t(variable: Variable, coefficients: np.ndarray) -> np.ndarray:
    """Coefficients of 1, t, t², … by numpy's own substitution."""
    inner = np.polynomial.Polynomial([-variable.centre / variable.half, 1.0 / variable.half])
    whole = np.polynomial.Polynomial([0.0])
    for power, value in enumerate(coefficients):
        whole = whole + value * inner**power
    return np.pad(whole.coef, (0, len(coefficients) - len(whole.coef)))


@pytest.mark.parametrize("base", [1.0, 0.1])
def test_wampler_polynomials(base: float) -> None:
    # NIST StRD, Wampler1 and Wampler2 (from memory): x = 0 … 20, y = Σ base^k x^k for k = 0 … 5 exactly.
    t = np.arange(21.0)
    wanted = base ** np.arange(6)
    y = np.polynomial.polynomial.polyval(t, wanted)
    fitted = fit_polynomial(scale_variable(t), t, y, None, 5)
    assert in_powers_of_t(fitted.variable, fitted.coefficients) == pytest.approx(wanted, rel=1e-8)
    assert fitted.dof == 15


@pytest.mark.parametrize("degree", [0, 1, 3, 5])
@pytest.mark.parametrize("weighted", [True, False])
def test_values_and_covariances_are_those_of_polyfit(degree: int, weighted: bool) -> None:
    t = np.sort(RANDOM.uniform(80.0, 900.0, 14))
    y = 5.1 + 3e-5 * t + RANDOM.normal(0, 1e-4, 14)
    sigma = RANDOM.uniform(0.5e-4, 3e-4, 14) if weighted else None
    variable = scale_variable(t)
    fitted = fit_polynomial(variable, t, y, sigma, degree)
    # numpy.polyfit in the same centred variable is well conditioned; highest power first there.
    u = (t - variable.centre) / variable.half
    weights = None if sigma is None else 1.0 / sigma
    wanted, covariance = np.polyfit(u, y, degree, w=weights, cov="unscaled" if weighted else True)
    assert fitted.coefficients == pytest.approx(wanted[::-1], rel=1e-9, abs=1e-13)
    assert fitted.covariance == pytest.approx(covariance[::-1, ::-1], rel=1e-8, abs=1e-24)
    residuals = y - np.polyval(wanted, u)
    chi2 = float(np.sum((residuals / (1.0 if sigma is None else sigma)) ** 2))
    assert fitted.chi2 == pytest.approx(chi2, rel=1e-8)
    assert fitted.residuals == pytest.approx(residuals, abs=1e-13)
    assert fitted.dof == 14 - degree - 1
    if weighted:
        assert fitted.p_value == pytest.approx(stats.chi2.sf(chi2, fitted.dof), rel=1e-6)
    else:
        assert fitted.p_value is None
    if degree:
        lower = np.polyfit(u, y, degree - 1, w=weights)
        lower_chi2 = float(np.sum(((y - np.polyval(lower, u)) / (1.0 if sigma is None else sigma)) ** 2))
        f = (lower_chi2 - chi2) / (chi2 / fitted.dof)
        assert fitted.test is not None
        assert fitted.test.value == pytest.approx(f, rel=1e-6)
        assert fitted.test.p_value == pytest.approx(stats.f.sf(f, 1, fitted.dof), rel=1e-5)
    else:
        assert fitted.test is None


def test_slopes_and_their_covariance_are_those_of_differences() -> None:
    t = np.linspace(100.0, 700.0, 9)
    y = 6.0 + 1e-5 * t + 2e-8 * t**2 + RANDOM.normal(0, 1e-5, 9)
    fitted = fit_polynomial(scale_variable(t), t, y, np.full(9, 1e-5), 3)
    at, step = np.array([100.0, 333.3, 800.0]), 0.01
    value, slope, covariance = fitted.evaluate(at)
    later, earlier = fitted.evaluate(at + step)[0], fitted.evaluate(at - step)[0]
    assert slope == pytest.approx((later - earlier) / (2 * step), rel=1e-7)
    # The covariance by simulation: many series with the same errors.
    drawn = y + RANDOM.normal(0, 1e-5, (4000, 9))
    sampled = [fit_polynomial(fitted.variable, t, row, np.full(9, 1e-5), 3).evaluate(at)[:2] for row in drawn]
    values, slopes = np.array([s[0] for s in sampled]), np.array([s[1] for s in sampled])
    assert covariance is not None
    for place in range(3):
        simulated = np.cov(values[:, place], slopes[:, place])
        scale = np.sqrt(np.outer(np.diag(simulated), np.diag(simulated)))
        # 4000 draws: the standard deviation of a correlation is at most 1/√4000, of a variance √(2/4000).
        assert np.max(np.abs(covariance[place] - simulated) / scale) < 5 * np.sqrt(2 / 4000)
    assert value == pytest.approx(np.mean(values, axis=0), abs=1e-5)


def test_weights_of_very_different_size_keep_their_accuracy() -> None:
    # Two exact points and two that say nothing: the line is that of the exact ones.
    t = np.array([0.0, 1.0, 2.0, 3.0])
    fitted = fit_polynomial(
        scale_variable(t), t, np.array([1.0, 9.0, 3.0, -7.0]), np.array([1e-20, 1e20, 1e-20, 1e20]), 1
    )
    assert in_powers_of_t(fitted.variable, fitted.coefficients) == pytest.approx([1.0, 1.0], rel=1e-12)


@pytest.mark.parametrize("unit", [1e-50, 1e-9, 1.0, 1e15, 1e50])
def test_the_unit_of_t_does_not_matter(unit: float) -> None:
    t = np.array([1.0, 2.0, 4.0, 7.0, 8.0])
    y = 1.0 - 2.0 * t + 0.5 * t**2
    variable = scale_variable(t * unit)
    _, slope, _ = fit_polynomial(variable, t * unit, y, None, 2).evaluate(np.array([3.0 * unit]))
    # d/dt of 1 − 2t + t²/2 at t = 3 is 1.
    assert slope[0] * unit == pytest.approx(1.0, rel=1e-10)


def test_what_does_not_change_has_no_slope_at_all() -> None:
    t = np.array([77.0, 120.0, 200.0, 293.0])
    fitted = fit_polynomial(scale_variable(t), t, np.full(4, 5.1686), None, 2)
    assert np.all(fitted.coefficients[1:] == 0.0)
    assert fitted.test is None


def test_degrees_that_the_places_cannot_carry() -> None:
    variable = scale_variable(np.array([1.0, 1.0, 2.0, 2.0, 3.0]))
    check_degree(variable, 2)
    with pytest.raises(InputError) as caught:
        check_degree(variable, 3)
    assert caught.value.field == "degree"
    assert "at most 2" in str(caught.value.hint)
    close = scale_variable(np.array([0.0, 1e-12, 1.0]))
    check_degree(close, 1)
    with pytest.raises(InputError, match="rounding") as caught:
        check_degree(close, 2)
    assert caught.value.field == "degree"
    with pytest.raises(InputError) as caught:
        check_degree(scale_variable(np.arange(30.0)), 9)
    assert caught.value.field == "degree"


@pytest.mark.parametrize("bad", [np.nan, np.inf, 1e61])
def test_a_variable_out_of_range_names_its_state(bad: float) -> None:
    with pytest.raises(InputError) as caught:
        scale_variable(np.array([1.0, bad]))
    assert caught.value.field == "[1].t"
