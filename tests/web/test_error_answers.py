"""One shape for every error, in plain words, at the field."""

from __future__ import annotations

from typing import Any

import pytest
from fastapi.testclient import TestClient

CRYSTAL = {"cell": [5, 6, 7, 90, 100, 90], "group": "2/m"}
TENSOR = {"matrix": [[1, 0, 0], [0, 2, 0], [0, 0, 3]]}
STATE: dict[str, Any] = {"crystal": CRYSTAL, "tensor": TENSOR}


def error_of(answer: Any, status: int = 422) -> dict[str, Any]:
    """The error of an answer, after checking that it has the one shape."""
    assert answer.status_code == status, answer.text
    body = answer.json()
    assert body.keys() == {"error"}
    assert {"message", "field", "hint"} <= body["error"].keys() <= {"message", "field", "hint", "detail"}
    assert isinstance(body["error"]["message"], str)
    assert body["error"]["message"].rstrip().endswith(".")
    error: dict[str, Any] = body["error"]
    return error


@pytest.mark.parametrize(
    ("name", "status"),
    [
        ("input", 422),
        ("undetermined", 422),
        ("not-found", 404),
        ("conflict", 409),
        ("store", 503),
        ("bad-detail", 422),
        ("overflow", 422),
        ("decomposition", 422),
        ("recursion", 422),
    ],
)
def test_the_tools_own_errors(client: TestClient, name: str, status: int) -> None:
    error_of(client.get(f"/probe/raise/{name}"), status)


def test_what_an_error_carries_is_answered(client: TestClient) -> None:
    error = error_of(client.get("/probe/raise/input"))
    expected = {"message": "The cell is wrong.", "field": "crystal.cell", "hint": "Mend it.", "detail": {"cell": [1.5]}}
    assert error == expected


def test_a_detail_that_is_not_finite_is_left_out(client: TestClient) -> None:
    error = error_of(client.get("/probe/raise/bad-detail"))
    assert error["field"] == "cell"
    assert "detail" not in error


def test_a_defect_is_logged_and_answered(client: TestClient, caplog: pytest.LogCaptureFixture) -> None:
    error = error_of(client.get("/probe/raise/bug"), 500)
    assert "ZeroDivisionError" not in str(error)
    assert "a defect" not in str(error)
    (told,) = [record.getMessage() for record in caplog.records if "unexpected" in record.getMessage()]
    assert "/probe/raise/{name}" in told, "the route, not the address that was asked"
    assert "builtins.ZeroDivisionError" in told
    assert "in probe_raise" in told
    assert "a defect" not in told


def test_unknown_addresses_and_wrong_methods(client: TestClient) -> None:
    assert "/nowhere" in error_of(client.get("/nowhere"), 404)["message"]
    error_of(client.get("/static/nothing.css"), 404)
    error_of(client.get("/static/../pyproject.toml"), 404)
    error_of(client.get("/static/%2e%2e/pyproject.toml"), 404)
    error_of(client.get("/probe/form/"), 404)
    wrong = client.get("/probe/form")
    assert error_of(wrong, 405)["hint"] == "Use POST."
    assert wrong.headers["Allow"] == "POST"


def test_a_query_is_named_as_well(client: TestClient) -> None:
    error = error_of(client.get("/probe/count", params={"number": "many"}))
    assert error["field"] == "number"
    assert "whole number" in error["message"]


def with_(changes: dict[str, Any], base: dict[str, Any] = STATE) -> dict[str, Any]:
    return {**base, **changes}


