"""The static picture: radii by their definitions, what is hidden by solving for the ray, the message by its words."""

from __future__ import annotations

import json
import struct
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.tensor.kind import Kind
from app.tensor.surface import SurfaceKind
from app.web.scene import FILL, LIFT, SMALLEST_REACH, Subject, pack_scene
from tests.crystal.reference import CELLS, SETTING_NAMES, SETTINGS, close_group
from tests.web.subjects import (
    ELLIPSOID,
    MONOCLINIC,
    ONE_SHEET,
    PATTERNS,
    TRICLINIC,
    make_subject,
    random_rotation,
)

FloatArray = npt.NDArray[np.float64]
KINDS: tuple[SurfaceKind, ...] = ("quadric", "value", "flux")


def spread_directions(count: int, seed: int = 1) -> FloatArray:
    drawn = np.random.default_rng(seed).normal(size=(count, 3))
    return drawn / np.linalg.norm(drawn, axis=1, keepdims=True)


def measure(matrix: FloatArray, kind: SurfaceKind, directions: FloatArray) -> FloatArray:
    """The surface's radius in its own unit, by its definition."""
    if kind == "flux":
        return np.array([np.linalg.norm(matrix @ n) for n in directions])
    values = np.array([abs(n @ matrix @ n) for n in directions])
    return values if kind == "value" else 1.0 / np.sqrt(values)


# Size and radius ------------------------------------------------------------------------------------------------------


def test_half_the_blocks_diagonal_is_the_unit_of_length() -> None:
    half = make_subject(ELLIPSOID, part=(2.0, 3.0, 6.0)).half
    # By hand: √(4 + 9 + 36) = 7.
    np.testing.assert_allclose(half, [2 / 7, 3 / 7, 6 / 7])


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", PATTERNS)
def test_radii_follow_the_definition_to_one_scale(name: str, kind: SurfaceKind) -> None:
    matrix = PATTERNS[name]
    scene = make_subject(matrix).scene(kind)
    directions = spread_directions(500)
    expected = measure(matrix, kind, directions)
    radii = scene.radius(directions)
    shown = np.isfinite(radii)
    assert np.count_nonzero(shown) > 200
    np.testing.assert_allclose(radii[shown], expected[shown] * scene.factor, rtol=1e-12)
    # Nothing reaches beyond what is drawn; what is missing is what would.
    assert np.max(radii[shown]) <= scene.reach * (1 + 1e-9)
    if kind == "quadric" and scene.cut is not None:
        assert np.all(expected[~shown] * scene.factor > scene.cut)
    else:
        assert np.all(shown)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", PATTERNS)
def test_the_mesh_lies_on_those_radii(name: str, kind: SurfaceKind) -> None:
    matrix = PATTERNS[name]
    scene = make_subject(matrix).scene(kind)
    vertices = scene.surface.vertices * scene.factor
    sizes = np.linalg.norm(vertices, axis=1)
    away = sizes > 1e-9 * scene.reach
    directions = vertices[away] / sizes[away, None]
    np.testing.assert_allclose(sizes[away], measure(matrix, kind, directions) * scene.factor, rtol=1e-6)
    values = np.einsum("ni,ij,nj->n", directions, matrix, directions)
    if kind != "flux":
        # The sheet says the sign of the value.
        inner = np.abs(values) > 1e-6 * np.max(np.abs(values))
        np.testing.assert_array_equal(scene.surface.sheets[away][inner], np.sign(values[inner]))


@settings(max_examples=40, deadline=None)
@given(
    part=st.tuples(*[st.floats(1.0, 1.5)] * 3),
    seed=st.integers(0, 2**32 - 1),
    name=st.sampled_from(sorted(PATTERNS)),
    kind=st.sampled_from(KINDS),
)
def test_a_block_of_like_sides_encloses_the_surface_in_every_pose(
    part: tuple[float, float, float], seed: int, name: str, kind: SurfaceKind
) -> None:
    subject = make_subject(PATTERNS[name], part=part)
    scene = subject.scene(kind)
    posed = scene.surface.vertices * scene.factor @ random_rotation(seed).T
    assert np.all(np.abs(posed) < subject.half)
    # And fills it as far as it may: the longest radius is this part of the shortest half side.
    assert np.max(np.linalg.norm(posed, axis=1)) == pytest.approx(FILL * np.min(subject.half))


