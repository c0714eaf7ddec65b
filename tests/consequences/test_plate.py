"""Plates: worked numbers, tilts against Fresnel's equation and dense sampling, azimuths against scipy's rotations."""

from __future__ import annotations

import numpy as np
import pytest
from mpmath import mp
from scipy.spatial.transform import Rotation

from app.consequences.azimuth import measure_azimuth, measure_turn
from app.consequences.indicatrix import Indicatrix, build_indicatrix, find_waves
from app.consequences.plate import Plate, describe_plate
from app.consequences.refraction import refract
from app.consequences.tilt import find_tilt_tolerance
from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.tensor.estimate import Estimate
from tests.consequences.reference import build_permittivity, find_normal_parts

RANDOM = np.random.default_rng(22)

# W8: invented data; the answers were computed apart from this project.
CRYSTAL = build_crystal([5.679, 15.202, 6.522, 90, 118.43, 90], "2/m")
PSI = np.deg2rad(52.0)
AXES = np.array([[np.sin(PSI), 0, np.cos(PSI)], [0, 1, 0], [-np.cos(PSI), 0, np.sin(PSI)]])
W8 = build_permittivity([1.5296, 1.5226, 1.5205], AXES)
CALCITE = np.diag([1.65835**2, 1.65835**2, 1.48640**2])


def build(permittivity: np.ndarray) -> Indicatrix:
    return build_indicatrix(Estimate(permittivity, None, ""))


def make_plate(permittivity: np.ndarray, normal: object, **options: object) -> Plate:
    estimate = Estimate(permittivity, options.pop("covariance", None), "")  # type: ignore[arg-type]
    indicatrix = build_indicatrix(estimate)
    n = CRYSTAL.resolve(read_direction(normal))
    return describe_plate(indicatrix, refract(indicatrix, estimate, n), **options)  # type: ignore[arg-type]


def test_w8() -> None:
    plate = make_plate(W8, "(010)", thickness=0.5)
    assert plate.retardation == pytest.approx(4550.0, abs=1e-6)
    assert (plate.waves, plate.quarter_wave, plate.azimuth) == (None, None, None)
    inclined = make_plate(W8, "(121)", thickness=0.5, edge=CRYSTAL.resolve(read_direction("[010]")))
    assert inclined.retardation == pytest.approx(1512.754596, abs=1e-6)
    assert inclined.azimuth == pytest.approx(-10.885004, abs=5e-7)


def test_thickness_of_a_quarter_and_a_half_wave() -> None:
    # By hand: 589.3 / (4 · 0.0091) nm on (010).
    plate = make_plate(W8, "(010)", wavelength=589.3)
    assert plate.quarter_wave == pytest.approx(589.3e-6 / (4 * 0.0091), rel=1e-12)
    assert plate.half_wave == pytest.approx(589.3e-6 / (2 * 0.0091), rel=1e-12)
    assert plate.retardation is None and plate.waves is None and plate.cut is None
    quarter = make_plate(W8, "(010)", wavelength=589.3, thickness=plate.quarter_wave)
    assert quarter.waves == pytest.approx(0.25, rel=1e-12)
    none = make_plate(2.25 * np.eye(3), "(010)", wavelength=589.3, thickness=1.0, edge=np.array([1.0, 0, 0]))
    assert (none.quarter_wave, none.half_wave, none.azimuth) == (None, None, None)
    assert (none.retardation, none.waves) == (0.0, 0.0)
    assert none.cut is not None and none.beam is not None
    assert (none.cut.slope, none.cut.largest, none.beam.slope, none.beam.largest) == (0.0, 90.0, 0.0, 90.0)


def test_sigma_of_the_retardation() -> None:
    # On (010) both indices are principal: n = √ε, so dn = dε / 2n along the two axes.
    covariance = np.zeros((9, 9))
    small = AXES[0][:, None] * AXES[0][None, :]
    covariance += 1e-8 * np.outer(small, small)
    plate = make_plate(W8, "(010)", thickness=0.5, covariance=covariance)
    assert plate.retardation_sigma == pytest.approx(1e-4 / (2 * 1.5296) * 0.5e6, rel=1e-9)


