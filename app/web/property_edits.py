"""Edits of the properties of a kept sample: values, whole tensors, kind and unit."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from app.catalogue.listing import find_property as find_entry
from app.catalogue.units import check_unit, convert_unit, find_factor
from app.crystal.crystal import Crystal
from app.errors import InputError, located
from app.store.document import (
    KeptProperty,
    SampleDocument,
    current_property,
    find_property,
    readings_of,
)
from app.tensor.form import build_form
from app.tensor.kind import LABELS, build_kind
from app.tensor.lock import explain_cells
from app.tensor.printing import parse_value
from app.tensor.tensor import build_tensor
from app.web.changes import PropertyChange, TensorChange
from app.web.kept import crystal_for, crystal_of, entry_of, kind_of, print_own_unit, tensor_of

Properties = list[dict[str, Any]]


def require_current(document: SampleDocument) -> KeptProperty:
    """The property that is looked at. Raises InputError where the sample has none."""
    kept = current_property(document)
    if kept is None:
        raise InputError(
            "The sample has no property yet.", field="property", hint="Choose one from the list of properties first."
        )
    return kept


def replace_property(document: SampleDocument, changed: dict[str, Any]) -> Properties:
    """The properties with one of them, told by its id, replaced."""
    return [changed if kept.id == changed["id"] else kept.plain() for kept in document.properties]


def edit_free(document: SampleDocument, given: Mapping[str, float | str]) -> dict[str, Any]:
    """The changes that give free cells of the current property new values, and σ where one is typed.

    Raises InputError for a locked cell, with the reason; for what is no number; where the whole would be no covariance.
    """
    kept = require_current(document)
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry_of(kept))
    tensor = tensor_of(crystal, kept)
    labels = tensor.form.labels
    values, covariance = tensor.free.copy(), tensor.free_covariance
    for label, typed in given.items():
        field = f"free.{label}"
        if label not in labels:
            raise InputError(_why_locked(crystal, kept, label), field=field, hint=_hint_locked(labels))
        with located(field):
            value, sigma = parse_value(typed) if isinstance(typed, str) else (float(typed), None)
        position = labels.index(label)
        values[position] = value
        if sigma is None:
            continue
        if covariance is None:
            covariance = np.zeros((len(labels), len(labels)))
        covariance = covariance.copy()
        before = float(np.sqrt(covariance[position, position]))
        # Its correlations stay, so that the whole stays a covariance.
        scale = sigma / before if before else 0.0
        covariance[position, :] *= scale
        covariance[:, position] *= scale
        covariance[position, position] = sigma**2
    checked = build_tensor(
        crystal, kind_of(kept), free=dict(zip(labels, values.tolist(), strict=True)), covariance=covariance
    )
    return {"properties": replace_property(document, _with_tensor(kept, labels, checked.free, covariance))}


def _why_locked(crystal: Crystal, kept: KeptProperty, label: str) -> str:
    if label not in LABELS:
        return f"There is no cell {label}."
    locks = explain_cells(crystal, build_form(crystal, kind_of(kept)))
    return f"The cell {label} is locked, {locks[LABELS.index(label)].because}."


def _hint_locked(labels: list[str]) -> str:
    return f"Free to change: {', '.join(labels)}." if labels else "In this crystal every cell of this property is zero."


def _with_tensor(kept: KeptProperty, labels: list[str], values: Any, covariance: Any) -> dict[str, Any]:
    data = kept.plain()
    body = {**data["tensor"], "free": dict(zip(labels, np.asarray(values).tolist(), strict=True))}
    body.pop("covariance", None)
    if covariance is not None:
        body["covariance"] = np.asarray(covariance).tolist()
    return {**data, "tensor": body}


def edit_tensor(document: SampleDocument, given: TensorChange) -> tuple[dict[str, Any], list[str]]:
    """The changes that put another tensor in place of the current property's, and what had to be removed of it."""
    kept = require_current(document)
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry_of(kept))
    with located("tensor"):
        tensor = build_tensor(crystal, kind_of(kept), matrix=given.matrix, free=given.free, covariance=given.covariance)
        factor = 1.0 if given.unit is None else _find_factor(given.unit, kept.unit)
    covariance = None if tensor.free_covariance is None else tensor.free_covariance * factor**2
    changed = _with_tensor(kept, tensor.form.labels, tensor.free * factor, covariance)
    if given.source is not None:
        changed["source"] = given.source
    notices = []
    if tensor.misfit > 1e-9:
        notices.append(
            f"{100 * tensor.misfit:.2g} % of the tensor was removed to make it obey the group {crystal.group.symbol}."
        )
    return {"properties": replace_property(document, changed)}, notices


