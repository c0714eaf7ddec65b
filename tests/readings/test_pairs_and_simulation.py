"""Equivalent pairs by the normal distribution, and axis errors where the formula holds and where it does not."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.readings.pairs import compare_pairs
from app.readings.reading import Reading
from app.readings.simulation import check_axes, describe_axes_check
from app.tensor.estimate import build_estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.principal import find_principal

SYMMETRIC = Kind("polar", "symmetric")
TETRAGONAL = build_crystal([5, 5, 7, 90, 90, 90], "4/mmm")
MATRIX = np.diag([10.0, 10.0, 14.0])


def along(text: str, value: float, **more: object) -> Reading:
    return Reading("along", value, read_direction(text), **more)  # type: ignore[arg-type]


def test_a_pair_is_compared_by_the_normal_distribution() -> None:
    readings = [along("[1 0 0]", 10.0, sigma=0.1), along("[0 1 0]", 10.5, sigma=0.2), along("[0 0 1]", 14.0, sigma=0.1)]
    (pair,) = compare_pairs(TETRAGONAL, SYMMETRIC, readings, MATRIX)
    assert (pair.first, pair.second) == (0, 1)
    assert pair.difference == pytest.approx(-0.5)
    assert pair.sigma == pytest.approx(np.hypot(0.1, 0.2))
    assert pair.p_value == pytest.approx(2 * norm.sf(0.5 / np.hypot(0.1, 0.2)))


def test_repeats_along_one_line_are_no_pair_and_a_shared_batch_does_not_widen_one() -> None:
    readings = [along("[1 0 0]", 10.0, sigma=0.1), along("[-1 0 0]", 10.2, sigma=0.1)]
    assert compare_pairs(TETRAGONAL, SYMMETRIC, readings, MATRIX) == ()
    shared = [
        along("[1 0 0]", 10.0, sigma=0.1, batch="furnace 2"),
        along("[0 1 0]", 10.2, sigma=0.1, batch="furnace 2"),
    ]
    (pair,) = compare_pairs(TETRAGONAL, SYMMETRIC, shared, MATRIX, batches={"furnace 2": 0.05})
    # Both are wrong by the same part, and both predictions are equal: the difference keeps its own σ.
    assert pair.sigma == pytest.approx(0.1 * np.sqrt(2))


def find(free: list[float], sigma: float):  # type: ignore[no-untyped-def]
    crystal = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
    form = build_form(crystal, SYMMETRIC)
    covariance = sigma**2 * np.eye(4)
    estimate = build_estimate(form, np.array(free), covariance, crystal.frame_sentence, None)
    return form, np.array(free), covariance, find_principal(estimate)


def test_well_parted_values_have_errors_that_hold() -> None:
    form, free, covariance, principal = find([13.2, 1.85, 24.6, 15.9], 0.08)
    (check,) = check_axes(form, free, covariance, principal)
    assert check.trusted
    assert check.simulated == pytest.approx(check.linear, rel=0.1)
    assert "agree" in describe_axes_check(form, free, covariance, principal)


def test_nearly_equal_values_have_errors_that_do_not_hold() -> None:
    # Values in the plane that differ by 3 to 4 of their standard deviations.
    form, free, covariance, principal = find([14.0, 0.12, 24.6, 14.3], 0.1)
    checks = check_axes(form, free, covariance, principal)
    assert all(not check.trusted for check in checks)
    if checks:
        assert "Do not trust" in describe_axes_check(form, free, covariance, principal)
