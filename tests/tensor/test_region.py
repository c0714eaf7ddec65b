"""Regions of possible principal axes, against the formula written out, root searches in one dimension, brute force
over a grid and over allowed tensors, and seeded simulation. All tensors here are invented."""

from __future__ import annotations

import time

import numpy as np
import numpy.typing as npt
import pytest
from scipy.optimize import brentq, minimize
from scipy.stats import binomtest, chi2

from app.crystal.crystal import Crystal, build_crystal
from app.errors import InputError
from app.tensor.kind import Kind
from app.tensor.principal import find_principal
from app.tensor.region import Region, find_region, measure_directions
from app.tensor.tensor import PropertyTensor, build_tensor

FloatArray = npt.NDArray[np.float64]

TRICLINIC = build_crystal([7.1, 8.2, 9.3, 85, 97, 101], "-1")
MONOCLINIC = build_crystal([7.1, 8.2, 9.3, 90, 103, 90], "2/m")
ORTHORHOMBIC = build_crystal([7.1, 8.2, 9.3, 90, 90, 90], "mmm")

MATRIX = np.array([[12.0, 0.3, 0.4], [0.3, 10.5, -0.2], [0.4, -0.2, 9.0]])
MONOCLINIC_MATRIX = np.array([[12.0, 0.0, 0.4], [0.0, 10.5, 0.0], [0.4, 0.0, 9.0]])
SHAPE = np.array(
    [
        [1.0, 0.2, 0.1, 0.3, -0.1, 0.2],
        [0.2, 0.6, 0.0, 0.1, 0.1, 0.0],
        [0.1, 0.0, 0.5, 0.0, 0.1, -0.1],
        [0.3, 0.1, 0.0, 0.8, 0.0, 0.2],
        [-0.1, 0.1, 0.1, 0.0, 0.4, 0.1],
        [0.2, 0.0, -0.1, 0.2, 0.1, 0.9],
    ]
)
"""A covariance of the six cells up to its scale, positive definite."""


def triclinic(sigma: float, matrix: FloatArray = MATRIX, shape: FloatArray = SHAPE) -> PropertyTensor:
    return build_tensor(TRICLINIC, Kind(), matrix=matrix, covariance=sigma**2 * shape)


def monoclinic(sigma: float, matrix: FloatArray = MONOCLINIC_MATRIX) -> PropertyTensor:
    shape = np.array([[1.0, 0.2, 0.1, 0.3], [0.2, 0.6, 0.0, 0.1], [0.1, 0.0, 0.5, 0.0], [0.3, 0.1, 0.0, 0.8]])
    return build_tensor(MONOCLINIC, Kind(), matrix=matrix, covariance=sigma**2 * shape)


def draw_directions(count: int, seed: int) -> FloatArray:
    directions = np.random.default_rng(seed).normal(size=(count, 3))
    return directions / np.linalg.norm(directions, axis=1, keepdims=True)


def compute_plainly(tensor: PropertyTensor, n: FloatArray, rotate: float = 0.3) -> float:
    """χ² by the definition: gᵀ (G C Gᵀ)⁻¹ g with G by differences of the free cells (exact, as g is linear)."""
    start = np.eye(3)[int(np.argmin(np.abs(n)))]
    u = np.cross(n, start)
    u /= np.linalg.norm(u)
    v = np.cross(n, u)
    across = np.stack([np.cos(rotate) * u + np.sin(rotate) * v, np.cos(rotate) * v - np.sin(rotate) * u])

    def effect(free: FloatArray) -> FloatArray:
        matrix = tensor.form.expand(free)
        return across @ ((matrix + matrix.T) / 2) @ n

    derivative = np.stack([effect(unit) for unit in np.eye(tensor.form.count)], axis=1)
    g = effect(tensor.free)
    assert tensor.free_covariance is not None
    return float(g @ np.linalg.inv(derivative @ tensor.free_covariance @ derivative.T) @ g)


def areas(region: Region) -> list[FloatArray]:
    return [curve for curve, kind in zip(region.curves, region.kinds, strict=True) if kind == "area"]


def count_kinds(region: Region) -> dict[str, int]:
    return {kind: region.kinds.count(kind) for kind in sorted(set(region.kinds))}


def find_enclosed(curves: list[FloatArray], inside: FloatArray, directions: FloatArray) -> npt.NDArray[np.bool_]:
    """Whether directions are on the same side as one that is inside: an even number of crossings on the way."""
    starts = np.concatenate([curve[:-1] for curve in curves])
    ends = np.concatenate([curve[1:] for curve in curves])
    normals = np.cross(starts, ends)
    enclosed = []
    for direction in directions:
        way = np.cross(inside, direction)
        parted = ((starts @ way) * (ends @ way) < 0) & ((normals @ inside) * (normals @ direction) < 0)
        place = np.cross(normals, way)
        ahead = np.sign(np.sum(place * (starts + ends), axis=1)) == np.sign(place @ (inside + direction))
        enclosed.append(np.sum(parted & ahead) % 2 == 0)
    return np.array(enclosed)


