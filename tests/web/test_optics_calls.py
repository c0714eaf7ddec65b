"""The call ``optics`` by HTTP, as a script would make it."""

from __future__ import annotations

import json
import time
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.optics_shapes import OpticsAnswer

# W8: invented data; the answers were computed apart from this project.
CRYSTAL: dict[str, Any] = {"cell": [5.679, 15.202, 6.522, 90, 118.43, 90], "group": "2/m", "unique_axis": "b"}
W8: dict[str, Any] = {"free": {"11": 2.329156, "13": 0.013466, "22": 2.318311, "33": 2.322441}}
TRIGONAL: dict[str, Any] = {"cell": [4.99, 4.99, 17.061, 90, 90, 120], "group": "-3m"}
# Calcite at 589 nm, 1.6585 and 1.4862 (Encyclopaedia Britannica, 1911).
CALCITE: dict[str, Any] = {"free": {"11": 1.6585**2, "33": 1.4862**2}}
CUBIC: dict[str, Any] = {"cell": [5, 5, 5, 90, 90, 90], "group": "m-3m"}
TRICLINIC: dict[str, Any] = {"cell": [5.1, 6.2, 7.3, 80, 95, 107], "group": "-1"}
SIX: dict[str, Any] = {"matrix": [[2.9, 0.04, -0.03], [0.04, 2.6, 0.05], [-0.03, 0.05, 2.4]]}


def call(client: TestClient, **body: Any) -> Any:
    answer = client.post("/api/v1/optics", json=body)
    assert answer.status_code == 200, answer.text
    OpticsAnswer.model_validate(answer.json())
    return answer.json()


def refusal(client: TestClient, **body: Any) -> Any:
    answer = client.post("/api/v1/optics", json=body)
    assert answer.status_code == 422, answer.text
    error = answer.json()["error"]
    assert set(error) <= {"message", "field", "hint", "detail"}
    return error


def test_w8(client: TestClient) -> None:
    found = call(client, crystal=CRYSTAL, tensor=W8, direction="(010)", thickness=0.5, wavelength=589.3)
    assert found["indices"] == pytest.approx([1.5296, 1.5205], abs=5e-7)
    # The permittivity is rounded to its sixth decimal, which 0.5 mm make a quarter of a nanometre.
    assert found["retardation"] == pytest.approx(4550.0, abs=0.3)
    assert found["waves"] == pytest.approx(found["retardation"] / 589.3, rel=1e-12)
    assert found["two_v"] == pytest.approx(57.637299, abs=0.01)
    assert found["sign"] == "+"
    angles = sorted(np.rad2deg(np.arctan2(x, z)) % 180 for x, y, z in found["axes"])
    assert angles == pytest.approx([23.181350, 80.818650], abs=0.01)
    assert found["principal"]["values"] == pytest.approx([1.5296, 1.5226, 1.5205], abs=5e-7)
    assert found["arbitrary"] is False and found["azimuth"] is None
    assert "sigma" not in found
    inclined = call(client, crystal=CRYSTAL, tensor=W8, direction="(121)", thickness=0.5, edge="[010]")
    assert inclined["indices"] == pytest.approx([1.52366738, 1.52064187], abs=5e-7)
    assert inclined["retardation"] == pytest.approx(1512.754596, abs=0.3)
    assert inclined["azimuth"] == pytest.approx(-10.885004, abs=0.01)
    assert inclined["waves"] is None and inclined["quarter_wave"] is None
    assert inclined["tilt"]["tolerance"] is None and inclined["tilt"]["cut"]["largest"] is None


def test_w8_to_all_its_digits(client: TestClient) -> None:
    psi = np.deg2rad(52.0)
    z, x = np.array([np.sin(psi), 0, np.cos(psi)]), np.array([-np.cos(psi), 0, np.sin(psi)])
    exact = 1.5296**2 * np.outer(z, z) + 1.5205**2 * np.outer(x, x) + np.diag([0, 1.5226**2, 0])
    found = call(client, crystal=CRYSTAL, tensor={"matrix": exact.tolist()}, direction="(1 2 1)", edge="[0 1 0]")
    assert found["indices"] == pytest.approx([1.52366738, 1.52064187], abs=5e-9)
    assert found["birefringence"] * 0.5e6 == pytest.approx(1512.754596, abs=5e-7)
    assert found["azimuth"] == pytest.approx(-10.885004, abs=5e-7)
    assert found["two_v"] == pytest.approx(57.637299, abs=5e-7)
    assert sorted(np.rad2deg(np.arctan2(v[0], v[2])) for v in found["axes"]) == pytest.approx(
        [23.181350, 80.818650], abs=5e-7
    )


