"""Torque, easy direction and magnetisation: against energies sampled around a circle, and printed numbers."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.constants import mu_0

from app.consequences.magnetism import (
    MAGNETIC_CONSTANT,
    find_easy_direction,
    magnetise,
    turn_in_plane,
)
from app.errors import InputError
from app.tensor.estimate import Estimate

cells = st.lists(st.floats(-1.0, 1.0).map(lambda x: round(x, 6)), min_size=6, max_size=6)
vectors = st.lists(st.integers(-9, 9), min_size=3, max_size=3).filter(any)


def build(values: list[float]) -> Estimate:
    a, b, c, d, e, f = values
    return Estimate(1e-6 * np.array([[a, b, c], [b, d, e], [c, e, f]]), None, "crystal")


def test_the_magnetic_constant_is_the_one_of_scipy() -> None:
    # scipy.constants takes CODATA's table; 4π·10⁻⁷ to nine digits whichever edition it holds.
    assert pytest.approx(mu_0, rel=1e-9) == MAGNETIC_CONSTANT


@given(cells, vectors, vectors)
@settings(max_examples=60, deadline=None)
def test_the_amplitude_is_the_largest_torque_of_a_turning_field(
    values: list[float], first: list[int], second: list[int]
) -> None:
    normal = np.array(first) / np.linalg.norm(first)
    edge = np.array(second) / np.linalg.norm(second)
    if np.linalg.norm(np.cross(normal, edge)) < 1e-3:
        return
    estimate = build(values)
    found = turn_in_plane(estimate, normal, edge)
    u = edge - normal * (normal @ edge)
    u /= np.linalg.norm(u)
    v = np.cross(normal, u)
    angles = np.linspace(0.0, np.pi, 7201)
    fields = np.outer(np.cos(angles), u) + np.outer(np.sin(angles), v)
    torques = np.cross(fields @ estimate.matrix, fields) @ normal
    # Between two of the sampled angles a sine may rise by (π/7200)²/2·4 of itself.
    assert found.amplitude == pytest.approx(np.max(np.abs(torques)), rel=1e-6, abs=1e-16)
    values_around = np.einsum("ij,jk,ik->i", fields, estimate.matrix, fields)
    if found.easy is None:
        assert np.ptp(values_around) < 1e-16
        return
    assert abs(found.easy @ normal) < 1e-12
    assert found.easy @ estimate.matrix @ found.easy == pytest.approx(np.max(values_around), abs=1e-6 * found.amplitude)
    assert found.azimuth is not None
    turned = math.cos(math.radians(found.azimuth)) * u + math.sin(math.radians(found.azimuth)) * v
    assert np.allclose(turned, found.easy)


def test_torque_is_minus_the_slope_of_the_energy() -> None:
    estimate = build([0.8, 0.1, -0.3, -0.4, 0.2, 0.6])
    normal, u, v = np.eye(3)[[2, 0, 1]]
    step = 1e-5
    for angle in (0.2, 1.1, 2.5):
        field = math.cos(angle) * u + math.sin(angle) * v
        energies = []
        for near in (angle - step, angle + step):
            direction = math.cos(near) * u + math.sin(near) * v
            energies.append(-0.5 * magnetise(estimate, direction).along)
        # The torque on the crystal about w turns it, not the field: the energy's slope by the field's angle.
        slope = (energies[1] - energies[0]) / (2 * step)
        assert magnetise(estimate, field).torque @ normal == pytest.approx(slope, rel=1e-6)


def test_calcite_turns_its_axis_across_the_field() -> None:
    # Calcite, volume susceptibilities in SI: along the axis −13.8·10⁻⁶, across it −12.4·10⁻⁶ (J. F. Nye, Physical
    # Properties of Crystals, table of susceptibilities, from memory; rounded). The less negative one is the easy one.
    estimate = Estimate(np.diag([-12.4e-6, -12.4e-6, -13.8e-6]), None, "crystal")
    x1, x3 = np.eye(3)[[0, 2]]
    found = turn_in_plane(estimate, np.array([0.0, 1.0, 0.0]), x3)
    assert found.amplitude == pytest.approx(0.7e-6)
    assert found.easy is not None
    assert abs(found.easy @ x1) == pytest.approx(1.0)
    principal, one = find_easy_direction(estimate)
    assert not one
    assert principal.values[0] == pytest.approx(-12.4e-6)
    across = turn_in_plane(estimate, x3, x1)
    assert across.amplitude == 0.0
    assert across.easy is None


def test_sigma_of_the_amplitude_by_simulation() -> None:
    random = np.random.default_rng(4)
    base = np.array([[3.0, 0.4, -0.2], [0.4, 1.0, 0.3], [-0.2, 0.3, 2.0]]) * 1e-6
    deviation = 0.02e-6
    draws = []
    covariance = np.zeros((9, 9))
    places = [(0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)]
    for row, column in places:
        pattern = np.zeros((3, 3))
        pattern[row, column] = pattern[column, row] = 1.0
        covariance += deviation**2 * np.outer(pattern.ravel(), pattern.ravel())
    normal, edge = np.array([1.0, 2.0, 2.0]) / 3.0, np.array([0.0, 1.0, 0.0])
    for noise in random.normal(scale=deviation, size=(4000, 6)):
        matrix = base.copy()
        for (row, column), value in zip(places, noise, strict=True):
            matrix[row, column] += value
            matrix[column, row] = matrix[row, column]
        draws.append(turn_in_plane(Estimate(matrix, None, ""), normal, edge).amplitude)
    found = turn_in_plane(Estimate(base, covariance, ""), normal, edge)
    # The scatter of 4,000 draws is known to 1.1 %.
    assert found.sigma == pytest.approx(np.std(draws), rel=0.04)


def test_refusals() -> None:
    with pytest.raises(InputError, match="own field"):
        magnetise(Estimate(np.diag([0.5, 0.2, 0.1]), None, ""), np.eye(3)[0])
    with pytest.raises(InputError, match="symmetric"):
        magnetise(Estimate(np.array([[1, 2, 0], [0, 1, 0], [0, 0, 1]]) * 1e-6, None, ""), np.eye(3)[0])
    with pytest.raises(InputError) as caught:
        turn_in_plane(build([1, 0, 0, 2, 0, 3]), np.eye(3)[0], np.eye(3)[0])
    assert caught.value.field == "edge"


def test_no_magnetisation_has_no_angle() -> None:
    assert magnetise(Estimate(np.zeros((3, 3)), None, ""), np.eye(3)[0]).angle is None
