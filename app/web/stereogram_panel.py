"""The stereogram on the front page: asked for while it is unfolded, for the pose on the screen."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, Any, Final, Literal

import numpy as np
import numpy.typing as npt
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.direction import typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import HalfturnError, InputError, located
from app.readings.campaign import build_plan, plan_campaign
from app.readings.candidates import list_candidates
from app.store.document import SampleDocument, current_property
from app.tensor.pose import AXIS_LETTERS, Pose, read_pose
from app.tensor.printing import print_value
from app.tensor.sentence import print_angle
from app.tensor.values import compute_values
from app.web import parts, responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of
from app.web.kept_readings import fit_document
from app.web.live import subjects
from app.web.pages import templates
from app.web.parts import Number
from app.web.readings_picture import list_taken
from app.web.samples import store_of
from app.web.scene import Subject
from app.web.stereogram import Mark, Picture, Trace, draw_stereogram
from app.web.stereogram_frame import Frame, FramePart, Place, find_frame, find_place
from app.web.stereogram_view import (
    list_directions,
    list_poles,
    list_principal,
    list_specimen,
    trace_levels,
    trace_regions,
)
from app.web.stereogram_words import describe_disc, list_marked
from app.web.turning import roll_ball

FloatArray = npt.NDArray[np.float64]
Layer = Literal[
    "normals", "rows", "symmetry", "values", "principal", "regions", "specimen", "taken", "proposed", "answer"
]

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

NEAR: Final = 4.0
"""Degrees within which a row, a normal or a principal axis is offered for a place that was pointed at."""
SIDES: Final = {"both": "both hemispheres", "near": "near hemisphere", "far": "far hemisphere"}
PROPOSED: Final = 3
PROPOSED_INDEX: Final = 2


class StereogramRequest(FramePart):
    """What is drawn, and the place that is asked about."""

    discs: Literal["one", "two"] = Field("one", description="both hemispheres in one disc, or side by side")
    layers: Annotated[list[Layer], Field(max_length=10)] = Field(
        ["normals", "symmetry", "values", "principal", "regions", "specimen"], description="what is marked"
    )
    max_index: int = Field(1, ge=1, le=3, description="the largest index of the poles that are marked")
    pose: parts.Pose | None = Field(None, description="the pose on the screen; default the kept one")
    at: Number | None = Field(None, description="value of the variable of its series; null is the tensor as kept")
    place: Place | None = Field(None, description="right and up in the disc, rim at 1: what is there is told")
    far: bool = Field(False, description="whether that place is on the far hemisphere")
    cursor: Annotated[list[Number], Field(min_length=3, max_length=3)] | None = Field(
        None, description="vector in the crystal frame: what is there is told, unless a place is given"
    )
    steps: Place | None = Field(None, description="degrees right and up by which the cursor moves first")


@router.post("/{sample_id}/stereogram", summary="The stereogram of a sample's tensor, and what is at a place in it")
def stereogram(sample_id: str, given: StereogramRequest, request: Request) -> JsonAnswer:
    """``result`` is a piece of the page with one or two SVGs, ``words`` says how it lies, ``marked`` lists it.

    ``told`` is None, or what is at the place: ``direction`` (unit vector, crystal frame), ``off`` and names of the
    nearest row and normal, ``value``, and ``offers``, each with a pose for every specimen axis that could be put there.
    """
    document = store_of(request).samples.get(sample_id).document
    subject = subjects.take(document, given.at)
    if given.pose is None:
        pose = pose_of(subject.crystal, document.pose)
    else:
        with located("pose"):
            pose = read_pose(given.pose.model_dump(by_alias=True, exclude_none=True), subject.crystal)
    frame = find_frame(subject.crystal, pose.matrix, given.centre)
    cursor = _find_cursor(frame, given)
    picture, notes = gather(subject, document, pose, given.layers, given.max_index)
    marks = list(picture.marks)
    if cursor is not None:
        marks.append(Mark(cursor, "cursor"))
    words = describe_disc(frame, given.projection, given.discs)
    sides: tuple[Literal["both", "near", "far"], ...] = ("both",) if given.discs == "one" else ("near", "far")
    drawings = [
        draw_stereogram(
            subject.crystal,
            Picture(marks, picture.traces),
            screen=frame.screen,
            projection=given.projection,
            elements="symmetry" in given.layers,
            title=f"Stereogram, {SIDES[side]}",
            side=side,
            numbered=True,
        )
        for side in sides
    ]
    marked = list_marked(subject, picture, frame, "symmetry" in given.layers)
    content = {"drawings": list(zip(sides, drawings, strict=True)), "words": words, "marked": marked, "notes": notes}
    pieces = {key: templates.get_template(f"stereogram_{key}.html").render(content) for key in ("result", "words")}
    return JsonAnswer(
        {
            "words": words,
            "words_piece": pieces["words"],
            "marked": marked,
            "notes": notes,
            "held": frame.held,
            "told": None if cursor is None else tell_place(subject, pose.matrix, cursor),
            "result": pieces["result"],
        }
    )


def _find_cursor(frame: Frame, given: StereogramRequest) -> FloatArray | None:
    if given.place is not None:
        return find_place(frame, given.projection, given.place, given.far)
    if given.cursor is None and given.steps is None:
        return None
    direction = frame.screen[2]
    if given.cursor is not None:
        largest = max(abs(part) for part in given.cursor)
        if largest == 0.0:
            raise InputError("The cursor cannot be on the zero vector.", field="cursor")
        direction = np.array(given.cursor) / largest
        direction = direction / np.linalg.norm(direction)
    if given.steps is not None:
        right, up = (float(np.deg2rad(part % 360.0)) for part in given.steps)
        direction = frame.screen.T @ (roll_ball(right, up) @ (frame.screen @ direction))
    return np.asarray(direction / np.linalg.norm(direction))


def gather(
    subject: Subject, document: SampleDocument, pose: Pose, layers: list[Layer], max_index: int
) -> tuple[Picture, list[str]]:
    """Marks and traces of the layers, and sentences that say why one has nothing."""
    marks: list[Mark] = []
    traces: list[Trace] = []
    notes: list[str] = []
    if "values" in layers:
        levels = trace_levels(subject.tensor.estimate.matrix)
        if not levels:
            notes.append("The value is the same along every direction: there are no lines of equal value.")
        traces += levels
    if "regions" in layers:
        if not subject.regions:
            notes.append("No uncertainty is kept with the tensor, so its axes have no regions.")
        traces += trace_regions(subject.regions)
    if "answer" in layers:
        if subject.answer is None:
            notes.append("No search is kept; the Cut page seeks directions of a wanted value.")
        else:
            traces += [Trace(curve, "answer", "sought") for curve in subject.answer.curves]
            marks += [Mark(vector, "target", "sought", line=True) for vector in subject.answer.directions]
    if "specimen" in layers:
        marks += list_specimen(pose.matrix)
    if "principal" in layers:
        marks += list_principal(subject.principal)
    for layer, kind in (("taken", "taken"), ("proposed", "proposed")):
        if layer in layers:
            found, note = (_list_taken if kind == "taken" else _list_proposed)(subject, document, pose)
            marks += found
            notes += [note] if note else []
    kinds: list[Literal["normal", "row"]] = []
    kinds += ["normal"] if "normals" in layers else []
    kinds += ["row"] if "rows" in layers else []
    if kinds and subject.crystal.M is None:
        notes.append("Without a cell there are no planes and rows to mark.")
    marks += [replace(mark, put="") for mark in list_poles(subject.crystal, max_index, kinds)]
    return Picture(marks, traces), notes


def _list_taken(subject: Subject, document: SampleDocument, pose: Pose) -> tuple[list[Mark], str]:
    kept = current_property(document)
    try:
        readings = [] if kept is None else fit_document(subject.crystal, document, kept)[1]
    except HalfturnError:
        readings = []
    found = list_taken(subject.crystal, readings, pose)
    return found, "" if found else "No readings are in use."


def _list_proposed(subject: Subject, document: SampleDocument, pose: Pose) -> tuple[list[Mark], str]:
    """Directions that the readings leave open, else the next cuts for all cells together, for σ as it was so far."""
    if len(subject.settling.directions):
        count = len(subject.settling.directions)
        return list_directions(subject.settling.directions, "proposed", [f"{k + 1}" for k in range(count)]), ""
    kept = current_property(document)
    if kept is None or subject.crystal.M is None:
        return [], "There is nothing to propose cuts from."
    try:
        fit, readings = fit_document(subject.crystal, document, kept)
        sigmas = [reading.sigma for reading in readings if reading.sigma]
        if not sigmas or fit.estimate is None:
            return [], "Cuts are proposed from readings with uncertainties; there are none."
        plan = build_plan(
            subject.crystal,
            kind_of(kept),
            readings,
            list_candidates(subject.crystal, PROPOSED_INDEX),
            float(np.median(sigmas)),
            matrix=fit.estimate.matrix,
            batches=dict(document.batches),
            pose=pose,
        )
        vectors = plan_campaign(plan, plan.read_criterion("D"), PROPOSED).vectors
    except HalfturnError as error:
        return [], error.message
    return list_directions(vectors, "proposed", [f"{k + 1}" for k in range(len(vectors))]), ""


def tell_place(subject: Subject, pose: FloatArray, direction: FloatArray) -> dict[str, Any]:
    """What is at a direction (unit vector, crystal frame), and what a specimen axis could be put on there."""
    estimate = subject.tensor.estimate
    sigma = estimate.value_sigma(direction)
    unit = f" {subject.unit}" if subject.unit else ""
    value = print_value(float(compute_values(estimate.matrix, direction)), None if sigma is None else float(sigma))
    near: dict[str, Any] = {"row": None, "normal": None}
    offers: list[dict[str, Any]] = []
    if subject.crystal.M is not None:
        kinds: tuple[Literal["normal", "row"], ...] = ("normal", "row")
        for kind in kinds:
            found = find_nearest(subject.crystal, direction, kind)
            name = typeset_indices(found.text)
            near[kind] = {"name": name, "off": found.off, "text": print_angle(found.off)}
            if found.off <= NEAR:
                offers.append(_offer(pose, name, found.off, found.text))
    for number in range(3):
        axis = subject.principal.axes[number]
        if subject.principal.arbitrary[number]:
            continue
        off = float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(axis, direction)), abs(axis @ direction))))
        if off <= NEAR:
            sense = -1.0 if axis @ direction < 0 else 1.0
            offers.append(_offer(pose, f"p{number + 1}", off, (sense * axis).tolist()))
    offers.sort(key=lambda offer: offer["off"])
    offers.append(_offer(pose, "this very place", 0.0, direction.tolist()))
    shown = " ".join(f"{part + 0.0:.3f}".replace("-", "−") for part in direction.tolist())
    return {"direction": direction.tolist(), "text": shown, "value": value + unit, **near, "offers": offers}


def _offer(pose: FloatArray, name: str, off: float, on: Any) -> dict[str, Any]:
    """A direction with the poses that put x, y or z on it, the next axis as near as can be to where it is."""
    poses = {}
    for number, letter in enumerate(AXIS_LETTERS):
        following = (number + 1) % 3
        if not isinstance(on, str) and np.linalg.norm(np.cross(np.array(on), pose[following])) < 0.02:
            following = (number + 2) % 3
        poses[letter] = {"exact": [letter, on], "toward": [AXIS_LETTERS[following], pose[following].tolist()]}
    return {"name": name, "off": off, "text": print_angle(off), "poses": poses}
