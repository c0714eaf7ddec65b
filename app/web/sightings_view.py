"""What the Cut page shows of the stage: sightings and the attitude that they give, and the settings for the part."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction, typeset_indices
from app.cutting.attitude import Attitude, Sighting, find_attitude
from app.cutting.equivalents import Equivalent, list_equivalents
from app.cutting.further_sighting import propose_sighting
from app.cutting.presets import name_lab
from app.cutting.reach import find_closest
from app.cutting.settings import Setting, find_settings, measure_sensitivity
from app.cutting.stage import Axis, compute_turn, read_lab
from app.errors import HalfturnError, InputError, located
from app.tensor.sentence import print_angle
from app.web.cut_target import Target
from app.web.stages import build_axes, read_transfer

FloatArray = npt.NDArray[np.float64]

SHOWN_SOLUTIONS = 12


def take_sightings(crystal: Crystal, stage: Mapping[str, Any], kept: Sequence[Mapping[str, Any]]) -> list[Sighting]:
    """The kept sightings on a stage. Raises InputError at ``sightings[i].…``."""
    axes, sight = build_axes(stage), read_lab(stage["sight"], "sight")
    taken = []
    for number, given in enumerate(kept):
        with located(f"sightings[{number}]"):
            with located("direction"):
                direction = read_direction(str(given["direction"]))
                crystal.resolve(direction)
            turn = compute_turn(axes, [float(angle) for angle in given["angles"]])
            seen = read_lab(given["toward"], "toward") if given.get("toward") else sight
            taken.append(Sighting(direction, turn.T @ seen, float(given.get("weight") or 1.0)))
    return taken


def describe_attitude(
    crystal: Crystal, stage: Mapping[str, Any], kept: Sequence[Mapping[str, Any]]
) -> tuple[dict[str, Any], Attitude | None]:
    """Residuals and warnings in words, and the attitude; None where the sightings do not give one."""
    if not kept:
        return {"problem": None, "rows": [], "pairs": [], "notes": []}, None
    try:
        sightings = take_sightings(crystal, stage, kept)
        found = find_attitude(crystal, sightings)
    except HalfturnError as error:
        return {
            "problem": {"message": error.message, "hint": error.hint, "field": error.field},
            "rows": [],
            "pairs": [],
            "notes": [],
        }, None
    others = [entry for entry in found.ambiguous if not entry.equivalent]
    notes = list(found.notes)
    if others:
        first = ", ".join(_name(form) for form in others[0].forms)
        notes.append(
            f"{len(others)} other assignment{'' if len(others) == 1 else 's'} of equivalent indices would fit as well, "
            f"and the crystal would sit otherwise: {first}. A further sighting decides."
        )
    pairs = [
        {
            "names": [_name(str(kept[one]["direction"])), _name(str(kept[two]["direction"]))],
            "measured": f"{found.measured[number]:.2f}°",
            "computed": f"{found.computed[number]:.2f}°",
        }
        for number, (one, two) in enumerate(found.pairs)
    ]
    return {
        "problem": None,
        "rms": print_angle(found.rms),
        "hand": {
            "right": "The crystal fits, its mirror image does not.",
            "mirror fits better": "Its mirror image fits better.",
            "cannot tell": "These sightings cannot tell the crystal from its mirror image.",
        }[found.hand],
        "rows": [print_angle(float(residual)) for residual in found.residuals],
        "pairs": pairs[:15],
        "notes": notes,
        "further": _suggest(crystal, stage, found, sightings),
    }, found


def _suggest(
    crystal: Crystal, stage: Mapping[str, Any], attitude: Attitude, sightings: Sequence[Sighting]
) -> dict[str, Any] | None:
    """The best further sighting, with its dials; None once there are four, or where none is within reach."""
    if len(sightings) > 3:
        return None
    axes = build_axes(stage)
    found = propose_sighting(crystal, attitude, sightings, axes, read_lab(stage["sight"], "sight"))
    if found is None:
        return None
    return {
        "form": found.form,
        "name": _name(found.form),
        "dials": _print_dials(axes, found.setting.dials, stage),
        "decides_hand": found.decides_hand,
    }


def _name(form: Any) -> str:
    if isinstance(form, str):
        return typeset_indices(form) if form.strip()[:1] in ("[", "(") else form
    return "(" + ", ".join(f"{part:.3f}" for part in form) + ")"


def describe_settings(
    crystal: Crystal, stage: Mapping[str, Any], attitude: Attitude, target: Target, part: Mapping[str, Any]
) -> dict[str, Any]:
    """How the stage brings the part's face to the blade; solutions in order of their travel, or how near it comes."""
    axes = build_axes(stage)
    transfer = read_transfer(stage)
    blade = read_lab(stage["blade"], "blade")
    # What the saw shall cut at the blade must be sent to where the transfer carries it there.
    wanted = blade if transfer is None else transfer.matrix.T @ blade
    choices = _list_choices(crystal, target, bool(part.get("equivalents", False)))
    senses = (1, -1) if part.get("either_sense", True) else (1,)
    found: list[tuple[Setting, Equivalent, int]] = []
    starts: list[tuple[FloatArray, Equivalent, int]] = []
    for choice in choices:
        for sense in senses:
            start = sense * (attitude.matrix @ choice.vector)
            if any(float(np.max(np.abs(start - other))) < 1e-9 for other, _, _ in starts):
                continue
            starts.append((start, choice, sense))
            found += [(setting, choice, sense) for setting in find_settings(axes, start, wanted)]
    found.sort(key=lambda entry: entry[0].travel)
    answer: dict[str, Any] = {
        "names": [axis.name for axis in axes],
        "blade": name_lab(blade),
        "transfer": None if transfer is None else print_angle(transfer.sigma or 0.0),
        "transfer_sigma": None if transfer is None else transfer.sigma,
        "solutions": [_render(axes, entry, wanted, stage) for entry in found[:SHOWN_SOLUTIONS]],
        "closest": None,
    }
    if not found:
        dials, off, which = find_closest(axes, np.array([start for start, _, _ in starts]), wanted)
        answer["closest"] = {
            "dials": _print_dials(axes, dials, stage),
            "off": print_angle(off),
            "direction": _name(starts[which][1].form),
        }
    return answer


