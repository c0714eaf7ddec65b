"""The laboratory's stages: kept once, edited anywhere, used by every sample."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any

import numpy as np
from fastapi import APIRouter, Request
from pydantic import Field

from app.cutting.presets import PRESETS, ask_dry_run
from app.cutting.stage import Axis, build_axis, read_lab
from app.cutting.transfer import Transfer, find_transfer
from app.errors import InputError, located
from app.store import Store
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Typed
from app.web.parts import Part
from app.web.samples import store_of
from app.web.stage_shapes import Angle, LabVector, StageAxis

router = APIRouter(prefix="/api", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

KEY = "stages"
MOST_STAGES = 40


class KeptAxis(StageAxis):
    """An axis with the step of its dial."""

    step: Angle = Field(0.1, ge=0, description="smallest step that can be set, degrees")


class TransferCut(Part):
    """A cut between bench and saw: the normal that was meant and the one that was measured, laboratory frame."""

    wanted: LabVector
    achieved: LabVector


class KeptStage(Part):
    """A stage of the laboratory."""

    id: Typed
    name: Typed
    axes: Annotated[list[KeptAxis], Field(min_length=1, max_length=3)] = Field(description="from base to head")
    sight: LabVector = Field(description="direction to which a sighted normal is brought on the X-ray bench")
    blade: LabVector = Field(description="normal of the blade")
    transfer: Annotated[list[TransferCut], Field(max_length=200)] = Field([], description="cuts that calibrate the saw")


class StagesRequest(Part):
    """All stages of the laboratory, in place of those that stand."""

    stages: Annotated[list[KeptStage], Field(max_length=MOST_STAGES)]


def list_stages(store: Store) -> list[dict[str, Any]]:
    """The kept stages; the presets where none was kept yet."""
    kept = store.laboratory.get(KEY)
    if isinstance(kept, list) and kept:
        return [{"transfer": [], **entry} for entry in kept]
    return [{"id": f"preset{number + 1}", "transfer": [], **preset} for number, preset in enumerate(PRESETS)]


def find_stage(store: Store, wanted: Any) -> dict[str, Any]:
    """The stage with an id, else the first."""
    stages = list_stages(store)
    return next((stage for stage in stages if stage["id"] == wanted), stages[0])


def build_axes(stage: Mapping[str, Any]) -> list[Axis]:
    """The axes of a kept stage."""
    axes = []
    for number, given in enumerate(stage["axes"]):
        with located(f"axes[{number}]"):
            axes.append(
                build_axis(
                    str(given["name"]),
                    given["axis"],
                    float(given["low"]),
                    float(given["high"]),
                    float(given.get("zero", 0.0)),
                    int(given.get("sense", 1)),
                )
            )
    return axes


def read_transfer(stage: Mapping[str, Any]) -> Transfer | None:
    """The turn between bench and saw; None where fewer than two cuts in different directions were measured."""
    cuts = stage.get("transfer", [])
    if len(cuts) < 2:
        return None
    try:
        return find_transfer(
            np.array([read_lab(cut["wanted"], "wanted") for cut in cuts]),
            np.array([read_lab(cut["achieved"], "achieved") for cut in cuts]),
        )
    except InputError:
        return None


def describe_stage(stage: Mapping[str, Any]) -> dict[str, Any]:
    """A stage with the question that confirms each dial."""
    return {**stage, "questions": [ask_dry_run(axis) for axis in build_axes(stage)]}


@router.get("/stages", summary="The laboratory's stages")
def stages(request: Request) -> JsonAnswer:
    """Each with the questions that confirm the senses of its dials."""
    return JsonAnswer([describe_stage(stage) for stage in list_stages(store_of(request))])


@router.post("/stages", summary="Keep the laboratory's stages")
def keep_stages(given: StagesRequest, request: Request) -> JsonAnswer:
    """They belong to the laboratory, not to a sample; the last list put stands."""
    store = store_of(request)
    if not given.stages:
        raise InputError("A laboratory has one stage or more.", field="stages", hint="Start from a preset.")
    for number, stage in enumerate(given.stages):
        with located(f"stages[{number}]"):
            build_axes(stage.model_dump())
    store.laboratory.put(KEY, [stage.model_dump() for stage in given.stages])
    return JsonAnswer([describe_stage(stage) for stage in list_stages(store)])
