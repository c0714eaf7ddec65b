"""The block in true depth: which edges and faces are hidden is found by looking from them toward the viewer."""

from __future__ import annotations

from itertools import product
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.web.block import OFFSET, RING, RING_AT, STEM, draw_block, print_length
from app.web.strokes import Shape
from tests.web.paths import ROUNDING, read_path, to_screen
from tests.web.subjects import ELLIPSOID, ONE_SHEET, PATTERNS, make_subject, random_rotation

FloatArray = npt.NDArray[np.float64]

LABELS = {letter: {"value": f"1{number}.5(2)", "place": f"on [00{number}]"} for number, letter in enumerate("xyz")}
seeds = st.integers(0, 2**32 - 1)
parts = st.tuples(*[st.floats(2.0, 9.0)] * 3)


def draw(part: tuple[float, float, float], screen: FloatArray) -> tuple[list[Shape], list[Shape], FloatArray]:
    """Shapes, texts and the half sides of a block seen so, v_screen = screen · v_specimen."""
    subject = make_subject(ELLIPSOID, part=part)
    shapes: list[Shape] = []
    texts: list[Shape] = []
    draw_block(subject, screen, shapes, LABELS, texts)
    return shapes, texts, np.array(part) / np.linalg.norm(part)


def collect(shapes: list[Shape], name: str) -> list[Shape]:
    return [entry for entry in shapes if entry["class"] == name]


def list_edges(half: FloatArray) -> list[FloatArray]:
    """The twelve edges as pairs of corners: those of a cube's corners that differ in one coordinate."""
    corners = [np.array(signs) * half for signs in product((-1.0, 1.0), repeat=3)]
    return [
        np.array([first, second])
        for number, first in enumerate(corners)
        for second in corners[number + 1 :]
        if np.count_nonzero(first != second) == 1
    ]


def is_seen(point: FloatArray, half: FloatArray, toward: FloatArray) -> bool:
    """Whether no part of the solid block stands between a point on it and the viewer."""
    walk = point + np.geomspace(1e-7, 3.0, 200)[:, None] * toward
    return not np.any(np.all(np.abs(walk) < half * (1 - 1e-12), axis=1))


def same_segment(one: FloatArray, other: FloatArray) -> bool:
    return any(np.allclose(one, order, atol=2 * ROUNDING) for order in (other, other[::-1]))


def is_generic(screen: FloatArray) -> bool:
    """No face is seen edge on, and no edge end on."""
    return bool(np.min(np.abs(screen[2])) > 0.05)


# Edges ----------------------------------------------------------------------------------------------------------------


@settings(max_examples=60, deadline=None)
@given(parts, seeds)
def test_the_edges_behind_are_those_that_the_block_hides(part: tuple[float, float, float], seed: int) -> None:
    screen = random_rotation(seed)
    if not is_generic(screen):
        return
    shapes, _, half = draw(part, screen)
    toward = screen[2]
    hidden = [edge for edge in list_edges(half) if not is_seen(edge.mean(axis=0), half, toward)]
    # Three that meet in the corner farthest from the viewer.
    assert len(hidden) == 3
    (behind,) = collect(shapes, "far-edge")
    assert behind["layer"] == "back"
    drawn = read_path(behind["d"])
    assert len(drawn) == 3
    for edge in hidden:
        assert any(same_segment(line, (edge @ screen.T)[:, :2]) for line in drawn)


@settings(max_examples=60, deadline=None)
@given(parts, seeds)
def test_every_other_edge_is_drawn_before_the_scene(part: tuple[float, float, float], seed: int) -> None:
    screen = random_rotation(seed)
    if not is_generic(screen):
        return
    shapes, _, half = draw(part, screen)
    toward = screen[2]
    seen = [edge for edge in list_edges(half) if is_seen(edge.mean(axis=0), half, toward)]
    strokes = collect(shapes, "edge")
    assert {entry["layer"] for entry in strokes} == {"front"}
    assert len(strokes) == len(seen) == 9
    drawn = []
    for entry in strokes:
        (corners,) = read_path(entry["d"])
        drawn.append(np.array([corners[[0, 3]].mean(axis=0), corners[[1, 2]].mean(axis=0)]))
    for edge in seen:
        assert any(same_segment(line, (edge @ screen.T)[:, :2]) for line in drawn)
    # The three that meet in the nearest corner cross the picture, so a halo breaks what is behind them.
    halos = [read_path(entry["d"])[0] for entry in collect(shapes, "halo wide")]
    nearest = (np.sign(toward) * half) @ screen.T
    assert len(halos) == 3
    for line in halos:
        assert np.min(np.linalg.norm(line - nearest[:2], axis=1)) < 2 * ROUNDING
    # And are painted before any stroke, so that no halo breaks another edge.
    order = [entry["class"] for entry in shapes if entry["class"] in ("halo wide", "edge")]
    assert order == ["halo wide"] * 3 + ["edge"] * 9


