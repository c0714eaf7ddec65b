"""The stereogram of the front page: inverse projections, signs, elements of every group, lines, names, drags, offers.

References: the closed formulas of the two projections; the operations of spglib's database, whose axes are counted
here anew; Rodrigues' rotation by scipy; the value nᵀAn by its definition.
"""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest
import spglib
from fastapi.testclient import TestClient
from hypothesis import given
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.crystal.crystal import build_crystal
from app.web.label_places import overlap
from app.web.server import create_app
from app.web.stereogram import Mark, Picture, draw_stereogram, project, unproject
from app.web.stereogram_frame import DiscTurn, carry, find_frame, find_place, turn_on_disc
from app.web.stereogram_names import find_name_box
from app.web.stereogram_view import list_poles, trace_levels
from app.web.symmetry_marks import find_axes, find_mirrors
from tests.web.subjects import MONOCLINIC, ONE_SHEET, TRICLINIC, TWO_SHEETS, random_rotation

SVG = "{http://www.w3.org/2000/svg}"


@given(st.floats(0.0, 90.0), st.floats(0.0, 360.0))
def test_the_inverse_has_the_radii_of_the_closed_formulas(theta: float, phi: float) -> None:
    half, turn = np.deg2rad(theta) / 2, np.deg2rad(phi)
    wanted = [np.sin(2 * half) * np.cos(turn), np.sin(2 * half) * np.sin(turn), np.cos(2 * half)]
    for projection, radius in (("angle", np.tan(half)), ("area", np.sqrt(2) * np.sin(half))):
        place = min(radius, 1.0) * np.array([np.cos(turn), np.sin(turn)])
        assert unproject(place, projection) == pytest.approx(wanted, abs=2e-7)  # type: ignore[arg-type]


@given(st.floats(-1, 1), st.floats(-1, 1), st.sampled_from(["angle", "area"]))
def test_there_and_back(right: float, up: float, projection: Any) -> None:
    place = np.array([right, up])
    place = place / max(1.0, float(np.linalg.norm(place)))
    vector = unproject(place, projection)
    assert np.linalg.norm(vector) == pytest.approx(1.0, abs=1e-12)
    assert project(vector, projection) == pytest.approx(place, abs=1e-9)
    # Beyond the rim the rim counts.
    assert unproject(place * 5 + [2, 0], projection)[2] >= 0.0


# Names of all 32 groups with a space group number of each (International Tables vol. A, from memory).
GROUPS = {
    "1": 1, "-1": 2, "2": 3, "m": 6, "2/m": 10, "222": 16, "mm2": 25, "mmm": 47, "4": 75, "-4": 81, "4/m": 83,
    "422": 89, "4mm": 99, "-42m": 111, "4/mmm": 123, "3": 143, "-3": 147, "32": 150, "3m": 156, "-3m": 164, "6": 168,
    "-6": 174, "6/m": 175, "622": 177, "6mm": 183, "-62m": 189, "6/mmm": 191, "23": 195, "m-3": 200, "432": 207,
    "-43m": 215, "m-3m": 221,
}  # fmt: skip


def first_hall_of(number: int) -> int:
    return next(hall for hall in range(1, 531) if spglib.get_spacegroup_type(hall).number == number)


def count_by_spglib(number: int) -> tuple[dict[tuple[int, int], int], int]:
    """Lines by (highest proper order, highest order of a rotoinversion above 2), and mirrors, of whole matrices."""
    found = spglib.get_symmetry_from_database(first_hall_of(number))
    assert found is not None
    lines: dict[tuple[int, ...], tuple[int, int]] = {}
    mirrors = set()
    for matrix in {tuple(map(tuple, rotation.tolist())) for rotation in found["rotations"]}:
        rotation = np.array(matrix)
        improper = round(float(np.linalg.det(rotation))) < 0
        proper = -rotation if improper else rotation
        order = {3: 1, 2: 6, 1: 4, 0: 3, -1: 2}[int(np.trace(proper))]
        if order == 1:
            continue
        # The sum of the powers carries everything onto the axis; a column of it is a row of the lattice along it.
        onto = sum(np.linalg.matrix_power(proper, power) for power in range(order))
        column = next(part for part in onto.T if np.any(part))
        column = column // np.gcd.reduce(column)
        key = tuple(int(part) for part in column)
        key = max(key, tuple(-part for part in key))
        if improper and order == 2:
            mirrors.add(key)
            continue
        one, other = lines.get(key, (1, 1))
        lines[key] = (one, max(other, order)) if improper else (max(one, order), other)
    counts: dict[tuple[int, int], int] = {}
    for entry in lines.values():
        counts[entry] = counts.get(entry, 0) + 1
    return counts, len(mirrors)


