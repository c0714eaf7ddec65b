"""Optic axes, 2V and sign against published indices, the worked plate, and the place where both indices agree."""

from __future__ import annotations

import numpy as np
import pytest
from mpmath import mp
from scipy.spatial.transform import Rotation

from app.consequences.indicatrix import build_indicatrix
from app.consequences.optic_axes import OpticAxes, find_optic_axes
from app.tensor.estimate import Estimate
from tests.consequences.reference import build_permittivity, find_indices

RANDOM = np.random.default_rng(21)


def find(permittivity: object, covariance: object = None) -> OpticAxes:
    estimate = Estimate(np.array(permittivity, dtype=float), covariance, "")  # type: ignore[arg-type]
    return find_optic_axes(build_indicatrix(estimate), estimate)


def of_indices(*indices: float) -> OpticAxes:
    return find(np.diag(np.square(indices)))


# Published indices at 589 nm; 2V derived from them by tan² V_z = (n_α⁻² − n_β⁻²)/(n_β⁻² − n_γ⁻²) apart from here
# (the published 2V: aragonite 18, anhydrite 42 to 44, gypsum 58; they are ill-conditioned in the indices).
@pytest.mark.parametrize(
    ("indices", "two_v", "sign"),
    [
        ((1.530, 1.680, 1.685), 19.27, "-"),
        ((1.570, 1.575, 1.614), 40.16, "+"),
        ((1.5205, 1.5226, 1.5296), 57.64, "+"),
    ],
    ids=["aragonite", "anhydrite", "gypsum"],
)
def test_published_minerals(indices: tuple[float, ...], two_v: float, sign: str) -> None:
    found = of_indices(*indices)
    assert found.two_v == pytest.approx(two_v, abs=0.005)
    assert found.sign == sign
    # The acute angle is about x (smallest index) or z.
    bisector = found.axes[0] + found.axes[1] * np.sign(found.axes[0] @ found.axes[1])
    assert np.argmax(np.abs(bisector)) == (2 if sign == "+" else 0)


def test_both_indices_agree_along_an_optic_axis() -> None:
    turn = Rotation.from_rotvec([0.2, 0.9, -1.3]).as_matrix()
    permittivity = build_permittivity([1.9, 1.7, 1.6], turn)
    found = find(permittivity)
    assert len(found.axes) == 2
    for axis in found.axes:
        slow, fast = find_indices(permittivity, axis)
        assert slow - fast < 1e-14
        assert slow == pytest.approx(1.7, rel=1e-13)


def test_uniaxial_and_isotropic() -> None:
    # Calcite is negative and quartz positive (published handbook indices).
    calcite = of_indices(1.6585, 1.6585, 1.4862)
    assert calcite.axes == pytest.approx(np.array([[0, 0, 1]]), abs=0)
    assert (calcite.sign, calcite.two_v, calcite.cone) == ("-", None, None)
    quartz = of_indices(1.5442, 1.5442, 1.5533)
    assert quartz.axes == pytest.approx(np.array([[0, 0, 1]]), abs=0)
    assert (quartz.sign, quartz.two_v) == ("+", None)
    along_a = of_indices(1.7, 1.5, 1.5)
    assert along_a.axes == pytest.approx(np.array([[1, 0, 0]]), abs=0)
    glass = of_indices(1.5, 1.5, 1.5)
    assert (len(glass.axes), glass.sign, glass.two_v) == (0, None, None)


def test_the_uniaxial_limit() -> None:
    for tiny in (1e-4, 1e-6):
        nearly = of_indices(1.5, 1.5 + tiny, 1.6)
        # tan V tends to √(2 tiny n_γ² / (n_α (n_γ² − n_α²))): by hand, to first order.
        expected = 2 * np.arctan(np.sqrt(2 * tiny * 1.6**2 / (1.5 * (1.6**2 - 1.5**2))))
        assert nearly.two_v == pytest.approx(np.rad2deg(expected), rel=20 * tiny + 1e-6)
        assert nearly.sign == "+"


def test_a_right_angle_has_no_sign() -> None:
    # 2V = 90° where n_β⁻² is the mean of the two others.
    for low, high in ((2.0, 3.0), (2.31, 2.34), (2.25, 2.2501)):
        middle = 2 / (1 / low + 1 / high)
        found = find(np.diag([low, middle, high]))
        assert found.sign is None
        assert found.two_v == 90.0
        assert find(np.diag([low, middle + 1e-6 * (high - low), high])).sign == "-"
        assert find(np.diag([low, middle - 1e-6 * (high - low), high])).sign == "+"