@settings(max_examples=30, deadline=None)
@given(seeds, st.sampled_from(sorted(PATTERNS)))
def test_the_edges_behind_are_behind_the_surface_and_those_before_it_before_it(seed: int, name: str) -> None:
    # A point of an edge and a vertex of the mesh on one line of sight: the vertex is nearer by more than nothing for
    # an edge of the back layer, farther for a nearest edge. True because the block encloses the surface.
    screen = random_rotation(seed)
    if not is_generic(screen):
        return
    subject = make_subject(PATTERNS[name])
    scene = subject.scene("quadric")
    # The specimen stands as the crystal does.
    surface = scene.surface.vertices * scene.factor @ screen.T
    half, toward = subject.half, screen[2]
    for edge in list_edges(half):
        along = np.linspace(0.0, 1.0, 40)[:, None] * (edge[1] - edge[0]) + edge[0]
        drawn = along @ screen.T
        apart = np.linalg.norm(surface[:, None, :2] - drawn[None, :, :2], axis=2)
        vertex, point = np.nonzero(apart < 0.02)
        depth = surface[vertex, 2] - drawn[point, 2]
        if not is_seen(edge.mean(axis=0), half, toward):
            assert np.all(depth > 0)
        elif np.any(np.all(np.isclose(edge, np.sign(toward) * half), axis=1)):
            assert np.all(depth < 0)


def test_face_on_the_far_face_is_behind_and_the_near_one_before() -> None:
    shapes, _, half = draw((4.0, 5.0, 6.0), np.eye(3))
    strokes = [read_path(entry["d"])[0] for entry in collect(shapes, "edge") if entry["d"]]
    outline = np.array([[1, 1], [1, -1], [-1, -1], [-1, 1]]) * half[:2]
    assert len(strokes) == 4
    for start, end in zip(outline, np.roll(outline, -1, axis=0), strict=True):
        assert any(
            same_segment(np.array([line[[0, 3]].mean(axis=0), line[[1, 2]].mean(axis=0)]), np.array([start, end]))
            for line in strokes
        )
    (behind,) = collect(shapes, "far-edge")
    # The far face's four, under the near ones, and four end on.
    assert len(read_path(behind["d"])) == 8


# Faces, axes, handles -------------------------------------------------------------------------------------------------


@settings(max_examples=40, deadline=None)
@given(parts, seeds)
def test_the_block_is_taken_hold_of_on_its_visible_faces(part: tuple[float, float, float], seed: int) -> None:
    screen = random_rotation(seed)
    shapes, _, half = draw(part, screen)
    (hold,) = collect(shapes, "hold")
    assert (hold["layer"], hold["hold"]) == ("front", "block")
    faces = read_path(hold["d"])
    assert len(faces) == 3
    areas = []
    for face in faces:
        x, y = face.T
        # Gauss's area formula.
        areas.append(abs(np.sum(x * np.roll(y, -1) - y * np.roll(x, -1))) / 2)
    # A face of area a whose normal n makes n·d with the line of sight shows a |n·d|.
    expected = 4 * np.prod(half) / half * np.abs(screen[2])
    np.testing.assert_allclose(areas, expected, atol=6 * ROUNDING)
    # Together they are the silhouette: every corner but the hidden one is on them, the nearest on all three.
    nearest = (np.where(screen[2] > 0, 1.0, -1.0) * half) @ screen.T
    for face in faces:
        assert np.min(np.linalg.norm(face - nearest[:2], axis=1)) < 2 * ROUNDING


@settings(max_examples=60, deadline=None)
@given(parts, seeds)
def test_axes_stand_out_of_their_faces_in_true_depth(part: tuple[float, float, float], seed: int) -> None:
    screen = random_rotation(seed)
    if not is_generic(screen):
        return
    shapes, _, half = draw(part, screen)
    axes, heads = collect(shapes, "axis"), collect(shapes, "head")
    assert len(axes) == len(heads) == 3
    found = set()
    for entry, head in zip(axes, heads, strict=True):
        (line,), (corners,) = read_path(entry["d"]), read_path(head["d"])
        for number in range(3):
            foot = np.eye(3)[number] * half[number]
            if np.linalg.norm(line[0] - (foot @ screen.T)[:2]) < 2 * ROUNDING:
                break
        found.add(number)
        tip = (foot + np.eye(3)[number] * STEM) @ screen.T
        np.testing.assert_allclose(corners[0], tip[:2], atol=2 * ROUNDING)
        # The shaft ends within its head, on the line from foot to tip.
        way = tip[:2] - line[0]
        assert abs(np.linalg.det([way, line[1] - line[0]])) < 6 * ROUNDING
        # In front where its foot is seen.
        layer = "front" if is_seen(foot, half, screen[2]) else "back"
        assert entry["layer"] == head["layer"] == layer
    assert found == {0, 1, 2}


@settings(max_examples=40, deadline=None)
@given(seeds)
def test_values_stand_at_the_tips_and_z_says_where_it_is(seed: int) -> None:
    screen = random_rotation(seed)
    _, texts, half = draw((5.0, 5.0, 6.0), screen)
    for number, letter in enumerate("xyz"):
        (text,) = [entry for entry in texts if entry["class"] == f"tip tip-{letter}"]
        assert text["runs"] == [[letter, "symbol"], [f" {LABELS[letter]['value']}", "value"]]
        tip = (np.eye(3)[number] * (half[number] + STEM)) @ screen.T
        assert np.linalg.norm(to_screen([text["x"], text["y"]]) - tip[:2]) < 0.13
        assert text["anchor"] in ("start", "middle", "end")
    (place,) = [entry for entry in texts if entry["class"] == "tip-place"]
    assert place["runs"] == [[LABELS["z"]["place"], "plain"]]


