"""Which frame did they mean? A published tensor without its axes, weighed against the sample's own readings."""

from __future__ import annotations

from typing import Any

import numpy as np
from fastapi import APIRouter, Request
from pydantic import Field

from app.consequences.frame_question import FrameQuestion, OwnReading, ask_frame
from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.errors import InputError
from app.store.document import KeptReading, SampleDocument, readings_of
from app.tensor.pose import resolve_direction
from app.tensor.printing import print_value
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of, print_own_unit
from app.web.kept_readings import take_all
from app.web.pages import templates
from app.web.parts import Part, SixNumbers, ThreeByThree
from app.web.readings_view import require_property
from app.web.samples import store_of

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

SHOWN = 6


class FrameQuestionRequest(Part):
    """A tensor as it was printed, in the unit of the sample's property."""

    matrix: ThreeByThree = Field(description="nine cells in a frame that is not stated")
    cell: SixNumbers | None = Field(None, description="printed beside it; default the sample's")
    any_edges: bool = Field(False, description="whether the edges may have been named in any order and sense")
    unsure: bool = Field(True, description="whether it is open if long bars were read as rods or as plates")


@router.post("/{sample_id}/frame-question", summary="Weigh the frames a published tensor may refer to against readings")
def ask(sample_id: str, given: FrameQuestionRequest, request: Request) -> JsonAnswer:
    """``result`` is a piece of the page; nothing is kept."""
    kept = store_of(request).samples.get(sample_id)
    crystal, shown = require_property(kept)
    entries = readings_of(kept.document, shown.id)
    readings = _take_own(crystal, kept.document, entries, unsure=given.unsure)
    found = ask_frame(
        crystal,
        given.matrix,
        readings,
        kind=kind_of(shown),
        published_cell=given.cell,
        any_edges=given.any_edges,
    )
    content: dict[str, Any] = {
        "sentence": found.sentence,
        "answers": _render(found),
        "unit": print_own_unit(shown.unit),
        "next_cut": None,
    }
    if found.next_cut is not None:
        content["next_cut"] = {
            "direction": typeset_indices(found.next_cut.direction),
            "predicted": [print_value(float(value)) for value in found.next_cut.predicted],
        }
    return JsonAnswer({**content, "result": templates.get_template("frame_question.html").render(content)})


def _take_own(
    crystal: Crystal, document: SampleDocument, entries: tuple[KeptReading, ...], *, unsure: bool
) -> list[OwnReading]:
    """The readings in use along one direction that carry a sigma."""
    pose = pose_of(crystal, document.pose)
    own = []
    for reading, entry in zip(take_all(crystal, entries), entries, strict=True):
        if entry.set_aside is not None or reading.kind not in ("along", "rod") or reading.sigma is None:
            continue
        assert reading.direction is not None
        assert reading.value is not None
        vector = resolve_direction(crystal, reading.direction, reading.pose or pose)
        own.append(OwnReading(vector, reading.value, reading.sigma, None if unsure else reading.kind))
    if not own:
        raise InputError(
            "The question needs readings along directions, each with its σ.",
            field="readings",
            hint="Take a few readings of your own first; directions off the axes of symmetry tell most.",
        )
    return own


def _render(found: FrameQuestion) -> list[dict[str, Any]]:
    return [
        {
            "sentence": answer.sentence,
            "weight": f"{answer.weight:.3f}",
            "chi2": f"{answer.chi2:.3g}" if np.isfinite(answer.chi2) else "beyond 10³⁰⁸",
            "p": f"{answer.p_value:.2g}",
            "survives": answer.survives,
            "namings": [naming.sentence for naming in answer.namings[:4]],
            "more": max(0, len(answer.namings) - 4),
            "matrix": answer.matrix.tolist(),
        }
        for answer in found.answers[:SHOWN]
    ]
