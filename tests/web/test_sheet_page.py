"""The Sheet page: a draft that follows the sample, and frozen sheets that do not."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app


@pytest.fixture
def kept(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def first_sample(client: TestClient) -> Any:
    client.get("/")
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def freeze(client: TestClient, sample: Any, revision: int | None = None) -> Any:
    number = sample["revision"] if revision is None else revision
    return client.post(f"/samples/{sample['id']}/sheets?revision={number}", follow_redirects=False)


def edit(client: TestClient, sample: Any, change: dict[str, Any]) -> Any:
    answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
    assert answer.status_code == 200, answer.text
    return answer.json()


def test_the_draft_says_everything_with_its_frame_and_unit(kept: TestClient) -> None:
    sample = first_sample(kept)
    page = kept.get(f"/samples/{sample['id']}/sheet")
    assert page.status_code == 200
    text = re.sub(r"<[^>]+>", "", page.text)
    for wanted in (
        "Along z, 1.3° off n(−201): 12.48(8) W/(m·K)",
        "x3 along c, x2 along b*, x1 = x2 × x3",
        "z 1.3° off n(−201) toward [110]",
        "13.20(8)",
        "17.88(8)",
        "nearest normal",
        "Draft, not frozen",
        "Local rules and licensed practice come before",
        "X-rays",
        "cleaving",
        "Checked by",
    ):
        assert wanted in text, wanted
    assert 'class="cautions"' in page.text


def test_bunge_angles_are_those_of_the_state_call(kept: TestClient) -> None:
    sample = first_sample(kept)
    angles = sample["derived"]["state"]["pose"]["bunge"]
    text = re.sub(r"<[^>]+>", "", kept.get(f"/samples/{sample['id']}/sheet").text)
    for angle in angles:
        assert f"{angle:.2f}°" in text


def test_a_frozen_sheet_is_numbered_and_keeps_what_was_printed(kept: TestClient) -> None:
    sample = first_sample(kept)
    answer = freeze(kept, sample)
    assert (answer.status_code, answer.headers["location"]) == (303, "/sheets/1")
    before = kept.get("/sheets/1").text
    assert "Sheet 1" in before
    assert "13.20(8)" in before
    assert "superseded" not in before.lower()
    edit(kept, sample, {"free": {"11": "14.90(8)"}})
    after = kept.get("/sheets/1").text
    assert "13.20(8)" in after
    assert "14.90" not in after
    assert "superseded" in after
    listed = kept.get(f"/samples/{sample['id']}/sheet").text
    assert "Sheet 1" in listed
    assert "the sample has changed since" in listed
    assert "14.90(8)" in listed


def test_numbers_run_through_the_laboratory(kept: TestClient) -> None:
    sample = first_sample(kept)
    assert [freeze(kept, sample).headers["location"] for _ in range(3)] == ["/sheets/1", "/sheets/2", "/sheets/3"]


def test_a_sample_that_has_moved_on_is_not_frozen_unseen(kept: TestClient) -> None:
    sample = first_sample(kept)
    edit(kept, sample, {"free": {"11": "14.90(8)"}})
    answer = freeze(kept, sample)
    assert answer.status_code == 409
    assert "look at the draft" in answer.json()["error"]["hint"]


@pytest.mark.parametrize("address", ["/sheets/99", "/samples/none/sheet"])
def test_what_is_not_there_is_said(kept: TestClient, address: str) -> None:
    answer = kept.get(address)
    assert answer.status_code == 404
    assert answer.json()["error"]["message"]


def test_names_are_written_as_text(kept: TestClient) -> None:
    sample = first_sample(kept)
    edit(kept, sample, {"name": "<b>bold</b> & co"})
    text = kept.get(f"/samples/{sample['id']}/sheet").text
    assert "<b>bold</b>" not in text
    assert "&lt;b&gt;bold&lt;/b&gt; &amp; co" in text
