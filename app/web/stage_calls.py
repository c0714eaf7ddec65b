"""The calls ``align`` and ``stage``: how a crystal sits on a stage, and what settings bring a direction somewhere."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from fastapi import APIRouter

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, read_direction
from app.cutting.attitude import Sighting, find_attitude
from app.cutting.equivalents import Equivalent, list_equivalents
from app.cutting.reach import find_closest
from app.cutting.settings import Level, Setting, find_settings, measure_sensitivity
from app.cutting.stage import Axis, build_axis, compute_turn, find_axes_in_lab, read_lab
from app.errors import InputError, located
from app.tensor.pose import pose_from_matrix
from app.web import parts, responses, stage_shapes
from app.web.adaptors import adapt_crystal
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute

FloatArray = npt.NDArray[np.float64]

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)


@router.post(
    "/align",
    summary="How the crystal sits on the stage, from directions that were brought to known places",
    responses={200: {"model": stage_shapes.AlignAnswer}},
)
def align(request: stage_shapes.AlignRequest) -> JsonAnswer:
    """The least-squares rotation with its residuals, the hand, and assignments that fit as well."""
    crystal = adapt_crystal(request.crystal)
    axes = adapt_axes(request.axes or [])
    sightings = [
        _adapt_sighting(crystal, axes, given, f"sightings[{index}]") for index, given in enumerate(request.sightings)
    ]
    found = find_attitude(crystal, sightings)
    return JsonAnswer(
        {
            "matrix": found.matrix.tolist(),
            "residuals": found.residuals.tolist(),
            "rms": found.rms,
            "measured": found.measured.tolist(),
            "computed": found.computed.tolist(),
            "pairs": [list(pair) for pair in found.pairs],
            "hand": found.hand,
            "ambiguous": [
                {"assignment": list(entry.forms), "rms": entry.rms, "equivalent": entry.equivalent}
                for entry in found.ambiguous
            ],
            "notes": list(found.notes),
        }
    )


@router.post(
    "/stage",
    summary="Stage settings that bring a direction to a laboratory direction",
    responses={200: {"model": stage_shapes.StageAnswer}},
)
def stage(request: stage_shapes.StageRequest) -> JsonAnswer:
    """Every solution within travel, or how near the stage comes."""
    crystal = adapt_crystal(request.crystal)
    mounted = _read_rotation(request.U)
    axes = adapt_axes(request.axes)
    toward = read_lab(request.toward, "toward")
    target = _adapt_direction(crystal, request.target, "target")
    level, notes = None, []
    if request.level is not None:
        second = crystal.resolve(_adapt_direction(crystal, request.level.direction, "level.direction"))
        level = Level(mounted @ second, read_lab(request.level.toward, "level.toward"))
        if len(axes) < 3:
            level = None
            notes.append("Fewer than three axes leave no freedom, so the level direction has no say.")
    choices = list_equivalents(crystal, target, only_itself=not request.equivalents)
    solutions = []
    starts: list[tuple[Equivalent, int]] = []
    for choice in choices:
        for sense in (1, -1) if request.either_sense else (1,):
            if _is_known(starts, choice, sense):
                continue
            starts.append((choice, sense))
            settings = find_settings(axes, sense * (mounted @ choice.vector), toward, level)
            solutions += [_render_solution(axes, setting, choice, sense, toward) for setting in settings]
    solutions.sort(key=lambda entry: (round(entry["travel"], 9), str(entry["direction"])))
    closest = None
    if not solutions:
        vectors = np.array([sense * (mounted @ choice.vector) for choice, sense in starts])
        dials, off, which = find_closest(axes, vectors, toward)
        choice, sense = starts[which]
        closest = {"angles": list(dials), "off": off, "direction": choice.form, "sense": sense}
    return JsonAnswer(
        {
            "solutions": solutions,
            "closest": closest,
            "axes_in_lab": find_axes_in_lab(axes, solutions[0]["angles"]).tolist() if solutions else None,
            "notes": notes,
        }
    )


def _read_rotation(given: Any) -> FloatArray:
    try:
        return pose_from_matrix(given).matrix
    except InputError as error:
        error.field = "U"
        raise


def adapt_axes(given: Sequence[stage_shapes.StageAxis]) -> list[Axis]:
    """The axes of a request; errors name the one that is wrong."""
    axes = []
    for index, axis in enumerate(given):
        with located(f"axes[{index}]"):
            axes.append(build_axis(axis.name, axis.axis, axis.low, axis.high, axis.zero, axis.sense))
    return axes


def _is_known(starts: Sequence[tuple[Equivalent, int]], choice: Equivalent, sense: int) -> bool:
    """Whether the same vector was tried already: the opposite of one equivalent may be another one."""
    vector = sense * choice.vector
    return any(float(np.max(np.abs(vector - other * known.vector))) < 1e-9 for known, other in starts)


def _adapt_direction(crystal: Crystal, given: Any, field: str) -> Direction:
    with located(field):
        if isinstance(given, parts.SpecimenVector):
            raise InputError(
                "A direction in the specimen frame has no meaning on the stage.",
                hint="Give a row, a plane's normal or a vector in the crystal frame.",
            )
        direction = read_direction(given)
        crystal.resolve(direction)
        return direction


def _adapt_sighting(crystal: Crystal, axes: Sequence[Axis], given: stage_shapes.Sighting, field: str) -> Sighting:
    direction = _adapt_direction(crystal, given.direction, f"{field}.direction")
    weight = 1.0 if given.weight is None else given.weight
    if given.seen is not None:
        for name in ("angles", "toward"):
            if getattr(given, name) is not None:
                raise InputError(
                    "A sighting is given by seen, or by angles and toward, not by both.",
                    field=f"{field}.{name}",
                    hint="Take one of them out.",
                )
        return Sighting(direction, read_lab(given.seen, f"{field}.seen"), weight)
    if given.angles is None or given.toward is None:
        missing = (
            "seen" if given.angles is None and given.toward is None else "angles" if given.angles is None else "toward"
        )
        raise InputError(
            "A sighting says where its direction was seen.",
            field=f"{field}.{missing}",
            hint="Give seen, or the dial readings (angles) and where they brought the direction (toward).",
        )
    if not axes:
        raise InputError(
            "Dial readings need the axes of the stage.", field="axes", hint="Give the axes from base to head."
        )
    with located(field):
        turn = compute_turn(axes, given.angles)
    return Sighting(direction, turn.T @ read_lab(given.toward, f"{field}.toward"), weight)


def _render_solution(
    axes: Sequence[Axis], setting: Setting, choice: Equivalent, sense: int, toward: FloatArray
) -> dict[str, Any]:
    answer: dict[str, Any] = {
        "angles": list(setting.dials),
        "direction": choice.form,
        "sense": sense,
        "travel": setting.travel,
        "sensitivity": measure_sensitivity(axes, setting.dials, toward).tolist(),
    }
    if setting.level_off is not None:
        answer["level_off"] = setting.level_off
    return answer