def test_beside_a_flat_block_the_surface_keeps_a_size_that_can_be_seen() -> None:
    scene = make_subject(ELLIPSOID, part=(10.0, 10.0, 0.5)).scene("quadric")
    assert np.max(np.linalg.norm(scene.surface.vertices, axis=1)) * scene.factor == pytest.approx(SMALLEST_REACH)


def test_the_longest_radius_of_a_quadric_is_along_the_least_value() -> None:
    subject = make_subject(ELLIPSOID)
    scene = subject.scene("quadric")
    values, vectors = np.linalg.eigh(ELLIPSOID)
    radii = scene.radius(vectors.T)
    # The semi-axes go as 1/√value (Nye, ch. I, from memory).
    np.testing.assert_allclose(radii / radii[0], np.sqrt(values[0] / values), rtol=1e-12)
    assert radii[0] == pytest.approx(scene.reach)


def test_an_open_sheet_has_no_radius_toward_the_cone_of_zero_value() -> None:
    # Diagonal by hand: values 4, 1, −1; in the plane of x1 and x3 zero at tan² = 4.
    scene = make_subject(np.diag([4.0, 1.0, -1.0])).scene("quadric")
    angle = np.arctan(2.0)
    assert np.isnan(scene.radius(np.array([np.cos(angle), 0.0, np.sin(angle)])))
    assert np.all(np.isfinite(scene.radius(np.eye(3))))


def test_the_zero_tensor_has_no_surface_and_draws_nothing() -> None:
    subject = make_subject(np.zeros((3, 3)))
    for kind in KINDS:
        scene = subject.scene(kind)
        assert len(scene.surface.vertices) == 0
        assert scene.lines == ()
        assert not np.any(scene.find_hidden(spread_directions(5), np.array([0.0, 0.0, 1.0])))
        header, arrays = read_message(pack_scene(subject, kind))
        assert all(len(numbers) == 0 for numbers in arrays.values())
        assert header["step"] == 0


def test_equal_values_have_no_lines() -> None:
    assert make_subject(np.diag([3.0, 3.0, 3.0])).scene("quadric").lines == ()


# Lines of equal value -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", PATTERNS)
def test_lines_run_where_the_value_is_theirs_a_hair_above_the_surface(name: str, kind: SurfaceKind) -> None:
    matrix = PATTERNS[name]
    scene = make_subject(matrix).scene(kind)
    assert len(scene.lines) > 5
    assert len(scene.heavy) == len(scene.lines)
    for line, heavy in zip(scene.lines, scene.heavy, strict=True):
        sizes = np.linalg.norm(line.points, axis=1)
        directions = line.points / sizes[:, None]
        values = np.einsum("ni,ij,nj->n", directions, matrix, directions)
        if kind == "flux":
            values = np.linalg.norm(directions @ matrix.T, axis=1)
        np.testing.assert_allclose(values, line.level, rtol=1e-9)
        np.testing.assert_allclose(sizes / measure(matrix, kind, directions), 1.0 + LIFT, rtol=1e-9)
        assert line.sheet == np.sign(line.level)
        # Every step of the scale, heavier every so many.
        assert line.level / scene.levels.step == pytest.approx(round(line.level / scene.levels.step))
        fits = line.level / scene.levels.heavy_step
        assert heavy == (abs(fits - round(fits)) < 1e-6)


SUBJECTS = {name: make_subject(matrix) for name, matrix in PATTERNS.items()}


# What is hidden -------------------------------------------------------------------------------------------------------


def solve_ray(matrix: FloatArray, scale: float, point: FloatArray, toward: FloatArray) -> list[float]:
    """Distances at which a ray from a point meets either sheet, ascending: the roots of two quadratics."""
    found = []
    a, b = toward @ matrix @ toward, point @ matrix @ toward
    for sign in (1.0, -1.0):
        inside = b**2 - a * (point @ matrix @ point - sign * scale**2)
        if inside >= 0:
            found += [(-b - np.sqrt(inside)) / a, (-b + np.sqrt(inside)) / a]
    return sorted(float(root) for root in found)


