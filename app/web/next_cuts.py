"""Next cuts: proposals on the Readings page, from the readings that are there."""

from __future__ import annotations

from typing import Annotated, Any, Final, Literal

import numpy as np
from fastapi import APIRouter, Request
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import InputError, located
from app.readings.campaign import Plan, build_plan, plan_campaign
from app.readings.candidates import Candidates, list_candidates, resolve_candidates, spread_candidates
from app.readings.criterion import Criterion
from app.readings.prospect import count_needed, list_losses, rank_candidates
from app.readings.report import describe_direction
from app.readings.sphere import GRID_POINTS
from app.readings.table_cells import read_direction_cell
from app.store.document import KeptProperty
from app.tensor.pose import Pose
from app.tensor.sentence import print_angle
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of, print_own_unit, tensor_of
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.readings_closer import fit_shown
from app.web.samples import store_of
from app.web.stereogram import Picture, draw_stereogram
from app.web.stereogram_view import list_directions, list_poles

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


RANKED: Final = 8
"""So many candidates are listed with what each alone would bring."""


class NextCutsRequest(Part):
    """How many bars may be cut, and what is wanted of them."""

    add: int = Field(3, ge=1, le=24)
    max_index: int | None = Field(2, ge=1, le=6, description="of planes and rows; null for any direction")
    listed: str | None = Field(None, max_length=4000, description="directions with commas between, instead")
    criterion: Literal["D", "A"] | Annotated[str, Field(pattern=r"^([1-3][1-3]|p[1-3])$")] = Field(
        "D", description="all cells together, the sum of variances, one cell by its label, one axis as p1"
    )
    sigma: Number = Field(gt=0, description="of a further reading")
    direction_sigma: Annotated[float, Field(ge=0, le=30)] = Field(0.0, description="of a further bar, degrees")
    goal: Annotated[float, Field(gt=0)] | None = Field(None, description="σ to reach in the cell of the criterion")


@router.post("/{sample_id}/readings/next-cuts", summary="Which bars to cut next")
def next_cuts(sample_id: str, given: NextCutsRequest, request: Request) -> JsonAnswer:
    """``chosen`` are directions; ``result`` is a piece of the page; nothing is kept."""
    kept = store_of(request).samples.get(sample_id)
    crystal, shown, fit, readings = fit_shown(kept)
    matrix = None if fit.estimate is None else fit.estimate.matrix
    if matrix is None:
        matrix = _take_kept(crystal, shown)
    candidates = _take_candidates(crystal, given, pose_of(crystal, kept.document.pose))
    plan = build_plan(
        crystal,
        kind_of(shown),
        readings,
        candidates,
        given.sigma,
        matrix=matrix,
        direction_sigma=given.direction_sigma,
        batches=dict(kept.document.batches),
        pose=pose_of(crystal, kept.document.pose),
    )
    criterion = plan.read_criterion(_spell_criterion(given.criterion))
    found = plan_campaign(plan, criterion, given.add)
    names = [_name(crystal, direction, vector) for direction, vector in zip(found.chosen, found.vectors, strict=True)]
    goal = None
    if given.goal is not None and criterion.kind == "cell":
        goal = count_needed(plan, given.criterion, given.goal).sentence
    losses = [
        {
            "bar": names[loss.chosen] if loss.chosen is not None else readings[loss.readings[0]].bar or "a reading",
            "left": "determined" if loss.left.determined else "no tensor without it",
            "condition": "–" if loss.left.condition is None else f"{loss.left.condition:.3g}",
        }
        for loss in list_losses(plan, criterion, found.vectors)
    ]
    marks = list_directions(found.vectors, "proposed", [f"{k + 1}" for k in range(len(names))])
    content = {
        "names": names,
        "before": _print_sigmas(found.before.sigma_matrix),
        "after": _print_sigmas(found.after.sigma_matrix),
        "condition": None if found.after.condition is None else f"{found.after.condition:.3g}",
        "determined": found.after.determined,
        "notes": list(found.notes),
        "losses": losses,
        "goal": goal,
        "ranking": _rank(crystal, plan, criterion),
        "unit": print_own_unit(shown.unit),
        "stereogram": draw_stereogram(
            crystal, Picture([*marks, *list_poles(crystal)]), title="Stereogram with the proposed cuts"
        ),
    }
    result = templates.get_template("next_cuts.html").render(content)
    return JsonAnswer({"chosen": names, "vectors": found.vectors.tolist(), "result": result})


def _spell_criterion(given: str) -> str | dict[str, Any]:
    if given in ("D", "A"):
        return given
    return {"axis": int(given[1])} if given[0] == "p" else {"cell": given}


def _take_candidates(crystal: Crystal, given: NextCutsRequest, pose: Pose) -> Candidates:
    if given.listed is not None:
        with located("listed"):
            cells = [cell.strip() for cell in given.listed.split(",") if cell.strip()]
            if not cells:
                raise InputError("No direction is listed.", hint="Write them with commas between: (1 0 0), [0 1 1].")
            return resolve_candidates(crystal, [read_direction_cell(cell) for cell in cells], pose)
    if given.max_index is None:
        return spread_candidates(GRID_POINTS)
    return list_candidates(crystal, given.max_index)


def _rank(crystal: Crystal, plan: Plan, criterion: Criterion) -> list[dict[str, str]]:
    """The best single candidates; none of a whole sphere, which cannot be listed."""
    if plan.candidates.continuous:
        return []
    found = rank_candidates(plan, criterion, RANKED)
    return [
        {
            "name": _name(crystal, plan.candidates.directions[entry.position], plan.candidates.vectors[entry.position]),
            "gain": f"{entry.gain:.2f}",
            "sigma": "–" if np.isnan(entry.after.sigma_matrix).all() else f"{np.nanmax(entry.after.sigma_matrix):.2g}",
        }
        for entry in found
    ]


def _take_kept(crystal: Crystal, shown: KeptProperty) -> Any:
    """The kept tensor, where the readings give none; None where that is zero."""
    matrix = tensor_of(crystal, shown).estimate.matrix
    return matrix if np.any(matrix) else None


def _name(crystal: Crystal, direction: Direction, vector: Any) -> str:
    if direction.kind in ("row", "normal"):
        return describe_direction(direction)
    if crystal.M is None:
        return describe_direction(direction)
    near = min((find_nearest(crystal, vector, kind) for kind in ("row", "normal")), key=lambda entry: entry.off)
    return f"{print_angle(near.off)} off {typeset_indices(near.text)}"


def _print_sigmas(matrix: Any) -> list[list[str]]:
    return [["–" if not np.isfinite(value) else f"{value:.2g}" for value in row] for row in matrix.tolist()]