@pytest.mark.parametrize("group", GROUPS)
def test_the_elements_of_every_group_are_those_of_its_operations(group: str) -> None:
    hexagonal = group.lstrip("-")[0] in "36" and GROUPS[group] < 195
    cell = [5, 5, 7, 90, 90, 120] if hexagonal else [5, 5, 5, 90, 90, 90]
    crystal = build_crystal(cell, group, unique_axis="b" if group in ("2", "m", "2/m") else None)
    found: dict[tuple[int, int], int] = {}
    for _, proper, inverse in find_axes(crystal):
        found[(proper, inverse)] = found.get((proper, inverse), 0) + 1
    assert (found, len(find_mirrors(crystal))) == count_by_spglib(GROUPS[group])


# Open symbols: rotoinversions 4̄ and 6̄ alone (International Tables vol. A, graphic symbols, from memory).
@pytest.mark.parametrize("group", GROUPS)
def test_inner_symbols_tell_rotoinversions(group: str) -> None:
    hexagonal = group.lstrip("-")[0] in "36" and GROUPS[group] < 195
    crystal = build_crystal([5, 5, 7, 90, 90, 120] if hexagonal else [5, 5, 5, 90, 90, 90], group)
    drawing = draw_stereogram(crystal, Picture(), side="near")
    assert (drawing.count('class="open"') > 0) == (group in ("-4", "-42m", "-6", "-62m", "-43m"))
    # A centre of symmetry puts a ring into every axis.
    assert (drawing.count("stereo-hole") > 0) == (drawing.count("stereo-centre") > 0 and group != "-1")


# Curie's groups: which have a mirror across the axis and half-turns across it (their symbols say so).
@pytest.mark.parametrize(
    ("group", "axes", "mirrors", "half_turns"),
    [("∞", 1, 0, 0), ("∞m", 1, 0, 0), ("∞2", 1, 0, 1), ("∞/m", 1, 1, 0), ("∞/mm", 1, 1, 1), ("∞∞", 0, 0, 0),
     ("∞∞m", 0, 0, 0)],
)  # fmt: skip
def test_a_limiting_group_shows_no_stand_in(group: str, axes: int, mirrors: int, half_turns: int) -> None:
    drawing = draw_stereogram(build_crystal(None, group), Picture())
    assert drawing.count('class="stereo-axis"') == axes == drawing.count("∞<")
    assert drawing.count("stereo-mirror") == mirrors
    assert drawing.count("stereo-half-turns") == half_turns


@pytest.mark.parametrize("matrix", [ONE_SHEET, TWO_SHEETS, np.diag([3.0, 3.0, -2.0]), np.diag([5.0, 2.0, 1.0])])
def test_lines_have_their_value_and_close_twice(matrix: Any) -> None:
    traces = trace_levels(matrix)
    values = np.linalg.eigvalsh(matrix)
    seen: dict[float, int] = {}
    for trace in traces:
        level = float(trace.name)
        found = np.einsum("ni,ij,nj->n", trace.points, matrix, trace.points)
        assert found == pytest.approx(level, abs=1e-9 * np.max(np.abs(values)) + 5e-6 * abs(level))
        assert trace.points[0] == pytest.approx(trace.points[-1], abs=1e-9)
        assert ("minus" in trace.kind) == (level < 0)
        seen[level] = seen.get(level, 0) + 1
    # A spherical conic is two closed curves about an axis, except through the middle value (two great circles too).
    assert set(seen.values()) == {2}
    assert (0.0 in seen) == (values[0] < 0 < values[2])


