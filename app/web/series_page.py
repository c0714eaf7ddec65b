"""The Series page and the calls that change the kept series of cells."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Literal

import numpy as np
from fastapi import APIRouter, Request, Response
from pydantic import Field

from app.errors import InputError, located
from app.series.cif_series import read_cif_series
from app.series.expansion import compute_expansion
from app.store.document import SampleDocument, change_document, current_property
from app.store.revisions import Kept
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import LongText, PropertyChange, TensorChange, Typed
from app.web.kept import crystal_of, render_sample
from app.web.pages import render_page, templates
from app.web.parts import Number, Part
from app.web.property_edits import edit_property, edit_tensor
from app.web.samples import save_change, store_of
from app.web.series_charts import SCALE
from app.web.series_view import change_series, describe_series, fit_kept_series, kept_series
from app.web.tensor_series_view import describe_tensor_series

page_router = APIRouter(include_in_schema=False)
router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

EXPANSION: str = "thermal_expansion"
MOST_FACES = 12
MOST_CIFS = 200


Pair = Annotated[list[Typed], Field(min_length=2, max_length=2)]


class SeriesChange(Part):
    """What of the series is changed; what is left out stays."""

    table: str | None = Field(None, max_length=4 * 1024 * 1024, description="cells against a variable, as text")
    degree: Annotated[int, Field(ge=0, le=8)] | None = Field(None, description="of the polynomials")
    reference: Number | None = Field(None, description="value of the variable that strains refer to")
    strain: Literal["stretch", "linear"] | None = None
    unit: Typed | None = Field(None, description="of the variable")
    faces: Annotated[list[Pair], Field(max_length=MOST_FACES)] | None = Field(
        None, description="pairs of directions whose angle is followed"
    )


class SeriesRequest(Part):
    """A change of the series, and the revision that it was made from."""

    parent: int = Field(ge=1)
    change: SeriesChange
    at: Number | None = Field(None, description="value of the variable that is shown")


class CifsRequest(Part):
    """CIFs at several temperatures, in place of the table."""

    parent: int = Field(ge=1)
    texts: list[LongText | str] = Field(max_length=MOST_CIFS)


class UseRequest(Part):
    """Keep the expansion tensor at a value of the variable as the sample's."""

    parent: int = Field(ge=1)
    at: Number


@page_router.get("/samples/{sample_id}/series")
def series_page(sample_id: str, request: Request, at: float | None = None) -> Response:
    """Cells against temperature, say, and the expansion that they give."""
    kept = store_of(request).samples.get(sample_id)
    return render_page(
        request, "series.html", sample_id, "series", **describe_series(kept, at), **describe_tensor_series(kept)
    )


@router.get("/{sample_id}/series", summary="The kept series of cells, and its expansion at one value of the variable")
def show(sample_id: str, request: Request, at: float | None = None) -> JsonAnswer:
    """``result`` is a piece of the page."""
    return JsonAnswer(_render(store_of(request).samples.get(sample_id), at))


@router.post("/{sample_id}/series", summary="Change the kept series of cells")
def change(sample_id: str, given: SeriesRequest, request: Request) -> JsonAnswer:
    """A table that cannot be read is refused with all its faults, by line and column, in ``detail.problems``."""
    store = store_of(request)
    kept = store.samples.get(sample_id, given.parent)
    return JsonAnswer(_render(_keep(request, kept, given.change.model_dump(exclude_unset=True)), given.at))


@router.post("/{sample_id}/series/cifs", summary="Take cells and temperatures from a set of CIFs")
def take_cifs(sample_id: str, given: CifsRequest, request: Request) -> JsonAnswer:
    """Their temperatures are read from each; the group of the sample must be theirs."""
    kept = store_of(request).samples.get(sample_id, given.parent)
    found = read_cif_series(given.texts)
    lines = ["temperature,a,b,c,alpha,beta,gamma" + (",a_sigma,b_sigma,c_sigma,alpha_sigma,beta_sigma,gamma_sigma")]
    certain = all(state.sigma is not None for state in found.states)
    if not certain:
        lines = ["temperature,a,b,c,alpha,beta,gamma"]
    for state in found.states:
        numbers = [state.t, *state.cell, *(state.sigma or () if certain else ())]
        lines.append(",".join(f"{number:.12g}" for number in numbers))
    answer = _render(_keep(request, kept, {"table": "\n".join(lines) + "\n"}), None)
    return JsonAnswer({**answer, "notes": list(found.notes)})


