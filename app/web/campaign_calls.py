"""The call ``campaign``: which bars to cut next, and what the tensor will be known to afterwards."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, read_direction
from app.crystal.lattice import find_nearest
from app.errors import InputError, located
from app.readings.campaign import Campaign, Plan, build_plan, plan_campaign
from app.readings.candidates import Candidates, list_candidates, resolve_candidates, spread_candidates
from app.readings.criterion import Criterion
from app.readings.information import renamed
from app.readings.prospect import count_needed, list_losses, rank_candidates
from app.readings.reading import Reading
from app.readings.sphere import GRID_POINTS
from app.readings.unseen import Unseen
from app.tensor.pose import Pose
from app.tensor.tensor import build_tensor
from app.web import campaign_shapes, parts, responses
from app.web.adaptors import FloatArray, adapt_crystal, adapt_kind, adapt_pose, adapt_readings
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.rendering import render_array, render_direction, render_reading

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)


@router.post(
    "/campaign",
    summary="Which bars to cut next, and what the tensor will be known to afterwards",
    responses={200: {"model": campaign_shapes.CampaignAnswer}},
)
def campaign(request: campaign_shapes.CampaignRequest) -> JsonAnswer:
    """The best next readings by a criterion; no single exchange for another candidate improves the choice."""
    crystal = adapt_crystal(request.crystal)
    pose = adapt_pose(crystal, request.pose)
    matrix = _adapt_values(crystal, request)
    with renamed("readings", "taken"):
        taken = adapt_readings(crystal, request.taken)
    candidates = _adapt_candidates(crystal, request.candidates, pose)
    plan = build_plan(
        crystal,
        adapt_kind(request.tensor),
        taken,
        candidates,
        request.sigma,
        matrix=matrix,
        direction_sigma=request.direction_sigma or 0.0,
        batches=request.batches,
        pose=pose,
    )
    given = request.criterion
    criterion = plan.read_criterion(given if isinstance(given, str) else given.model_dump())
    found = plan_campaign(plan, criterion, request.add)
    answer = _render_campaign(crystal, candidates, found)
    answer["matrix"] = render_array(matrix)
    answer["ranking"] = _render_ranking(plan, criterion, request.ranking)
    answer["losses"] = _render_losses(plan, criterion, found, taken) if request.losses else None
    answer["goal"] = None if request.goal is None else _render_goal(plan, request.goal)
    return JsonAnswer(answer)


def _adapt_values(crystal: Crystal, request: campaign_shapes.CampaignRequest) -> FloatArray | None:
    """The tensor's matrix, made to obey; None where no values were given."""
    given = request.tensor
    if given.matrix is None and given.free is None:
        return None
    kind = adapt_kind(given)
    with located("tensor"):
        return build_tensor(crystal, kind, matrix=given.matrix, free=given.free).estimate.matrix


def _adapt_candidates(crystal: Crystal, given: Any, pose: Pose) -> Candidates:
    with located("candidates"):
        if given == "sphere":
            return spread_candidates(GRID_POINTS)
        if isinstance(given, campaign_shapes.LowIndices):
            return list_candidates(crystal, given.max_index)
        directions = []
        for index, item in enumerate(given):
            with located(f"[{index}]"):
                plain = {"specimen": item.specimen} if isinstance(item, parts.SpecimenVector) else item
                directions.append(read_direction(plain))
        return resolve_candidates(crystal, directions, pose)


def _render_chosen(direction: Direction) -> Any:
    """As it was typed, where it was typed."""
    return render_direction(direction) if direction.text is None else direction.text


def _render_campaign(crystal: Crystal, candidates: Candidates, found: Campaign) -> dict[str, Any]:
    nearest = None
    if candidates.continuous and crystal.M is not None:
        nearest = [_render_nearest(crystal, vector) for vector in found.vectors]
    return {
        "chosen": [_render_chosen(direction) for direction in found.chosen],
        "vectors": found.vectors.tolist(),
        "nearest": nearest,
        "value": found.value,
        "value_before": found.criterion.value(found.before),
        "steps": list(found.steps),
        "condition": found.after.condition,
        "condition_before": found.before.condition,
        "sigma_before": render_array(found.before.sigma_matrix),
        "sigma_after": render_array(found.after.sigma_matrix),
        "determined": found.after.determined,
        "rank": found.after.rank,
        "free": found.form.labels,
        "undetermined": [_render_unseen(unseen) for unseen in found.undetermined],
        "note": " ".join(found.notes) or None,
    }


def _render_nearest(crystal: Crystal, vector: FloatArray) -> dict[str, Any]:
    row, plane = find_nearest(crystal, vector, "row"), find_nearest(crystal, vector, "normal")
    return {"row": row.text, "row_off": row.off, "plane": plane.text, "plane_off": plane.off}


def _render_unseen(unseen: Unseen) -> dict[str, Any]:
    return {
        "combination": unseen.combination.tolist(),
        "matrix": unseen.matrix.tolist(),
        "suggest": render_reading(unseen.suggestion),
    }


def _render_ranking(plan: Plan, criterion: Criterion, most: int) -> list[dict[str, Any]] | None:
    if most == 0:
        return None
    if plan.candidates.continuous:
        raise InputError(
            "The directions of a whole sphere cannot be ranked one by one.",
            field="ranking",
            hint='Give {"max_index": 2} or a list of directions as candidates, or leave the ranking out.',
        )
    return [
        {
            "direction": _render_chosen(plan.candidates.directions[entry.position]),
            "vector": plan.candidates.vectors[entry.position].tolist(),
            "value": entry.value,
            "gain": entry.gain,
            "rank": entry.after.rank,
            "sigma_after": render_array(entry.after.sigma_matrix),
        }
        for entry in rank_candidates(plan, criterion, most)
    ]


def _render_losses(plan: Plan, criterion: Criterion, found: Campaign, taken: list[Reading]) -> list[dict[str, Any]]:
    losses = []
    for loss in list_losses(plan, criterion, found.vectors):
        bar = taken[loss.readings[0]].bar if loss.readings else None
        losses.append(
            {
                "bar": bar,
                "reading": loss.readings[0] if loss.readings and bar is None else None,
                "chosen": loss.chosen,
                "determined": loss.left.determined,
                "rank": loss.left.rank,
                "condition": loss.left.condition,
                "value": loss.value,
                "sigma_after": render_array(loss.left.sigma_matrix),
            }
        )
    return losses


def _render_goal(plan: Plan, goal: campaign_shapes.Goal) -> dict[str, Any]:
    need = count_needed(plan, goal.cell, goal.sigma)
    return {
        "count": need.count,
        "chosen": [{"direction": _render_chosen(direction), "count": count} for direction, count in need.directions],
        "sigma": need.sigma,
        "sentence": need.sentence,
    }
