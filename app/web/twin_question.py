"""A twin law with a fraction, asked of the sample's readings."""

from __future__ import annotations

from typing import Any

import numpy as np
from fastapi import APIRouter, Request
from pydantic import Field
from scipy.spatial.transform import Rotation

from app.errors import located
from app.readings.report import describe_direction
from app.readings.table_cells import read_direction_cell
from app.readings.twin import fit_twin
from app.tensor.pose import resolve_direction
from app.tensor.printing import print_value
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of, print_own_unit
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.readings_closer import fit_shown
from app.web.samples import store_of

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class TwinRequest(Part):
    """The law: what turns one individual into the other."""

    about: str = Field(description="row or plane normal, as in the table of readings")
    angle: Number = Field(180.0, description="degrees, right-handed; 180 stands for a mirror plane across too")


@router.post("/{sample_id}/readings/twin", summary="How much of the crystal a twin law has turned")
def twin(sample_id: str, given: TwinRequest, request: Request) -> JsonAnswer:
    """``fraction`` is null where it is refused; ``result`` is a piece of the page; nothing is kept."""
    kept = store_of(request).samples.get(sample_id)
    crystal, shown, _, readings = fit_shown(kept)
    pose = pose_of(crystal, kept.document.pose)
    with located("about"):
        direction = read_direction_cell(given.about)
        axis = resolve_direction(crystal, direction, pose)
    law = Rotation.from_rotvec(np.deg2rad(given.angle) * axis).as_matrix()
    found = fit_twin(crystal, kind_of(shown), readings, law, batches=dict(kept.document.batches), pose=pose)
    sigmas: list[float | None] = [None] * found.form.count
    if found.free_covariance is not None:
        sigmas = [float(value) for value in np.sqrt(np.diag(found.free_covariance))]
    cells = [
        {"label": label, "value": "refused" if np.isnan(value) else print_value(float(value), sigma)}
        for label, value, sigma in zip(found.form.labels, found.free.tolist(), sigmas, strict=True)
    ]
    content: dict[str, Any] = {
        "sentence": found.sentence,
        "law": f"{given.angle:g}° about {describe_direction(direction)}",
        "fraction": found.fraction,
        "cells": cells,
        "chi2": None if found.chi2 is None else f"{found.chi2:.3g} on {found.dof} to spare",
        "unit": print_own_unit(shown.unit),
    }
    return JsonAnswer({**content, "result": templates.get_template("twin.html").render(content)})
