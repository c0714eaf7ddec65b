"""What each reading does: against another library's influence and robust regression, and by planted mistakes."""

from __future__ import annotations

import numpy as np
import pytest
import statsmodels.api as sm

from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.readings.diagnosis import HUBER, fit_robustly, measure_influence
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.tensor.kind import Kind

SYMMETRIC = Kind("polar", "symmetric")
CRYSTAL = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
TRUTH = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
TEXTS = ["(1 0 0)", "[0 1 0]", "[0 0 1]", "(0 0 1)", "(-2 0 1)", "[1 0 1]", "(1 1 0)", "[0 1 1]", "(1 1 1)"]


def draw(seed: int, sigma: float | None = 0.1, outlier: int | None = None) -> list[Reading]:
    rng = np.random.default_rng(seed)
    readings = []
    for place, text in enumerate(TEXTS):
        vector = CRYSTAL.resolve(read_direction(text))
        value = float(vector @ TRUTH @ vector + 0.1 * rng.normal()) + (2.0 if place == outlier else 0.0)
        readings.append(Reading("along", value, read_direction(text), sigma=sigma))
    return readings


def design_of(readings: list[Reading]) -> np.ndarray:
    """Rows over the free cells 11, 13, 22, 33, from the definition of nᵀAn."""
    rows = []
    for reading in readings:
        x, y, z = CRYSTAL.resolve(reading.direction)  # type: ignore[arg-type]
        rows.append([x * x, 2 * x * z, y * y, z * z])
    return np.array(rows)


def test_leaving_one_out_is_what_another_library_says() -> None:
    readings = draw(1, sigma=None)
    fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
    found = measure_influence(CRYSTAL, SYMMETRIC, readings, fit)
    assert np.all(found.determined)
    design, values = design_of(readings), np.array([reading.value for reading in readings])
    reference = sm.OLS(values, design).fit()
    influence = reference.get_influence()
    # DFBETA of the reference is the estimate less the one without; ours is the other way round.
    assert found.changes == pytest.approx(-influence.dfbeta, abs=1e-8)
    assert fit.readings is not None
    assert fit.readings.leverage == pytest.approx(influence.hat_matrix_diag, abs=1e-9)
    assert fit.readings.standardised == pytest.approx(influence.resid_studentized_internal, abs=1e-8)


def test_a_reading_that_alone_sees_a_cell_is_told() -> None:
    readings = draw(2)[:6]
    fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
    found = measure_influence(CRYSTAL, SYMMETRIC, readings, fit)
    alone = [reading.direction.text for reading, seen in zip(readings, found.determined, strict=True) if not seen]  # type: ignore[union-attr]
    # Of these only [0 1 0] leaves the plane of 11, 13 and 33, so it alone carries 22.
    assert alone == ["[0 1 0]"]
    assert np.isnan(found.changes[1]).all()
    assert found.shares is not None
    assert found.shares[1, 2] == pytest.approx(1.0, abs=1e-6)


def test_shares_add_up_and_follow_from_the_weights_of_least_squares() -> None:
    readings = draw(3)
    fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
    found = measure_influence(CRYSTAL, SYMMETRIC, readings, fit)
    assert found.shares is not None
    assert np.sum(found.shares, axis=0) == pytest.approx(np.ones(4))
    weights = np.linalg.pinv(design_of(readings)) * 0.1
    assert found.shares == pytest.approx((weights**2 / np.sum(weights**2, axis=1)[:, None]).T, abs=1e-6)
    assert found.correlation is not None
    assert np.diag(found.correlation) == pytest.approx(np.ones(4))
    covariance = np.linalg.inv(design_of(readings).T @ design_of(readings))
    deviation = np.sqrt(np.diag(covariance))
    assert found.correlation == pytest.approx(covariance / np.outer(deviation, deviation), abs=1e-9)


def test_the_robust_fit_is_that_of_another_library() -> None:
    readings = draw(4, sigma=None, outlier=7)
    fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
    found = fit_robustly(CRYSTAL, SYMMETRIC, readings, fit)
    values = np.array([reading.value for reading in readings])
    reference = sm.RLM(values, design_of(readings), M=sm.robust.norms.HuberT(t=HUBER)).fit(
        maxiter=500, tol=1e-12, scale_est="mad"
    )
    assert found.settled
    # The reference takes its scale about a median of zero too; both stop at the same weights.
    assert found.fit.free == pytest.approx(reference.params, abs=2e-3)
    assert found.weights[7] == min(found.weights)
    assert found.weights[7] < 0.5


def test_an_outlier_moves_the_robust_fit_less_than_the_plain_one() -> None:
    plain_off, robust_off = [], []
    wanted = np.array([13.2, 1.85, 24.6, 15.9])
    for seed in range(12):
        readings = draw(seed, outlier=6)
        fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
        robust = fit_robustly(CRYSTAL, SYMMETRIC, readings, fit)
        assert fit.free is not None
        assert robust.fit.free is not None
        plain_off.append(np.linalg.norm(fit.free - wanted))
        robust_off.append(np.linalg.norm(robust.fit.free - wanted))
        assert robust.weights[6] < 0.5
    assert np.mean(robust_off) < 0.6 * np.mean(plain_off)


def test_without_outliers_the_weights_stay_near_one() -> None:
    readings = draw(9)
    robust = fit_robustly(CRYSTAL, SYMMETRIC, readings, fit_readings(CRYSTAL, SYMMETRIC, readings))
    assert np.mean(robust.weights) > 0.85


def test_an_exact_fit_has_nothing_to_hold_back() -> None:
    readings = [draw(1)[place] for place in (0, 1, 2, 5)]
    fit = fit_readings(CRYSTAL, SYMMETRIC, readings)
    assert fit.dof == 0
    with pytest.raises(InputError):
        fit_robustly(CRYSTAL, SYMMETRIC, readings, fit)
    with pytest.raises(InputError):
        measure_influence(CRYSTAL, SYMMETRIC, readings[:2], fit_readings(CRYSTAL, SYMMETRIC, readings[:2]))
