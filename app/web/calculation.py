"""The calculation interface, version 1: each call is parsed, hands over to one function, and shapes its answer."""

from __future__ import annotations

from typing import Any

import numpy as np
from fastapi import APIRouter, Request, Response

from app.crystal.cif import read_cif
from app.errors import InputError, located
from app.readings.fit import fit_readings
from app.tensor.conversion import convert_tensor, list_candidates
from app.tensor.form import build_form
from app.tensor.pose import IDENTITY
from app.tensor.region import find_region
from app.tensor.surface import build_surface
from app.tensor.values import compute_flux, compute_flux_angles, compute_rod_values, compute_values
from app.web import requests, responses
from app.web.adaptors import (
    adapt_crystal,
    adapt_directions,
    adapt_kind,
    adapt_pose,
    adapt_readings,
    adapt_tensor,
)
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.rendering import render_array, render_fit, render_form, render_state

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)

BINARY = "application/octet-stream"


@router.post(
    "/form",
    summary="Which of the nine cells symmetry leaves free, and what the others equal",
    responses={200: {"model": responses.FormAnswer}},
)
def form(request: requests.FormRequest) -> JsonAnswer:
    """The form of a kind of tensor under the crystal's group, with the reason of every lock."""
    crystal = adapt_crystal(request.crystal)
    pose = None if request.pose is None else adapt_pose(crystal, request.pose)
    return JsonAnswer(render_form(crystal, build_form(crystal, adapt_kind(request.tensor)), pose))


@router.post(
    "/state",
    summary="The tensor made to obey, in both frames, with its principal axes",
    responses={200: {"model": responses.StateAnswer}},
)
def state(request: requests.StateRequest) -> JsonAnswer:
    """Everything that one tensor in one pose is."""
    crystal = adapt_crystal(request.crystal)
    tensor = adapt_tensor(crystal, request.tensor)
    return JsonAnswer(render_state(crystal, tensor, adapt_pose(crystal, request.pose)))


@router.post(
    "/along",
    summary="Value, flux and long-bar reading along many directions",
    responses={200: {"model": responses.AlongAnswer}},
)
def along(request: requests.AlongRequest) -> JsonAnswer:
    """What the tensor does along each direction; vectors and flux in the crystal frame."""
    crystal = adapt_crystal(request.crystal)
    tensor = adapt_tensor(crystal, request.tensor)
    directions = adapt_directions(crystal, request.directions, adapt_pose(crystal, request.pose))
    estimate = tensor.estimate
    flux = compute_flux(estimate.matrix, directions)
    answer: dict[str, Any] = {
        "vectors": directions.tolist(),
        "values": compute_values(estimate.matrix, directions).tolist(),
        "flux": flux.tolist(),
        "angle": render_array(compute_flux_angles(directions, flux)),
        "rod": render_array(compute_rod_values(estimate.matrix, directions)),
        "misfit": tensor.misfit,
    }
    if estimate.covariance is not None:
        answer["sigma"] = render_array(estimate.value_sigma(directions))
        answer["rod_sigma"] = render_array(estimate.rod_sigma(directions))
    return JsonAnswer(answer)


@router.post(
    "/surface",
    summary="A mesh of the quadric, the value surface or the flux surface",
    responses={
        200: {
            "model": responses.SurfaceAnswer,
            "content": {BINARY: {"schema": {"type": "string", "format": "binary"}}},
        }
    },
)
def surface(request: requests.SurfaceRequest, http: Request) -> Response:
    """Vertices in the specimen frame, triangles, the value and the sheet at every vertex."""
    crystal = adapt_crystal(request.crystal)
    tensor = adapt_tensor(crystal, request.tensor)
    pose = adapt_pose(crystal, request.pose)
    mesh = build_surface(tensor.estimate.turn(pose.matrix, "").matrix, request.surface, request.detail)
    if BINARY in http.headers.get("accept", ""):
        return Response(_pack(mesh.vertices, mesh.triangles, mesh.values, mesh.sheets), media_type=BINARY)
    return JsonAnswer(
        {
            "vertices": mesh.vertices.tolist(),
            "triangles": mesh.triangles.tolist(),
            "value": mesh.values.tolist(),
            "sheet": mesh.sheets.tolist(),
            "cut_at": mesh.cut_at,
        }
    )


