"""The way from the crystal frame to the specimen frame, and links that reopen a state.

A turn is checked by what a steady turn about one axis is: the angle by the trace, the axis left in place.
"""

from __future__ import annotations

import json
import re
from html import unescape
from pathlib import Path
from typing import Any
from urllib.parse import urlencode

import numpy as np
import pytest
from fastapi.testclient import TestClient
from scipy.spatial.transform import Rotation, Slerp

from app.web.live import TurnMessage, answer_turn
from app.web.server import create_app
from app.web.showing import turn_part
from tests.web.test_live import START, SUBJECT

TURNS = Rotation.random(40, random_state=np.random.RandomState(8)).as_matrix()


def angle(matrix: np.ndarray) -> float:
    return float(np.rad2deg(np.arccos(np.clip((np.trace(matrix) - 1.0) / 2.0, -1.0, 1.0))))


@pytest.mark.parametrize("pose", TURNS[:12])
def test_the_way_begins_at_the_crystal_frame_ends_at_the_pose_and_is_steady(pose: np.ndarray) -> None:
    np.testing.assert_allclose(turn_part(pose, 0.0), np.eye(3), atol=1e-12)
    np.testing.assert_allclose(turn_part(pose, 1.0), pose, atol=1e-9)
    axis = Rotation.from_matrix(pose).as_rotvec()
    for part in (0.1, 0.5, 0.83):
        on_the_way = turn_part(pose, part)
        assert angle(on_the_way) == pytest.approx(part * angle(pose), abs=1e-6)
        np.testing.assert_allclose(on_the_way @ axis, axis, atol=1e-9)


@pytest.mark.parametrize("pose", TURNS[12:])
def test_the_way_is_the_spherical_interpolation(pose: np.ndarray) -> None:
    # scipy's Slerp between the two frames.
    between = Slerp([0.0, 1.0], Rotation.from_matrix(np.stack([np.eye(3), pose])))
    np.testing.assert_allclose(turn_part(pose, 0.37), between(0.37).as_matrix(), atol=1e-9)


def ask(**more: object) -> dict[str, Any]:
    message = {"type": "turn", "hash": SUBJECT.key, "seq": 1, "pose": START, **more}
    return answer_turn(SUBJECT, TurnMessage.model_validate(message))


def test_on_the_way_the_matrix_is_of_the_part_and_the_pose_stays() -> None:
    pose = np.array(ask()["pose"]["matrix"])
    matrix = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    # The demonstration sample's invented tensor: at the start of the way it is that of the crystal frame.
    np.testing.assert_allclose(ask(way=0.0)["posed"], matrix, atol=1e-9)
    half = ask(way=0.5)
    assert half["pose"]["kept"] == START
    assert angle(np.array(half["pose"]["matrix"])) == pytest.approx(angle(pose) / 2.0, abs=1e-6)
    assert ask(way=1.0)["posed"] == ask()["posed"]
    assert (ask()["way"], half["way"]) == (None, 0.5)


@pytest.fixture
def kept(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def first_sample(client: TestClient) -> Any:
    client.get("/")
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def open_link(client: TestClient, sample: Any, **query: Any) -> tuple[Any, str]:
    page = client.get(f"/samples/{sample['id']}/tensor?{urlencode(query)}")
    assert page.status_code == 200, page.text
    content = re.search(r'id="tensor-content">(.*?)</script>', page.text, re.DOTALL)
    assert content is not None
    notices = re.search(r'<div class="notices link-notices".*?</div>', page.text, re.DOTALL)
    return json.loads(content[1]), "" if notices is None else unescape(re.sub(r"<[^>]+>", " ", notices[0]))


def test_a_link_reopens_pose_view_hold_and_surface(kept: TestClient) -> None:
    sample = first_sample(kept)
    view = Rotation.from_rotvec([0.3, -0.8, 0.2]).as_matrix()
    pose = {"exact": ["z", "(1 1 1)"], "toward": ["x", "[1 -1 0]"]}
    content, notices = open_link(
        kept,
        sample,
        revision=sample["revision"],
        surface="value",
        hold="crystal",
        pose=json.dumps(pose),
        view=",".join(f"{part:.9f}" for part in view.ravel()),
    )
    first = content["first"]
    assert first["surface"] == "value"
    assert first["view"]["hold"] == "crystal"
    np.testing.assert_allclose(first["view"]["matrix"], view, atol=1e-8)
    assert first["pose"]["kept"] == pose
    assert "on n(111)" in first["sentence"]["text"]
    assert notices == ""


@pytest.mark.parametrize(
    ("name", "value", "said"),
    [
        ("revision", "99", "no revision 99"),
        ("revision", "two", "no whole number"),
        ("revision", "9" * 30, "no whole number"),
        ("property", "nothing", "no such property"),
        ("surface", "pyramid", "one of quadric, value, flux"),
        ("hold", "breath", "one of specimen, crystal"),
        ("pose", "{", "not valid JSON"),
        ("pose", '{"matrix":[[1,0,0],[0,1,0],[0,0,-1]]}', "pose"),
        ("pose", '{"exact":["z","(0 0 0)"],"toward":["x","[1 0 0]"]}', "pose"),
        ("pose", "{" * 3000, "more than 2000"),
        ("view", "1,2,3", "nine numbers"),
        ("view", ",".join(["nan"] * 9), "not finite"),
        ("view", ",".join(["7"] * 9), "view"),
        ("at", "inf", "not finite"),
        ("at", "soon", "cannot be read"),
    ],
)
def test_what_is_wrong_in_a_link_is_left_out_with_a_sentence(
    kept: TestClient, name: str, value: str, said: str
) -> None:
    sample = first_sample(kept)
    plain, _ = open_link(kept, sample)
    content, notices = open_link(kept, sample, **{name: value})
    assert f"The link's {name} was left out" in notices
    assert said in notices
    assert content["first"]["posed"] == plain["first"]["posed"]
    assert content["first"]["view"] == plain["first"]["view"]


def test_a_link_to_an_earlier_revision_says_so_and_shows_that_one(kept: TestClient) -> None:
    sample = first_sample(kept)
    edited = kept.post(
        f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": {"free": {"11": "14.2(1)"}}}
    ).json()
    assert edited["revision"] > sample["revision"]
    content, notices = open_link(kept, sample, revision=sample["revision"])
    assert content["subject"]["cells"][0][0]["number"]["text"] == "13.20(8)"
    assert f"This is revision {sample['revision']}" in notices
    assert f"the newest is {edited['revision']}" in notices
    newest, notices = open_link(kept, sample)
    assert newest["subject"]["cells"][0][0]["number"]["text"] == "14.20(10)"
    assert notices == ""


def test_a_link_to_no_sample_is_not_found(kept: TestClient) -> None:
    kept.get("/")
    assert kept.get("/samples/000000000000/tensor?revision=1").status_code == 404