def check_hidden_by_roots(name: str, seed: int) -> None:
    matrix, scene = PATTERNS[name], SUBJECTS[name].scene("quadric")
    random = np.random.default_rng(seed)
    toward = random_rotation(seed)[2]
    # From within the picture to well outside, as the ends of the axes are.
    points = random.normal(size=(40, 3))
    points *= (random.uniform(0.05, 1.4, 40) * scene.reach / np.linalg.norm(points, axis=1))[:, None]
    hidden = scene.find_hidden(points, toward)
    cut = np.inf if scene.cut is None else scene.cut
    steps = 2.0 * scene.reach / 27.0
    counted = 0
    for point, is_hidden in zip(points, hidden, strict=True):
        roots = [root for root in solve_ray(matrix, scene.factor, point, toward) if root > 0]
        away = np.array([np.linalg.norm(point + root * toward) for root in roots])
        # Two crossings within one step of the walk, one at its start or one right at the rim may pass unseen.
        near = any(second - first < 1.5 * steps for first, second in pairwise(roots))
        if near or any(root < 2 * steps for root in roots) or np.any(np.abs(away - cut) < 2 * steps):
            continue
        counted += 1
        assert is_hidden == bool(np.any(away <= cut))
    assert counted > 12


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_what_an_ellipsoid_hides_is_what_the_roots_say(seed: int) -> None:
    check_hidden_by_roots("ellipsoid", seed)
    check_hidden_by_roots("imaginary", seed)


@settings(max_examples=25, deadline=None)
@given(st.integers(0, 2**32 - 1))
def test_what_open_sheets_hide_is_what_the_roots_say(seed: int) -> None:
    check_hidden_by_roots("one sheet", seed)
    check_hidden_by_roots("two sheets", seed)


@pytest.mark.parametrize("kind", KINDS)
def test_of_a_ball_the_near_half_is_seen_and_the_far_half_is_not(kind: SurfaceKind) -> None:
    # The three surfaces of a multiple of the unit tensor are balls.
    scene = make_subject(2.5 * np.eye(3)).scene(kind)
    for toward in spread_directions(6, seed=3):
        points = spread_directions(80, seed=4)
        facing = points @ toward
        # A point 1.2 % above the ball is hidden from about 0.154 behind the rim on (by Pythagoras); well clear of that.
        clear = (np.abs(facing) > 0.2) & (np.abs(facing) < 0.98)
        hidden = scene.find_hidden(points[clear] * scene.reach * 1.012, toward)
        np.testing.assert_array_equal(hidden, facing[clear] < 0)


@pytest.mark.parametrize("kind", ["value", "flux"])
def test_behind_a_value_or_flux_surface_is_what_a_fine_walk_finds(kind: SurfaceKind) -> None:
    matrix = np.array([[5.0, 1.0, 0.0], [1.0, 2.0, 0.5], [0.0, 0.5, 3.0]])
    scene = make_subject(matrix).scene(kind)
    toward = np.array([0.48, 0.6, 0.64])
    points = spread_directions(60, seed=7) * np.linspace(0.3, 1.3, 60)[:, None] * scene.reach
    hidden = scene.find_hidden(points, toward)
    counted = 0
    for point, is_hidden in zip(points, hidden, strict=True):
        walk = point + np.linspace(0.012, 2 * scene.reach, 4000)[:, None] * toward
        sizes = np.linalg.norm(walk, axis=1)
        inside = sizes < measure(matrix, kind, walk / sizes[:, None]) * scene.factor
        stretches = np.diff(np.flatnonzero(np.diff(inside.astype(int)) != 0))
        if len(stretches) and np.min(stretches) < 4000 / 27 * 1.5:
            continue
        counted += 1
        assert is_hidden == bool(np.any(inside[1:] != inside[:-1]))
    assert counted > 40