def _pack(vertices: Any, triangles: Any, values: Any, sheets: Any) -> bytes:
    """Little-endian: the two counts, then vertices, triangles, values and sheets."""
    with np.errstate(over="ignore"):
        narrow = np.asarray(vertices, dtype="<f4"), np.asarray(values, dtype="<f4")
    if not all(np.all(np.isfinite(array)) for array in narrow):
        raise InputError(
            "The mesh is too large for single precision.",
            field="tensor",
            hint="Give the values in a larger unit, or ask for JSON.",
        )
    counts = np.array([len(vertices), len(triangles)], dtype="<i4")
    parts = (counts, narrow[0], np.asarray(triangles, dtype="<i4"), narrow[1], np.asarray(sheets, dtype="i1"))
    return b"".join(part.tobytes() for part in parts)


@router.post(
    "/fit",
    summary="From readings to a tensor with its covariance",
    responses={200: {"model": responses.FitAnswer}},
)
def fit(request: requests.FitRequest) -> JsonAnswer:
    """Generalised least squares in the allowed space; readings that do not determine the tensor are an answer."""
    crystal = adapt_crystal(request.crystal)
    pose = adapt_pose(crystal, request.pose)
    readings = adapt_readings(crystal, request.readings)
    result = fit_readings(crystal, adapt_kind(request.tensor), readings, batches=request.batches, pose=pose)
    return JsonAnswer(render_fit(crystal, result, pose))


@router.post(
    "/region",
    summary="Which directions can be principal axes",
    responses={200: {"model": responses.RegionAnswer}},
)
def region(request: requests.RegionRequest) -> JsonAnswer:
    """The set of directions that the data allow as principal axes, at a level."""
    crystal = adapt_crystal(request.crystal)
    tensor = adapt_tensor(crystal, request.tensor)
    given = request.directions
    directions = None if given is None else adapt_directions(crystal, given, IDENTITY)
    found = find_region(crystal, tensor, request.level, directions)
    answer: dict[str, Any] = {
        "bound": found.bound,
        "curves": [curve.tolist() for curve in found.curves],
        "curve_kinds": list(found.kinds),
        "everywhere": found.everywhere,
    }
    if found.test is not None:
        answer["chi2"] = render_array(found.test.chi2)
        answer["bounds"] = found.test.bounds.tolist()
    return JsonAnswer(answer)


@router.post(
    "/convert",
    summary="The same tensor in another cell, setting or frame, audited cell by cell",
    responses={200: {"model": responses.ConvertAnswer}},
)
def convert(request: requests.ConvertRequest) -> JsonAnswer:
    """With a basis, the tensor in the new frame; without, every basis of −1, 0, 1 that matches the two cells."""
    old = adapt_crystal(request.from_, "from")
    new = adapt_crystal(request.to, "to")
    tensor = adapt_tensor(old, request.tensor)
    if request.basis is None:
        candidates = list_candidates(old, tensor, new)
        listed = [
            {"basis": entry.basis.tolist(), "misfit": entry.misfit, "matrix": entry.matrix.tolist()}
            for entry in candidates
        ]
        return JsonAnswer({"matrix": None, "rotation": None, "audit": None, "misfit": None, "candidates": listed})
    with located(""):
        result = convert_tensor(old, tensor, new, np.array(request.basis, dtype=np.float64))
    return JsonAnswer(
        {
            "matrix": result.matrix.tolist(),
            "sigma_matrix": render_array(result.estimate.sigma_matrix),
            "rotation": result.rotation.tolist(),
            "audit": [{"cell": entry.cell, "from": entry.terms, "value": entry.value} for entry in result.audit],
            "misfit": result.misfit,
            "removed": result.removed,
        }
    )


@router.post(
    "/cif",
    summary="The crystal that a CIF describes, and what it leaves open",
    responses={200: {"model": responses.CifAnswer}},
)
def cif(request: requests.CifRequest) -> JsonAnswer:
    """Cell, group in its setting, temperature and formula."""
    found = read_cif(request.text, request.block)
    crystal: dict[str, Any] = {"cell": found.cell, "group": found.group, "frame": found.frame}
    if found.cell_sigma is not None:
        crystal["cell_sigma"] = found.cell_sigma
    if found.unique_axis is not None:
        crystal["unique_axis"] = found.unique_axis
    return JsonAnswer(
        {
            "crystal": crystal,
            "name": found.name,
            "formula": found.formula,
            "temperature": found.temperature,
            "block": found.block,
            "blocks": found.blocks,
            "notes": found.notes,
        }
    )
