from __future__ import annotations

import copy
import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from app.errors import InputError
from app.store.canonical import canonical_json, content_hash
from app.store.document import (
    SampleDocument,
    change_document,
    current_property,
    find_property,
    read_document,
    readings_of,
    write_document,
)

# Poses and directions in every form that the calculation interface takes.
DIRECTIONS = ["[1 0 -1]", "(1 0 0)", [0, 0.5, 1], {"xyz": [1, 2, 3]}, {"specimen": [0, 0, 1]}]
POSES = [
    {"matrix": [[0, 1, 0], [-1, 0, 0], [0, 0, 1]]},
    {"exact": ["z", "(0 0 1)"], "toward": ["x", [1, 0, 0]]},
    {"axis": "[0 0 1]", "angle": 30},
    {"quaternion": [1, 0, 0, 0]},
    {"bunge": [10, 20, 30.5]},
    {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]", "x": "[1 -1 2]"},
    {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]"},
]


def put(data: dict[str, Any], path: tuple[str | int, ...], value: Any) -> dict[str, Any]:
    changed = copy.deepcopy(data)
    place: Any = changed
    for step in path[:-1]:
        place = place[step]
    place[path[-1]] = value
    return changed


def test_defaults_are_those_of_the_calculation_interface(document: SampleDocument) -> None:
    assert document.schema_version == 1
    assert document.crystal.frame == "x3=c x2=b*"
    assert document.properties[0].tensor.parity == "polar"
    assert document.properties[0].tensor.intrinsic == "symmetric"
    assert write_document(document)["pose"] == {"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]]}
    assert len(document.part) == 3


def test_absent_options_stay_absent_and_an_absent_cell_is_told(document_data: dict[str, Any]) -> None:
    written = write_document(read_document(put(document_data, ("crystal",), {"cell": None, "group": "∞m"})))
    assert written["crystal"] == {"cell": None, "group": "∞m", "frame": "x3=c x2=b*"}
    assert set(written["readings"][0]) == {"property", "kind", "direction", "value", "sigma", "note"}


def test_a_document_written_and_read_is_the_same(document: SampleDocument) -> None:
    written = write_document(document)
    assert write_document(read_document(json.loads(canonical_json(written)))) == written
    assert content_hash(written) == content_hash(write_document(read_document(written)))


@pytest.mark.parametrize("direction", DIRECTIONS)
def test_every_form_of_a_direction_is_kept(document_data: dict[str, Any], direction: Any) -> None:
    document = read_document(put(document_data, ("readings", 0, "direction"), direction))
    assert write_document(document)["readings"][0]["direction"] == direction


@pytest.mark.parametrize("pose", POSES)
def test_every_form_of_a_pose_is_kept(document_data: dict[str, Any], pose: Any) -> None:
    document = read_document({**document_data, "pose": pose, "poses": [{"name": "as sawn", "pose": pose}]})
    assert write_document(document)["pose"] == write_document(document)["poses"][0]["pose"] == pose


@given(
    st.dictionaries(
        st.text("qrst", min_size=1, max_size=3),
        st.recursive(
            st.none() | st.booleans() | st.integers(-9, 9) | st.text("ab", max_size=3),
            lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text("kl", max_size=2), inner, max_size=3),
            max_leaves=8,
        ),
        max_size=4,
    )
)
def test_unknown_fields_are_kept_at_every_level(extra: dict[str, Any]) -> None:
    data = {
        "name": "n",
        "crystal": {"cell": None, "group": "∞", **extra},
        "properties": [
            {"id": "k", "name": "k", "kind": "other", "unit": "", "tensor": {"free": {"11": 1}, **extra}, **extra}
        ],
        "readings": [{"property": "k", "kind": "mean", "value": 1, **extra}],
        "looking": extra,
        "sightings": [extra],
        **extra,
    }
    written = write_document(read_document(data))
    places = (
        written,
        written["crystal"],
        written["properties"][0],
        written["properties"][0]["tensor"],
        written["readings"][0],
        written["looking"],
        written["sightings"][0],
    )
    for place in places:
        assert {key: place[key] for key in extra} == extra


def test_a_document_cannot_be_changed_in_place(document_data: dict[str, Any]) -> None:
    source = {**document_data, "looking": {"property": "k", "list": [1]}, "own": {"deep": [1]}}
    document = read_document(source)
    before = content_hash(write_document(document))
    with pytest.raises(ValidationError):
        document.name = "other"  # type: ignore[misc]
    with pytest.raises(TypeError):
        document.properties[0].tensor.free["11"] = 1.0
    with pytest.raises(TypeError):
        document.looking["property"] = "a"
    with pytest.raises(TypeError):
        document.own["deep"] = 2  # type: ignore[attr-defined]
    source["looking"]["list"].append(2)
    write_document(document)["readings"].clear()
    assert content_hash(write_document(document)) == before


def test_a_change_makes_a_new_checked_document(document: SampleDocument) -> None:
    changed = change_document(document, {"part": [1, 2, 3], "crystal": document.crystal})
    assert changed.part == (1, 2, 3)
    assert document.part != (1, 2, 3)
    with pytest.raises(InputError, match="more than 0"):
        change_document(document, {"part": [1, 2, 0]})


def test_properties_are_found(document: SampleDocument) -> None:
    assert find_property(document, "a").name == "Expansion"
    assert [reading.value for reading in readings_of(document, "k")] == [24.5]
    assert readings_of(document, "a") == ()
    with pytest.raises(InputError, match="no property with the id b") as refusal:
        find_property(document, "b")
    assert refusal.value.hint is not None
    assert "k, a" in refusal.value.hint