def edit_property(document: SampleDocument, given: PropertyChange) -> tuple[dict[str, Any], list[str]]:
    """The changes that choose, add, change or take out a property.

    An id alone chooses. An id with more changes that property. A kind without an id chooses the sample's property of
    that kind, or adds one. A unit converts values and σ.

    Returns:
        changes of the document, and sentences about what did not follow by itself.
    """
    with located("property"):
        if given.remove:
            return _remove(document, given), []
        if given.id is not None:
            kept: KeptProperty | None = find_property(document, given.id)
        elif given.kind is not None:
            current = current_property(document)
            same = [entry for entry in document.properties if entry.kind == given.kind]
            kept = current if current is not None and current.kind == given.kind else (same[0] if same else None)
        else:
            kept = require_current(document)
        if kept is None:
            return _add(document, given)
        notices: list[str] = []
        changed, old_unit = _change(document, kept, given, notices)
        changes: dict[str, Any] = {"properties": replace_property(document, changed), **_look_at(document, kept.id)}
        if changed["unit"] != old_unit:
            # Readings state the unit in which they were taken; those that did not are now told.
            changes["readings"] = [
                {**({"unit": old_unit} if reading.property == kept.id else {}), **reading.plain()}
                for reading in document.readings
            ]
        return changes, notices


def _look_at(document: SampleDocument, property_id: str) -> dict[str, Any]:
    return {"looking": {**document.plain()["looking"], "property": property_id}}


def _remove(document: SampleDocument, given: PropertyChange) -> dict[str, Any]:
    if given.id is None:
        raise InputError("Which property is to be taken out?", field="id", hint="Give its id.")
    gone = find_property(document, given.id)
    return {
        "properties": [kept.plain() for kept in document.properties if kept.id != gone.id],
        "readings": [reading.plain() for reading in document.readings if reading.property != gone.id],
    }


def _change(
    document: SampleDocument, kept: KeptProperty, given: PropertyChange, notices: list[str]
) -> tuple[dict[str, Any], str]:
    data = kept.plain()
    entry = find_entry(given.kind) if given.kind is not None else entry_of(kept)
    if given.kind is not None and entry.key != kept.kind:
        if readings_of(document, kept.id):
            raise InputError(
                f"{kept.name} has readings, which are of its kind.",
                field="kind",
                hint="Add the other property beside it, without naming an id.",
            )
        data |= {"kind": entry.key, "symbol": entry.symbol, "name": given.name or _capital(entry.name)}
    if given.name is not None:
        data["name"] = given.name
    if given.symbol is not None:
        data["symbol"] = given.symbol
    if given.temperature is not None:
        data["conditions"] = {**data.get("conditions", {}), "temperature": given.temperature}
    unit = given.unit
    if unit is None and data["kind"] != kept.kind:
        unit = entry.unit.text
    if unit is not None and unit != kept.unit:
        check_unit(entry.key, unit)
        data["unit"] = unit
        data["tensor"] = _convert(kept, unit, notices)
    parity, intrinsic = _nature(entry.key, given, data["tensor"])
    if (parity, intrinsic) != (kept.tensor.parity, kept.tensor.intrinsic):
        data["tensor"] = _reshape(document, kept, data, entry.key, parity, intrinsic, notices)
    return data, kept.unit


def _convert(kept: KeptProperty, unit: str, notices: list[str]) -> dict[str, Any]:
    body = kept.tensor.plain()
    try:
        find_factor(kept.unit, unit)
    except InputError:
        notices.append(f"The numbers stay as they are: {kept.unit} cannot be converted to {unit}.")
        return body
    body["free"] = {label: float(convert_unit(value, kept.unit, unit)) for label, value in body["free"].items()}
    if "covariance" in body:
        once = convert_unit(np.array(body["covariance"], dtype=np.float64), kept.unit, unit)
        body["covariance"] = np.asarray(convert_unit(once, kept.unit, unit)).tolist()
    return body


