"""Rotatory power: printed rotations of quartz, and the two hands."""

from __future__ import annotations

import numpy as np
import pytest

from app.consequences.gyration import compute_rotation, describe_hand
from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.tensor.estimate import Estimate


def test_quartz_at_510_nm() -> None:
    # g11 = ∓5.82·10⁻⁵ and g33 = ±12.96·10⁻⁵ at 510 nm (J. F. Nye, Physical Properties of Crystals, ch. XIV, from
    # memory); index 1.5482 (from memory). Rotation along the axis: 29.73°/mm at 508.6 nm, handbook tables, from
    # memory; it falls by some 0.13°/mm per nm there, so 29.5 ± 0.2 at 510 nm.
    gyration = Estimate(np.diag([-5.82e-5, -5.82e-5, 12.96e-5]), None, "")
    along = compute_rotation(gyration, np.array([0.0, 0.0, 1.0]), 510.0, 1.5482)
    assert along.power == pytest.approx(29.5, abs=0.2)
    across = compute_rotation(gyration, np.array([1.0, 0.0, 0.0]), 510.0, 1.5482)
    assert across.power < 0.0
    # The direction without rotation lies where tan²θ = −g33/g11: 56.2° off the axis ("about 56°", same source).
    theta = np.arctan(np.sqrt(12.96 / 5.82))
    assert np.rad2deg(theta) == pytest.approx(56.2, abs=0.1)
    zero = compute_rotation(gyration, np.array([np.sin(theta), 0.0, np.cos(theta)]), 510.0, 1.5482)
    assert zero.power == pytest.approx(0.0, abs=1e-9)


def test_the_other_hand_turns_the_other_way() -> None:
    random = np.random.default_rng(0)
    matrix = random.normal(size=(3, 3)) * 1e-4
    matrix = matrix + matrix.T
    direction = np.array([2.0, -1.0, 2.0]) / 3.0
    one = compute_rotation(Estimate(matrix, None, ""), direction, 633.0, 1.6)
    # A mirror image: g is axial, so it goes over with the determinant's sign, and the direction with the mirror.
    mirror = np.diag([1.0, 1.0, -1.0])
    other = compute_rotation(Estimate(-mirror @ matrix @ mirror.T, None, ""), mirror @ direction, 633.0, 1.6)
    assert other.power == pytest.approx(-one.power)


def test_one_radian_by_hand() -> None:
    # π G/(λ n̄) with λ = π·10⁻³ mm and n̄ = 1 is 1000 G radians per mm.
    found = compute_rotation(Estimate(np.eye(3) * 1e-3, np.eye(9) * 1e-8, ""), np.eye(3)[0], np.pi * 1e3, 1.0)
    assert found.power == pytest.approx(np.rad2deg(1.0))
    assert found.power_sigma == pytest.approx(np.rad2deg(0.1))


def test_hands_of_groups() -> None:
    assert "two hands" in describe_hand(build_crystal([5, 5, 5.4, 90, 90, 120], "32").rotations)
    assert "both ways" in describe_hand(build_crystal([5, 5, 9, 90, 90, 90], "-42m").rotations)


@pytest.mark.parametrize(("wavelength", "index", "field"), [(0.0, 1.5, "wavelength"), (500.0, -1.0, "index")])
def test_refusals(wavelength: float, index: float, field: str) -> None:
    with pytest.raises(InputError) as caught:
        compute_rotation(Estimate(np.eye(3), None, ""), np.eye(3)[0], wavelength, index)
    assert caught.value.field == field
