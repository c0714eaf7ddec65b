"""The Readings page: a table of measured numbers, the tensor that it gives, and what it cannot tell."""

from __future__ import annotations

from typing import Any, Final
from urllib.parse import parse_qs

import numpy as np
from fastapi import APIRouter, Request, Response
from fastapi.responses import RedirectResponse

from app.crystal.crystal import Crystal
from app.errors import HalfturnError, InputError
from app.readings.fit import Fit, fit_readings
from app.readings.reading import Reading
from app.readings.report import (
    describe_combination,
    describe_direction,
    describe_suggestion,
    describe_symmetry_test,
)
from app.readings.table import read_table
from app.store.document import KeptProperty, change_document, current_property, readings_of
from app.store.revisions import Kept
from app.tensor.lock import explain_cells
from app.tensor.printing import print_value
from app.web.changes import TensorChange
from app.web.kept import crystal_for, crystal_of, entry_of, kind_of, pose_of, print_own_unit
from app.web.kept_readings import keep_table, take_readings, write_readings
from app.web.pages import render_page
from app.web.posed import render_number
from app.web.property_edits import edit_tensor
from app.web.samples import store_of

router = APIRouter(include_in_schema=False)

STARTING_TABLE: Final = "kind,direction,second,value,sigma,unit,direction_sigma,bar,batch,temperature,note\n"
PLOT_REACH: Final = 4.0
"""Standardised residuals beyond this are drawn at the edge of the plot."""


@router.get("/samples/{sample_id}/readings")
def readings_page(sample_id: str, request: Request) -> Response:
    """The readings of the current property and what they give."""
    return _render(request, store_of(request).samples.get(sample_id))


@router.post("/samples/{sample_id}/readings")
async def keep_readings(sample_id: str, revision: int, request: Request) -> Response:
    """Take a whole table in place of the readings, or nothing of it; what was typed stays with its faults."""
    form = parse_qs((await request.body()).decode("utf-8", "replace"), keep_blank_values=True)
    text, batches = form.get("table", [""])[0], form.get("batches", [""])[0]
    store = store_of(request)
    kept = store.samples.get(sample_id)
    try:
        _crystal, shown = _require(kept)
        table = read_table(text, unit=shown.unit)
        others = [entry.plain() for entry in kept.document.readings if entry.property != shown.id]
        changes = {
            "readings": [*others, *keep_table(table, shown.id, shown.unit)],
            "batches": _read_batches(batches),
        }
        store.samples.save(sample_id, change_document(kept.document, changes), revision)
    except HalfturnError as error:
        return _render(request, kept, fault=error, text=text, batches=batches)
    return RedirectResponse(f"/samples/{sample_id}/readings", status_code=303)


@router.post("/samples/{sample_id}/readings/use")
def use_tensor(sample_id: str, revision: int, request: Request) -> Response:
    """Make the fitted tensor the one of the property."""
    store = store_of(request)
    kept = store.samples.get(sample_id)
    crystal, shown = _require(kept)
    fit, _ = _fit(crystal, kept, shown)
    if fit.free is None:
        raise InputError("The readings do not determine a tensor.", hint="Add the readings that the page suggests.")
    change = TensorChange.model_validate(
        {
            "free": dict(zip(fit.form.labels, fit.free.tolist(), strict=True)),
            "covariance": None if fit.free_covariance is None else fit.free_covariance.tolist(),
            "source": f"fit of {len(fit.readings.predicted) if fit.readings else 0} readings",
        }
    )
    changes, _ = edit_tensor(kept.document, change)
    store.samples.save(sample_id, change_document(kept.document, changes), revision)
    return RedirectResponse(f"/samples/{sample_id}/tensor", status_code=303)


def _require(kept: Kept) -> tuple[Crystal, KeptProperty]:
    shown = current_property(kept.document)
    if shown is None:
        raise InputError("This sample has no property to read.", hint="Add one in the strip, under property and unit.")
    crystal = crystal_of(kept.document.crystal)
    return crystal_for(crystal, kept.document.crystal, entry_of(shown)), shown


def _fit(crystal: Crystal, kept: Kept, shown: KeptProperty) -> tuple[Fit, list[Reading]]:
    readings = take_readings(crystal, readings_of(kept.document, shown.id))
    fit = fit_readings(
        crystal,
        kind_of(shown),
        readings,
        batches=dict(kept.document.batches),
        pose=pose_of(crystal, kept.document.pose),
        unit=print_own_unit(shown.unit),
    )
    return fit, readings


