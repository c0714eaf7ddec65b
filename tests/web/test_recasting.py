"""A corrected crystal under a kept sample: what stands still in the crystal stands still, told by textbook bases.

Everything is compared in the one frame that no rule changes: a along x, c* along z, by the formula of the textbooks.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.frame import list_letter_rules
from app.errors import InputError
from app.store.demonstration import CONDUCTING, demonstration_documents
from app.store.document import SampleDocument, change_document, read_document
from app.tensor.pose import read_pose
from app.web.kept import crystal_for, crystal_of, entry_of, pose_of, tensor_of
from app.web.kept_readings import fit_document, take_all
from app.web.recasting import recast_crystal
from tests.crystal.reference import CELLS, build_textbook_basis

FloatArray = npt.NDArray[np.float64]

RULES = [rule.text for rule in list_letter_rules()]
CONDUCTOR, SHRINKER = demonstration_documents()

POSES: dict[str, dict[str, Any]] = {
    "matrix": {"matrix": [[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0]]},
    "axis of the frame": {"axis": [0.6, 0.0, 0.8], "angle": 33.0},
    "axis of the crystal": {"axis": "[1 0 1]", "angle": 33.0},
    "quaternion": {"quaternion": [0.5, 0.5, -0.5, 0.5]},
    "bunge": {"bunge": [10.0, 40.0, 70.0]},
    "one row": {"exact": ["z", "[1 0 1]"], "toward": ["x", [0.0, 1.0, 0.2]]},
    "a vector": {"exact": ["y", [0.2, 0.3, 1.0]], "toward": ["x", "[1 0 0]"]},
    "tilted vector": {"from": [0.0, 0.2, 1.0], "tilt": 4.0, "toward": "[1 0 0]"},
    "tilted, x a vector": {"from": "(0 0 1)", "tilt": 4.0, "toward": "[1 0 0]", "x": [0.0, 1.0, 0.0]},
}
BY_INDICES: dict[str, dict[str, Any]] = {
    "exact": {"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]},
    "tilted": {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]"},
    "tilted with x": {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]", "x": "[1 -1 2]"},
}


def give(document: SampleDocument, **changes: Any) -> dict[str, Any]:
    """The crystal of a document with changes, as an edit sends it."""
    return {**document.crystal.plain(), **changes}


def find_axes(document: SampleDocument) -> FloatArray:
    """x1 x2 x3 of a document as rows in the textbook's frame, by its own M."""
    crystal = crystal_of(document.crystal)
    assert crystal.cell is not None
    basis = build_textbook_basis(tuple(crystal.cell.parameters))
    # v_textbook = basis · indices and v_frame = M · indices.
    return crystal.require_basis() @ np.linalg.inv(basis)


def find_tensor(document: SampleDocument, number: int = 0) -> FloatArray:
    """A property's matrix in the textbook's frame."""
    kept = document.properties[number]
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry_of(kept))
    axes = find_axes(document)
    return axes.T @ tensor_of(crystal, kept).estimate.matrix @ axes


def find_specimen(document: SampleDocument, pose: Any) -> FloatArray:
    """x y z as rows in the textbook's frame."""
    return pose_of(crystal_of(document.crystal), pose).matrix @ find_axes(document)


def add_pose(name: str) -> SampleDocument:
    given_pose = {**POSES, **BY_INDICES}[name]
    return change_document(CONDUCTOR, {"pose": given_pose, "poses": [{"name": "kept", "pose": given_pose}]})


# Another frame rule ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("rule", RULES)
def test_under_every_rule_the_tensor_stays_where_it_is(rule: str) -> None:
    new, notices = recast_crystal(CONDUCTOR, give(CONDUCTOR, frame=rule))
    assert notices == []
    assert new.crystal.frame == rule
    np.testing.assert_allclose(find_tensor(new), find_tensor(CONDUCTOR), atol=1e-9)
    # And so does the uncertainty of any value: along [1 2 3], say.
    sigmas = []
    for document in (CONDUCTOR, new):
        crystal = crystal_of(document.crystal)
        row = crystal.require_basis() @ [1.0, 2.0, 3.0]
        estimate = tensor_of(crystal, document.properties[0]).estimate
        sigmas.append(estimate.value_sigma(row / np.linalg.norm(row)))
    assert sigmas[1] == pytest.approx(sigmas[0], rel=1e-6)


