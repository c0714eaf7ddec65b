"""A closer look at a set of readings: the ladder of symmetries, and what each reading does."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from fastapi import APIRouter, Request

from app.crystal.crystal import Crystal
from app.errors import HalfturnError
from app.readings.diagnosis import MOST_READINGS, fit_robustly, measure_influence
from app.readings.fit import Fit
from app.readings.ladder import Ladder, climb_ladder
from app.readings.pairs import MOST_READINGS as MOST_PAIRED
from app.readings.pairs import compare_pairs
from app.readings.reading import Reading
from app.readings.report import describe_direction
from app.readings.simulation import describe_axes_check
from app.store.document import KeptProperty
from app.store.revisions import Kept
from app.tensor.printing import print_value
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.kept import kind_of, pose_of, print_own_unit
from app.web.pages import templates
from app.web.readings_view import fit_kept, require_property
from app.web.samples import store_of

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

HELD_BACK = 0.995
"""A weight below it is told."""


@router.post("/{sample_id}/readings/closer", summary="The ladder of symmetries, and what each reading does")
def look_closer(sample_id: str, request: Request) -> JsonAnswer:
    """``result`` is a piece of the page; nothing is kept."""
    kept = store_of(request).samples.get(sample_id)
    crystal, shown, fit, readings = fit_shown(kept)
    content = {
        "ladder": _describe_ladder(crystal, kept, shown, readings),
        "influence": _describe_influence(crystal, kept, shown, readings, fit),
        "pairs": _describe_pairs(crystal, kept, shown, readings, fit),
        "axes": _describe_axes(fit),
        "unit": print_own_unit(shown.unit),
    }
    return JsonAnswer({"result": templates.get_template("readings_closer.html").render(content)})


def fit_shown(kept: Kept) -> tuple[Crystal, KeptProperty, Fit, list[Reading]]:
    """The crystal, the property that is looked at, and the fit of its readings in use."""
    crystal, shown = require_property(kept)
    fit, readings = fit_kept(crystal, kept, shown)
    return crystal, shown, fit, readings


def _describe_ladder(crystal: Crystal, kept: Kept, shown: KeptProperty, readings: Sequence[Reading]) -> dict[str, Any]:
    try:
        ladder: Ladder = climb_ladder(
            crystal,
            kind_of(shown),
            readings,
            batches=dict(kept.document.batches),
            pose=pose_of(crystal, kept.document.pose),
        )
    except HalfturnError as error:
        return {"sentence": f"{error.message} {error.hint or ''}", "rows": []}
    rows = [
        {
            "name": test.rung.name,
            "count": test.rung.count,
            "claimed": test.claimed,
            "delta": "–" if test.delta_chi2 is None else f"{test.delta_chi2:.3g} on {test.delta_dof}",
            "p": "–" if test.p_value is None else f"{test.p_value:.2g}",
            "corrected": "–" if test.corrected is None else f"{test.corrected:.2g}",
            "verdict": test.verdict,
        }
        for test in ladder.rungs
        if len(test.rung.rotations) > 1
    ]
    return {"sentence": ladder.sentence, "rows": rows}


def _describe_influence(
    crystal: Crystal, kept: Kept, shown: KeptProperty, readings: Sequence[Reading], fit: Fit
) -> dict[str, Any] | None:
    if fit.free is None or len(readings) > MOST_READINGS:
        return None
    more: dict[str, Any] = {
        "batches": dict(kept.document.batches),
        "pose": pose_of(crystal, kept.document.pose),
    }
    kind = kind_of(shown)
    found = measure_influence(crystal, kind, readings, fit, **more)
    robust = None
    if fit.dof:
        robust = fit_robustly(crystal, kind, readings, fit, **more)
    rows = []
    for place, reading in enumerate(readings):
        carries = []
        if found.shares is not None:
            carries = [
                f"{fit.form.labels[cell]} {100 * found.shares[place, cell]:.0f} %"
                for cell in np.argsort(-found.shares[place])[:2].tolist()
                if found.shares[place, cell] > 0.15
            ]
        change = "no tensor without it"
        if found.determined[place]:
            cell = int(np.argmax(np.abs(found.changes[place])))
            change = f"{fit.form.labels[cell]} by {found.changes[place, cell]:+.3g}".replace("-", "−")
        rows.append(
            {
                "name": _name_reading(reading),
                "change": change,
                "carries": ", ".join(carries) or "–",
                "weight": None
                if robust is None or robust.weights[place] > HELD_BACK
                else f"{robust.weights[place]:.2f}",
            }
        )
    beside = None
    if robust is not None and robust.fit.free is not None:
        beside = [
            {"label": label, "plain": print_value(float(plain)), "robust": print_value(float(other))}
            for label, plain, other in zip(fit.form.labels, fit.free, robust.fit.free, strict=True)
        ]
    correlation = None
    if found.correlation is not None:
        correlation = [[f"{value:+.2f}".replace("-", "−") for value in row] for row in found.correlation.tolist()]
    return {
        "rows": rows,
        "robust": beside,
        "held": None if robust is None else int(np.sum(robust.weights < HELD_BACK)),
        "labels": list(fit.form.labels),
        "correlation": correlation,
    }


def _name_reading(reading: Reading) -> str:
    directions = [describe_direction(entry) for entry in (reading.direction, reading.second) if entry is not None]
    return " ".join([reading.kind, ", ".join(directions), reading.bar or ""]).strip()


def _describe_pairs(
    crystal: Crystal, kept: Kept, shown: KeptProperty, readings: Sequence[Reading], fit: Fit
) -> list[dict[str, str]]:
    if fit.estimate is None or len(readings) > MOST_PAIRED:
        return []
    pairs = compare_pairs(
        crystal,
        kind_of(shown),
        readings,
        fit.estimate.matrix,
        batches=dict(kept.document.batches),
        pose=pose_of(crystal, kept.document.pose),
    )
    return [
        {
            "names": f"{_name_reading(readings[pair.first])} and {_name_reading(readings[pair.second])}",
            "difference": print_value(pair.difference, pair.sigma),
            "p": "–" if pair.p_value is None else f"{pair.p_value:.2g}",
        }
        for pair in pairs[:20]
    ]


def _describe_axes(fit: Fit) -> str | None:
    if fit.free is None or fit.free_covariance is None or fit.principal is None:
        return None
    return describe_axes_check(fit.form, fit.free, fit.free_covariance, fit.principal)
