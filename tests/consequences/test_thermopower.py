"""Thermoelectric voltages: against the fields of a bar solved for, and printed values of a metal."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.consequences.thermopower import compute_bar_voltage, compute_peltier
from app.errors import InputError
from app.tensor.estimate import Estimate

vectors = st.lists(st.integers(-9, 9), min_size=3, max_size=3).filter(any)


def make_conductivity(seed: int) -> np.ndarray:
    root = np.random.default_rng(seed).normal(size=(3, 3))
    return root @ root.T + np.eye(3)


@given(st.integers(0, 10_000), vectors, vectors)
@settings(max_examples=60, deadline=None)
def test_a_bar_whose_heat_runs_along_it(seed: int, first: list[int], second: list[int]) -> None:
    thermopower = np.random.default_rng(seed + 1).normal(size=(3, 3))
    conductivity = make_conductivity(seed)
    along = np.array(first) / np.linalg.norm(first)
    edge = np.array(second, dtype=float)
    across = edge - along * (along @ edge)
    if np.linalg.norm(across) < 1e-2:
        return
    across /= np.linalg.norm(across)
    third = np.cross(along, across)
    # Unknown gradient g: no heat leaves the bar sideways, and its part along the bar is one.
    conditions = np.array([across @ conductivity, third @ conductivity, along])
    gradient = np.linalg.solve(conditions, [0.0, 0.0, 1.0])
    field = thermopower @ gradient
    found = compute_bar_voltage(Estimate(thermopower, None, ""), Estimate(conductivity, None, ""), along, edge)
    assert found.along == pytest.approx(along @ field, abs=1e-9 * np.linalg.norm(field))
    assert found.at_edge == pytest.approx(across @ field, abs=1e-9 * np.linalg.norm(field))
    assert found.across == pytest.approx(np.hypot(across @ field, third @ field), abs=1e-9 * np.linalg.norm(field))
    cosine = float(along @ gradient / np.linalg.norm(gradient))
    assert found.leans == pytest.approx(np.rad2deg(np.arccos(min(cosine, 1.0))), abs=1e-5)


def test_a_tilted_bar_of_bismuth_like_numbers() -> None:
    # Of a uniaxial crystal with the bar tilted by θ off the axis: S∥ cos²θ κ⊥ + S⊥ sin²θ κ∥ over κ⊥ cos²θ + κ∥ sin²θ,
    # derived by hand from the formula of the module's source. Numbers of the size of bismuth's, invented.
    parallel, across, hot, cold = -103.0, -51.5, 5.3, 9.2
    for theta in np.deg2rad([0.0, 20.0, 45.0, 70.0, 90.0]):
        bar = np.array([np.sin(theta), 0.0, np.cos(theta)])
        found = compute_bar_voltage(
            Estimate(np.diag([across, across, parallel]), None, ""),
            Estimate(np.diag([cold, cold, hot]), None, ""),
            bar,
            np.array([0.0, 1.0, 0.0]),
        )
        cos2, sin2 = np.cos(theta) ** 2, np.sin(theta) ** 2
        assert found.along == pytest.approx((parallel * cos2 * cold + across * sin2 * hot) / (cold * cos2 + hot * sin2))
        transverse = np.sin(theta) * np.cos(theta) * (across * hot - parallel * cold) / (cold * cos2 + hot * sin2)
        # Along x of the tilt: cos θ S⊥ g1 − sin θ S∥ g3.
        assert found.across == pytest.approx(abs(transverse), abs=1e-9)
        assert found.at_edge == pytest.approx(0.0, abs=1e-9)


def test_an_isotropic_conductor_has_the_plate_value() -> None:
    thermopower = np.array([[3.0, 1.0, 0.0], [-1.0, 2.0, 0.5], [0.0, 0.0, 4.0]])
    along = np.array([1.0, 2.0, 2.0]) / 3.0
    found = compute_bar_voltage(
        Estimate(thermopower, None, ""), Estimate(7.0 * np.eye(3), None, ""), along, np.array([0.0, 0.0, 1.0])
    )
    assert found.along == pytest.approx(along @ thermopower @ along)
    assert found.leans == pytest.approx(0.0, abs=1e-6)


def test_sigma_by_simulation() -> None:
    random = np.random.default_rng(8)
    thermopower = np.array([[30.0, 4.0, 0.0], [-2.0, 22.0, 1.0], [0.0, 3.0, 45.0]])
    conductivity = np.diag([4.0, 6.0, 9.0]) + 0.5
    along, edge = np.array([2.0, 1.0, 2.0]) / 3.0, np.array([0.0, 1.0, 0.0])
    of_s = 0.09 * np.eye(9)
    patterns = []
    for row, column in [(0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)]:
        pattern = np.zeros((3, 3))
        pattern[row, column] = pattern[column, row] = 1.0
        patterns.append(pattern)
    of_kappa = sum(0.05**2 * np.outer(pattern.ravel(), pattern.ravel()) for pattern in patterns)
    draws = []
    for _ in range(4000):
        s = thermopower + random.normal(scale=0.3, size=(3, 3))
        kappa = conductivity + sum(random.normal(scale=0.05) * pattern for pattern in patterns)
        found = compute_bar_voltage(Estimate(s, None, ""), Estimate(kappa, None, ""), along, edge)
        draws.append((found.along, found.across, found.at_edge))
    told = compute_bar_voltage(Estimate(thermopower, of_s, ""), Estimate(conductivity, of_kappa, ""), along, edge)
    scatter = np.std(draws, axis=0)
    assert [told.along_sigma, told.across_sigma, told.at_edge_sigma] == pytest.approx(scatter.tolist(), rel=0.05)


def test_peltier_is_the_transpose_at_the_absolute_temperature() -> None:
    # Copper's Peltier coefficient at 300 K: S = 1.83 µV/K gives 0.55 mV (common practice).
    assert compute_peltier(Estimate(1.83e-6 * np.eye(3), None, ""), 300.0).matrix[0, 0] == pytest.approx(0.549e-3)
    random = np.random.default_rng(2)
    root = random.normal(size=(9, 9))
    thermopower = Estimate(random.normal(size=(3, 3)), root @ root.T, "crystal", "V/K")
    found = compute_peltier(thermopower, 250.0, "V")
    assert np.allclose(found.matrix, 250.0 * thermopower.matrix.T)
    assert found.sigma_matrix is not None
    assert thermopower.sigma_matrix is not None
    assert np.allclose(found.sigma_matrix, 250.0 * thermopower.sigma_matrix.T)
    with pytest.raises(InputError):
        compute_peltier(thermopower, 0.0)


def test_refusals() -> None:
    good, n = Estimate(np.eye(3), None, ""), np.array([0.0, 0.0, 1.0])
    with pytest.raises(InputError, match="positive"):
        compute_bar_voltage(good, Estimate(np.diag([1.0, -1.0, 2.0]), None, ""), n, np.array([1.0, 0.0, 0.0]))
    skew = Estimate(np.eye(3) + np.array([[0, 1, 0], [0, 0, 0], [0, 0, 0]]), None, "")
    with pytest.raises(InputError, match="symmetric"):
        compute_bar_voltage(good, skew, n, np.array([1.0, 0.0, 0.0]))
    with pytest.raises(InputError) as caught:
        compute_bar_voltage(good, good, n, n)
    assert caught.value.field == "edge"