@pytest.mark.parametrize("rule", ["x1=a x3=c*", "x2=c x1=a*", "x3=b x1=c*"])
@pytest.mark.parametrize("name", [*POSES, *BY_INDICES])
def test_the_specimen_stays_where_it_is(name: str, rule: str) -> None:
    document = add_pose(name)
    new, notices = recast_crystal(document, give(document, frame=rule))
    assert notices == []
    before = find_specimen(document, document.pose)
    np.testing.assert_allclose(find_specimen(new, new.pose), before, atol=1e-9)
    np.testing.assert_allclose(find_specimen(new, new.poses[0].pose), before, atol=1e-9)
    assert new.poses[0].name == "kept"


@pytest.mark.parametrize("name", BY_INDICES)
def test_a_pose_that_names_rows_and_normals_keeps_its_names(name: str) -> None:
    document = add_pose(name)
    new, _ = recast_crystal(document, give(document, frame="x1=a x3=c*"))
    assert new.pose == document.pose
    assert new.poses == document.poses


def test_numbers_along_the_specimen_do_not_move() -> None:
    # The whole of it: what the page shows along z is one number before and after.
    for rule in RULES[::5]:
        new, _ = recast_crystal(CONDUCTOR, give(CONDUCTOR, frame=rule))
        for document in (CONDUCTOR, new):
            z = find_specimen(document, document.pose)[2]
            assert z @ find_tensor(document) @ z == pytest.approx(
                find_specimen(CONDUCTOR, CONDUCTOR.pose)[2] @ find_tensor(CONDUCTOR)
                @ find_specimen(CONDUCTOR, CONDUCTOR.pose)[2]
            )  # fmt: skip


READINGS: list[dict[str, Any]] = [
    {"kind": "along", "direction": [1.0, 0.0, 0.0], "value": 13.2},
    {"kind": "along", "direction": {"xyz": [0.0, 0.0, 2.0]}, "value": 15.9},
    {"kind": "along", "direction": "[0 1 0]", "value": 24.6},
    {"kind": "along", "direction": [0.6, 0.0, 0.8], "value": 16.704},
    {"kind": "difference", "direction": [0.6, 0.0, 0.8], "second": {"xyz": [1.0, 0.0, 0.0]}, "value": 3.504},
    {"kind": "across", "direction": {"xyz": [1.0, 0.0, 0.0]}, "second": "(0 0 1)", "value": 5.7},
    {"kind": "along", "direction": {"specimen": [0.0, 0.0, 1.0]}, "value": 14.0, "pose": {"bunge": [20.0, 30.0, 40.0]}},
    {"kind": "along", "direction": {"specimen": [1.0, 0.0, 0.0]}, "value": 15.0},
    {"kind": "mean", "value": 17.9},
]