# χ² of given directions


@pytest.mark.parametrize("seed", range(3))
def test_chi2_is_that_of_the_definition(seed: int) -> None:
    random = np.random.default_rng(seed)
    root = random.normal(size=(6, 6))
    tensor = triclinic(1.0, random.normal(size=(3, 3)) + 3 * np.eye(3), root @ root.T)
    directions = draw_directions(30, seed + 100)
    test = measure_directions(TRICLINIC, tensor, 7.5 * directions)
    assert np.all(test.rank == 2)
    assert test.chi2 == pytest.approx([compute_plainly(tensor, n) for n in directions], rel=1e-9)


def test_free_antisymmetric_cells_do_not_matter() -> None:
    random = np.random.default_rng(5)
    root = random.normal(size=(9, 9))
    matrix = random.normal(size=(3, 3))
    tensor = build_tensor(TRICLINIC, Kind(intrinsic="general"), matrix=matrix, covariance=root @ root.T)
    directions = draw_directions(20, 6)
    expected = [compute_plainly(tensor, n) for n in directions]
    assert measure_directions(TRICLINIC, tensor, directions).chi2 == pytest.approx(expected, rel=1e-9)
    vertices = np.concatenate(find_region(TRICLINIC, triclinic(0.1)).curves)
    skewed = MATRIX + np.array([[0, 1, 2], [-1, 0, 3], [-2, -3, 0]])
    covariance = 0.01 * spread_to_general(SHAPE)
    general = build_tensor(TRICLINIC, Kind(intrinsic="general"), matrix=skewed, covariance=covariance)
    assert measure_directions(TRICLINIC, general, vertices).chi2 == pytest.approx(chi2.ppf(0.95, 2), rel=1e-6)


def spread_to_general(shape: FloatArray) -> FloatArray:
    """Covariance of nine cells with the symmetric part's as given and a large free antisymmetric part."""
    place = np.array([0, 1, 2, 1, 3, 4, 2, 4, 5])
    skew = np.zeros((9, 3))
    skew[[1, 3], 0], skew[[2, 6], 1], skew[[5, 7], 2] = [1, -1], [1, -1], [1, -1]
    return shape[np.ix_(place, place)] + 4.0 * skew @ skew.T


def test_bounds_are_quantiles_by_rank() -> None:
    tensor = monoclinic(0.1)
    for level in (0.5, 0.95, 0.999):
        test = measure_directions(MONOCLINIC, tensor, [[0.3, 0.5, 0.8], [0.6, 0.0, 0.8], [0.0, -2.0, 0.0]], level)
        assert test.rank.tolist() == [2, 1, 0]
        assert test.bounds == pytest.approx([chi2.ppf(level, 2), chi2.ppf(level, 1), 0.0])
        assert find_region(MONOCLINIC, tensor, level).bound == pytest.approx(chi2.ppf(level, 2))


def test_rank_is_decided_with_the_rounding_of_a_direction() -> None:
    tensor = monoclinic(0.1)
    plane = np.array([[0.6, 0.0, 0.8]])
    off = np.array([[0.0, 1.0, 0.0]])
    ranks = [measure_directions(MONOCLINIC, tensor, plane + angle * off).rank[0] for angle in (5e-9, -5e-9, 1e-6)]
    assert ranks == [1, 1, 2]
    ranks = [measure_directions(MONOCLINIC, tensor, off + angle * plane).rank[0] for angle in (5e-9, 1e-6)]
    assert ranks == [0, 2]
    on = measure_directions(MONOCLINIC, tensor, plane).chi2[0]
    assert measure_directions(MONOCLINIC, tensor, plane + 5e-9 * off).chi2[0] == pytest.approx(on, rel=1e-6)


def test_a_direction_that_no_error_could_make_an_axis_has_no_chi2() -> None:
    # Only cell 12 is uncertain: along x3, g = (0.4, −0.2) of cells 13 and 23, whatever cell 12 is.
    certain = np.zeros((6, 6))
    certain[1, 1] = 0.01
    test = measure_directions(TRICLINIC, triclinic(1.0, shape=certain), [[0, 0, 1], [1, 0, 0]])
    assert test.rank.tolist() == [0, 1]
    assert np.all(np.isnan(test.chi2))
    assert not np.any(test.inside)


def test_five_thousand_directions_take_milliseconds() -> None:
    tensor, directions = triclinic(0.3), draw_directions(5000, 1)
    measure_directions(TRICLINIC, tensor, directions)
    begun = time.perf_counter()
    measure_directions(TRICLINIC, tensor, directions)
    assert time.perf_counter() - begun < 0.2


