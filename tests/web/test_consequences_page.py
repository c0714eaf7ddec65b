"""The panel of consequences: numbers of worked examples through the kept sample, and words where there is no number."""

from __future__ import annotations

import math
import re
from pathlib import Path
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


def make(client: TestClient, crystal: Any, kind: str, unit: str, free: Any) -> Any:
    sample = client.post("/api/samples", json={"name": "invented"}).json()
    for change in (
        {"crystal": crystal},
        {"property": {"kind": kind, "unit": unit}},
        {"tensor": {"free": free}},
    ):
        answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
        assert answer.status_code == 200, answer.text
        sample = answer.json()
    return sample


def ask(client: TestClient, sample: Any, **asked: Any) -> dict[str, str]:
    answer = client.post(f"/api/samples/{sample['id']}/consequences", json=asked)
    assert answer.status_code == 200, answer.text
    return {
        " / ".join([table["title"], row[0]]): " | ".join(row[1:])
        for table in answer.json()["tables"]
        for row in table["rows"]
    }


def number(text: str) -> float:
    found = re.search(r"[−-]?\d+(\.\d+)?", text)
    assert found is not None, text
    return float(found[0].replace("−", "-"))


# Invented data; the answers were computed apart from this project.
CONDUCTING = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m", "unique_axis": "b"}
CONDUCTIVITY = {"11": 13.2, "22": 24.6, "33": 15.9, "13": 1.85}
OPTICAL = {"cell": [5.679, 15.202, 6.522, 90, 118.43, 90], "group": "2/m", "unique_axis": "b"}
PERMITTIVITY = {"11": 2.329156, "22": 2.318311, "33": 2.322441, "13": 0.013466}


def test_plate_bar_and_the_two_angles_of_a_conductor(client: TestClient) -> None:
    sample = make(client, CONDUCTING, "thermal_conductivity", "W/(m K)", CONDUCTIVITY)
    rows = ask(client, sample, direction="(-2 0 1)")
    assert number(rows["Plate, bar and sheet / wide plate, across it"]) == pytest.approx(13.195526, abs=1e-3)
    assert number(rows["Plate, bar and sheet / long bar, along it"]) == pytest.approx(12.981096, abs=1e-3)
    plate = rows["Plate, bar and sheet / in the plate the flow leaves the gradient by"]
    bar = rows["Plate, bar and sheet / in the bar the gradient leaves the flow by"]
    assert number(plate) == pytest.approx(7.966857, abs=1e-3)
    assert number(bar) == pytest.approx(6.623165, abs=1e-3)


def test_a_plate_of_a_biaxial_crystal(client: TestClient) -> None:
    sample = make(client, OPTICAL, "permittivity", "1", PERMITTIVITY)
    rows = ask(client, sample, direction="(1 2 1)", edge="[0 1 0]", thickness=0.5)
    assert number(rows["A plate / retardation of 0.5 mm"]) == pytest.approx(1512.754596, abs=0.5)
    assert number(rows["A plate / slow direction from the edge"]) == pytest.approx(-10.885004, abs=0.01)
    assert number(rows["The crystal / 2V"]) == pytest.approx(57.637299, abs=0.05)
    assert rows["The crystal / sign"] == "positive"


def test_an_indefinite_permittivity_is_refused_here(client: TestClient) -> None:
    sample = make(client, OPTICAL, "permittivity", "1", {**PERMITTIVITY, "22": -2.3})
    answer = client.post(f"/api/samples/{sample['id']}/consequences", json={})
    assert answer.status_code == 422
    assert "positive" in answer.json()["error"]["message"]


def test_a_part_grows_by_its_expansion(client: TestClient) -> None:
    listed = client.get("/api/samples").json()
    sample = client.get(f"/api/samples/{next(e['id'] for e in listed if e['group'] == 'mmm')}").json()
    rows = ask(client, sample, start=300, end=400, substrate=7.1, direction="(0 0 1)", edge="[1 0 0]")
    # x of this part lies along a: 5 mm × 23.4e-6/K × 100 K = 11.7 µm, exactly to first order.
    assert number(rows["From 300 K to 400 K / x, 5 mm"]) == pytest.approx(11.7, abs=0.2)
    # On a substrate of 7.1e-6/K the mismatch over 100 K is 1630e-6 along a and none along b.
    assert number(rows["On a substrate of 7.1 ×10⁻⁶/K / largest"]) == pytest.approx(1630, abs=40)
    assert abs(number(rows["On a substrate of 7.1 ×10⁻⁶/K / smallest"])) < 40


def test_a_general_tensor_has_cause_and_effect(client: TestClient) -> None:
    # Invented: class 4, thermopower-like; the angle in the plane was computed apart from this project.
    sample = make(
        client,
        {"cell": [5, 5, 7, 90, 90, 90], "group": "4"},
        "thermopower",
        "uV/K",
        {"11": 119.9, "12": -8.1, "33": 85.3},
    )
    rows = ask(client, sample, direction="[1 0 0]")
    assert number(rows["Cause and effect / away from the cause by"]) == pytest.approx(3.864818, abs=1e-3)


@pytest.mark.parametrize(
    ("asked", "field"),
    [
        ({"direction": "{100}"}, "direction"),
        ({"thickness": 0}, "thickness"),
        ({"edge": "(-2 0 1)", "direction": "(-2 0 1)"}, "edge"),
    ],
)
def test_what_is_wrong_is_told_at_its_field(client: TestClient, asked: Any, field: str) -> None:
    sample = make(client, CONDUCTING, "thermal_conductivity", "W/(m K)", CONDUCTIVITY)
    answer = client.post(f"/api/samples/{sample['id']}/consequences", json=asked)
    assert answer.status_code == 422, answer.text
    assert answer.json()["error"]["field"] == field


def test_a_series_in_wavelength_disperses_the_plate(client: TestClient) -> None:
    crystal = {"cell": [5, 5, 7, 90, 90, 90], "group": "4/mmm"}
    sample = make(client, crystal, "permittivity", "1", {"11": 2.25, "33": 2.56})
    # Invented: indices 1.50 and 1.60 at 500 nm, their squares on straight lines in the wavelength.
    table = "wavelength,11,33\n500,2.25,2.56\n600,2.23,2.54\n700,2.21,2.52\n"
    answer = client.post(
        f"/api/samples/{sample['id']}/tensor-series", json={"parent": sample["revision"], "change": {"table": table}}
    )
    assert answer.status_code == 200, answer.text
    rows = ask(client, sample, direction="[1 0 0]", wavelength=650, thickness=0.1)
    birefringence = math.sqrt(2.53) - math.sqrt(2.22)
    assert number(rows["A plate / birefringence"]) == pytest.approx(birefringence, rel=1e-4)
    assert number(rows["A plate / in waves of 650 nm"]) == pytest.approx(birefringence * 1e5 / 650, rel=1e-4)
    first = rows["Dispersion / 500 nm"]
    assert "1.60000" in first
    assert first.endswith(f"{0.1 * 1e5:.5g} nm")
    beyond = client.post(f"/api/samples/{sample['id']}/consequences", json={"wavelength": 800}).json()
    assert "beyond what was measured" in beyond["result"]