@settings(max_examples=40, deadline=None)
@given(seeds)
def test_each_axis_has_a_ring_to_be_held_that_lies_across_it(seed: int) -> None:
    screen = random_rotation(seed)
    shapes, _, half = draw((5.0, 5.0, 6.0), screen)
    rings = {entry["hold"]: entry for entry in collect(shapes, "ring-hold")}
    assert set(rings) == {"x", "y", "z"}
    for number, letter in enumerate("xyz"):
        # The hand can take it also where it is drawn behind.
        assert rings[letter]["layer"] == "front"
        if abs(screen[2, number]) < 0.3:
            continue
        # A place in the plane across the axis follows from where it is seen, unless that plane is seen edge on.
        (points,) = read_path(rings[letter]["d"])
        across = [(number + 1) % 3, (number + 2) % 3]
        middle = screen[:2, number] * (half[number] + RING_AT)
        inner = np.linalg.solve(screen[:2, across], (points - middle).T).T
        np.testing.assert_allclose(np.linalg.norm(inner, axis=1), RING, atol=6 * ROUNDING)
        # Nearly a half circle, and the middle of it is the point nearest to the viewer.
        turned = np.unwrap(np.arctan2(inner[:, 1], inner[:, 0]))
        assert abs(np.rad2deg(turned[-1] - turned[0])) == pytest.approx(144.0, abs=2.0)
        if abs(screen[2, number]) < 0.95:
            assert np.argmax(inner @ screen[2, across]) in range(12, 19)


# Dimensions -----------------------------------------------------------------------------------------------------------


@settings(max_examples=60, deadline=None)
@given(parts, seeds)
def test_dimensions_run_beside_the_edge_that_they_measure_outside_the_block(
    part: tuple[float, float, float], seed: int
) -> None:
    screen = random_rotation(seed)
    if not is_generic(screen):
        return
    shapes, texts, half = draw(part, screen)
    lines = collect(shapes, "dimension")
    words = [entry for entry in texts if entry["class"] == "dimension-text"]
    assert len(lines) == len(words) <= 3
    # The unit once, beside the most upright one.
    assert sum(entry["runs"][0][0].endswith(" mm") for entry in words) == 1
    corners = np.array(list(product((-1.0, 1.0), repeat=3))) * half @ screen.T
    for entry, word in zip(lines, words, strict=True):
        measure, *_ = read_path(entry["d"])
        text = word["runs"][0][0].removesuffix(" mm")
        length = np.linalg.norm(measure[1] - measure[0])
        # As long on the screen as that side is seen, 2 h √(1 − (n·d)²), and says its millimetres.
        seen = 2 * half * np.sqrt(1 - screen[2] ** 2)
        fits = [number for number in range(3) if abs(seen[number] - length) < 4 * ROUNDING]
        assert any(abs(float(text) - part[number]) < 0.006 * part[number] for number in fits)
        # All of the block lies on one side of it, at the same distance or more.
        away = np.array([-(measure[1] - measure[0])[1], (measure[1] - measure[0])[0]]) / length
        sides = (corners[:, :2] - measure[0]) @ away
        assert np.min(np.abs(sides)) == pytest.approx(OFFSET, abs=4 * ROUNDING)
        assert np.all(sides > 0) or np.all(sides < 0)
        # Of the two outer edges of an axis, which lie opposite: the right one beside an upright axis, else the lower.
        middle = measure.mean(axis=0) + away * np.sign(sides[0]) * OFFSET
        assert (middle[0] if word["runs"][0][0].endswith(" mm") else -middle[1]) > -2 * ROUNDING
        # The number stands on it, and upright enough to be read.
        np.testing.assert_allclose(to_screen([word["x"], word["y"]]), measure.mean(axis=0), atol=4 * ROUNDING)
        assert -90.0 <= word["rotate"] <= 90.0


@pytest.mark.parametrize(
    ("length", "text"),
    [(4.0, "4.0"), (12.5, "12.5"), (0.25, "0.25"), (2.345, "2.35"), (40.0, "40.0"), (100.0, "100"), (123.4, "123")],
)
def test_a_length_has_one_decimal_at_least_and_three_digits_at_most(length: float, text: str) -> None:
    # The drawing's own rule, digits counted by hand; a whole hundred has no room for a decimal.
    assert print_length(length) == text


def test_the_surface_does_not_decide_how_the_block_is_drawn() -> None:
    drawn: list[Any] = []
    for matrix in (ELLIPSOID, ONE_SHEET):
        shapes: list[Shape] = []
        texts: list[Shape] = []
        draw_block(make_subject(matrix), random_rotation(5), shapes, LABELS, texts)
        drawn.append((shapes, texts))
    assert drawn[0] == drawn[1]
