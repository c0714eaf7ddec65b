"""The Cut page and the calls that change a sample's parts."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Annotated, Any, Literal

from fastapi import APIRouter, Request, Response
from pydantic import Field

from app.errors import InputError
from app.store import Store
from app.store.document import SampleDocument, change_document
from app.store.revisions import Kept
from app.web import responses
from app.web.achieved import calibrate_saw, give_achieved
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Typed
from app.web.cut_view import describe_cut
from app.web.kept import crystal_of, render_sample
from app.web.kept_parts import NEW_PART, current_part, list_parts
from app.web.pages import embed_json, render_page, templates
from app.web.parts import Number, Part
from app.web.samples import save_change, store_of
from app.web.sightings_view import check_sightings, take_sightings
from app.web.stage_shapes import LabVector
from app.web.stages import find_stage, list_stages

page_router = APIRouter(include_in_schema=False)
router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

MOST_PARTS = 100
LONGEST_EDGE = 10_000.0


class TargetPart(Part):
    """What a part is cut for."""

    by: Literal["direction", "offcut", "principal", "pose", "vector"]
    direction: Typed | None = None
    from_: Typed | None = Field(None, alias="from")
    tilt: Number | None = None
    toward: Typed | None = None
    axis: Literal["x", "y", "z", 1, 2, 3] | None = None
    xyz: Annotated[list[Number], Field(min_length=3, max_length=3)] | None = None
    name: Typed | None = None


class TolerancePart(Part):
    """How far off the part may be: a half-angle in degrees, or a change of the value."""

    half_angle: Annotated[float, Field(ge=0, le=90)] | None = None
    value: Annotated[float, Field(ge=0)] | None = None


class AchievedPart(Part):
    """The measured orientation of the finished face: so many degrees off the target, toward a direction."""

    tilt: Annotated[float, Field(ge=0, le=90)]
    toward: Typed
    sigma: Annotated[float, Field(ge=0, le=30)] | None = Field(None, description="degrees")


class PartChange(Part):
    """What of a part is changed; what is left out stays."""

    name: Typed | None = None
    shape: Literal["plate", "wafer", "bar", "cube", "prism"] | None = None
    size: Annotated[list[Number], Field(min_length=3, max_length=3)] | None = Field(None, description="mm")
    target: TargetPart | None = None
    edge: Typed | None = Field(None, description="direction toward which x points")
    tolerance: TolerancePart | None = None
    kerf: Annotated[float, Field(ge=0, le=100)] | None = Field(None, description="mm")
    stock: Annotated[float, Field(ge=0, le=100)] | None = Field(None, description="mm on each face")
    wedge: Annotated[float, Field(ge=0, le=30)] | None = Field(None, description="between the two faces, degrees")
    achieved: AchievedPart | None = Field(None, description="what the finished face was measured to be")
    either_sense: bool | None = Field(None, description="whether the face may look the other way")
    equivalents: bool | None = Field(None, description="whether a direction that the group makes equal will do")


class SightingPart(Part):
    """A direction and the dial readings at which it was brought to the stage's line of sight."""

    direction: Typed
    angles: Annotated[list[Number], Field(min_length=1, max_length=3)]
    toward: LabVector | None = Field(None, description="where it was brought; default the stage's line of sight")
    weight: Annotated[float, Field(gt=0)] | None = None
    note: Typed | None = None


class PartRequest(Part):
    """A change of the parts, the stage or the sightings, and the revision that it was made from; one of them."""

    parent: int = Field(ge=1)
    make: bool = False
    choose: Typed | None = Field(None, description="id of the part to look at")
    remove: Typed | None = Field(None, description="id of the part to take out")
    change: PartChange | None = Field(None, description="of the part that is looked at")
    give_readings: bool = Field(False, description="give the readings of the bar of its name what was achieved")
    calibrate: bool = Field(False, description="keep the part's achieved normal as a cut that calibrates the saw")
    wishes: dict[Typed, Literal["largest", "smallest", "steady"]] | None = Field(
        None, description="what is wanted of each property, by its id"
    )
    stage: Typed | None = Field(None, description="id of the stage that is used")
    sightings: Annotated[list[SightingPart], Field(max_length=100)] | None = Field(
        None, description="all sightings, in place of those that stand"
    )


@page_router.get("/samples/{sample_id}/cut")
def cut_page(sample_id: str, request: Request) -> Response:
    """From a question to a part."""
    store = store_of(request)
    content = describe_cut(store.samples.get(sample_id), list_stages(store))
    return render_page(request, "cut.html", sample_id, "cut", stage_json=embed_json(content["stage"]), **content)


