"""Indices, vibrations and rays against Fresnel's equation in fifty digits, printed values and a seeded simulation."""

from __future__ import annotations

import numpy as np
import pytest
from mpmath import mp
from scipy.spatial.transform import Rotation

from app.consequences.indicatrix import build_indicatrix, find_waves
from app.consequences.refraction import Refraction, refract
from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.tensor.estimate import Estimate, build_estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind
from tests.consequences.reference import build_permittivity, find_fields, find_indices, find_normal_parts

RANDOM = np.random.default_rng(20)

# Invented.
BIAXIAL = build_permittivity([1.71, 1.58, 1.52], Rotation.from_rotvec([0.4, -1.1, 0.7]).as_matrix())
STRONG = build_permittivity([4.1, 2.3, 1.1], Rotation.from_rotvec([1.4, 0.3, -0.7]).as_matrix())


def refract_plain(permittivity: object, normal: object, covariance: object = None) -> Refraction:
    estimate = Estimate(np.array(permittivity, dtype=float), covariance, "")  # type: ignore[arg-type]
    unit = np.array(normal, dtype=float) / np.linalg.norm(normal)  # type: ignore[arg-type]
    return refract(build_indicatrix(estimate), estimate, unit)


def angle_between_lines(first: np.ndarray, second: np.ndarray) -> float:
    return float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(first, second)), abs(first @ second))))


@pytest.mark.parametrize("permittivity", [BIAXIAL, STRONG], ids=["usual", "strong"])
def test_both_waves_obey_maxwell(permittivity: np.ndarray) -> None:
    for normal in RANDOM.normal(size=(6, 3)):
        normal = normal / np.linalg.norm(normal)
        found = refract_plain(permittivity, normal)
        indices = find_indices(permittivity, normal)
        assert found.indices == pytest.approx(indices, rel=1e-14)
        assert found.birefringence == pytest.approx(indices[0] - indices[1], rel=1e-12)
        assert found.vibrations is not None and found.rays is not None and found.walk_off is not None
        for wave in (0, 1):
            displacement, ray = find_fields(permittivity, normal, indices[wave])
            assert angle_between_lines(found.vibrations[wave], displacement) < 1e-9
            assert found.rays[wave] == pytest.approx(ray, abs=1e-12)
            assert found.walk_off[wave] == pytest.approx(np.rad2deg(np.arccos(ray @ normal)), abs=1e-6)
        assert np.abs(found.vibrations @ normal).max() < 1e-15
        assert abs(found.vibrations[0] @ found.vibrations[1]) < 1e-15


def test_a_small_birefringence_keeps_its_digits() -> None:
    # Near an optic axis the indices differ by parts in 10⁹, far below what their own difference would hold.
    estimate = Estimate(np.diag([1.71**2, 1.58**2, 1.52**2]), None, "")
    indicatrix = build_indicatrix(estimate)
    axis = indicatrix.optic_axes[0]
    for off in (1e-3, 1e-5, 1e-7):
        normal = axis + off * np.array([0.3, 0.8, -0.2])
        normal = normal / np.linalg.norm(normal)
        indices = find_mp_difference(estimate.matrix, normal)
        assert refract(indicatrix, estimate, normal).birefringence == pytest.approx(indices, rel=1e-8)


def test_a_large_contrast_keeps_its_digits() -> None:
    # Sum and difference of the two values 1/n² all but cancel here.
    permittivity = np.diag([1e7, 3.0, 1.0])
    normal = np.array([1e-4, 0.6, 0.8])
    normal /= np.linalg.norm(normal)
    assert refract_plain(permittivity, normal).indices == pytest.approx(find_indices(permittivity, normal), rel=1e-13)


def find_mp_difference(permittivity: np.ndarray, normal: np.ndarray) -> float:
    with mp.workdps(50):
        roots = find_normal_parts(permittivity, normal, np.zeros(3))
        return float(mp.re(roots[3]) - mp.re(roots[2]))


