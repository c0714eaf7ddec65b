"""The orientation of a finished part, measured afterwards, and as the direction of that part's readings."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction
from app.cutting.attitude import find_attitude
from app.cutting.settings import find_settings
from app.cutting.stage import compute_turn, read_lab
from app.errors import InputError, located
from app.store import Store
from app.store.canonical import plain
from app.store.document import SampleDocument, change_document, current_property
from app.tensor.pose import read_pose
from app.tensor.principal import find_principal
from app.tensor.sentence import place_direction, print_angle
from app.web.cut_target import Target, find_target
from app.web.kept import crystal_for, crystal_of, entry_of, tensor_of
from app.web.kept_parts import current_part as current_part_of
from app.web.sightings_view import take_sightings
from app.web.stages import KEY, build_axes, find_stage, list_stages

FloatArray = npt.NDArray[np.float64]


def find_achieved(crystal: Crystal, target: Target, achieved: Mapping[str, Any]) -> FloatArray:
    """The achieved normal, unit vector, crystal frame: the target tilted toward a direction.

    Raises:
        InputError: at ``toward``: it cannot be read, or lies along the target.
    """
    tilt = float(achieved["tilt"])
    if tilt == 0:
        return target.vector
    with located("toward"):
        toward = crystal.resolve(read_direction(str(achieved["toward"])))
    pose = read_pose({"from": target.vector.tolist(), "tilt": tilt, "toward": toward.tolist()}, crystal)
    vector: FloatArray = pose.matrix[2]
    return vector


def describe_achieved(crystal: Crystal, target: Target, part: Mapping[str, Any]) -> dict[str, Any] | None:
    """Where the finished face lies, and whether that is within what was allowed; None until it was measured."""
    achieved = part.get("achieved")
    if achieved is None:
        return None
    with located("part.achieved"):
        vector = find_achieved(crystal, target, achieved)
    allowed = part["tolerance"].get("half_angle")
    tilt = float(achieved["tilt"])
    within = allowed is None or tilt <= float(allowed) + 1e-9
    return {
        "vector": vector.tolist(),
        "place": place_direction(crystal, vector).text,
        "tilt": print_angle(tilt),
        "within": within,
    }


def give_achieved(document: SampleDocument, part: Mapping[str, Any] | None) -> SampleDocument:
    """The document whose readings of the bar of the part's name have the achieved direction.

    Raises:
        InputError: there is no part, nothing was measured, or no reading names that bar.
    """
    shown = current_property(document)
    if part is None or shown is None or part.get("achieved") is None:
        raise InputError("Nothing was measured on the finished part yet.", field="give_readings")
    crystal = crystal_of(document.crystal)
    estimate = tensor_of(crystal_for(crystal, document.crystal, entry_of(shown)), shown).estimate
    target = find_target(crystal, find_principal(estimate), document, part["target"])
    vector = find_achieved(crystal, target, part["achieved"])
    readings, changed = [], 0
    for reading in document.readings:
        plain = reading.plain()
        if reading.property == shown.id and reading.bar == part["name"] and plain.get("direction") is not None:
            plain |= {"direction": {"xyz": [float(x) for x in vector]}}
            if part["achieved"].get("sigma") is not None:
                plain["direction_sigma"] = float(part["achieved"]["sigma"])
            changed += 1
        readings.append(plain)
    if not changed:
        raise InputError(
            f"No reading names the bar {part['name']}.",
            field="give_readings",
            hint="Give the part and the bar of its readings one name.",
        )
    return change_document(document, {"readings": readings})


def calibrate_saw(store: Store, document: SampleDocument) -> None:
    """Keep what the saw made of the part with the laboratory's stage: the blade's normal meant, and the one achieved.

    Raises:
        InputError: nothing was measured, or the crystal is not sighted, so that the achieved normal is not known in the
            laboratory.
    """
    part, shown = current_part_of(document), current_property(document)
    if part is None or shown is None or part.get("achieved") is None:
        raise InputError("Nothing was measured on the finished part yet.", field="calibrate")
    crystal = crystal_of(document.crystal)
    stage = find_stage(store, document.looking.get("stage"))
    sightings = take_sightings(crystal, stage, [plain(entry) for entry in document.sightings])
    attitude = find_attitude(crystal, sightings)
    estimate = tensor_of(crystal_for(crystal, document.crystal, entry_of(shown)), shown).estimate
    target = find_target(crystal, find_principal(estimate), document, part["target"])
    axes, blade = build_axes(stage), read_lab(stage["blade"], "blade")
    best: tuple[float, FloatArray] | None = None
    for sense in (1, -1) if part.get("either_sense", True) else (1,):
        for setting in find_settings(axes, sense * (attitude.matrix @ target.vector), blade):
            if best is None or setting.travel < best[0]:
                turn = compute_turn(axes, setting.dials)
                achieved = find_achieved(crystal, target, part["achieved"])
                best = (setting.travel, sense * (turn @ attitude.matrix @ achieved))
    if best is None:
        raise InputError("The target is not within reach of the stage, so it was cut otherwise.", field="calibrate")
    cut = {"wanted": blade.tolist(), "achieved": best[1].tolist()}
    stages = [
        {**entry, "transfer": [*entry["transfer"], cut]} if entry["id"] == stage["id"] else entry
        for entry in list_stages(store)
    ]
    store.laboratory.put(KEY, stages)