# Symmetry in the picture ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", SETTING_NAMES)
def test_mirrors_are_those_of_the_generated_group_or_none_where_there_are_many(name: str) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
    # A mirror W has trace 1 and determinant −1; its normal v in the crystal frame has R v = −v.
    basis = crystal.require_basis()
    rotations = [basis @ member @ np.linalg.inv(basis) for member in close_group(setting.matrices)]
    mirrors = [r for r in rotations if np.linalg.det(r) < 0 and abs(np.trace(r) - 1.0) < 1e-9]
    subject = make_subject(np.diag([3.0, 2.0, 1.0]), crystal)
    if len(mirrors) > 3:
        assert subject.mirrors.shape == (0, 3)
        return
    assert subject.mirrors.shape == (len(mirrors), 3)
    for normal in subject.mirrors:
        assert np.linalg.norm(normal) == pytest.approx(1.0)
        assert any(np.allclose(mirror, np.eye(3) - 2 * np.outer(normal, normal), atol=1e-9) for mirror in mirrors)


@pytest.mark.parametrize(
    ("family", "group", "matrix", "fixed"),
    [
        # Which axes a system fixes: Nye, ch. I, table 3 (from memory).
        ("triclinic", "1", ELLIPSOID, (False, False, False)),
        ("monoclinic b", "2/m", ELLIPSOID, (True, False, False)),
        ("orthorhombic", "mmm", ELLIPSOID, (True, True, True)),
        ("hexagonal", "6/mmm", np.diag([2.0, 2.0, 5.0]), (True, False, False)),
        ("hexagonal", "-3", np.diag([5.0, 5.0, 2.0]), (False, False, True)),
        ("cubic", "m-3m", np.eye(3), (False, False, False)),
    ],
)
def test_axes_that_symmetry_holds(family: str, group: str, matrix: FloatArray, fixed: tuple[bool, bool, bool]) -> None:
    assert make_subject(matrix, build_crystal(CELLS[family], group)).fixed == fixed


def test_a_region_surrounds_the_axis_that_the_data_leave_free() -> None:
    covariance = np.diag([0.08, 0.06, 0.2, 0.09]) ** 2
    matrix = np.array([[13.2, 0.0, 1.85], [0.0, 24.6, 0.0], [1.85, 0.0, 15.9]])
    subject = make_subject(matrix, MONOCLINIC, covariance=covariance)
    assert subject.regions
    for _, curve in subject.regions:
        np.testing.assert_allclose(np.linalg.norm(curve, axis=1), 1.0)
        # In (010), the plane of symmetry, by the half-turn that holds p1 along b.
        np.testing.assert_allclose(curve[:, 1], 0.0, atol=1e-9)
    # First order, by hand: tan 2θ = 2·1.85/(13.2 − 15.9), so dθ/dT13 = (T33 − T11)/((T33 − T11)² + 4 T13²) and
    # dθ/d(T33 − T11) = −T13/the same; 95 % of two degrees of freedom of which one is left: ±1.96 σ.
    gap = 15.9 - 13.2
    size = gap**2 + 4 * 1.85**2
    sigma = np.hypot(gap * 0.06, 1.85 * np.hypot(0.08, 0.09)) / size
    axis = np.linalg.eigh(matrix)[1][:, 0]
    widest = max(
        float(np.max(np.arccos(np.clip(np.abs(curve @ axis), 0, 1))))
        for _, curve in subject.regions
        if np.max(np.abs(curve @ axis)) > 0.99
    )
    assert widest == pytest.approx(1.96 * sigma, rel=0.05)


@pytest.mark.parametrize("covariance", [None, np.zeros((6, 6))], ids=["unknown", "exact"])
def test_without_uncertainty_there_is_no_region(covariance: Any) -> None:
    assert make_subject(ELLIPSOID, covariance=covariance).regions == []


# The binary message ---------------------------------------------------------------------------------------------------


def read_message(message: bytes) -> tuple[dict[str, Any], dict[str, FloatArray]]:
    """Read the message by its description, with struct alone."""
    (length,) = struct.unpack_from("<i", message)
    assert length % 4 == 0
    header = json.loads(message[4 : 4 + length])
    at, arrays = 4 + length, {}
    for name, form, count in header["arrays"]:
        letter = {"f4": "f", "i4": "i"}[form]
        arrays[name] = np.array(struct.unpack_from(f"<{count}{letter}", message, at))
        at += 4 * count
    assert at == len(message)
    return header, arrays