CASES: list[tuple[str, dict[str, Any], str, str]] = [
    # call, body, field, words of the message
    ("state", {"tensor": TENSOR}, "crystal", "crystal is missing"),
    ("state", with_({"crystal": {"cell": None}}), "crystal.group", "missing"),
    ("state", with_({"crystal": "quartz"}), "crystal", "must be an object"),
    ("state", with_({"crystal": [1]}), "crystal", "must be an object"),
    ("state", with_({"crystal": {**CRYSTAL, "groop": "2"}}), "crystal.groop", "not a known key"),
    ("state", with_({"posee": {}}), "posee", "not a known key"),
    (
        "state",
        with_({"crystal": {**CRYSTAL, "cell": [5, 6, 7, 90, 100]}}),
        "crystal.cell",
        "at least 6 items; it has 5",
    ),
    ("state", with_({"crystal": {**CRYSTAL, "cell": [5] * 7}}), "crystal.cell", "at most 6 items; it has 7"),
    ("state", with_({"crystal": {**CRYSTAL, "cell": [5, True, 7, 90, 90, 90]}}), "crystal.cell[1]", "not true"),
    ("state", with_({"crystal": {**CRYSTAL, "cell": [5, "6", 7, 90, 90, 90]}}), "crystal.cell[1]", 'the text "6"'),
    ("state", with_({"crystal": {**CRYSTAL, "cell": 5}}), "crystal.cell", "must be a list"),
    ("state", with_({"crystal": {**CRYSTAL, "group": 2}}), "crystal.group", "must be text"),
    ("state", with_({"crystal": {**CRYSTAL, "group": ""}}), "crystal.group", "must not be empty"),
    ("state", with_({"crystal": {**CRYSTAL, "group": "m" * 300}}), "crystal.group", "at most 200 characters"),
    ("state", with_({"crystal": {**CRYSTAL, "unique_axis": "d"}}), "crystal.unique_axis", 'one of "a", "b" or "c"'),
    ("state", with_({"tensor": {}}), "tensor", "matrix or by its free cells"),
    ("state", with_({"tensor": {**TENSOR, "free": {"11": 1}}}), "tensor", "one of the two"),
    ("state", with_({"tensor": {"free": {"11": "x"}}}), "tensor.free.11", "must be a number"),
    ("state", with_({"tensor": {"matrix": [[1, 2, 3], [1, 2, None], [1, 2, 3]]}}), "tensor.matrix[1][2]", "not null"),
    ("state", with_({"tensor": {**TENSOR, "parity": "odd"}}), "tensor.parity", '"polar" or "axial"'),
    ("state", with_({"pose": 3}), "pose", "is not a pose"),
    ("state", with_({"pose": {}}), "pose", "six shapes"),
    ("state", with_({"pose": {"matrix": [[1, 0, 0]] * 3, "bunge": [1, 2, 3]}}), "pose", "six shapes"),
    ("state", with_({"pose": {"axis": "[1 0 0]"}}), "pose", "six shapes"),
    ("state", with_({"pose": {"bunge": [1, 2]}}), "pose.bunge", "at least 3 items"),
    ("state", with_({"pose": {"quaternion": [1, 0, 0, False]}}), "pose.quaternion[3]", "must be a number"),
    ("state", with_({"pose": {"axis": [1, 0], "angle": 3}}), "pose.axis", "at least 3 items; it has 2"),
    ("state", with_({"pose": {"exact": ["w", [1, 0, 0]], "toward": ["x", "[1 0 0]"]}}), "pose.exact", "specimen axis"),
    ("state", with_({"pose": {"exact": ["z", [1, 0, "a"]], "toward": ["x", "[1 0 0]"]}}), "pose.exact[1][2]", "number"),
    ("state", with_({"pose": {"from": "[0 0 1]", "tilt": "4", "toward": "[1 0 0]"}}), "pose.tilt", "must be a number"),
    ("along", with_({"directions": [[1, 2, 3]] * 17 + [[1, 2]]}), "directions[17]", "at least 3 items; it has 2"),
    ("along", with_({"directions": [[1, 2, 3], [1, 2, "3"]]}), "directions[1][2]", "must be a number"),
    ("along", with_({"directions": ["[1 0 0]", {"uvw": [1, 2, 3]}]}), "directions[1]", "is not a direction"),
    ("along", with_({"directions": [{"xyz": [1, 2, True]}]}), "directions[0].xyz[2]", "must be a number"),
    ("along", with_({"directions": [""]}), "directions[0]", "1 to 200 characters"),
    ("along", with_({"directions": "[1 0 0]"}), "directions", "must be a list"),
    ("along", with_({"directions": [0] * 200_001}), "directions", "at most 200000 items; it has 200001"),
    ("along", STATE, "directions", "missing"),
    ("surface", with_({"surface": "cube"}), "surface", '"quadric", "value" or "flux"'),
    ("surface", with_({"surface": "flux", "detail": 7}), "detail", "at least 8"),
    ("surface", with_({"surface": "flux", "detail": 401}), "detail", "at most 400"),
    ("surface", with_({"surface": "flux", "detail": 60.5}), "detail", "whole number"),
    ("fit", {"crystal": CRYSTAL, "tensor": TENSOR, "readings": []}, "tensor.matrix", "not a known key"),
    (
        "fit",
        {
            "crystal": CRYSTAL,
            "tensor": {},
            "readings": [{"kind": "mean", "value": 1}] * 3 + [{"kind": "mean", "value": 1, "sigma": "0.1"}],
        },
        "readings[3].sigma",
        "must be a number",
    ),
    (
        "fit",
        {"crystal": CRYSTAL, "tensor": {}, "readings": [{"kind": "bar", "value": 1}]},
        "readings[0].kind",
        '"along"',
    ),
    ("fit", {"crystal": CRYSTAL, "tensor": {}, "readings": [{"kind": "mean"}]}, "readings[0].value", "missing"),
    ("fit", {"crystal": CRYSTAL, "tensor": {}, "readings": [], "batches": {"a": "b"}}, "batches.a", "must be a number"),
    ("region", STATE, "tensor.covariance", "missing"),
    ("region", with_({"tensor": {**TENSOR, "covariance": []}, "level": 1}), "level", "less than 1"),
    ("convert", {"from": CRYSTAL, "tensor": TENSOR}, "to", "missing"),
    ("convert", {"from_": CRYSTAL, "tensor": TENSOR, "to": CRYSTAL}, "from_", "not a known key"),
    ("convert", {"from": {"group": 1}, "tensor": TENSOR, "to": CRYSTAL}, "from.group", "must be text"),
    ("cif", {"text": 1}, "text", "must be text"),
]