@pytest.mark.parametrize("rule", ["x1=a x3=c*", "x2=c x1=a*"])
def test_readings_keep_pointing_where_they_point(rule: str) -> None:
    rows = [{"property": CONDUCTING, **reading} for reading in READINGS]
    document = change_document(CONDUCTOR, {"readings": rows, "pose": POSES["bunge"]})
    new, notices = recast_crystal(document, give(document, frame=rule))
    assert notices == []
    for document_now, kept in ((document, document.readings), (new, new.readings)):
        found = take_all(crystal_of(document_now.crystal), kept)
        assert len(found) == len(READINGS)
    # A reading without a pose of its own leans on the document's.
    for before, after in zip(document.readings, new.readings, strict=True):
        for name in ("direction", "second"):
            vectors = []
            for at, kept in ((document, before), (new, after)):
                given_direction = kept.plain().get(name)
                if given_direction is None:
                    continue
                crystal = crystal_of(at.crystal)
                pose = kept.plain().get("pose") or at.plain()["pose"]
                if isinstance(given_direction, str):
                    assert given_direction == before.plain()[name]
                    indices = [float(part) for part in given_direction[1:-1].split()]
                    basis = crystal.require_basis()
                    vector = basis @ indices if given_direction[0] == "[" else np.linalg.inv(basis).T @ indices
                elif isinstance(given_direction, dict) and "specimen" in given_direction:
                    vector = read_pose(pose, crystal).matrix.T @ given_direction["specimen"]
                else:
                    vector = np.array(given_direction["xyz"] if isinstance(given_direction, dict) else given_direction)
                vectors.append(find_axes(at).T @ (vector / np.linalg.norm(vector)))
            if vectors:
                np.testing.assert_allclose(vectors[1], vectors[0], atol=1e-9)
        for name in ("kind", "value", "sigma", "bar", "unit", "note"):
            assert getattr(after, name) == getattr(before, name)


def test_a_fit_of_the_readings_gives_the_same_tensor_in_the_crystal() -> None:
    rows = [{"property": CONDUCTING, **reading, "sigma": 0.1} for reading in READINGS]
    document = change_document(CONDUCTOR, {"readings": rows})
    new, _ = recast_crystal(document, give(document, frame="x1=a x3=c*"))
    found = []
    for at in (document, new):
        fit, _ = fit_document(crystal_of(at.crystal), at, at.properties[0])
        assert fit.estimate is not None
        axes = find_axes(at)
        found.append((axes.T @ fit.estimate.matrix @ axes, fit.chi2))
    np.testing.assert_allclose(found[1][0], found[0][0], atol=1e-6)
    assert found[1][1] == pytest.approx(found[0][1], rel=1e-6)


@settings(max_examples=20, deadline=None)
@given(st.sampled_from(RULES), st.sampled_from(RULES), st.sampled_from(sorted(POSES)))
def test_any_way_round_leads_back(first: str, second: str, name: str) -> None:
    document = add_pose(name)
    there, _ = recast_crystal(document, give(document, frame=first))
    on, _ = recast_crystal(there, give(there, frame=second))
    back, notices = recast_crystal(on, give(on, frame=document.crystal.frame))
    assert notices == []
    np.testing.assert_allclose(find_tensor(back), find_tensor(document), atol=1e-9)
    np.testing.assert_allclose(find_specimen(back, back.pose), find_specimen(document, document.pose), atol=1e-9)
    before, after = document.properties[0].tensor, back.properties[0].tensor
    assert after.free.keys() == before.free.keys()
    np.testing.assert_allclose(list(after.free.values()), list(before.free.values()), atol=1e-9)
    np.testing.assert_allclose(after.covariance, before.covariance, atol=1e-9)


def check_same_tensor(new: SampleDocument, old: SampleDocument, number: int = 0) -> None:
    """Cells and covariance but for rounding, and all else."""
    one, other = new.properties[number], old.properties[number]
    assert one.tensor.free == pytest.approx(other.tensor.free, rel=1e-13)
    if other.tensor.covariance is None:
        assert one.tensor.covariance is None
    else:
        np.testing.assert_allclose(one.tensor.covariance, other.tensor.covariance, rtol=1e-12, atol=1e-15)
    kept = [{**entry.plain(), "tensor": None} for entry in (one, other)]
    assert kept[0] == kept[1]


def test_the_same_crystal_changes_nothing() -> None:
    new, notices = recast_crystal(CONDUCTOR, give(CONDUCTOR))
    assert notices == []
    check_same_tensor(new, CONDUCTOR)
    same = [{**document.plain(), "properties": None} for document in (new, CONDUCTOR)]
    assert same[0] == same[1]