def boxes_of(drawing: str) -> list[tuple[float, float, float, float]]:
    boxes = []
    for text in ElementTree.fromstring(drawing).iter("text"):
        kind = str(text.get("class")).split(" ")[-1]
        size = {"specimen": 10.0, "principal": 10.0, "level": 6.0}.get(kind, 7.0)
        boxes.append(
            find_name_box("".join(text.itertext()), size, float(str(text.get("x"))), float(str(text.get("y"))))
        )
    return boxes


@pytest.mark.parametrize("side", ["both", "near", "far"])
def test_names_stand_on_no_other(side: Any) -> None:
    marks = list_poles(TRICLINIC, 2, ("normal", "row"))
    drawing = draw_stereogram(TRICLINIC, Picture(marks, trace_levels(ONE_SHEET)), side=side, numbered=True)
    boxes = boxes_of(drawing)
    assert len(boxes) > 30
    shrunk = [(left + 0.1, top + 0.1, right - 0.1, bottom - 0.1) for left, top, right, bottom in boxes]
    assert not any(overlap(one, two) for place, one in enumerate(shrunk) for two in shrunk[:place])


def test_the_end_that_is_drawn_is_named_with_its_own_sign() -> None:
    # In the frame x3 ∥ c the normal (0 0 -1) points away: what is drawn near is (0 0 1).
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "222")
    mark = Mark(np.array([0.6, 0.0, -0.8]), "normal", "n(10−1)", line=True, opposite="n(−101)")
    near, far = (draw_stereogram(crystal, Picture([mark]), side=side, numbered=True) for side in ("near", "far"))  # type: ignore[arg-type]
    assert 'n(<tspan class="stereo-over" text-decoration="overline">1</tspan>01)' in near
    assert 'n(10<tspan class="stereo-over" text-decoration="overline">1</tspan>)' in far


def test_what_points_away_is_in_the_far_disc_alone() -> None:
    marks = [Mark(np.array([0.0, 0.6, -0.8]), "specimen", "z")]
    near, far = (draw_stereogram(TRICLINIC, Picture(marks), side=side) for side in ("near", "far"))  # type: ignore[arg-type]
    assert near.count("stereo-mark") == 0
    assert far.count("stereo-mark specimen") == 1


@given(st.integers(0, 300), st.floats(-0.9, 0.9), st.floats(-0.4, 0.4), st.sampled_from(["x3", "z", "y", "(1 2 -1)"]))
def test_a_drag_carries_what_is_under_the_hand(seed: int, right: float, up: float, centre: str) -> None:
    pose = random_rotation(seed)
    turn = DiscTurn(start=[0.1, 0.2], end=[right, up], centre=centre, far=bool(seed % 2))
    frame = find_frame(MONOCLINIC, pose, centre)
    start, end = (find_place(frame, "angle", place, turn.far) for place in (turn.start, turn.end))
    turned = turn_on_disc(MONOCLINIC, pose, turn)
    assert turned @ turned.T == pytest.approx(np.eye(3), abs=1e-12)
    # Where the crystal is held, what of the specimen lay at the start lies at the end; else what of the crystal did.
    if frame.held == "crystal":
        assert turned @ end == pytest.approx(pose @ start, abs=1e-9)
    else:
        assert turned @ start == pytest.approx(pose @ end, abs=1e-9)


def test_the_shortest_turn_is_that_of_scipy() -> None:
    start, end = random_rotation(3)[0], random_rotation(4)[1]
    across = np.cross(start, end)
    angle = np.arctan2(np.linalg.norm(across), start @ end)
    wanted = Rotation.from_rotvec(angle * across / np.linalg.norm(across)).as_matrix()
    assert carry(start, end) == pytest.approx(wanted, abs=1e-12)
    assert carry(start, -start) @ start == pytest.approx(-start, abs=1e-12)


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def make(client: TestClient, crystal: Any, free: Any) -> str:
    sample = client.post("/api/samples", json={"name": "invented"}).json()
    changes = (
        {"crystal": crystal},
        {"property": {"kind": "thermal_expansion", "unit": "1e-6/K"}},
        {"tensor": {"free": free}},
    )
    for change in changes:
        answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
        assert answer.status_code == 200, answer.text
        sample = answer.json()
    return str(sample["id"])


def ask(client: TestClient, sample: str, **asked: Any) -> Any:
    answer = client.post(f"/api/samples/{sample}/stereogram", json=asked)
    assert answer.status_code == 200, answer.text
    return answer.json()


