"""What a miscut does: worked numbers, dense sampling of the cap, and references that share no formula with the code."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy.optimize import minimize_scalar

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.cutting.miscut import compute_slopes, find_allowed_miscut, measure_miscut
from app.errors import InputError
from app.tensor.estimate import Estimate

HALF = 5.1e-7
RANDOM = np.random.default_rng(20)


def estimate(matrix: object, covariance: np.ndarray | None = None) -> Estimate:
    return Estimate(np.array(matrix, dtype=np.float64), covariance, "x3 along c")


def at(degrees: float) -> np.ndarray:
    return np.array([np.sin(np.deg2rad(degrees)), 0.0, np.cos(np.deg2rad(degrees))])


def draw_unit() -> np.ndarray:
    vector = RANDOM.normal(size=3)
    return np.asarray(vector / np.linalg.norm(vector))


def sample_cap(direction: np.ndarray, half_angle: float, count: int = 40_000) -> np.ndarray:
    """Directions within a half-angle, dense in all of the cap and along its rim."""
    start = np.eye(3)[np.argmin(np.abs(direction))]
    first = np.cross(direction, start) / np.linalg.norm(np.cross(direction, start))
    second = np.cross(direction, first)
    tilt = np.deg2rad(half_angle) * np.concatenate([np.sqrt(np.linspace(0, 1, count)), np.ones(count)])
    turn = np.concatenate([np.arange(count) * 2.399963229728653, np.linspace(0, 2 * np.pi, count)])
    return (
        np.cos(tilt)[:, None] * direction
        + (np.sin(tilt) * np.cos(turn))[:, None] * first
        + (np.sin(tilt) * np.sin(turn))[:, None] * second
    )


def values(matrix: np.ndarray, directions: np.ndarray) -> np.ndarray:
    return np.einsum("ia,ab,ib->i", directions, matrix, directions)


# Worked numbers: invented data; the answer was computed apart from this project.
UNIAXIAL = estimate(np.diag([6.2, 6.2, 10.7]))


def test_a_bar_at_45_degrees_and_one_along_the_axis() -> None:
    found = measure_miscut(UNIAXIAL, at(45), 1.5)
    assert found.nominal == pytest.approx(8.45, abs=1e-12)
    assert (found.lowest / 8.45 - 1) * 100 == pytest.approx(-1.393561, abs=HALF)
    assert (found.highest / 8.45 - 1) * 100 == pytest.approx(1.393561, abs=HALF)
    assert found.highest_at == pytest.approx(at(43.5), abs=1e-12)
    assert found.lowest_at == pytest.approx(at(46.5), abs=1e-12)
    # By hand: (10.7 − 6.2) sin 2θ per radian of tilt.
    assert found.slope == pytest.approx(4.5 * np.pi / 180, rel=1e-12)
    assert found.steepest == pytest.approx(at(-45), abs=1e-12)
    along = measure_miscut(UNIAXIAL, at(0), 1.5)
    assert (along.lowest / 10.7 - 1) * 100 == pytest.approx(-0.028818, abs=HALF)
    assert along.highest == 10.7
    assert along.slope == 0
    assert along.steepest is None


def test_the_largest_tilt_for_half_a_percent() -> None:
    for direction, value, degrees in ((at(45), 8.45, 0.537975), (at(0), 10.7, 6.259759), (-at(0), 10.7, 6.259759)):
        found = find_allowed_miscut(UNIAXIAL, direction, 0.005 * value)
        assert found.half_angle == pytest.approx(degrees, abs=HALF)
        assert min(found.lowest - value, value - found.highest) == pytest.approx(-0.005 * value, rel=1e-10)
    # By hand: 2.25 sin 2θ = 0.04225 and 4.5 sin² θ = 0.0535.
    exact = np.rad2deg(np.arcsin(0.04225 / 2.25) / 2), np.rad2deg(np.arcsin(np.sqrt(0.0535 / 4.5)))
    assert find_allowed_miscut(UNIAXIAL, at(45), 0.04225).half_angle == pytest.approx(exact[0], abs=1e-11)
    assert find_allowed_miscut(UNIAXIAL, at(0), 0.0535).half_angle == pytest.approx(exact[1], abs=1e-11)


def test_a_monoclinic_plane_with_a_cone_of_one_degree() -> None:
    crystal = build_crystal([12.214, 3.0371, 5.7981, 90, 103.83, 90], "2/m")
    matrix = [[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]
    found = measure_miscut(estimate(matrix), crystal.resolve(parse_direction("(-201)")), 1.0)
    assert found.nominal == pytest.approx(13.195526, abs=HALF)
    assert found.lowest == pytest.approx(13.131901, abs=HALF)
    assert found.highest == pytest.approx(13.260801, abs=HALF)


def test_extremes_against_dense_sampling() -> None:
    for _ in range(60):
        matrix = RANDOM.normal(size=(3, 3)) * 10.0 ** RANDOM.integers(-3, 4)
        direction = draw_unit()
        half_angle = float(RANDOM.choice([0.3, 2.0, 10.0, 40.0, 70.0, 89.0, 90.0]))
        found = measure_miscut(estimate(matrix), direction, half_angle)
        sampled = values(matrix, sample_cap(direction, half_angle))
        scale = np.max(np.abs(matrix))
        assert found.lowest <= np.min(sampled) + 1e-13 * scale
        assert found.highest >= np.max(sampled) - 1e-13 * scale
        # The spacing of the samples is below a hundredth of the cap's radius.
        room = 1e-4 * (found.highest - found.lowest)
        assert found.lowest == pytest.approx(np.min(sampled), abs=room)
        assert found.highest == pytest.approx(np.max(sampled), abs=room)
        for value, place in ((found.lowest, found.lowest_at), (found.highest, found.highest_at)):
            assert place @ matrix @ place == pytest.approx(value, abs=1e-13 * scale)
            assert place @ direction >= np.cos(np.deg2rad(half_angle)) - 1e-14


def test_extremes_on_a_small_rim_in_many_digits() -> None:
    # Small cones in 50 digits by mpmath: the change itself, not the value, must keep its digits.
    for half_angle in (1e-6, 0.01):
        matrix = RANDOM.normal(size=(3, 3))
        matrix = matrix + matrix.T
        axis = np.linalg.eigh(matrix)[1][:, 0]
        found = measure_miscut(estimate(matrix), axis, half_angle)
        with mp.workdps(50):
            spread = mp.eigsy(mp.matrix(matrix.tolist()), eigvals_only=True)
            rise = mp.sin(mp.mpf(half_angle) * mp.pi / 180) ** 2 * (max(spread) - min(spread))
        assert found.highest - found.nominal == pytest.approx(float(rise), abs=3e-15)
        allowed = find_allowed_miscut(estimate(matrix), axis, float(rise))
        # The axis itself is known to 1e-16 only.
        assert allowed.half_angle == pytest.approx(half_angle, rel=1e-7)


def test_the_whole_sphere_reaches_the_principal_values() -> None:
    for _ in range(20):
        matrix = RANDOM.normal(size=(3, 3))
        principal = np.linalg.eigvalsh((matrix + matrix.T) / 2)
        found = measure_miscut(estimate(matrix), draw_unit(), 90)
        assert (found.lowest, found.highest) == pytest.approx((principal[0], principal[2]), abs=1e-14)


def test_a_cap_of_nothing_is_the_direction() -> None:
    direction = draw_unit()
    found = measure_miscut(estimate(np.diag([1.0, 2.0, 4.0])), direction, 0)
    assert found.lowest == found.highest == found.nominal
    assert found.lowest_at == pytest.approx(direction, abs=1e-15)


def test_extremes_grow_with_the_cap() -> None:
    for _ in range(10):
        known = estimate(RANDOM.normal(size=(3, 3)))
        direction = draw_unit()
        found = [measure_miscut(known, direction, angle) for angle in np.linspace(0, 90, 181).tolist()]
        assert np.all(np.diff([entry.highest for entry in found]) >= -1e-14)
        assert np.all(np.diff([entry.lowest for entry in found]) <= 1e-14)


def test_the_allowed_cap_against_a_search_of_the_rim() -> None:
    for _ in range(40):
        matrix = RANDOM.normal(size=(3, 3)) + np.diag(RANDOM.normal(size=3)) * 3
        direction = draw_unit()
        nominal = direction @ matrix @ direction
        tolerance = float(np.ptp(np.linalg.eigvalsh((matrix + matrix.T) / 2)) * 10.0 ** RANDOM.uniform(-5, 0))
        angle = find_allowed_miscut(estimate(matrix), direction, tolerance).half_angle
        inside = values(matrix, sample_cap(direction, angle * (1 - 1e-9)))
        assert np.max(np.abs(inside - nominal)) <= tolerance * (1 + 1e-9)
        if angle < 90:
            # On a rim slightly wider some direction is beyond, found by a search along it.
            rim = sample_cap(direction, min(angle * (1 + 1e-6), 90.0), 4000)[4000:]
            best = int(np.argmax(np.abs(values(matrix, rim) - nominal)))
            normal = np.cross(rim[0] - rim[1000], rim[0] - rim[2000])
            normal /= np.linalg.norm(normal)
            centre = (normal @ rim[best]) * normal
            first = rim[best] - centre
            second = np.cross(normal, first)

            def miss(turn: float, matrix=matrix, centre=centre, first=first, second=second, nominal=nominal) -> float:  # type: ignore[no-untyped-def]
                point = centre + np.cos(turn) * first + np.sin(turn) * second
                return -abs(float(point @ matrix @ point) - nominal)

            found = minimize_scalar(miss, bounds=(-2e-3, 2e-3), method="bounded", options={"xatol": 1e-12})
            assert -found.fun > tolerance


def test_degenerate_tensors() -> None:
    isotropic = estimate(np.eye(3) * 5.3)
    found = measure_miscut(isotropic, draw_unit(), 30)
    assert (found.lowest, found.highest, found.slope) == (found.nominal, found.nominal, 0)
    assert find_allowed_miscut(isotropic, draw_unit(), 0).half_angle == 90
    assert find_allowed_miscut(estimate(np.zeros((3, 3))), draw_unit(), 0).half_angle == 90
    # Antisymmetric parts do not show in nᵀAn.
    assert find_allowed_miscut(estimate([[0, 3, 0], [-3, 0, 0], [0, 0, 0]]), draw_unit(), 0).half_angle == 90
    # The circle of the doubled value crosses the cap though neither of its named axes lies there.
    tilted = np.array([np.cos(0.7), np.sin(0.7), 0.05])
    tilted /= np.linalg.norm(tilted)
    found = measure_miscut(UNIAXIAL, tilted, 5)
    assert found.lowest == pytest.approx(6.2, abs=1e-14)
    assert found.lowest < found.nominal < found.highest
    # In the plane across the axis the value falls nowhere, and rises by 4.5 sin² θ.
    flat = measure_miscut(UNIAXIAL, np.array([1.0, 0, 0]), 20)
    assert flat.highest == pytest.approx(6.2 + 4.5 * np.sin(np.deg2rad(20)) ** 2, abs=1e-13)
    assert flat.lowest == pytest.approx(6.2, abs=1e-14)


def test_tolerances_at_the_ends() -> None:
    assert find_allowed_miscut(UNIAXIAL, at(45), 0).half_angle == 0
    assert find_allowed_miscut(UNIAXIAL, at(0), 0).half_angle == 0
    assert find_allowed_miscut(UNIAXIAL, at(0), 4.5).half_angle == 90
    assert find_allowed_miscut(UNIAXIAL, at(0), 1e300).half_angle == 90
    assert find_allowed_miscut(UNIAXIAL, at(0), 4.5 * (1 - 1e-6)).half_angle < 90
    # 3.0 off at 30° from c, where it is 9.575: c itself is 1.125 off, so only the fall to 6.575 counts.
    nominal = 6.2 + 4.5 * 0.75
    wanted = np.rad2deg(np.arccos(np.sqrt((nominal - 3 - 6.2) / 4.5))) - 30
    assert find_allowed_miscut(UNIAXIAL, at(30), 3.0).half_angle == pytest.approx(wanted, abs=1e-10)
    tiny = find_allowed_miscut(UNIAXIAL, at(45), 1e-18).half_angle
    assert tiny == pytest.approx(np.rad2deg(1e-18 / 4.5), rel=1e-3)


@pytest.mark.parametrize("scale", [1e-300, 1e-30, 1e30, 1e298])
def test_scale_does_not_matter(scale: float) -> None:
    matrix = np.array([[3.0, 1.0, 0.2], [1.0, -2.0, 0.4], [0.2, 0.4, 0.5]])
    direction = draw_unit()
    plain, scaled = (measure_miscut(estimate(part), direction, 7) for part in (matrix, matrix * scale))
    for name in ("nominal", "lowest", "highest", "slope"):
        assert getattr(scaled, name) == pytest.approx(getattr(plain, name) * scale, rel=1e-11)
    allowed = [
        find_allowed_miscut(estimate(part), direction, 0.01 * k).half_angle
        for part, k in ((matrix, 1), (matrix * scale, scale))
    ]
    assert allowed[1] == pytest.approx(allowed[0], rel=1e-11)


def test_the_slope_is_the_largest_derivative() -> None:
    # Central differences along great circles toward 3600 azimuths.
    for _ in range(5):
        matrix = RANDOM.normal(size=(3, 3))
        direction = draw_unit()
        rims = sample_cap(direction, 1e-3, 3600)[3600:]
        opposite = 2 * np.cos(np.deg2rad(1e-3)) * direction - rims
        largest = np.max(values(matrix, rims) - values(matrix, opposite)) / 2e-3
        assert measure_miscut(estimate(matrix), direction, 1).slope == pytest.approx(largest, rel=1e-5)
        assert compute_slopes(matrix, direction[None])[0] == pytest.approx(largest, rel=1e-5)


def test_sigma_is_that_of_the_value() -> None:
    covariance = np.zeros((9, 9))
    covariance[0, 0], covariance[8, 8], covariance[0, 8], covariance[8, 0] = 0.04, 0.09, 0.01, 0.01
    found = measure_miscut(estimate(np.diag([6.2, 6.2, 10.7]), covariance), at(30), 1)
    # By hand: var = (1/4)² 0.04 + (3/4)² 0.09 + 2 (1/4)(3/4) 0.01.
    assert found.sigma == pytest.approx(np.sqrt(0.04 / 16 + 0.09 * 9 / 16 + 0.01 * 6 / 16))
    assert measure_miscut(UNIAXIAL, at(30), 1).sigma is None


@pytest.mark.parametrize("half_angle", [-1e-9, 90.001, np.nan, np.inf])
def test_an_impossible_half_angle_is_refused(half_angle: float) -> None:
    with pytest.raises(InputError) as caught:
        measure_miscut(UNIAXIAL, at(0), half_angle)
    assert caught.value.field == "half_angle"


@pytest.mark.parametrize("tolerance", [-0.1, np.nan, np.inf])
def test_an_impossible_tolerance_is_refused(tolerance: float) -> None:
    with pytest.raises(InputError) as caught:
        find_allowed_miscut(UNIAXIAL, at(0), tolerance)
    assert caught.value.field == "tolerance"