# Another group or cell ------------------------------------------------------------------------------------------------

ORTHORHOMBIC = [6.12, 9.47, 5.38, 90, 90, 90]


def make_triclinic() -> SampleDocument:
    """An orthorhombic cell in group 1, where all six cells are free."""
    data = CONDUCTOR.plain()
    data["crystal"] = {"cell": ORTHORHOMBIC, "group": "1"}
    data["readings"] = []
    data["properties"][0]["tensor"] = {
        "free": {"11": 3.0, "12": 0.03, "13": 0.0, "22": 2.0, "23": 0.0, "33": 1.0},
        "covariance": (0.01 * np.eye(6)).tolist(),
    }
    return read_document(data)


def test_what_a_group_forbids_is_removed_and_told() -> None:
    document = make_triclinic()
    new, notices = recast_crystal(document, give(document, group="mmm"))
    assert new.properties[0].tensor.free == {"11": 3.0, "22": 2.0, "33": 1.0}
    # By hand: 0.03 in two cells beside √(9 + 4 + 1): 0.03 √2/√14.0018, 1.1 %.
    (notice,) = notices
    assert notice == (
        "Thermal conductivity: 1.1 % of the tensor was removed, because the group mmm forbids it. Undo brings it back."
    )
    np.testing.assert_allclose(new.properties[0].tensor.covariance, 0.01 * np.eye(3), atol=1e-15)
    assert new.pose == document.pose


def test_very_little_is_told_too() -> None:
    document = make_triclinic()
    data = document.plain()
    data["properties"][0]["tensor"]["free"]["12"] = 1e-5
    document = read_document(data)
    _, notices = recast_crystal(document, give(document, group="mmm"))
    assert "less than 0.01 %" in notices[0]


def test_cells_that_become_free_are_told_to_be_unknown() -> None:
    document = SHRINKER
    new, notices = recast_crystal(document, give(document, group="1"))
    free = new.properties[0].tensor.free
    assert free == {"11": 23.4, "12": 0.0, "13": 0.0, "22": 7.1, "23": 0.0, "33": -9.6}
    assert new.properties[0].tensor.covariance is None
    (notice,) = notices
    assert "nothing is known of the uncertainty of 12, 13, 23" in notice
    assert "no σ is shown" in notice


def test_another_cell_keeps_the_cells_of_the_matrix_and_the_pose() -> None:
    document = CONDUCTOR
    new, notices = recast_crystal(document, give(document, cell=[9.9, 6.4, 7.3, 90, 107.0, 90]))
    assert notices == []
    check_same_tensor(new, document)
    assert new.pose == document.pose
    assert new.readings == document.readings
    assert new.crystal.cell == (9.9, 6.4, 7.3, 90, 107.0, 90)


@pytest.mark.parametrize("name", POSES)
def test_a_pose_in_the_frame_stays_in_the_frame_when_the_cell_changes(name: str) -> None:
    document = add_pose(name)
    new, notices = recast_crystal(document, give(document, cell=[9.9, 6.4, 7.3, 90, 107.0, 90]))
    assert notices == []
    assert new.pose == document.pose


def test_without_a_cell_named_poses_are_kept_as_matrices_and_told() -> None:
    poses = [{"name": "first", "pose": BY_INDICES["exact"]}, {"name": "second", "pose": POSES["bunge"]}]
    document = change_document(SHRINKER, {"readings": [], "poses": poses})
    new, notices = recast_crystal(document, {"cell": None, "group": "∞∞m"})
    told = [notice for notice in notices if "indices of the new crystal" in notice]
    assert len(told) == 2
    assert told[0].startswith("The pose cannot")
    assert told[1].startswith("The pose “first” cannot")
    # Their axes stay where they were in x1 x2 x3.
    old = crystal_of(document.crystal)
    for before, after in ((document.pose, new.pose), (document.poses[0].pose, new.poses[0].pose)):
        assert set(after) == {"matrix"}
        np.testing.assert_allclose(after["matrix"], pose_of(old, before).matrix, atol=1e-12)
    assert new.poses[1] == document.poses[1]
    # ∞∞m leaves the mean alone: (23.4 + 7.1 − 9.6)/3.
    assert new.properties[0].tensor.free["11"] == pytest.approx(20.9 / 3)


