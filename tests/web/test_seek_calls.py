"""The calls ``seek`` and ``miscut`` by HTTP, as a script would make them."""

from __future__ import annotations

import time
from itertools import product
from math import gcd
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.seek_shapes import MAX_INDEX, MiscutAnswer, SeekAnswer

HALF = 5.1e-7

# Worked numbers: invented data; the answers were computed apart from this project.
TETRAGONAL: dict[str, Any] = {"cell": [5, 5, 7, 90, 90, 90], "group": "4/mmm"}
UNIAXIAL: dict[str, Any] = {"free": {"11": 6.2, "33": 10.7}}
MONOCLINIC: dict[str, Any] = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m"}
W1: dict[str, Any] = {"free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}}
LIMITING: dict[str, Any] = {"cell": None, "group": "∞/mm"}


def call(client: TestClient, name: str, **body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 200, answer.text
    return answer.json()


def refusal(client: TestClient, name: str, **body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 422, answer.text
    error = answer.json()["error"]
    assert set(error) <= {"message", "field", "hint", "detail"}
    return error


def miscut(client: TestClient, **body: Any) -> Any:
    answer = call(client, "miscut", **body)
    MiscutAnswer.model_validate(answer)
    return answer


def test_miscut_of_a_bar_at_45_degrees(client: TestClient) -> None:
    found = miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction=[1, 0, 1], half_angle=1.5)
    assert found["nominal"] == pytest.approx(8.45)
    assert (found["lowest"] / 8.45 - 1) * 100 == pytest.approx(-1.393561, abs=HALF)
    assert (found["highest"] / 8.45 - 1) * 100 == pytest.approx(1.393561, abs=HALF)
    assert found["half_angle"] == 1.5
    assert found["slope"] == pytest.approx(4.5 * np.pi / 180)
    assert "sigma" not in found
    allowed = miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction=[1, 0, 1], tolerance=8.45 * 0.005)
    assert allowed["half_angle"] == pytest.approx(0.537975, abs=HALF)
    assert allowed["lowest"] == pytest.approx(8.45 * 0.995)
    assert allowed["highest"] == pytest.approx(8.45 * 1.005)
    along = miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction="[0 0 1]", tolerance=10.7 * 0.005)
    assert along["half_angle"] == pytest.approx(6.259759, abs=HALF)
    assert along["steepest"] is None
    # The free axis of a limiting group is the same case without a cell.
    limiting = miscut(client, crystal=LIMITING, tensor=UNIAXIAL, direction=[0, 0, 2], half_angle=1.5)
    assert (limiting["lowest"] / 10.7 - 1) * 100 == pytest.approx(-0.028818, abs=HALF)


@pytest.mark.parametrize("direction", ["(-201)", "(-2 0 1)", "(2\u0304 0 1)", "(2 0 -1)"])
def test_miscut_of_a_monoclinic_plane(client: TestClient, direction: str) -> None:
    found = miscut(client, crystal=MONOCLINIC, tensor=W1, direction=direction, half_angle=1)
    assert found["nominal"] == pytest.approx(13.195526, abs=HALF)
    assert found["lowest"] == pytest.approx(13.131901, abs=HALF)
    assert found["highest"] == pytest.approx(13.260801, abs=HALF)


def test_miscut_in_the_specimen_frame_and_with_covariance(client: TestClient) -> None:
    pose = {"exact": ["z", "(-201)"], "toward": ["x", "[0 1 0]"]}
    tensor = {**W1, "covariance": np.diag([0.01, 0.01, 0.04, 0.01]).tolist()}
    found = miscut(
        client, crystal=MONOCLINIC, tensor=tensor, pose=pose, direction={"specimen": [0, 0, 3]}, half_angle=1
    )
    assert found["nominal"] == pytest.approx(13.195526, abs=HALF)
    along = call(client, "along", crystal=MONOCLINIC, tensor=tensor, directions=["(-201)"])
    assert found["sigma"] == pytest.approx(along["sigma"][0])
    assert found["direction"] == pytest.approx(along["vectors"][0])


