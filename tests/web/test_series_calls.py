"""The call ``expansion`` by HTTP, as a script would make it."""

from __future__ import annotations

import json
import time
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.series_shapes import MAX_PLACES, ExpansionAnswer
from tests.series.reference import build_basis, build_polynomial_cell, differentiate_basis, to_numpy

# Low albite at 26 and 1127 °C (Stewart and von Limbach, 1967).
COLD = [8.141, 12.790, 7.157, 94.225, 116.597, 87.772]
HOT = [8.278, 12.863, 7.180, 92.780, 116.045, 87.718]
ALBITE = [{"t": 26, "cell": COLD}, {"t": 1127, "cell": HOT}]

# Invented: a monoclinic cell that bends.
COEFFICIENTS = [
    [6.2, 0.09, 0.02],
    [7.3, 0.1, -0.01],
    [9.1, -0.02, 0.03],
    [90.0],
    [104.0, 0.8, 0.4],
    [90.0],
]
BENT = build_polynomial_cell(COEFFICIENTS)
TIMES = [600.0, 80.0, 150.0, 293.0, 400.0]
MONOCLINIC = [{"t": t, "cell": [float(value) for value in BENT(t)]} for t in TIMES]


def call(client: TestClient, **body: Any) -> Any:
    answer = client.post("/api/v1/expansion", json=body)
    assert answer.status_code == 200, answer.text
    ExpansionAnswer.model_validate(answer.json())
    return answer.json()


def refusal(client: TestClient, **body: Any) -> Any:
    answer = client.post("/api/v1/expansion", json=body)
    assert answer.status_code == 422, answer.text
    error = answer.json()["error"]
    assert set(error) <= {"message", "field", "hint", "detail"}
    return error


def test_albite(client: TestClient) -> None:
    # Derived from the printed cells: principal values of the stretch, whatever the frame.
    for frame in ("x3=c x2=b*", "x3=c x1=a*", "x1=a x3=c*"):
        found = call(client, crystal={"group": "-1", "frame": frame}, states=ALBITE, degree=1, at=[26, 576.5, 1127])
        values = np.linalg.eigvalsh(found["states"][1]["strain"])
        assert values == pytest.approx([-0.0079140, 0.0134201, 0.0266708], abs=5e-8)
        assert np.all(np.array(found["states"][0]["strain"]) == 0)
    # Hazen and Finger, Comparative Crystal Chemistry (1982), ch. 5, after Ohashi and Burnham (1973), ×10².
    crystal = {"group": "-1", "frame": "x3=c x1=a*", "cell": COLD}
    found = call(client, crystal=crystal, states=ALBITE, degree=1, at=[], strain="linear")
    printed = [[2.149069, 0.7216585, 0.1418302], [0.7216585, 0.7261276, 1.260034], [0.1418302, 1.260034, 0.3213644]]
    assert np.array(found["states"][1]["strain"]) * 100 == pytest.approx(np.array(printed), abs=1.5e-5)
    assert found["strain"] == "linear"
    assert found["at"] == []
    assert found["frame"]["M"] == pytest.approx(to_numpy(build_basis(COLD, (2, (0, 0, 1), 0, (1, 0, 0)))), abs=1e-12)


def test_alpha_is_that_of_exact_derivatives(client: TestClient) -> None:
    found = call(client, crystal={"group": "P 1 21/c 1", "cell": None}, states=MONOCLINIC, degree=2, at=[300, 20, 700])
    assert [entry["t"] for entry in found["at"]] == [300, 20, 700]
    assert [entry["extrapolated"] for entry in found["at"]] == [False, True, True]
    for entry in found["at"]:
        wanted = differentiate_basis(BENT, entry["t"])
        assert np.array(entry["alpha"]) == pytest.approx(wanted, abs=1e-12)
        assert entry["alpha"][0][1] == entry["alpha"][1][2] == 0
        assert entry["volume"] == pytest.approx(np.trace(wanted), abs=1e-12)
        assert sorted(entry["principal"]["values"]) == pytest.approx(np.linalg.eigvalsh(wanted), abs=1e-12)
        axes = np.array(entry["principal"]["axes"])
        assert axes @ wanted @ axes.T == pytest.approx(np.diag(entry["principal"]["values"]), abs=1e-12)
        assert entry["cell"] == pytest.approx([float(value) for value in BENT(entry["t"])])
        assert entry["cell_volume"] == pytest.approx(np.linalg.det(to_numpy(build_basis(BENT(entry["t"])))))
    assert found["reference"] == 600
    assert found["range"] == [80, 600]
    assert found["fit"]["covariance_from"] == "scatter"
    assert [part["name"] for part in found["fit"]["parameters"]] == ["a", "b", "c", "beta"]


