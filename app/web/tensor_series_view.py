"""A property's own series: tensors typed at several values, or fitted from readings at several temperatures."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np

from app.crystal.crystal import Crystal
from app.errors import HalfturnError, InputError, located
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.readings.report import describe_suggestion
from app.series.branches import follow_branches
from app.series.tensor_series import TensorCurve, TensorFit, TensorState, evaluate_tensors, fit_tensors
from app.series.tensor_table import read_tensor_table
from app.store.canonical import plain
from app.store.document import KeptProperty, SampleDocument, readings_of
from app.store.revisions import Kept
from app.tensor.form import build_form
from app.tensor.principal import find_principal
from app.tensor.printing import print_value
from app.tensor.tensor import build_tensor
from app.web.charts import STROKES, Curve, Points, draw_chart
from app.web.kept import kind_of, pose_of, print_own_unit
from app.web.kept_readings import take_readings
from app.web.posed import render_matrix
from app.web.readings_view import require_property
from app.web.series_view import BEYOND, PLACES, VARIABLES

DEFAULT: Final = {"source": "table", "table": "", "degree": 1}


@dataclass(frozen=True)
class PropertySeries:
    """A fitted series of one property; the states are what it was fitted to."""

    states: tuple[TensorState, ...]
    fit: TensorFit
    symbol: str
    unit: str

    def say(self, t: float) -> str:
        """A value of the variable with its unit."""
        return f"{t:.6g} {self.unit}".strip().replace("-", "−")

    @property
    def axis_name(self) -> str:
        """For a chart."""
        return f"{self.symbol}, {self.unit}" if self.unit else self.symbol


def kept_tensor_series(document: SampleDocument, shown: KeptProperty) -> dict[str, Any]:
    """The series of a property that a document holds, with what it leaves open filled in."""
    found: dict[str, Any] = next((plain(entry) for entry in document.series if _is_of(plain(entry), shown)), {})
    given = {key: value for key, value in found.items() if value is not None}
    return {"kind": "tensors", "property": shown.id, **DEFAULT, **given}


def change_tensor_series(
    document: SampleDocument, shown: KeptProperty, change: Mapping[str, Any]
) -> list[dict[str, Any]]:
    """All series of a document with the property's own changed."""
    others = [plain(entry) for entry in document.series if not _is_of(plain(entry), shown)]
    return [*others, {**kept_tensor_series(document, shown), **change}]


def _is_of(entry: Any, shown: KeptProperty) -> bool:
    return bool(entry.get("kind") == "tensors" and entry.get("property") == shown.id)


def is_empty(document: SampleDocument, shown: KeptProperty) -> bool:
    """Whether nothing was given yet."""
    kept = kept_tensor_series(document, shown)
    return bool(kept["source"] == "table" and not str(kept["table"]).strip())


def fit_tensor_series(document: SampleDocument, crystal: Crystal, shown: KeptProperty) -> PropertySeries:
    """The fitted series.

    Raises:
        InputError: at ``table`` with detail {"problems"}, at ``degree``, or readings that do not give every tensor.
    """
    kept = kept_tensor_series(document, shown)
    variable = "temperature"
    if kept["source"] == "readings":
        states = _collect_states(document, crystal, shown)
    else:
        with located("table"):
            table = read_tensor_table(str(kept["table"]), crystal, kind_of(shown))
        states, variable = table.states, table.variable
    symbol, unit = VARIABLES.get(variable, ("t", ""))
    return PropertySeries(states, fit_tensors(states, int(kept["degree"])), symbol, unit)


def _collect_states(document: SampleDocument, crystal: Crystal, shown: KeptProperty) -> tuple[TensorState, ...]:
    """One tensor from the readings in use at each temperature."""
    groups: dict[float, list[Reading]] = defaultdict(list)
    for reading in take_readings(crystal, readings_of(document, shown.id)):
        if reading.temperature is None:
            raise InputError(
                "Some readings in use have no temperature.",
                field="source",
                hint="Give each its temperature on the Readings page, or set it aside there.",
            )
        groups[reading.temperature].append(reading)
    if not groups:
        raise InputError("No readings are in use.", field="source", hint="Take readings on the Readings page.")
    states = []
    for t, readings in sorted(groups.items()):
        fit = fit_readings(
            crystal,
            kind_of(shown),
            readings,
            batches=dict(document.batches),
            pose=pose_of(crystal, document.pose),
        )
        if fit.free is None:
            would = describe_suggestion(fit.undetermined[0]) if fit.undetermined else "a further reading"
            raise InputError(
                f"The {len(readings)} readings at {t:g} K do not determine the tensor.",
                field="source",
                hint=f"{would.capitalize()} would help.",
            )
        free = dict(zip(fit.form.labels, fit.free.tolist(), strict=True))
        covariance = fit.free_covariance
        states.append(TensorState(t, build_tensor(crystal, kind_of(shown), free=free, covariance=covariance)))
    # One without an uncertainty takes it from all.
    if any(state.tensor.free_covariance is None for state in states):
        states = [replace(state, tensor=_bare(crystal, shown, state)) for state in states]
    return tuple(states)


def _bare(crystal: Crystal, shown: KeptProperty, state: TensorState) -> Any:
    labels = state.tensor.form.labels
    free = dict(zip(labels, state.tensor.free.tolist(), strict=True))
    return build_tensor(crystal, kind_of(shown), free=free)