@pytest.mark.parametrize("sigma", [0.05, 0.8])
def test_the_true_axes_are_covered_as_often_as_the_level_says(sigma: float) -> None:
    random = np.random.default_rng(20)
    axes = np.linalg.eigh(MATRIX)[1].T
    errors = random.multivariate_normal(np.zeros(6), sigma**2 * SHAPE, size=2000)
    rows, columns = np.triu_indices(3)
    covered = np.zeros(3, dtype=int)
    for error in errors:
        free = dict(zip(("11", "12", "13", "22", "23", "33"), MATRIX[rows, columns] + error, strict=True))
        measured = build_tensor(TRICLINIC, Kind(), free=free, covariance=sigma**2 * SHAPE)
        covered += measure_directions(TRICLINIC, measured, axes).inside
    assert all(binomtest(int(count), 2000, 0.95).pvalue > 1e-3 for count in covered)


def test_the_true_axes_in_a_mirror_plane_are_covered_as_often_as_the_level_says() -> None:
    random = np.random.default_rng(21)
    tensor = monoclinic(0.3)
    axes = np.linalg.eigh(MONOCLINIC_MATRIX)[1].T
    assert tensor.free_covariance is not None
    covered = np.zeros(3, dtype=int)
    for values in random.multivariate_normal(tensor.free, tensor.free_covariance, size=2000):
        free = dict(zip(tensor.form.labels, values, strict=True))
        measured = build_tensor(MONOCLINIC, Kind(), free=free, covariance=tensor.free_covariance)
        covered += measure_directions(MONOCLINIC, measured, axes).inside
    held = int(np.argmax(np.abs(axes[:, 1])))
    assert covered[held] == 2000
    assert all(binomtest(int(covered[i]), 2000, 0.95).pvalue > 1e-3 for i in range(3) if i != held)


# areas


@pytest.mark.parametrize("sigma", [1e-8, 1e-6, 1e-4])
def test_small_areas_are_the_ellipses_of_the_linear_errors(sigma: float) -> None:
    tensor = triclinic(sigma)
    region = find_region(TRICLINIC, tensor)
    principal = find_principal(tensor.estimate)
    assert principal.axis_sigma is not None
    assert count_kinds(region) == {"area": 6}
    for i in range(3):
        mine = [curve for curve in areas(region) if np.mean(curve @ principal.axes[i]) > 0.99]
        assert len(mine) == 1
        for j in range(3):
            if i != j:
                # The reach of an ellipse along an axis is √bound times the standard deviation along it.
                reach = np.max(np.abs(mine[0] @ principal.axes[j]))
                assert np.rad2deg(reach) == pytest.approx(np.sqrt(region.bound) * principal.axis_sigma[i, j], rel=2e-3)


@pytest.mark.parametrize("sigma", [1e-6, 0.05, 0.3, 0.45, 0.6, 0.8])
@pytest.mark.parametrize("level", [0.5, 0.95])
def test_areas_are_bounded_by_their_curves(sigma: float, level: float) -> None:
    tensor = triclinic(sigma)
    region = find_region(TRICLINIC, tensor, level)
    curves = areas(region)
    assert region.curves
    assert len(curves) == len(region.curves)
    for curve in curves:
        assert np.array_equal(curve[0], curve[-1])
        assert np.linalg.norm(curve, axis=1) == pytest.approx(1.0, abs=1e-12)
        assert np.max(np.linalg.norm(np.diff(curve, axis=0), axis=1)) < 0.04
        values = np.array([compute_plainly(tensor, n) for n in curve[::7]])
        assert values == pytest.approx(chi2.ppf(level, 2), rel=1e-6)
        # The area is to the left: a little to the left inside, a little to the right outside.
        middles, chords = curve[:-1], np.diff(curve, axis=0)
        left = np.cross(middles, chords)
        assert np.all(measure_directions(TRICLINIC, tensor, middles + 0.2 * left, level).inside)
        assert not np.any(measure_directions(TRICLINIC, tensor, middles - 0.2 * left, level).inside)
    if sigma > 0.01:
        check_against_grid(tensor, region)


def check_against_grid(tensor: PropertyTensor, region: Region, seed: int = 3) -> None:
    directions = draw_directions(600, seed)
    test = measure_directions(TRICLINIC, tensor, directions, region.level)
    if region.everywhere:
        assert np.all(test.inside)
        return
    axis = np.linalg.eigh(tensor.estimate.matrix)[1][:, 0] + 1e-7 * draw_directions(1, seed + 1)[0]
    enclosed = find_enclosed(areas(region), axis / np.linalg.norm(axis), directions)
    # A chord between vertices leaves the curve by a little.
    clear = np.abs(np.log(test.chi2 / region.bound)) > 0.02
    assert np.all((enclosed == test.inside)[clear])


