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


def ask(client: TestClient, sample: Any, question: str, body: Any) -> Any:
    return client.post(f"/api/samples/{sample['id']}/readings/{question}", json=body)


def test_one_cell_is_given_by_hand(client: TestClient, sample: Any) -> None:
    answer = ask(client, sample, "isolate", {"cell": "13", "max_index": 2, "sigma": 0.1})
    assert answer.status_code == 200, answer.text
    found = answer.json()
    # Readings of a tensor that nobody fitted, by the sum that is printed, give its cell.
    crystal = sample["document"]["crystal"]
    matrix = [[13.0, 0, 2.5], [0, 24.0, 0], [2.5, 0, 16.0]]
    read = client.post(
        "/api/v1/along", json={"crystal": crystal, "tensor": {"matrix": matrix}, "directions": found["directions"]}
    ).json()["values"]
    assert np.dot(found["weights"], read) == pytest.approx(2.5)
    assert float(found["sigma"]) == pytest.approx(0.1 * np.linalg.norm(found["weights"]), rel=0.05)
    assert found["sentence"].startswith("13 = ")
    assert ask(client, sample, "isolate", {"cell": "12"}).status_code == 422


def test_a_cube_is_named_by_its_faces(client: TestClient, sample: Any) -> None:
    answer = ask(client, sample, "cube", {"max_index": 1})
    assert answer.status_code == 200, answer.text
    best = answer.json()["cubes"][0]
    assert best["rank"] == 4
    assert best["between_faces"] <= 3
    # The 13 directions of a cube of any lie see all four cells of a monoclinic tensor with a condition of 1 or more.
    assert 1 <= float(best["condition"]) < 3


def test_a_true_normal_can_be_typed_into_the_table(client: TestClient, sample: Any) -> None:
    azimuths = [0, 60, 120, 180, 240, 300]
    angles = (14.2 + 0.8 * np.cos(np.deg2rad(np.array(azimuths) - 90))).tolist()
    answer = ask(
        client,
        sample,
        "true-normal",
        {"nominal": "(0 1 0)", "toward": "[0 0 1]", "azimuths": azimuths, "angles": angles, "sigma": 0.01},
    )
    assert answer.status_code == 200, answer.text
    found = answer.json()
    word, *numbers = found["direction"].split()
    assert word == "xyz"
    # y is the normal and z azimuth 0, so azimuth 90 degrees, right-handed about y, is x.
    wanted = [np.sin(np.deg2rad(0.8)), np.cos(np.deg2rad(0.8)), 0]
    assert np.array(numbers, dtype=float) == pytest.approx(wanted, abs=1e-6)
    assert float(found["direction_sigma"]) == pytest.approx(0.01 / np.sqrt(3), rel=0.05)
    few = {"nominal": "(0 1 0)", "toward": "[0 1 0]", "azimuths": [0, 90], "angles": [1, 2]}
    assert ask(client, sample, "true-normal", few).status_code == 422
    flat = {"nominal": "(0 1 0)", "toward": "[0 1 0]", "azimuths": azimuths, "angles": angles}
    assert ask(client, sample, "true-normal", flat).json()["error"]["field"] == "toward"


def test_rod_or_plate_is_said(client: TestClient, sample: Any) -> None:
    for size, kind in (((20, 3, 2), "rod"), ((20, 22, 1), "plate"), ((5, 4, 3), "between")):
        body = dict(zip(("length", "width", "thickness"), size, strict=True))
        assert ask(client, sample, "piece", body).json()["kind"] == kind


def test_a_twin_fraction_is_fitted_or_refused(client: TestClient, sample: Any) -> None:
    refused = ask(client, sample, "twin", {"about": "[1 0 0]"})
    assert refused.status_code == 200, refused.text
    assert refused.json()["fraction"] is None
    assert "neither is told" in refused.json()["result"]
    turned = ask(client, sample, "twin", {"about": "(1 1 0)"})
    assert turned.status_code == 200, turned.text
    assert 0 <= turned.json()["fraction"] < 0.2
    assert ask(client, sample, "twin", {"about": "[0 1 0]"}).status_code == 422


def test_next_cuts_keep_to_what_the_boule_allows_and_serve_one_axis(client: TestClient, sample: Any) -> None:
    listed = {"add": 2, "sigma": 0.12, "listed": "(1 1 0), [0 1 1], (0 2 1)"}
    found = ask(client, sample, "next-cuts", listed)
    assert found.status_code == 200, found.text
    assert set(found.json()["chosen"]) <= {"n(110)", "[011]", "n(021)"}
    assert "Each candidate alone" in found.json()["result"]
    assert ask(client, sample, "next-cuts", {**listed, "listed": " , "}).json()["error"]["field"] == "listed"
    axis = ask(client, sample, "next-cuts", {"add": 2, "sigma": 0.12, "criterion": "p2"})
    assert axis.status_code == 200, axis.text
    held = ask(client, sample, "next-cuts", {"add": 2, "sigma": 0.12, "criterion": "p1"})
    assert "Symmetry holds" in held.json()["error"]["message"]