def test_miscut_where_all_directions_do(client: TestClient) -> None:
    cubic = {"cell": [4, 4, 4, 90, 90, 90], "group": "m-3m"}
    body = {"crystal": cubic, "tensor": {"matrix": np.diag([3.3, 3.3, 3.3]).tolist()}, "direction": "(123)"}
    assert miscut(client, **body, tolerance=0)["half_angle"] == 90
    assert miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction=[0, 0, 1], tolerance=0)["half_angle"] == 0
    assert miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction=[0, 0, 1], tolerance=5)["half_angle"] == 90
    whole = miscut(client, crystal=TETRAGONAL, tensor=UNIAXIAL, direction=[1, 2, 3], half_angle=90)
    assert (whole["lowest"], whole["highest"]) == pytest.approx((6.2, 10.7))


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({}, "half_angle"),
        ({"half_angle": 1, "tolerance": 1}, "tolerance"),
        ({"half_angle": 91}, "half_angle"),
        ({"half_angle": -1}, "half_angle"),
        ({"half_angle": "1"}, "half_angle"),
        ({"half_angle": True}, "half_angle"),
        ({"tolerance": -0.1}, "tolerance"),
        ({"half_angle": 1, "direction": [0, 0, 0]}, "direction"),
        ({"half_angle": 1, "direction": "(1 0 -1 0)"}, "direction"),
        ({"half_angle": 1, "direction": {"specimen": [0, 0, 0]}}, "direction.specimen"),
        ({"half_angle": 1, "pose": {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 2]]}}, "pose.matrix"),
        ({"half_angle": 1, "tensor": {"free": {"11": 1}}}, "tensor.free.13"),
        ({"half_angle": 1, "tensor": {}}, "tensor"),
        ({"half_angle": 1, "cone": 1}, "cone"),
        ({"half_angle": 1, "crystal": {"cell": None, "group": "2/m"}}, "crystal.cell"),
        ({"half_angle": 1, "crystal": {"group": "∞"}, "tensor": UNIAXIAL}, "direction"),
    ],
)
def test_miscut_refuses(client: TestClient, change: dict[str, Any], field: str) -> None:
    body = {"crystal": MONOCLINIC, "tensor": W1, "direction": "(-201)", **change}
    error = refusal(client, "miscut", **body)
    assert error["field"] == field
    assert error["message"]


def test_miscut_survives_the_ends_of_the_range(client: TestClient) -> None:
    triclinic = {"cell": [5.1, 6.2, 7.3, 81, 97, 104], "group": "-1"}
    cells = np.array([[1.0, 0.3, -0.5], [0.3, -0.7, 0.2], [-0.5, 0.2, 0.9]])
    for scale in (5e-324, 1e-310, 1e-30, 1e30, 1e300):
        for ask in ({"half_angle": 12}, {"tolerance": 1e300}, {"tolerance": 5e-324}):
            body = {"crystal": triclinic, "tensor": {"matrix": (cells * scale).tolist()}, "direction": [1e-300, 0, 0]}
            answer = client.post("/api/v1/miscut", json={**body, **ask})
            assert answer.status_code in (200, 422), answer.text


# Seek -----------------------------------------------------------------------------------------------------------------

TRIGONAL: dict[str, Any] = {"cell": [4.990, 4.990, 17.061, 90, 90, 120], "group": "-3m"}
W2: dict[str, Any] = {"free": {"11": -5.6, "33": 24.9}}
W3: dict[str, Any] = {"free": {"11": 31, "13": 6, "22": 8.5, "33": -12.4}}
TRICLINIC: dict[str, Any] = {"cell": [5.1, 6.2, 7.3, 81, 97, 104], "group": "-1"}
TWISTED: dict[str, Any] = {"matrix": [[4, 1, 0.5], [1, 6, -0.7], [0.5, -0.7, 3]]}
LACKING: dict[str, Any] = {"free": {"11": 1}}
CUBIC: dict[str, Any] = {"cell": [4, 4, 4, 90, 90, 90], "group": "m-3m"}


def seek(client: TestClient, crystal: dict[str, Any], *conditions: tuple[dict[str, Any], Any], **more: Any) -> Any:
    asked = [{"tensor": tensor, "target": target} for tensor, target in conditions]
    answer = call(client, "seek", crystal=crystal, conditions=asked, **more)
    SeekAnswer.model_validate(answer)
    assert set(answer) == set(SeekAnswer.model_fields)
    return answer


def values_of(client: TestClient, crystal: dict[str, Any], tensor: dict[str, Any], directions: list[Any]) -> Any:
    return np.array(call(client, "along", crystal=crystal, tensor=tensor, directions=directions)["values"])