@pytest.mark.parametrize("seed", range(20))
def test_areas_of_any_tensor_are_complete(seed: int) -> None:
    random = np.random.default_rng(seed)
    matrix = random.normal(size=(3, 3))
    rank = 2 + seed % 5
    root = random.normal(size=(6, rank)) * 10.0 ** random.uniform(-2, 0, rank)
    tensor = triclinic(10.0 ** random.uniform(-1, 0.5), matrix + matrix.T, root @ root.T)
    region = find_region(TRICLINIC, tensor)
    check_against_grid(tensor, region, seed + 50)
    if not region.everywhere:
        vertices = measure_directions(TRICLINIC, tensor, np.concatenate(region.curves))
        assert vertices.chi2 == pytest.approx(region.bound, rel=1e-6)


def test_every_axis_of_every_allowed_tensor_is_inside_and_reaches_the_border() -> None:
    random = np.random.default_rng(8)
    sigma, bound = 0.4, chi2.ppf(0.95, 2)
    root = sigma * np.linalg.cholesky(SHAPE)
    tensor = triclinic(sigma)
    steps = random.normal(size=(20000, 6))
    steps *= np.sqrt(bound) / np.linalg.norm(steps, axis=1, keepdims=True)
    rows, columns = np.triu_indices(3)
    matrices = np.zeros((len(steps), 3, 3))
    matrices[:, rows, columns] = matrices[:, columns, rows] = MATRIX[rows, columns] + steps @ root.T
    axes = np.swapaxes(np.linalg.eigh(matrices)[1], 1, 2).reshape(-1, 3)
    values = measure_directions(TRICLINIC, tensor, axes).chi2
    assert np.all(values <= bound * (1 + 1e-9))
    assert np.max(values) > 0.99 * bound


@pytest.mark.parametrize("width", [1e-1, 1e-3, 1e-5, 1e-7])
def test_needles_are_complete(width: float) -> None:
    # One combination of cells is far more uncertain than all others: the areas are long, curved and thin.
    long = np.array([0.4, 0.2, 0.3, 0.1, 0.5, 0.3])
    shape = np.outer(long, long) + width**2 * SHAPE
    tensor = triclinic(1.0, shape=shape)
    region = find_region(TRICLINIC, tensor)
    assert count_kinds(region) == {"area": 6}
    vertices = np.concatenate(region.curves)
    assert measure_directions(TRICLINIC, tensor, vertices).chi2 == pytest.approx(region.bound, rel=1e-6)
    # They reach as far as the axes of the two extreme tensors along that combination.
    extent = np.sqrt(region.bound)
    rows, columns = np.triu_indices(3)
    for side in (-0.999, 0.999):
        matrix = np.zeros((3, 3))
        matrix[rows, columns] = matrix[columns, rows] = MATRIX[rows, columns] + side * extent * long
        for axis in np.linalg.eigh(matrix)[1].T:
            nearest = np.min(np.linalg.norm(vertices - axis, axis=1))
            assert nearest < 0.1 * width + 0.03


def test_two_near_values_give_a_girdle() -> None:
    turn = np.linalg.qr(np.random.default_rng(4).normal(size=(3, 3)))[0]
    matrix = turn @ np.diag([10.0, 10.05, 4.0]) @ turn.T
    tensor = triclinic(0.1, matrix, np.eye(6))
    region = find_region(TRICLINIC, tensor)
    assert count_kinds(region) == {"area": 4}
    heights = [curve @ turn[:, 2] for curve in region.curves]
    caps = [height for height in heights if np.min(np.abs(height)) > 0.9]
    girdle = sorted((height for height in heights if np.max(np.abs(height)) < 0.2), key=lambda height: height[0])
    assert len(caps) == len(girdle) == 2
    assert np.max(girdle[0]) < 0.0 < np.min(girdle[1])
    for group in ([0, 1], [2, 3]):
        first, second = (region.curves[index] for index in group)
        assert np.array_equal(first, -second[::-1])
    check_against_grid(tensor, region)
    around = np.arange(0, 360, 5) * np.pi / 180
    circle = np.cos(around)[:, None] * turn[:, 0] + np.sin(around)[:, None] * turn[:, 1]
    assert np.all(measure_directions(TRICLINIC, tensor, circle).inside)


def test_large_errors_allow_every_direction() -> None:
    for sigma in (3.0, 300.0):
        region = find_region(TRICLINIC, triclinic(sigma))
        assert region.everywhere
        assert region.curves == region.kinds == ()


