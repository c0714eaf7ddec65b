"""Directions of one value: worked numbers, closed forms by hand, and values along the curves themselves."""

from __future__ import annotations

import mpmath as mp
import numpy as np
import pytest
from scipy.integrate import quad

from app.cutting.level import find_extreme, find_level, find_range

HALF = 5.1e-7
RANDOM = np.random.default_rng(21)

# Worked numbers: invented data; the answers were computed apart from this project.
MONOCLINIC = np.array([[31.0, 0, 6.0], [0, 8.5, 0], [6.0, 0, -12.4]])
TRIGONAL = np.diag([-5.6, -5.6, 24.9])


def values(matrix: np.ndarray, directions: np.ndarray) -> np.ndarray:
    return np.einsum("ia,ab,ib->i", directions, matrix, directions)


def draw(principal: object) -> np.ndarray:
    axes = np.linalg.qr(RANDOM.normal(size=(3, 3)))[0]
    return np.asarray(axes @ np.diag(np.array(principal, dtype=float)) @ axes.T)


def find_fraction(matrix: np.ndarray, value: float) -> float:
    """By another road: over the colatitude θ from axis 3 the azimuths with d1 cos² φ + d2 sin² φ < −d3 cot² θ."""
    third, second, first = np.linalg.eigvalsh(matrix) - value

    def share(cosine: float) -> float:
        bound = -third * cosine**2 / (1 - cosine**2)
        inside = (bound - second) / (first - second)
        return float(2 / np.pi * np.arcsin(np.sqrt(np.clip(inside, 0, 1))))

    breaks = [np.sqrt(d / (d - third)) for d in (first, second) if 0 < d / (d - third) < 1]
    return float(quad(share, 0, 1, points=breaks, limit=400, epsabs=1e-12, epsrel=1e-12)[0])


def test_the_zero_cone_of_a_uniaxial_crystal() -> None:
    cone = find_level(TRIGONAL, 0).cone
    assert cone is not None
    assert np.abs(cone.axis) == pytest.approx([0, 0, 1])
    assert cone.half_angles == pytest.approx([64.628017, 64.628017], abs=HALF)


def test_the_zero_cone_of_a_monoclinic_crystal() -> None:
    level = find_level(MONOCLINIC, 0)
    cone = level.cone
    assert cone is not None
    assert np.rad2deg(np.arctan(cone.axis[0] / cone.axis[2])) == pytest.approx(-7.727999, abs=1e-6)
    toward_first = np.abs(cone.toward[:, 1]) < 0.5
    assert cone.half_angles[toward_first] == pytest.approx([32.801010], abs=HALF)
    assert cone.half_angles[~toward_first] == pytest.approx([51.269462], abs=HALF)
    assert level.fraction_below == pytest.approx(0.243750, abs=HALF)
    assert len(level.locus.tracks) == 1
    assert len(level.locus.conics) == 2


def test_every_vertex_has_the_value() -> None:
    for _ in range(60):
        matrix = draw(RANDOM.normal(size=3)) * 10.0 ** RANDOM.integers(-3, 4) + RANDOM.normal(size=(3, 3)) * 1e-3
        low, high = np.linalg.eigvalsh((matrix + matrix.T) / 2)[[0, 2]]
        value = RANDOM.uniform(low, high)
        level = find_level(matrix, value)
        curves = [conic.thin(91) for conic in level.locus.conics]
        assert len(curves) == 2
        for curve in curves:
            assert values(matrix, curve) == pytest.approx(np.full(91, value), abs=1e-13 * np.max(np.abs(matrix)))
            assert curve[0] == pytest.approx(curve[-1])
        # One about the axis, one about its opposite, each the opposite of the other.
        axis = level.locus.tracks[0].normal
        sides = [np.sign(curve @ axis) for curve in curves]
        assert {float(np.mean(side)) for side in sides} == {1.0, -1.0}
        assert np.max(np.min(np.arccos(np.clip(-curves[0] @ curves[1].T, -1, 1)), axis=1)) < 0.2