def test_calcite(client: TestClient) -> None:
    # Walk-off at 45°: tan(45° + ρ) = (n_o/n_e)².
    found = call(client, crystal=TRIGONAL, tensor=CALCITE, direction=[1, 0, 1])
    assert found["walk_off"][0] == 0.0
    assert found["walk_off"][1] == pytest.approx(np.rad2deg(np.arctan((1.6585 / 1.4862) ** 2)) - 45, abs=1e-9)
    assert (found["axes"], found["two_v"], found["sign"], found["cone"]) == ([[0, 0, 1]], None, "-", None)
    assert found["principal"]["axes"] == [None, None, [0, 0, 1]]
    same = call(client, crystal=TRIGONAL, tensor=CALCITE, direction="(0 0 0 1)", thickness=1, wavelength=589)
    assert same["vibrations"] == [None, None] and same["arbitrary"] is True
    assert same["walk_off"] == [0, 0] and same["rays"] == [[0, 0, 1], [0, 0, 1]]
    assert same["birefringence"] == same["retardation"] == same["waves"] == 0
    assert same["quarter_wave"] is None and same["half_wave"] is None
    assert same["indices"] == pytest.approx([1.6585, 1.6585], rel=1e-14)


def test_isotropic(client: TestClient) -> None:
    limiting = {"cell": None, "group": "∞∞m"}
    for crystal in (CUBIC, limiting):
        found = call(client, crystal=crystal, tensor={"free": {"11": 2.25}}, direction=[1, 2, 3], edge=[1, 0, 0])
        assert found["indices"] == pytest.approx([1.5, 1.5], rel=1e-14)
        assert found["vibrations"] == [None, None] and found["axes"] == []
        assert found["two_v"] is None and found["sign"] is None and found["azimuth"] is None
        assert found["walk_off"] == [0, 0]
        assert found["principal"] == {
            "values": [1.5, 1.5, 1.5], "axes": [None, None, None], "shape": "isotropic"
        }  # fmt: skip


def test_limiting_group(client: TestClient) -> None:
    crystal = {"cell": None, "group": "∞m"}
    found = call(client, crystal=crystal, tensor={"free": {"11": 2.25, "33": 2.56}}, direction=[1, 0, 0])
    assert found["indices"] == pytest.approx([1.6, 1.5], rel=1e-14)
    assert found["sign"] == "+" and found["axes"] == [[0, 0, 1]]
    assert refusal(client, crystal=crystal, tensor=W8 | {"free": {"11": 2.2, "33": 2.3}}, direction="[100]")[
        "field"
    ] == ("direction")


def test_along_its_own_optic_axes(client: TestClient) -> None:
    first = call(client, crystal=TRICLINIC, tensor=SIX, direction=[1, 0, 0])
    assert len(first["axes"]) == 2
    for axis in first["axes"]:
        for sense in (1, -1):
            found = call(client, crystal=TRICLINIC, tensor=SIX, direction=[sense * part for part in axis])
            assert found["vibrations"] == [None, None] and found["walk_off"] == [None, None]
            assert found["rays"] == [None, None]
            assert found["indices"] == pytest.approx([first["principal"]["values"][1]] * 2, rel=1e-12)
            assert found["birefringence"] == 0
            assert found["cone"] > 0


def test_every_way_to_give_a_direction(client: TestClient) -> None:
    reciprocal = call(client, crystal=CRYSTAL, tensor=W8, direction="(1 2 1)")["normal"]
    for direction in ("(121)", "(1,2,1)", reciprocal, {"xyz": reciprocal}, [5 * part for part in reciprocal]):
        assert call(client, crystal=CRYSTAL, tensor=W8, direction=direction)["normal"] == pytest.approx(reciprocal)
    pose = {"exact": ["z", "(121)"], "toward": ["x", "[0 1 0]"]}
    posed = call(
        client,
        crystal=CRYSTAL,
        tensor=W8,
        pose=pose,
        direction={"specimen": [0, 0, 1]},
        edge={"specimen": [1, 0, 0]},
    )
    assert posed["normal"] == pytest.approx(reciprocal, abs=1e-15)
    # x of the specimen is +b projected on the plate, so the azimuth is the worked one.
    assert posed["azimuth"] == pytest.approx(-10.885004, abs=0.01)
    assert call(client, crystal=CRYSTAL, tensor=W8, direction="[121]")["normal"] != pytest.approx(reciprocal, abs=0.01)
    turned = call(client, crystal=CRYSTAL, tensor=W8, direction=[-part for part in reciprocal], edge="[010]")
    assert turned["azimuth"] == pytest.approx(10.885004, abs=0.01)


