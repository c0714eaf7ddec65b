"""The call ``expansion``: from cells against a variable to the expansion tensor, strains and what follows from them."""

from __future__ import annotations

from typing import Any

import numpy as np
from fastapi import APIRouter
from scipy.special import chdtrc

from app.crystal.cell import PARAMETER_NAMES, compute_metric
from app.series.branches import Branches, follow_branches
from app.series.cell_series import CellSeries, CellState, build_cell_series
from app.series.expansion import CellFit, ExpansionCurve, compute_expansion, fit_cells
from app.series.polynomial import Polynomial
from app.series.still_directions import StillDirections, find_still_directions
from app.series.strain import Strains, compute_strains
from app.tensor.principal import find_principal
from app.web import responses, series_shapes
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.rendering import render_array, render_principal

router = APIRouter(prefix="/api/v1", route_class=StrictRoute, responses=responses.ERROR_RESPONSES)


@router.post(
    "/expansion",
    summary="From cells at several temperatures, say, to the expansion tensor and the strains",
    responses={200: {"model": series_shapes.ExpansionAnswer}},
)
def expansion(request: series_shapes.ExpansionRequest) -> JsonAnswer:
    """Weighted polynomials through the independent cell parameters; alpha is the symmetric part of Ṁ M⁻¹."""
    crystal = request.crystal
    series = build_cell_series(
        [
            CellState(state.t, tuple(state.cell), None if state.sigma is None else tuple(state.sigma))
            for state in request.states
        ],
        crystal.group,
        unique_axis=crystal.unique_axis,
        frame=crystal.frame,
        cell=crystal.cell,
        cell_sigma=crystal.cell_sigma,
        reference=request.reference,
    )
    fit = fit_cells(series, request.degree)
    curve = compute_expansion(fit, request.at)
    strains = compute_strains(series, request.strain)
    basis = series.reference_basis
    return JsonAnswer(
        {
            "at": render_curve(curve),
            "states": render_strains(fit, strains),
            "strain": strains.measure,
            "reference": float(series.t[series.reference]),
            "range": [series.variable.lowest, series.variable.highest],
            "fit": render_cell_fit(fit),
            "frame": {
                "M": basis.tolist(),
                "volume": float(np.linalg.det(basis)),
                "sentence": series.crystal.frame_sentence,
            },
            "note": " ".join(_list_notes(fit, curve)) or None,
        }
    )


def render_curve(curve: ExpansionCurve) -> list[dict[str, Any]]:
    """Alpha with all that follows from it, at every t."""
    # A curve is followed along t, in whatever order the values were asked for.
    along = np.argsort(curve.t, kind="stable")
    followed = follow_branches(curve.alpha[along])
    places = np.argsort(along)
    volumes = np.sqrt(np.linalg.det(compute_metric(curve.motion.cells)))
    rates, volume_sigma, cell_sigma = curve.volume_rate, curve.volume_rate_sigma, curve.cell_sigma
    rendered = []
    for index, estimate in enumerate(curve.estimates):
        principal = find_principal(estimate)
        rendered.append(
            {
                "t": float(curve.t[index]),
                "alpha": estimate.matrix.tolist(),
                "sigma": render_array(estimate.sigma_matrix),
                "principal": {**render_principal(principal), **_render_branches(followed, int(places[index]))},
                "volume": float(rates[index]),
                "volume_sigma": None if volume_sigma is None else float(volume_sigma[index]),
                "extrapolated": bool(curve.extrapolated[index]),
                "cell": curve.motion.cells[index].tolist(),
                "cell_sigma": None if cell_sigma is None else cell_sigma[index].tolist(),
                "cell_volume": float(volumes[index]),
                "still": render_still(find_still_directions(estimate, principal, 0)),
            }
        )
    return rendered


def _render_branches(followed: Branches, place: int) -> dict[str, Any]:
    return {
        "branches": np.argsort(followed.order[place]).tolist(),
        "branches_doubtful": bool(followed.doubtful[place]),
    }


def render_still(still: StillDirections) -> dict[str, Any]:
    """Directions of no expansion, without their curves."""
    return {
        "kind": still.kind,
        "axis": render_array(still.axis),
        "toward": still.toward.tolist(),
        "half_angles": still.half_angles.tolist(),
        "sigma": render_array(still.sigma),
        "sentence": still.sentence,
    }


def render_strains(fit: CellFit, strains: Strains) -> list[dict[str, Any]]:
    """Every measured state."""
    series = fit.series
    columns = zip(series.t.tolist(), series.cells.tolist(), fit.residuals.tolist(), strict=True)
    return [
        {
            "t": t,
            "strain": strains.matrices[index].tolist(),
            "sigma": None if strains.sigma is None else strains.sigma[index].tolist(),
            "cell": cell,
            "residual": residual,
        }
        for index, (t, cell, residual) in enumerate(columns)
    ]


def render_cell_fit(fit: CellFit) -> dict[str, Any]:
    """The polynomials and how well they fit."""
    names = [PARAMETER_NAMES[position] for position in fit.series.independent.positions]
    dof = sum(polynomial.dof for polynomial in fit.polynomials)
    weighted = fit.covariance_from == "sigma"
    chi2 = sum(polynomial.chi2 for polynomial in fit.polynomials) if weighted else None
    return {
        "centre": fit.series.variable.centre,
        "half": fit.series.variable.half,
        "parameters": [
            _render_polynomial(name, polynomial) for name, polynomial in zip(names, fit.polynomials, strict=True)
        ],
        "covariance_from": fit.covariance_from,
        "chi2": chi2,
        "dof": dof,
        "p_value": float(chdtrc(dof, chi2)) if chi2 is not None and dof else None,
    }


def _render_polynomial(name: str, polynomial: Polynomial) -> dict[str, Any]:
    test = polynomial.test
    deviations = None if polynomial.covariance is None else np.sqrt(np.diag(polynomial.covariance))
    return {
        "name": name,
        "coefficients": polynomial.coefficients.tolist(),
        "sigma": render_array(deviations),
        "chi2": polynomial.chi2,
        "dof": polynomial.dof,
        "p_value": polynomial.p_value,
        "scale": polynomial.scale,
        "test": None
        if test is None
        else {"value": test.value, "extra": test.extra, "dof": test.dof, "p_value": test.p_value},
    }


def _list_notes(fit: CellFit, curve: ExpansionCurve) -> list[str]:
    series: CellSeries = fit.series
    notes = []
    repeats = int(np.sum(series.t == series.t[series.reference]))
    if repeats > 1:
        notes.append(
            f"{repeats} states stand at t = {series.t[series.reference]:g}; strains refer to the first of them."
        )
    if fit.covariance_from is None:
        notes.append("There are as many coefficients as states and no sigma, so nothing is known of the uncertainty.")
    elif fit.covariance_from == "scatter":
        notes.append("Without sigma all states count alike, and uncertainties come from their scatter.")
    if np.any(curve.extrapolated):
        notes.append("Values marked as extrapolated lie beyond what was measured; no uncertainty covers that.")
    return notes
