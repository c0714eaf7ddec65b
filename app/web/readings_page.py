"""The Readings page: a table of measured numbers, the tensor that it gives, and what it cannot tell.

The grid and the result follow the calls of ``app.web.readings_table``; the forms here do without a script.
"""

from __future__ import annotations

from typing import Any, Final
from urllib.parse import parse_qs

from fastapi import APIRouter, Request, Response
from fastapi.responses import RedirectResponse

from app.errors import ConflictError, HalfturnError, InputError
from app.store.document import change_document, readings_of
from app.store.revisions import Kept
from app.web.changes import TensorChange
from app.web.kept_readings import write_readings
from app.web.pages import embed_json, render_page
from app.web.property_edits import edit_tensor
from app.web.readings_table import read_batches, replace_table
from app.web.readings_view import GRID_COLUMNS, describe_kept, fit_kept, require_property
from app.web.samples import store_of

router = APIRouter(include_in_schema=False)

STARTING_TABLE: Final = "kind,direction,second,value,sigma,unit,direction_sigma,bar,batch,temperature,note\n"
PROBLEMS_SHOWN: Final = 40


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
        _crystal, shown = require_property(kept)
        changes = {
            "readings": replace_table(kept.document, shown, text),
            "batches": read_batches(_split_batches(batches)),
        }
        store.samples.save(sample_id, change_document(kept.document, changes), revision)
    except HalfturnError as error:
        return _render(request, kept, fault=error, text=text, batches=batches, revision=revision)
    return RedirectResponse(f"/samples/{sample_id}/readings", status_code=303)


@router.post("/samples/{sample_id}/readings/use")
def use_tensor(sample_id: str, revision: int, request: Request) -> Response:
    """Make the fitted tensor the one of the property."""
    store = store_of(request)
    kept = store.samples.get(sample_id)
    crystal, shown = require_property(kept)
    fit, readings = fit_kept(crystal, kept, shown)
    if fit.free is None:
        raise InputError("The readings do not determine a tensor.", hint="Add the readings that the page suggests.")
    change = TensorChange.model_validate(
        {
            "free": dict(zip(fit.form.labels, fit.free.tolist(), strict=True)),
            "covariance": None if fit.free_covariance is None else fit.free_covariance.tolist(),
            "source": f"fit of {len(readings)} readings",
        }
    )
    changes, _ = edit_tensor(kept.document, change)
    store.samples.save(sample_id, change_document(kept.document, changes), revision)
    return RedirectResponse(f"/samples/{sample_id}/tensor", status_code=303)


def _render(
    request: Request,
    kept: Kept,
    *,
    fault: HalfturnError | None = None,
    text: str | None = None,
    batches: str | None = None,
    revision: int | None = None,
) -> Response:
    """The page; after a fault with what was typed, against the revision that it was typed against."""
    content = describe_kept(kept)
    if text is None:
        text = _write_table(kept)
    if batches is None:
        batches = "\n".join(f"{name} = {sigma}" for name, sigma in content["batches"].items())
    problems = fault.detail.get("problems", []) if fault is not None and isinstance(fault.detail, dict) else []
    told: dict[str, Any] | None = None
    if fault is not None:
        place = "batches" if (fault.field or "").startswith("batches") else "table"
        told = {"message": fault.message, "hint": fault.hint, "field": fault.field, "place": place}
    response = render_page(
        request,
        "readings.html",
        kept.sample_id,
        "readings",
        **content,
        columns=GRID_COLUMNS,
        grid_json=embed_json({"columns": [name for name, _ in GRID_COLUMNS], "rows": content["grid"]}),
        text=text,
        batches_text=batches,
        fault=told,
        conflict=isinstance(fault, ConflictError),
        problems=problems[:PROBLEMS_SHOWN],
        more_problems=max(0, len(problems) - PROBLEMS_SHOWN),
        form_revision=kept.revision if revision is None else revision,
    )
    response.status_code = 200 if fault is None else 409 if isinstance(fault, ConflictError) else 422
    return response


def _write_table(kept: Kept) -> str:
    try:
        crystal, shown = require_property(kept)
        entries = readings_of(kept.document, shown.id)
        return write_readings(crystal, entries, shown.unit) if entries else STARTING_TABLE
    except HalfturnError:
        return STARTING_TABLE


def _split_batches(text: str) -> dict[str, str]:
    batches: dict[str, str] = {}
    for line in filter(str.strip, text.splitlines()):
        name, equals, sigma = line.rpartition("=")
        if not equals or not name.strip():
            raise InputError(
                f"The batch “{line.strip()}” cannot be read.",
                field="batches",
                hint="Write one on each line, like: furnace 2 = 0.01",
            )
        batches[name.strip()] = sigma.strip()
    return batches
