"""The shapes of the calls, as the calculation interface names them."""

from __future__ import annotations

import time
from typing import Any

import pytest
from pydantic import ValidationError

from app.web.parts import (
    AxisAnglePose,
    BungePose,
    ExactPose,
    MatrixPose,
    QuaternionPose,
    SpecimenVector,
    TiltPose,
)
from app.web.requests import (
    AlongRequest,
    ConvertRequest,
    FitRequest,
    FormRequest,
    RegionRequest,
    StateRequest,
    SurfaceRequest,
)

CRYSTAL = {"cell": [5, 6, 7, 90, 100, 90], "group": "2/m"}
TENSOR = {"matrix": [[1, 0, 0], [0, 2, 0], [0, 0, 3]]}
STATE: dict[str, Any] = {"crystal": CRYSTAL, "tensor": TENSOR}


def test_defaults_are_those_of_the_interface() -> None:
    form = FormRequest.model_validate({"crystal": {"group": "∞m"}, "tensor": {}})
    assert form.crystal.cell is None
    assert form.crystal.frame == "x3=c x2=b*"
    assert (form.tensor.parity, form.tensor.intrinsic) == ("polar", "symmetric")
    assert form.pose is None
    assert SurfaceRequest.model_validate({**STATE, "surface": "value"}).detail == 60
    covariance = {**TENSOR, "covariance": [[1, 0], [0, 1]]}
    assert RegionRequest.model_validate({"crystal": CRYSTAL, "tensor": covariance}).level == 0.95


def test_a_form_may_be_asked_with_or_without_values() -> None:
    FormRequest.model_validate({"crystal": CRYSTAL, "tensor": {"parity": "axial"}})
    FormRequest.model_validate({"crystal": CRYSTAL, "tensor": TENSOR})


@pytest.mark.parametrize(
    ("pose", "model"),
    [
        ({"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]]}, MatrixPose),
        ({"exact": ["z", "(1 0 -1)"], "toward": ["x", {"xyz": [1, 0, 0]}]}, ExactPose),
        ({"axis": [0, 0, 1], "angle": 30}, AxisAnglePose),
        ({"quaternion": [1, 0, 0, 0]}, QuaternionPose),
        ({"bunge": [10, 20, 30]}, BungePose),
        ({"from": "(0001)", "tilt": 4, "toward": "[11-20]"}, TiltPose),
        ({"from": "(0001)", "tilt": 4, "toward": "[11-20]", "x": "[1-100]"}, TiltPose),
    ],
)
def test_each_way_of_giving_a_pose(pose: dict[str, Any], model: type) -> None:
    assert type(StateRequest.model_validate({**STATE, "pose": pose}).pose) is model


def test_directions_come_through_in_three_forms() -> None:
    directions = ["[1 0 1̄]", "(1,0,-1)", [1, 2, 3], {"xyz": [1, 2, 3]}, {"specimen": [0, 0, 1]}]
    read = AlongRequest.model_validate({**STATE, "directions": directions}).directions
    assert read == ["[1 0 1̄]", "(1,0,-1)", [1, 2, 3], [1, 2, 3], SpecimenVector(specimen=[0, 0, 1])]


def test_a_conversion_is_written_with_from() -> None:
    request = ConvertRequest.model_validate({"from": CRYSTAL, "tensor": TENSOR, "to": {**CRYSTAL, "group": "2"}})
    assert (request.from_.group, request.to.group) == ("2/m", "2")


def test_a_reading_may_have_a_pose_and_two_directions() -> None:
    reading = {
        "kind": "across",
        "direction": "[1 0 0]",
        "second": {"specimen": [0, 0, 1]},
        "value": 1,
        "sigma": 0.1,
        "direction_sigma": 0.5,
        "bar": "B4",
        "batch": "furnace 2",
        "pose": {"bunge": [0, 0, 0]},
    }
    body = {"crystal": CRYSTAL, "tensor": {}, "readings": [reading], "batches": {"furnace 2": 0.01}}
    read = FitRequest.model_validate(body)
    assert read.readings[0].value == 1.0
    assert isinstance(read.readings[0].pose, BungePose)


def test_requests_cannot_be_changed() -> None:
    request = StateRequest.model_validate(STATE)
    with pytest.raises(ValidationError):
        request.pose = None  # type: ignore[misc]


def test_many_directions_and_readings_are_read_quickly() -> None:
    start = time.perf_counter()
    AlongRequest.model_validate({**STATE, "directions": [[0.5, 1.5, float(index)] for index in range(20_000)]})
    readings = [{"kind": "along", "direction": [0.1, 0.2, 0.3], "value": 1.0, "sigma": 0.1}] * 20_000
    FitRequest.model_validate({"crystal": CRYSTAL, "tensor": {}, "readings": readings})
    # Measured 0.01 s and 0.08 s on two slow cores.
    assert time.perf_counter() - start < 1.0