def _nature(kind: str, given: PropertyChange, body: Mapping[str, Any]) -> tuple[str, str]:
    entry = find_entry(kind)
    if not entry.own_unit:
        for name in ("parity", "intrinsic"):
            stated = getattr(given, name)
            if stated is not None and stated != getattr(entry, name):
                raise InputError(
                    f"{_capital(entry.name)} is {getattr(entry, name)} by itself.",
                    field=name,
                    hint="Choose the property “other, my own unit” to state it yourself.",
                )
        return entry.parity, entry.intrinsic
    return given.parity or body["parity"], given.intrinsic or body["intrinsic"]


def _reshape(
    document: SampleDocument,
    kept: KeptProperty,
    data: dict[str, Any],
    key: str,
    parity: str,
    intrinsic: str,
    notices: list[str],
) -> dict[str, Any]:
    crystal = crystal_of(document.crystal)
    before = tensor_of(crystal_for(crystal, document.crystal, entry_of(kept)), kept)
    scale = 1.0 if not before.free.size or not kept.tensor.free else _scale_of(kept, data["tensor"])
    after = build_tensor(
        crystal_for(crystal, document.crystal, find_entry(key)),
        build_kind(parity, intrinsic),
        matrix=before.estimate.matrix * scale,
    )
    if after.misfit > 1e-9:
        notices.append(f"{100 * after.misfit:.2g} % of the tensor was removed, because the new kind forbids it.")
    if "covariance" in data["tensor"]:
        notices.append("The uncertainties are left out, because the cells are no longer the same.")
    free = dict(zip(after.form.labels, after.free.tolist(), strict=True))
    return {"parity": parity, "intrinsic": intrinsic, "free": free}


def _scale_of(kept: KeptProperty, body: Mapping[str, Any]) -> float:
    label = max(kept.tensor.free, key=lambda name: abs(kept.tensor.free[name]))
    return body["free"][label] / kept.tensor.free[label] if kept.tensor.free[label] else 1.0


def _add(document: SampleDocument, given: PropertyChange) -> tuple[dict[str, Any], list[str]]:
    entry = find_entry(given.kind or "other")
    unit = given.unit or entry.unit.text
    check_unit(entry.key, unit)
    parity, intrinsic = _nature(entry.key, given, {"parity": entry.parity, "intrinsic": entry.intrinsic})
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry)
    tensor = build_tensor(crystal, build_kind(parity, intrinsic), matrix=np.eye(3))
    taken = {kept.id for kept in document.properties}
    names = [entry.key, *(f"{entry.key}-{number}" for number in range(2, len(taken) + 3))]
    added = {
        "id": next(name for name in names if name not in taken),
        "name": given.name or ("Own property" if entry.own_unit else _capital(entry.name)),
        "kind": entry.key,
        "symbol": given.symbol or entry.symbol,
        "unit": unit,
        "tensor": {
            "parity": parity,
            "intrinsic": intrinsic,
            "free": dict(zip(tensor.form.labels, (tensor.free + 0.0).tolist(), strict=True)),
        },
    }
    if given.temperature is not None:
        added["conditions"] = {"temperature": given.temperature}
    notice = (
        f"{added['name']} starts at {_one(unit)} in every direction. Type its values, or fit readings."
        if np.any(tensor.free)
        else f"{added['name']} has no values yet: type them."
        if tensor.form.count
        else f"In the group {crystal.group.symbol} every cell of {entry.name} is zero."
    )
    changes = {"properties": [*(kept.plain() for kept in document.properties), added]}
    return {**changes, **_look_at(document, str(added["id"]))}, [notice]


def _find_factor(source: str, target: str) -> float:
    with located(""):
        return find_factor(source, target)


def _one(unit: str) -> str:
    printed = print_own_unit(unit)
    return "1" if printed == "1" else f"1 {printed}"


def _capital(name: str) -> str:
    return name[:1].upper() + name[1:]