def describe_tensor_series(kept: Kept, at: float | None = None) -> dict[str, Any]:
    """Everything that the panel shows; ``problem`` says why there is no result."""
    content: dict[str, Any] = {
        "tensor_series": dict(DEFAULT),
        "tensor_table": "",
        "tensor_headline": "",
        "tensor_result": None,
        "tensor_problem": None,
        "property_name": "",
        "property_unit": "",
    }
    try:
        crystal, shown = require_property(kept)
        entry = kept_tensor_series(kept.document, shown)
        labels = build_form(crystal, kind_of(shown)).labels
        content |= {
            "tensor_series": entry,
            "tensor_table": entry["table"] or ",".join(["temperature", *labels]) + "\n",
            "property_name": shown.name,
            "property_unit": print_own_unit(shown.unit),
        }
        if is_empty(kept.document, shown):
            return content
        series = fit_tensor_series(kept.document, crystal, shown)
        content |= _describe(crystal, shown, series, at)
    except HalfturnError as error:
        content["tensor_problem"] = {"message": error.message, "hint": error.hint, "field": error.field}
    return content


def find_range(fit: TensorFit) -> tuple[float, float]:
    """From where to where a slider runs: a little beyond what was measured."""
    low, high = fit.variable.lowest, fit.variable.highest
    room = BEYOND * (high - low) if high > low else 0.0
    return low - room, high + room


def _describe(crystal: Crystal, shown: KeptProperty, series: PropertySeries, at: float | None) -> dict[str, Any]:
    start, end = find_range(series.fit)
    t = (start + end) / 2 if at is None or not np.isfinite(at) else min(max(at, start), end)
    here = evaluate_tensors(series.fit, [t])
    estimate = here.estimates[0]
    principal = find_principal(estimate)
    curve = evaluate_tensors(series.fit, np.linspace(start, end, PLACES))
    unit = print_own_unit(shown.unit)
    values = ", ".join(
        print_value(float(value), None if principal.sigma is None else float(principal.sigma[number]))
        for number, value in enumerate(principal.values)
    )
    beyond = " This lies beyond what was measured." if bool(here.extrapolated[0]) else ""
    test = series.fit.test
    return {
        "tensor_headline": f"At {series.say(t)} the principal values are {values} {unit}.{beyond}",
        "tensor_result": {
            "t": t,
            "t_text": series.say(t),
            "range": [start, end],
            "step": (end - start) / 200 or 1.0,
            "measured": [series.say(series.fit.variable.lowest), series.say(series.fit.variable.highest)],
            "extrapolated": bool(here.extrapolated[0]),
            "unit": unit,
            "frame": estimate.frame,
            "cells": render_matrix(crystal, series.fit.form, estimate),
            "charts": _draw(series, curve, t, unit),
            "degree": series.fit.degree,
            "chi2": f"{series.fit.chi2:.3g}",
            "dof": series.fit.dof,
            "p": None if series.fit.p_value is None else f"{series.fit.p_value:.2g}",
            "test": None if test is None else f"F {test.value:.3g}, p = {test.p_value:.2g}",
            "from": {"sigma": "the stated σ", "scatter": "the scatter", None: "nothing"}[series.fit.covariance_from],
        },
    }


def _draw(series: PropertySeries, curve: TensorCurve, t: float, unit: str) -> list[dict[str, str]]:
    measured = (series.fit.variable.lowest, series.fit.variable.highest)
    followed = follow_branches(curve.matrices)
    spread = None
    if curve.free_covariance is not None:
        pairs = zip(curve.estimates, followed.axes, strict=True)
        spread = np.array([estimate.value_sigma(axes) for estimate, axes in pairs], dtype=np.float64)
    across, up = series.axis_name, unit or "value"
    principal = [
        Curve(curve.t, followed.values[:, k], f"p{k + 1}", STROKES[k], None if spread is None else spread[:, k])
        for k in range(3)
    ]
    charts = [
        {
            "title": "Principal values, each followed by its direction",
            "note": "The band is two standard deviations to either side; hatched ground was not measured.",
            "svg": draw_chart(
                principal, x_name=across, y_name=up, title="Principal values", measured=measured, marked=t
            ),
        }
    ]
    taken = np.array([state.t for state in series.states])
    for place, label in enumerate(series.fit.form.labels):
        sigma = None
        if all(state.tensor.free_covariance is not None for state in series.states):
            sigma = np.array([_sigma(state, place) for state in series.states])
        values = np.array([float(state.tensor.free[place]) for state in series.states])
        own = None if curve.free_covariance is None else np.sqrt(curve.free_covariance[:, place, place])
        charts.append(
            {
                "title": f"Cell {label}",
                "note": "Rings: what was given, with one standard deviation.",
                "svg": draw_chart(
                    [Curve(curve.t, curve.free[:, place], "", "solid", own)],
                    [Points(taken, values, sigma)],
                    x_name=across,
                    y_name=up,
                    title=f"Cell {label}",
                    measured=measured,
                    marked=t,
                    height=170.0,
                ),
            }
        )
    return charts


def _sigma(state: TensorState, place: int) -> float:
    assert state.tensor.free_covariance is not None
    return float(np.sqrt(state.tensor.free_covariance[place, place]))