def test_sigma_everywhere_and_null_where_nothing_is_known(client: TestClient) -> None:
    sigma = [2e-4, 2e-4, 3e-4, 0, 0.004, 0]
    states = [{**state, "sigma": sigma} for state in MONOCLINIC]
    found = call(client, crystal={"group": "2/m"}, states=states, degree=1, at=[200.0], reference=293)
    entry = found["at"][0]
    assert np.all(np.array(entry["sigma"])[[0, 1, 2, 0], [0, 1, 2, 2]] > 0)
    assert entry["sigma"][0][1] == 0
    assert entry["volume_sigma"] > 0
    assert len(entry["principal"]["sigma"]) == 3
    assert len(entry["principal"]["axis_sigma"]) == 3
    assert entry["cell_sigma"][3] == 0
    # b by hand, α = s/b of a straight line: var s = σ²/Σ(t − mean)², var b = σ²/n + (200 − mean)² var s, and the
    # covariance of the two is (200 − mean) var s.
    t, b = np.array(TIMES), np.array([state["cell"][1] for state in MONOCLINIC])
    slope, start = np.polyfit(t, b, 1)
    there, off = start + 200 * slope, 200 - t.mean()
    assert entry["alpha"][1][1] == pytest.approx(slope / there, rel=1e-9)
    slope_variance = 2e-4**2 / np.sum((t - t.mean()) ** 2)
    variances = slope_variance, off * slope_variance, 2e-4**2 / 5 + off**2 * slope_variance
    wanted = np.dot([1, -2 * slope / there, (slope / there) ** 2], variances)
    assert entry["sigma"][1][1] == pytest.approx(np.sqrt(wanted) / there, rel=1e-9)
    assert found["reference"] == 293
    assert np.all(np.array(found["states"][3]["strain"]) == 0)
    residual = b - (start + slope * t)
    assert [state["residual"][1] for state in found["states"]] == pytest.approx(residual, abs=1e-12)
    exact = call(client, crystal={"group": "2/m"}, states=MONOCLINIC[:2], degree=1, at=[200.0])["at"][0]
    assert exact["sigma"] is None
    assert exact["volume_sigma"] is None
    assert exact["principal"]["sigma"] is None


@pytest.mark.parametrize(
    ("group", "frame", "cell", "shape", "arbitrary"),
    [
        ("m-3m", "x3=c x2=b*", lambda t: [5 + t, 5 + t, 5 + t, 90, 90, 90], "isotropic", 3),
        ("6/m", "x3=c x2=b*", lambda t: [5 + t, 5 + t, 7 - t, 90, 90, 120], "uniaxial", 2),
        ("-3m", "x3=[1 1 1] x1=(1 -1 0)", lambda t: [5 + t] * 3 + [74 + t] * 3, "uniaxial", 2),
        ("R -3 c:R", "x3=c x2=b*", lambda t: [5 + t] * 3 + [74 + t] * 3, "uniaxial", 2),
        ("mmm", "x1=a x3=c*", lambda t: [5 + t, 6 - t, 7 + 2 * t, 90, 90, 90], "biaxial", 0),
    ],
)
@pytest.mark.parametrize("with_cell", [True, False])
def test_shapes(
    client: TestClient, group: str, frame: str, cell: Any, shape: str, arbitrary: int, with_cell: bool
) -> None:
    crystal = {"group": group, "frame": frame} | ({"cell": cell(0.0)} if with_cell else {})
    states = [{"t": t, "cell": cell(t)} for t in (0.0, 0.01, 0.02, 0.03)]
    entry = call(client, crystal=crystal, states=states, degree=1, at=[0.01])["at"][0]
    assert entry["principal"]["shape"] == shape
    assert sum(entry["principal"]["arbitrary"]) == arbitrary


