"""A corrected crystal under a kept sample: its tensors, poses and plain vectors are carried over, and nothing is lost
in silence."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import HalfturnError, InputError
from app.store.document import KeptCrystal, KeptProperty, SampleDocument, change_document, read_document
from app.tensor.carrying import carry_tensor, find_frame_turn
from app.web.kept import crystal_for, crystal_of, entry_of, pose_of, tensor_of

FloatArray = npt.NDArray[np.float64]


def recast_crystal(document: SampleDocument, given: dict[str, Any]) -> tuple[SampleDocument, list[str]]:
    """The document with another crystal.

    Where only the frame rule changes, everything that is written in the old frame is turned into the new one. Where
    cell or group change, tensors keep their cells and are made to obey.

    Returns:
        the new document, and sentences that say what was removed or is no longer known.

    Raises:
        InputError: the new crystal is refused; the field is below ``crystal``.
    """
    checked = change_document(document, {"crystal": given}).crystal
    new = crystal_of(checked)
    notices: list[str] = []
    try:
        old = crystal_of(document.crystal)
    except HalfturnError:
        # What stood there before was no crystal, so there is nothing to carry over.
        return change_document(document, {"crystal": checked}), notices
    turn = find_frame_turn(old, new)
    turned = not np.allclose(turn, np.eye(3), atol=1e-12)
    changes: dict[str, Any] = {
        "crystal": checked.plain(),
        "properties": [
            _recast_property(kept, (old, document.crystal), (new, checked), turn, notices)
            for kept in document.properties
        ],
        "pose": _recast_pose(document.pose, old, new, turn if turned else None, "The pose", notices),
        "poses": [
            {
                **named.plain(),
                "pose": _recast_pose(
                    named.pose, old, new, turn if turned else None, f"The pose “{named.name}”", notices
                ),
            }
            for named in document.poses
        ],
    }
    if turned:
        changes["readings"] = [_turn_reading(reading.plain(), old, turn) for reading in document.readings]
    return read_document({**document.plain(), **changes}), notices


def _recast_property(
    kept: KeptProperty,
    old: tuple[Crystal, KeptCrystal],
    new: tuple[Crystal, KeptCrystal],
    turn: FloatArray,
    notices: list[str],
) -> dict[str, Any]:
    entry = entry_of(kept)
    data = kept.plain()
    try:
        tensor = tensor_of(crystal_for(old[0], old[1], entry), kept)
    except HalfturnError:
        return data
    carried = carry_tensor(tensor, turn, crystal_for(new[0], new[1], entry))
    if carried.removed:
        notices.append(
            f"{kept.name}: {_percent(carried.removed)} of the tensor was removed, because the group "
            f"{new[0].group.symbol} forbids it. Undo brings it back."
        )
    if carried.freed:
        notices.append(
            f"{kept.name}: nothing is known of the uncertainty of {', '.join(carried.freed)}, so no σ is shown. "
            "Type it, or fit the readings again."
        )
    body = {**data["tensor"], "free": dict(zip(carried.labels, carried.free.tolist(), strict=True))}
    body.pop("covariance", None)
    if carried.covariance is not None:
        body["covariance"] = carried.covariance.tolist()
    return {**data, "tensor": body}


def _percent(part: float) -> str:
    return f"{100 * part:.2g} %" if part >= 1e-4 else "less than 0.01 %"


def _recast_pose(given: Any, old: Crystal, new: Crystal, turn: FloatArray | None, name: str, notices: list[str]) -> Any:
    """A pose that names rows and normals stays as it is; one that is written in the old frame is turned with it."""
    by_indices = _only_indices(given)
    if turn is None or by_indices:
        try:
            pose_of(new, given)
        except InputError:
            by_indices = False
        else:
            return given
    try:
        matrix = pose_of(old, given).matrix
    except InputError:
        return given
    if turn is None:
        notices.append(f"{name} cannot be written by indices of the new crystal and is kept as a matrix.")
        return {"matrix": matrix.tolist()}
    # Specimen axes are rows: v_new = turn v_old makes each row x into turn x, so C_new = C turnᵀ.
    return {"matrix": (matrix @ turn.T).tolist()}


def _only_indices(given: Any) -> bool:
    if "exact" in given:
        return isinstance(given["exact"][1], str) and isinstance(given["toward"][1], str)
    if "from" in given:
        return all(isinstance(given[key], str) for key in ("from", "toward", "x") if given.get(key) is not None)
    return False


def _turn_reading(reading: dict[str, Any], old: Crystal, turn: FloatArray) -> dict[str, Any]:
    for name in ("direction", "second"):
        vector = reading.get(name)
        if isinstance(vector, dict) and "xyz" in vector:
            reading[name] = {"xyz": (turn @ np.array(vector["xyz"], dtype=np.float64)).tolist()}
        elif isinstance(vector, list):
            reading[name] = (turn @ np.array(vector, dtype=np.float64)).tolist()
    if reading.get("pose") is not None and not _only_indices(reading["pose"]):
        reading["pose"] = {"matrix": (pose_of(old, reading["pose"]).matrix @ turn.T).tolist()}
    return reading
