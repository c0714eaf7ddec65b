"""What a part is cut for, as it is kept and as a direction: typed, off-cut, a principal axis, the front page's pose."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction, typeset_indices
from app.errors import InputError, located
from app.store.document import SampleDocument
from app.tensor.pose import AXIS_LETTERS, Pose, read_pose, resolve_direction
from app.tensor.principal import Principal
from app.tensor.sentence import place_direction
from app.web.kept import pose_of

FloatArray = npt.NDArray[np.float64]

WAYS: Final = {
    "direction": "a plane or a row",
    "offcut": "tilted off a plane or row",
    "principal": "a principal axis",
    "pose": "z of the front page",
    "vector": "a direction that was found",
}
DEFAULT_TARGET: Final = {"by": "direction", "direction": "(0 0 1)"}


@dataclass(frozen=True)
class Target:
    """Where the face of a part, or the length of a bar, shall point.

    Attributes:
        vector: unit vector, crystal frame.
        name: as it is printed, "n(001)" or "4° off n(001) toward [100]".
        place: where it is, by the nearest simple direction.
    """

    vector: FloatArray
    name: str
    place: str


def find_target(crystal: Crystal, principal: Principal, document: SampleDocument, target: Mapping[str, Any]) -> Target:
    """The direction of a kept target.

    Raises:
        InputError: at a field of the target, where it cannot be read or is not determined.
    """
    way = target.get("by", "direction")
    if way == "direction":
        with located("direction"):
            text = str(target.get("direction", ""))
            vector = crystal.resolve(read_direction(text))
        return _build(crystal, vector, _typeset(text), text)
    if way == "offcut":
        return _tilt(crystal, target)
    if way == "principal":
        return _take_principal(crystal, principal, target)
    if way == "pose":
        pose = pose_of(crystal, document.pose)
        letter = target.get("axis", "z")
        vector = pose.matrix[AXIS_LETTERS.index(letter) if letter in AXIS_LETTERS else 2]
        return _build(crystal, vector, f"{letter} of the front page", None)
    if way == "vector":
        with located("xyz"):
            vector = resolve_direction(crystal, target.get("xyz"), Pose(np.eye(3)))
        return _build(crystal, vector, str(target.get("name", "a direction that was found")), None)
    raise InputError(f"There is no way “{way}” to say what is cut for.", field="by", hint=f"Known: {', '.join(WAYS)}.")


def _build(crystal: Crystal, vector: FloatArray, name: str, named: str | None) -> Target:
    return Target(vector, name, place_direction(crystal, vector, named).text)


def _typeset(text: str) -> str:
    return typeset_indices(text) if text.strip()[:1] in ("[", "(") else text


def _tilt(crystal: Crystal, target: Mapping[str, Any]) -> Target:
    tilt = target.get("tilt")
    if not isinstance(tilt, int | float) or not np.isfinite(tilt):
        raise InputError("An off-cut needs its angle in degrees.", field="tilt", hint="Write a number, like 4.")
    start, toward = str(target.get("from", "")), str(target.get("toward", ""))
    pose = read_pose({"from": start, "tilt": float(tilt), "toward": toward}, crystal)
    name = f"{tilt:g}° off {_typeset(start)} toward {_typeset(toward)}"
    return _build(crystal, pose.matrix[2], name, None)


def _take_principal(crystal: Crystal, principal: Principal, target: Mapping[str, Any]) -> Target:
    number = target.get("axis", 1)
    if number not in (1, 2, 3):
        raise InputError("A principal axis is 1, 2 or 3.", field="axis")
    if principal.arbitrary[number - 1]:
        raise InputError(
            f"The principal axis p{number} is not determined: any direction in its plane is one, or any at all.",
            field="axis",
            hint="Name a plane or row, or take the axis that is determined.",
        )
    return _build(crystal, principal.axes[number - 1], f"principal axis p{number}", None)


def find_part_pose(crystal: Crystal, target: Target, edge: str) -> Pose:
    """The frame of a part: z along the target, x as near to the edge as it can be.

    Raises:
        InputError: at ``edge``: it cannot be read, or lies along the target.
    """
    with located("edge"):
        toward = crystal.resolve(read_direction(edge))
        if float(np.linalg.norm(np.cross(toward, target.vector))) < 1e-6:
            raise InputError(
                f"The reference edge {_typeset(edge)} lies along the face normal, so it leaves the turn about it open.",
                hint="Give another row or normal.",
            )
        return read_pose({"exact": ["z", target.vector.tolist()], "toward": ["x", toward.tolist()]}, crystal)
