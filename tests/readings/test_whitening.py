from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.readings.prediction import predict, second_order_factors, turn_derivatives
from app.readings.reading_set import ReadingSet, resolve_readings
from app.readings.whitening import build_whitening
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY
from tests.readings.builders import TRICLINIC, build_reading, random_units


def make_set(seed: int, count: int = 40) -> ReadingSet:
    rng = np.random.default_rng(seed)
    kinds = ("along", "across", "difference", "rod", "sheet", "along", "mean")
    readings = []
    spread = {f"bar {number}": float(rng.uniform(0, 3)) for number in range(9)}
    for index in range(count):
        n, m = random_units(rng, 2)
        bar = f"bar {rng.integers(9)}" if index % 4 else None
        readings.append(
            build_reading(
                kinds[index % len(kinds)],
                1.0,
                n,
                m,
                sigma=float(rng.uniform(0.01, 1)),
                direction_sigma=spread[bar] if bar else float(rng.uniform(0, 2)),
                bar=bar,
                batch=("a", "b", None)[index % 3],
            )
        )
    return resolve_readings(TRICLINIC, Kind(), readings, batches={"a": 0.02, "b": 0.3}, pose=IDENTITY)


def dense_covariance(readings: ReadingSet, matrix: np.ndarray, predicted: np.ndarray) -> np.ndarray:
    """V written out entry by entry, as the interface states it."""
    assert readings.sigma is not None
    covariance = np.diag(readings.sigma**2)
    turns, second = turn_derivatives(readings, matrix), second_order_factors(readings, matrix)
    for i in range(len(readings)):
        for j in range(len(readings)):
            if readings.bars[i] == readings.bars[j]:
                s = readings.turn_sigma[i]
                covariance[i, j] += s**2 * turns[i] @ turns[j] + s**4 * second[i] @ second[j]
            if readings.batches[i] == readings.batches[j] >= 0:
                r = readings.batch_sigma[readings.batches[i]]
                covariance[i, j] += r**2 * predicted[i] * predicted[j]
    return covariance


@pytest.mark.parametrize("seed", range(8))
def test_whitening_agrees_with_the_dense_covariance(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    root = rng.normal(size=(3, 3))
    matrix = root @ root.T + np.eye(3)
    readings = make_set(seed)
    predicted = predict(readings, matrix).values
    whitening = build_whitening(readings, matrix, predicted)
    covariance = dense_covariance(readings, matrix, predicted)
    size = len(readings)
    root_inverse = whitening.whiten(np.eye(size))
    assert root_inverse @ covariance @ root_inverse.T == pytest.approx(np.eye(size), abs=1e-9)
    inverse = whitening.whiten_transposed(root_inverse)
    assert inverse == pytest.approx(np.linalg.inv(covariance), rel=1e-7, abs=1e-7)
    assert whitening.variances == pytest.approx(np.diag(covariance))
    column = rng.normal(size=size)
    assert whitening.whiten(column) == pytest.approx(root_inverse @ column)


def test_second_order_covariance_is_that_of_quadratic_forms() -> None:
    # Reference: 2 tr(B_i B_j) with B written out by the Hessian of nᵀAn under a turn, by finite differences.
    rng = np.random.default_rng(5)
    root = rng.normal(size=(3, 3))
    matrix = root @ root.T
    ns = random_units(rng, 3)
    readings = resolve_readings(TRICLINIC, Kind(), [build_reading("along", 1.0, n, n) for n in ns], pose=IDENTITY)
    step = 1e-3

    def hessian(n: np.ndarray) -> np.ndarray:
        result = np.zeros((3, 3))
        for i in range(3):
            for j in range(3):
                total = 0.0
                for a in (1, -1):
                    for b in (1, -1):
                        turned = Rotation.from_rotvec(step * (a * np.eye(3)[i] + b * np.eye(3)[j])).as_matrix() @ n
                        total += a * b * turned @ matrix @ turned
                result[i, j] = total / (4 * step**2)
        # A turn about n itself moves nothing: the form is that of the turns across n.
        across = np.eye(3) - np.outer(n, n)
        return across @ result @ across / 2

    factors = second_order_factors(readings, matrix)
    for i in range(3):
        for j in range(3):
            expected = 2 * np.trace(hessian(ns[i]) @ hessian(ns[j]))
            assert factors[i] @ factors[j] == pytest.approx(expected, rel=2e-5, abs=2e-5)
