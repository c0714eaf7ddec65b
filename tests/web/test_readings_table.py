"""The grid of readings over HTTP: all rows or none, faults at their cells, nothing lost beside the cells."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app
from tests.examples import EXAMPLES


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


@pytest.fixture
def shown(client: TestClient) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}/readings").json()


def send(client: TestClient, shown: Any, rows: Any, batches: Any = None, parent: int | None = None) -> Any:
    return client.post(
        f"/api/samples/{shown['sample']['id']}/readings",
        json={"parent": parent or shown["sample"]["revision"], "rows": rows, "batches": batches or {}},
    )


def plain(readings: Any) -> Any:
    """Kept readings without the spelling of their directions."""
    return [
        {key: value for key, value in entry.items() if key not in ("direction", "second")}
        | {"direction": str(entry.get("direction")).replace(" ", "")}
        for entry in readings
    ]


def test_taking_the_rows_as_they_are_changes_no_reading(client: TestClient, shown: Any) -> None:
    before = shown["sample"]["document"]["readings"]
    taken = send(client, shown, shown["rows"])
    assert taken.status_code == 200, taken.text
    after = taken.json()["sample"]["document"]["readings"]
    assert plain(after) == plain(before)
    assert taken.json()["rows"] == shown["rows"]


def test_one_cell_moves_one_reading_and_the_fit_follows(client: TestClient, shown: Any) -> None:
    rows = shown["rows"]
    rows[2]["cells"]["value"] = "25.62(20)"
    rows[2]["cells"]["sigma"] = ""
    answer = send(client, shown, rows).json()
    kept = answer["sample"]["document"]["readings"][2]
    assert (kept["value"], kept["sigma"]) == (25.62, 0.2)
    assert answer["rows"][2]["cells"]["sigma"] == "0.2"
    assert answer["headline"] != shown["headline"]
    assert answer["sample"]["revision"] == shown["sample"]["revision"] + 1


def test_faults_are_at_their_cells_past_empty_rows_and_nothing_is_taken(client: TestClient, shown: Any) -> None:
    empty = {"cells": {}}
    rows = [empty, *shown["rows"][:2], empty, *shown["rows"][2:]]
    rows[1]["cells"]["value"] = "many"
    rows[5]["cells"]["direction"] = "(0 0 0)"
    answer = send(client, shown, rows)
    assert answer.status_code == 422
    error = answer.json()["error"]
    places = {(problem["row"], problem["column"]) for problem in error["detail"]["problems"]}
    assert places == {(1, "value"), (5, "direction")}
    assert error["field"] == "rows[1].cells.value"
    assert "row 2" in error["message"]
    unchanged = client.get(f"/api/samples/{shown['sample']['id']}").json()
    assert unchanged["revision"] == shown["sample"]["revision"]


def test_a_reading_set_aside_is_kept_with_its_reason_and_not_fitted(client: TestClient, shown: Any) -> None:
    rows = shown["rows"]
    rows[13]["set_aside"] = "one edge chipped"
    answer = send(client, shown, rows).json()
    assert answer["headline"].startswith("13 readings")
    assert answer["rows"][13]["set_aside"] == "one edge chipped"
    assert len(answer["sample"]["document"]["readings"]) == 14
    table = client.post(
        f"/api/samples/{shown['sample']['id']}/readings/table",
        json={"parent": answer["sample"]["revision"], "text": (EXAMPLES / "readings.csv").read_text("utf-8")},
    )
    assert table.status_code == 200, table.text
    readings = table.json()["sample"]["document"]["readings"]
    assert [entry["set_aside"] for entry in readings if entry.get("set_aside")] == ["one edge chipped"]
    rows = table.json()["rows"]
    rows[-1]["set_aside"] = None
    rows[-1]["cells"]["bar"] = "B99"  # the table has a bar of that name with another uncertainty of its turn
    assert send(client, table.json(), rows).json()["headline"].startswith("14 readings")


def test_a_reading_keeps_its_own_pose_through_the_grid(client: TestClient, shown: Any) -> None:
    sample = shown["sample"]
    readings = sample["document"]["readings"]
    turned = {"axis": [0, 0, 1], "angle": 30}
    readings[0] |= {"pose": turned, "direction": {"specimen": [1, 0, 0]}}
    edited = client.post(
        f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": {"readings": readings}}
    )
    assert edited.status_code == 200, edited.text
    again = client.get(f"/api/samples/{sample['id']}/readings").json()
    answer = send(client, again, again["rows"]).json()
    kept = answer["sample"]["document"]["readings"][0]
    assert kept["pose"] == turned
    assert kept["direction"] == {"specimen": [1.0, 0.0, 0.0]}


def test_batches_are_numbers_or_told_at_their_name(client: TestClient, shown: Any) -> None:
    rows = shown["rows"]
    rows[0]["cells"]["batch"] = "furnace 2"
    refused = send(client, shown, rows, {"furnace 2": "one per cent"})
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "batches.furnace 2"
    taken = send(client, shown, rows, {"furnace 2": "0.01"})
    assert taken.json()["batches"] == {"furnace 2": "0.01"}


def test_no_rows_is_a_state_of_its_own(client: TestClient, shown: Any) -> None:
    answer = send(client, shown, [{"cells": {"kind": "  "}}])
    assert answer.status_code == 200
    assert answer.json()["headline"] == "No readings yet."
    assert answer.json()["rows"] == []


def test_an_old_revision_is_not_overwritten(client: TestClient, shown: Any) -> None:
    first = send(client, shown, shown["rows"][:10])
    assert first.status_code == 200
    second = send(client, shown, shown["rows"][:5])
    assert second.status_code == 409
    assert second.json()["error"]["detail"]["newest"] == first.json()["sample"]["revision"]
    assert len(client.get(f"/api/samples/{shown['sample']['id']}/readings").json()["rows"]) == 10


def test_a_formula_of_a_spreadsheet_is_not_run_on_the_way_out(client: TestClient, shown: Any) -> None:
    rows = shown["rows"]
    rows[0]["cells"]["note"] = "=1+1"
    answer = send(client, shown, rows).json()
    assert answer["sample"]["document"]["readings"][0]["note"] == "=1+1"
