"""Strokes: path data read back and compared with what was to be drawn."""

from __future__ import annotations

from itertools import groupby

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.web.strokes import (
    HEIGHT,
    PIXELS,
    WIDTH,
    shape,
    split_runs,
    to_drawing,
    write_diamond,
    write_head,
    write_path,
    write_ring,
    write_runs,
    write_taper,
)
from tests.web import paths
from tests.web.paths import ROUNDING, read_centre, read_path, read_places, to_screen

numbers = st.floats(-1.2, 1.2)
points = st.lists(st.tuples(numbers, numbers, numbers), min_size=2, max_size=20).map(np.array)


def test_the_middle_of_the_drawing_is_the_origin_and_y_runs_down() -> None:
    np.testing.assert_allclose(to_drawing(np.zeros(3)), [WIDTH / 2, HEIGHT / 2])
    # 1.2 world lengths up is the upper edge; one to the right is as many units as one up.
    np.testing.assert_allclose(to_drawing(np.array([0.0, 1.2])), [WIDTH / 2, 0.0], atol=1e-9)
    right, up = to_drawing(np.array([1.0, 0.0])), to_drawing(np.array([0.0, 1.0]))
    assert right[0] - WIDTH / 2 == pytest.approx(HEIGHT / 2 - up[1]) == pytest.approx(PIXELS)
    assert pytest.approx(PIXELS) == paths.PIXELS


@given(points)
def test_depth_does_not_show_in_a_parallel_projection(given_points: np.ndarray) -> None:
    np.testing.assert_array_equal(to_drawing(given_points), to_drawing(given_points[:, :2]))


@given(points)
def test_a_path_runs_through_its_points(given_points: np.ndarray) -> None:
    (read,) = read_path(write_path(given_points))
    np.testing.assert_allclose(read, given_points[:, :2], atol=ROUNDING)
    closed = write_path(given_points, closed=True)
    assert closed == write_path(given_points) + "Z"


@given(st.lists(st.booleans(), max_size=30))
def test_runs_are_the_stretches_that_hold(flags: list[bool]) -> None:
    # By the standard library's groupby; one point alone is no line.
    expected, at = [], 0
    for holds, stretch in groupby(flags):
        count = len(list(stretch))
        if holds and count > 1:
            expected.append((at, at + count))
        at += count
    assert split_runs(np.array(flags, dtype=bool)) == expected


def test_runs_are_written_as_separate_lines() -> None:
    line = np.stack([np.linspace(0, 1, 7), np.zeros(7)], axis=1)
    path = write_runs(line, np.array([True, True, False, True, False, True, True]))
    first, second = read_path(path)
    np.testing.assert_allclose(first, line[:2], atol=ROUNDING)
    np.testing.assert_allclose(second, line[5:], atol=ROUNDING)
    assert write_runs(line, np.zeros(7, dtype=bool)) == ""


def test_a_shape_names_its_layer_class_and_path_and_what_else_it_carries() -> None:
    assert shape("front", "hold", "M0 0", hold="block") == {
        "layer": "front",
        "class": "hold",
        "d": "M0 0",
        "hold": "block",
    }


def test_rings_and_diamonds_stand_about_their_point() -> None:
    point = np.array([0.3, -0.4, 0.9])
    np.testing.assert_allclose(read_centre(write_ring(point, 5.2)), point[:2], atol=ROUNDING)
    np.testing.assert_allclose(read_centre(write_diamond(point, 6)), point[:2], atol=ROUNDING)
    # A circle as two half arcs there and back, of the radius that is asked for.
    assert write_ring(point, 5.0).count("a5.0 5.0 0 1 0") == 2
    assert "10.0 0a" in write_ring(point, 5.0)
    assert "-10.0 0Z" in write_ring(point, 5.0)
    # The steps of a diamond from its top come back to it.
    assert write_diamond(point, 6).endswith("l6 6l-6 6l-6 -6Z")


@given(points)
def test_a_tapered_stroke_is_heavy_near_and_thin_far_away(ends: np.ndarray) -> None:
    start, end = ends[0], ends[1]
    path = write_taper(start, end)
    places = to_drawing(np.array([start, end]))
    if np.linalg.norm(places[1] - places[0]) < 5.0:
        return
    (corners,) = read_places(path)
    assert path.endswith("Z")
    np.testing.assert_allclose((corners[0] + corners[3]) / 2, places[0], atol=0.11)
    np.testing.assert_allclose((corners[1] + corners[2]) / 2, places[1], atol=0.11)
    # The drawing's note: 0.8 wide at the far end of the unit sphere, 3.7 at the near one.
    for place, first, last in ((start, 0, 3), (end, 1, 2)):
        width = np.linalg.norm(corners[first] - corners[last])
        assert width == pytest.approx(np.interp(place[2], [-1.2, 1.2], [0.8 - 0.29, 3.7 + 0.29]), abs=0.25)
    along = (places[1] - places[0]) / np.linalg.norm(places[1] - places[0])
    assert abs((corners[0] - corners[3]) @ along) < 0.25


def test_a_stroke_or_head_end_on_draws_nothing() -> None:
    point = np.array([0.2, 0.1, -0.5])
    assert write_taper(point, np.array([0.2, 0.1, 0.5])) == ""
    assert write_head(point, np.array([0.0, 0.0, 1.0]), 15.0, 5.0) == ""


@given(st.floats(0.0, 360.0))
def test_an_arrowhead_points_along_its_way(degrees: float) -> None:
    way = np.array([np.cos(np.deg2rad(degrees)), np.sin(np.deg2rad(degrees)), 0.4])
    tip = np.array([0.3, -0.2, 0.0])
    (corners,) = read_places(write_head(tip, way, 15.0, 5.2))
    point, one, notch, other = to_screen(corners) * PIXELS
    along = way[:2] / np.linalg.norm(way[:2])
    np.testing.assert_allclose(point / PIXELS, tip[:2], atol=ROUNDING)
    np.testing.assert_allclose((one + other) / 2, point - 15.0 * along, atol=0.25)
    assert np.linalg.norm(one - other) == pytest.approx(10.4, abs=0.25)
    assert abs((one - other) @ along) < 0.25
    # Notched: filled, but not a plain triangle.
    assert 0 < (point - notch) @ along < 15.0
