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


TRICLINIC = {"cell": [5.1, 6.2, 7.3, 82, 97, 104], "group": "1"}


def test_torque_and_easy_direction_of_a_susceptibility(client: TestClient) -> None:
    free = {"11": -12.0, "12": 0.8, "13": -0.4, "22": -10.0, "23": 0.5, "33": -14.0}
    sample = make(client, TRICLINIC, "magnetic_susceptibility", "1e-6", free)
    rows = ask(client, sample, direction="[0 0 1]", edge="(0 1 0)", flux_density=2.0)
    # x3 is along c and x2 along b*: the plane across [0 0 1] with the edge b* has u = x2, v = x3 × x2 = −x1, so
    # ½√((χ22 − χ11)² + 4 χ12²) of the numbers above, by hand.
    amplitude = 0.5 * math.hypot(2.0, 1.6)
    plane = "Field turning in the plane across it / "
    assert number(rows[plane + "½√((χuu − χvv)² + 4χuv²)"]) == pytest.approx(amplitude, rel=1e-4)
    # B²/μ₀ at 2 T is 4/(4π·10⁻⁷) N/m².
    torque = amplitude * 1e-6 * 4.0 / (4e-7 * math.pi)
    assert number(rows[plane + "largest torque"]) == pytest.approx(torque, rel=1e-4)
    along = "Field along the direction / "
    assert number(rows[along + "susceptibility along it"]) == pytest.approx(-14.0)


def test_a_bar_of_a_thermoelectric_crystal_needs_its_conductivity(client: TestClient) -> None:
    crystal = {"cell": [4.4, 4.4, 30.5, 90, 90, 120], "group": "-3m"}
    sample = make(client, crystal, "thermopower", "µV/K", {"11": -51.5, "33": -103.0})
    rows = ask(client, sample, direction="[0 0 1]", start=300.0)
    assert "Long bar, along it / not told" in rows
    assert number(rows["Peltier tensor at 300 K / −15450"]) == 0.0
    mine = sample["document"]["properties"][0]["id"]
    for change in (
        {"property": {"kind": "thermal_conductivity", "unit": "W/(m K)"}},
        {"tensor": {"free": {"11": 9.2, "33": 5.3}}},
        {"looking": {"property": mine}},
    ):
        body = {"parent": sample["revision"], "change": change}
        answer = client.post(f"/api/samples/{sample['id']}/edit", json=body)
        assert answer.status_code == 200, answer.text
        sample = answer.json()
    rows = ask(client, sample, direction="[0 0 1]")
    # Along the axis both tensors are diagonal: the bar shows S33 itself.
    assert number(rows["Long bar, along it / along the bar"]) == pytest.approx(-103.0)


def test_rotation_of_polarisation_for_either_hand(client: TestClient) -> None:
    crystal = {"cell": [4.913, 4.913, 5.405, 90, 90, 120], "group": "32"}
    sample = make(client, crystal, "gyration", "1e-6", {"11": -58.2, "33": 129.6})
    rows = ask(client, sample, direction="[0 0 1]", wavelength=510.0, index=1.5482)
    # Quartz: 29.5 ± 0.2 °/mm at 510 nm (see the test of app.consequences.gyration).
    table = "Rotation of the plane of polarisation / "
    assert number(rows[table + "this hand"]) == pytest.approx(29.5, abs=0.2)
    assert number(rows[table + "the other hand"]) == pytest.approx(-29.5, abs=0.2)