def test_the_zero_cone_of_a_trigonal_crystal(client: TestClient) -> None:
    found = seek(client, TRIGONAL, (W2, 0))
    assert found["none"] is None
    assert len(found["curves"]) == 2
    points = np.array(found["points"])
    assert points == pytest.approx(np.concatenate(found["curves"]))
    polar = np.rad2deg(np.arccos(points[:, 2]))
    assert np.minimum(polar, 180 - polar) == pytest.approx(np.full(len(points), 64.628017), abs=HALF)
    assert found["cone"]["half_angles"] == pytest.approx([64.628017] * 2, abs=HALF)
    assert np.max(np.abs(values_of(client, TRIGONAL, W2, found["points"]))) < 1e-12
    assert found["isolated"] == []
    # n(012) at 63.133678 from c: both it and n(10-2) that no operation joins to it, though the value is the same.
    near = {entry["direction"]: entry for entry in found["planes"]}
    assert {"(1 0 2)", "(1 0 -2)"} <= set(near)
    assert near["(1 0 2)"]["off"] == pytest.approx(1.494339, abs=1e-6)
    assert near["(1 0 2)"]["values"] == pytest.approx([0.628803], abs=HALF)
    assert found["rows"] == []
    wider = seek(client, TRIGONAL, (W2, 0), within=1, max_index=4)
    assert [entry["direction"] for entry in wider["rows"]] == ["[4 -4 1]", "[-4 4 1]"]
    assert [entry["off"] for entry in wider["rows"]] == pytest.approx([64.628017 - 63.733862] * 2, abs=1e-6)


def test_the_zero_cone_of_a_monoclinic_crystal(client: TestClient) -> None:
    found = seek(client, MONOCLINIC, (W3, 0.0))
    assert found["fraction_below"] == pytest.approx(0.243750, abs=HALF)
    assert sorted(found["cone"]["half_angles"]) == pytest.approx([32.801010, 51.269462], abs=HALF)
    assert found["ranges"][0] == pytest.approx([-13.214218, 31.814218], abs=HALF)
    assert np.max(np.abs(values_of(client, MONOCLINIC, W3, found["points"]))) < 1e-12
    axis = found["cone"]["axis"]
    assert np.rad2deg(np.arctan(axis[0] / axis[2])) == pytest.approx(-7.727999, abs=1e-6)
    for entry in found["planes"] + found["rows"]:
        assert entry["off"] <= 2 + 1e-6
        assert values_of(client, MONOCLINIC, W3, [entry["direction"]]) == pytest.approx(entry["values"])
    offs = [entry["off"] for entry in found["planes"]]
    assert offs == sorted(offs)


def test_where_there_is_no_such_direction(client: TestClient) -> None:
    found = seek(client, TETRAGONAL, (UNIAXIAL, 0))
    assert found["curves"] == found["points"] == found["planes"] == found["rows"] == found["isolated"] == []
    assert "6.2" in found["none"] and "10.7" in found["none"]
    assert found["fraction_below"] == 0
    assert found["cone"] is None
    assert found["everywhere"] is False
    assert seek(client, TETRAGONAL, (UNIAXIAL, 11))["fraction_below"] == 1
    # An axial tensor that the crystal forbids is zero along every direction.
    forbidden = {"parity": "axial", "free": {}}
    assert seek(client, CUBIC, (forbidden, 1))["none"] is not None
    every = seek(client, CUBIC, (forbidden, 0))
    assert every["everywhere"] is True
    assert every["none"] is None
    assert every["fraction_below"] == 0
    assert [entry["off"] for entry in every["planes"]] == [0] * len(every["planes"])


def test_extremes(client: TestClient) -> None:
    most = seek(client, TETRAGONAL, (UNIAXIAL, "max"))
    assert np.array(most["points"]) == pytest.approx(np.array([[0, 0, 1], [0, 0, -1]]))
    assert most["isolated"][0]["values"] == pytest.approx([10.7])
    assert most["isolated"][0]["slopes"] == pytest.approx([0], abs=1e-12)
    assert most["isolated"][0]["sigma"] == [None]
    assert most["planes"][0] == {"direction": "(0 0 1)", "off": pytest.approx(0), "values": pytest.approx([10.7])}
    assert most["rows"][0]["direction"] == "[0 0 1]"
    assert most["fraction_below"] is None
    least = seek(client, TETRAGONAL, (UNIAXIAL, "min"))
    assert len(least["curves"]) == 1
    assert np.array(least["points"])[:, 2] == pytest.approx(np.zeros(len(least["points"])), abs=1e-15)
    # One of (100) and (010), one of (110) and (1-10), (210) for eight.
    assert [entry["direction"] for entry in least["planes"]][:3] == ["(1 0 0)", "(1 1 0)", "(2 1 0)"]


