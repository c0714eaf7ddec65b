"""What the Cut page shows: the part's target, what a miscut costs, candidates over every property, the part itself."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.cutting.miscut import Miscut, find_allowed_miscut, measure_miscut
from app.cutting.transfer import Transfer
from app.errors import HalfturnError, InputError, located
from app.store.canonical import plain
from app.store.document import KeptProperty, SampleDocument, current_property
from app.store.revisions import Kept
from app.tensor.estimate import Estimate
from app.tensor.lock import explain_cells
from app.tensor.pose import Pose
from app.tensor.principal import Principal, find_principal
from app.tensor.printing import print_value
from app.tensor.sentence import print_angle
from app.tensor.tensor import PropertyTensor
from app.web.achieved import describe_achieved
from app.web.cut_comparison import compare_cuts
from app.web.cut_target import WAYS, Target, find_part_pose, find_target
from app.web.kept import crystal_for, crystal_of, entry_of, print_own_unit, tensor_of
from app.web.kept_parts import current_part, list_parts
from app.web.part_drawing import draw_blade, draw_part
from app.web.part_view import SHAPES, describe_part
from app.web.posed import render_number
from app.web.sightings_view import describe_attitude, describe_settings
from app.web.sought import list_sought
from app.web.stages import describe_stage, read_transfer
from app.web.stereogram import Mark, Picture, draw_stereogram
from app.web.stereogram_view import list_poles, list_principal, list_specimen, trace_levels

FloatArray = npt.NDArray[np.float64]


def describe_cut(kept: Kept, stages: Sequence[Mapping[str, Any]]) -> dict[str, Any]:
    """Everything of the page; ``problem`` says why something cannot be computed.

    Args:
        kept: the sample.
        stages: the laboratory's, the first one the usual.
    """
    document = kept.document
    part = current_part(document)
    stage = next((entry for entry in stages if entry["id"] == document.looking.get("stage")), stages[0])
    sightings = [plain(entry) for entry in document.sightings]
    content: dict[str, Any] = {
        "stages": [{"id": entry["id"], "name": entry["name"]} for entry in stages],
        "stage": describe_stage(stage),
        "sightings": sightings,
        "attitude": None,
        "settings": None,
        "parts": [{"id": entry["id"], "name": entry["name"]} for entry in list_parts(document)],
        "part": part,
        "ways": WAYS,
        "shapes": SHAPES,
        "headline": "No part yet.",
        "second_line": "Make one: say what its face or length shall lie along, and how far the saw may be off.",
        "target": None,
        "tolerance": None,
        "candidates": None,
        "wedge": None,
        "achieved": None,
        "result": None,
        "problem": None,
        "unit": "",
        "properties": list_sought(document),
    }
    try:
        crystal = crystal_of(document.crystal)
        content["attitude"], attitude = describe_attitude(crystal, stage, sightings)
        if part is None:
            return content
        shown = _require(document)
        described, target = _describe(crystal, document, shown, part, read_transfer(stage))
        content |= described
        if attitude is not None:
            content["settings"] = describe_settings(crystal, stage, attitude, target, part)
    except HalfturnError as error:
        content["headline"] = (
            "This sample cannot be worked out." if part is None else f"{part['name']} cannot be worked out."
        )
        content["second_line"] = error.message
        content["problem"] = {"message": error.message, "hint": error.hint, "field": error.field}
    return content


def _require(document: SampleDocument) -> KeptProperty:
    shown = current_property(document)
    if shown is None:
        raise InputError(
            "This sample has no property to cut for.", hint="Add one in the strip, under property and unit."
        )
    return shown


def _describe(
    crystal: Crystal,
    document: SampleDocument,
    shown: KeptProperty,
    part: Mapping[str, Any],
    transfer: Transfer | None,
) -> tuple[dict[str, Any], Target]:
    entry = entry_of(shown)
    tensor = tensor_of(crystal_for(crystal, document.crystal, entry), shown)
    principal = find_principal(tensor.estimate)
    with located("part.target"):
        target = find_target(crystal, principal, document, part["target"])
    with located("part"):
        pose = find_part_pose(crystal, target, str(part["edge"]))
    unit = print_own_unit(shown.unit)
    unit = "" if unit == "1" else unit
    miscut = _find_miscut(tensor.estimate, target.vector, part["tolerance"])
    other = {"rod": "long bar", "plate": "wide plate"}.get(
        "rod" if entry.long_bar == "rod" else "plate" if entry.plate == "rod" else ""
    )
    value = print_value(miscut.nominal, miscut.sigma)
    described = describe_part(crystal, tensor.estimate, other, part, pose)
    answer = {
        "unit": unit,
        "headline": f"{part['name']}, along {target.name}: {value} {unit}".rstrip() + ".",
        "second_line": f"Off by up to {print_angle(miscut.half_angle)} it reads {_print_range(miscut)} {unit}".rstrip()
        + ".",
        "target": {"name": target.name, "place": target.place},
        "tolerance": _describe_miscut(miscut, part["tolerance"], unit, transfer),
        "candidates": compare_cuts(crystal, document, principal, target),
        "wedge": _describe_wedge(tensor.estimate, target.vector, part),
        "achieved": describe_achieved(crystal, target, part),
        "result": {
            **{key: described[key] for key in ("size", "raw", "judged", "cuts", "reads")},
            "other": other,
            "frame": f"z along {target.name}, x as near to {part['edge']} as it can be, y = z × x",
            "cells": _render_cells(crystal, tensor, described["posed"], pose),
            "drawing": draw_part(described["size"], str(part["shape"])),
            "blade": draw_blade(float(part["kerf"]), float(part["stock"])),
            "stereogram": _draw(crystal, tensor, principal, target, pose),
        },
    }
    return answer, target


def _find_miscut(estimate: Estimate, vector: FloatArray, tolerance: Mapping[str, Any]) -> Miscut:
    with located("part.tolerance"):
        if tolerance.get("value") is not None:
            return find_allowed_miscut(estimate, vector, float(tolerance["value"]))
        return measure_miscut(estimate, vector, float(tolerance.get("half_angle", 0.5)))


def _print_range(miscut: Miscut) -> str:
    spread = max(abs(miscut.highest - miscut.nominal), abs(miscut.nominal - miscut.lowest))
    digits = 4 if spread == 0 else max(4, int(np.ceil(np.log10(max(abs(miscut.nominal), spread) / spread))) + 2)
    low, high = (f"{number:.{min(digits, 9)}g}".replace("-", "−") for number in (miscut.lowest, miscut.highest))
    return f"{low} to {high}"


def _describe_miscut(
    miscut: Miscut, tolerance: Mapping[str, Any], unit: str, transfer: Transfer | None
) -> dict[str, Any]:
    """The value, its slope and extremes, and where the uncertainty comes from."""
    tilted = max(miscut.highest - miscut.nominal, miscut.nominal - miscut.lowest)
    budget = [{"source": "measurement σ", "value": None if miscut.sigma is None else f"{miscut.sigma:.2g}"}]
    # The cap is taken as twice the standard deviation of the tilt.
    budget.append({"source": "miscut, half the largest change in the cone", "value": f"{tilted / 2:.2g}"})
    carried = 0.0
    if transfer is not None and transfer.sigma is not None:
        carried = miscut.slope * transfer.sigma
        budget.append({"source": "transfer from bench to saw", "value": f"{carried:.2g}"})
    together = float(np.linalg.norm([miscut.sigma or 0.0, tilted / 2, carried]))
    budget.append({"source": "together", "value": f"{together:.2g}"})
    return {
        "asked": "value" if tolerance.get("value") is not None else "half_angle",
        "nominal": print_value(miscut.nominal, miscut.sigma),
        "slope": f"{miscut.slope:.3g}",
        "lowest": f"{miscut.lowest:.6g}".replace("-", "−"),
        "highest": f"{miscut.highest:.6g}".replace("-", "−"),
        "half_angle": print_angle(miscut.half_angle),
        "budget": budget,
        "unit": unit,
    }


def _describe_wedge(estimate: Estimate, vector: FloatArray, part: Mapping[str, Any]) -> dict[str, str] | None:
    """What a wedge between the two faces does, apart from the tilt of the first; None where none is allowed for."""
    wedge = float(part.get("wedge") or 0.0)
    if wedge <= 0:
        return None
    tilt = float(part["tolerance"].get("half_angle", 0.5))
    second = measure_miscut(estimate, vector, min(90.0, tilt + wedge))
    width = max(float(part["size"][0]), float(part["size"][1]))
    return {
        "wedge": print_angle(wedge),
        "thickness": f"{1000.0 * width * float(np.tan(np.deg2rad(wedge))):.3g} µm",
        "second": _print_range(second),
    }


def _render_cells(crystal: Crystal, tensor: PropertyTensor, posed: Estimate, pose: Pose) -> list[list[dict[str, Any]]]:
    sigmas = posed.sigma_matrix
    cells = [
        {
            "state": "zero" if lock.state == "zero" else "free",
            "because": lock.because,
            "equals": lock.equals,
            "number": render_number(
                0.0 if lock.state == "zero" else float(posed.matrix.flat[place]),
                None if sigmas is None or lock.state == "zero" else float(sigmas.flat[place]),
            ),
        }
        for place, lock in enumerate(explain_cells(crystal, tensor.form, pose.matrix))
    ]
    return [cells[0:3], cells[3:6], cells[6:9]]


def _draw(crystal: Crystal, tensor: PropertyTensor, principal: Principal, target: Target, pose: Pose) -> str:
    marks = [Mark(target.vector, "target", "target", line=True), *list_principal(principal)]
    marks += list_specimen(pose.matrix) + list_poles(crystal, 1, ("normal", "row"))
    title = f"Stereogram with the target {target.name}, the part's axes and the principal axes"
    return draw_stereogram(crystal, Picture(marks, trace_levels(tensor.estimate.matrix)), title=title)
