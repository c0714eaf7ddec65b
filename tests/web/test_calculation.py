"""The calculation interface by HTTP, as a script would call it."""

from __future__ import annotations

import json
import struct
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

MONOCLINIC: dict[str, Any] = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m"}
W1: dict[str, Any] = {"free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}}


def call(client: TestClient, name: str, **body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 200, answer.text
    return answer.json()


def refusal(client: TestClient, name: str, **body: Any) -> Any:
    answer = client.post(f"/api/v1/{name}", json=body)
    assert answer.status_code == 422, answer.text
    return answer.json()["error"]


# Worked numbers are invented data; the answers were computed apart from this project.


def test_w1_values_along_normals_and_rows(client: TestClient) -> None:
    found = call(client, "along", crystal=MONOCLINIC, tensor=W1, directions=["(-201)", "[-201]", "(2 0 1)", "[2,0,1]"])
    assert found["values"] == pytest.approx([13.195526, 12.260712, 16.093708, 13.193579], abs=5e-7)
    angles = [np.rad2deg(np.arctan2(x, z)) for x, _, z in found["vectors"]]
    assert angles[0] == pytest.approx(-36.188681, abs=5e-7)
    assert angles[1] == pytest.approx(-63.866506, abs=5e-7)
    assert angles[2] == pytest.approx(50.750110, abs=5e-7)


def test_w1_other_frame_and_relabelled_crystal(client: TestClient) -> None:
    other = {**MONOCLINIC, "frame": "x1=a x3=c*"}
    turned = call(client, "convert", **{"from": MONOCLINIC}, tensor=W1, to=other, basis=np.eye(3).tolist())
    expected = [[12.495467, 0, 1.011876], [0, 24.6, 0], [1.011876, 0, 16.604533]]
    assert np.array(turned["matrix"]) == pytest.approx(np.array(expected), abs=5e-7)
    for entry in turned["audit"]:
        total = sum(coefficient * W1["free"][label] for label, coefficient in entry["from"].items())
        assert total == pytest.approx(entry["value"], abs=1e-9)
    # (a′ b′ c′) = (c a b): the columns of the basis are the new axes in the old ones.
    relabelled = {"cell": [5.7981, 12.214, 3.0371, 90, 90, 103.83], "group": "2/m", "unique_axis": "c"}
    basis = [[0, 1, 0], [0, 0, 1], [1, 0, 0]]
    moved = call(client, "convert", **{"from": MONOCLINIC}, tensor=W1, to=relabelled, basis=basis)
    expected = [[15.9, 1.85, 0], [1.85, 13.2, 0], [0, 0, 24.6]]
    assert np.array(moved["matrix"]) == pytest.approx(np.array(expected), abs=1e-9)
    same = call(client, "along", crystal=relabelled, tensor={"matrix": moved["matrix"]}, directions=["(1 -2 0)"])
    assert same["values"][0] == pytest.approx(13.195526, abs=5e-7)
    candidates = call(client, "convert", **{"from": MONOCLINIC}, tensor=W1, to=relabelled)["candidates"]
    assert any(np.allclose(entry["basis"], basis) for entry in candidates)


def test_w2_plane_normal_or_row(client: TestClient) -> None:
    trigonal = {"cell": [4.990, 4.990, 17.061, 90, 90, 120], "group": "-3m"}
    tensor = {"free": {"11": -5.6, "33": 24.9}}
    found = call(
        client,
        "along",
        crystal=trigonal,
        tensor=tensor,
        directions=["(104)", "[104]", "(012)", "[-441]", "[100]", "(1 0 -1 4)"],
    )
    assert found["values"] == pytest.approx([9.849673, 24.737798, 0.628803, 0.373205, -5.6, 9.849673], abs=5e-7)
    off = [np.rad2deg(np.arccos(vector[2])) for vector in found["vectors"]]
    assert off[:4] == pytest.approx([44.624893, 4.182024, 63.133678, 63.733862], abs=5e-7)


def test_w5_rod_and_plate(client: TestClient) -> None:
    tetragonal = {"cell": [5, 5, 7, 90, 90, 90], "group": "4/mmm"}
    uniaxial = {"free": {"11": 6.2, "33": 10.7}}
    found = call(client, "along", crystal=tetragonal, tensor=uniaxial, directions=[[1, 0, 1]])
    assert (found["values"][0], found["rod"][0]) == pytest.approx((8.45, 7.850888), abs=5e-7)
    found = call(client, "along", crystal=MONOCLINIC, tensor=W1, directions=["(-201)", "(111)"])
    assert found["values"] == pytest.approx([13.195526, 22.258631], abs=5e-7)
    assert found["rod"] == pytest.approx([12.981096, 21.556371], abs=5e-7)
    assert found["angle"] == pytest.approx([7.966857, 9.247028], abs=5e-7)


def test_w6_class_4_without_inner_symmetry(client: TestClient) -> None:
    crystal = {"cell": [5, 5, 7, 90, 90, 90], "group": "4"}
    raw = [[118.2, -6.9, 1.1], [9.3, 121.6, -0.8], [0.4, 0.9, 85.3]]
    tensor = {"intrinsic": "general", "matrix": raw}
    state = call(client, "state", crystal=crystal, tensor=tensor)
    expected = [[119.9, -8.1, 0], [8.1, 119.9, 0], [0, 0, 85.3]]
    assert np.array(state["matrix"]) == pytest.approx(np.array(expected), abs=1e-9)
    assert state["misfit"] * np.linalg.norm(raw) == pytest.approx(3.388215, abs=5e-7)
    assert state["antisymmetric"] == pytest.approx([0, 0, 8.1])
    found = call(client, "along", crystal=crystal, tensor=tensor, directions=[[1, 1, 1], [1, 0, 0]])
    assert found["values"][0] == pytest.approx(108.366667, abs=5e-7)
    flux, cause = np.array(found["flux"][0]), np.array(found["vectors"][0])
    assert np.linalg.norm(flux - cause * (flux @ cause)) == pytest.approx(17.600442, abs=5e-7)
    assert found["angle"][1] == pytest.approx(3.864818, abs=5e-7)
    turned = call(client, "state", crystal=crystal, tensor=tensor, pose={"axis": [1, 0, 0], "angle": 180})
    assert turned["posed"][1][0] == pytest.approx(-8.1)
    higher = call(client, "state", crystal={**crystal, "group": "422"}, tensor=tensor)
    assert np.array(higher["matrix"]) == pytest.approx(np.diag([119.9, 119.9, 85.3]), abs=1e-9)


def test_w7_a_gyration_tensor(client: TestClient) -> None:
    crystal = {"cell": [5, 5, 7, 90, 90, 90], "group": "-4"}
    raw = [[2.1, 1.5, 0.1], [1.5, -1.9, -0.2], [0.1, -0.2, 0.3]]
    state = call(client, "state", crystal=crystal, tensor={"parity": "axial", "matrix": raw})
    assert np.array(state["matrix"]) == pytest.approx(np.array([[2, 1.5, 0], [1.5, -2, 0], [0, 0, 0]]), abs=1e-9)
    assert state["principal"]["values"] == pytest.approx([2.5, 0, -2.5], abs=1e-9)
    x, y, _ = state["principal"]["axes"][0]
    assert np.rad2deg(np.arctan2(y, x)) % 180 == pytest.approx(18.434949, abs=5e-7)
    tilted = [np.sin(np.deg2rad(60)), 0, np.cos(np.deg2rad(60))]
    found = call(client, "along", crystal=crystal, tensor={"parity": "axial", "matrix": raw}, directions=[tilted])
    assert found["values"][0] == pytest.approx(1.5)
    polar = call(client, "state", crystal=crystal, tensor={"matrix": raw})
    assert np.array(polar["matrix"]) == pytest.approx(np.diag([0.1, 0.1, 0.3]), abs=1e-9)


def test_form_says_why_in_both_frames(client: TestClient) -> None:
    form = call(
        client, "form", crystal=MONOCLINIC, tensor={}, pose={"exact": ["z", "(-2 0 1)"], "toward": ["x", "[010]"]}
    )
    assert (form["count"], form["free"], form["order"]) == (4, ["11", "13", "22", "33"], 4)
    assert form["cells"][0][1] == {
        "state": "zero",
        "terms": [0, 0, 0, 0],
        "because": "zero: the half-turn about x2 turns 12 into −12",
        "equals": None,
    }
    assert form["cells"][2][0]["state"] == "tied"
    assert form["fixed_axes"] == [[0, 1, 0]]
    assert "half-turn about [0 1 0]" in form["operations"]
    assert [cell["state"] for row in form["posed_cells"] for cell in row].count("zero") == 4
    assert form["posed_cells"][0][1]["because"] == "zero: the half-turn about x turns xy into −xy"


def test_surface_in_both_notations(client: TestClient) -> None:
    body = {"crystal": MONOCLINIC, "tensor": W1, "surface": "quadric", "detail": 12}
    mesh = call(client, "surface", **body)
    vertices = np.array(mesh["vertices"])
    matrix = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    assert np.einsum("ni,ij,nj->n", vertices, matrix, vertices) == pytest.approx(np.ones(len(vertices)))
    packed = client.post("/api/v1/surface", json=body, headers={"Accept": "application/octet-stream"})
    assert packed.headers["content-type"] == "application/octet-stream"
    count, triangles = struct.unpack_from("<2i", packed.content)
    assert (count, triangles) == (len(mesh["vertices"]), len(mesh["triangles"]))
    assert len(packed.content) == 8 + 12 * count + 12 * triangles + 4 * count + count
    assert np.frombuffer(packed.content, "<f4", 3 * count, 8).reshape(-1, 3) == pytest.approx(vertices, rel=1e-6)
    offset = 8 + 12 * count
    assert np.frombuffer(packed.content, "<i4", 3 * triangles, offset).reshape(-1, 3).tolist() == mesh["triangles"]
    assert np.frombuffer(packed.content, "i1", count, len(packed.content) - count).tolist() == mesh["sheet"]


def test_standard_deviations_follow_a_covariance(client: TestClient) -> None:
    # Independent derivation: σ of nᵀAn from the four variances by hand.
    variances = np.array([0.08, 0.06, 0.2, 0.09]) ** 2
    tensor = {**W1, "covariance": np.diag(variances).tolist()}
    state = call(client, "state", crystal=MONOCLINIC, tensor=tensor)
    assert np.array(state["sigma_matrix"]) == pytest.approx(
        np.array([[0.08, 0, 0.06], [0, 0.2, 0], [0.06, 0, 0.09]]), abs=1e-12
    )
    assert state["principal"]["sigma"][0] == pytest.approx(0.2)
    found = call(client, "along", crystal=MONOCLINIC, tensor=tensor, directions=["(-201)"])
    x, _, z = found["vectors"][0]
    assert found["sigma"][0] == pytest.approx(np.sqrt(np.array([x**4, 4 * x * x * z * z, 0, z**4]) @ variances))
    region = call(client, "region", crystal=MONOCLINIC, tensor=tensor, directions=["[010]", "[100]"])
    assert region["chi2"][0] == pytest.approx(0, abs=1e-9)
    assert region["bounds"] == pytest.approx([0, 3.841], abs=5e-4)
    assert region["bound"] == pytest.approx(5.991, abs=5e-4)


def test_a_fit_by_http(client: TestClient) -> None:
    readings = [
        {"kind": "along", "direction": text, "value": value, "sigma": 0.1}
        for text, value in (
            ("[100]", 12.495),
            ("[010]", 24.6),
            ("[001]", 15.9),
            ("(-201)", 13.2),
            ("(111)", 22.26),
            ("[110]", 13.2),
        )
    ]
    fit = call(client, "fit", crystal=MONOCLINIC, tensor={}, readings=readings)
    assert fit["determined"]
    assert fit["free"] == ["11", "13", "22", "33"]
    assert (fit["dof"], fit["covariance_from"], fit["rank"]) == (2, "sigma", 4)
    assert set(fit["readings"][0]) == {"predicted", "residual", "standardised", "leverage", "sigma_used"}
    refused = call(client, "fit", crystal=MONOCLINIC, tensor={}, readings=readings[:2])
    assert not refused["determined"]
    assert [refused[key] for key in ("values", "covariance", "matrix", "chi2", "principal", "condition")] == [None] * 6
    assert len(refused["undetermined"]) == 2
    assert refused["undetermined"][0]["suggest"]["kind"] == "along"


def test_specimen_directions_use_the_nearest_pose(client: TestClient) -> None:
    pose, own = {"axis": [0, 0, 1], "angle": 90}, {"axis": [0, 0, 1], "angle": 45}
    found = call(client, "along", crystal=MONOCLINIC, tensor=W1, pose=pose, directions=[{"specimen": [1, 0, 0]}])
    assert found["vectors"][0] == pytest.approx([0, 1, 0], abs=1e-12)
    mmm = {"cell": [5, 6, 7, 90, 90, 90], "group": "mmm"}
    readings = [
        {"kind": "along", "direction": {"specimen": [1, 0, 0]}, "value": 2.0},
        {"kind": "along", "direction": {"specimen": [1, 0, 0]}, "value": 1.5, "pose": own},
        {"kind": "along", "direction": "[001]", "value": 4.0},
    ]
    fit = call(client, "fit", crystal=mmm, tensor={}, readings=readings, pose=pose)
    assert fit["values"] == pytest.approx([1.0, 2.0, 4.0])


def test_cif_by_http(client: TestClient) -> None:
    text = (
        "data_x\n_cell_length_a 9.83(2)\n_cell_length_b 6.41\n_cell_length_c 7.27\n_cell_angle_alpha 90\n"
        "_cell_angle_beta 107.4\n_cell_angle_gamma 90\n_space_group_name_H-M_alt 'P 1 21/n 1'\n"
    )
    found = call(client, "cif", text=text)
    assert found["crystal"]["cell"] == [9.83, 6.41, 7.27, 90, 107.4, 90]
    assert found["crystal"]["group"] == "P 1 21/n 1"
    assert found["crystal"]["cell_sigma"] == pytest.approx([0.02, 0, 0, 0, 0, 0])
    assert found["blocks"] == ["x"]
    # What comes back goes into every other call.
    assert call(client, "form", crystal=found["crystal"], tensor={})["count"] == 4


REFUSED: dict[str, tuple[str, dict[str, Any], str]] = {
    "a cell that the group changes": (
        "form",
        {"crystal": {"cell": [5, 6, 7, 90, 90, 90], "group": "4"}, "tensor": {}},
        "crystal.cell",
    ),
    "an unknown group": ("form", {"crystal": {**MONOCLINIC, "group": "5"}, "tensor": {}}, "crystal.group"),
    "a frame rule": ("form", {"crystal": {**MONOCLINIC, "frame": "x3=c x2=c*"}, "tensor": {}}, "crystal.frame"),
    "a cell that is not free": (
        "state",
        {"crystal": MONOCLINIC, "tensor": {"free": {**W1["free"], "12": 1}}},
        "tensor.free.12",
    ),
    "a direction": (
        "along",
        {"crystal": MONOCLINIC, "tensor": W1, "directions": ["[100]", "{100}"]},
        "directions[1]",
    ),
    "a zero vector": (
        "along",
        {"crystal": MONOCLINIC, "tensor": W1, "directions": [[1, 0, 0], [0, 0, 0]]},
        "directions[1]",
    ),
    "four indices off hexagonal axes": (
        "along",
        {"crystal": MONOCLINIC, "tensor": W1, "directions": ["(1 0 -1 0)"]},
        "directions[0]",
    ),
    "a pose": (
        "state",
        {"crystal": MONOCLINIC, "tensor": W1, "pose": {"exact": ["z", "[100]"], "toward": ["x", "[200]"]}},
        "pose.toward",
    ),
    "an unknown key": ("form", {"crystal": {**MONOCLINIC, "grup": "1"}, "tensor": {}}, "crystal.grup"),
    "indices for a limiting group": (
        "along",
        {"crystal": {"cell": None, "group": "∞m"}, "tensor": {"free": {"11": 1, "33": 2}}, "directions": ["[001]"]},
        "directions[0]",
    ),
    "a covariance that is none": (
        "state",
        {"crystal": MONOCLINIC, "tensor": {**W1, "covariance": np.diag([1, -1, 1, 1]).tolist()}},
        "tensor.covariance",
    ),
    "a bad reading": (
        "fit",
        {
            "crystal": MONOCLINIC,
            "tensor": {},
            "readings": [
                {"kind": "along", "direction": "[100]", "value": 1, "sigma": 1},
                {"kind": "along", "direction": "[010]", "value": 1, "sigma": -1},
            ],
        },
        "readings[1].sigma",
    ),
    "a region without covariance": ("region", {"crystal": MONOCLINIC, "tensor": W1}, "tensor.covariance"),
    "a left-handed basis": (
        "convert",
        {"from": MONOCLINIC, "to": MONOCLINIC, "tensor": W1, "basis": np.diag([1, 1, -1]).tolist()},
        "basis",
    ),
    "no CIF": ("cif", {"text": "hello"}, "text"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_bad_requests_say_what_where_and_what_to_do(client: TestClient, name: str) -> None:
    route, body, field = REFUSED[name]
    error = refusal(client, route, **body)
    assert error["field"] == field
    assert error["message"].endswith((".", ":"))


def test_a_refused_cell_names_the_nearest_that_obeys(client: TestClient) -> None:
    error = refusal(client, "form", crystal={"cell": [5, 5.1, 7, 90, 90, 90], "group": "4"}, tensor={})
    assert error["detail"]["cell"] == pytest.approx([5.05, 5.05, 7, 90, 90, 90])
    assert error["detail"]["change"] == pytest.approx([0.05, -0.05, 0, 0, 0, 0], abs=1e-9)


@pytest.mark.parametrize("scale", [1e-30, 1e30, 1e200])
def test_extreme_values_give_finite_answers_or_a_refusal(client: TestClient, scale: float) -> None:
    tensor = {"matrix": (np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]) * scale).tolist()}
    for route, extra in (
        ("state", {}),
        ("along", {"directions": ["[111]"]}),
        ("surface", {"surface": "quadric", "detail": 8}),
        ("surface", {"surface": "flux", "detail": 8}),
    ):
        answer = client.post(f"/api/v1/{route}", json={"crystal": MONOCLINIC, "tensor": tensor, **extra})
        assert answer.status_code in (200, 422)
        text = json.dumps(answer.json(), allow_nan=False)
        assert text


def test_limiting_groups_have_a_form_and_no_cell(client: TestClient) -> None:
    state = call(client, "state", crystal={"cell": None, "group": "inf/mm"}, tensor={"free": {"11": 2.0, "33": 3.0}})
    assert state["frame"] == {
        "M": None,
        "volume": None,
        "sentence": "x3 along the infinite axis, x1 and x2 anywhere across it, x1 = x2 × x3",
    }
    assert state["principal"]["arbitrary"] == [False, True, True]
    assert state["principal"]["nearest"][0]["row"] is None