def _list_choices(crystal: Crystal, target: Target, equivalents: bool) -> list[Equivalent]:
    own = Equivalent(target.vector, target.name)
    if not equivalents:
        return [own]
    direction = read_direction({"xyz": target.vector.tolist()})
    return [own, *list_equivalents(crystal, direction)[1:]]


def _render(
    axes: Sequence[Axis], entry: tuple[Setting, Equivalent, int], wanted: FloatArray, stage: Mapping[str, Any]
) -> dict[str, Any]:
    setting, choice, sense = entry
    return {
        "dials": _print_dials(axes, setting.dials, stage),
        "direction": ("−" if sense < 0 else "") + _name(choice.form),
        "travel": f"{setting.travel:.1f}°",
        "sensitivity": [f"{slope:.2f}" for slope in measure_sensitivity(axes, setting.dials, wanted)],
    }


def _print_dials(axes: Sequence[Axis], dials: Sequence[float], stage: Mapping[str, Any]) -> list[dict[str, str]]:
    """Signed, and to the step of the dial; never without the name of the axis."""
    printed = []
    for number, (axis, dial) in enumerate(zip(axes, dials, strict=True)):
        step = float(stage["axes"][number].get("step") or 0.01)
        decimals = max(0, min(4, int(np.ceil(-np.log10(step) - 1e-9)))) if step > 0 else 2
        text = f"{round(dial, decimals) + 0.0:+.{decimals}f}°".replace("-", "−")
        printed.append({"name": axis.name or f"axis {number + 1}", "angle": text})
    return printed


def check_sightings(given: Sequence[Mapping[str, Any]], stage: Mapping[str, Any]) -> None:
    """Refuse sightings with another number of readings than the stage has axes."""
    for number, sighting in enumerate(given):
        if len(sighting["angles"]) != len(stage["axes"]):
            raise InputError(
                f"The stage has {len(stage['axes'])} axes, and here are {len(sighting['angles'])} readings.",
                field=f"sightings[{number}].angles",
                hint="Give one for every axis, in their order from the base.",
            )
