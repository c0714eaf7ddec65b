"""The section of the front page: what its call answers for every way to name the plane, and its faults."""

from __future__ import annotations

import math
import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def make(client: TestClient, crystal: Any, kind: str, unit: str, free: Any) -> str:
    sample = client.post("/api/samples", json={"name": "invented"}).json()
    for change in ({"crystal": crystal}, {"property": {"kind": kind, "unit": unit}}, {"tensor": {"free": free}}):
        answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
        assert answer.status_code == 200, answer.text
        sample = answer.json()
    return str(sample["id"])


def ask(client: TestClient, sample: str, **asked: Any) -> Any:
    answer = client.post(f"/api/samples/{sample}/section", json=asked)
    assert answer.status_code == 200, answer.text
    return answer.json()


# Invented data.
CONDUCTING = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m", "unique_axis": "b"}
CONDUCTIVITY = {"11": 13.2, "22": 24.6, "33": 15.9, "13": 1.85}


@pytest.fixture
def conductor(client: TestClient) -> str:
    return make(client, CONDUCTING, "thermal_conductivity", "W/(m K)", CONDUCTIVITY)


def number(text: str) -> float:
    return float(text.replace("−", "-").rstrip("°"))


def test_the_plane_across_b_by_the_formula_of_two_equations(client: TestClient, conductor: str) -> None:
    """In the 13-plane: mean (11 + 33)/2, radius √(((11 − 33)/2)² + 13²), by hand."""
    found = ask(client, conductor, normal="[0 1 0]", zero="[1 0 0]")
    radius = math.hypot((13.2 - 15.9) / 2, 1.85)
    assert number(found["mean"]) == pytest.approx(14.55, abs=1e-3)
    assert number(found["radius"]) == pytest.approx(radius, abs=1e-3)
    assert number(found["largest"]) == pytest.approx(14.55 + radius, abs=1e-3)
    assert number(found["smallest"]) == pytest.approx(14.55 - radius, abs=1e-3)
    assert found["shift"] is None and found["zeros"] == []
    named = {row["name"]: row for row in found["rows"]}
    # a and c lie in the plane across b, 103.83° apart; turned right-handed about b, c goes to a: c stands at −103.83°.
    assert number(named["[100]"]["at"]) == 0.0
    assert number(named["[001]"]["at"]) == pytest.approx(180 - 103.83, abs=0.06)
    assert "[010]" not in named


def test_the_usual_plane_is_across_z_of_the_pose_on_the_screen(client: TestClient, conductor: str) -> None:
    pose = {"matrix": [[0, 1, 0], [0, 0, 1], [1, 0, 0]]}
    found = ask(client, conductor, pose=pose)
    assert (found["normal"], found["zero"]) == ("z", "x")
    # x along x2 and y along x3 of the crystal: values 24.6 and 15.9, nothing between.
    assert number(found["largest"]) == pytest.approx(24.6) and number(found["largest_at"]) == 0.0
    assert number(found["smallest"]) == pytest.approx(15.9) and number(found["smallest_at"]) == 90.0
    assert number(found["point"]["value"]) == pytest.approx(24.6)
    turned = ask(client, conductor, pose=pose, angle=30)
    assert number(turned["point"]["value"]) == pytest.approx(24.6 * 0.75 + 15.9 * 0.25, abs=1e-3)
    assert number(turned["point"]["transverse"]) == pytest.approx((15.9 - 24.6) * math.sqrt(3) / 4, abs=1e-3)
    toward = ask(client, conductor, pose=pose, toward=[9.0, math.cos(math.pi / 6), 0.5])
    assert toward["point"]["angle"] == pytest.approx(30.0)


def read_point(picture: str) -> Any:
    found = re.search(r'class="section-point" cx="([\d.]+)" cy="([\d.]+)"', picture)
    assert found is not None
    return np.array([float(found[1]), float(found[2])])