def test_a_crossing_is_followed_by_axis_and_not_by_size(client: TestClient) -> None:
    # Invented: a grows evenly, b ever faster, so that α along x2 passes α along x1 on the way.
    states = [
        {"t": t, "cell": [5 * (1 + 1e-5 * t), 6 * (1 + 5e-8 * t * t), 7, 90, 90, 90]} for t in (0, 50, 100, 150, 200)
    ]
    found = call(client, crystal={"group": "mmm"}, states=states, degree=2, at=[180, 20, 60, 140])
    by_branch = []
    for entry in found["at"]:
        assert sorted(entry["principal"]["branches"]) == [0, 1, 2]
        names = entry["principal"]["branches"]
        by_branch.append([entry["principal"]["axes"][names.index(branch)] for branch in range(3)])
    assert np.abs(by_branch) == pytest.approx(np.abs([by_branch[1]] * 4), abs=1e-9)
    assert np.abs(by_branch[1]) == pytest.approx(np.eye(3), abs=1e-9)
    assert found["at"][0]["principal"]["branches"][0] == 1
    assert found["at"][1]["principal"]["branches"][0] == 0


def test_where_nothing_expands(client: TestClient) -> None:
    # Calcite's −5.6 and 25 ×10⁻⁶/K (Nye, from memory): 64.67° from c, derived.
    states = [
        {"t": t, "cell": [4.99 * (1 - 5.6e-6 * t)] * 2 + [17.06 * (1 + 25e-6 * t), 90, 90, 120]} for t in (0, 100)
    ]
    still = call(client, crystal={"group": "-3m"}, states=states, degree=1, at=[0])["at"][0]["still"]
    assert still["kind"] == "cone"
    assert still["half_angles"] == pytest.approx([64.67, 64.67], abs=0.005)


BASE: dict[str, Any] = {"crystal": {"group": "mmm"}, "degree": 1, "at": [1]}
BOX = [5, 6, 7, 90, 90, 90]
STATES = [{"t": 0, "cell": BOX}, {"t": 1, "cell": [5.1, 6, 7, 90, 90, 90]}]


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"degree": 2}, "degree"),
        ({"degree": -1}, "degree"),
        ({"degree": 9}, "degree"),
        ({"degree": 1.5}, "degree"),
        ({"states": []}, "states"),
        ({"states": [{"t": 0, "cell": BOX}, {"t": 0, "cell": BOX}]}, "degree"),
        ({"states": [*STATES, {"t": 2, "cell": [5, 6, 7, 90, 91, 90]}]}, "states[2].cell"),
        ({"states": [*STATES, {"t": 2, "cell": [5, 6, 7, 90, 90]}]}, "states[2].cell"),
        ({"states": [*STATES, {"t": 2, "cell": [5, 6, 0, 90, 90, 90]}]}, "states[2].cell[2]"),
        ({"states": [*STATES, {"t": 2, "cell": BOX, "sigma": [1e-4] * 6}]}, "states[0].sigma"),
        ({"states": [{**STATES[0], "sigma": [1e-4] * 6}, STATES[1]]}, "states[1].sigma"),
        ({"states": [{**state, "sigma": [1e-4, 0, 1e-4, 0, 0, 0]} for state in STATES]}, "states[0].sigma[1]"),
        ({"states": [{**state, "sigma": [1e-4, -1, 1e-4, 0, 0, 0]} for state in STATES]}, "states[0].sigma"),
        ({"states": [*STATES, {"cell": BOX}]}, "states[2].t"),
        ({"states": [*STATES, {"t": 1e70, "cell": BOX}]}, "states[2].t"),
        ({"reference": 0.5}, "reference"),
        ({"at": [0, 1e300]}, "at[1]"),
        ({"at": [0, -1000]}, "at[1]"),
        ({"at": [True]}, "at[0]"),
        ({"at": [0] * (MAX_PLACES + 1)}, "at"),
        ({"strain": "engineering"}, "strain"),
        ({"crystal": {"group": "∞m", "cell": None}}, "crystal.group"),
        ({"crystal": {"group": "infm"}}, "crystal.group"),
        ({"crystal": {"group": "mmm", "cell": [5, 6, 7, 90, 91, 90]}}, "crystal.cell"),
        ({"crystal": {"group": "mmm", "frame": "x3=c x2=c*"}}, "crystal.frame"),
        ({"crystal": {"group": "mmm", "unique_axis": "b"}}, "crystal.unique_axis"),
        ({"crystal": {"group": "4/m"}}, "states[0].cell"),
        ({"crystal": {}}, "crystal.group"),
        ({"pose": {}}, "pose"),
    ],
)
def test_refusals(client: TestClient, change: dict[str, Any], field: str) -> None:
    error = refusal(client, **{**BASE, "states": STATES, **change})
    assert error["field"] == field
    assert error["message"]


