"""The calls ``seek`` and ``miscut``: directions that answer a question, and what a tilt from one costs."""

from __future__ import annotations

from typing import Any, Literal

from fastapi import APIRouter

from app.cutting.miscut import find_allowed_miscut, measure_miscut
from app.cutting.nearby import list_nearby
from app.cutting.seek import Condition, Sought
from app.cutting.seek import seek as seek_directions
from app.errors import InputError, located
from app.tensor.pose import resolve_direction
from app.tensor.tensor import PropertyTensor
from app.web import parts, responses, seek_shapes
from app.web.adaptors import adapt_crystal, adapt_pose, adapt_tensor
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)

KINDS: tuple[tuple[str, Literal["normal", "row"]], ...] = (("planes", "normal"), ("rows", "row"))


@router.post(
    "/seek",
    summary="Directions with a wanted, largest or smallest value, or two such conditions at once",
    responses={200: {"model": seek_shapes.SeekAnswer}},
)
def seek(request: seek_shapes.SeekRequest) -> JsonAnswer:
    """Exact curves and points, and the planes and rows of low index near them."""
    crystal = adapt_crystal(request.crystal)
    tensors = []
    for index, given in enumerate(request.conditions):
        with located(f"conditions[{index}]"):
            tensors.append(adapt_tensor(crystal, given.tensor))
    conditions = [
        Condition(tensor.estimate.matrix, given.target)
        for tensor, given in zip(tensors, request.conditions, strict=True)
    ]
    found = seek_directions(conditions)
    near = {
        name: [
            {"direction": entry.text, "off": entry.off, "values": entry.values.tolist()}
            for entry in list_nearby(crystal, found.locus, conditions, kind, request.within, request.max_index)
        ]
        for name, kind in KINDS
    }
    return JsonAnswer(
        {
            "curves": [curve.tolist() for curve in found.curves],
            "points": found.points.tolist(),
            "isolated": _render_isolated(found, tensors),
            "everywhere": found.locus.everywhere,
            "none": found.sentence if found.locus.is_empty else None,
            "sentence": found.sentence,
            **near,
            "fraction_below": found.fraction_below,
            "ranges": [list(limits) for limits in found.ranges],
            "cone": _render_cone(found),
        }
    )


def _render_isolated(found: Sought, tensors: list[PropertyTensor]) -> list[dict[str, Any]]:
    deviations = [tensor.estimate.value_sigma(found.locus.lines) for tensor in tensors]
    return [
        {
            "vector": line.tolist(),
            "values": found.values[index].tolist(),
            "slopes": found.slopes[index].tolist(),
            "sigma": [None if each is None else float(each[index]) for each in deviations],
        }
        for index, line in enumerate(found.locus.lines)
    ]


def _render_cone(found: Sought) -> dict[str, Any] | None:
    cone = None if found.level is None else found.level.cone
    if cone is None:
        return None
    return {"axis": cone.axis.tolist(), "toward": cone.toward.tolist(), "half_angles": cone.half_angles.tolist()}


@router.post(
    "/miscut",
    summary="What a miscut does to the value along a direction, or how much miscut a tolerance allows",
    responses={200: {"model": seek_shapes.MiscutAnswer}},
)
def miscut(request: seek_shapes.MiscutRequest) -> JsonAnswer:
    """Exact extremes over the cap of all directions within the half-angle; vectors in the crystal frame."""
    if (request.half_angle is None) == (request.tolerance is None):
        raise InputError(
            "A miscut is asked for by half_angle or by tolerance, one of the two.",
            field="half_angle" if request.half_angle is None else "tolerance",
            hint="Give half_angle in degrees to get the extremes, or tolerance to get the largest half-angle.",
        )
    crystal = adapt_crystal(request.crystal)
    tensor = adapt_tensor(crystal, request.tensor)
    pose = adapt_pose(crystal, request.pose)
    given = request.direction
    with located("direction"):
        plain = {"specimen": given.specimen} if isinstance(given, parts.SpecimenVector) else given
        direction = resolve_direction(crystal, plain, pose)
    if request.half_angle is not None:
        found = measure_miscut(tensor.estimate, direction, request.half_angle)
    else:
        assert request.tolerance is not None
        found = find_allowed_miscut(tensor.estimate, direction, request.tolerance)
    answer: dict[str, Any] = {
        "nominal": found.nominal,
        "lowest": found.lowest,
        "highest": found.highest,
        "slope": found.slope,
        "half_angle": found.half_angle,
        "direction": direction.tolist(),
        "lowest_at": found.lowest_at.tolist(),
        "highest_at": found.highest_at.tolist(),
        "steepest": None if found.steepest is None else found.steepest.tolist(),
    }
    if found.sigma is not None:
        answer["sigma"] = found.sigma
    return JsonAnswer(answer)