def test_the_point_of_the_circle_goes_twice_as_far_round_the_same_way(client: TestClient, conductor: str) -> None:
    pictures = [ask(client, conductor, normal="[0 1 0]", angle=angle) for angle in (0, 20, 65)]
    found = re.search(r'class="section-circle" cx="([\d.]+)" cy="([\d.]+)" r="([\d.]+)"', pictures[0]["mohr"])
    assert found is not None
    centre, reach = np.array([float(found[1]), float(found[2])]), float(found[3])
    turns = []
    for picture in pictures:
        out = read_point(picture["mohr"]) - centre
        assert np.hypot(*out) == pytest.approx(reach, abs=0.2)
        turns.append(math.degrees(math.atan2(-out[1], out[0])))
        arm = read_point(picture["polar"]) - 170.0
        assert math.degrees(math.atan2(-arm[1], arm[0])) == pytest.approx(picture["point"]["angle"], abs=0.2)
    assert (turns[1] - turns[0]) % 360 == pytest.approx(40.0, abs=0.3)
    assert (turns[2] - turns[0]) % 360 == pytest.approx(130.0, abs=0.3)


def test_negative_lobes_are_drawn_with_another_line(client: TestClient, conductor: str) -> None:
    """Invented: an expansion of 3 and −1 is zero where tan²φ = 3."""
    expansion = make(client, CONDUCTING, "thermal_expansion", "1e-6/K", {"11": 3.0, "22": 5.0, "33": -1.0, "13": 0.0})
    found = ask(client, expansion, pose={"matrix": [[1, 0, 0], [0, 0, -1], [0, 1, 0]]})
    assert [number(text) for text in found["zeros"]] == pytest.approx([60.0, 120.0])
    assert 'class="section-curve minus"' in found["polar"]
    assert 'class="section-curve minus"' not in ask(client, conductor)["polar"]


def test_a_general_tensor_shifts_the_circle(client: TestClient) -> None:
    """A thermopower 12 = 3, 21 = −1 about the fourfold axis has w = (21 − 12)/2 at every angle (by hand)."""
    sample = make(
        client, {"cell": [5, 5, 7, 90, 90, 90], "group": "4"}, "thermopower", "uV/K", {"11": 9.0, "33": 4.0, "12": 2.0}
    )
    found = ask(client, sample, normal="[0 0 1]")
    assert number(found["shift"]) == pytest.approx(-2.0)
    assert found["even"] and number(found["radius"]) == 0.0
    assert "not symmetric" in found["result"]


def test_limiting_group_without_a_cell(client: TestClient) -> None:
    sample = make(client, {"cell": None, "group": "∞/mm"}, "thermal_conductivity", "W/(m K)", {"11": 2.0, "33": 1.0})
    found = ask(client, sample, normal="x")
    assert found["rows"] == [] and found["zero"] == "y"
    assert number(found["largest"]) == pytest.approx(2.0)


@pytest.mark.parametrize(
    ("asked", "field"),
    [
        ({"normal": "2 0 1"}, "normal"),
        ({"normal": "(0 0 0)"}, "normal"),
        ({"zero": "{1 1 1}"}, "zero"),
        ({"normal": "[0 1 0]", "zero": "[0 1 0]"}, "zero"),
        ({"pose": {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 2]]}}, "pose.matrix"),
        ({"angle": 1e9}, "angle"),
        ({"toward": [1.0, 2.0]}, "toward"),
        ({"width": 1}, "width"),
    ],
)
def test_what_cannot_be_cut_is_refused_at_its_field(client: TestClient, conductor: str, asked: Any, field: str) -> None:
    answer = client.post(f"/api/samples/{conductor}/section", json=asked)
    assert answer.status_code == 422, answer.text
    assert answer.json()["error"]["field"] == field


@pytest.mark.parametrize("vector", [[0, 0, 0], [1e-300, 0, 0], [1e200, 1e200, 1e200]])
def test_a_probe_that_points_nowhere_in_the_plane_is_at_zero(client: TestClient, conductor: str, vector: Any) -> None:
    assert math.isfinite(ask(client, conductor, toward=vector)["point"]["angle"])


def test_a_sample_without_a_property_has_no_section(client: TestClient) -> None:
    sample = client.post("/api/samples", json={"name": "empty"}).json()
    answer = client.post(f"/api/samples/{sample['id']}/section", json={})
    assert answer.status_code == 422
    assert client.post("/api/samples/none/section", json={}).status_code == 404
