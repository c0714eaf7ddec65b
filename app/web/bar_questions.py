"""Few bars for one cell, one cube for many readings, and which way a finished face really points."""

from __future__ import annotations

from typing import Annotated, Any

import numpy as np
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.errors import InputError, located
from app.readings.candidates import list_candidates
from app.readings.cube import Cube, find_cubes
from app.readings.isolation import isolate_cell
from app.readings.report import describe_direction
from app.readings.rocking import find_achieved_direction, fit_rocking, judge_piece
from app.readings.table_cells import read_direction_cell, write_direction_cell
from app.store.revisions import Kept
from app.tensor.pose import resolve_direction
from app.tensor.printing import print_value
from app.tensor.sentence import place_direction
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.readings_view import require_property
from app.web.samples import store_of

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class IsolationRequest(Part):
    """Which cell, from which bars."""

    cell: Annotated[str, Field(pattern=r"^[1-3][1-3]$")]
    max_index: int = Field(2, ge=1, le=4, description="of planes and rows")
    sigma: Annotated[float, Field(gt=0)] | None = Field(None, description="of one reading")


class CubeRequest(Part):
    """How simple the faces of the cube are to be."""

    max_index: int = Field(2, ge=1, le=3)


class TrueNormalRequest(Part):
    """Rocking angles of a face at several azimuths, all in degrees."""

    nominal: str = Field(description="the direction that the face was cut for, as in the table of readings")
    toward: str = Field(description="the direction at azimuth 0, azimuths right-handed about the normal")
    azimuths: list[Number] = Field(min_length=1, max_length=500)
    angles: list[Number] = Field(min_length=1, max_length=500)
    sigma: Annotated[float, Field(gt=0)] | None = Field(None, description="of one angle; default from the scatter")


class PieceRequest(Part):
    """The size of a piece, in one unit."""

    length: Number
    width: Number
    thickness: Number


def _answer(template: str, content: dict[str, Any]) -> JsonAnswer:
    return JsonAnswer({**content, "result": templates.get_template(template).render(content)})


def _kept(request: Request, sample_id: str) -> Kept:
    return store_of(request).samples.get(sample_id)


@router.post("/{sample_id}/readings/isolate", summary="The fewest bars that give one cell by hand")
def isolate(sample_id: str, given: IsolationRequest, request: Request) -> JsonAnswer:
    """``sentence`` is the arithmetic; ``result`` is a piece of the page; nothing is kept."""
    crystal, shown = require_property(_kept(request, sample_id))
    found = isolate_cell(crystal, kind_of(shown), given.cell, list_candidates(crystal, given.max_index))
    sigma = None if given.sigma is None else given.sigma * float(np.sqrt(found.variance))
    return _answer(
        "isolation.html",
        {
            "sentence": found.sentence,
            "directions": [write_direction_cell(direction) for direction in found.directions],
            "bars": [describe_direction(direction) for direction in found.directions],
            "weights": found.weights.tolist(),
            "sigma": None if sigma is None else f"{sigma:.2g}",
            "factor": f"{np.sqrt(found.variance):.3g}",
            "fewest": found.fewest,
        },
    )


@router.post("/{sample_id}/readings/cube", summary="Which single cube carries the most readings")
def cube(sample_id: str, given: CubeRequest, request: Request) -> JsonAnswer:
    """``cubes`` best first; ``result`` is a piece of the page; nothing is kept."""
    crystal, shown = require_property(_kept(request, sample_id))
    cubes = find_cubes(crystal, kind_of(shown), given.max_index)
    if not cubes:
        raise InputError(
            "No two faces of so low an index are square to each other within a degree.",
            field="max_index",
            hint="Allow higher indices.",
        )
    return _answer("cubes.html", {"cubes": [_describe_cube(crystal, entry) for entry in cubes]})


def _describe_cube(crystal: Crystal, found: Cube) -> dict[str, Any]:
    return {
        "faces": [
            place_direction(crystal, axis).text.removeprefix("on ") if face is None else _name_face(face, float(off))
            for face, off, axis in zip(found.faces, found.off, found.axes, strict=True)
        ],
        "between_faces": found.face_rank,
        "rank": found.rank,
        "condition": None if found.condition is None else f"{found.condition:.3g}",
    }


def _name_face(face: Direction, off: float) -> str:
    name = describe_direction(face)
    return name if off < 0.005 else f"{off:.2f}° off {name}"


@router.post("/{sample_id}/readings/true-normal", summary="Which way a face points, from rocking angles")
def true_normal(sample_id: str, given: TrueNormalRequest, request: Request) -> JsonAnswer:
    """``direction`` can be typed into the table of readings; ``result`` is a piece of the page; nothing is kept."""
    kept = _kept(request, sample_id)
    crystal, _ = require_property(kept)
    pose = pose_of(crystal, kept.document.pose)
    vectors = []
    for field, text in (("nominal", given.nominal), ("toward", given.toward)):
        with located(field):
            vectors.append(resolve_direction(crystal, read_direction_cell(text), pose))
    found = fit_rocking(given.azimuths, given.angles, given.sigma)
    with located(""):
        try:
            achieved = find_achieved_direction(vectors[0], vectors[1], found.tilt, found.azimuth)
        except InputError as error:
            raise InputError(error.message, field="toward", hint="Name a direction that lies in the face.") from None
    # Six decimals are 0.00006 degrees, far below what rocking angles tell.
    x, y, z = (round(float(part), 6) + 0.0 for part in achieved)
    direction = Direction("vector", (x, y, z))
    spread = None
    if found.covariance is not None:
        # One number for the table: the mean of the two components' variances.
        spread = float(np.sqrt(np.trace(found.covariance) / 2))
    return _answer(
        "true_normal.html",
        {
            "tilt": print_value(found.tilt, found.tilt_sigma),
            "azimuth": print_value(found.azimuth, found.azimuth_sigma),
            "offset": print_value(found.offset, found.offset_sigma),
            "told": found.azimuth_sigma is not None,
            "dof": found.dof,
            "chi2": f"{found.chi2:.3g}",
            "weighted": given.sigma is not None,
            "direction": write_direction_cell(direction),
            "direction_sigma": None if spread is None else f"{spread:.2g}",
            "place": place_direction(crystal, achieved).text,
        },
    )


@router.post("/{sample_id}/readings/piece", summary="Whether a piece reads as a rod or as a plate")
def piece(sample_id: str, given: PieceRequest, request: Request) -> JsonAnswer:
    """``kind`` is rod, plate or between; ``result`` is a piece of the page."""
    _kept(request, sample_id)
    judged, sentence = judge_piece(given.length, given.width, given.thickness)
    return _answer("piece.html", {"kind": judged, "sentence": sentence})