@pytest.mark.parametrize("name", ["thickness", "wavelength", "tolerance"])
@pytest.mark.parametrize("value", [0.0, -1.0, np.inf, np.nan])
def test_lengths_are_above_zero(name: str, value: float) -> None:
    with pytest.raises(InputError) as caught:
        make_plate(W8, "(010)", **{name: value})
    assert caught.value.field == name


def test_an_edge_along_the_normal_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        make_plate(W8, "(010)", edge=np.array([0.0, -1.0, 0.0]))
    assert caught.value.field == "edge"


def test_azimuth_is_right_handed_about_the_normal() -> None:
    for _ in range(50):
        normal, edge = RANDOM.normal(size=(2, 3))
        normal, edge = normal / np.linalg.norm(normal), edge / np.linalg.norm(edge)
        projected = edge - normal * (edge @ normal)
        turn = RANDOM.uniform(-90, 90)
        vector = Rotation.from_rotvec(np.deg2rad(turn) * normal).apply(projected / np.linalg.norm(projected))
        for sense in (1, -1):
            assert measure_azimuth(sense * vector, normal, edge) == pytest.approx(turn, abs=1e-9)
            assert measure_turn(sense * vector, normal, edge) == pytest.approx(
                turn if sense == 1 else turn - np.sign(turn) * 180, abs=1e-9
            )
        assert measure_azimuth(vector, -normal, edge) == pytest.approx(-turn, abs=1e-9)


def sample_birefringence(permittivity: np.ndarray, normals: np.ndarray) -> np.ndarray:
    """By numpy's eigenvalues of ε⁻¹ seen across each normal."""
    projector = np.eye(3) - normals[..., :, None] * normals[..., None, :]
    values = np.linalg.eigvalsh(projector @ np.linalg.inv(permittivity) @ projector)[..., 1:]
    return values[..., 0] ** -0.5 - values[..., 1] ** -0.5


def lay_out_cap(normal: np.ndarray, tilt: float, count: int = 720) -> np.ndarray:
    plane = np.linalg.svd(normal[None, :])[2][1:]
    around = np.linspace(0, 2 * np.pi, count)
    toward = np.cos(around)[:, None] * plane[0] + np.sin(around)[:, None] * plane[1]
    return np.cos(np.deg2rad(tilt)) * normal + np.sin(np.deg2rad(tilt)) * toward


@pytest.mark.parametrize("normal", ["(010)", "(121)", "(10-3)"])
@pytest.mark.parametrize("tolerance", [2e-6, 1e-4, 1.5e-3])
def test_largest_tilt_of_the_cut_by_dense_sampling(normal: str, tolerance: float) -> None:
    n = CRYSTAL.resolve(read_direction(normal))
    found = find_tilt_tolerance(build(W8), n, "cut", tolerance)
    assert found.largest is not None
    nominal = sample_birefringence(W8, n[None, :])[0]
    if found.largest == 90.0:
        beyond = [np.max(np.abs(sample_birefringence(W8, lay_out_cap(n, t)) - nominal)) for t in np.arange(0, 91, 1.0)]
        assert max(beyond) <= tolerance
        return
    rings = np.linspace(0, found.largest, 200)
    changes = [np.max(np.abs(sample_birefringence(W8, lay_out_cap(n, ring)) - nominal)) for ring in rings]
    assert max(changes) <= tolerance * (1 + 1e-6)
    assert changes[-1] == pytest.approx(tolerance, rel=2e-4)
    # A little more is too much.
    assert np.max(np.abs(sample_birefringence(W8, lay_out_cap(n, found.largest * 1.001)) - nominal)) > tolerance