def test_two_numbers_meet_in_lines(client: TestClient) -> None:
    # A property and, say, its temperature derivative, of another kind; targets that [1 2 1] has.
    change = {"parity": "polar", "intrinsic": "general", "matrix": [[0.1, 0.3, -0.2], [0, -0.2, 0.1], [0.1, 0.2, 0.4]]}
    targets = [float(values_of(client, TRICLINIC, tensor, ["[1 2 1]"])[0]) for tensor in (TWISTED, change)]
    found = seek(client, TRICLINIC, (TWISTED, targets[0]), (change, targets[1]))
    assert found["curves"] == []
    assert len(found["points"]) in (4, 8)
    assert values_of(client, TRICLINIC, TWISTED, found["points"]) == pytest.approx(
        np.full(len(found["points"]), targets[0]), abs=1e-12
    )
    assert values_of(client, TRICLINIC, change, found["points"]) == pytest.approx(
        np.full(len(found["points"]), targets[1]), abs=1e-12
    )
    assert found["rows"][0]["direction"] == "[1 2 1]"
    assert found["rows"][0]["off"] < 1e-6
    assert found["rows"][0]["values"] == pytest.approx(targets)
    assert found["fraction_below"] is None
    for entry in found["isolated"]:
        for tensor, slope in zip((TWISTED, change), entry["slopes"], strict=True):
            tilted = call(
                client, "miscut", crystal=TRICLINIC, tensor=tensor, direction=entry["vector"], half_angle=0.001
            )
            assert slope == pytest.approx(tilted["slope"])
            assert (tilted["highest"] - tilted["lowest"]) / 0.002 == pytest.approx(slope, rel=1e-3)


def test_a_number_and_an_extreme_in_either_order(client: TestClient) -> None:
    second = {"matrix": [[0.1, 0.2, 0], [0.2, -0.3, 0.4], [0, 0.4, 0.2]]}
    found = seek(client, TRICLINIC, (TWISTED, 5), (second, "min"))
    (entry,) = found["isolated"]
    assert entry["values"][0] == pytest.approx(5, abs=1e-12)
    cone = seek(client, TRICLINIC, (TWISTED, 5))
    assert entry["values"][1] == pytest.approx(np.min(values_of(client, TRICLINIC, second, cone["points"])), abs=1e-4)
    assert entry["values"][1] <= np.min(values_of(client, TRICLINIC, second, cone["points"])) + 1e-12
    other = seek(client, TRICLINIC, (second, "min"), (TWISTED, 5))
    assert other["points"] == pytest.approx(np.array(found["points"]))
    assert other["isolated"][0]["values"] == pytest.approx(entry["values"][::-1])


def test_equivalents_by_what_keeps_the_value(client: TestClient) -> None:
    # A gyration tensor of -4 (W7: invented data; computed apart from this project), 11 = 2, 22 = −2, 12 = 1.5: the
    # quarter-turn with inversion changes its sign along every direction, so that (100) and (010) are two sets.
    crystal = {"cell": [5, 5, 7, 90, 90, 90], "group": "-4"}
    gyration = {"parity": "axial", "free": {"11": 2, "12": 1.5}}
    zero = seek(client, crystal, (gyration, 0), max_index=1, within=20)
    normals = np.array([np.cross(curve[0], curve[40]) for curve in zero["curves"]])
    azimuths = sorted(np.rad2deg(np.arctan(normals[:, 0] / -normals[:, 1])))
    assert azimuths == pytest.approx([-26.565051, 63.434949], abs=HALF)
    polar = seek(client, crystal, ({"free": {"11": 2, "33": 1}}, 1.5), max_index=1, within=90)
    axial = seek(client, crystal, (gyration, 0.5), max_index=1, within=90)
    assert "(0 1 0)" not in [entry["direction"] for entry in polar["planes"]]
    assert {"(1 0 0)", "(0 1 0)"} <= {entry["direction"] for entry in axial["planes"]}
    largest = seek(client, crystal, (gyration, "max"))
    assert largest["isolated"][0]["values"] == pytest.approx([2.5])
    vector = largest["isolated"][0]["vector"]
    assert np.rad2deg(np.arctan2(vector[1], vector[0])) == pytest.approx(18.434949, abs=HALF)


def test_a_limiting_group_has_no_planes_or_rows(client: TestClient) -> None:
    for group in ("∞", "infm", "∞/mm"):
        found = seek(client, {"cell": None, "group": group}, (UNIAXIAL, 8))
        assert len(found["curves"]) == 2
        assert found["planes"] == found["rows"] == []
    every = seek(client, {"group": "∞∞m"}, ({"free": {"11": 3}}, 3), ({"matrix": np.eye(3).tolist()}, "max"))
    assert every["everywhere"] is True