def test_the_last_gap_is_seen_until_it_closes() -> None:
    # χ² goes as 1/σ², so the largest χ² on the sphere, found by a search apart, says at which σ the gap closes.
    plain = triclinic(1.0)
    grid = draw_directions(4000, 7)
    start = grid[int(np.argmax(measure_directions(TRICLINIC, plain, grid).chi2))]
    found = minimize(
        lambda n: -compute_plainly(plain, n / np.linalg.norm(n)),
        start,
        method="Nelder-Mead",
        options={"xatol": 1e-9, "fatol": 1e-13},
    )
    closing = np.sqrt(-found.fun / chi2.ppf(0.95, 2))
    summit = found.x / np.linalg.norm(found.x)
    for margin in (1e-3, 1e-4, 1e-6):
        assert find_region(TRICLINIC, triclinic(closing * (1 + margin))).everywhere
        region = find_region(TRICLINIC, triclinic(closing * (1 - margin)))
        # The nearest allowed tensor with axis n has there two equal values, so the other axis m of their plane is a
        # summit of the same χ² (worked out by hand: t_a = m·D_a n is symmetric in n and m): two gaps close at once.
        assert count_kinds(region) == {"area": 4}
        middles = np.array([np.mean(curve, axis=0) for curve in region.curves])
        assert sorted(np.abs(middles @ summit)) == pytest.approx([0.0, 0.0, 1.0, 1.0], abs=1e-3 + 10 * margin)


@pytest.mark.parametrize("scale", [1e-30, 1e30])
def test_units_do_not_matter(scale: float) -> None:
    for sigma in (0.1, 0.6):
        plain = find_region(TRICLINIC, triclinic(sigma))
        scaled = find_region(TRICLINIC, triclinic(sigma * scale, MATRIX * scale))
        assert len(plain.curves) == len(scaled.curves)
        for first, second in zip(plain.curves, scaled.curves, strict=True):
            assert first == pytest.approx(second, abs=1e-9)
    plain_lines = find_region(MONOCLINIC, monoclinic(0.6))
    scaled_lines = find_region(MONOCLINIC, monoclinic(0.6 * scale, MONOCLINIC_MATRIX * scale))
    assert plain_lines.kinds == scaled_lines.kinds


@pytest.mark.parametrize(
    ("crystal", "make", "sigma"),
    [(TRICLINIC, triclinic, 0.3), (MONOCLINIC, monoclinic, 0.1), (MONOCLINIC, monoclinic, 0.6)],
)
def test_the_frame_rule_does_not_matter(crystal: Crystal, make: object, sigma: float) -> None:
    assert crystal.cell is not None
    other = build_crystal(crystal.cell.parameters, crystal.group.symbol, frame="x1=[1 1 1] x2=(1 -1 0)")
    turn = other.require_basis() @ np.linalg.inv(crystal.require_basis())
    tensor: PropertyTensor = make(sigma)  # type: ignore[operator]
    assert tensor.estimate.covariance is not None
    estimate = tensor.estimate.turn(turn, "")
    assert estimate.covariance is not None
    form = build_tensor(other, Kind(), matrix=estimate.matrix).form
    picked = list(form.free)
    turned = build_tensor(other, Kind(), matrix=estimate.matrix, covariance=estimate.covariance[np.ix_(picked, picked)])
    directions = draw_directions(50, 2)
    first = measure_directions(crystal, tensor, directions)
    second = measure_directions(other, turned, directions @ turn.T)
    assert second.chi2 == pytest.approx(first.chi2, rel=1e-8)
    region, moved = find_region(crystal, tensor), find_region(other, turned)
    assert count_kinds(region) == count_kinds(moved)
    vertices = np.concatenate(moved.curves)
    for curve in region.curves:
        gaps = np.linalg.norm((curve @ turn.T)[:, None] - vertices, axis=2)
        assert np.max(np.min(gaps, axis=1)) < 0.02


def test_the_same_input_gives_the_same_curves() -> None:
    first, second = (find_region(TRICLINIC, triclinic(0.5)) for _ in range(2))
    assert all(np.array_equal(a, b) for a, b in zip(first.curves, second.curves, strict=True))


# sets that symmetry confines


