"""The Readings page: a table is taken whole or not at all, and what it gives is said."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app
from tests.examples import EXAMPLES

# The tensor from which the invented readings of the examples were drawn: 11, 13, 22, 33.
TRUE = np.array([13.20, 1.85, 24.6, 15.90])


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def take(client: TestClient) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def post(client: TestClient, sample: Any, table: str, batches: str = "", **more: Any) -> Any:
    address = f"/samples/{sample['id']}/readings?revision={sample['revision']}"
    return client.post(address, data={"table": table, "batches": batches}, **more)


def words(page: Any) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", page.text))


def test_the_kept_readings_give_a_tensor_with_everything_that_it_rests_on(client: TestClient) -> None:
    sample = take(client)
    page = client.get(f"/samples/{sample['id']}/readings")
    assert page.status_code == 200
    text = words(page)
    for wanted in (
        "14 readings give 4 cells",
        "χ²",
        "on 10 to spare",
        "x3 along c",
        "Rank 4 of 4",
        "leverage",
        "W/(m·K)",
    ):
        assert wanted in text, wanted
    assert "cannot confirm" in text


def test_a_table_is_taken_and_its_tensor_is_used(client: TestClient) -> None:
    sample = take(client)
    taken = post(client, sample, (EXAMPLES / "readings.csv").read_text("utf-8"))
    assert taken.status_code == 200
    assert "13 readings give 4 cells" in words(taken)
    after = take(client)
    assert len(after["document"]["readings"]) == 13
    used = client.post(f"/samples/{after['id']}/readings/use?revision={after['revision']}")
    assert str(used.url).endswith("/tensor")
    tensor = take(client)["document"]["properties"][0]["tensor"]
    deviation = np.array([tensor["free"][label] for label in ("11", "13", "22", "33")]) - TRUE
    # χ² of four cells against the tensor behind the readings; 18.5 is its 99.9 % point.
    assert deviation @ np.linalg.solve(np.array(tensor["covariance"]), deviation) < 18.5


def test_bad_rows_are_told_at_once_and_what_was_typed_stays(client: TestClient) -> None:
    sample = take(client)
    table = "kind,direction,value\nalong,[100],x\nalong,{010},24\n"
    page = post(client, sample, table)
    assert page.status_code == 422
    text = words(page)
    assert "line 2, value" in text
    assert "line 3, direction" in text
    assert "along,{010},24" in page.text
    assert take(client)["hash"] == sample["hash"]


def test_readings_that_cannot_answer_say_what_would(client: TestClient) -> None:
    sample = take(client)
    table = "kind,direction,value,sigma,unit\nalong,[100],13,0.1,W/(m·K)\nalong,[010],24,0.1,W/(m·K)\n"
    text = words(post(client, sample, table))
    assert "2 readings do not determine the tensor" in text
    assert "A reading along" in text
    assert "Use this tensor" not in text


def test_batches_are_read_or_refused(client: TestClient) -> None:
    sample = take(client)
    table = (EXAMPLES / "readings.csv").read_text("utf-8").replace("B11,,", "B11,hot plate,")
    refused = post(client, sample, table, "hot plate: much")
    assert refused.status_code == 422
    assert "hot plate: much" in refused.text
    taken = post(client, sample, table, "hot plate = 0.02")
    assert taken.status_code == 200
    assert take(client)["document"]["batches"] == {"hot plate": 0.02}


def test_a_table_against_an_old_revision_is_not_taken(client: TestClient) -> None:
    sample = take(client)
    table = (EXAMPLES / "readings.csv").read_text("utf-8")
    post(client, sample, table)
    again = post(client, sample, table.replace("13.31", "14.31"))
    assert again.status_code == 409
    assert "14.31" in again.text
    assert all(reading["value"] != 14.31 for reading in take(client)["document"]["readings"])


def test_what_is_typed_is_written_as_text(client: TestClient) -> None:
    page = post(client, take(client), "</textarea><script>alert(1)</script>")
    assert "<script>alert" not in page.text