def test_the_property_looked_at_is_the_named_one_else_the_first(document: SampleDocument) -> None:
    def looked_at(changes: dict[str, Any]) -> str | None:
        found = current_property(change_document(document, changes))
        return found and found.id

    assert looked_at({}) == "k"
    assert looked_at({"looking": {"property": "a"}}) == "a"
    assert looked_at({"looking": {"property": "gone"}}) == "k"
    assert looked_at({"properties": [], "readings": []}) is None


FAULTS: list[tuple[tuple[str | int, ...], Any, str, str]] = [
    (("name",), "", "name", "must not be empty"),
    (("name",), "  ", "name", "must not be empty"),
    (("name",), 5, "name", "Text is needed"),
    (("notes",), "\ud800", "notes", "Unicode"),
    (("crystal",), [], "crystal", "object"),
    (("crystal", "cell"), [1, 2, 3], "crystal.cell[3]", "missing"),
    (("crystal", "cell"), [1, 2, 3, 90, 90, 90, 90], "crystal.cell", "more than 6 entries"),
    (("crystal", "cell", 0), 0, "crystal.cell[0]", "more than zero"),
    (("crystal", "cell", 0), "9.83", "crystal.cell[0]", "number"),
    (("crystal", "cell", 0), True, "crystal.cell[0]", "number"),
    (("crystal", "unique_axis"), "d", "crystal.unique_axis", "'a', 'b' or 'c'"),
    (("properties", 0, "tensor", "free", "11"), float("nan"), "properties[0].tensor.free.11", "finite"),
    (("properties", 0, "tensor", "free", "11"), 10**400, "properties[0].tensor.free.11", ""),
    (("properties", 0, "tensor", "free"), {"14": 1}, "properties[0].tensor.free.14", "row and column"),
    (("properties", 0, "tensor", "covariance"), [[1]], "properties[0].tensor.covariance", "4 rows of 4"),
    (("properties", 1, "id"), "k", "properties[1].id", "twice"),
    (("readings", 0, "property"), "gone", "readings[0].property", "no property"),
    (("readings", 0, "kind"), "guess", "readings[0].kind", "'rod'"),
    (("readings", 0, "kind"), "sheet", "readings[0].second", "needs this direction"),
    (("readings", 0, "direction"), [1, 2], "readings[0].direction", "A direction is"),
    (("readings", 0, "direction"), {"xyz": [1, 2, None]}, "readings[0].direction", "A direction is"),
    (("readings", 0, "direction"), [0, 0, float("inf")], "readings[0].direction", "finite"),
    (("readings", 0, "value"), None, "readings[0].value", "number"),
    (("readings", 0, "sigma"), 0, "readings[0].sigma", "more than 0"),
    (("readings", 0, "direction_sigma"), -1, "readings[0].direction_sigma", "at least 0"),
    (("batches",), {"furnace": -0.1}, "batches.furnace", "not negative"),
    (("pose",), {}, "pose", "A pose is"),
    (("pose",), {"matrix": [[1, 0], [0, 1]]}, "pose.matrix", "A pose is"),
    (("pose",), {"exact": ["z", "[0 0 1]"]}, "pose.toward", "A pose is"),
    (("pose",), {"exact": ["z", "[0 0 1]"], "toward": ["z", "[1 0 0]"]}, "pose.toward", "different axes"),
    (("pose",), {"bunge": [1, 2, 3], "quaternion": [1, 0, 0, 0]}, "pose", "A pose is"),
    (("poses",), [{"name": "p", "pose": POSES[0]}] * 2, "poses[1].name", "twice"),
    (("part",), [1, 2], "part[2]", "missing"),
    (("looking",), [], "looking", "object"),
    (("looking",), {"far": float("inf")}, "looking", "finite"),
    (("unknown",), {"far": {1, 2}}, "unknown", "cannot be kept"),
    (("schema_version",), 2, "schema_version", "reads versions up to 1"),
    (("schema_version",), "1", "schema_version", "whole number"),
]


@pytest.mark.parametrize(("path", "value", "field", "words"), FAULTS)
def test_a_fault_is_told_at_its_field(
    document_data: dict[str, Any], path: tuple[str | int, ...], value: Any, field: str, words: str
) -> None:
    with pytest.raises(InputError) as refusal:
        read_document(put(document_data, path, value))
    assert refusal.value.field == field
    assert words in refusal.value.message
    assert refusal.value.hint


def test_all_faults_are_told_at_once(document_data: dict[str, Any]) -> None:
    data = put(put(document_data, ("part",), [1, 2, -3]), ("readings", 0, "value"), "much")
    with pytest.raises(InputError) as refusal:
        read_document(data)
    assert [fault["field"] for fault in refusal.value.detail] == ["readings[0].value", "part[2]"]


@pytest.mark.parametrize("data", [None, [], "text", 5, {}])
def test_what_is_no_document_is_refused(data: Any) -> None:
    with pytest.raises(InputError):
        read_document(data)


def test_a_hostile_depth_is_refused_and_the_allowed_one_can_be_written(document_data: dict[str, Any]) -> None:
    def nested(levels: int) -> Any:
        value: Any = 1
        for _ in range(levels):
            value = {"a": value}
        return value

    for levels in (25, 20_000):
        with pytest.raises(InputError, match="nested"):
            read_document({**document_data, "series": [nested(levels)]})
    assert canonical_json(write_document(read_document({**document_data, "series": [nested(24)]})))


def test_the_schema_can_be_published() -> None:
    schema = SampleDocument.model_json_schema()
    assert {"name", "crystal", "properties", "readings", "pose", "part"} <= set(schema["properties"])
    assert set(schema["required"]) == {"name", "crystal"}
