"""Fits whose readings differ in weight by twelve orders, or hardly differ in direction at all."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from mpmath import mpf, sqrt

from tests.hard import reference as exact
from tests.hard.conftest import Ask

CELL = [8.141, 12.79, 7.157, 94.225, 116.597, 87.772]
TRICLINIC = {"cell": CELL, "group": "-1"}
TRUTH = exact.exact([[4.1, 0.3, -0.7], [0.3, 2.2, 0.5], [-0.7, 0.5, 3.6]])
ROWS = [(1, 0, 0), (0, 1, 0), (0, 0, 1), (1, 1, 0), (0, 1, 1), (1, 0, 1), (1, -1, 1), (2, 1, -1)]


def take(
    vectors: list[Any], sigmas: list[float], noise: float = 0.0
) -> tuple[list[dict[str, Any]], exact.matrix, exact.matrix]:
    """Readings along vectors, the design and the observed values; noise is a fixed pattern of so many σ."""
    readings, rows, observed = [], [], []
    for number, (vector, sigma) in enumerate(zip(vectors, sigmas, strict=True)):
        n = exact.unit(vector)
        value = float(exact.value(TRUTH, n) + mpf(noise * sigma) * ((-1) ** number) * (1 + number % 3))
        readings.append({"kind": "along", "direction": list(map(float, vector)), "value": value, "sigma": sigma})
        rows.append(exact.full_row(n))
        observed.append(mpf(value))
    return readings, exact.matrix(rows), exact.matrix(observed)


@pytest.mark.parametrize("orders", [0, 3, 6, 9, 12])
@pytest.mark.parametrize("heavy_first", [True, False])
def test_weights_over_twelve_orders(orders: int, heavy_first: bool, ask: Ask) -> None:
    sigmas = [10.0 ** (-orders * number / (len(ROWS) - 1)) for number in range(len(ROWS))]
    sigmas = sigmas[::-1] if heavy_first else sigmas
    readings, design, observed = take([list(row) for row in ROWS], sigmas, noise=0.3)
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": readings})
    wanted, covariance = exact.least_squares(design, observed, sigmas)
    if not answer["determined"]:
        # What the light readings tell lies below a part of 1e-6 of what the heavy ones do: then it must say so.
        assert orders >= 6
        assert answer["values"] is None and answer["undetermined"]
        return
    for k in range(6):
        sigma = sqrt(covariance[k, k])
        # Right to the digits of the readings that decide this cell, and far within its own uncertainty.
        assert abs(mpf(answer["values"][k]) - wanted[k]) < 1e-6 * sigma + 1e-13
        assert abs(mpf(float(np.sqrt(answer["covariance"][k][k]))) / sigma - 1) < 1e-6


@pytest.mark.parametrize("factor", [1e-30, 1e-12, 1e12, 1e30])
def test_a_common_factor_of_all_sigmas(factor: float, ask: Ask) -> None:
    # Values stay; the covariance goes with the square.
    readings, design, observed = take([list(row) for row in ROWS], [0.01] * 8, noise=0.5)
    plain = [{**reading, "sigma": 0.01 * factor} for reading in readings]
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": plain})
    wanted, covariance = exact.least_squares(design, observed, [0.01] * 8)
    assert exact.difference(answer["values"], list(wanted)) < 1e-13
    for k in range(6):
        assert answer["covariance"][k][k] / factor**2 == pytest.approx(float(covariance[k, k]), rel=1e-10)


@pytest.mark.parametrize("apart", [1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6, 1e-7, 1e-8, 1e-10, 0.0])
def test_two_nearly_equal_readings_with_tiny_sigma(apart: float, ask: Ask) -> None:
    vectors = [[1, 0, 0], [1, apart, 0], [0, 1, 0], [0, 0, 1], [0, 1, 1], [1, 0, 1]]
    sigmas = [1e-9, 1e-9, 0.01, 0.01, 0.01, 0.01]
    readings, design, observed = take(vectors, sigmas)
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": readings})
    if apart <= 1e-7:
        assert not answer["determined"]
        assert answer["rank"] == 5 and len(answer["undetermined"]) == 1
        # What is unseen is the cell 12 almost alone: the two directions tell it only by their difference.
        assert abs(answer["undetermined"][0]["combination"][1]) == pytest.approx(np.sqrt(0.5), abs=1e-4)
        return
    if not answer["determined"]:
        # The whitened design of the other readings is 1e-7 of these: a part of 1e-6 is where the limit is promised.
        return
    wanted, covariance = exact.least_squares(design, observed, sigmas)
    for k in range(6):
        sigma = sqrt(covariance[k, k])
        assert abs(mpf(answer["values"][k]) - wanted[k]) < 0.01 * sigma + 40 * exact.EPS / apart
        assert abs(mpf(float(np.sqrt(answer["covariance"][k][k]))) / sigma - 1) < 1e-4


@pytest.mark.parametrize("apart", [1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6, 1e-8, 1e-10, 0.0])
def test_two_nearly_equal_directions_of_even_weight(apart: float, ask: Ask) -> None:
    vectors = [[1, 0, 0], [1, apart, 0], [0, 1, 0], [0, 0, 1], [0, 1, 1], [1, 0, 1]]
    readings, design, observed = take(vectors, [0.01] * 6)
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": readings})
    # The smallest singular value is near apart/√2·…: determined above 1e-6 of the largest, refused well below it.
    if apart >= 1e-5:
        assert answer["determined"]
        wanted, covariance = exact.least_squares(design, observed, [0.01] * 6)
        assert exact.difference(answer["values"], list(wanted)) < 200 * exact.EPS / apart
        assert answer["covariance"][1][1] == pytest.approx(float(covariance[1, 1]), rel=1e-9 / apart)
    elif apart <= 1e-8:
        assert not answer["determined"] and answer["values"] is None
        assert answer["undetermined"][0]["suggest"]


@pytest.mark.parametrize("scale", [1e-30, 1e30])
def test_values_of_any_size(scale: float, ask: Ask) -> None:
    readings, design, observed = take([list(row) for row in ROWS], [0.01] * 8, noise=0.5)
    many = [{**reading, "value": reading["value"] * scale, "sigma": reading["sigma"] * scale} for reading in readings]
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": many})
    wanted, _ = exact.least_squares(design, observed, [0.01] * 8)
    assert np.array(answer["values"]) / scale == pytest.approx([float(value) for value in wanted], rel=1e-12)
    residual = observed - design * wanted
    chi2 = sum((residual[k] / mpf(0.01)) ** 2 for k in range(8))
    assert answer["chi2"] == pytest.approx(float(chi2), rel=1e-9)


def test_a_reading_without_doubt_beside_doubtful_ones(ask: Ask) -> None:
    # σ = 1e-12 on one, 1 on the others: the first must be met to its own digits.
    sigmas = [1e-12] + [1.0] * 7
    readings, design, observed = take([list(row) for row in ROWS], sigmas, noise=0.5)
    answer = ask("fit", {"crystal": TRICLINIC, "tensor": {}, "readings": readings})
    if answer["determined"]:
        wanted, _ = exact.least_squares(design, observed, sigmas)
        assert exact.difference(answer["values"], list(wanted)) < 1e-6
        assert abs(answer["readings"][0]["residual"]) < 1e-12
    else:
        assert answer["undetermined"]