def test_a_disobeying_cell_comes_with_the_nearest_one(client: TestClient) -> None:
    states = [*STATES, {"t": 2, "cell": [5, 6, 7, 90, 91, 90]}]
    detail = refusal(client, **{**BASE, "states": states})["detail"]
    assert detail["cell"] == pytest.approx(BOX)
    assert detail["change"] == pytest.approx([0, 0, 0, 0, -1, 0])


def test_numbers_that_are_not_finite_are_refused(client: TestClient) -> None:
    body = json.dumps({**BASE, "states": STATES}).replace("5.1", "NaN")
    answer = client.post("/api/v1/expansion", content=body)
    assert answer.status_code == 422
    assert answer.json()["error"]["field"] == "states[1].cell[0]"


def test_repeats_and_one_state_alone(client: TestClient) -> None:
    states = [{"t": 1, "cell": BOX}, *STATES]
    found = call(client, crystal={"group": "mmm"}, states=states, degree=1, at=[0.5], reference=1)
    assert "2 states stand at t = 1" in found["note"]
    alone = call(client, crystal={"group": "mmm"}, states=STATES[:1], degree=0, at=[0, 5])
    assert np.all(np.array(alone["at"][1]["alpha"]) == 0)
    assert alone["at"][1]["principal"]["arbitrary"] == [True] * 3
    assert alone["at"][1]["sigma"] is None
    assert alone["at"][1]["still"]["kind"] == "everywhere"


def test_the_largest_call_takes_its_time_and_no_more(client: TestClient) -> None:
    sigma = [1e-4, 1e-4, 1e-4, 0.01, 0.01, 0.01]
    states = [
        {"t": t, "cell": [5 + 1e-5 * t, 6, 7 - 1e-5 * t, 89, 104, 89 + 1e-3 * t], "sigma": sigma}
        for t in np.linspace(0, 1000, 2000).tolist()
    ]
    started = time.monotonic()
    call(client, crystal={"group": "1"}, states=states, degree=8, at=np.linspace(0, 1000, 400).tolist())
    # A fifth of what is allowed, and time to spare for a busy machine.
    assert time.monotonic() - started < 2.5


def test_the_call_is_described(client: TestClient) -> None:
    document = client.get("/openapi.json").json()
    route = document["paths"]["/api/v1/expansion"]["post"]
    assert route["summary"]
    shapes = document["components"]["schemas"]
    for name in ("ExpansionRequest", "ExpansionAnswer", "ExpansionAt"):
        assert name in shapes
    undescribed = [
        name
        for name, member in shapes["ExpansionAt"]["properties"].items()
        if "description" not in member and "$ref" not in member
    ]
    assert undescribed == []