@router.get("/{sample_id}/cut", summary="The part that is looked at, with what follows from it")
def show(sample_id: str, request: Request) -> JsonAnswer:
    """``result`` is a piece of the page."""
    store = store_of(request)
    return JsonAnswer(_render(store, store.samples.get(sample_id)))


@router.post("/{sample_id}/cut", summary="Make, choose, remove or change a part")
def change(sample_id: str, given: PartRequest, request: Request) -> JsonAnswer:
    """A target that cannot be read is refused at its field."""
    store = store_of(request)
    kept = store.samples.get(sample_id, given.parent)
    if given.calibrate:
        calibrate_saw(store, kept.document)
        return JsonAnswer(_render(store, kept))
    document = _apply(kept.document, given)
    if given.sightings is not None:
        stage = find_stage(store, document.looking.get("stage"))
        sightings = [sighting.model_dump(exclude_none=True) for sighting in given.sightings]
        check_sightings(sightings, stage)
        take_sightings(crystal_of(document.crystal), stage, sightings)
        document = change_document(document, {"sightings": sightings})
    if given.change is not None:
        _refuse_unreadable(store, replace(kept, document=document))
    return JsonAnswer(_render(store, save_change(store, sample_id, document, given.parent)))


def _apply(document: SampleDocument, given: PartRequest) -> SampleDocument:
    parts = list_parts(document)
    current = current_part(document)
    looking = dict(document.plain()["looking"])
    if given.make:
        if len(parts) >= MOST_PARTS:
            raise InputError(f"A sample has at most {MOST_PARTS} parts.", field="make", hint="Remove one, or copy it.")
        numbers = {part["id"] for part in parts}
        number = next(n for n in range(1, MOST_PARTS + 2) if f"part{n}" not in numbers)
        start = current or NEW_PART
        parts.append({**start, "id": f"part{number}", "name": f"Part {number}", "achieved": None})
        looking["part"] = f"part{number}"
    elif given.choose is not None:
        looking["part"] = _require(parts, given.choose, "choose")["id"]
    elif given.remove is not None:
        gone = _require(parts, given.remove, "remove")
        parts = [part for part in parts if part is not gone]
    elif given.give_readings:
        return give_achieved(document, current)
    elif given.wishes is not None:
        looking["wishes"] = {**(looking.get("wishes") or {}), **given.wishes}
    elif given.stage is not None:
        looking["stage"] = given.stage
    elif given.change is not None:
        if current is None:
            raise InputError("There is no part to change.", field="change", hint="Make one first.")
        parts = [_change(part, given.change) if part["id"] == current["id"] else part for part in parts]
    return change_document(document, {"parts": parts, "looking": looking})


def _require(parts: list[dict[str, Any]], wanted: str, field: str) -> dict[str, Any]:
    found = next((part for part in parts if part["id"] == wanted), None)
    if found is None:
        raise InputError("There is no such part.", field=field, hint="It may have been removed elsewhere.")
    return found


def _change(part: Mapping[str, Any], given: PartChange) -> dict[str, Any]:
    named = given.model_dump(by_alias=True, exclude_none=True)
    if "name" in named and not named["name"].strip():
        raise InputError("A part needs a name.", field="change.name", hint="Type one, like B4.")
    for place, edge in enumerate(named.get("size", [])):
        if not 0 < edge <= LONGEST_EDGE:
            raise InputError(
                "An edge of the part is a length above 0 mm.", field=f"change.size[{place}]", hint="Give millimetres."
            )
    if "tolerance" in named and len(named["tolerance"]) != 1:
        raise InputError(
            "A tolerance is a half-angle or a change of the value, one of the two.", field="change.tolerance"
        )
    return {**part, **named}


def _refuse_unreadable(store: Store, kept: Kept) -> None:
    """Raise what would stand on the page instead of a result, where it is about what was typed."""
    problem = describe_cut(kept, list_stages(store))["problem"]
    if problem is not None and str(problem["field"] or "").startswith("part"):
        raise InputError(
            problem["message"], field=str(problem["field"]).replace("part", "change", 1), hint=problem["hint"]
        )


def _render(store: Store, kept: Kept) -> dict[str, Any]:
    content = describe_cut(kept, list_stages(store))
    return {
        "sample": render_sample(kept),
        "part": content["part"],
        "headline": content["headline"],
        "second_line": content["second_line"],
        "problem": content["problem"],
        "stage": content["stage"],
        "form": templates.get_template("cut_form.html").render(content),
        "mounting": templates.get_template("cut_stage.html").render(content),
        "result": templates.get_template("cut_result.html").render(content),
    }
