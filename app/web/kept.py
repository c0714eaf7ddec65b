"""From a kept document to the objects of the packages below, and everything that a page derives from it."""

from __future__ import annotations

from typing import Any

from app.catalogue.listing import find_property as find_entry
from app.catalogue.property import Property, Unit
from app.catalogue.units import print_unit
from app.crystal.cell_locks import explain_cell_locks, list_cell_locks
from app.crystal.crystal import Crystal, build_crystal
from app.errors import HalfturnError, InputError, located
from app.store.canonical import plain
from app.store.document import KeptCrystal, KeptProperty, SampleDocument, current_property
from app.store.revisions import Kept
from app.tensor.form import build_form
from app.tensor.kind import Kind, build_kind
from app.tensor.pose import IDENTITY, Pose, read_pose
from app.tensor.tensor import PropertyTensor, build_tensor
from app.web.drawing import draw_frame
from app.web.rendering import render_form, render_frame, render_state

ALONE_KIND = "1"
"""The group that locks nothing: a field tensor does not obey the crystal's symmetry."""


def crystal_of(kept: KeptCrystal) -> Crystal:
    """The crystal of a document. Raises InputError at a field below ``crystal``."""
    with located("crystal"):
        return build_crystal(
            kept.cell, kept.group, unique_axis=kept.unique_axis, frame=kept.frame, cell_sigma=kept.cell_sigma
        )


def crystal_for(crystal: Crystal, kept: KeptCrystal, entry: Property) -> Crystal:
    """The crystal whose symmetry a property obeys: of a field tensor, one of the same frame whose group is 1."""
    if not entry.is_field:
        return crystal
    if kept.cell is None:
        return build_crystal([1, 1, 1, 90, 90, 90], ALONE_KIND)
    return build_crystal(kept.cell, ALONE_KIND, frame=kept.frame)


def kind_of(kept: KeptProperty) -> Kind:
    """Parity and inner symmetry of a kept property."""
    return build_kind(kept.tensor.parity, kept.tensor.intrinsic)


def tensor_of(crystal: Crystal, kept: KeptProperty) -> PropertyTensor:
    """The tensor of a kept property in a crystal (of a field, the one of ``crystal_for``)."""
    with located("tensor"):
        return build_tensor(crystal, kind_of(kept), free=kept.tensor.free, covariance=kept.tensor.covariance)


def pose_of(crystal: Crystal, given: Any) -> Pose:
    """The pose of a document. Raises InputError at a field below ``pose``."""
    with located("pose"):
        return read_pose(plain(given), crystal)


def entry_of(kept: KeptProperty) -> Property:
    """The catalogue's entry of a kept property; a kind that this version does not know is taken as ``other``."""
    try:
        return find_entry(kept.kind)
    except InputError:
        return find_entry("other")


def print_own_unit(text: str) -> str:
    """The printed form of a unit; a unit that cannot be read is printed as it stands."""
    try:
        return print_unit(text)
    except InputError:
        return text


def render_unit(unit: Unit) -> dict[str, str]:
    """A unit as typed and as printed."""
    return {"text": unit.text, "printed": unit.printed}


def render_entry(entry: Property) -> dict[str, Any]:
    """One entry of the catalogue."""
    return {
        "key": entry.key,
        "name": entry.name,
        "symbol": entry.symbol,
        "unit": render_unit(entry.unit),
        "units": [render_unit(unit) for unit in entry.units],
        "parity": entry.parity,
        "intrinsic": entry.intrinsic,
        "sign_limit": {
            "rule": entry.sign_limit.rule,
            "sentence": entry.sign_limit.sentence,
            "when": entry.sign_limit.when,
        },
        "inverse": entry.inverse,
        "is_field": entry.is_field,
        "own_unit": entry.own_unit,
        "plate": entry.plate,
        "long_bar": entry.long_bar,
        "four_corner": entry.four_corner,
        "note": entry.note,
    }


def render_crystal(crystal: Crystal) -> dict[str, Any]:
    """What the strip shows of a crystal."""
    return {
        "frame": render_frame(crystal),
        "operations": crystal.operation_names,
        "rotations": crystal.rotations.tolist(),
        "symbol": crystal.group.symbol,
        "unique_axis": crystal.group.unique_axis,
        "order": crystal.group.order,
        "limiting": crystal.group.limiting,
        "cell": None if crystal.cell is None else crystal.cell.parameters.tolist(),
        "cell_locks": [
            {"name": lock.name, "symbol": lock.symbol, "state": lock.state, "equals": lock.equals, "value": lock.value}
            for lock in list_cell_locks(crystal)
        ],
        "cell_sentence": explain_cell_locks(crystal),
        "rule": None if crystal.frame is None else crystal.frame.text,
        "drawing": draw_frame(crystal),
    }


def derive(document: SampleDocument) -> dict[str, Any]:
    """Everything that a page shows beside the document; what cannot be derived is None and has its problem.

    ``problems`` are {message, field, hint}: of an imported document, or of uncertainties that are only partly known.
    """
    derived: dict[str, Any] = {"crystal": None, "form": None, "state": None, "property": None, "problems": []}
    problems: list[dict[str, Any]] = derived["problems"]
    kept = current_property(document)
    if kept is not None:
        derived["property"] = {
            **render_entry(entry_of(kept)),
            "id": kept.id,
            "unit_text": kept.unit,
            "unit_printed": print_own_unit(kept.unit),
        }
    try:
        crystal = crystal_of(document.crystal)
        derived["crystal"] = render_crystal(crystal)
        pose = IDENTITY
        try:
            pose = pose_of(crystal, document.pose)
        except HalfturnError as error:
            problems.append(_problem(error))
        if kept is not None:
            of_property = crystal_for(crystal, document.crystal, entry_of(kept))
            derived["form"] = render_form(of_property, build_form(of_property, kind_of(kept)), pose)
            derived["state"] = render_state(of_property, tensor_of(of_property, kept), pose)
            problems += _doubts(kept)
    except HalfturnError as error:
        problems.append(_problem(error))
    return derived


def _doubts(kept: KeptProperty) -> list[dict[str, Any]]:
    covariance = kept.tensor.covariance
    if covariance is None:
        return []
    unknown = [label for index, label in enumerate(sorted(kept.tensor.free)) if covariance[index][index] == 0]
    if not unknown:
        return []
    return [
        {
            "message": f"No uncertainty is given for {', '.join(unknown)}: taken as exact.",
            "field": f"free.{unknown[0]}",
            "hint": "Type it with the value, like 15.92(9).",
        }
    ]


def _problem(error: HalfturnError) -> dict[str, Any]:
    return {"message": error.message, "field": error.field, "hint": error.hint}


def render_sample(kept: Kept, notices: list[str] | None = None) -> dict[str, Any]:
    """The answer of every call that returns a sample. ``notices`` are sentences about what the call did beyond its
    letter, such as cells that a new group locks."""
    return {
        "id": kept.sample_id,
        "revision": kept.revision,
        "hash": kept.hash,
        "saved_at": kept.time,
        "current": kept.current,
        "can_undo": kept.can_undo,
        "can_redo": kept.can_redo,
        "archived": kept.archived,
        "document": kept.document.plain(),
        "derived": derive(kept.document),
        "notices": notices or [],
    }