# Invented data.
TETRAGONAL = {"cell": [5.2, 5.2, 9.1, 90, 90, 90], "group": "-42m"}


def test_a_place_is_told_with_value_and_offers(client: TestClient) -> None:
    sample = make(client, TETRAGONAL, {"11": 5.0, "33": -3.0})
    told = ask(client, sample, place=[0.0, 0.0])["told"]
    assert told["direction"] == pytest.approx([0, 0, 1], abs=1e-12)
    assert told["value"].startswith("−3 ")
    assert {told["offers"][0]["name"], told["offers"][1]["name"]} <= {"n(001)", "[001]", "p3"}
    # tan 22.5° from the middle toward the right is 45° between x3 and x2: half of 5 − 3.
    told = ask(client, sample, place=[float(np.tan(np.pi / 8)), 0.0])["told"]
    assert told["direction"] == pytest.approx([0, np.sqrt(0.5), np.sqrt(0.5)], abs=1e-12)
    assert told["value"].startswith("1 ")
    pose = told["offers"][-1]["poses"]["x"]
    edited = ask(client, sample, pose=pose, centre="x", place=[0.0, 0.0])["told"]
    assert edited["direction"] == pytest.approx(told["direction"], abs=1e-9)


def test_steps_move_the_cursor_by_degrees(client: TestClient) -> None:
    sample = make(client, TETRAGONAL, {"11": 5.0, "33": -3.0})
    told = ask(client, sample, steps=[30, 0])["told"]
    assert told["direction"] == pytest.approx([0, 0.5, np.sqrt(0.75)], abs=1e-12)


def test_how_it_lies_is_said(client: TestClient) -> None:
    sample = make(client, TETRAGONAL, {"11": 5.0, "33": -3.0})
    assert "x3 points at the reader, −x1 is up, x2 to the right" in ask(client, sample)["words"]
    words = ask(client, sample, centre="z", projection="area", discs="two")["words"]
    assert "Equal-area" in words
    assert "z points at the reader, y is up, x to the right" in words
    assert "The specimen is held" in words
    both = ask(client, sample, discs="two")["result"]
    assert re.findall(r'data-side="(\w+)"', both) == ["near", "far"]


def test_marks_are_listed(client: TestClient) -> None:
    marked = ask(client, make(client, TETRAGONAL, {"11": 5.0, "33": -3.0}))["marked"]
    listed = {group["heading"]: group["entries"] for group in marked}
    assert "n(001): in the middle" in listed["Poles of planes"]
    assert "rotoinversion axis of order 4: in the middle" in listed["Symmetry elements"]
    assert sum(entry.startswith("mirror") for entry in listed["Symmetry elements"]) == 2


@pytest.mark.parametrize("group", ["∞", "∞∞m"])
def test_without_a_cell_it_says_what_is_missing(client: TestClient, group: str) -> None:
    sample = make(client, {"cell": None, "group": group}, {"11": 5.0} if group == "∞∞m" else {"11": 5.0, "33": 2.0})
    answer = ask(
        client, sample, layers=["normals", "rows", "values", "regions", "taken", "proposed", "answer"], max_index=3
    )
    assert "Without a cell there are no planes and rows to mark." in answer["notes"]


@pytest.mark.parametrize(
    ("asked", "field"),
    [
        ({"centre": "1 0 0"}, "centre"),
        ({"cursor": [0, 0, 0]}, "cursor"),
        ({"max_index": 4}, "max_index"),
        ({"layers": ["moon"]}, "layers[0]"),
    ],
)
def test_faults_name_their_field(client: TestClient, asked: Any, field: str) -> None:
    sample = make(client, TETRAGONAL, {"11": 5.0, "33": -3.0})
    answer = client.post(f"/api/samples/{sample}/stereogram", json=asked)
    assert answer.status_code == 422
    assert answer.json()["error"]["field"].startswith(field)


def test_huge_places_are_the_rim(client: TestClient) -> None:
    sample = make(client, TETRAGONAL, {"11": 5.0, "33": -3.0})
    assert ask(client, sample, place=[1e308, -1e308])["told"]["direction"][2] == pytest.approx(0.0, abs=1e-9)
