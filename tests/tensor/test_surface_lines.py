"""Lines on surfaces against their equations, worked numbers, contours of a library and support functions."""

import contourpy
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.errors import InputError
from app.tensor.surface import build_surface
from app.tensor.surface_lines import choose_levels, outline, value_lines, zero_cone


def turn(values: tuple[float, float, float], seed: int) -> np.ndarray:
    axes = Rotation.random(rng=seed).as_matrix()
    return axes @ np.diag(values) @ axes.T


def evaluate(matrix: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    return np.einsum("ni,ij,nj->n", vectors, matrix, vectors)


def measure_length(points: np.ndarray) -> float:
    return float(np.sum(np.linalg.norm(np.diff(points, axis=0), axis=1)))


def test_zero_cone_of_a_uniaxial_tensor():
    # Invented data; the answer, 64.628017° about c, was computed apart from this project.
    curves = zero_cone(np.diag([-5.6, -5.6, 24.9]))
    assert len(curves) == 2
    angles = np.rad2deg(np.arccos(np.abs(np.concatenate(curves)[:, 2])))
    assert np.allclose(angles, 64.628017, atol=1e-6)
    assert sorted(np.sign(curve[0, 2]) for curve in curves) == [-1, 1]


def test_zero_cone_of_a_monoclinic_tensor():
    # Invented data; the answers were computed apart from this project: half-angles 32.801010° and 51.269462° about
    # the negative axis, 0.243750 of the sphere inside, zeros in (010) at −40.529010° and 25.073011° from c toward +x1.
    matrix = np.array([[31.0, 0.0, 6.0], [0.0, 8.5, 0.0], [6.0, 0.0, -12.4]])
    curves = zero_cone(matrix, points=4001)
    assert len(curves) == 2
    axis = np.linalg.eigh(matrix)[1][:, 0]
    curve = next(curve for curve in curves if (curve @ axis)[0] * axis[2] > 0) * np.sign(axis[2])
    axis = axis * np.sign(axis[2])
    angles = np.rad2deg(np.arccos(curve @ axis))
    assert np.min(angles) == pytest.approx(32.801010, abs=1e-5)
    assert np.max(angles) == pytest.approx(51.269462, abs=1e-5)
    for psi in (-40.529010, 25.073011):
        zero = np.array([np.sin(np.deg2rad(psi)), 0.0, np.cos(np.deg2rad(psi))])
        assert np.min(np.linalg.norm(curve - zero, axis=1)) < 2e-3
    # The two cones take 2 · (2π − ∫ cos θ dφ) of the whole sphere 4π.
    across = curve - np.outer(curve @ axis, axis)
    azimuths = np.unwrap(np.arctan2(across @ [0.0, 1.0, 0.0], across @ np.cross([0.0, 1.0, 0.0], axis)))
    cosines = curve @ axis
    turned = abs(np.sum((1.0 - (cosines[1:] + cosines[:-1]) / 2.0) * np.diff(azimuths)))
    assert 2.0 * turned / (4.0 * np.pi) == pytest.approx(0.243750, abs=2e-6)


@pytest.mark.parametrize(
    ("values", "count"),
    [
        # Reference: the zeros of l1 n1² + l2 n2² + l3 n3² on the unit sphere, by hand.
        ((1.0, 2.0, -3.0), 2),
        ((1.0, -2.0, -3.0), 2),
        ((1.0, -1e-7, -3.0), 2),
        ((1.0, -3.0, 0.0), 2),
        ((1.0, 0.0, 0.0), 1),
        ((-1.0, 0.0, 0.0), 1),
        ((1.0, 2.0, 3.0), 0),
        ((-1.0, -1.0, -1.0), 0),
        ((0.0, 0.0, 0.0), 0),
    ],
)
def test_zero_cone_for_every_sign_pattern(values, count):
    matrix = turn(values, 3)
    curves = zero_cone(matrix, points=91)
    assert len(curves) == count
    for curve in curves:
        assert curve.shape == (91, 3) and np.array_equal(curve[0], curve[-1])
        assert np.allclose(np.linalg.norm(curve, axis=1), 1.0, atol=1e-13)
        assert np.allclose(evaluate(matrix, curve), 0.0, atol=1e-13)
        assert np.all(np.linalg.norm(np.diff(curve, axis=0), axis=1) > 0.0)


def test_zero_cone_of_a_semidefinite_tensor_is_the_ends_of_an_axis():
    # Reference: by hand, l1 n1² + l2 n2² with both of one sign vanishes only where n1 = n2 = 0.
    assert [curve.tolist() for curve in zero_cone(np.diag([2.0, 5.0, 0.0]))] in (
        [[[0, 0, 1]], [[0, 0, -1]]],
        [[[0, 0, -1]], [[0, 0, 1]]],
    )


@pytest.mark.parametrize("values", [(13.0, 17.0, 24.6), (3.0, 1.1, -0.7), (2.0, -0.5, 0.0), (1.0, 1.0, 4.0)])
@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_lines_lie_on_the_surface_at_their_level(values, kind):
    # Reference: the definitions of the three surfaces, evaluated with the matrix as given.
    matrix = turn(values, 12)
    size = max(map(abs, values))
    levels = np.linspace(-size, size, 23)
    lines = value_lines(matrix, kind, levels, points=900)
    assert lines and sum(len(line.points) for line in lines) <= 900
    for line in lines:
        radii = np.linalg.norm(line.points, axis=1)
        directions = line.points / radii[:, None]
        assert np.array_equal(line.points[0], line.points[-1]) and len(line.points) >= 9
        assert line.level in levels and line.sheet == np.sign(line.level)
        if kind == "flux":
            values_there = np.linalg.norm(directions @ matrix.T, axis=1)
            assert np.allclose(radii, values_there, rtol=1e-9)
        else:
            values_there = evaluate(matrix, directions)
            expected = 1.0 / np.sqrt(np.abs(values_there)) if kind == "quadric" else np.abs(values_there)
            assert np.allclose(radii, expected, rtol=1e-9)
        assert np.allclose(values_there, line.level, rtol=1e-9, atol=1e-9 * size)


def test_lines_are_complete_against_a_contour_library():
    # Reference: contourpy on a fine grid of polar angle and azimuth, its lines carried onto the unit sphere.
    matrix = turn((13.0, 17.0, 24.6), 2)
    theta, phi = np.linspace(0.0, np.pi, 721), np.linspace(0.0, 2.0 * np.pi, 1441)

    def point(azimuth, polar):
        return np.stack([np.sin(polar) * np.cos(azimuth), np.sin(polar) * np.sin(azimuth), np.cos(polar)], axis=-1)

    grid = point(*np.meshgrid(phi, theta))
    values = np.einsum("abi,ij,abj->ab", grid, matrix, grid)
    generator = contourpy.contour_generator(phi, theta, values)
    for level in (13.4, 16.9, 17.1, 20.0, 24.5):
        theirs = sum(measure_length(point(line[:, 0], line[:, 1])) for line in generator.lines(level))
        ours = sum(measure_length(line.points) / level for line in value_lines(matrix, "value", [level], points=4000))
        assert ours == pytest.approx(theirs, rel=2e-4)


def test_a_level_at_the_middle_value_is_two_circles_and_at_the_ends_none():
    # Reference: by hand. Where nᵀAn is the middle value the cone is the pair of planes of circular section.
    matrix = np.diag([1.0, 2.0, 4.0])
    lines = value_lines(matrix, "quadric", [1.0, 2.0, 4.0])
    assert [line.level for line in lines] == [2.0, 2.0]
    for line in lines:
        assert np.linalg.matrix_rank(line.points, tol=1e-12) == 2
    equator = value_lines(np.diag([1.0, 1.0, 4.0]), "quadric", [1.0])
    assert len(equator) == 1 and np.allclose(equator[0].points[:, 2], 0.0)
    assert value_lines(3.0 * np.eye(3), "quadric", [3.0]) == []


def test_points_go_where_a_line_bends():
    # Reference: the chord error of equally spaced points on the same curve, close to two planes that cross.
    matrix = np.diag([1.0, 2.0, 4.0])
    level = 2.0 + 1e-3

    def worst_error(points: np.ndarray) -> float:
        middles = (points[1:] + points[:-1]) / 2.0
        return float(np.max(np.abs(evaluate(matrix, middles) / np.sum(middles**2, axis=1) - level)))

    fine = value_lines(matrix, "value", [level], points=40_000)[0].points
    arc = np.concatenate([[0.0], np.cumsum(np.linalg.norm(np.diff(fine, axis=0), axis=1))])
    places = np.linspace(0.0, arc[-1], 40)
    even = np.stack([np.interp(places, arc, fine[:, axis]) for axis in range(3)], axis=-1)
    thinned = value_lines(matrix, "value", [level], points=80)[0].points
    assert len(thinned) == 40
    assert worst_error(thinned) < 0.6 * worst_error(even)


def test_lines_beyond_the_cut_are_left_out_and_the_rim_is_a_level():
    # Reference: the mesh of the same quadric ends at cut_at, where the value is ±1/cut_at².
    matrix = turn((3.0, 1.1, -0.7), 1)
    cut = build_surface(matrix, "quadric").cut_at
    rim = 1.0 / cut**2
    lines = value_lines(matrix, "quadric", [0.0, 0.9 * rim, -0.9 * rim, rim, -rim])
    assert sorted(line.level for line in lines) == [-rim, -rim, rim, rim]
    assert np.allclose(np.linalg.norm(np.concatenate([line.points for line in lines]), axis=1), cut, rtol=1e-12)


def test_lifted_lines_lie_outside():
    # Reference: the documented fraction of the radius.
    matrix = turn((13.0, 17.0, 24.6), 2)
    plain, lifted = (value_lines(matrix, "quadric", [15.0, 20.0], lift=lift) for lift in (0.0, 0.004))
    for below, above in zip(plain, lifted, strict=True):
        assert np.allclose(above.points, 1.004 * below.points, rtol=1e-14)


@pytest.mark.parametrize("values", [(1.3, 2.0, 5.0), (-1.0, -2.0, -5.0), (2.0, 2.0, 2.0)])
@pytest.mark.parametrize("seed", range(3))
def test_outline_of_an_ellipsoid_is_the_edge_of_its_projection(values, seed):
    # Reference: the support function √(uᵀA⁻¹u) of an ellipsoid, here for u across the line of sight.
    matrix = turn(values, seed)
    sight = np.random.default_rng(seed).normal(size=3)
    lines = outline(matrix, sight, points=2001)
    assert len(lines) == 1 and np.array_equal(lines[0].points[0], lines[0].points[-1])
    sheet = lines[0].sheet
    assert sheet == np.sign(values[0])
    first = np.cross(sight, [0.3, -0.2, 0.9])
    second = np.cross(sight, first)
    for angle in np.linspace(0.0, 6.0, 13):
        across = np.cos(angle) * first / np.linalg.norm(first) + np.sin(angle) * second / np.linalg.norm(second)
        support = np.sqrt(across @ np.linalg.solve(sheet * matrix, across))
        assert np.max(lines[0].points @ across) == pytest.approx(support, rel=1e-5)


@settings(max_examples=80, deadline=None)
@given(
    st.sampled_from([(3.0, 1.1, -0.7), (0.8, -1.0, -6.0), (2.0, 0.5, 0.0), (2.0, -0.5, 0.0), (1.7, 0.0, 0.0)]),
    st.integers(0, 10_000),
)
def test_outline_touches_the_line_of_sight(values, seed):
    # Reference: on an outline x A x = ±1 and the line of sight is tangent, d A x = 0; nothing lies beyond the cut.
    matrix = turn(values, seed)
    sight = np.random.default_rng(seed).normal(size=3)
    cut = build_surface(matrix, "quadric", 8).cut_at
    for line in outline(matrix, sight):
        assert np.allclose(evaluate(matrix, line.points), line.sheet, rtol=1e-9)
        assert np.max(np.abs(line.points @ matrix @ sight)) < 1e-9 * cut
        assert np.max(np.linalg.norm(line.points, axis=1)) <= cut * (1.0 + 1e-12)
        if not np.array_equal(line.points[0], line.points[-1]):
            assert np.allclose(np.linalg.norm(line.points[[0, -1]], axis=1), cut, rtol=1e-12)


def test_outline_along_a_principal_axis_of_a_hyperboloid():
    # Reference: by hand. Along x of x² + y²/4 − z² = ±1 the outline is y²/4 − z² = ±1 in the plane x = 0; along z the
    # waist is all of it, since the other sheet turns no edge that way.
    matrix = np.diag([1.0, 0.25, -1.0])
    across = outline(matrix, [1.0, 0.0, 0.0])
    assert sorted(line.sheet for line in across) == [-1, -1, 1, 1]
    for line in across:
        assert np.allclose(line.points[:, 0], 0.0)
        assert np.allclose(line.points[:, 1] ** 2 / 4.0 - line.points[:, 2] ** 2, line.sheet)
    along = outline(matrix, [0.0, 0.0, 7.0])
    assert [line.sheet for line in along] == [1]
    assert np.allclose(along[0].points[:, 2], 0.0)
    assert np.max(along[0].points, axis=0) == pytest.approx([1.0, 2.0, 0.0], rel=1e-3)


def test_an_outline_longer_than_the_cut_comes_as_two_arcs():
    # Reference: by hand. 42° from the axis of x² + y² − z² = 1 the section has semi-axes 1 and 1/√cos 84° = 3.093,
    # beyond the cut at 2.5; at 40° the longer one is 1/√cos 80° = 2.400.
    def look(degrees: float) -> list:
        matrix = np.diag([1.0, 1.0, -1.0])
        return outline(matrix, [np.sin(np.deg2rad(degrees)), 0.0, np.cos(np.deg2rad(degrees))], points=401)

    arcs = look(42.0)
    assert [line.sheet for line in arcs] == [1, 1]
    for arc in arcs:
        assert np.allclose(np.linalg.norm(arc.points[[0, -1]], axis=1), 2.5, rtol=1e-12)
        assert np.allclose(evaluate(np.diag([1.0, 1.0, -1.0]), arc.points), 1.0)
        assert np.min(np.linalg.norm(arc.points, axis=1)) == pytest.approx(1.0, rel=1e-4)
    closed = look(40.0)
    assert len(closed) == 1
    assert np.max(np.linalg.norm(closed[0].points, axis=1)) == pytest.approx(2.400, abs=5e-4)


def test_outline_of_cylinders_and_planes_seen_end_on():
    # Reference: by hand. Seen along its axis a cylinder shows its section; planes seen on edge show two lines, seen
    # slantwise no outline but their rims.
    end_on = outline(np.diag([1.0, 0.25, 0.0]), [0.0, 0.0, 1.0])
    assert len(end_on) == 1 and np.max(end_on[0].points[:, 1]) == pytest.approx(2.0, rel=1e-3)
    edge_on = outline(np.diag([1.0, 0.0, 0.0]), [0.0, 1.0, 0.0])
    assert [np.unique(line.points[:, 0]).tolist() for line in edge_on] in ([[1.0], [-1.0]], [[-1.0], [1.0]])
    assert np.allclose([np.max(np.linalg.norm(line.points, axis=1)) for line in edge_on], 2.5)
    assert outline(np.diag([1.0, 0.0, 0.0]), [1.0, 1.0, 0.0]) == []
    assert outline(np.zeros((3, 3)), [1.0, 1.0, 0.0]) == []


@pytest.mark.parametrize("power", [-280, -30, 30, 280])
def test_lines_at_extreme_sizes(power):
    # Reference: dimensions. A → s A leaves the cone, and takes the quadric and its lines to 1/√s of their size.
    matrix, factor = turn((3.0, 1.1, -0.7), 5), 10.0**power
    assert np.allclose(zero_cone(matrix * factor), zero_cone(matrix), atol=1e-9)
    for ours, plain in (
        (outline(matrix * factor, [1.0, 2.0, 3.0]), outline(matrix, [1.0, 2.0, 3.0])),
        (
            value_lines(matrix * factor, "quadric", np.array([1.5, -0.5]) * factor),
            value_lines(matrix, "quadric", [1.5, -0.5]),
        ),
    ):
        assert len(ours) == len(plain) > 0
        for left, right in zip(ours, plain, strict=True):
            assert np.allclose(left.points * np.sqrt(factor), right.points, atol=1e-6)


def test_levels_of_the_demonstration_range():
    # Reference: the drawing's own choice for values from 12.26 to 24.6: a line every 0.5, a heavy one every 2.
    levels = choose_levels(12.26, 24.6)
    assert (levels.step, levels.heavy_step) == (0.5, 2.0)
    assert levels.values.tolist() == [12.5 + 0.5 * number for number in range(25)]
    assert levels.values[levels.heavy].tolist() == [14.0, 16.0, 18.0, 20.0, 22.0, 24.0]


@settings(max_examples=200, deadline=None)
@given(st.floats(-1e6, 1e6), st.floats(1e-4, 1e6), st.integers(1, 60))
def test_levels_are_round_few_and_inside(low, width, most):
    # Reference: the rule as documented; steps 1, 2, 5 times a power of ten.
    high = low + width
    levels = choose_levels(low, high, most)
    assert len(levels.values) <= most
    assert np.all((levels.values > low) & (levels.values < high)) and np.all(np.diff(levels.values) > 0)
    mantissa = float(f"{levels.step:.6e}".split("e")[0])
    assert mantissa in (1.0, 2.0, 5.0)
    assert round(levels.heavy_step / levels.step, 9) in (4.0, 5.0)
    ratios = levels.values / levels.step
    assert np.allclose(ratios, np.round(ratios), rtol=1e-9, atol=1e-6)
    heavy_ratios = levels.values / levels.heavy_step
    assert np.array_equal(levels.heavy, np.abs(heavy_ratios - np.round(heavy_ratios)) < 1e-3)


def test_no_levels_in_an_empty_range():
    # Reference: by hand; between equal values there is no other.
    for low, high in ((3.0, 3.0), (0.0, 0.0), (4.0, 3.0), (1.0, 1.0 + 1e-15)):
        assert len(choose_levels(low, high).values) == 0


def test_bad_input_is_refused_where_it_stands():
    for call, field in (
        (lambda: zero_cone(np.eye(3), points=3), "points"),
        (lambda: zero_cone(np.eye(4)), "matrix"),
        (lambda: outline(np.eye(3), [0.0, 0.0, 0.0]), "sight"),
        (lambda: outline(np.eye(3), [0.0, 0.0, np.nan]), "sight"),
        (lambda: outline(np.eye(3), [0.0, 1.0]), "sight"),
        (lambda: value_lines(np.eye(3), "quadric", [np.inf]), "levels"),
        (lambda: value_lines(np.eye(3), "ball", [1.0]), "surface"),
        (lambda: value_lines(np.diag([1.0, 2.0, 3.0]), "value", [1.5, 2.5], points=20), "points"),
        (lambda: choose_levels(np.nan, 1.0), "low"),
        (lambda: choose_levels(0.0, 1.0, most=0), "most"),
    ):
        with pytest.raises(InputError) as caught:
            call()
        assert caught.value.field == field
