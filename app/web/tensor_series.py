"""The calls that change the kept series of the property that is looked at."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from fastapi import APIRouter, Request
from pydantic import Field

from app.errors import located
from app.series.tensor_series import evaluate_tensors
from app.store.document import change_document
from app.store.revisions import Kept
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import TensorChange
from app.web.kept import render_sample
from app.web.pages import templates
from app.web.parts import Number, Part
from app.web.property_edits import edit_tensor
from app.web.readings_view import require_property
from app.web.samples import save_change, store_of
from app.web.tensor_series_view import (
    change_tensor_series,
    describe_tensor_series,
    fit_tensor_series,
    is_empty,
)

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class TensorSeriesChange(Part):
    """What of the series is changed; what is left out stays."""

    source: Literal["table", "readings"] | None = None
    table: str | None = Field(None, max_length=4 * 1024 * 1024, description="free cells against a variable, as text")
    degree: Annotated[int, Field(ge=0, le=8)] | None = Field(None, description="of the polynomials")


class TensorSeriesRequest(Part):
    """A change of the series, and the revision that it was made from."""

    parent: int = Field(ge=1)
    change: TensorSeriesChange
    at: Number | None = Field(None, description="value of the variable that is shown")


class UseTensorRequest(Part):
    """Keep the tensor at a value of the variable as the property's own."""

    parent: int = Field(ge=1)
    at: Number


@router.get("/{sample_id}/tensor-series", summary="The series of the property, and its tensor at one value")
def show(sample_id: str, request: Request, at: float | None = None) -> JsonAnswer:
    """``result`` is a piece of the page."""
    return _render(store_of(request).samples.get(sample_id), at)


@router.post("/{sample_id}/tensor-series", summary="Change the series of the property that is looked at")
def change(sample_id: str, given: TensorSeriesRequest, request: Request) -> JsonAnswer:
    """What cannot be fitted is refused and nothing is kept; faults of a table are in ``detail.problems``."""
    kept = store_of(request).samples.get(sample_id, given.parent)
    crystal, shown = require_property(kept)
    named = given.change.model_dump(exclude_unset=True)
    document = change_document(kept.document, {"series": change_tensor_series(kept.document, shown, named)})
    if not is_empty(document, shown):
        with located("change"):
            fit_tensor_series(document, crystal, shown)
    return _render(save_change(store_of(request), sample_id, document, given.parent), given.at)


@router.post("/{sample_id}/tensor-series/use", summary="Keep the tensor at one value as the property's own")
def use(sample_id: str, given: UseTensorRequest, request: Request) -> JsonAnswer:
    """With its covariance, and where it came from."""
    kept = store_of(request).samples.get(sample_id, given.parent)
    crystal, shown = require_property(kept)
    series = fit_tensor_series(kept.document, crystal, shown)
    curve = evaluate_tensors(series.fit, [given.at])
    covariance = None if curve.free_covariance is None else curve.free_covariance[0].tolist()
    changes, _ = edit_tensor(
        kept.document,
        TensorChange.model_validate(
            {
                "free": dict(zip(series.fit.form.labels, curve.free[0].tolist(), strict=True)),
                "covariance": covariance,
                "source": f"{len(series.states)} tensors, at {series.say(given.at)}",
            }
        ),
    )
    saved = save_change(store_of(request), sample_id, change_document(kept.document, changes), given.parent)
    return JsonAnswer({"sample": render_sample(saved)})


def _render(kept: Kept, at: float | None) -> JsonAnswer:
    content: dict[str, Any] = describe_tensor_series(kept, at)
    result = content["tensor_result"]
    return JsonAnswer(
        {
            "sample": render_sample(kept),
            "series": content["tensor_series"],
            "table": content["tensor_table"],
            "problem": content["tensor_problem"],
            "at": None if result is None else result["t"],
            "text": None if result is None else result["t_text"],
            "range": None if result is None else result["range"],
            "step": None if result is None else result["step"],
            "result": templates.get_template("tensor_series.html").render(content),
        }
    )
