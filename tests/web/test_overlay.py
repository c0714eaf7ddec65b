"""What is drawn over the scene: the outline by the dual conic, marks by their planes and radii, depth by solving rays.

Seen along d, the quadric xᵀA x = ±1 has the outline uᵀ(P A⁻¹ Pᵀ)⁻¹u = ±1, where P (2 × 3) takes a point to the screen:
tangent planes that contain d are the tangents of the dual conic (projective geometry; derived here, with no use of
dᵀA x = 0).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import Crystal, build_crystal
from app.tensor.surface import SurfaceKind
from app.web.overlay import LONGEST_EDGE, SPINE, draw_overlay
from app.web.scene import Scene, Subject
from app.web.settling import Settling
from app.web.strokes import Shape
from app.web.turning import View
from tests.crystal.reference import CELLS
from tests.web.paths import PIXELS, ROUNDING, read_centre, read_path, to_screen
from tests.web.subjects import (
    ELLIPSOID,
    MONOCLINIC,
    ONE_SHEET,
    PATTERNS,
    make_subject,
    random_rotation,
)

FloatArray = npt.NDArray[np.float64]

LABELS = {letter: {"value": "1.0", "place": ""} for letter in "xyz"}
SUBJECTS = {name: make_subject(matrix) for name, matrix in PATTERNS.items()}
KEPT = np.array([[13.2, 0.0, 1.85], [0.0, 24.6, 0.0], [1.85, 0.0, 15.9]])
KNOWN = make_subject(KEPT, MONOCLINIC, covariance=np.diag([0.3, 0.2, 0.4, 0.3]) ** 2)
seeds = st.integers(0, 2**32 - 1)


def draw(
    subject: Subject, kind: SurfaceKind, screen: FloatArray, pose: FloatArray | None = None
) -> tuple[list[Shape], list[Shape]]:
    """Shapes and texts with the crystal held and seen so, v_screen = screen · v_crystal."""
    held = np.eye(3) if pose is None else pose
    drawn = draw_overlay(subject, subject.scene(kind), held, View("crystal", screen), LABELS)
    assert set(drawn) == {"shapes", "texts"}
    return drawn["shapes"], drawn["texts"]


def collect(shapes: list[Shape], *names: str) -> list[Shape]:
    return [entry for entry in shapes if entry["class"] in names and entry["d"]]


def read_lines(shapes: list[Shape], *names: str) -> list[FloatArray]:
    return [line for entry in collect(shapes, *names) for line in read_path(entry["d"])]


def is_hidden(scene: Scene, point: FloatArray, toward: FloatArray, beyond: float = 0.0) -> bool:
    """Whether the quadric stands before a world point, by the roots of its two quadratics along the line of sight."""
    a, b = toward @ scene.matrix @ toward, point @ scene.matrix @ toward
    cut = np.inf if scene.cut is None else scene.cut
    for sign in (1.0, -1.0):
        inside = b**2 - a * (point @ scene.matrix @ point - sign * scene.factor**2)
        for root in (-1.0, 1.0):
            if inside >= 0:
                way = (-b + root * np.sqrt(inside)) / a
                if way > beyond and np.linalg.norm(point + way * toward) <= cut:
                    return True
    return False


# Order and layers -----------------------------------------------------------------------------------------------------


@settings(max_examples=10, deadline=None)
@given(seeds, seeds)
def test_the_back_layer_comes_first_and_holds_only_the_block(seed: int, other: int) -> None:
    shapes, _ = draw(KNOWN, "quadric", random_rotation(seed), random_rotation(other))
    layers = [entry["layer"] for entry in shapes]
    assert layers == sorted(layers)
    behind = {entry["class"] for entry in shapes if entry["layer"] == "back"}
    assert behind <= {"far-edge", "axis", "head", "cross", "hand", "hand-head"}
    # What belongs to the specimen is painted over what belongs to the crystal.
    classes = [entry["class"] for entry in shapes if entry["layer"] == "front"]
    assert classes.index("outline") < classes.index("crystal") < classes.index("edge")


@pytest.mark.parametrize("seed", range(3))
def test_turning_the_specimen_moves_the_block_and_nothing_of_the_crystal(seed: int) -> None:
    screen = random_rotation(seed)
    first, _ = draw(KNOWN, "quadric", screen, random_rotation(seed + 100))
    second, _ = draw(KNOWN, "quadric", screen, random_rotation(seed + 200))
    crystals = ("outline", "mirror", "region", "region area", "crystal", "principal", "principal locked", "diamond")
    assert collect(first, *crystals) == collect(second, *crystals)
    assert collect(first, "edge") != collect(second, "edge")


@settings(max_examples=10, deadline=None)
@given(seeds, seeds)
def test_holding_the_specimen_or_the_crystal_is_one_picture(seed: int, other: int) -> None:
    pose = random_rotation(other)
    view = View("specimen", random_rotation(seed))
    scene = KNOWN.scene("quadric")
    one = draw_overlay(KNOWN, scene, pose, view, LABELS)
    two = draw_overlay(KNOWN, scene, pose, view.exchange("crystal", pose), LABELS)
    # But for rounding in the last printed digit.
    assert len(one["shapes"]) == len(two["shapes"])
    for first, second in zip(one["shapes"], two["shapes"], strict=True):
        assert (first["layer"], first["class"]) == (second["layer"], second["class"])
    for first, second in zip(read_lines(one["shapes"], "edge"), read_lines(two["shapes"], "edge"), strict=True):
        np.testing.assert_allclose(first, second, atol=2 * ROUNDING)


# The outline ----------------------------------------------------------------------------------------------------------


def check_outline(name: str, seed: int) -> None:
    subject, screen = SUBJECTS[name], random_rotation(seed)
    scene = subject.scene("quadric")
    shapes, _ = draw(subject, "quadric", screen)
    project = screen[:2]
    dual = project @ np.linalg.inv(scene.matrix) @ project.T
    # Seen nearly edge on the conic is a line and its inverse has no digits.
    if abs(np.linalg.det(dual)) < 1e-2 * np.linalg.norm(dual) ** 2:
        return
    conic = np.linalg.inv(dual) / scene.factor**2
    for mark, sign in (("outline", 1.0), ("outline minus", -1.0)):
        for line in read_lines(shapes, mark):
            value = np.einsum("ni,ij,nj->n", line, conic, line)
            slope = 2.0 * np.linalg.norm(line @ conic, axis=1)
            assert np.all(np.abs(value - sign) <= 2 * ROUNDING * slope + 1e-3)


@settings(max_examples=10, deadline=None)
@given(seeds)
def test_the_outline_is_the_dual_conic(seed: int) -> None:
    for name in PATTERNS:
        check_outline(name, seed)


@settings(max_examples=15, deadline=None)
@given(seeds)
def test_the_outline_of_an_ellipsoid_is_closed_whole_and_unhidden(seed: int) -> None:
    for name, mark in (("ellipsoid", "outline"), ("imaginary", "outline minus")):
        shapes, _ = draw(SUBJECTS[name], "quadric", random_rotation(seed))
        (entry,) = collect(shapes, "outline", "outline minus")
        assert (entry["class"], entry["layer"]) == (mark, "front")
        assert entry["d"].endswith("Z")
        (line,) = read_path(entry["d"])
        # Once around the middle.
        angles = np.unwrap(np.arctan2(line[:, 1], line[:, 0]))
        assert abs(angles[-1] - angles[0]) == pytest.approx(2 * np.pi, abs=1e-2)


def test_the_ends_of_the_axes_are_the_outline_along_an_axis() -> None:
    # By hand: seen along x3, diag(4, 1, 9) shows the ellipse with half axes 1/2 and 1, and the largest radius is 1.
    subject = make_subject(np.diag([4.0, 1.0, 9.0]))
    shapes, _ = draw(subject, "quadric", np.eye(3))
    (line,) = read_lines(shapes, "outline")
    reach = subject.scene("quadric").reach
    np.testing.assert_allclose(np.max(line, axis=0), np.array([0.5, 1.0]) * reach, atol=1e-3)
    np.testing.assert_allclose(np.min(line, axis=0), np.array([-0.5, -1.0]) * reach, atol=1e-3)


@settings(max_examples=12, deadline=None)
@given(seeds)
def test_of_open_sheets_no_hidden_part_of_the_outline_is_drawn(seed: int) -> None:
    subject, screen = SUBJECTS["one sheet"], random_rotation(seed)
    scene = subject.scene("quadric")
    shapes, _ = draw(subject, "quadric", screen)
    inverse = np.linalg.inv(scene.matrix)
    project, toward = screen[:2], screen[2]
    dual = project @ inverse @ project.T
    if abs(np.linalg.det(dual)) < 1e-2 * np.linalg.norm(dual) ** 2:
        return
    for line in read_lines(shapes, "outline", "outline minus"):
        # The point of contact: x = A⁻¹Pᵀ(P A⁻¹ Pᵀ)⁻¹ u, the only one seen at u whose normal A x lies across d.
        points = line @ np.linalg.inv(dual) @ project @ inverse
        np.testing.assert_allclose(points @ project.T, line, atol=1e-9)
        # There the line of sight touches the sheet, so what hides it is met well beyond.
        hidden = [is_hidden(scene, point, toward, 0.25 * scene.reach) for point in points[1:-1]]
        # A part between two steps of the walk along the line of sight may be missed.
        assert np.count_nonzero(hidden) <= 0.1 * len(hidden) + 1


@pytest.mark.parametrize("kind", ["value", "flux"])
@settings(max_examples=10, deadline=None)
@given(seed=seeds)
def test_the_rim_of_the_other_surfaces_reaches_as_far_as_the_surface_does(kind: SurfaceKind, seed: int) -> None:
    screen = random_rotation(seed)
    subject = SUBJECTS["ellipsoid"]
    scene = subject.scene(kind)
    shapes, _ = draw(subject, kind, screen)
    rim = np.concatenate(read_lines(shapes, "outline"))
    # A far finer mesh of directions than the scene's own, by the definition of each surface.
    drawn = np.random.default_rng(1).normal(size=(20_000, 3))
    directions = drawn / np.linalg.norm(drawn, axis=1, keepdims=True)
    radii = np.linalg.norm(directions @ scene.matrix, axis=1)
    if kind == "value":
        radii = np.einsum("ni,ij,nj->n", directions, scene.matrix, directions)
    seen = (directions * radii[:, None] * scene.factor) @ screen[:2].T
    for angle in np.linspace(0.0, 2 * np.pi, 16, endpoint=False):
        way = np.array([np.cos(angle), np.sin(angle)])
        assert np.max(rim @ way) == pytest.approx(np.max(seen @ way), abs=0.012 * scene.reach)


def test_a_surface_of_nothing_has_no_outline_and_no_marks() -> None:
    subject = make_subject(np.zeros((3, 3)))
    for kind in ("quadric", "value", "flux"):
        shapes, texts = draw(subject, kind, random_rotation(3))
        assert not collect(shapes, "outline", "outline minus")
        assert not [entry for entry in texts if entry["class"] == "level"]
        # The block and the crystal's axes are still there.
        assert len(collect(shapes, "edge")) == 9
        assert len(collect(shapes, "ring")) == 3


# Marks on the surface -------------------------------------------------------------------------------------------------


@settings(max_examples=15, deadline=None)
@given(seeds)
def test_a_mirror_is_drawn_where_it_cuts_the_near_side(seed: int) -> None:
    screen = random_rotation(seed)
    scene, toward = KNOWN.scene("quadric"), screen[2]
    # The mirror of 2/m is across b, which is x2 in the rule x3=c x2=b*.
    if not 0.2 < abs(toward[1]) < 0.9:
        return
    shapes, _ = draw(KNOWN, "quadric", screen)
    # In the plane x2 = 0 the place on the screen says which point it is.
    across = np.array([[1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    solve = np.linalg.inv(screen[:2] @ across.T)
    points = np.concatenate(read_lines(shapes, "mirror")) @ solve.T @ across
    angles = np.linspace(0.0, 2 * np.pi, 361)
    directions = np.cos(angles)[:, None] * across[0] + np.sin(angles)[:, None] * across[1]
    section = directions * scene.factor / np.sqrt(np.einsum("ni,ij,nj->n", directions, KEPT, directions))[:, None]
    # Toward the viewer: the outward normal A x has a part along the line of sight.
    facing = section @ KEPT @ toward / np.linalg.norm(section @ KEPT, axis=1)
    apart = np.linalg.norm(points[:, None] - section[None], axis=2)
    slack = 3 * ROUNDING / abs(toward[1])
    # Every point drawn is one of the section, not of its far half; every point of the near half is drawn.
    assert np.max(np.min(apart, axis=1)) < slack + 0.005
    assert np.min(facing[np.argmin(apart, axis=1)]) > -0.3
    assert np.max(np.min(apart, axis=0)[facing > 0.1]) < slack + 0.02


def test_many_mirrors_are_not_drawn() -> None:
    subject = make_subject(np.eye(3), build_crystal(CELLS["cubic"], "m-3m"))
    assert not collect(draw(subject, "quadric", random_rotation(2))[0], "mirror")


@settings(max_examples=10, deadline=None)
@given(seeds)
def test_regions_lie_on_the_near_side_of_the_surface(seed: int) -> None:
    screen = random_rotation(seed)
    scene = KNOWN.scene("quadric")
    shapes, _ = draw(KNOWN, "quadric", screen)
    expected = [(kind, curve) for kind, curve in KNOWN.regions]
    assert expected
    seen = []
    for kind, curve in expected:
        values = np.einsum("ni,ij,nj->n", curve, KEPT, curve)
        points = curve * (scene.factor / np.sqrt(values))[:, None]
        if np.all(points @ KEPT @ screen[2] / np.linalg.norm(points @ KEPT, axis=1) > 0.3):
            seen.append(("region" if kind == "line" else "region area", points @ screen[:2].T))
    for name, points in seen:
        lines = read_lines(shapes, name)
        assert any(len(line) == len(points) and np.allclose(line, points, atol=2 * ROUNDING) for line in lines)


@settings(max_examples=10, deadline=None)
@given(seeds)
def test_numbers_stand_on_their_own_heavy_line_and_apart_from_each_other(seed: int) -> None:
    screen = random_rotation(seed)
    subject = SUBJECTS["ellipsoid"]
    scene = subject.scene("quadric")
    _, texts = draw(subject, "quadric", screen)
    numbers = [entry for entry in texts if entry["class"] == "level"]
    places = np.array([to_screen([entry["x"], entry["y"]]) for entry in numbers]).reshape(-1, 2)
    assert numbers
    for entry, place in zip(numbers, places, strict=True):
        value = float(entry["runs"][0][0].replace("−", "-"))
        # The points of the surface seen there, by the roots along the line of sight; the near one counts.
        start = place @ screen[:2]
        a, b = screen[2] @ ELLIPSOID @ screen[2], start @ ELLIPSOID @ screen[2]
        inside = b**2 - a * (start @ ELLIPSOID @ start - (scene.factor * 1.004) ** 2)
        point = start + screen[2] * (-b + np.sqrt(max(inside, 0.0))) / a
        assert point @ ELLIPSOID @ point / (point @ point) == pytest.approx(value, abs=0.2)
        assert value / scene.levels.heavy_step == pytest.approx(round(value / scene.levels.heavy_step))
        assert -90.0 <= entry["rotate"] <= 90.0
    for number, place in enumerate(places):
        assert all(np.linalg.norm(place - other) > 0.07 for other in places[:number])


# Axes -----------------------------------------------------------------------------------------------------------------


@settings(max_examples=12, deadline=None)
@given(seeds)
def test_the_crystals_axes_run_to_scale_from_the_middle_and_are_named(seed: int) -> None:
    screen = random_rotation(seed)
    cell = (4.0, 8.0, 6.0, 81.0, 97.0, 104.0)
    subject = make_subject(ELLIPSOID, build_crystal(cell, "1"), part=(5.0, 5.0, 1.5))
    scene = subject.scene("quadric")
    shapes, texts = draw(subject, "quadric", screen)
    basis = subject.crystal.require_basis()
    # Longest edge 8 Å; the others by their lengths.
    tips = basis / 8.0 * LONGEST_EDGE
    assert np.min(np.linalg.norm(tips, axis=0)) > scene.reach * 1.06
    tips = (screen @ tips).T
    rings = [read_centre(entry["d"]) for entry in collect(shapes, "ring")]
    letters = {
        entry["runs"][0][0]: to_screen([entry["x"], entry["y"]])
        for entry in texts
        if "crystal-letter" in entry["class"]
    }
    shown = 0
    for letter, edge, tip in zip("abc", basis.T, tips, strict=True):
        if is_hidden(scene, edge / 8.0 * LONGEST_EDGE, screen[2]):
            continue
        shown += 1
        assert any(np.allclose(ring, tip[:2], atol=2 * ROUNDING) for ring in rings)
        assert np.linalg.norm(letters[letter] - tip[:2]) < 0.15
    # No ring or letter at the tip of an axis that the surface hides, but for what lies within one step of the walk.
    assert shown <= len(rings) == len(letters) <= 3
    # Whole or dotted, every axis is one straight run from the middle to its tip.
    for tip in tips:
        size = np.linalg.norm(tip[:2])
        if size < 0.05:
            continue
        along = tip[:2] / size
        own = [
            line
            for line in read_lines(shapes, "crystal", "dots")
            if np.all(np.abs(line @ [-along[1], along[0]]) < 3 * ROUNDING) and np.all(line @ along > -ROUNDING)
        ]
        assert max(np.max(line @ along) for line in own) == pytest.approx(size, abs=3 * ROUNDING)
        assert min(np.min(line @ along) for line in own) < 0.03


def test_a_short_edge_is_lengthened_until_it_leaves_the_surface() -> None:
    subject = make_subject(ELLIPSOID, build_crystal((2.0, 9.0, 9.0, 90.0, 90.0, 90.0), "1"))
    shapes, _ = draw(subject, "quadric", np.eye(3))
    # a lies along x1 in the rule x3=c x2=b*, to the right here.
    reach = max(float(np.max(line[:, 0])) for line in read_lines(shapes, "crystal"))
    assert reach == pytest.approx(1.06 * subject.scene("quadric").reach, abs=2 * ROUNDING)


@settings(max_examples=12, deadline=None)
@given(seeds)
def test_what_is_hidden_of_an_axis_is_dots(seed: int) -> None:
    screen = random_rotation(seed)
    subject = SUBJECTS["ellipsoid"]
    scene = subject.scene("quadric")
    shapes, _ = draw(subject, "quadric", screen)
    values, vectors = np.linalg.eigh(ELLIPSOID)
    flats = (screen[:2] @ np.concatenate([vectors, subject.crystal.require_basis()], axis=1)).T
    flats /= np.linalg.norm(flats, axis=1)[:, None]
    for axis, value in zip(vectors.T, values, strict=True):
        # Where another axis is seen along the same line the two cannot be told apart.
        along = screen[:2] @ axis / np.linalg.norm(screen[:2] @ axis)
        if np.count_nonzero(np.abs(flats @ [-along[1], along[0]]) < 0.1) > 1:
            continue
        for sense in (1.0, -1.0):
            tip = sense * axis * (scene.factor / np.sqrt(value) + SPINE)
            flat = screen[:2] @ tip
            size = float(np.linalg.norm(flat))
            if size < 0.2:
                continue
            along = flat / size
            whole, dotted = (
                [
                    line
                    for line in read_lines(shapes, name)
                    if np.all(np.abs(line @ [-along[1], along[0]]) < 3 * ROUNDING)
                    and np.all(line @ along > -ROUNDING)
                    and np.max(line @ along) <= size + 3 * ROUNDING
                ]
                for name in ("principal", "dots")
            )
            # Where the visible part begins, by the roots at many points of the axis.
            parts = np.linspace(0.0, 1.0, 400)
            hidden = np.array([is_hidden(scene, part * tip, screen[2], 0.012) for part in parts])
            begins = parts[~hidden][0] * size if np.any(~hidden) else size
            step = size / 47
            assert min((np.min(line @ along) for line in whole), default=size) == pytest.approx(begins, abs=2.5 * step)
            assert max((np.max(line @ along) for line in dotted), default=0.0) == pytest.approx(begins, abs=2.5 * step)


@settings(max_examples=12, deadline=None)
@given(seeds, st.sampled_from(["ellipsoid", "one sheet", "two sheets"]))
def test_principal_axes_end_in_diamonds_filled_and_open(seed: int, name: str) -> None:
    screen, subject = random_rotation(seed), SUBJECTS[name]
    scene = subject.scene("quadric")
    shapes, texts = draw(subject, "quadric", screen)
    filled = [read_centre(entry["d"]) for entry in collect(shapes, "diamond")]
    open_ones = [read_centre(entry["d"]) for entry in collect(shapes, "diamond open")]
    names = [entry for entry in texts if entry["class"] == "principal-letter"]
    assert len(names) == len(filled)
    for number, axis in enumerate(subject.principal.axes):
        value = abs(axis @ scene.matrix @ axis)
        tip = axis * (scene.factor / np.sqrt(value) + SPINE)
        for sense, places in ((1.0, filled), (-1.0, open_ones)):
            if is_hidden(scene, sense * tip, screen[2]):
                continue
            assert any(np.allclose(place, sense * screen[:2] @ tip, atol=2 * ROUNDING) for place in places)
            if sense > 0:
                assert [["p", "symbol"], [str(number + 1), "sub"]] in [entry["runs"] for entry in names]


def test_axes_that_symmetry_holds_are_marked_and_arbitrary_ones_not_drawn() -> None:
    screen = random_rotation(8)
    held, _ = draw(KNOWN, "quadric", screen)
    # 2/m holds p1 along b and neither p2 nor p3.
    assert len(collect(held, "principal locked")) in (1, 2)
    assert collect(held, "principal")
    uniaxial = make_subject(np.diag([2.0, 2.0, 5.0]), build_crystal(CELLS["hexagonal"], "6/mmm"))
    shapes, texts = draw(uniaxial, "quadric", screen)
    assert not collect(shapes, "principal")
    runs = [entry["runs"] for entry in texts if entry["class"].startswith("principal-letter")]
    assert runs in ([], [[["p", "symbol"], ["1", "sub"]]])
    isotropic = make_subject(np.eye(3), build_crystal(CELLS["cubic"], "m-3m"))
    assert not collect(draw(isotropic, "quadric", screen)[0], "principal", "principal locked", "diamond")


@pytest.mark.parametrize(("name", "kind", "said"), [
    ("ellipsoid", "quadric", True), ("ellipsoid", "value", False), ("one sheet", "quadric", False),
    ("two sheets", "quadric", False), ("imaginary", "quadric", False),
])  # fmt: skip
def test_long_is_small_is_said_of_an_ellipsoid_alone(name: str, kind: SurfaceKind, said: bool) -> None:
    found = []
    for seed in range(12):
        _, texts = draw(SUBJECTS[name], kind, random_rotation(seed))
        found.append([entry for entry in texts if entry["class"] == "remark"])
    assert any(found) == said
    assert all(len(entries) <= 1 for entries in found)


def test_the_remark_stands_at_the_longest_axis() -> None:
    axis = np.linalg.eigh(ELLIPSOID)[1][:, 0]
    subject = SUBJECTS["ellipsoid"]
    axis = axis if axis @ subject.principal.axes[2] > 0 else -axis
    # Seen across it, its open end to the right.
    second = np.cross(axis, [0.0, 0.0, 1.0])
    second /= np.linalg.norm(second)
    screen = np.array([-axis, second, np.cross(-axis, second)])
    # The block stands so that none of its labels is in the way.
    _, texts = draw(subject, "quadric", screen, random_rotation(2))
    (remark,) = [entry for entry in texts if entry["class"] == "remark"]
    reach = subject.scene("quadric").reach + SPINE
    np.testing.assert_allclose(
        to_screen([remark["x"], remark["y"]]), [reach + 12 / PIXELS, -5 / PIXELS], atol=2 * ROUNDING
    )


# What would settle the tensor -----------------------------------------------------------------------------------------


@settings(max_examples=12, deadline=None)
@given(seeds)
def test_targets_lie_on_the_surface_on_whichever_end_is_seen(seed: int) -> None:
    screen = random_rotation(seed)
    direction = np.array([0.48, 0.6, 0.64])
    subject = make_subject(ELLIPSOID, settling=Settling(direction[None], "One more would settle it."))
    shapes, _ = draw(subject, "quadric", screen)
    scene = subject.scene("quadric")
    point = direction * scene.factor / np.sqrt(direction @ ELLIPSOID @ direction)
    facing = point @ ELLIPSOID @ screen[2] / np.linalg.norm(point @ ELLIPSOID)
    targets = collect(shapes, "target")
    # Clear of the rim, just one of the two ends faces the viewer; right behind the surface is left to itself.
    if not 0.25 < abs(facing) < 0.95:
        return
    (target,) = targets
    np.testing.assert_allclose(read_centre(target["d"]), np.sign(facing) * screen[:2] @ point, atol=2 * ROUNDING)
    assert target["d"].count("M") == 2


def test_a_target_where_there_is_no_surface_stands_at_its_largest_radius() -> None:
    # diag(4, 1, −1) is zero along (1, 0, 2)/√5, by hand.
    direction = np.array([1.0, 0.0, 2.0]) / np.sqrt(5.0)
    subject = make_subject(np.diag([4.0, 1.0, -1.0]), settling=Settling(direction[None], "One more."))
    screen = np.array([[1.0, 0.0, 0.0], [0.0, 0.0, 1.0], [0.0, -1.0, 0.0]])
    shapes, _ = draw(subject, "quadric", screen)
    reach = subject.scene("quadric").reach
    expected = [sense * reach * screen[:2] @ direction for sense in (1.0, -1.0)]
    for target in collect(shapes, "target"):
        assert any(np.allclose(read_centre(target["d"]), place, atol=2 * ROUNDING) for place in expected)


# Every crystal --------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("family", sorted(CELLS))
@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_everything_drawn_is_finite_and_names_its_layer(family: str, kind: SurfaceKind) -> None:
    crystal: Crystal = build_crystal(CELLS[family], "1")
    for matrix in (ELLIPSOID, ONE_SHEET, np.diag([1.0, 0.0, 0.0]), np.diag([1.0, 1.0, -1e-12]), np.eye(3)):
        shapes, texts = draw(make_subject(matrix, crystal), kind, random_rotation(11), random_rotation(12))
        drawn: list[Any] = [*shapes, *texts]
        assert "nan" not in str(drawn)
        assert "inf" not in str(drawn)
        assert {entry["layer"] for entry in shapes} == {"front", "back"}


def test_without_a_cell_there_are_no_axes_of_a_crystal() -> None:
    shapes, texts = draw(
        make_subject(np.diag([2.0, 2.0, 5.0]), build_crystal(None, "∞m")), "quadric", random_rotation(1)
    )
    assert not collect(shapes, "crystal", "ring")
    assert not [entry for entry in texts if entry["class"] == "crystal-letter"]
