"""The kept-sample API: what a page reads and changes."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def take(client: TestClient, group: str = "2/m") -> Any:
    listed = client.get("/api/samples").json()
    return client.get(f"/api/samples/{next(entry['id'] for entry in listed if entry['group'] == group)}").json()


def send(client: TestClient, sample: Any, change: dict[str, Any]) -> Any:
    return client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})


def edit(client: TestClient, sample: Any, change: dict[str, Any]) -> Any:
    answer = send(client, sample, change)
    assert answer.status_code == 200, answer.text
    return answer.json()


def free(sample: Any) -> dict[str, float]:
    found: dict[str, float] = sample["document"]["properties"][0]["tensor"]["free"]
    return found


def test_an_empty_store_has_two_demonstration_samples_with_pictures(client: TestClient) -> None:
    listed = client.get("/api/samples").json()
    assert {entry["group"] for entry in listed} == {"2/m", "mmm"}
    for entry in listed:
        assert entry["picture"].startswith("<svg")


def test_the_front_page_leads_to_a_sample_that_reads_without_scripts(client: TestClient) -> None:
    answer = client.get("/")
    assert answer.status_code == 200
    assert "/tensor" in str(answer.url)
    assert "12.48" in answer.text or "−5.5" in answer.text
    for block in ("sample", "tensor-content"):
        assert f'id="{block}"' in answer.text


def test_an_edited_cell_takes_its_followers_along(client: TestClient) -> None:
    sample = edit(client, take(client), {"free": {"13": "2.10(7)"}})
    assert free(sample)["13"] == 2.1
    matrix = np.array(sample["derived"]["state"]["matrix"])
    assert matrix[0, 2] == matrix[2, 0] == 2.1
    assert sample["derived"]["state"]["sigma_matrix"][0][2] == pytest.approx(0.07)
    assert sample["can_undo"]


def test_a_locked_cell_refuses_and_says_why(client: TestClient) -> None:
    answer = send(client, take(client), {"free": {"12": "1.0"}})
    assert answer.status_code == 422
    error = answer.json()["error"]
    assert "half-turn about x2" in f"{error['message']} {error['hint']}"


def test_undo_and_redo_walk_along_the_revisions(client: TestClient) -> None:
    start = take(client)
    changed = edit(client, start, {"free": {"22": 25.0}})
    undone = client.post(f"/api/samples/{start['id']}/undo", json={"parent": changed["revision"]}).json()
    assert undone["document"] == start["document"]
    redone = client.post(f"/api/samples/{start['id']}/redo", json={"parent": undone["revision"]}).json()
    assert redone["document"] == changed["document"]


def test_undo_survives_a_restart(tmp_path: Path) -> None:
    first = TestClient(create_app(tmp_path), base_url="http://127.0.0.1")
    start = take(first)
    changed = edit(first, start, {"free": {"22": 25.0}})
    again = TestClient(create_app(tmp_path), base_url="http://127.0.0.1")
    assert take(again)["document"] == changed["document"]
    undone = again.post(f"/api/samples/{start['id']}/undo", json={"parent": changed["revision"]})
    assert undone.json()["document"] == start["document"]


def test_a_change_against_an_old_revision_is_a_conflict(client: TestClient) -> None:
    start = take(client)
    edit(client, start, {"free": {"22": 25.0}})
    answer = send(client, start, {"free": {"22": 26.0}})
    assert answer.status_code == 409
    assert answer.json()["error"]["detail"]["newest"] > start["revision"]
    assert free(take(client))["22"] == 25.0


def test_a_pose_moves_the_specimen_matrix(client: TestClient) -> None:
    # Independent: C T Cᵀ with C written by hand for 30° about x3.
    sample = edit(client, take(client), {"pose": {"axis": [0, 0, 1], "angle": 30}})
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    turn = np.array([[c, s, 0], [-s, c, 0], [0, 0, 1]])
    state = sample["derived"]["state"]
    assert np.array(state["posed"]) == pytest.approx(turn @ np.array(state["matrix"]) @ turn.T)


def test_another_unit_keeps_the_quantity(client: TestClient) -> None:
    before = take(client)
    after = edit(client, before, {"property": {"kind": "thermal_conductivity", "unit": "mW/(cm·K)"}})
    # 1 W/(m·K) is 10 mW/(cm·K).
    assert free(after)["11"] == pytest.approx(10 * free(before)["11"])


def test_a_frame_rule_turns_the_tensor(client: TestClient) -> None:
    before = take(client)
    crystal = {**before["document"]["crystal"], "frame": "x1=a x3=c*"}
    after = edit(client, before, {"crystal": crystal})
    old, new = (np.array(entry["derived"]["state"]["matrix"]) for entry in (before, after))
    assert not np.allclose(old, new)
    assert np.linalg.eigvalsh(old) == pytest.approx(np.linalg.eigvalsh(new))
    assert after["derived"]["crystal"]["frame"]["sentence"].startswith("x1 along a")


BAD: dict[str, tuple[dict[str, Any], str]] = {
    "a group": ({"crystal": {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "mmm"}}, "crystal.cell"),
    "a number": ({"free": {"11": "much"}}, "free.11"),
    "a pose": ({"pose": {"exact": ["z", "[100]"], "toward": ["x", "[200]"]}}, "pose.toward"),
    "a part": ({"part": [1, -1, 1]}, "part"),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_changes_name_their_place_and_change_nothing(client: TestClient, name: str) -> None:
    change, field = BAD[name]
    before = take(client)
    answer = send(client, before, change)
    assert answer.status_code == 422
    assert field in answer.json()["error"]["field"]
    assert take(client)["hash"] == before["hash"]


def test_a_sample_is_duplicated_whole(client: TestClient) -> None:
    start = take(client)
    copy = client.post("/api/samples", json={"from": start["id"], "name": "Copy"}).json()
    assert copy["id"] != start["id"]
    assert copy["document"]["name"] == "Copy"
    assert copy["document"]["properties"] == start["document"]["properties"]


def test_text_in_a_data_block_cannot_end_it(client: TestClient) -> None:
    sample = edit(client, take(client), {"name": "</script><script>alert(1)</script>"})
    page = client.get(f"/samples/{sample['id']}/tensor").text
    assert "<script>alert" not in page


@pytest.mark.parametrize("address", ["/api/samples/none", "/samples/none/tensor"])
def test_an_unknown_sample_is_not_found(client: TestClient, address: str) -> None:
    answer = client.get(address)
    assert answer.status_code == 404
    assert answer.json()["error"]["hint"]
