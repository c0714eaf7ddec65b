"""The series of a property: taken from a table or from readings, kept, shown and followed by the picture."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

# Invented: every free cell runs along a straight line, exactly, with equal uncertainties.
SLOPES = {"11": (13.2, -0.01), "13": (1.85, 0.004), "22": (24.6, -0.02), "33": (15.9, -0.012)}
TEMPERATURES = (200, 250, 300, 350, 400)


def cell(label: str, t: float) -> float:
    start, slope = SLOPES[label]
    return start + slope * (t - 300)


TABLE = "temperature,11,13,22,33\n" + "".join(
    f"{t}," + ",".join(f"{cell(label, t):.3f}(20)" for label in SLOPES) + "\n" for t in TEMPERATURES
)


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


@pytest.fixture
def sample(client: TestClient) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def change(client: TestClient, sample: Any, **named: Any) -> Any:
    body = {"parent": sample["revision"], "change": named, "at": 320}
    return client.post(f"/api/samples/{sample['id']}/tensor-series", json=body)


def words(text: str) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", text))


def test_a_table_is_fitted_kept_and_shown(client: TestClient, sample: Any) -> None:
    answer = change(client, sample, table=TABLE, degree=1)
    assert answer.status_code == 200, answer.text
    given = answer.json()
    assert given["at"] == 320
    # A line through five points of equal σ has at a distance d from their middle σ √(1/5 + d²/Σd²).
    sigma = 0.02 * np.sqrt(1 / 5 + 20**2 / (2 * (50**2 + 100**2)))
    assert f"13.000({round(1000 * sigma)})" in words(given["result"]).replace(" ", "")
    assert given["problem"] is None
    again = client.get(f"/samples/{sample['id']}/series").text
    assert TABLE in again
    assert "each followed by its direction" in again


def test_what_cannot_be_read_is_refused_and_not_kept(client: TestClient, sample: Any) -> None:
    refused = change(client, sample, table="temperature,11\n300,x\n")
    assert refused.status_code == 422
    error = refused.json()["error"]
    assert error["field"].startswith("change.table")
    assert {entry["column"] for entry in error["detail"]["problems"]} == {"13", "22", "33"}
    high = change(client, sample, table=TABLE, degree=5)
    assert high.status_code == 422
    assert client.get(f"/api/samples/{sample['id']}").json()["revision"] == sample["revision"]


def test_a_value_beyond_is_marked(client: TestClient, sample: Any) -> None:
    change(client, sample, table=TABLE)
    beyond = client.get(f"/api/samples/{sample['id']}/tensor-series?at=410").json()
    assert "no uncertainty covers that" in words(beyond["result"])
    inside = client.get(f"/api/samples/{sample['id']}/tensor-series?at=390").json()
    assert "no uncertainty covers that" not in words(inside["result"])


def test_readings_at_several_temperatures_give_the_series(client: TestClient, sample: Any) -> None:
    crystal = sample["document"]["crystal"]
    directions = ["(1 0 0)", "[0 1 0]", "[0 0 1]", "(1 0 1)", "(1 1 0)"]
    first = sample["document"]["readings"][0]
    readings = []
    for t in TEMPERATURES:
        free = {label: cell(label, t) for label in SLOPES}
        body = {"crystal": crystal, "tensor": {"free": free}, "directions": directions}
        values = client.post("/api/v1/along", json=body).json()["values"]
        for direction, value in zip(directions, values, strict=True):
            readings.append({**first, "kind": "along", "direction": direction, "value": value, "temperature": float(t)})
    readings = [{**entry, "sigma": 0.05, "direction_sigma": None, "bar": None} for entry in readings]
    edited = client.post(
        f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": {"readings": readings}}
    )
    assert edited.status_code == 200, edited.text
    answer = change(client, edited.json(), source="readings", degree=1)
    assert answer.status_code == 200, answer.text
    used = client.post(
        f"/api/samples/{sample['id']}/tensor-series/use",
        json={"parent": answer.json()["sample"]["revision"], "at": 325},
    )
    assert used.status_code == 200, used.text
    free = used.json()["sample"]["document"]["properties"][0]["tensor"]["free"]
    assert [free[label] for label in SLOPES] == pytest.approx([cell(label, 325) for label in SLOPES])
    readings[0]["temperature"] = None
    bare = client.post(
        f"/api/samples/{sample['id']}/edit",
        json={"parent": used.json()["sample"]["revision"], "change": {"readings": readings}},
    ).json()
    refused = change(client, bare, degree=2)
    assert "no temperature" in refused.json()["error"]["message"]


def test_the_picture_follows_the_variable(client: TestClient, sample: Any) -> None:
    plain = client.get(f"/samples/{sample['id']}/tensor").text
    assert re.search(r'id="follow" hidden', plain)
    revision = change(client, sample, table=TABLE).json()["sample"]["revision"]
    page = client.get(f"/samples/{sample['id']}/tensor?at=350").text
    assert not re.search(r'id="follow" hidden', page)
    assert "350 K" in page
    found: dict[float | None, Any] = {}
    with client.websocket_connect("ws://127.0.0.1/live", headers={"origin": "http://127.0.0.1"}) as live:
        for at in (None, 350.0, 420.0):
            live.send_json({"type": "tensor", "sample": sample["id"], "revision": revision, "at": at})
            found[at] = live.receive_json()
    kept, here, beyond = found[None], found[350.0], found[420.0]
    assert len({kept["hash"], here["hash"], beyond["hash"]}) == 3
    assert here["cells"][0][0]["number"]["text"].startswith("12.70")
    assert kept["cells"][0][0]["number"]["text"].startswith("13.2")
    assert here["followed"]["beyond"] == ""
    assert "beyond" in beyond["followed"]["beyond"]
