"""The stereogram: projections by their defining properties, elements counted against the point-group tables."""

from __future__ import annotations

import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.web.stereogram import Mark, Picture, Trace, draw_stereogram, project
from app.web.symmetry_marks import find_axes, find_mirrors

ANGLES = st.floats(0.0, 89.9)


def at(theta: float, phi: float) -> np.ndarray:
    polar, azimuth = np.deg2rad(theta), np.deg2rad(phi)
    return np.array([np.sin(polar) * np.cos(azimuth), np.sin(polar) * np.sin(azimuth), np.cos(polar)])


@given(ANGLES, st.floats(0.0, 360.0))
def test_radii_are_those_of_the_two_projections(theta: float, phi: float) -> None:
    for projection, radius in (
        ("angle", np.tan(np.deg2rad(theta) / 2)),
        ("area", np.sqrt(2) * np.sin(np.deg2rad(theta) / 2)),
    ):
        place = project(at(theta, phi), projection)  # type: ignore[arg-type]
        assert np.hypot(*place) == pytest.approx(radius, abs=1e-12)
        assert place == pytest.approx(radius * np.array([np.cos(np.deg2rad(phi)), np.sin(np.deg2rad(phi))]), abs=1e-12)


@given(st.floats(1.0, 60.0), st.floats(0.0, 25.0), st.floats(0.0, 360.0))
def test_equal_angle_keeps_small_circles_circles(half: float, theta: float, phi: float) -> None:
    axis = at(theta, phi)
    first = np.cross(axis, [0.3, 0.5, 0.81])
    first /= np.linalg.norm(first)
    turn = np.linspace(0, 2 * np.pi, 40, endpoint=False)[:, None]
    circle = np.cos(np.deg2rad(half)) * axis + np.sin(np.deg2rad(half)) * (
        np.cos(turn) * first + np.sin(turn) * np.cross(axis, first)
    )
    if np.min(circle[:, 2]) < 0:
        return
    places = project(circle)
    # A circle x² + y² + d x + e y + f = 0 through all of them, by least squares.
    design = np.column_stack([places, np.ones(len(places))])
    squares = -np.sum(places**2, axis=1)
    solved, *_ = np.linalg.lstsq(design, squares, rcond=None)
    assert design @ solved == pytest.approx(squares, abs=1e-9)


def test_equal_area_keeps_areas() -> None:
    # The cap of 90° has twice the area of the cap of 60° (2π(1 − cos θ)).
    inner, outer = (np.hypot(*project(at(theta, 20.0), "area")) for theta in (60.0, 89.9999999))
    assert (outer / inner) ** 2 == pytest.approx(2.0, abs=1e-6)


# Axes by their highest turn, and mirrors: International Tables vol. A, table of the 32 point groups (from memory).
COUNTS = [
    ("1", {}, 0),
    ("-1", {}, 0),
    ("2/m", {2: 1}, 1),
    ("mmm", {2: 3}, 3),
    ("4/mmm", {4: 1, 2: 4}, 5),
    ("-42m", {-4: 1, 2: 2}, 2),
    ("-3m", {3: 1, 2: 3}, 3),
    ("6/mmm", {6: 1, 2: 6}, 7),
    ("-6m2", {-6: 1, 2: 3}, 4),
    ("23", {3: 4, 2: 3}, 0),
    ("m-3", {3: 4, 2: 3}, 3),
    ("-43m", {3: 4, -4: 3}, 6),
    ("432", {4: 3, 3: 4, 2: 6}, 0),
    ("m-3m", {4: 3, 3: 4, 2: 6}, 9),
]


def crystal_of(group: str) -> object:
    cell = [5, 5, 5, 90, 90, 90]
    if group.lstrip("-")[0] in "36":
        cell = [5, 5, 7, 90, 90, 120]
    if group in ("23", "m-3", "-43m", "432", "m-3m"):
        cell = [5, 5, 5, 90, 90, 90]
    return build_crystal(cell, group)


@pytest.mark.parametrize(("group", "axes", "mirrors"), COUNTS, ids=[entry[0] for entry in COUNTS])
def test_elements_are_those_of_the_tables(group: str, axes: dict[int, int], mirrors: int) -> None:
    crystal = crystal_of(group)
    found: dict[int, int] = {}
    for _, proper, inverse in find_axes(crystal):  # type: ignore[arg-type]
        key = -inverse if inverse in (4, 6) and inverse > proper else proper
        found[key] = found.get(key, 0) + 1
    assert found == axes
    assert len(find_mirrors(crystal)) == mirrors  # type: ignore[arg-type]
    drawing = draw_stereogram(crystal, Picture())  # type: ignore[arg-type]
    figure = ElementTree.fromstring(drawing)
    assert len(figure.findall("path[@class='stereo-mirror']")) == mirrors
    assert len(figure.findall("circle[@class='stereo-centre']")) == (
        group in ("-1", "2/m", "mmm", "4/mmm", "-3m", "6/mmm", "m-3", "m-3m")
    )


def test_a_direction_that_points_away_is_open_and_one_of_a_line_comes_near() -> None:
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "222")
    down = np.array([0.0, 0.6, -0.8])
    picture = Picture(marks=[Mark(down, "normal", "n(011)", put="(0 1 -1)"), Mark(down, "principal", "p1", line=True)])
    figure = ElementTree.fromstring(draw_stereogram(crystal, picture))
    first, second = figure.findall("path[@role='button']")[0], figure.find("path[@class='stereo-mark principal']")
    assert first.get("class") == "stereo-mark normal far"
    assert first.get("data-put") == "(0 1 -1)"
    assert second is not None
    places = [re.findall(r"-?[\d.]+", str(mark.get("transform"))) for mark in (first, second)]
    assert [float(part) for part in places[0]] == pytest.approx([-float(part) for part in places[1]], abs=0.11)


def test_a_great_circle_is_near_for_one_half_and_far_for_the_other() -> None:
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "1")
    turn = np.linspace(0, 2 * np.pi, 181)
    circle = np.column_stack([np.cos(turn), 0.6 * np.sin(turn), 0.8 * np.sin(turn)])
    figure = ElementTree.fromstring(draw_stereogram(crystal, Picture(traces=[Trace(circle, "level")])))
    lines = [figure.find(f"path[@class='{name}']") for name in ("stereo-level", "stereo-level far")]
    counts = [str(line.get("d")).count("L") for line in lines if line is not None]
    assert len(counts) == 2
    assert abs(counts[0] - counts[1]) <= 3