def test_conical_refraction_of_aragonite() -> None:
    # W. R. Hamilton's forecast for aragonite, 1°55', from Rudberg's indices 1.5326, 1.6863, 1.6908 (from memory).
    assert of_indices(1.5326, 1.6863, 1.6908).cone == pytest.approx(1 + 55 / 60, abs=0.01)


def test_the_cone_is_as_wide_as_its_farthest_ray() -> None:
    permittivity = np.diag(np.square([1.5, 1.7, 2.1]))
    found = find(permittivity)
    axis = found.axes[0]
    across = np.linalg.svd(axis[None, :])[2][1:]
    inverse = np.linalg.inv(permittivity)
    # Every D across the axis is a wave; its ray is across E = ε⁻¹ D, in the plane of D and the axis.
    rays = []
    for turn in np.linspace(0, np.pi, 721):
        displacement = np.cos(turn) * across[0] + np.sin(turn) * across[1]
        electric = inverse @ displacement
        ray = axis * (electric @ displacement) - displacement * (electric @ axis)
        rays.append(ray / np.linalg.norm(ray))
    # The wave normal itself is one of the rays.
    assert found.cone == pytest.approx(np.rad2deg(np.max(np.arccos(np.array(rays) @ axis))), abs=1e-3)


def test_sigma_of_two_v_by_simulation() -> None:
    turn = Rotation.from_rotvec([0.2, 0.9, -1.3]).as_matrix()
    permittivity = build_permittivity([1.9, 1.7, 1.6], turn)
    spread = RANDOM.normal(size=(6, 6))
    rows, columns = np.triu_indices(3)
    expand = np.zeros((9, 6))
    for cell, (row, column) in enumerate(zip(rows, columns, strict=True)):
        expand[[3 * row + column, 3 * column + row], cell] = 1.0
    small = 1e-8 * (spread @ spread.T)
    found = find(permittivity, expand @ small @ expand.T)
    draws = RANDOM.multivariate_normal(np.zeros(6), small, size=20_000) @ expand.T
    values = np.linalg.eigvalsh(permittivity + draws.reshape(-1, 3, 3))
    inverse = 1 / values
    two_v = 2 * np.arctan(np.sqrt((inverse[:, 0] - inverse[:, 1]) / (inverse[:, 1] - inverse[:, 2])))
    assert found.two_v_sigma == pytest.approx(np.std(np.rad2deg(two_v)), rel=0.03)
    assert found.note is None


@pytest.mark.parametrize("which", [0, 1, 2])
def test_sigma_of_two_v_by_each_principal_value(which: int) -> None:
    # mpmath's numerical derivative of the formula by one principal permittivity at a time.
    values = [2.3, 2.9, 3.4]

    def two_v(value: object) -> object:
        low, middle, high = (1 / mp.mpf(v) if i != which else 1 / value for i, v in enumerate(values))  # type: ignore[operator]
        return 2 * mp.atan(mp.sqrt((low - middle) / (middle - high)))

    with mp.workdps(30):
        expected = abs(mp.degrees(mp.diff(two_v, mp.mpf(values[which])))) * 1e-3
    covariance = np.zeros((9, 9))
    covariance[4 * which, 4 * which] = 1e-6
    assert find(np.diag(values), covariance).two_v_sigma == pytest.approx(float(expected), rel=1e-9)


def test_what_the_data_cannot_tell_is_said() -> None:
    covariance = np.diag([1e-4, 0, 0, 0, 1e-4, 0, 0, 0, 1e-4])
    for cell in (1, 3, 2, 6, 5, 7):
        covariance[cell, cell] = 1e-4
    for first, second in ((1, 3), (2, 6), (5, 7)):
        covariance[first, second] = covariance[second, first] = 1e-4
    found = find(np.diag([2.3, 2.305, 2.9]), covariance)
    assert found.two_v is not None
    assert found.note is not None and "uniaxial" in found.note
    vague = find(np.diag([2.3, 2.305, 2.31]), covariance)
    assert vague.note is not None and "isotropic" in vague.note