def _render(
    request: Request,
    kept: Kept,
    *,
    fault: HalfturnError | None = None,
    text: str | None = None,
    batches: str | None = None,
) -> Response:
    content: dict[str, Any] = {"result": None, "rows": [], "unit": "", "headline": "", "second_line": ""}
    try:
        crystal, shown = _require(kept)
        content["unit"] = print_own_unit(shown.unit)
        entries = readings_of(kept.document, shown.id)
        if text is None:
            text = write_readings(crystal, entries, shown.unit) if entries else STARTING_TABLE
        if entries:
            fit, readings = _fit(crystal, kept, shown)
            content |= _describe(crystal, fit, readings)
        else:
            content["headline"] = "No readings yet."
            content["second_line"] = "Type, paste or drop a table of numbers measured on cut bars."
    except HalfturnError as error:
        fault = fault or error
        content["headline"] = content["headline"] or "The readings give no tensor."
    if batches is None:
        batches = "\n".join(f"{name} = {sigma:g}" for name, sigma in kept.document.batches.items())
    problems = fault.detail.get("problems", []) if fault is not None and isinstance(fault.detail, dict) else []
    response = render_page(
        request,
        "readings.html",
        kept.sample_id,
        "readings",
        **content,
        text=text if text is not None else STARTING_TABLE,
        batches_text=batches,
        fault=None if fault is None else {"message": fault.message, "hint": fault.hint, "field": fault.field},
        problems=problems,
    )
    response.status_code = 200 if fault is None else 422
    return response


def _read_batches(text: str) -> dict[str, float]:
    batches: dict[str, float] = {}
    for line in filter(str.strip, text.splitlines()):
        name, equals, sigma = line.rpartition("=")
        try:
            batches[name.strip()] = float(sigma)
        except ValueError:
            equals = ""
        if not equals or not name.strip():
            raise InputError(
                f"The batch “{line.strip()}” cannot be read.",
                field="batches",
                hint="Write one on each line, like: furnace 2 = 0.01",
            )
    return batches


def _describe(crystal: Crystal, fit: Fit, readings: list[Reading]) -> dict[str, Any]:
    """Sentences and numbers of a fit."""
    if fit.estimate is None or fit.readings is None:
        unseen = [
            {"change": describe_combination(fit, entry), "suggestion": describe_suggestion(entry)}
            for entry in fit.undetermined
        ]
        return {
            "headline": f"{len(readings)} readings do not determine the tensor.",
            "second_line": f"{unseen[0]['suggestion'].capitalize()} would see what is missing." if unseen else "",
            "result": {"determined": False, "unseen": unseen, "notes": list(fit.notes)},
        }
    judged = "" if fit.p_value is None else f", p = {fit.p_value:.2g}"
    headline = f"{len(readings)} readings give {fit.form.count} cells: χ² {fit.chi2:.3g} on {fit.dof} to spare{judged}."
    sigmas = fit.estimate.sigma_matrix
    cells = [
        {
            "state": lock.state,
            "equals": lock.equals,
            "because": lock.because,
            "number": render_number(
                float(fit.estimate.matrix.flat[position]), None if sigmas is None else float(sigmas.flat[position])
            ),
        }
        for position, lock in enumerate(explain_cells(crystal, fit.form))
    ]
    return {
        "headline": headline,
        "second_line": describe_symmetry_test(crystal, fit),
        "rows": _describe_readings(fit, readings),
        "result": {
            "determined": True,
            "cells": [cells[0:3], cells[3:6], cells[6:9]],
            "frame": fit.estimate.frame,
            "rank": fit.rank,
            "count": fit.form.count,
            "condition": f"{fit.condition:.3g}" if fit.condition is not None else "–",
            "scale": None if fit.scale is None else f"{fit.scale:.3g}",
            "from": {"sigma": "the stated σ", "scatter": "the scatter", None: "nothing"}[fit.covariance_from],
            "notes": list(fit.notes),
        },
    }


def _describe_readings(fit: Fit, readings: list[Reading]) -> list[dict[str, Any]]:
    results = fit.readings
    assert results is not None
    rows = []
    for number, reading in enumerate(readings):
        standardised = float(results.standardised[number])
        known = bool(np.isfinite(standardised))
        directions = [describe_direction(entry) for entry in (reading.direction, reading.second) if entry is not None]
        assert reading.value is not None
        rows.append(
            {
                "kind": reading.kind,
                "where": ", ".join(directions) or "–",
                "value": print_value(reading.value, reading.sigma),
                "predicted": print_value(float(results.predicted[number])),
                "standardised": f"{standardised:+.2f}".replace("-", "−") if known else "–",
                "at": round(50 + 50 * max(-1.0, min(1.0, standardised / PLOT_REACH)), 1) if known else None,
                "leverage": f"{results.leverage[number]:.2f}",
                "bar": reading.bar or "",
            }
        )
    return rows
