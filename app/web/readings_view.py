"""What the Readings page shows: the table in cells, the fit in sentences and numbers."""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from dataclasses import replace
from typing import Any, Final

import numpy as np

from app.crystal.crystal import Crystal
from app.errors import HalfturnError, InputError
from app.readings.fit import Fit
from app.readings.reading import Reading
from app.readings.report import (
    describe_combination,
    describe_direction,
    describe_suggestion,
    describe_symmetry_test,
)
from app.readings.table import write_table
from app.store.document import KeptProperty, KeptReading, current_property, readings_of
from app.store.revisions import Kept
from app.tensor.form import build_form
from app.tensor.printing import print_value
from app.web.kept import crystal_for, crystal_of, entry_of, kind_of, pose_of, print_own_unit
from app.web.kept_readings import fit_document, take_all
from app.web.posed import render_matrix
from app.web.readings_picture import draw_readings
from app.web.residual_plots import plot_residuals

GRID_COLUMNS: Final = (
    ("kind", "kind"),
    ("direction", "direction"),
    ("second", "second"),
    ("value", "value"),
    ("sigma", "σ"),
    ("direction_sigma", "turn σ, °"),
    ("bar", "bar"),
    ("batch", "batch"),
    ("temperature", "T, K"),
    ("note", "note"),
)
"""The columns of the grid with their headings; the unit is the property's and stands above the grid."""

PLOT_REACH: Final = 4.0
"""Standardised residuals beyond this are drawn at the edge of the plot."""


def require_property(kept: Kept) -> tuple[Crystal, KeptProperty]:
    """The crystal and the property that readings are of. Raises InputError where there is no property."""
    shown = current_property(kept.document)
    if shown is None:
        raise InputError("This sample has no property to read.", hint="Add one in the strip, under property and unit.")
    crystal = crystal_of(kept.document.crystal)
    return crystal_for(crystal, kept.document.crystal, entry_of(shown)), shown


def fit_kept(crystal: Crystal, kept: Kept, shown: KeptProperty) -> tuple[Fit, list[Reading]]:
    """The fit of the readings that are in use, and these."""
    return fit_document(crystal, kept.document, shown)


def describe_kept(kept: Kept) -> dict[str, Any]:
    """Everything that the page shows of a sample: headline, second_line, unit, rows of the grid, batches, the fit
    (``result``, ``residuals``) and ``problem``, why there is none."""
    content: dict[str, Any] = {
        "headline": "The readings give no tensor.",
        "second_line": "",
        "unit": "",
        "grid": [],
        "batches": {name: f"{sigma:g}" for name, sigma in kept.document.batches.items()},
        "result": None,
        "residuals": [],
        "plots": [],
        "stereogram": "",
        "labels": [],
        "usual_sigma": None,
        "problem": None,
    }
    try:
        crystal, shown = require_property(kept)
        content["unit"] = print_own_unit(shown.unit)
        entries = readings_of(kept.document, shown.id)
        content["grid"] = _lay_out(crystal, entries)
        content["labels"] = list(build_form(crystal, kind_of(shown)).labels)
        sigmas = [entry.sigma for entry in entries if entry.sigma is not None]
        content["usual_sigma"] = f"{float(np.median(sigmas)):.3g}" if sigmas else None
        if any(entry.set_aside is None for entry in entries):
            fit, readings = fit_kept(crystal, kept, shown)
            content |= _describe_fit(crystal, fit, readings)
            content["plots"] = plot_residuals(crystal, fit, readings, pose_of(crystal, kept.document.pose))
            content["stereogram"] = draw_readings(crystal, fit, readings, pose_of(crystal, kept.document.pose))
        else:
            content["headline"] = "All readings are set aside." if entries else "No readings yet."
            content["second_line"] = "Type, paste or drop a table of numbers measured on cut bars."
    except HalfturnError as error:
        content["problem"] = {"message": error.message, "hint": error.hint, "field": error.field}
    return content


def _lay_out(crystal: Crystal, entries: Sequence[KeptReading]) -> list[dict[str, Any]]:
    """The kept readings as rows of text cells, with what has no column of its own beside them."""
    readings = [replace(reading, pose=None) for reading in take_all(crystal, entries)]
    rows = list(csv.DictReader(io.StringIO(write_table(readings), newline="")))
    return [
        {
            "cells": {name: _shorten(name, row[name]) for name, _ in GRID_COLUMNS},
            "set_aside": entry.set_aside,
            "pose": None if entry.pose is None else entry.plain()["pose"],
        }
        for row, entry in zip(rows, entries, strict=True)
    ]


def _shorten(column: str, cell: str) -> str:
    return cell.removesuffix(".0") if column in ("temperature", "direction_sigma") else cell


def _describe_fit(crystal: Crystal, fit: Fit, readings: list[Reading]) -> dict[str, Any]:
    """Sentences and numbers of a fit."""
    if fit.estimate is None or fit.readings is None:
        unseen = [
            {"change": describe_combination(fit, entry), "suggestion": describe_suggestion(entry)}
            for entry in fit.undetermined
        ]
        return {
            "headline": f"{_count(readings)} {'does' if len(readings) == 1 else 'do'} not determine the tensor.",
            "second_line": f"{unseen[0]['suggestion'].capitalize()} would see what is missing." if unseen else "",
            "result": {"determined": False, "unseen": unseen, "notes": list(fit.notes)},
        }
    judged = "" if fit.p_value is None else f", p = {fit.p_value:.2g}"
    if fit.dof == 0:
        quality = "none to spare, so nothing is checked."
    else:
        quality = f"χ² {fit.chi2:.3g} on {fit.dof} to spare{judged}."
    return {
        "headline": f"{_count(readings)} {'gives' if len(readings) == 1 else 'give'} {fit.form.count} "
        f"{'cell' if fit.form.count == 1 else 'cells'}: {quality}",
        "second_line": describe_symmetry_test(crystal, fit),
        "residuals": _describe_residuals(fit, readings),
        "result": {
            "determined": True,
            "cells": render_matrix(crystal, fit.form, fit.estimate),
            "frame": fit.estimate.frame,
            "rank": fit.rank,
            "count": fit.form.count,
            "condition": f"{fit.condition:.3g}" if fit.condition is not None else "–",
            "scale": None if fit.scale is None else f"{fit.scale:.3g}",
            "from": {"sigma": "the stated σ", "scatter": "the scatter", None: "nothing"}[fit.covariance_from],
            "notes": list(fit.notes),
        },
    }


def _count(readings: Sequence[Reading]) -> str:
    return "1 reading" if len(readings) == 1 else f"{len(readings)} readings"


def _describe_residuals(fit: Fit, readings: list[Reading]) -> list[dict[str, Any]]:
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
