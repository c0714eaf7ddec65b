"""The panel of consequences on the front page: computed when it is unfolded, and again for what is typed."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction
from app.errors import InputError, located
from app.store.document import SampleDocument, current_property
from app.tensor.estimate import Estimate
from app.tensor.pose import Pose, resolve_direction
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Typed
from app.web.consequences_view import Asked, choose_panel, describe_consequences
from app.web.dispersion import describe_dispersion, take_at_wavelength
from app.web.followed import find_followed
from app.web.kept import crystal_for, crystal_of, entry_of, pose_of, print_own_unit, tensor_of
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.samples import store_of

FloatArray = npt.NDArray[np.float64]

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class ConsequencesRequest(Part):
    """What is asked of the tensor; what is left out has its usual value."""

    direction: Typed | None = Field(None, description="normal or length of the part; default z of the front page")
    edge: Typed | None = Field(None, description="an edge in the face, from which azimuths count; default x")
    thickness: Number = Field(1.0, gt=0, le=1e6, description="mm")
    wavelength: Number = Field(589.3, gt=0, le=1e7, description="nm")
    start: Number = Field(293.0, description="K")
    end: Number = Field(393.0, description="K")
    substrate: Number | None = Field(None, description="its expansion, 10⁻⁶/K")
    flux_density: Number = Field(1.0, ge=0, le=1e3, description="of the magnetic field outside, T")
    index: Number = Field(1.5, gt=0, le=100, description="mean refractive index of the two waves")


@router.post("/{sample_id}/consequences", summary="What the tensor means for a part, by the kind of property")
def consequences(sample_id: str, given: ConsequencesRequest, request: Request) -> JsonAnswer:
    """``tables`` of printed numbers, and the same as a piece of the page."""
    document = store_of(request).samples.get(sample_id).document
    kept = current_property(document)
    if kept is None:
        raise InputError("This sample has no property.", hint="Choose one in the strip.")
    entry = entry_of(kept)
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry)
    estimate = tensor_of(crystal, kept).estimate
    asked, name = _read(crystal, document, given)
    followed = find_followed(document, crystal, kept) if choose_panel(entry) == "optics" else None
    taken = take_at_wavelength(crystal, kept, followed, given.wavelength)
    if taken is not None:
        estimate = taken[0]
    tables = describe_consequences(crystal, estimate, entry, print_own_unit(kept.unit), asked)
    if taken is not None and followed is not None:
        tables[0]["note"] = taken[1]
        tables.append(describe_dispersion(crystal, kept, entry, followed, asked))
    content = {"tables": tables, "along": name, "panel": choose_panel(entry)}
    return JsonAnswer({**content, "result": templates.get_template("consequences_result.html").render(content)})


def _read(crystal: Crystal, document: SampleDocument, given: ConsequencesRequest) -> tuple[Asked, str]:
    pose = pose_of(crystal, document.pose)
    direction, edge = pose.matrix[2], pose.matrix[0]
    if given.direction:
        direction = _resolve(crystal, given.direction, pose, "direction")
    if given.edge:
        edge = _resolve(crystal, given.edge, pose, "edge")
    elif abs(float(edge @ direction)) > 0.999:
        edge = pose.matrix[1]
    size: Any = tuple(float(length) for length in document.part)
    return Asked(
        direction,
        edge,
        given.thickness,
        given.wavelength,
        given.start,
        given.end,
        given.substrate,
        size,
        pose.matrix,
        given.flux_density,
        given.index,
        _find_conductivity(crystal, document),
    ), given.direction or "z of the specimen"


def _find_conductivity(crystal: Crystal, document: SampleDocument) -> Estimate | None:
    """The sample's thermal conductivity, which a bar of a thermoelectric crystal needs; its unit does not matter."""
    for kept in document.properties:
        entry = entry_of(kept)
        if entry.key in ("thermal_conductivity", "thermal_resistivity"):
            estimate = tensor_of(crystal, kept).estimate
            return estimate if entry.key == "thermal_conductivity" else estimate.invert()
    return None


def _resolve(crystal: Crystal, text: str, pose: Pose, field: str) -> FloatArray:
    with located(field):
        return resolve_direction(crystal, read_direction(text), pose)
