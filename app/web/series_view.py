"""What the Series page shows of cells against a variable: the expansion at one value, curves, strains, angles."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.cell_locks import list_cell_locks
from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction, typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import HalfturnError, InputError, located
from app.series.cell_series import CellSeries, CellState, build_cell_series
from app.series.expansion import CellFit, ExpansionCurve, compute_expansion, fit_cells
from app.series.moving_directions import AngleCurve, measure_angle
from app.series.series_table import read_cell_table
from app.series.still_directions import find_still_directions
from app.series.strain import compute_strains
from app.store.canonical import plain
from app.store.document import SampleDocument
from app.store.revisions import Kept
from app.tensor.estimate import Estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.lock import explain_cells
from app.tensor.principal import Principal, find_principal
from app.tensor.printing import print_value
from app.tensor.sentence import ON, print_angle
from app.web.kept import crystal_of
from app.web.posed import render_number
from app.web.series_charts import CELL_SYMBOLS, SCALE, ShownSeries, draw_series, name_line

FloatArray = npt.NDArray[np.float64]

PLACES: Final = 61
"""Values of the variable at which curves are drawn."""

BEYOND: Final = 0.15
"""How far curves run past the measured range, as a part of it; there they are marked."""

ROUNDING: Final = 1e-10
"""A relative standard deviation below this is the rounding of a fit without scatter."""

VARIABLES: Final = {
    "temperature": ("T", "K"),
    "pressure": ("p", "GPa"),
    "composition": ("x", ""),
    "wavelength": ("λ", "nm"),
    "t": ("t", ""),
}
DEFAULT_SERIES: Final = {"kind": "cells", "table": "", "degree": 1, "strain": "stretch", "faces": []}
EMPTY_TABLE: Final = "temperature,a,b,c,alpha,beta,gamma\n"


def kept_series(document: SampleDocument) -> dict[str, Any]:
    """The series of cells that a document holds, with what it leaves open filled in."""
    found: dict[str, Any] = next((plain(entry) for entry in document.series if plain(entry).get("kind") == "cells"), {})
    return {**DEFAULT_SERIES, **{key: value for key, value in found.items() if value is not None}}


def change_series(document: SampleDocument, change: Mapping[str, Any]) -> list[dict[str, Any]]:
    """All series of a document with one changed."""
    others = [plain(entry) for entry in document.series if plain(entry).get("kind") != "cells"]
    return [*others, {**kept_series(document), **change}]


def fit_kept_series(document: SampleDocument, crystal: Crystal) -> tuple[CellSeries, CellFit, str]:
    """The series of a document, its fit, and the variable's name.

    Raises:
        InputError: at ``table`` with detail {"problems"}, at ``degree`` or ``reference``, or a crystal without a cell.
    """
    kept = kept_series(document)
    if crystal.cell is None or crystal.frame is None:
        raise InputError(
            "A limiting group has no cell, so there is no series of cells.", hint="Give the crystal its point group."
        )
    with located("table"):
        table = read_cell_table(str(kept["table"]), list_cell_locks(crystal))
        series = _build(crystal, table.states, kept.get("reference"))
    return series, fit_cells(series, int(kept["degree"])), table.variable


def _build(crystal: Crystal, states: tuple[CellState, ...], reference: float | None) -> CellSeries:
    assert crystal.cell is not None
    assert crystal.frame is not None
    return build_cell_series(
        states,
        crystal.group.symbol,
        unique_axis=crystal.group.unique_axis,
        frame=crystal.frame.text,
        cell=crystal.cell.parameters,
        reference=reference,
    )


def describe_series(kept: Kept, at: float | None = None) -> dict[str, Any]:
    """Everything that the page shows; ``problem`` says why there is no result."""
    document = kept.document
    entry = kept_series(document)
    content: dict[str, Any] = {
        "series": entry,
        "table": entry["table"] or EMPTY_TABLE,
        "headline": "No series yet.",
        "second_line": "Type, paste or drop cells at several temperatures, or drop a set of CIFs together.",
        "result": None,
        "problem": None,
        "problems": [],
    }
    if not str(entry["table"]).strip():
        return content
    try:
        crystal = crystal_of(document.crystal)
        series, fit, variable = fit_kept_series(document, crystal)
        symbol, unit = VARIABLES.get(variable, ("t", ""))
        content |= _describe(ShownSeries(entry, series, fit, symbol, str(entry.get("unit", unit))), at)
    except HalfturnError as error:
        content["headline"] = "The series gives no expansion."
        content["second_line"] = ""
        content["problem"] = {"message": error.message, "hint": error.hint, "field": error.field}
        content["problems"] = error.detail.get("problems", []) if isinstance(error.detail, dict) else []
    return content


def _describe(shown: ShownSeries, at: float | None) -> dict[str, Any]:
    low, high = shown.series.variable.lowest, shown.series.variable.highest
    room = BEYOND * (high - low) if high > low else 1.0
    middle = (low + high) / 2
    t = middle if at is None or not np.isfinite(at) else min(max(at, low - room), high + room)
    here = compute_expansion(shown.fit, [t])
    estimate = here.estimates[0]
    principal = find_principal(estimate)
    still = find_still_directions(estimate, principal)
    curve = compute_expansion(shown.fit, np.linspace(low - room, high + room, PLACES))
    first, last = (_print_scaled(float(principal.values[k]), _sigma_of(principal, k)) for k in (0, 2))
    volume = _print_scaled(float(here.volume_rate[0]), _first(here.volume_rate_sigma))
    beyond = f" {shown.say(t)} lies beyond what was measured." if bool(here.extrapolated[0]) else ""
    return {
        "headline": f"At {shown.say(t)}: {first} along p1, {last} along p3, volume {volume} {shown.per}.{beyond}",
        "second_line": still.sentence,
        "result": {
            "t": t,
            "t_text": shown.say(t),
            "range": [low - room, high + room],
            "measured": [shown.say(low), shown.say(high)],
            "step": (high - low + 2 * room) / 200,
            "extrapolated": bool(here.extrapolated[0]),
            "unit": shown.per,
            "frame": estimate.frame,
            "cells": _render_cells(shown.series.crystal, estimate),
            "principal": _describe_axes(shown.series.crystal, principal),
            "cell": _describe_cell(here),
            "charts": draw_series(shown, curve, t),
            "fit": _describe_fit(shown),
            "strains": _describe_strains(shown),
            "strain": shown.kept["strain"],
            "references": [float(value) for value in np.unique(shown.series.t)],
            "reference": float(shown.series.t[shown.series.reference]),
            "faces": _describe_faces(shown, here, curve, t),
        },
    }


def _sigma_of(principal: Principal, number: int) -> float | None:
    return None if principal.sigma is None else float(principal.sigma[number])


def _first(values: FloatArray | None) -> float | None:
    return None if values is None else float(values[0])


def _print_scaled(value: float, sigma: float | None) -> str:
    return print_value(SCALE * value, None if sigma is None or not np.isfinite(sigma) else _keep(SCALE * sigma, value))


def _keep(sigma: float, value: float) -> float | None:
    """A standard deviation, unless it is only the rounding of an exact fit."""
    return sigma if sigma > ROUNDING * SCALE * abs(value) else None


def _render_cells(crystal: Crystal, estimate: Estimate) -> list[list[dict[str, Any]]]:
    locks = explain_cells(crystal, build_form(crystal, Kind("polar", "symmetric")))
    sigmas = estimate.sigma_matrix
    cells = [
        {
            "state": lock.state,
            "equals": lock.equals,
            "because": lock.because,
            "number": render_number(
                SCALE * float(estimate.matrix.flat[place]),
                None
                if sigmas is None
                else _keep(SCALE * float(sigmas.flat[place]), float(np.max(np.abs(estimate.matrix)))),
            ),
        }
        for place, lock in enumerate(locks)
    ]
    return [cells[0:3], cells[3:6], cells[6:9]]


def _describe_axes(crystal: Crystal, principal: Principal) -> list[dict[str, str]]:
    rows = []
    for number in range(3):
        where = "not determined"
        axis = principal.axes[number]
        if not principal.arbitrary[number]:
            where = ", ".join(_say_line(crystal, axis, kind) for kind in ("row", "normal"))
        value = _print_scaled(float(principal.values[number]), _sigma_of(principal, number))
        rows.append({"name": f"p{number + 1}", "value": value, "where": where})
    return rows


def _say_line(crystal: Crystal, axis: FloatArray, kind: Literal["row", "normal"]) -> str:
    text = name_line(crystal, axis, kind)
    off = find_nearest(crystal, axis, kind).off
    return typeset_indices(text) if off < ON else f"{typeset_indices(text)} {print_angle(off)} off"


def _describe_cell(here: ExpansionCurve) -> list[dict[str, str]]:
    sigmas = here.cell_sigma
    names = CELL_SYMBOLS
    return [
        {
            "name": name,
            "value": print_value(
                float(here.motion.cells[0, k]), None if sigmas is None or sigmas[0, k] == 0 else float(sigmas[0, k])
            ),
            "unit": "Å" if k < 3 else "°",
        }
        for k, name in enumerate(names)
    ]


def _describe_fit(shown: ShownSeries) -> dict[str, Any]:
    rows = []
    for position, polynomial in zip(shown.series.independent.positions, shown.fit.polynomials, strict=True):
        test = polynomial.test
        rows.append(
            {
                "name": CELL_SYMBOLS[position],
                "chi2": f"{polynomial.chi2:.3g}",
                "dof": polynomial.dof,
                "p": "–" if polynomial.p_value is None else f"{polynomial.p_value:.2g}",
                "test": "–" if test is None else f"F {test.value:.3g}, p = {test.p_value:.2g}",
            }
        )
    source = {"sigma": "the stated σ", "scatter": "the scatter about each polynomial", None: "nothing"}
    return {"degree": shown.fit.degree, "rows": rows, "from": source[shown.fit.covariance_from]}


def _describe_strains(shown: ShownSeries) -> list[dict[str, Any]]:
    strains = compute_strains(shown.series, shown.kept["strain"])
    rows = []
    for place in np.argsort(shown.series.t, kind="stable").tolist():
        estimate = Estimate(strains.matrices[place], None, "")
        values = find_principal(estimate).values
        rows.append(
            {
                "t": shown.say(float(shown.series.t[place])),
                "principal": [f"{1e6 * value:.4g}".replace("-", "−") for value in values.tolist()],
                "volume": f"{1e6 * float(np.linalg.det(np.eye(3) + strains.matrices[place]) - 1):.4g}".replace(
                    "-", "−"
                ),
            }
        )
    return rows


def _measure_swelling(strain: FloatArray) -> float:
    """Change of volume over the volume: exact for a stretch."""
    return float(np.linalg.det(np.eye(3) + strain) - 1.0)


def _describe_faces(shown: ShownSeries, here: ExpansionCurve, curve: ExpansionCurve, t: float) -> list[dict[str, Any]]:
    rows = []
    for number, pair in enumerate(shown.kept["faces"]):
        with located(f"faces[{number}]"):
            first, second = (read_direction(text) for text in pair)
            now, along = measure_angle(here, first, second), measure_angle(curve, first, second)
        rows.append(
            {
                "names": [typeset_indices(text) for text in pair],
                "angle": _print_angle(now),
                "change": f"{float(along.degrees[-1] - along.degrees[0]):+.4f}°".replace("-", "−"),
            }
        )
    return rows


def _print_angle(angle: AngleCurve) -> str:
    sigma = None if angle.sigma is None or not np.isfinite(angle.sigma[0]) else float(angle.sigma[0])
    return print_value(float(angle.degrees[0]), sigma) + "°"