@router.post("/{sample_id}/series/use", summary="Keep the expansion tensor at one value as the sample's")
def use(sample_id: str, given: UseRequest, request: Request) -> JsonAnswer:
    """It becomes the thermal expansion of the sample, beside the other properties."""
    kept = store_of(request).samples.get(sample_id, given.parent)
    crystal = crystal_of(kept.document.crystal)
    series, fit, variable = fit_kept_series(kept.document, crystal)
    if variable != "temperature":
        raise InputError("This series does not run over temperature, so it gives no thermal expansion.", field="at")
    estimate = compute_expansion(fit, [given.at]).estimates[0]
    form = build_form(series.crystal, Kind("polar", "symmetric"))
    places = [3 * (int(label[0]) - 1) + int(label[1]) - 1 for label in form.labels]
    scaled = SCALE * estimate.matrix.ravel()[places]
    covariance = None
    if estimate.covariance is not None:
        covariance = (SCALE**2 * estimate.covariance[np.ix_(places, places)]).tolist()
    document = _choose_expansion(kept.document)
    changes, _ = edit_tensor(
        document,
        TensorChange.model_validate(
            {
                "free": dict(zip(form.labels, scaled.tolist(), strict=True)),
                "covariance": covariance,
                "source": f"cells of {len(series.t)} states, at {given.at:g} K",
                "unit": "1e-6/K",
            }
        ),
    )
    saved = save_change(store_of(request), sample_id, change_document(document, changes), given.parent)
    return JsonAnswer({"sample": render_sample(saved)})


def _choose_expansion(document: SampleDocument) -> SampleDocument:
    """The document looking at its thermal expansion, which is added where there is none."""
    current = current_property(document)
    if current is not None and current.kind == EXPANSION:
        return document
    found = next((entry for entry in document.properties if entry.kind == EXPANSION), None)
    change = {"id": found.id} if found is not None else {"kind": EXPANSION, "unit": "1e-6/K"}
    if found is None:
        return change_document(document, _add_expansion(document))
    changes, _ = edit_property(document, PropertyChange.model_validate(change))
    return change_document(document, changes)


def _add_expansion(document: SampleDocument) -> dict[str, Any]:
    named = {entry.id for entry in document.properties}
    number = next(n for n in range(1, len(named) + 2) if f"expansion{n}" not in named)
    form = build_form(crystal_of(document.crystal), Kind("polar", "symmetric"))
    added = {
        "id": f"expansion{number}",
        "name": "Thermal expansion",
        "kind": EXPANSION,
        "symbol": "α",
        "unit": "1e-6/K",
        "tensor": {"free": dict.fromkeys(form.labels, 0.0)},
    }
    return {
        "properties": [*(entry.plain() for entry in document.properties), added],
        "looking": {**document.plain()["looking"], "property": added["id"]},
    }


def _keep(request: Request, kept: Kept, named: Mapping[str, Any]) -> Kept:
    document = change_document(kept.document, {"series": change_series(kept.document, named)})
    if str(kept_series(document)["table"]).strip():
        with located("change"):
            fit_kept_series(document, crystal_of(document.crystal))
    return save_change(store_of(request), kept.sample_id, document, kept.revision)


def _render(kept: Kept, at: float | None) -> dict[str, Any]:
    content = describe_series(kept, at)
    piece = templates.get_template("series_result.html").render(content)
    result = content["result"]
    return {
        "sample": render_sample(kept),
        "headline": content["headline"],
        "second_line": content["second_line"],
        "series": content["series"],
        "table": content["table"],
        "problem": content["problem"],
        "at": None if result is None else result["t"],
        "range": None if result is None else result["range"],
        "step": None if result is None else result["step"],
        "result": piece,
    }
