"""The panel of sections on the front page: asked for while it is unfolded, for the pose on the screen."""

from __future__ import annotations

import math
from typing import Annotated

import numpy as np
import numpy.typing as npt
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, read_direction, typeset_indices
from app.crystal.lattice import compute_directions, list_indices
from app.errors import InputError, located
from app.tensor.pose import AXIS_LETTERS, Pose, read_pose, resolve_direction
from app.tensor.section import SMALLEST_IN_PLANE, cut_tensor
from app.web import parts, responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Typed
from app.web.kept import pose_of
from app.web.live import subjects
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.samples import store_of
from app.web.section_view import HIGHEST_ROW, IN_PLANE, describe_section

FloatArray = npt.NDArray[np.float64]

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class SectionRequest(Part):
    """The plane and the point in it; what is left out has its usual value."""

    normal: Typed | None = Field(
        None, description="normal of the plane: (h k l), [u v w], or x, y or z of the specimen; default z"
    )
    zero: Typed | None = Field(
        None, description="direction whose part in the plane is at 0°; default x of the specimen, else a row in it"
    )
    angle: Number = Field(0.0, ge=-720, le=720, description="of the point, degrees, right-handed about the normal")
    toward: Annotated[list[Number], Field(min_length=3, max_length=3)] | None = Field(
        None, description="vector in the crystal frame; the point is where its part in the plane lies, not at ``angle``"
    )
    pose: parts.Pose | None = Field(None, description="the pose on the screen; default the kept one")
    at: Number | None = Field(None, description="value of the variable of its series; null is the tensor as kept")


@router.post("/{sample_id}/section", summary="The value in a plane, as a polar curve and as a Mohr circle")
def section(sample_id: str, given: SectionRequest, request: Request) -> JsonAnswer:
    """``polar`` and ``mohr`` as SVG, the numbers beside them as text, and all of it as a piece of the page."""
    document = store_of(request).samples.get(sample_id).document
    subject = subjects.take(document, given.at)
    crystal = subject.crystal
    if given.pose is None:
        pose = pose_of(crystal, document.pose)
    else:
        with located("pose"):
            pose = read_pose(given.pose.model_dump(by_alias=True, exclude_none=True), crystal)
    normal, normal_name = _resolve(crystal, pose, given.normal or "z", "normal")
    zero, zero_name = (
        _resolve(crystal, pose, given.zero, "zero") if given.zero else _choose_zero(crystal, pose, normal, given.normal)
    )
    cut = cut_tensor(subject.tensor.estimate, normal, zero)
    angle = math.radians(given.angle)
    if given.toward is not None:
        vector = np.array(given.toward) / (float(np.max(np.abs(given.toward))) or 1.0)
        angle = (cut.measure_angle(vector) if np.any(vector) else None) or 0.0
    content = describe_section(crystal, cut, subject.unit, (normal_name, zero_name), angle)
    return JsonAnswer({**content, "result": templates.get_template("section_result.html").render(content)})


def _resolve(crystal: Crystal, pose: Pose, text: str, field: str) -> tuple[FloatArray, str]:
    """A direction typed as indices or as a letter of the specimen: unit vector and printed name."""
    plain = text.strip()
    if plain in AXIS_LETTERS:
        return pose.matrix[AXIS_LETTERS.index(plain)], plain
    with located(field):
        return resolve_direction(crystal, read_direction(plain), pose), typeset_indices(plain)


def _choose_zero(crystal: Crystal, pose: Pose, normal: FloatArray, typed: str | None) -> tuple[FloatArray, str]:
    """Where angles begin when nothing is typed: x in a plane of the specimen, else the simplest row in the plane."""
    if typed is not None and typed.strip() not in AXIS_LETTERS and crystal.M is not None:
        indices = list_indices(HIGHEST_ROW)
        vectors = compute_directions(crystal, "row", indices)
        inside = np.flatnonzero(np.abs(vectors @ normal) <= IN_PLANE)
        if len(inside):
            row = int(inside[0])
            return vectors[row], typeset_indices(format_indices("row", indices[row].tolist()))
    for axis, letter in enumerate(AXIS_LETTERS):
        if np.linalg.norm(np.cross(pose.matrix[axis], normal)) > max(0.3, SMALLEST_IN_PLANE):
            return pose.matrix[axis], letter
    raise InputError("No direction lies in that plane.", field="normal")  # pragma: no cover