def check_message(subject: Subject, kind: SurfaceKind) -> dict[str, FloatArray]:
    header, arrays = read_message(pack_scene(subject, kind))
    scene = subject.scene(kind)
    assert header["type"] == "surface"
    assert header["hash"] == subject.key
    assert header["surface"] == kind
    matrix = subject.tensor.estimate.matrix
    triangles = 0
    for name, sign in (("plus", 1), ("minus", -1)):
        vertices = arrays[f"{name}_vertices"].reshape(-1, 3)
        corners = arrays[f"{name}_triangles"].reshape(-1, 3).astype(int)
        triangles += len(corners)
        assert len(vertices) == np.count_nonzero(scene.surface.sheets == sign)
        if len(corners):
            # Every vertex is used, and none that is not there.
            np.testing.assert_array_equal(np.unique(corners), np.arange(len(vertices)))
        sizes = np.linalg.norm(vertices, axis=1)
        away = vertices[sizes > 1e-5] / sizes[sizes > 1e-5, None]
        radii = measure(matrix, kind, away) * scene.factor
        np.testing.assert_allclose(sizes[sizes > 1e-5], radii, rtol=2e-4)
        if kind != "flux" and len(away):
            values = np.einsum("ni,ij,nj->n", away, matrix, away) * sign
            assert np.min(values) > -1e-4 * np.max(values)
    assert triangles == len(scene.surface.triangles)
    return arrays


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("name", PATTERNS)
def test_the_message_carries_the_sheets_apart(name: str, kind: SurfaceKind) -> None:
    check_message(make_subject(PATTERNS[name]), kind)


def test_the_message_carries_every_line_by_its_weight_with_gaps_between() -> None:
    subject = make_subject(ONE_SHEET)
    arrays = check_message(subject, "quadric")
    scene = subject.scene("quadric")
    for name, sign in (("plus", 1), ("minus", -1)):
        for weight, heavy in (("heavy", True), ("light", False)):
            points = arrays[f"{name}_{weight}"].reshape(-1, 3)
            gaps = np.isnan(points[:, 0])
            np.testing.assert_array_equal(np.isnan(points), np.repeat(gaps[:, None], 3, axis=1))
            chosen = [
                line
                for line, is_heavy in zip(scene.lines, scene.heavy, strict=True)
                if line.sheet == sign and is_heavy == heavy
            ]
            assert np.count_nonzero(gaps) == len(chosen)
            assert not np.any(gaps[1:] & gaps[:-1])
            drawn = points[~gaps]
            assert len(drawn) == sum(len(line.points) for line in chosen)
            values = np.einsum("ni,ij,nj->n", drawn, ONE_SHEET, drawn) / np.sum(drawn**2, axis=1)
            expected = np.concatenate([np.full(len(line.points), line.level) for line in chosen])
            np.testing.assert_allclose(values, expected, atol=1e-3)


@pytest.mark.parametrize("name", PATTERNS)
def test_dots_stand_on_the_negative_sheet_only(name: str) -> None:
    subject = make_subject(PATTERNS[name])
    dots = check_message(subject, "quadric")["minus_dots"].reshape(-1, 3)
    if name == "ellipsoid":
        assert len(dots) == 0
        return
    assert 50 < len(dots) < 2 * 700
    assert np.all(np.einsum("ni,ij,nj->n", dots, PATTERNS[name], dots) < 0)


def test_the_antisymmetric_part_shows_in_the_flux_surface_alone() -> None:
    twist = np.array([[0.0, 0.8, -0.3], [-0.8, 0.0, 0.5], [0.3, -0.5, 0.0]])
    general = Kind("polar", "general")
    bare, twisted = make_subject(ELLIPSOID, kind=general), make_subject(ELLIPSOID + twist, kind=general)
    directions = spread_directions(50)
    for kind in ("quadric", "value"):
        np.testing.assert_allclose(twisted.scene(kind).radius(directions), bare.scene(kind).radius(directions))
    scene = twisted.scene("flux")
    expected = measure(ELLIPSOID + twist, "flux", directions) * scene.factor
    np.testing.assert_allclose(scene.radius(directions), expected)
    check_message(twisted, "flux")
    change = scene.radius(directions) - bare.scene("flux").radius(directions)
    assert np.max(np.abs(change)) > 1e-3


def test_a_scene_is_made_once() -> None:
    subject = make_subject(ELLIPSOID, TRICLINIC)
    assert subject.scene("quadric") is subject.scene("quadric")
    assert subject.scene("value") is not subject.scene("quadric")