def test_out_of_range_and_the_ends_of_the_range() -> None:
    for matrix, ends in ((MONOCLINIC, np.linalg.eigvalsh(MONOCLINIC)[[0, 2]]), (draw([1, 2, 4]), (1, 4))):
        assert find_level(matrix, ends[1] + 0.1).locus.is_empty
        assert find_level(matrix, ends[1] + 0.1).fraction_below == 1
        assert find_level(matrix, ends[0] - 0.1).locus.is_empty
        assert find_level(matrix, ends[0] - 0.1).fraction_below == 0
        vectors = np.linalg.eigh(matrix)[1]
        for value, column, share in ((ends[0], 0, 0), (ends[1], 2, 1)):
            level = find_level(matrix, value)
            assert level.locus.tracks == ()
            assert np.abs(level.locus.lines @ vectors[:, column]) == pytest.approx([1])
            assert level.fraction_below == share
            assert level.cone is None


def test_a_double_value_is_taken_in_a_whole_plane() -> None:
    for value, axis in ((6.2, [0, 0, 1]), (10.7, None)):
        level = find_level(np.diag([6.2, 6.2, 10.7]), value)
        if axis is None:
            assert np.abs(level.locus.lines) == pytest.approx(np.array([[0, 0, 1.0]]))
        else:
            (track,) = level.locus.tracks
            assert track.is_great_circle
            assert np.abs(track.normal) == pytest.approx(axis)
            assert level.fraction_below == 0
            assert level.cone is None


def test_the_middle_value_is_taken_in_two_planes_through_its_axis() -> None:
    # By hand: in the plane of axes 1 and 3, at atan √((λ1 − λ2)/(λ2 − λ3)) from axis 1.
    for _ in range(20):
        principal = np.sort(RANDOM.normal(size=3))
        matrix = draw(principal)
        vectors = np.linalg.eigh(matrix)[1]
        low, middle, high = np.linalg.eigvalsh(matrix)
        level = find_level(matrix, middle)
        assert len(level.locus.tracks) == 2
        for track in level.locus.tracks:
            assert track.is_great_circle
            assert track.normal @ vectors[:, 1] == pytest.approx(0, abs=1e-12)
            curve = track.conics[0].thin(37)
            assert values(matrix, curve) == pytest.approx(np.full(37, middle), abs=1e-13)
            inside = np.cross(track.normal, vectors[:, 1])
            assert np.abs(inside @ vectors[:, 0] / (inside @ vectors[:, 2])) == pytest.approx(
                np.sqrt((high - middle) / (middle - low))
            )
        cone = level.cone
        assert cone is not None
        opening = np.deg2rad(cone.half_angles[0])
        for side in (1, -1):
            direction = np.cos(opening) * cone.axis + side * np.sin(opening) * cone.toward[0]
            assert direction @ matrix @ direction == pytest.approx(middle, abs=1e-13)
        # The lune between two planes, by hand.
        assert level.fraction_below == pytest.approx(2 / np.pi * opening)


def test_isotropic_tensors() -> None:
    for matrix in (np.eye(3) * 5.3, draw([5.3, 5.3, 5.3]), np.eye(3) * 5.3 + np.diag([0, 1e-15, -1e-15])):
        level = find_level(matrix, 5.3)
        assert level.locus.everywhere
        assert level.fraction_below == 0
        assert find_level(matrix, 5.4).locus.is_empty
        assert find_level(matrix, 5.4).fraction_below == 1
        assert find_extreme(matrix, "max").locus.everywhere
    assert find_level(np.zeros((3, 3)), 0).locus.everywhere
    assert find_level(np.zeros((3, 3)), 1e-300).locus.is_empty
    skew = np.array([[0, 1.0, 0], [-1, 0, 2], [0, -2, 0]])
    assert find_level(skew, 0).locus.everywhere


