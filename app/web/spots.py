"""Spots on a film, indexed: ranked assignments, and the predicted spots laid over the measured ones."""

from __future__ import annotations

from typing import Annotated, Any, Literal

import numpy as np
import numpy.typing as npt
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.crystal.lattice import compute_directions, list_indices
from app.cutting.film import Side, find_normals, place_spots
from app.cutting.indexing import Indexing, index_normals
from app.errors import InputError
from app.tensor.sentence import print_angle
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import crystal_of
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.samples import store_of
from app.web.stages import find_stage

FloatArray = npt.NDArray[np.float64]

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

SHOWN = 8
PREDICTED_INDEX = 3
FARTHEST = 1e6
Place = Annotated[Number, Field(ge=-FARTHEST, le=FARTHEST)]
Pair = Annotated[list[Place], Field(min_length=2, max_length=2)]


class SpotsRequest(Part):
    """Spots read on a flat film, and the dials at which it was exposed."""

    spots: Annotated[list[Pair], Field(min_length=2, max_length=60)] = Field(
        description="x to the right and y up, looking along the beam, in the unit of the distance"
    )
    distance: Number = Field(ge=1e-3, le=FARTHEST, description="crystal to film")
    side: Literal["back", "front"] = Field("back", description="back reflection or transmission")
    angles: Annotated[list[Number], Field(min_length=1, max_length=3)] = Field(description="dial readings")
    tolerance: Number = Field(1.0, gt=0, le=10, description="degrees")
    max_index: int = Field(3, ge=1, le=5)


@router.post("/{sample_id}/cut/spots", summary="Index spots on a film by their mutual angles against the cell")
def index(sample_id: str, given: SpotsRequest, request: Request) -> JsonAnswer:
    """``assignments`` carry sightings as the Cut page keeps them; ``result`` is a piece of the page."""
    store = store_of(request)
    document = store.samples.get(sample_id).document
    crystal = crystal_of(document.crystal)
    crystal.require_basis()
    stage = find_stage(store, document.looking.get("stage"))
    if len(given.angles) != len(stage["axes"]):
        raise InputError(
            f"The stage has {len(stage['axes'])} axes, and here are {len(given.angles)} readings.", field="angles"
        )
    spots = np.array(given.spots, dtype=np.float64)
    normals = find_normals(spots, given.distance, given.side)
    found = index_normals(crystal, normals, tolerance=given.tolerance, max_index=given.max_index)[:SHOWN]
    assignments = [_render(entry, normals, given.angles) for entry in found]
    drawing = _draw(crystal, found[0], spots, given.distance, given.side) if found else ""
    content = {"assignments": assignments, "drawing": drawing, "count": len(spots)}
    return JsonAnswer({**content, "result": templates.get_template("spots_result.html").render(content)})


def _render(entry: Indexing, normals: FloatArray, angles: list[float]) -> dict[str, Any]:
    return {
        "matched": entry.matched,
        "rms": print_angle(entry.rms),
        "names": ["–" if form is None else typeset_indices(form) for form in entry.forms],
        "sightings": [
            {"direction": form, "angles": list(angles), "toward": normal.tolist()}
            for form, normal in zip(entry.forms, normals, strict=True)
            if form is not None
        ],
    }


def _draw(crystal: Crystal, best: Indexing, spots: FloatArray, distance: float, side: Side) -> str:
    """Measured spots as rings, those that the best assignment predicts as dots, to one scale."""
    planes = compute_directions(crystal, "normal", list_indices(PREDICTED_INDEX))
    turned = np.concatenate([planes, -planes]) @ best.matrix.T
    facing = turned[turned[:, 0] < 0] if side == "back" else turned
    predicted = place_spots(facing, distance, side)
    reach = 1.15 * float(np.max(np.abs(spots)))
    inside = predicted[np.all(np.abs(np.nan_to_num(predicted, nan=np.inf)) <= reach, axis=1)]
    scale = 100.0 / reach
    dots = _draw_places("spot-predicted", 1.5, scale * inside)
    rings = _draw_places("spot-measured", 4.2, scale * spots)
    frame = '<rect x="-102" y="-102" width="204" height="204"/><path d="M-5 0H5M0-5V5"/>'
    label = "The film, looking along the beam: rings are measured, dots predicted"
    head = f'<svg class="film" viewBox="-104 -104 208 208" role="img" aria-label="{label}">'
    return f"{head}{frame}{dots}{rings}</svg>"


def _draw_places(name: str, radius: float, places: FloatArray) -> str:
    return "".join(f'<circle class="{name}" cx="{x:.1f}" cy="{-y:.1f}" r="{radius}"/>' for x, y in places.tolist())
