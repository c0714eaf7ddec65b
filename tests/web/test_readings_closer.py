"""The panels beneath the readings, and copies of the tensor that read back."""

from __future__ import annotations

import csv
import io
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


@pytest.fixture
def sample(client: TestClient) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def words(text: str) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", text))


FIELDS = ("kind", "direction", "second", "value", "sigma", "direction_sigma", "bar", "batch")


def readings_of(sample: Any) -> Any:
    return [{key: entry[key] for key in FIELDS if key in entry} for entry in sample["document"]["readings"]]


def fit_of(client: TestClient, sample: Any) -> Any:
    readings = readings_of(sample)
    return client.post(
        "/api/v1/fit", json={"crystal": sample["document"]["crystal"], "tensor": {}, "readings": readings}
    ).json()


def test_the_closer_look_says_all_it_should(client: TestClient, sample: Any) -> None:
    answer = client.post(f"/api/samples/{sample['id']}/readings/closer")
    assert answer.status_code == 200, answer.text
    text = words(answer.json()["result"])
    for wanted in (
        "cannot confirm",
        "(claimed)",
        "half-turn along [010]",
        "Huber",
        "Correlation",
        "agree with a simulation",
    ):
        assert wanted in text, wanted
    # The claimed rung's test is the one of the fit.
    test = fit_of(client, sample)["symmetry_test"]
    assert f"{test['delta_chi2']:.3g} on {test['delta_dof']}" in text


def test_next_cuts_are_those_of_the_call(client: TestClient, sample: Any) -> None:
    answer = client.post(
        f"/api/samples/{sample['id']}/readings/next-cuts", json={"add": 2, "sigma": 0.12, "direction_sigma": 0.7}
    )
    assert answer.status_code == 200, answer.text
    fit = fit_of(client, sample)
    taken = readings_of(sample)
    call = client.post(
        "/api/v1/campaign",
        json={
            "crystal": sample["document"]["crystal"],
            "tensor": {"matrix": fit["matrix"]},
            "taken": taken,
            "add": 2,
            "candidates": {"max_index": 2},
            "criterion": "D",
            "sigma": 0.12,
            "direction_sigma": 0.7,
        },
    ).json()
    assert np.abs(np.array(answer.json()["vectors"])) == pytest.approx(np.abs(np.array(call["vectors"])), abs=1e-9)
    assert "What if this bar breaks?" in answer.json()["result"]


def test_how_many_more_are_needed_is_told(client: TestClient, sample: Any) -> None:
    answer = client.post(
        f"/api/samples/{sample['id']}/readings/next-cuts",
        json={"add": 1, "sigma": 0.12, "criterion": "13", "goal": 0.04, "max_index": None},
    )
    assert answer.status_code == 200, answer.text
    assert re.search(r"\d+", words(answer.json()["result"]))
    refused = client.post(
        f"/api/samples/{sample['id']}/readings/next-cuts", json={"add": 1, "sigma": 0.12, "criterion": "12"}
    )
    assert refused.status_code == 422
    assert (
        client.post(f"/api/samples/{sample['id']}/readings/next-cuts", json={"add": 1, "sigma": 0}).status_code == 422
    )


def test_copies_of_the_tensor_read_back(client: TestClient, sample: Any) -> None:
    fit = fit_of(client, sample)
    address = f"/samples/{sample['id']}/readings/tensor"
    whole = client.get(f"{address}.json").json()
    assert whole["matrix"] == pytest.approx(np.array(fit["matrix"]))
    assert whole["covariance"] == pytest.approx(np.array(fit["covariance"]))
    assert "x3 along c" in whole["frame"]
    rows = list(csv.reader(io.StringIO(client.get(f"{address}.csv").text)))
    cells = {row[0]: float(row[1]) for row in rows if row[0] in fit["free"]}
    assert [cells[label] for label in fit["free"]] == pytest.approx(fit["values"])
    literal = client.get(f"{address}.py").text
    assert eval(literal.split("\n", 1)[1], {"numpy": np}) == pytest.approx(np.array(fit["matrix"]))
    latex = client.get(f"{address}.tex").text
    assert latex.count("&") == 6
    assert "pmatrix" in latex
    assert client.get(f"{address}.exe").status_code == 422


def test_readings_that_cannot_answer_have_no_copies(client: TestClient, sample: Any) -> None:
    few = client.post(
        f"/api/samples/{sample['id']}/edit",
        json={"parent": sample["revision"], "change": {"readings": sample["document"]["readings"][:2]}},
    )
    assert few.status_code == 200
    assert client.get(f"/samples/{sample['id']}/readings/tensor.json").status_code == 422
    closer = client.post(f"/api/samples/{sample['id']}/readings/closer")
    assert closer.status_code == 200
    assert "cannot tell" in words(closer.json()["result"])
