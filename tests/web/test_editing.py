"""One edit of a document: what it changes, what it leaves, and the sentence that refuses it; no store and no server."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.store.demonstration import CONDUCTING, EXPANDING, demonstration_documents
from app.store.document import SampleDocument, change_document, read_document
from app.web.changes import Change
from app.web.editing import Edited, apply_change
from app.web.kept import crystal_of, tensor_of
from tests.crystal.reference import SETTING_NAMES, SETTINGS, find_exact_form

CONDUCTOR, SHRINKER = demonstration_documents()


def edit(document: SampleDocument, **change: Any) -> Edited:
    return apply_change(document, Change.model_validate(change))


def refuse(document: SampleDocument, **change: Any) -> InputError:
    before = document.plain()
    with pytest.raises(InputError) as caught:
        edit(document, **change)
    assert document.plain() == before
    assert caught.value.message
    return caught.value


def check_others_stay(new: SampleDocument, old: SampleDocument, *changed: str) -> None:
    one, other = new.plain(), old.plain()
    assert {key for key in one if one[key] != other.get(key)} | {key for key in other if key not in one} <= set(changed)


def find_matrix(document: SampleDocument) -> np.ndarray:
    return tensor_of(crystal_of(document.crystal), document.properties[0]).estimate.matrix


# Cells ----------------------------------------------------------------------------------------------------------------


def test_a_free_cell_takes_its_followers_along() -> None:
    new = edit(CONDUCTOR, free={"13": 2.1}).document
    # 2/m about x2: 13 = 31 and nothing else, by hand.
    expected = np.array([[13.2, 0.0, 2.1], [0.0, 24.6, 0.0], [2.1, 0.0, 15.9]])
    np.testing.assert_allclose(find_matrix(new), expected, atol=1e-15)
    check_others_stay(new, CONDUCTOR, "properties")
    before, after = CONDUCTOR.properties[0].plain(), new.properties[0].plain()
    assert {**after, "tensor": None} == {**before, "tensor": None}
    np.testing.assert_array_equal(after["tensor"]["covariance"], before["tensor"]["covariance"])


@pytest.mark.parametrize(
    ("typed", "value", "sigma"),
    [
        # The digits in parentheses count in the last place (common practice in crystallography).
        ("2.10(7)", 2.1, 0.07),
        ("-2.1(1.5)", -2.1, 1.5),
        ("−2.1 ± 0.2", -2.1, 0.2),
        ("2.1e-3", 2.1e-3, 0.06),
        (2.1, 2.1, 0.06),
        (0, 0.0, 0.06),
    ],
)
def test_a_value_may_be_typed_with_its_uncertainty(typed: Any, value: float, sigma: float) -> None:
    tensor = edit(CONDUCTOR, free={"13": typed}).document.properties[0].tensor
    assert tensor.free["13"] == pytest.approx(value, rel=1e-15)
    assert tensor.covariance is not None
    # Second of 11 13 22 33; what had no σ typed keeps the one it had.
    assert np.sqrt(np.diag(tensor.covariance)) == pytest.approx([0.08, sigma, 0.2, 0.09])


def test_correlations_stay_when_one_sigma_changes() -> None:
    covariance = np.array([[4.0, 1.0, 0.0, 0.0], [1.0, 1.0, 0.5, 0.0], [0.0, 0.5, 9.0, 2.0], [0.0, 0.0, 2.0, 1.0]])
    data = CONDUCTOR.plain()
    data["properties"][0]["tensor"]["covariance"] = covariance.tolist()
    new = edit(read_document(data), free={"13": "1.85(20)"}).document.properties[0].tensor.covariance
    # 13 is second: σ goes from 1 to 0.20, so its row and column shrink to a fifth, its variance to 0.04.
    scale = np.array([1.0, 0.2, 1.0, 1.0])
    np.testing.assert_allclose(new, covariance * np.outer(scale, scale))


def test_a_first_uncertainty_leaves_the_others_unknown() -> None:
    data = CONDUCTOR.plain()
    data["properties"][0]["tensor"].pop("covariance")
    new = edit(read_document(data), free={"22": "24.6(2)"}).document.properties[0].tensor.covariance
    np.testing.assert_allclose(new, np.diag([0.0, 0.0, 0.04, 0.0]))
    plain = edit(read_document(data), free={"22": 25.0}).document.properties[0].tensor
    assert plain.covariance is None


def test_several_cells_at_once() -> None:
    tensor = edit(CONDUCTOR, free={"11": 1, "33": "3(1)"}).document.properties[0].tensor
    assert tensor.free == {"11": 1.0, "13": 1.85, "22": 24.6, "33": 3.0}


@pytest.mark.parametrize("name", SETTING_NAMES)
def test_just_the_cells_that_the_group_leaves_free_can_be_typed(name: str) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    frame = "x3=[1 1 1] x1=(1 -1 0)" if setting.family == "rhombohedral" else "x3=c x2=b*"
    crystal = {"cell": list(setting.cell), "group": setting.symbol, "frame": frame}
    if setting.unique_axis:
        crystal["unique_axis"] = setting.unique_axis
    free = [f"{place // 3 + 1}{place % 3 + 1}" for place in find_exact_form(name, "polar", "symmetric")[0]]
    data = {**SHRINKER.plain(), "crystal": crystal, "readings": [], "pose": {"axis": [0, 0, 1], "angle": 0}}
    data["properties"][0]["tensor"] = {"free": dict.fromkeys(free, 1.0)}
    document = read_document(data)
    for row in "123":
        for column in "123":
            label = f"{row}{column}"
            if label in free:
                assert edit(document, free={label: 2.5}).document.properties[0].tensor.free[label] == 2.5
                continue
            error = refuse(document, free={label: 2.5})
            assert error.field == f"free.{label}"
            assert error.message.startswith(f"The cell {label} is locked, ")
            assert error.hint == f"Free to change: {', '.join(free)}."


def test_a_locked_cell_says_which_operation_locks_it() -> None:
    error = refuse(CONDUCTOR, free={"12": 1.0})
    # About x2 the half-turn takes x1 to −x1 and keeps x2: 12 goes to −12, so it is zero.
    assert "the half-turn about x2 turns 12 into −12" in error.message


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"11": "much"}, "free.11"),
        ({"11": ""}, "free.11"),
        ({"11": "1,5"}, "free.11"),
        ({"44": 1.0}, "free.44"),
        ({"11": 1e301}, "free.11"),
    ],
)
def test_what_is_no_value_is_refused_at_its_cell(change: dict[str, Any], field: str) -> None:
    assert refuse(CONDUCTOR, free=change).field == field


def test_without_a_property_there_are_no_cells() -> None:
    empty = change_document(CONDUCTOR, {"properties": [], "readings": []})
    assert refuse(empty, free={"11": 1.0}).field == "property"


# Tensor and property --------------------------------------------------------------------------------------------------


def test_a_whole_tensor_takes_the_place_of_the_one_that_stands() -> None:
    matrix = [[10.0, 0.0, 1.0], [0.0, 20.0, 0.0], [1.0, 0.0, 15.0]]
    edited = edit(CONDUCTOR, tensor={"matrix": matrix, "source": "a paper"})
    assert edited.notices == ()
    kept = edited.document.properties[0]
    assert kept.tensor.free == pytest.approx({"11": 10.0, "13": 1.0, "22": 20.0, "33": 15.0})
    assert kept.tensor.covariance is None
    assert kept.source == "a paper"
    check_others_stay(edited.document, CONDUCTOR, "properties")


def test_what_the_group_forbids_of_it_is_told() -> None:
    matrix = [[10.0, 1.0, 0.0], [1.0, 10.0, 0.0], [0.0, 0.0, 10.0]]
    (notice,) = edit(CONDUCTOR, tensor={"matrix": matrix}).notices
    # By hand: √2 of √302.
    assert notice.startswith(f"{100 * np.sqrt(2 / 302):.2g} % of the tensor was removed")


def test_a_tensor_in_another_unit_is_converted_with_its_covariance() -> None:
    free = {"11": 132.0, "13": 18.5, "22": 246.0, "33": 159.0}
    given_tensor = {"free": free, "covariance": np.diag([64.0, 36.0, 400.0, 81.0]).tolist(), "unit": "mW/(cm·K)"}
    tensor = edit(CONDUCTOR, tensor=given_tensor).document.properties[0].tensor
    # 1 mW/(cm·K) is 0.1 W/(m·K).
    assert tensor.free == pytest.approx({"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9})
    np.testing.assert_allclose(tensor.covariance, np.diag([0.64, 0.36, 4.0, 0.81]))


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"free": {"11": 1.0}}, "tensor.free.13"),
        ({"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]], "unit": "K"}, "tensor"),
        ({"free": {"11": 1, "13": 0, "22": 1, "33": 1}, "covariance": [[1]]}, "tensor.covariance"),
        ({}, "tensor"),
    ],
)
def test_a_tensor_that_is_none_is_refused(change: dict[str, Any], field: str) -> None:
    found = refuse(CONDUCTOR, tensor=change).field
    assert found is not None
    assert found.startswith(field)


def test_a_unit_converts_value_and_sigma_and_tells_the_readings_theirs() -> None:
    new = edit(CONDUCTOR, property={"unit": "mW/(cm·K)"}).document
    tensor = new.properties[0].tensor
    assert tensor.free == pytest.approx({"11": 132.0, "13": 18.5, "22": 246.0, "33": 159.0})
    assert np.sqrt(np.diag(tensor.covariance)) == pytest.approx([0.8, 0.6, 2.0, 0.9])
    assert {reading.unit for reading in new.readings} == {"W/(m·K)"}


def test_another_kind_is_added_beside_and_looked_at() -> None:
    edited = edit(CONDUCTOR, property={"kind": "thermal_expansion"})
    assert [kept.kind for kept in edited.document.properties] == ["thermal_conductivity", "thermal_expansion"]
    assert edited.document.looking["property"] == edited.document.properties[1].id
    assert edited.notices
    back = edit(edited.document, property={"kind": "thermal_conductivity"})
    assert back.document.looking["property"] == CONDUCTING
    assert len(back.document.properties) == 2


def test_a_property_is_taken_out_with_its_readings() -> None:
    both = edit(CONDUCTOR, property={"kind": "thermal_expansion"}).document
    gone = edit(both, property={"id": CONDUCTING, "remove": True}).document
    assert [kept.kind for kept in gone.properties] == ["thermal_expansion"]
    assert gone.readings == ()
    assert refuse(gone, property={"id": CONDUCTING}).field == "property.property"


# Poses ----------------------------------------------------------------------------------------------------------------


def test_a_pose_is_kept_as_it_was_said() -> None:
    said = {"from": "(0 0 1)", "tilt": 4, "toward": "[1 0 0]"}
    new = edit(CONDUCTOR, pose=said).document
    assert new.plain()["pose"] == said
    check_others_stay(new, CONDUCTOR, "pose")


@pytest.mark.parametrize(
    ("pose", "field"),
    [
        ({"exact": ["z", "[100]"], "toward": ["x", "[200]"]}, "pose.toward"),
        ({"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, -1]]}, "pose.matrix"),
        ({"axis": "[0 0 0]", "angle": 1}, "pose.axis"),
        ({"quaternion": [1, 1, 0, 0]}, "pose.quaternion"),
        ({"from": "(0 0 1)", "tilt": 4, "toward": "(0 0 2)"}, "pose.toward"),
    ],
)
def test_a_pose_that_leaves_something_open_is_refused(pose: dict[str, Any], field: str) -> None:
    assert refuse(CONDUCTOR, pose=pose).field == field


def test_poses_are_kept_forgotten_and_replaced_by_name() -> None:
    flat, steep = {"axis": [0, 0, 1], "angle": 30}, {"bunge": [1, 2, 3]}
    one = edit(CONDUCTOR, poses={"flat": flat, "steep": steep}).document
    assert [(entry.name, entry.plain()["pose"]) for entry in one.poses] == [("flat", flat), ("steep", steep)]
    two = edit(one, poses={"flat": steep}).document
    assert [(entry.name, entry.plain()["pose"]) for entry in two.poses] == [("flat", steep), ("steep", steep)]
    three = edit(two, poses={"flat": None, "third": flat}).document
    assert [entry.name for entry in three.poses] == ["steep", "third"]
    check_others_stay(three, CONDUCTOR, "poses")


def test_a_pose_that_is_not_there_cannot_be_forgotten() -> None:
    assert refuse(CONDUCTOR, poses={"flat": None}).field == "poses.flat"


def test_a_bad_named_pose_is_refused_by_its_name() -> None:
    pose = {"exact": ["z", "[100]"], "toward": ["x", "[200]"]}
    assert str(refuse(CONDUCTOR, poses={"flat": pose}).field).startswith("poses.flat.")


# Block, readings, words -----------------------------------------------------------------------------------------------


def test_the_block_takes_new_sides() -> None:
    new = edit(CONDUCTOR, part=[1, 2.5, 1e5]).document
    assert new.part == (1, 2.5, 1e5)
    check_others_stay(new, CONDUCTOR, "part")


@pytest.mark.parametrize(("part", "field"), [([1, -1, 1], "part[1]"), ([0, 1, 1], "part[0]"), ([1, 1, 2e5], "part[2]")])
def test_a_side_is_a_length(part: list[float], field: str) -> None:
    assert refuse(CONDUCTOR, part=part).field == field


READING = {"kind": "along", "direction": "[1 0 0]", "value": 13.0}


def make_pair() -> SampleDocument:
    """Two properties with a reading each; the first is looked at."""
    data = CONDUCTOR.plain()
    data["properties"].append(
        SHRINKER.plain()["properties"][0] | {"tensor": {"free": dict.fromkeys(("11", "13", "22", "33"), 1.0)}}
    )
    data["readings"] = [{"property": CONDUCTING, **READING}, {"property": EXPANDING, **READING, "value": 7.0}]
    return read_document(data)


def test_readings_of_the_property_looked_at_are_replaced() -> None:
    new = edit(make_pair(), readings=[{**READING, "value": 14.0}, {**READING, "value": 15.0}]).document
    assert [(entry.property, entry.value) for entry in new.readings] == [
        (EXPANDING, 7.0),
        (CONDUCTING, 14.0),
        (CONDUCTING, 15.0),
    ]
    check_others_stay(new, make_pair(), "readings")


def test_readings_that_name_another_property_replace_those_too() -> None:
    new = edit(make_pair(), readings=[{**READING, "property": EXPANDING, "value": 8.0}]).document
    # Of the one looked at none was given, so none is left.
    assert [(entry.property, entry.value) for entry in new.readings] == [(EXPANDING, 8.0)]


def test_batches_stand_alone_or_beside_readings() -> None:
    alone = edit(make_pair(), batches={"furnace": 0.01}).document
    assert dict(alone.batches) == {"furnace": 0.01}
    assert alone.readings == make_pair().readings
    both = edit(make_pair(), readings=[{**READING, "batch": "furnace"}], batches={"furnace": 0.02}).document
    assert dict(both.batches) == {"furnace": 0.02}
    assert both.readings[-1].batch == "furnace"


@pytest.mark.parametrize(
    ("readings", "field"),
    [
        ([READING, {**READING, "value": "much"}], "readings[1].value"),
        ([{"kind": "along", "value": 1.0}], "readings[0].direction"),
        ([{**READING, "sigma": 0}], "readings[0].sigma"),
        ([{**READING, "property": "nothing"}], "readings[0].property"),
    ],
)
def test_a_fault_is_told_by_its_place_in_what_was_sent(readings: list[dict[str, Any]], field: str) -> None:
    # A reading of another property stands before them in the document.
    assert refuse(make_pair(), readings=readings).field == field


def test_names_notes_and_what_is_looked_at() -> None:
    assert edit(CONDUCTOR, name="  Blue one ").document.name == "Blue one"
    assert refuse(CONDUCTOR, name="   ").field == "name"
    assert edit(CONDUCTOR, notes="").document.notes == ""
    new = edit(CONDUCTOR, looking={"surface": "value", "more": {"a": [1]}}).document
    assert new.plain()["looking"] == {"property": CONDUCTING, "surface": "value", "more": {"a": [1]}}
    check_others_stay(new, CONDUCTOR, "looking")


# Crystal --------------------------------------------------------------------------------------------------------------


def test_a_crystal_without_a_cell_can_be_given() -> None:
    # Absent and null are one for a limiting group.
    for crystal in ({"cell": None, "group": "∞m"}, {"group": "∞m"}):
        edited = edit(change_document(SHRINKER, {"readings": []}), crystal=crystal)
        assert edited.document.crystal.cell is None
        # By the symmetry: 11 and 22 become their mean, (23.4 + 7.1)/2.
        assert edited.document.properties[0].tensor.free == pytest.approx({"11": 15.25, "33": -9.6})
        assert edited.notices


def test_a_refused_crystal_has_its_field() -> None:
    assert (
        refuse(CONDUCTOR, crystal={"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "mmm"}).field == "crystal.cell"
    )


def test_a_crystal_is_replaced_whole() -> None:
    # What is not said of the new crystal is not kept from the old one.
    data = CONDUCTOR.plain()
    data["crystal"] |= {"cell_sigma": [0.01] * 6, "frame": "x1=a x3=c*"}
    crystal = {"cell": data["crystal"]["cell"], "group": "2/m"}
    new = edit(read_document(data), crystal=crystal).document.crystal
    assert new.cell_sigma is None
    assert new.frame == "x3=c x2=b*"
    assert new.unique_axis is None
    assert build_crystal(new.cell, new.group).group.unique_axis == "b"


@settings(max_examples=30, deadline=None)
@given(st.lists(st.sampled_from(["free", "pose", "part", "name", "looking", "frame"]), min_size=1, max_size=6))
def test_edits_of_different_things_do_not_disturb_each_other(order: list[str]) -> None:
    changes: dict[str, dict[str, Any]] = {
        "free": {"free": {"22": 25.0}},
        "pose": {"pose": {"exact": ["z", "(0 0 1)"], "toward": ["x", "[1 0 0]"]}},
        "part": {"part": [1, 2, 3]},
        "name": {"name": "Other"},
        "looking": {"looking": {"surface": "flux"}},
        "frame": {"crystal": {**CONDUCTOR.crystal.plain(), "frame": "x1=a x3=c*"}},
    }
    document = CONDUCTOR
    for key in order:
        document = edit(document, **changes[key]).document
    # b is x2 under both rules, so 22 is one cell in both frames.
    assert document.properties[0].tensor.free["22"] == pytest.approx(25.0 if "free" in order else 24.6)
    assert document.part == ((1, 2, 3) if "part" in order else CONDUCTOR.part)
    assert document.name == ("Other" if "name" in order else CONDUCTOR.name)
    assert document.looking["surface"] == ("flux" if "looking" in order else "quadric")
    assert document.crystal.frame == ("x1=a x3=c*" if "frame" in order else CONDUCTOR.crystal.frame)
    wanted = changes["pose"]["pose"] if "pose" in order else CONDUCTOR.plain()["pose"]
    assert document.plain()["pose"] == wanted