@pytest.mark.parametrize("kind", ["cut", "beam"])
@pytest.mark.parametrize("permittivity", [W8, CALCITE], ids=["w8", "calcite"])
def test_slope_is_the_limit_of_small_tilts(kind: str, permittivity: np.ndarray) -> None:
    n = CRYSTAL.resolve(read_direction("(121)"))
    indicatrix = build(permittivity)
    found = find_tilt_tolerance(indicatrix, n, kind, None)  # type: ignore[arg-type]
    assert found.largest is None and found.toward is not None
    tolerance = found.slope * 1e-4
    near = find_tilt_tolerance(indicatrix, n, kind, tolerance)  # type: ignore[arg-type]
    assert near.largest == pytest.approx(1e-4, rel=1e-3)
    # Toward that side it grows, by numpy's eigenvalues.
    if kind == "cut":
        step = np.deg2rad(1e-3)
        there = np.cos(step) * n + np.sin(step) * found.toward
        change = sample_birefringence(permittivity, there[None]) - sample_birefringence(permittivity, n[None])
        assert change[0] == pytest.approx(found.slope * 1e-3, rel=1e-3)


def test_slope_along_the_optic_axes() -> None:
    calcite = build(CALCITE)
    for kind in ("cut", "beam"):
        axial = find_tilt_tolerance(calcite, np.array([0, 0, 1.0]), kind, 1e-5)  # type: ignore[arg-type]
        assert axial.slope == 0.0 and axial.toward is None
    # Δn = ½ n_o³ (n_e⁻² − n_o⁻²) sin²θ to second order.
    cut = find_tilt_tolerance(calcite, np.array([0, 0, 1.0]), "cut", 1e-5)
    assert cut.largest == pytest.approx(
        np.rad2deg(np.sqrt(2e-5 / (1.65835**3 * (1 / 1.4864**2 - 1 / 1.65835**2)))), rel=1e-4
    )
    indicatrix = build(W8)
    axis = indicatrix.optic_axes[0]
    found = find_tilt_tolerance(indicatrix, axis, "cut", 1e-7)
    assert found.toward is None
    assert found.largest == pytest.approx(1e-7 / found.slope, rel=1e-3)


@pytest.mark.parametrize("permittivity", [W8, CALCITE], ids=["w8", "calcite"])
def test_a_tilted_beam_against_fresnels_equation(permittivity: np.ndarray) -> None:
    # The forward roots of Fresnel's equation in fifty digits for k = sin(tilt) s + κ n, at the found tilt and below it.
    n = CRYSTAL.resolve(read_direction("(121)"))
    tolerance = 2e-4
    found = find_tilt_tolerance(build(permittivity), n, "beam", tolerance)
    assert found.largest is not None and 0.01 < found.largest < 30

    def path(tilt: float, around: float) -> float:
        plane = np.linalg.svd(n[None, :])[2][1:]
        side = np.cos(around) * plane[0] + np.sin(around) * plane[1]
        roots = find_normal_parts(permittivity, n, np.sin(np.deg2rad(tilt)) * side)
        return float(mp.re(roots[3]) - mp.re(roots[2]))

    rest = path(0.0, 0.0)
    changes = [abs(path(found.largest, around) - rest) for around in np.linspace(0, 2 * np.pi, 24, endpoint=False)]
    assert max(changes) <= tolerance * (1 + 1e-6)
    # The steepest side lies between two of these, less than 7.5° away.
    assert max(changes) >= tolerance * np.cos(np.deg2rad(7.5)) * 0.999


def test_a_beam_may_be_totally_reflected_within_the_tolerance() -> None:
    # Below an index of 1 there is no wave beyond arcsin n: 0.8 and a little more or less.
    indicatrix = build(np.diag(np.square([0.80, 0.8001, 0.8002])))
    found = find_tilt_tolerance(indicatrix, np.array([0, 0, 1.0]), "beam", 1.0)
    assert found.largest == pytest.approx(np.rad2deg(np.arcsin(0.80)), abs=0.01)


def test_waves_are_batched() -> None:
    normals = RANDOM.normal(size=(4, 5, 3))
    normals /= np.linalg.norm(normals, axis=-1, keepdims=True)
    waves = find_waves(build(W8), normals)
    assert waves.vibrations.shape == (4, 5, 2, 3)
    assert waves.birefringence == pytest.approx(sample_birefringence(W8, normals), rel=1e-9)