def test_frames_change_no_number(client: TestClient) -> None:
    rules = ("x3=c x2=b*", "x1=a x3=c*", "x2=b x1=c*")
    answers = []
    for frame in rules:
        crystal = {**TRICLINIC, "frame": frame}
        moved = client.post(
            "/api/v1/convert",
            json={"from": TRICLINIC, "tensor": SIX, "to": crystal, "basis": np.eye(3).tolist()},
        ).json()
        answers.append(
            call(client, crystal=crystal, tensor={"matrix": moved["matrix"]}, direction="(1 -2 3)", edge="[1 1 0]")
        )
    for found in answers[1:]:
        for name in ("indices", "walk_off"):
            assert found[name] == pytest.approx(answers[0][name], rel=1e-9)
        for name in ("two_v", "azimuth", "birefringence"):
            assert found[name] == pytest.approx(answers[0][name], rel=1e-9)


def test_sigma(client: TestClient) -> None:
    # n = √ε along the axes, so σ(n) = σ(ε)/2n; across c the two waves are the principal ones.
    tensor = {**CALCITE, "covariance": [[4e-6, 0], [0, 9e-6]]}
    found = call(client, crystal=TRIGONAL, tensor=tensor, direction="[100]", thickness=1)
    assert found["sigma"] == pytest.approx([2e-3 / (2 * 1.6585), 3e-3 / (2 * 1.4862)], rel=1e-12)
    total = np.hypot(*found["sigma"])
    assert found["birefringence_sigma"] == pytest.approx(total, rel=1e-9)
    assert found["retardation_sigma"] == pytest.approx(total * 1e6, rel=1e-9)
    assert found["two_v_sigma"] is None
    assert found["vibration_sigma"] == pytest.approx(0, abs=1e-12)
    # Along c symmetry holds the two together, and both have the σ of n_o.
    along = call(client, crystal=TRIGONAL, tensor=tensor, direction="[001]")
    assert along["sigma"] == pytest.approx([2e-3 / (2 * 1.6585)] * 2, rel=1e-12)
    assert along["birefringence_sigma"] == 0 and along["vibration_sigma"] is None
    axis = call(client, crystal=CRYSTAL, tensor=W8, direction=[1, 0, 0])["axes"][0]
    biaxial = call(client, crystal=CRYSTAL, tensor={**W8, "covariance": (1e-10 * np.eye(4)).tolist()}, direction=axis)
    assert biaxial["sigma"] == [None, None]
    assert biaxial["birefringence_sigma"] is None
    assert biaxial["two_v_sigma"] > 0
    exact = call(client, crystal=CRYSTAL, tensor={**W8, "covariance": np.zeros((4, 4)).tolist()}, direction=axis)
    assert exact["two_v_sigma"] == 0