def test_walk_off_of_calcite() -> None:
    # tan(θ + ρ) = (n_o/n_e)² tan θ; numbers derived from 1.65835 / 1.48640 apart from this project: 6.222° at 45°, and
    # 6.259° at most, at 41.87°.
    calcite = np.diag([1.65835**2, 1.65835**2, 1.48640**2])
    angles = np.deg2rad([5.0, 41.87, 45.0, 80.0])
    for theta in angles:
        found = refract_plain(calcite, [np.sin(theta), 0.0, np.cos(theta)])
        assert found.walk_off is not None and found.vibrations is not None
        # The extraordinary wave is the fast one here: it vibrates in the plane of axis and normal.
        assert found.walk_off[0] == 0.0
        rho = np.arctan((1.65835 / 1.48640) ** 2 * np.tan(theta)) - theta
        assert found.walk_off[1] == pytest.approx(np.rad2deg(rho), abs=1e-12)
        assert abs(found.vibrations[1][1]) < 1e-15
        # The ordinary index whatever the direction, and 1/n² = cos²θ/n_o² + sin²θ/n_e² (textbook formula).
        usual = (np.cos(theta) ** 2 / 1.65835**2 + np.sin(theta) ** 2 / 1.48640**2) ** -0.5
        assert found.indices == pytest.approx([1.65835, usual], rel=1e-15)
    fan = np.deg2rad(np.arange(41.0, 43.0, 0.01))
    waves = find_waves(build_indicatrix(Estimate(calcite, None, "")), np.stack([np.sin(fan), 0 * fan, np.cos(fan)], -1))
    walk_off = np.rad2deg(np.arctan(np.abs(waves.tilts * waves.indices**2)[:, 1]))
    assert np.max(walk_off) == pytest.approx(6.259, abs=5e-4)
    assert np.rad2deg(fan[np.argmax(walk_off)]) == pytest.approx(41.87, abs=0.01)
    assert refract_plain(calcite, [1, 0, 1]).walk_off[1] == pytest.approx(6.222, abs=5e-4)  # type: ignore[index]


def test_quartz_at_right_angles_to_its_axis() -> None:
    # Quartz at 589 nm: 1.5442 and 1.5533 (published handbook values).
    quartz = np.diag([1.5442**2, 1.5442**2, 1.5533**2])
    found = refract_plain(quartz, [1, 0, 0])
    assert found.indices == pytest.approx([1.5533, 1.5442], rel=1e-15)
    assert found.vibrations == pytest.approx(np.array([[0, 0, 1], [0, 1, 0]]), abs=0)
    assert found.walk_off == pytest.approx([0, 0], abs=1e-14)


def test_nothing_arbitrary_is_shown() -> None:
    isotropic = refract_plain(2.25 * np.eye(3), [0.3, -0.2, 0.9])
    assert isotropic.indices == pytest.approx([1.5, 1.5], rel=1e-15)
    assert isotropic.vibrations is None and isotropic.birefringence == 0.0
    assert isotropic.walk_off == pytest.approx([0, 0], abs=0)
    along = refract_plain(np.diag([2.7, 2.7, 2.2]), [0, 0, -1])
    assert along.vibrations is None and along.birefringence == 0.0
    assert along.walk_off == pytest.approx([0, 0], abs=0)
    assert along.indices == pytest.approx([np.sqrt(2.7)] * 2, rel=1e-15)
    indicatrix = build_indicatrix(Estimate(BIAXIAL, None, ""))
    for axis in (*indicatrix.optic_axes, *-indicatrix.optic_axes):
        cone = refract_plain(BIAXIAL, axis)
        assert cone.vibrations is None and cone.walk_off is None and cone.rays is None
        assert cone.indices == pytest.approx([1.58, 1.58], rel=1e-14)


def test_a_hair_beside_an_axis_the_vibrations_are_there() -> None:
    off = np.array([1e-6, 0.0, 1.0])
    found = refract_plain(np.diag([2.7, 2.7, 2.2]), off)
    assert found.vibrations is not None
    assert found.vibrations[0] == pytest.approx([0, 1, 0], abs=1e-9)
    # Δ(1/n²) = (1/n_e² − 1/n_o²) sin²θ.
    assert found.birefringence == pytest.approx((1 / 2.2 - 1 / 2.7) * 1e-12 / 2 * 2.7**1.5, rel=1e-9)


def test_rounding_of_a_uniaxial_crystal_makes_no_biaxial_one() -> None:
    turn = Rotation.from_rotvec([0.3, 1.0, -0.4]).as_matrix()
    turned = build_permittivity([1.6, 1.5, 1.5], turn)
    indicatrix = build_indicatrix(Estimate(turned, None, ""))
    assert indicatrix.shape == "uniaxial"
    found = refract_plain(turned, turn[0])
    assert found.vibrations is None and found.indices == pytest.approx([1.5, 1.5], rel=1e-14)


