"""Directions that answer a question: the call behind the Cut page's search, and what it shows."""

from __future__ import annotations

from typing import Annotated, Final, Literal

from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.cutting.nearby import Nearby, list_nearby
from app.cutting.seek import Sought
from app.tensor.sentence import place_direction, print_angle
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Typed
from app.web.kept import crystal_of
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.samples import store_of
from app.web.sought import take_conditions
from app.web.stereogram import Mark, Picture, Trace, draw_stereogram
from app.web.stereogram_view import list_poles

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

NEAR = 3.0
MOST_NEAR = 16
KINDS: Final[tuple[Literal["normal", "row"], ...]] = ("normal", "row")


class SoughtCondition(Part):
    """What is wanted of one property of the sample."""

    property: Typed = Field(description="its id, or rate:ID:ID for the change by temperature between two of one kind")
    target: Number | Literal["max", "min"]


class SeekRequest(Part):
    """Directions that meet one or two conditions."""

    conditions: Annotated[list[SoughtCondition], Field(min_length=1, max_length=2)]


@router.post("/{sample_id}/cut/seek", summary="Directions that answer one or two conditions, with what a miscut costs")
def find(sample_id: str, given: SeekRequest, request: Request) -> JsonAnswer:
    """``result`` is a piece of the page; nothing is kept."""
    document = store_of(request).samples.get(sample_id).document
    crystal = crystal_of(document.crystal)
    sought, named = take_conditions(crystal, document, [condition.model_dump() for condition in given.conditions])
    content = {
        "sentence": sought.sentence,
        "properties": named,
        "lines": [
            {
                "xyz": line.tolist(),
                "place": place_direction(crystal, line).text,
                "values": [_print(value) for value in values],
                "slopes": [_print(slope) for slope in slopes],
            }
            for line, values, slopes in zip(
                sought.locus.lines, sought.values.tolist(), sought.slopes.tolist(), strict=True
            )
        ],
        "near": [
            {
                "text": near.text,
                "name": typeset_indices(near.text),
                "off": print_angle(near.off),
                "values": [_print(value) for value in near.values.tolist()],
            }
            for near in _list_near(crystal, sought)
        ],
        "below": None if sought.fraction_below is None else f"{100 * sought.fraction_below:.4g} %",
        "stereogram": draw_stereogram(
            crystal,
            Picture(
                [Mark(line, "target", "", line=True) for line in sought.locus.lines] + list_poles(crystal),
                [Trace(curve, "answer") for curve in sought.curves],
            ),
            title=f"Stereogram: {sought.sentence}",
        ),
    }
    piece = templates.get_template("cut_sought.html").render(content)
    return JsonAnswer({"sentence": sought.sentence, "result": piece})


def _list_near(crystal: Crystal, sought: Sought) -> list[Nearby]:
    found = [
        near for kind in KINDS for near in list_nearby(crystal, sought.locus, sought.conditions, kind, within=NEAR)
    ]
    return sorted(found, key=lambda near: near.off)[:MOST_NEAR]


def _print(value: float) -> str:
    return f"{value:.5g}".replace("-", "−")
