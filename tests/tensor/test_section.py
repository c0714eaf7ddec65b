"""The section of a tensor and its Mohr circle, against dense sampling, sympy and the rule of a worked circle."""

from __future__ import annotations

import numpy as np
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.section import Section, cut_tensor

ROOT3 = np.sqrt(3.0)


def make(matrix: object, covariance: object = None) -> Estimate:
    return Estimate(np.array(matrix, dtype=float), None if covariance is None else np.array(covariance), "invented")


def random_case(seed: int) -> tuple[Estimate, Section]:
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(9, 9)) * 0.01
    estimate = make(rng.normal(size=(3, 3)) * 5.0, root @ root.T)
    normal = rng.normal(size=3)
    return estimate, cut_tensor(estimate, normal / np.linalg.norm(normal), rng.normal(size=3))


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_circle_passes_through_every_direction_of_the_plane(seed: int) -> None:
    """Sampled densely by the definitions nᵀAn and mᵀAn, m = ν × n, with no use of the circle."""
    estimate, section = random_case(seed)
    angles = np.linspace(0.0, 2 * np.pi, 721)
    causes = section.directions(angles)
    assert np.allclose(causes @ section.normal, 0.0, atol=1e-12)
    effects = causes @ estimate.matrix.T
    value = np.sum(causes * effects, axis=1)
    transverse = np.sum(np.cross(section.normal, causes) * effects, axis=1)
    assert np.allclose(section.values(angles), value)
    assert np.allclose(section.transverse(angles), transverse)
    assert np.allclose(np.hypot(value - section.mean, transverse - section.shift), section.radius)
    assert np.max(value) <= section.largest + 1e-9 and np.max(value) > section.largest - 1e-3
    assert np.min(value) >= section.smallest - 1e-9 and np.min(value) < section.smallest + 1e-3
    turned = section.directions(section.turn)
    assert turned @ estimate.matrix @ turned == pytest.approx(section.largest)


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_the_shift_is_the_axial_vector_along_the_normal(seed: int) -> None:
    estimate, section = random_case(seed)
    skew = (estimate.matrix - estimate.matrix.T) / 2.0
    axial = np.array([skew[2, 1], skew[0, 2], skew[1, 0]])
    assert section.shift == pytest.approx(float(axial @ section.normal))