def test_thicknesses_and_tilts(client: TestClient) -> None:
    body: dict[str, Any] = {"crystal": CRYSTAL, "tensor": W8, "direction": "(010)", "wavelength": 589.3}
    found = call(client, **body)
    assert found["quarter_wave"] == pytest.approx(589.3e-6 / 4 / found["birefringence"], rel=1e-12)
    assert found["half_wave"] == pytest.approx(2 * found["quarter_wave"], rel=1e-12)
    assert found["tilt"] is None and found["retardation"] is None
    plate = call(client, **body, thickness=0.5)
    assert plate["tilt"]["tolerance"] == pytest.approx(5.893, rel=1e-12)
    assert 0 < plate["tilt"]["cut"]["largest"] < plate["tilt"]["beam"]["largest"] < 90
    assert plate["tilt"]["cut"]["slope"] == 0 and plate["tilt"]["cut"]["toward"] is None
    stricter = call(client, **body, thickness=0.5, tolerance=1.0)
    # On a principal axis the second order is all there is: a tilt as the root of the tolerance.
    ratio = plate["tilt"]["cut"]["largest"] / stricter["tilt"]["cut"]["largest"]
    assert ratio == pytest.approx(np.sqrt(5.893), rel=2e-3)


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"tensor": {"free": {"11": -2.3, "13": 0, "22": 2.3, "33": 2.3}}}, "tensor.free"),
        ({"tensor": {"matrix": [[2, 0, 0], [0, 2, 0], [0, 0, -1]]}}, "tensor.matrix"),
        ({"tensor": {"matrix": [[2, 0, 3], [0, 2, 0], [3, 0, 2]]}}, "tensor.matrix"),
        ({"tensor": {"matrix": [[0, 0, 0], [0, 0, 0], [0, 0, 0]]}}, "tensor.matrix"),
        ({"tensor": {"matrix": [[1e200, 0, 0], [0, 1e200, 0], [0, 0, 1e200]]}}, "tensor.matrix"),
        ({"tensor": {**W8, "parity": "axial"}}, "tensor.parity"),
        ({"tensor": {"matrix": SIX["matrix"], "intrinsic": "general"}}, "tensor.intrinsic"),
        ({"tensor": {**W8, "covariance": [[1]]}}, "tensor.covariance"),
        ({"tensor": {"free": {"11": 2}}}, "tensor.free.13"),
        ({"direction": "[0 0 0]"}, "direction"),
        ({"direction": [0, 0, 0]}, "direction"),
        ({"direction": "(1 2"}, "direction"),
        ({"direction": [1, 2]}, "direction"),
        ({"direction": {"specimen": [0, 0, 0]}}, "direction.specimen"),
        ({"direction": None}, "direction"),
        ({"direction": "(1 0 -1 0)"}, "direction"),
        ({"edge": "(010)"}, "edge"),
        ({"edge": "[0 0 0]"}, "edge"),
        ({"thickness": 0}, "thickness"),
        ({"thickness": -1}, "thickness"),
        ({"thickness": 1e300}, "thickness"),
        ({"wavelength": 0}, "wavelength"),
        ({"wavelength": "589"}, "wavelength"),
        ({"tolerance": -1}, "tolerance"),
        ({"pose": {"axis": "[0 0 0]", "angle": 3}}, "pose.axis"),
        ({"crystal": {**TRICLINIC, "group": "2/m"}}, "crystal.cell"),
        ({"temperature": 300}, "temperature"),
    ],
)
def test_refusals(client: TestClient, change: dict[str, Any], field: str) -> None:
    error = refusal(client, **{"crystal": CRYSTAL, "tensor": W8, "direction": "(010)", **change})
    assert error["field"] == field
    assert error["message"]


def test_what_is_missing(client: TestClient) -> None:
    assert refusal(client, crystal=CRYSTAL, tensor=W8)["field"] == "direction"
    assert refusal(client, crystal=CRYSTAL, direction="[100]")["field"] == "tensor"


def test_no_input_breaks_it(client: TestClient) -> None:
    # Seeded extremes: every answer is 200 with finite numbers, or 422, and quick.
    random = np.random.default_rng(11)
    numbers = [0, 1e-300, 1e-9, 1e-3, 1, 1.0000000001, 2.25, 1e3, 1e9, 1e300, -1]
    for _ in range(60):
        matrix = np.diag(random.choice(numbers, size=3)) + random.choice([0, 0, 1e-9, 0.3]) * np.eye(3)[[1, 0, 2]]
        body: dict[str, Any] = {
            "crystal": TRICLINIC,
            "tensor": {"matrix": matrix.tolist(), "covariance": (random.choice(numbers[:-1]) * np.eye(6)).tolist()},
            "direction": random.choice([0, 0, 1e-12, 1e-8, 1, 1e300], size=3).tolist(),
            "thickness": random.choice([1e-300, 1e-9, 1.0, 1e6]),
            "wavelength": random.choice([1e-300, 589.0, 1e12]),
            "edge": [1, 1, 0],
        }
        started = time.perf_counter()
        answer = client.post("/api/v1/optics", json=body)
        assert time.perf_counter() - started < 5
        assert answer.status_code in (200, 422), answer.text
        json.loads(answer.text, parse_constant=pytest.fail)


def test_the_document_describes_the_call(client: TestClient) -> None:
    document = client.get("/openapi.json").json()
    assert "/api/v1/optics" in document["paths"]
    for name in ("OpticsRequest", "OpticsAnswer"):
        for member, schema in document["components"]["schemas"][name]["properties"].items():
            assert member in ("crystal", "tensor", "pose", "frame", "note", "principal", "birefringence_sigma") or (
                "description" in schema
            ), (name, member)