def test_monoclinic_arcs_end_where_a_root_search_in_the_plane_says() -> None:
    for sigma in (1e-4, 0.05, 0.3):
        tensor = monoclinic(sigma)
        region = find_region(MONOCLINIC, tensor)
        assert count_kinds(region) == {"line": 4, "point": 2}
        cells = tensor.estimate.covariance
        assert cells is not None
        angles, vectors = [], np.linalg.eigh(MONOCLINIC_MATRIX)[1].T

        def excess(angle: float, cells: FloatArray = cells) -> float:
            n = np.array([np.cos(angle), 0.0, np.sin(angle)])
            m = np.array([-np.sin(angle), 0.0, np.cos(angle)])
            outer = np.outer(m, n).ravel()
            return float((m @ MONOCLINIC_MATRIX @ n) ** 2 / (outer @ cells @ outer) - chi2.ppf(0.95, 1))

        for axis in vectors:
            if abs(axis[1]) < 0.5:
                at = np.arctan2(axis[2], axis[0])
                # Between the two axes of the plane m·An is largest, and so is χ².
                angles += [brentq(excess, at, at + side * np.pi / 4, xtol=1e-14) for side in (-1, 1)]
        ends = np.array([[np.cos(angle), 0.0, np.sin(angle)] for angle in angles])
        found = [curve for curve, kind in zip(region.curves, region.kinds, strict=True) if kind == "line"]
        for arc in found:
            assert np.array_equal(arc, arc[::-1])
            assert np.max(np.abs(arc[:, 1])) < 1e-12
            assert np.all(measure_directions(MONOCLINIC, tensor, arc[1:-1][::3]).rank == 1)
        tips = np.concatenate([[arc[0], arc[len(arc) // 2]] for arc in found])
        for end in ends:
            for sign in (1, -1):
                assert np.min(np.linalg.norm(tips - sign * end, axis=1)) < 1e-9
        points = [curve for curve, kind in zip(region.curves, region.kinds, strict=True) if kind == "point"]
        assert np.abs(np.concatenate(points)) == pytest.approx(np.array([[0, 1, 0]] * 2), abs=1e-12)


def test_off_the_monoclinic_plane_an_area_appears_where_the_held_value_is_near_another() -> None:
    matrix = MONOCLINIC_MATRIX.copy()
    matrix[1, 1] = 12.0  # The larger value of the plane is 12.05.
    tensor = monoclinic(0.1, matrix)
    region = find_region(MONOCLINIC, tensor)
    assert count_kinds(region) == {"area": 2, "line": 4, "point": 2}
    bound = chi2.ppf(0.95, 2)

    def excess(azimuth: float, polar: float) -> float:
        n = np.array([np.sin(polar) * np.sin(azimuth), np.cos(polar), np.sin(polar) * np.cos(azimuth)])
        return compute_plainly(tensor, n) - bound

    axis = np.linalg.eigh(matrix[np.ix_([0, 2], [0, 2])])[1][:, 1]
    middle = float(np.arctan2(axis[0], axis[1]))
    for polar in (0.2, 0.9, 1.4, 2.0):
        # The azimuth of the border does not depend on the distance from the held axis.
        sides = [brentq(excess, middle, middle + side * 0.6, args=(polar,), xtol=1e-12) for side in (-1, 1)]
        for curve in areas(region):
            off = curve[np.abs(curve[:, 1]) < 0.999]
            for n in off[::5]:
                azimuth = np.arctan2(n[0], n[2])
                assert np.min(np.abs(np.sin(azimuth - np.array(sides)))) < 1e-9
    for curve in areas(region):
        ranks = measure_directions(MONOCLINIC, tensor, curve)
        assert ranks.chi2[ranks.rank == 2] == pytest.approx(bound, rel=1e-9)
        assert np.sum(ranks.rank != 2) == 3  # The tips on the held axis, first and last being one.
        left = np.cross(curve[2:60], np.diff(curve, axis=0)[2:60])
        assert np.all(measure_directions(MONOCLINIC, tensor, curve[2:60] + 0.05 * left).inside)
        assert not np.any(measure_directions(MONOCLINIC, tensor, curve[2:60] - 0.05 * left).inside)


@pytest.mark.parametrize("sigma", [0.1, 0.6, 0.8, 1.0, 1.4])
def test_off_plane_areas_agree_with_a_grid(sigma: float) -> None:
    tensor = monoclinic(sigma)
    region = find_region(MONOCLINIC, tensor)
    directions = draw_directions(500, 12)
    inside = measure_directions(MONOCLINIC, tensor, directions).inside
    if region.everywhere or not areas(region):
        assert np.all(inside == region.everywhere)
        return
    assert np.any(inside)
    enclosed = find_enclosed(areas(region), directions[int(np.argmax(inside))], directions)
    assert np.all(enclosed == inside)


def test_uniaxial_and_isotropic_forms() -> None:
    tetragonal = build_crystal([7, 7, 9, 90, 90, 90], "4/m")
    covariance = np.array([[0.04, 0.01], [0.01, 0.09]])
    sigma = np.sqrt(0.04 + 0.09 - 0.02)
    for gap, everywhere in ((1.99 * sigma, False), (1.93 * sigma, True)):
        tensor = build_tensor(tetragonal, Kind(), free={"11": 5.0, "33": 5.0 + gap}, covariance=covariance)
        test = measure_directions(tetragonal, tensor, [[0.3, 0.5, 0.8], [0, 0, 2], [3, 1, 0]])
        assert test.rank.tolist() == [1, 0, 0]
        assert test.chi2 == pytest.approx([(gap / sigma) ** 2, 0.0, 0.0], rel=1e-9)
        region = find_region(tetragonal, tensor)
        assert region.everywhere is everywhere
        if not everywhere:
            assert count_kinds(region) == {"line": 1, "point": 2}
            circle = region.curves[region.kinds.index("line")]
            assert np.max(np.abs(circle[:, 2])) < 1e-12
            angles = np.unwrap(np.arctan2(circle[:, 1], circle[:, 0]))
            assert abs(angles[-1] - angles[0]) == pytest.approx(2 * np.pi)
    cubic = build_crystal([7, 7, 7, 90, 90, 90], "m-3m")
    tensor = build_tensor(cubic, Kind(), free={"11": 5.0}, covariance=[[0.1]])
    assert find_region(cubic, tensor).everywhere
    test = measure_directions(cubic, tensor, [[1, 2, 3]])
    assert (test.rank[0], test.chi2[0], test.bounds[0]) == (0, 0.0, 0.0)


def test_orthorhombic_axes_and_planes() -> None:
    def region_of(first: float, second: float, third: float, sigma: float) -> Region:
        free = {"11": first, "22": second, "33": third}
        return find_region(ORTHORHOMBIC, build_tensor(ORTHORHOMBIC, Kind(), free=free, covariance=sigma**2 * np.eye(3)))

    assert count_kinds(region_of(5.0, 7.0, 9.0, 0.1)) == {"point": 6}
    # The difference of two values has variance 2σ²: 0.27 = 1.91 of its standard deviation, 0.29 = 2.05.
    near = region_of(5.0, 5.27, 9.0, 0.1)
    assert count_kinds(near) == {"line": 1, "point": 6}
    assert np.max(np.abs(near.curves[near.kinds.index("line")][:, 2])) < 1e-12
    assert count_kinds(region_of(5.0, 5.29, 9.0, 0.1)) == {"point": 6}
    # χ² of all three equal: with independent σ it is Σ (value − mean)²/σ², against the bound 5.991 (two degrees).
    assert region_of(5.0, 5.0, 5.0 + np.sqrt(1.5 * 5.98), 1.0).everywhere
    assert count_kinds(region_of(5.0, 5.0, 5.0 + np.sqrt(1.5 * 6.0), 1.0)) == {"line": 1, "point": 6}


@pytest.mark.parametrize("sigma", [0.01, 0.2])
def test_axial_class_m_lies_in_the_plane_and_on_the_cone(sigma: float) -> None:
    crystal = build_crystal([7.1, 8.2, 9.3, 90, 103, 90], "m")
    covariance = sigma**2 * np.array([[1.0, 0.3], [0.3, 0.5]])
    tensor = build_tensor(crystal, Kind("axial"), free={"12": 1.0, "23": 0.5}, covariance=covariance)
    region = find_region(crystal, tensor)
    assert count_kinds(region) == {"line": 6}
    # b vᵀ + v bᵀ has the axes b × v and (b ± v)/√2 (worked out by hand): at right angles to b, or at 45°.
    heights = sorted(round(float(abs(curve[0, 1])), 9) for curve in region.curves)
    assert heights == pytest.approx([0.0] * 2 + [np.sqrt(0.5)] * 4, abs=1e-8)
    for curve in region.curves:
        assert np.ptp(curve[:, 1]) < 1e-9
        test = measure_directions(crystal, tensor, curve)
        assert np.all(test.rank == 1)
        assert test.chi2[[0, len(curve) // 2]] == pytest.approx(chi2.ppf(0.95, 1), rel=1e-6)
        assert np.all(test.chi2 <= test.bounds * (1 + 1e-6))
    random = np.random.default_rng(9)
    root = np.linalg.cholesky(covariance)
    vertices = np.concatenate(region.curves)
    for angle in random.uniform(0, 2 * np.pi, 50):
        step = 1.95 * root @ [np.cos(angle), np.sin(angle)]
        allowed = build_tensor(crystal, Kind("axial"), free={"12": 1.0 + step[0], "23": 0.5 + step[1]})
        for axis in np.linalg.eigh(allowed.estimate.matrix)[1].T:
            assert np.min(np.linalg.norm(vertices - axis, axis=1)) < 0.01
    assert find_region(
        crystal,
        build_tensor(crystal, Kind("axial"), free={"12": 1.0, "23": 0.5}, covariance=100 * covariance / sigma**2),
    ).everywhere


@pytest.mark.parametrize("correlation", [0.95, 0.3, -0.95])
def test_wide_arcs_cover_the_azimuths_that_the_test_allows(correlation: float) -> None:
    # Axial class −4: cells 11 = −22 and 12, so the plane across x3 holds two axes and nothing off it does.
    crystal = build_crystal([7, 7, 9, 90, 90, 90], "-4")
    sigma2 = 0.5 if abs(correlation) > 0.9 else 0.1
    covariance = sigma2 * np.array([[1.0, correlation], [correlation, 1.0]])
    tensor = build_tensor(crystal, Kind("axial"), free={"11": 1.0, "12": 0.0}, covariance=covariance)
    region = find_region(crystal, tensor)
    assert count_kinds(region) == {"line": 4, "point": 2}
    azimuths = np.deg2rad(np.arange(0.05, 360.0, 0.5))
    directions = np.stack([np.cos(azimuths), np.sin(azimuths), 0 * azimuths], axis=1)
    inside = measure_directions(crystal, tensor, directions).inside
    covered = np.zeros(len(azimuths), dtype=bool)
    for curve in (curve for curve, kind in zip(region.curves, region.kinds, strict=True) if kind == "line"):
        path = np.unwrap(np.arctan2(curve[:, 1], curve[:, 0]))[: len(curve) // 2 + 1]
        covered |= (azimuths - path[0]) % (2 * np.pi) <= path[-1] - path[0]
    assert np.array_equal(covered, inside)
    assert 0.1 < np.mean(inside) < 0.95


def test_one_uncertain_cell_gives_arcs() -> None:
    certain = np.zeros((6, 6))
    certain[2, 2] = 1.0  # cell 13
    tensor = triclinic(0.5, shape=certain)
    region = find_region(TRICLINIC, tensor)
    assert count_kinds(region) == {"line": 6}
    half = 0.5 * np.sqrt(chi2.ppf(0.95, 1))
    tips = np.concatenate([[curve[0], curve[len(curve) // 2]] for curve in region.curves])
    for side in (-1, 1):
        matrix = MATRIX.copy()
        matrix[0, 2] = matrix[2, 0] = MATRIX[0, 2] + side * half
        for axis in np.linalg.eigh(matrix)[1].T:
            assert np.min(np.linalg.norm(tips - axis, axis=1)) < 1e-9


def test_held_values_that_can_cross_give_a_circle() -> None:
    # Only cell 22 (along the held axis) is uncertain, and it can reach the larger value of the plane, 12.05.
    certain = np.diag([0.0, 0.0, 1.0, 0.0])
    tensor = build_tensor(MONOCLINIC, Kind(), matrix=MONOCLINIC_MATRIX, covariance=certain)
    region = find_region(MONOCLINIC, tensor)
    assert count_kinds(region) == {"line": 2, "point": 6}
    axes = np.linalg.eigh(MONOCLINIC_MATRIX)[1].T
    for curve in (curve for curve, kind in zip(region.curves, region.kinds, strict=True) if kind == "line"):
        assert min(float(np.max(np.abs(curve @ axis))) for axis in axes if abs(axis[1]) < 0.5) < 1e-8
        assert np.max(curve[:, 1]) > 0.999


def test_without_uncertainty_the_axes_are_points() -> None:
    region = find_region(TRICLINIC, triclinic(0.0))
    assert count_kinds(region) == {"point": 6}
    for axis in np.linalg.eigh(MATRIX)[1].T:
        assert np.min(np.linalg.norm(np.concatenate(region.curves) - axis, axis=1)) < 1e-9


def test_a_tensor_that_vanishes_or_is_antisymmetric_has_every_axis() -> None:
    vanishing = build_tensor(MONOCLINIC, Kind("axial"), free={})
    assert find_region(MONOCLINIC, vanishing).everywhere
    assert measure_directions(MONOCLINIC, vanishing, [[1, 2, 3]]).chi2[0] == 0.0
    free = {"12": 1.0, "13": 2.0, "23": 3.0}
    antisymmetric = build_tensor(TRICLINIC, Kind(intrinsic="antisymmetric"), free=free, covariance=np.eye(3))
    assert find_region(TRICLINIC, antisymmetric).everywhere


# refusals


def test_refusals() -> None:
    with pytest.raises(InputError, match="covariance") as missing:
        find_region(TRICLINIC, build_tensor(TRICLINIC, Kind(), matrix=MATRIX))
    assert missing.value.field == "tensor.covariance"
    for level in (0.0, 1.0, float("nan")):
        with pytest.raises(InputError) as wrong:
            find_region(TRICLINIC, triclinic(0.1), level)
        assert wrong.value.field == "level"
    with pytest.raises(InputError) as zero:
        measure_directions(TRICLINIC, triclinic(0.1), [[0, 0, 0]])
    assert zero.value.field == "directions"


def test_directions_are_tested_beside_the_curves() -> None:
    directions = draw_directions(5, 1)
    region = find_region(TRICLINIC, triclinic(0.1), 0.9, directions)
    assert region.test is not None
    apart = measure_directions(TRICLINIC, triclinic(0.1), directions, 0.9)
    assert np.array_equal(region.test.chi2, apart.chi2)
    assert region.test.bounds == pytest.approx([chi2.ppf(0.9, 2)] * 5)
    assert find_region(TRICLINIC, triclinic(0.1)).test is None