@pytest.mark.parametrize(
    "values",
    [
        [2.0, 2.0, -1.0],
        [2.0, 2.0, 0.0],
        [-2.0, -2.0, -2.0],
        [2.0, 2.0, 1e-10],
        [1e10, 1e10, 1e10],
        [1e-10] * 3,
        [0.0] * 3,
    ],
)
def test_what_has_no_indices_is_refused(values: list[float]) -> None:
    with pytest.raises(InputError, match="permittivity"):
        refract_plain(np.diag(values), [1, 0, 0])


CRYSTALS = {
    "-1": build_crystal([5.1, 6.2, 7.3, 80, 95, 107], "-1"),
    "2/m": build_crystal([5.679, 15.202, 6.522, 90, 118.43, 90], "2/m"),
    "-3m": build_crystal([4.99, 4.99, 17.06, 90, 90, 120], "-3m"),
    "m-3m": build_crystal([5.0, 5.0, 5.0, 90, 90, 90], "m-3m"),
}
FREE = {
    "-1": [2.9, 0.04, -0.03, 2.6, 0.05, 2.4],
    "2/m": [2.9, 0.06, 2.6, 2.4],
    "-3m": [2.7, 2.2],
    "m-3m": [2.25],
}


@pytest.mark.parametrize("group", FREE)
@pytest.mark.parametrize("normal", ["(1 2 3)", "(0 0 1)"])
def test_sigma_by_simulation(group: str, normal: str) -> None:
    # Drawn permittivities, solved by numpy's eigenvalues of ε⁻¹ seen across the normal.
    crystal = CRYSTALS[group]
    form = build_form(crystal, Kind())
    free = np.array(FREE[group])
    spread = RANDOM.normal(size=(form.count, form.count))
    covariance = 1e-8 * (spread @ spread.T + np.eye(form.count))
    estimate = build_estimate(form, free, covariance, "")
    n = crystal.resolve(read_direction(normal))
    found = refract(build_indicatrix(estimate), estimate, n)
    drawn = form.expand(RANDOM.multivariate_normal(free, covariance, size=40_000))
    plane = np.linalg.svd(n[None, :])[2][1:]
    values, vectors = np.linalg.eigh(plane @ np.linalg.inv(drawn) @ plane.T)
    indices = values**-0.5
    assert found.sigma == pytest.approx(np.std(indices, axis=0), rel=0.03)
    assert found.birefringence_sigma == pytest.approx(np.std(indices[:, 0] - indices[:, 1]), rel=0.03, abs=1e-15)
    if found.vibrations is None:
        assert np.isnan(found.vibration_sigma)
        return
    # Turn of the slow vibration about the normal.
    slow = vectors[..., 0] @ plane
    turns = np.einsum("ni,i->n", slow, np.cross(n, found.vibrations[0])) / (slow @ found.vibrations[0])
    assert np.deg2rad(found.vibration_sigma) == pytest.approx(np.std(turns), rel=0.03, abs=1e-12)
    displaced = np.einsum("nij,nwj->nwi", np.linalg.inv(drawn), np.swapaxes(vectors, 1, 2) @ plane)
    tangents = np.abs(displaced @ n) * indices**2
    walk_off_sigma = np.std(np.arctan(tangents), axis=0)
    known = np.isfinite(found.walk_off_sigma)  # type: ignore[arg-type]
    # Where the walk-off vanishes by symmetry it has no scatter to compare.
    assert np.all(known | (np.mean(tangents, axis=0) < 1e-10))
    assert np.deg2rad(found.walk_off_sigma)[known] == pytest.approx(walk_off_sigma[known], rel=0.03)  # type: ignore[index]


def test_sigma_along_an_optic_axis() -> None:
    covariance = np.diag(np.full(9, 1e-8))
    indicatrix = build_indicatrix(Estimate(BIAXIAL, None, ""))
    found = refract_plain(BIAXIAL, indicatrix.optic_axes[0], covariance)
    # Where two unequal waves meet the indices have a cone, and no first order.
    assert np.all(np.isnan(found.sigma))  # type: ignore[arg-type]
    assert np.isnan(found.birefringence_sigma)