def test_a_field_tensor_obeys_no_group() -> None:
    # An applied stress is not the crystal's; only its frame is.
    data = CONDUCTOR.plain()
    field = {
        "id": "load",
        "name": "Load",
        "kind": "stress",
        "unit": "MPa",
        "tensor": {"free": {"11": 1.0, "12": 2.0, "13": 3.0, "22": 4.0, "23": 5.0, "33": 6.0}},
    }
    data["properties"].append(field)
    document = read_document(data)
    assert entry_of(document.properties[1]).is_field
    new, notices = recast_crystal(document, give(document, group="2"))
    assert notices == []
    check_same_tensor(new, document, 1)
    turned, notices = recast_crystal(document, give(document, frame="x1=a x3=c*"))
    assert notices == []
    np.testing.assert_allclose(find_tensor(turned, 1), find_tensor(document, 1), atol=1e-9)


@pytest.mark.parametrize(
    ("changes", "field"),
    [
        ({"group": "mmm", "unique_axis": None}, "crystal.cell"),
        ({"cell": [9.83, 6.41, -7.27, 90, 107.4, 90]}, "crystal.cell[2]"),
        ({"frame": "x3=c x2=c*"}, "crystal.frame"),
        ({"group": "nonsense", "unique_axis": None}, "crystal.group"),
        ({"cell": None}, "crystal.cell"),
    ],
)
def test_a_crystal_that_cannot_be_is_refused_at_its_field(changes: dict[str, Any], field: str) -> None:
    before = CONDUCTOR.plain()
    with pytest.raises(InputError) as caught:
        recast_crystal(CONDUCTOR, give(CONDUCTOR, **changes))
    assert caught.value.field == field
    assert CONDUCTOR.plain() == before


def test_from_a_crystal_that_was_none_nothing_is_carried() -> None:
    # An imported document may hold a cell that its group refuses; mending it must be possible.
    data = CONDUCTOR.plain()
    data["crystal"]["group"] = "mmm"
    broken = read_document(data)
    mended, notices = recast_crystal(broken, give(broken, group="2/m"))
    assert notices == []
    assert mended == change_document(broken, {"crystal": mended.crystal})
    assert mended.crystal.group == "2/m"


def test_a_tensor_that_could_not_be_read_stays_as_it_is() -> None:
    data = CONDUCTOR.plain()
    data["properties"][0]["tensor"]["free"] = {"11": 1.0}
    data["properties"][0]["tensor"].pop("covariance")
    document = read_document(data)
    new, _ = recast_crystal(document, give(document, frame="x1=a x3=c*"))
    assert new.properties == document.properties


@pytest.mark.parametrize("family", ["monoclinic c", "hexagonal", "rhombohedral"])
def test_other_systems_turn_whole_too(family: str) -> None:
    group = {"monoclinic c": "112/m", "hexagonal": "-3m", "rhombohedral": "-3m"}[family]
    cell = list(CELLS[family])
    data = SHRINKER.plain()
    data["crystal"] = {"cell": cell, "group": "1"}
    data["readings"] = []
    data["properties"][0]["tensor"] = {"free": {"11": 3.0, "12": 0.4, "13": -0.2, "22": 2.0, "23": 0.7, "33": 1.0}}
    document, _ = recast_crystal(read_document(data), {"cell": cell, "group": group})
    for rule in RULES[::7]:
        new, notices = recast_crystal(document, give(document, frame=rule))
        assert notices == []
        np.testing.assert_allclose(find_tensor(new), find_tensor(document), atol=1e-9)