@pytest.mark.parametrize(("call", "body", "field", "words"), CASES, ids=[f"{case[0]}-{case[2]}" for case in CASES])
def test_a_wrong_shape_is_told_at_its_field(
    client: TestClient, call: str, body: dict[str, Any], field: str, words: str
) -> None:
    error = error_of(client.post(f"/probe/{call}", json=body))
    assert error["field"] == field
    assert words in error["message"]
    assert field in error["message"]
    assert "Input should" not in error["message"]
    first = {key: error[key] for key in ("message", "field", "hint")}
    assert error["detail"]["problems"][0] == first


def test_an_unknown_key_is_told_with_the_known_ones(client: TestClient) -> None:
    error = error_of(client.post("/probe/state", json=with_({"crystal": {**CRYSTAL, "groop": "2"}})))
    assert error["hint"] == "Known here: cell, cell_sigma, group, unique_axis, frame."


def test_a_wrong_pose_is_told_all_six_shapes(client: TestClient) -> None:
    hint = error_of(client.post("/probe/state", json=with_({"pose": {"tilt": 4}})))["hint"]
    for key in ("matrix", "exact", "axis", "angle", "quaternion", "bunge", "from", "tilt", "toward"):
        assert f'"{key}"' in hint


def test_all_problems_stand_in_the_detail_and_few_are_listed(client: TestClient) -> None:
    body = {"crystal": CRYSTAL, "tensor": {}, "readings": [{"kind": "mean", "value": "x"}] * 50}
    detail = error_of(client.post("/probe/fit", json=body))["detail"]
    assert detail["count"] == 50
    assert [problem["field"] for problem in detail["problems"][:2]] == ["readings[0].value", "readings[1].value"]
    assert len(detail["problems"]) == 20


def test_a_huge_key_or_text_is_not_echoed_at_length(client: TestClient) -> None:
    assert len(client.post("/probe/state", json=with_({"x" * 100_000: 1})).content) < 2000
    body = with_({"tensor": {"matrix": [["9" * 100_000, 0, 0]] * 3}})
    assert len(client.post("/probe/state", json=body).content) < 2000


def test_numbers_that_are_not_finite_are_bad_requests(client: TestClient) -> None:
    body = b'{"crystal": {"cell": [5, 6, 1e999, 90, 90, 90], "group": "1"}, "tensor": {"free": {}}}'
    assert error_of(client.post("/probe/state", content=body))["field"] == "crystal.cell[2]"


def test_an_answer_that_is_not_finite_never_leaves(client: TestClient) -> None:
    assert "values[1].inner[0][1]" in error_of(client.get("/probe/answer/nan"))["message"]
    assert "value" in error_of(client.get("/probe/answer/infinity"))["message"]
    answer = client.get("/probe/answer/numpy")
    assert answer.json() == {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]], "count": 3, "value": 0.5, "none": None}
