"""The call ``optics``: what light does in a transparent crystal, and in a plate that is cut from it."""

from __future__ import annotations

from typing import Any

import numpy as np
from fastapi import APIRouter

from app.consequences.indicatrix import Indicatrix, build_indicatrix
from app.consequences.optic_axes import OpticAxes, find_optic_axes
from app.consequences.plate import Plate, describe_plate
from app.consequences.refraction import Refraction, refract
from app.consequences.tilt import TiltTolerance
from app.errors import InputError, located
from app.web import optics_shapes, responses
from app.web.adaptors import adapt_crystal, adapt_directions, adapt_pose, adapt_tensor
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.rendering import render_array, render_frame
from app.web.requests import Tensor

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)


@router.post(
    "/optics",
    summary="Indices, vibrations and walk-off for a wave normal, optic axes, and the retardation of a plate",
    responses={200: {"model": optics_shapes.OpticsAnswer}},
)
def optics(request: optics_shapes.OpticsRequest) -> JsonAnswer:
    """The two waves of a wave normal in a crystal of the given relative permittivity."""
    crystal = adapt_crystal(request.crystal)
    _require_permittivity(request.tensor)
    tensor = adapt_tensor(crystal, request.tensor)
    pose = adapt_pose(crystal, request.pose)
    # A lone direction has no place in a list.
    normal = _adapt_direction(crystal, request.direction, pose, "direction")
    edge = None if request.edge is None else _adapt_direction(crystal, request.edge, pose, "edge")
    estimate = tensor.estimate
    with located("tensor.matrix" if request.tensor.free is None else "tensor.free"):
        indicatrix = build_indicatrix(estimate)
    refraction = refract(indicatrix, estimate, normal)
    plate = describe_plate(
        indicatrix,
        refraction,
        thickness=request.thickness,
        wavelength=request.wavelength,
        tolerance=request.tolerance,
        edge=edge,
    )
    optic_axes = find_optic_axes(indicatrix, estimate)
    answer = {
        **render_refraction(refraction),
        **render_optic_axes(optic_axes),
        **render_plate(plate),
        "principal": render_indices(indicatrix),
        "misfit": tensor.misfit,
        "frame": render_frame(crystal),
        "note": optic_axes.note,
    }
    if estimate.covariance is not None:
        answer |= render_sigma(refraction, optic_axes, plate)
    return JsonAnswer(answer)


def _require_permittivity(tensor: Tensor) -> None:
    for name, value, needed in (
        ("parity", tensor.parity, "polar"),
        ("intrinsic", tensor.intrinsic, "symmetric"),
    ):
        if value != needed:
            raise InputError(
                f"A relative permittivity is a {needed} tensor, not {value}.",
                field=f"tensor.{name}",
                hint="Leave parity and intrinsic out. Optical activity and absorption are not reckoned with here.",
            )


def _adapt_direction(crystal: Any, given: Any, pose: Any, field: str) -> Any:
    try:
        return adapt_directions(crystal, [given], pose, "")[0]
    except InputError as error:
        error.field = field + (error.field or "").removeprefix("[0]")
        raise


def render_refraction(refraction: Refraction) -> dict[str, Any]:
    """The two waves."""
    return {
        "normal": refraction.normal.tolist(),
        "indices": refraction.indices.tolist(),
        "vibrations": _render_pair(refraction.vibrations),
        "arbitrary": refraction.vibrations is None,
        "rays": _render_pair(refraction.rays),
        "walk_off": _render_pair(refraction.walk_off),
        "birefringence": refraction.birefringence,
    }


def _render_pair(pair: Any) -> list[Any]:
    return [None, None] if pair is None else pair.tolist()


def render_optic_axes(found: OpticAxes) -> dict[str, Any]:
    """Optic axes and their angle."""
    return {"axes": found.axes.tolist(), "two_v": found.two_v, "sign": found.sign, "cone": found.cone}


def render_indices(indicatrix: Indicatrix) -> dict[str, Any]:
    """Principal indices with the axes that are determined."""
    return {
        "values": indicatrix.indices.tolist(),
        "axes": [
            None if arbitrary else axis.tolist()
            for axis, arbitrary in zip(indicatrix.axes, indicatrix.arbitrary, strict=True)
        ],
        "shape": indicatrix.shape,
    }


def render_plate(plate: Plate) -> dict[str, Any]:
    """Retardation, thicknesses, tilts, azimuth."""
    tilt = None
    if plate.cut is not None and plate.beam is not None:
        tilt = {"tolerance": plate.tolerance, "cut": _render_tilt(plate.cut), "beam": _render_tilt(plate.beam)}
    return {
        "retardation": plate.retardation,
        "waves": plate.waves,
        "quarter_wave": plate.quarter_wave,
        "half_wave": plate.half_wave,
        "tilt": tilt,
        "azimuth": plate.azimuth,
    }


def _render_tilt(tilt: TiltTolerance) -> dict[str, Any]:
    return {
        "slope": tilt.slope,
        "toward": None if tilt.toward is None else tilt.toward.tolist(),
        "largest": tilt.largest,
    }


def render_sigma(refraction: Refraction, optic_axes: OpticAxes, plate: Plate) -> dict[str, Any]:
    """What the covariance of the permittivity leaves open."""
    return {
        "sigma": render_array(refraction.sigma),
        "birefringence_sigma": _render_number(refraction.birefringence_sigma),
        "retardation_sigma": _render_number(plate.retardation_sigma),
        "vibration_sigma": _render_number(refraction.vibration_sigma),
        "walk_off_sigma": render_array(refraction.walk_off_sigma),
        "two_v_sigma": optic_axes.two_v_sigma,
    }


def _render_number(value: float | None) -> float | None:
    return value if value is not None and np.isfinite(value) else None
