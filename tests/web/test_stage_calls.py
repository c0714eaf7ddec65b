"""The calls ``align`` and ``stage`` as a script would make them."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient
from scipy.spatial.transform import Rotation

from app.web.server import create_app

MONOCLINIC = {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m"}
CUBIC = {"cell": [5, 5, 5, 90, 90, 90], "group": "m-3m"}
ARCS = [
    {"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180},
    {"name": "lower arc", "axis": [1, 0, 0], "low": -30, "high": 30, "sense": -1},
    {"name": "upper arc", "axis": [0, 1, 0], "low": -25, "high": 25, "zero": 2.5},
]


@pytest.fixture(scope="module")
def client() -> TestClient:
    return TestClient(create_app(None), base_url="http://127.0.0.1")


def call(client: TestClient, name: str, body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 200, answer.text
    return answer.json()


def refuse(client: TestClient, name: str, body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 422, answer.text
    return answer.json()["error"]


def turn_of(axes: Any, dials: Any) -> np.ndarray:
    turn = Rotation.identity()
    for axis, dial in zip(axes, dials, strict=True):
        angle = axis.get("sense", 1) * (dial - axis.get("zero", 0.0))
        vector = np.array(axis["axis"], dtype=float)
        turn = turn * Rotation.from_rotvec(np.deg2rad(angle) * vector / np.linalg.norm(vector))
    return np.asarray(turn.as_matrix())


def test_the_printed_attitude_example(client: TestClient) -> None:
    # Two directions of a triclinic crystal taken as vectors, seen in a body turned by the 3-2-1 sequence (30, 20, −10):
    # a worked example of attitude determination in print, with its printed numbers; see tests/published.
    truth = Rotation.from_euler("ZYX", [30, 20, -10], degrees=True).inv().as_matrix()
    seen = [[0.8190, -0.5282, 0.2242], [-0.3138, -0.1584, 0.9362]]
    start = [[1, 0, 0], [0, 0, 1]]
    answer = call(
        client,
        "align",
        {
            "crystal": {"cell": None, "group": "∞∞"},
            "sightings": [{"direction": d, "seen": s} for d, s in zip(start, seen, strict=True)],
        },
    )
    off = Rotation.from_matrix(np.array(answer["matrix"])) * Rotation.from_matrix(truth).inv()
    assert np.rad2deg(off.magnitude()) == pytest.approx(1.6960, abs=2e-3)
    assert answer["hand"] == "cannot tell"


def test_sightings_by_dials_give_the_same_attitude_as_by_place(client: TestClient) -> None:
    mounted = Rotation.random(random_state=5).as_matrix()
    directions = {"(1 0 0)": (12.0, -7.0, 9.0), "(0 1 1)": (-40.0, 11.0, 3.0), "(1 1 -1)": (75.0, 2.0, -14.0)}
    vectors = call(
        client,
        "along",
        {"crystal": MONOCLINIC, "tensor": {"matrix": np.eye(3).tolist()}, "directions": list(directions)},
    )["vectors"]
    sightings = [
        {"direction": text, "angles": list(dials), "toward": (turn_of(ARCS, dials) @ mounted @ vector).tolist()}
        for (text, dials), vector in zip(directions.items(), vectors, strict=True)
    ]
    answer = call(client, "align", {"crystal": MONOCLINIC, "axes": ARCS, "sightings": sightings})
    assert np.array(answer["matrix"]) == pytest.approx(mounted, abs=1e-9)
    assert answer["rms"] < 1e-9
    assert answer["hand"] == "right"
    # One of them by its place with the stage at zero instead.
    sightings[1] = {"direction": "(0 1 1)", "seen": {"xyz": (mounted @ vectors[1]).tolist()}, "weight": 2}
    mixed = call(client, "align", {"crystal": MONOCLINIC, "axes": ARCS, "sightings": sightings})
    assert np.array(mixed["matrix"]) == pytest.approx(mounted, abs=1e-9)


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"sightings": []}, "sightings"),
        ({"sightings": [{"direction": "(1 0 0)", "seen": [0, 0, 1]}]}, "sightings"),
        ({"sightings": [{"direction": "(1 0 0)"}, {"direction": "(0 1 0)", "seen": [0, 1, 0]}]}, "sightings[0].seen"),
        (
            {"sightings": [{"direction": "(1 0 0)", "angles": [1, 2, 3], "toward": [0, 0, 1]}]},
            "axes",
        ),
        ({"sightings": [{"direction": "(1 0 0)", "seen": [0, 0, 0]}]}, "sightings[0].seen"),
        (
            {
                "sightings": [
                    {"direction": "(1 0 0)", "seen": [0, 0, 1], "weight": 0},
                    {"direction": "(0 1 0)", "seen": [1, 0, 0]},
                ]
            },
            "sightings[0].weight",
        ),
        (
            {"axes": ARCS, "sightings": [{"direction": "(1 0 0)", "angles": [1, 2], "toward": [0, 0, 1]}]},
            "sightings[0].angles",
        ),
    ],
)
def test_what_is_wrong_with_a_sighting_is_told_at_its_field(client: TestClient, change: Any, field: str) -> None:
    assert refuse(client, "align", {"crystal": MONOCLINIC, **change})["field"] == field


def test_solutions_bring_the_plane_to_the_blade_with_its_equivalents(client: TestClient) -> None:
    mounted = Rotation.from_rotvec([0.3, -0.2, 0.5]).as_matrix()
    body = {
        "crystal": CUBIC,
        "U": mounted.tolist(),
        "axes": ARCS,
        "target": "(1 2 0)",
        "toward": [0, 0, 2],
        "either_sense": True,
        "equivalents": True,
    }
    answer = call(client, "stage", body)
    assert answer["solutions"]
    assert answer["closest"] is None
    travels = [solution["travel"] for solution in answer["solutions"]]
    assert travels == sorted(travels)
    for solution in answer["solutions"]:
        h = np.array([int(part) for part in solution["direction"].strip("()").split()], dtype=float)
        assert sorted(np.abs(h)) == [0, 1, 2]
        placed = turn_of(ARCS, solution["angles"]) @ mounted @ (solution["sense"] * h / np.linalg.norm(h))
        assert placed == pytest.approx([0, 0, 1], abs=1e-9)
        for axis, dial in zip(ARCS, solution["angles"], strict=True):
            assert axis["low"] <= dial <= axis["high"]  # type: ignore[operator]
    alone = call(client, "stage", {**body, "equivalents": False, "either_sense": False})
    assert {solution["direction"] for solution in alone["solutions"]} <= {"(1 2 0)"}


def test_beyond_travel_it_says_how_near_it_comes(client: TestClient) -> None:
    body = {
        "crystal": MONOCLINIC,
        "U": np.eye(3).tolist(),
        "axes": [{"name": "arc", "axis": [1, 0, 0], "low": -15, "high": 15}],
        "target": {"xyz": [0, 0, 1]},
        "toward": [0, -1, 1],
    }
    answer = call(client, "stage", body)
    assert answer["solutions"] == []
    assert answer["closest"]["angles"] == pytest.approx([15.0])
    assert answer["closest"]["off"] == pytest.approx(30.0)


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"U": [[1, 0, 0], [0, 1, 0], [0, 0, -1]]}, "U"),
        ({"U": [[1, 0.1, 0], [0, 1, 0], [0, 0, 1]]}, "U"),
        ({"axes": []}, "axes"),
        ({"axes": [{"axis": [0, 0, 0]}]}, "axes[0].axis"),
        ({"axes": [{"axis": [0, 0, 1], "low": 5, "high": 4}]}, "axes[0].high"),
        ({"axes": [{"axis": [0, 0, 1], "sense": 2}]}, "axes[0].sense"),
        ({"target": "(0 0 0)"}, "target"),
        ({"target": {"specimen": [0, 0, 1]}}, "target"),
        ({"toward": [0, 0]}, "toward"),
        ({"level": {"direction": "{1 0 0}", "toward": [0, 0, 1]}}, "level.direction"),
    ],
)
def test_what_is_wrong_with_a_stage_is_told_at_its_field(client: TestClient, change: Any, field: str) -> None:
    body = {"crystal": MONOCLINIC, "U": np.eye(3).tolist(), "axes": ARCS, "target": "(1 0 0)", "toward": [0, 0, 1]}
    assert refuse(client, "stage", {**body, **change})["field"] == field


def test_a_limiting_group_takes_vectors(client: TestClient) -> None:
    answer = call(
        client,
        "stage",
        {
            "crystal": {"cell": None, "group": "∞m"},
            "U": np.eye(3).tolist(),
            "axes": ARCS,
            "target": [0, 0, 1],
            "toward": [0, 0, 1],
            "equivalents": True,
        },
    )
    assert answer["solutions"][0]["travel"] == pytest.approx(0.0)
