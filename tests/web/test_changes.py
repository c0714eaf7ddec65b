"""The shapes of an edit: one change at a time, nothing unknown, every fault at its own place."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from app.web.changes import Change, EditRequest, MarkRequest, NewSampleRequest, StepRequest

SOUND: dict[str, Any] = {
    "crystal": {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m"},
    "free": {"11": "13.2(1)", "13": 1.85},
    "tensor": {"matrix": [[1, 0, 0], [0, 2, 0], [0, 0, 3]], "source": "a paper"},
    "property": {"kind": "thermal_expansion", "unit": "1e-6/K"},
    "pose": {"exact": ["z", "(1 0 0)"], "toward": ["x", "[0 0 1]"]},
    "poses": {"flat": {"axis": [0, 0, 1], "angle": 30}, "gone": None},
    "part": [1, 2, 3.5],
    "readings": [{"kind": "along", "direction": "[1 0 0]", "value": 1}],
    "batches": {"furnace": 0.01},
    "name": "A name",
    "notes": "Some words.",
    "looking": {"surface": "value"},
}


def find_places(given: dict[str, Any], model: Any = Change) -> list[str]:
    """Where the faults are, as dotted paths."""
    with pytest.raises(ValidationError) as caught:
        model.model_validate(given)
    return [".".join(str(part) for part in error["loc"]) for error in caught.value.errors()]


def test_every_key_is_tried_here() -> None:
    assert set(SOUND) == set(Change.known_keys())


@pytest.mark.parametrize("key", SOUND)
def test_each_change_is_taken_alone(key: str) -> None:
    assert Change.model_validate({key: SOUND[key]}).list_given() == [key]


@pytest.mark.parametrize("first", SOUND)
@pytest.mark.parametrize("second", SOUND)
def test_two_changes_at_once_are_refused_but_for_batches_beside_readings(first: str, second: str) -> None:
    if first == second:
        return
    both = {first: SOUND[first], second: SOUND[second]}
    if {first, second} == {"readings", "batches"}:
        assert Change.model_validate(both).list_given() == ["readings", "batches"]
        return
    with pytest.raises(ValidationError) as caught:
        Change.model_validate(both)
    (error,) = caught.value.errors()
    assert error["msg"] == "must have exactly one key."
    assert all(name in error["ctx"]["hint"] for name in SOUND)


@pytest.mark.parametrize("given", [{}, {"name": None}, {"readings": None, "batches": None}])
def test_no_change_at_all_is_refused(given: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        Change.model_validate(given)


@pytest.mark.parametrize(
    ("given", "place"),
    [
        ({"colour": "red"}, "colour"),
        ({"crystal": {"cell": [1, 2, 3], "group": "1"}}, "crystal.cell"),
        ({"crystal": {"cell": None, "group": "1", "sort": 1}}, "crystal.sort"),
        ({"crystal": {"cell": None, "group": "2", "unique_axis": "d"}}, "crystal.unique_axis"),
        ({"tensor": {"matrix": [[1, 0], [0, 1]]}}, "tensor.matrix"),
        ({"tensor": {"matrix": [[1, 0, 0], [0, "2", 0], [0, 0, 3]]}}, "tensor.matrix.1.1"),
        ({"tensor": {"free": {"11": float("nan")}}}, "tensor.free.11"),
        ({"tensor": {"free": {"11": True}}}, "tensor.free.11"),
        ({"property": {"parity": "odd"}}, "property.parity"),
        ({"property": {"temperature": "warm"}}, "property.temperature"),
        ({"property": {"remove": 1}}, "property.remove"),
        ({"pose": {"matrix": [[1, 0, 0]], "axis": [0, 0, 1]}}, "pose"),
        ({"pose": {"bunge": [1, 2]}}, "pose.bunge"),
        ({"poses": {"flat": {"axis": [0, 0], "angle": 1}}}, "poses.flat.axis"),
        ({"poses": {"": None}}, "poses..[key]"),
        ({"part": [1, 2]}, "part"),
        ({"part": [1, 2, float("inf")]}, "part.2"),
        ({"readings": "[]"}, "readings"),
        ({"batches": {"furnace": "much"}}, "batches.furnace"),
        ({"name": "x" * 201}, "name"),
        ({"notes": "x" * 20_001}, "notes"),
        ({"looking": []}, "looking"),
    ],
)
def test_a_fault_is_told_at_its_place(given: dict[str, Any], place: str) -> None:
    assert any(found == place or found.startswith(f"{place}.") for found in find_places(given))


@pytest.mark.parametrize("value", [True, None, [1], {"value": 1}, float("inf"), "1" * 201])
def test_a_free_cell_is_a_number_or_what_was_typed(value: Any) -> None:
    assert any(found.startswith("free.11") for found in find_places({"free": {"11": value}}))


def test_what_is_typed_stays_text() -> None:
    # Whether it is a number is told later, with a sentence.
    assert Change.model_validate({"free": {"11": "much", "22": 2}}).free == {"11": "much", "22": 2}


def test_too_many_cells_and_readings_are_refused() -> None:
    assert find_places({"free": {str(number): 1 for number in range(10)}}) == ["free"]
    assert find_places({"readings": [{}] * 200_001}) == ["readings"]


def test_an_edit_names_the_revision_that_it_was_made_from() -> None:
    assert EditRequest.model_validate({"parent": 3, "change": {"name": "A"}}).parent == 3
    assert find_places({"change": {"name": "A"}}, EditRequest) == ["parent"]
    assert find_places({"parent": 0, "change": {"name": "A"}}, EditRequest) == ["parent"]
    assert find_places({"parent": 1.5, "change": {"name": "A"}}, EditRequest) == ["parent"]
    assert find_places({"parent": 1, "change": {"name": "A"}, "force": True}, EditRequest) == ["force"]
    assert StepRequest.model_validate({}).parent is None
    assert find_places({"parent": -1}, StepRequest) == ["parent"]


def test_a_new_sample_may_name_what_it_is_a_copy_of() -> None:
    assert NewSampleRequest.model_validate({"from": "abc"}).from_ == "abc"
    assert find_places({"from_": "abc"}, NewSampleRequest) == ["from_"]
    assert MarkRequest.model_validate({"archived": True}).deleted is None
    assert find_places({"archived": "yes"}, MarkRequest) == ["archived"]
