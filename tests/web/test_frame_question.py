"""Which frame did they mean: a planted frame is found again from the sample's own readings."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

# The invented conductor in the frame x1=a x3=c*, computed apart from this project.
OTHER_FRAME = [[12.495467, 0, 1.011876], [0, 24.6, 0], [1.011876, 0, 16.604533]]
CRYSTAL = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m", "unique_axis": "b"}
OWN = {"11": 13.2, "22": 24.6, "33": 15.9, "13": 1.85}


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


@pytest.fixture
def sample(client: TestClient) -> Any:
    made = client.post("/api/samples", json={"name": "whose axes"}).json()
    directions = ["(1 0 0)", "(0 0 1)", "(-2 0 1)", "(1 1 0)", "[1 0 1]"]
    values = client.post(
        "/api/v1/along", json={"crystal": CRYSTAL, "tensor": {"free": OWN}, "directions": directions}
    ).json()["values"]
    noise = np.random.default_rng(4).normal(scale=0.05, size=5)
    readings = [
        {"kind": "along", "direction": d, "value": v + float(e), "sigma": 0.05}
        for d, v, e in zip(directions, values, noise, strict=True)
    ]
    for change in (
        {"crystal": CRYSTAL},
        {"property": {"kind": "thermal_conductivity", "unit": "W/(m K)"}},
        {"readings": readings},
    ):
        answer = client.post(f"/api/samples/{made['id']}/edit", json={"parent": made["revision"], "change": change})
        assert answer.status_code == 200, answer.text
        made = answer.json()
    return made


def test_a_planted_frame_is_found_again(client: TestClient, sample: Any) -> None:
    answer = client.post(
        f"/api/samples/{sample['id']}/frame-question", json={"matrix": OTHER_FRAME, "unsure": False}
    ).json()
    best = answer["answers"][0]
    assert best["survives"]
    assert np.array(best["matrix"]) == pytest.approx(
        np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]), abs=1e-4
    )
    assert any("x1 along a" in naming and "x3 along c*" in naming for naming in best["namings"])


def test_without_readings_it_says_what_it_needs(client: TestClient, sample: Any) -> None:
    emptied = client.post(
        f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": {"readings": []}}
    )
    assert emptied.status_code == 200
    refused = client.post(f"/api/samples/{sample['id']}/frame-question", json={"matrix": OTHER_FRAME})
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "readings"
