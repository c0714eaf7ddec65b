"""One edit of a kept document: from a document and a change to the new document, or to the sentence that refuses it.

Pure: nothing is kept here. Every error has its field below the change's key, as the page names it.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from app.errors import InputError, located
from app.store.document import SampleDocument, change_document, current_property, read_document
from app.web.changes import Change
from app.web.kept import crystal_of, pose_of
from app.web.property_edits import edit_free, edit_property, edit_tensor
from app.web.recasting import recast_crystal


@dataclass(frozen=True)
class Edited:
    """A new document, and sentences about what the edit did beyond its letter."""

    document: SampleDocument
    notices: tuple[str, ...] = ()


def apply_change(document: SampleDocument, change: Change) -> Edited:
    """The document with one change.

    Raises:
        InputError: the change is refused; the field is its path below ``change``.
    """
    key = next(name for name in change.list_given() if name != "batches" or len(change.list_given()) == 1)
    return _EDITS[key](document, change)


def _edit_crystal(document: SampleDocument, change: Change) -> Edited:
    assert change.crystal is not None
    new, notices = recast_crystal(
        document, change.crystal.model_dump(exclude_none=True) | {"cell": change.crystal.cell}
    )
    return Edited(new, tuple(notices))


def _edit_free(document: SampleDocument, change: Change) -> Edited:
    return Edited(change_document(document, edit_free(document, change.free or {})))


def _edit_tensor(document: SampleDocument, change: Change) -> Edited:
    assert change.tensor is not None
    changes, notices = edit_tensor(document, change.tensor)
    return Edited(change_document(document, changes), tuple(notices))


def _edit_property(document: SampleDocument, change: Change) -> Edited:
    assert change.property is not None
    changes, notices = edit_property(document, change.property)
    return Edited(change_document(document, changes), tuple(notices))


def _plain_pose(pose: Any) -> dict[str, Any]:
    dumped: dict[str, Any] = pose.model_dump(by_alias=True, exclude_none=True)
    return dumped


def _edit_pose(document: SampleDocument, change: Change) -> Edited:
    pose = _plain_pose(change.pose)
    pose_of(crystal_of(document.crystal), pose)
    return Edited(change_document(document, {"pose": pose}))


def _edit_poses(document: SampleDocument, change: Change) -> Edited:
    crystal = crystal_of(document.crystal)
    named = {entry.name: entry.plain() for entry in document.poses}
    for name, given in (change.poses or {}).items():
        if given is None:
            if named.pop(name, None) is None:
                raise InputError(f"There is no pose “{name}”.", field=f"poses.{name}", hint="It may be gone already.")
            continue
        pose = _plain_pose(given)
        with located(f"poses.{name}"):
            pose_of(crystal, pose)
        named[name] = {"name": name, "pose": pose}
    return Edited(change_document(document, {"poses": list(named.values())}))


def _edit_part(document: SampleDocument, change: Change) -> Edited:
    for index, length in enumerate(change.part or []):
        if not 0 < length <= 1e5:
            raise InputError(
                "A side of the block is a length above 0 mm.",
                field=f"part[{index}]",
                hint="Give millimetres along x, y and z.",
            )
    return Edited(change_document(document, {"part": change.part}))


def _edit_readings(document: SampleDocument, change: Change) -> Edited:
    """Replace the readings of the current property and of every property that the given ones name."""
    current = current_property(document)
    changes: dict[str, Any] = {}
    if change.readings is not None:
        given = [{**({"property": current.id} if current else {}), **reading} for reading in change.readings]
        replaced = {reading.get("property") for reading in given} | ({current.id} if current else set())
        kept = [reading.plain() for reading in document.readings if reading.property not in replaced]
        # Faults are told by the place in the list that was sent, so that one is read first.
        read_document({**document.plain(), "readings": given})
        changes["readings"] = [*kept, *given]
    if change.batches is not None:
        changes["batches"] = change.batches
    return Edited(change_document(document, changes))


def _edit_name(document: SampleDocument, change: Change) -> Edited:
    name = (change.name or "").strip()
    if not name:
        raise InputError("A sample needs a name.", field="name", hint="Type one; it may be changed at any time.")
    return Edited(change_document(document, {"name": name}))


def _edit_notes(document: SampleDocument, change: Change) -> Edited:
    return Edited(change_document(document, {"notes": change.notes}))


def _edit_looking(document: SampleDocument, change: Change) -> Edited:
    return Edited(change_document(document, {"looking": {**document.plain()["looking"], **(change.looking or {})}}))


_EDITS: dict[str, Callable[[SampleDocument, Change], Edited]] = {
    "crystal": _edit_crystal,
    "free": _edit_free,
    "tensor": _edit_tensor,
    "property": _edit_property,
    "pose": _edit_pose,
    "poses": _edit_poses,
    "part": _edit_part,
    "readings": _edit_readings,
    "batches": _edit_readings,
    "name": _edit_name,
    "notes": _edit_notes,
    "looking": _edit_looking,
}