def test_sigma_with_a_covariance(client: TestClient) -> None:
    tensor = {**W1, "covariance": np.diag([0.01, 0.01, 0.04, 0.01]).tolist()}
    found = seek(client, MONOCLINIC, (tensor, "max"), (W1, "max"))
    assert found["isolated"][0]["sigma"] == [pytest.approx(0.2), None]


@pytest.mark.parametrize(
    ("conditions", "more", "field"),
    [
        ([], {}, "conditions"),
        ([{"tensor": W1, "target": 1}] * 3, {}, "conditions"),
        ({"tensor": W1, "target": 1}, {}, "conditions"),
        ([{"tensor": W1}], {}, "conditions[0].target"),
        ([{"target": 1}], {}, "conditions[0].tensor"),
        ([{"tensor": W1, "target": "largest"}], {}, "conditions[0].target"),
        ([{"tensor": W1, "target": None}], {}, "conditions[0].target"),
        ([{"tensor": W1, "target": True}], {}, "conditions[0].target"),
        ([{"tensor": W1, "target": [1]}], {}, "conditions[0].target"),
        ([{"tensor": W1, "target": 1}, {"tensor": W1, "target": "1"}], {}, "conditions[1].target"),
        (
            [{"tensor": W1, "target": 1}, {"tensor": {"free": {"11": 1}}, "target": 1}],
            {},
            "conditions[1].tensor.free.13",
        ),
        ([{"tensor": {**W1, "parity": "odd"}, "target": 1}], {}, "conditions[0].tensor.parity"),
        ([{"tensor": {}, "target": 1}], {}, "conditions[0].tensor"),
        ([{"tensor": {**W1, "covariance": [[1]]}, "target": 1}], {}, "conditions[0].tensor.covariance"),
        ([{"tensor": W1, "target": 1, "weight": 2}], {}, "conditions[0].weight"),
        ([{"tensor": W1, "target": 1}], {"within": -1}, "within"),
        ([{"tensor": W1, "target": 1}], {"within": 91}, "within"),
        ([{"tensor": W1, "target": 1}], {"max_index": 0}, "max_index"),
        ([{"tensor": W1, "target": 1}], {"max_index": 1000}, "max_index"),
        ([{"tensor": W1, "target": 1}], {"max_index": 2.5}, "max_index"),
        ([{"tensor": W1, "target": 1}], {"pose": {"bunge": [0, 0, 0]}}, "pose"),
    ],
)
def test_seek_refuses(client: TestClient, conditions: Any, more: dict[str, Any], field: str) -> None:
    error = refusal(client, "seek", crystal=MONOCLINIC, conditions=conditions, **more)
    assert error["field"] == field
    assert error["message"]
    assert refusal(client, "seek", crystal={"group": "2/m"}, conditions=[{"tensor": W1, "target": 1}])["field"] == (
        "crystal.cell"
    )


def test_seek_survives_the_ends_of_the_range(client: TestClient) -> None:
    cells = np.array([[1.0, 0.3, -0.5], [0.3, -0.7, 0.2], [-0.5, 0.2, 0.9]])
    sizes = (5e-324, 1e-310, 1e-30, 1.0, 1e30, 1e300)
    for one in sizes:
        for target in (0, one / 2, -5e-324, 1.7e308, "max"):
            for two in (5e-324, 1e300):
                conditions = [
                    {"tensor": {"matrix": (cells * one).tolist()}, "target": target},
                    {"tensor": {"matrix": (cells[::-1, ::-1] * two).tolist()}, "target": "min"},
                ]
                for asked in (conditions, conditions[:1]):
                    answer = client.post("/api/v1/seek", json={"crystal": TRICLINIC, "conditions": asked})
                    assert answer.status_code in (200, 422), answer.text
                    if answer.status_code == 422:
                        assert "finite" in answer.json()["error"]["message"]


def test_seek_is_quick_at_its_limits(client: TestClient) -> None:
    start = time.monotonic()
    body = {"crystal": TRICLINIC, "within": 90, "max_index": MAX_INDEX}
    answer = client.post("/api/v1/seek", json={**body, "conditions": [{"tensor": TWISTED, "target": 4.5}]})
    assert answer.status_code == 200
    # All primitive triples up to the limit, one of each pair of opposites.
    span = range(-MAX_INDEX, MAX_INDEX + 1)
    count = sum(gcd(*triple) == 1 for triple in product(span, repeat=3)) // 2
    assert len(answer.json()["planes"]) == len(answer.json()["rows"]) == count
    assert time.monotonic() - start < 4