def test_extremes() -> None:
    for _ in range(20):
        matrix = RANDOM.normal(size=(3, 3))
        symmetric = (matrix + matrix.T) / 2
        vectors = np.linalg.eigh(symmetric)[1]
        for extreme, column in (("min", 0), ("max", 2)):
            lines = find_extreme(matrix, extreme).locus.lines  # type: ignore[arg-type]
            assert np.abs(lines @ vectors[:, column]) == pytest.approx([1])
        assert find_range(matrix) == pytest.approx(np.linalg.eigvalsh(symmetric)[[0, 2]])
    (track,) = find_extreme(draw([3.0, 3.0, -1.0]), "max").locus.tracks
    assert track.is_great_circle


def test_the_fraction_below_by_another_integral() -> None:
    for _ in range(40):
        matrix = draw(RANDOM.normal(size=3))
        low, high = np.linalg.eigvalsh(matrix)[[0, 2]]
        value = RANDOM.uniform(low, high)
        assert find_level(matrix, value).fraction_below == pytest.approx(find_fraction(matrix, value), abs=1e-10)


def test_the_fraction_below_by_mpmath_near_the_middle_value() -> None:
    # ∫ over a quarter turn of √(P/(P + z)), as in the docstring, by quadrature at 30 digits.
    for small in (1e-1, 1e-4, 1e-8):
        with mp.workdps(30):
            x, y, z = mp.mpf(small), mp.mpf(2), mp.mpf(3)

            def cosine(turn: mp.mpf, x: mp.mpf = x, y: mp.mpf = y, z: mp.mpf = z) -> mp.mpf:
                part = x * mp.cos(turn) ** 2 + y * mp.sin(turn) ** 2
                return mp.sqrt(part / (part + z))

            marks = [0, mp.sqrt(x) / 100, mp.sqrt(x), 100 * mp.sqrt(x), mp.pi / 2]
            wanted = 1 - 2 / mp.pi * mp.quad(cosine, sorted({min(mark, mp.pi / 2) for mark in marks}))
        assert find_level(np.diag([small, 2.0, -3.0]), 0).fraction_below == pytest.approx(float(wanted), abs=1e-12)
        assert find_level(np.diag([-small, -2.0, 3.0]), 0).fraction_below == pytest.approx(1 - float(wanted), abs=1e-12)


def test_the_fraction_below_of_a_circular_cone() -> None:
    # By hand: the caps within 64.628° of c are positive, 1 − cos of it; cos² = 5.6/30.5.
    assert find_level(TRIGONAL, 0).fraction_below == pytest.approx(np.sqrt(5.6 / 30.5), abs=1e-14)


@pytest.mark.parametrize("scale", [1e-300, 1e-30, 1e30, 1e290])
def test_scale_does_not_matter(scale: float) -> None:
    level = find_level(MONOCLINIC * scale, 4.2 * scale)
    plain = find_level(MONOCLINIC, 4.2)
    assert level.fraction_below == pytest.approx(plain.fraction_below, abs=1e-13)
    assert level.cone is not None and plain.cone is not None
    assert level.cone.half_angles == pytest.approx(plain.cone.half_angles)
    assert find_level(MONOCLINIC * scale, 1.7e308).locus.is_empty
    assert find_level(MONOCLINIC * scale, -1.7e308).fraction_below == 0
    assert find_range(MONOCLINIC * scale)[1] == pytest.approx(31.814218 * scale, rel=1e-7)


def test_a_large_mean_takes_no_digits() -> None:
    matrix = draw([1, 2, 4])
    shifted = find_level(matrix + 1e6 * np.eye(3), 1e6 + 3).cone
    plain = find_level(matrix, 3).cone
    assert shifted is not None and plain is not None
    assert shifted.half_angles == pytest.approx(plain.half_angles, abs=1e-7)