def test_the_formulas_by_computer_algebra() -> None:
    """sympy turns a general matrix in the plane and collects sines and cosines of the doubled angle."""
    a, b, c, d, t = sympy.symbols("a b c d t", real=True)
    block = sympy.Matrix([[a, b], [c, d]])
    along = sympy.Matrix([sympy.cos(t), sympy.sin(t)])
    across = sympy.Matrix([-sympy.sin(t), sympy.cos(t)])
    value = (along.T * block * along)[0]
    shear = (across.T * block * along)[0]
    numbers = {a: 7, b: 1, c: 4, d: -2}
    section = cut_tensor(make([[7, 1, 0], [4, -2, 0], [0, 0, 9]]), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    for angle in (0.0, 0.3, 1.1, 2.5):
        assert section.values(angle) == pytest.approx(float(value.subs({**numbers, t: angle})))
        assert section.transverse(angle) == pytest.approx(float(shear.subs({**numbers, t: angle})))
    centre = ((a + d) / 2, (c - b) / 2)
    distance = sympy.simplify((value - centre[0]) ** 2 + (shear - centre[1]) ** 2)
    expected = ((a - d) / 2) ** 2 + ((b + c) / 2) ** 2
    assert sympy.simplify(sympy.expand_trig(distance - expected)) == 0
    assert section.shift == pytest.approx(1.5)
    assert section.radius**2 == pytest.approx(float(expected.subs(numbers)))


def test_a_worked_circle() -> None:
    """Invented numbers on the 3-4-5 triangle: 11 = 10, 22 = 2, 12 = 3 have mean 6, radius 5, values 11 and 1.

    tan 2φ = 2·3/(10 − 2) = 3/4, so tan φ = 1/3.
    """
    section = cut_tensor(make([[10, 3, 0], [3, 2, 0], [0, 0, 4]]), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    assert (section.mean, section.radius, section.shift) == pytest.approx((6.0, 5.0, 0.0))
    assert (section.largest, section.smallest) == pytest.approx((11.0, 1.0))
    assert np.tan(section.turn) == pytest.approx(1.0 / 3.0)
    assert section.transverse(0.0) == pytest.approx(3.0)
    assert section.find_zeros() == []


def test_zero_directions_of_a_pure_shear() -> None:
    """diag(3, −1) is zero where tan²φ = 3: at 60° and 120°."""
    section = cut_tensor(make(np.diag([3.0, -1.0, 5.0])), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    assert np.rad2deg(section.find_zeros()) == pytest.approx([60.0, 120.0])
    touching = cut_tensor(make(np.diag([3.0, 0.0, 5.0])), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    assert np.rad2deg(touching.find_zeros()) == pytest.approx([90.0])


@pytest.mark.parametrize("scale", [1e-30, 1.0, 1e30])
def test_a_circular_section_has_no_largest_value(scale: float) -> None:
    """Of diag(1, 2, 3) the planes across (±sin β, 0, cos β) with sin²β = (3 − 2)/(3 − 1) … are circular sections.

    There nᵀAn = 2 in every direction (Nye, Physical Properties of Crystals, from memory; checked by sampling).
    """
    normal = np.array([np.sqrt(0.5), 0.0, np.sqrt(0.5)])
    section = cut_tensor(make(np.diag([1.0, 2.0, 3.0]) * scale), normal, np.array([0.0, 1.0, 0.0]))
    assert section.even and section.radius == 0.0
    assert section.mean == pytest.approx(2.0 * scale)


def test_uncertainty_against_a_seeded_simulation() -> None:
    estimate, section = random_case(5)
    assert section.sigma is not None and not section.even
    rng = np.random.default_rng(17)
    drawn = rng.multivariate_normal(estimate.matrix.ravel(), estimate.covariance, 4000).reshape(-1, 3, 3)
    found = [cut_tensor(make(matrix), section.normal, section.first) for matrix in drawn]
    for name in ("mean", "radius", "shift", "largest", "smallest", "turn"):
        values = np.array([getattr(one, name) for one in found])
        if name == "turn":
            values = section.turn + (values - section.turn + np.pi / 2) % np.pi - np.pi / 2
        # The relative error of a spread of 4000 draws is 1.1 %.
        assert np.std(values) == pytest.approx(getattr(section.sigma, name), rel=0.05), name


def test_values_within_the_noise_are_even() -> None:
    """Equal diagonal cells with independent σ: the values part by 0.1 σ in one draw and by 10 σ in another."""
    spread = np.eye(9) * 0.1**2
    close = cut_tensor(make(np.diag([5.0, 5.01, 7.0]), spread), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    far = cut_tensor(make(np.diag([5.0, 6.0, 7.0]), spread), np.array([0.0, 0, 1]), np.array([1.0, 0, 0]))
    assert close.even and not far.even


def test_angles_are_counted_right_handed_from_the_named_direction() -> None:
    section = cut_tensor(make(np.eye(3)), np.array([0.0, 0, 1]), np.array([1.0, 0, 3.0]))
    assert section.measure_angle(np.array([0.0, 2.0, 5.0])) == pytest.approx(np.pi / 2)
    assert section.measure_angle(np.array([1.0, -ROOT3, 0.0])) == pytest.approx(-np.pi / 3)
    assert section.measure_angle(np.array([0.0, 0.0, 2.0])) is None


def test_a_direction_on_the_normal_starts_no_angles() -> None:
    with pytest.raises(InputError) as caught:
        cut_tensor(make(np.eye(3)), np.array([0.0, 0, 1]), np.array([0.0, 0.0, -4.0]))
    assert caught.value.field == "zero"
