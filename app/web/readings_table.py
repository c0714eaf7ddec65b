"""The readings of a sample over HTTP: shown as rows of text cells, taken whole or not at all."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping, Sequence
from typing import Any

from fastapi import APIRouter, Request
from pydantic import Field

from app.errors import InputError
from app.readings.table import read_table
from app.store import Store
from app.store.document import KeptProperty, SampleDocument, change_document, readings_of
from app.store.revisions import Kept
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import LongText, Typed
from app.web.kept import render_sample
from app.web.kept_readings import keep_table
from app.web.pages import templates
from app.web.parts import Part, Pose
from app.web.readings_view import GRID_COLUMNS, describe_kept, require_property
from app.web.requests import MAX_KEPT_READINGS
from app.web.samples import save_change, store_of

router = APIRouter(prefix="/api/samples", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


class Row(Part):
    """One row of the grid, as it was typed."""

    cells: dict[Typed, LongText] = Field(description="text by column", max_length=len(GRID_COLUMNS))
    set_aside: LongText | None = Field(None, description="why the reading is not used; null where it is")
    pose: Pose | None = Field(None, description="the reading's own pose; null where it has none")


class RowsRequest(Part):
    """All the readings of the current property, and the revision that they were made from."""

    parent: int = Field(ge=1)
    rows: list[Row] = Field(max_length=MAX_KEPT_READINGS)
    batches: dict[Typed, Typed] = Field({}, description="relative calibration error of each batch, as text")


class TextRequest(Part):
    """A table as text, in place of the readings in use."""

    parent: int = Field(ge=1)
    text: str = Field(description="see the columns of the readings' table; at most the size of a body")


@router.get("/{sample_id}/readings", summary="The readings of the current property, and what they give")
def show(sample_id: str, request: Request) -> JsonAnswer:
    """Rows of text cells; ``result`` is a piece of the page."""
    return JsonAnswer(_render(store_of(request).samples.get(sample_id)))


@router.post("/{sample_id}/readings", summary="Take the rows of the grid, all or none")
def take_rows(sample_id: str, given: RowsRequest, request: Request) -> JsonAnswer:
    """Faults are told by row and column in ``detail.problems``."""
    store = store_of(request)
    document = store.samples.get(sample_id, given.parent).document
    _, shown = require_property(store.samples.get(sample_id, given.parent))
    rows = [(place, row) for place, row in enumerate(given.rows) if any(map(str.strip, row.cells.values()))]
    kept = _read_rows([place for place, _ in rows], [row for _, row in rows], shown) if rows else []
    changes = {
        "readings": [*_readings_of_others(document, shown), *kept],
        "batches": read_batches(given.batches),
    }
    return _save(store, sample_id, given.parent, changes)


@router.post("/{sample_id}/readings/table", summary="Take a table as text, all or nothing of it")
def take_text(sample_id: str, given: TextRequest, request: Request) -> JsonAnswer:
    """In place of the readings in use; those that are set aside stay. Faults are told by line and column."""
    store = store_of(request)
    kept = store.samples.get(sample_id, given.parent)
    _, shown = require_property(kept)
    return _save(store, sample_id, given.parent, {"readings": replace_table(kept.document, shown, given.text)})


def replace_table(document: SampleDocument, shown: KeptProperty, text: str) -> list[dict[str, Any]]:
    """All readings of the document with a table in place of those in use of one property. Raises InputError."""
    table = read_table(text, unit=shown.unit)
    if len(table.readings) > MAX_KEPT_READINGS:
        raise InputError(
            f"A sample keeps at most {MAX_KEPT_READINGS} readings of a property; the table has {len(table.readings)}.",
            field="text",
            hint="Keep means of repeats, or fit the whole table with the call fit.",
        )
    aside = [entry.plain() for entry in readings_of(document, shown.id) if entry.set_aside is not None]
    return [*_readings_of_others(document, shown), *keep_table(table, shown.id, shown.unit), *aside]


def _readings_of_others(document: SampleDocument, shown: KeptProperty) -> list[dict[str, Any]]:
    return [entry.plain() for entry in document.readings if entry.property != shown.id]


def read_batches(texts: Mapping[str, str]) -> dict[str, float]:
    """Relative calibration errors from what was typed; empty ones are left out.

    Raises:
        InputError: a text is no number, with the field ``batches.NAME``.
    """
    batches = {}
    for name, text in texts.items():
        if not text.strip():
            continue
        try:
            batches[name] = float(text)
        except ValueError:
            raise InputError(
                f"The calibration error “{text}” of the batch {name} is not a number.",
                field=f"batches.{name}",
                hint="Write it as a part of the value: 0.01 is one per cent.",
            ) from None
    return batches


def _read_rows(places: Sequence[int], rows: Sequence[Row], shown: KeptProperty) -> list[dict[str, Any]]:
    """The rows as a document keeps them; faults by row of the grid."""
    out = io.StringIO(newline="")
    writer = csv.writer(out, lineterminator="\n")
    names = [name for name, _ in GRID_COLUMNS]
    writer.writerow(names)
    for row in rows:
        # A line break within a cell would shift the lines by which faults are told.
        writer.writerow([" ".join(row.cells.get(name, "").split()) for name in names])
    try:
        table = read_table(out.getvalue(), unit=shown.unit)
    except InputError as error:
        raise _place(error, places) from None
    return [
        {
            **kept,
            **({} if row.set_aside is None else {"set_aside": row.set_aside}),
            **({} if row.pose is None else {"pose": row.pose.model_dump(by_alias=True, exclude_none=True)}),
        }
        for kept, row in zip(keep_table(table, shown.id, shown.unit), rows, strict=True)
    ]


def _place(error: InputError, places: Sequence[int]) -> InputError:
    """The same faults by row and column of the grid: the header is line 1, and every row is one line."""
    problems = (error.detail or {}).get("problems", [])
    placed = [
        {
            "row": places[problem["line"] - 2] if 2 <= problem["line"] < len(places) + 2 else None,
            "column": problem["column"],
            "reason": problem["reason"],
        }
        for problem in problems
    ]
    if not placed:
        return error
    first = placed[0]
    where = f"row {first['row'] + 1}" if first["row"] is not None else "the table"
    count = (error.detail or {}).get("count", len(placed))
    message = f"In {where}{', ' + first['column'] if first['column'] else ''}: {first['reason']}"
    return InputError(
        message if count == 1 else f"{count} problems. {message}",
        field="rows" if first["row"] is None else f"rows[{first['row']}].cells.{first['column'] or 'kind'}",
        hint="Nothing is taken until every row can be read; what you typed stays.",
        detail={"problems": placed, "count": count},
    )


def _save(store: Store, sample_id: str, parent: int, changes: Mapping[str, Any]) -> JsonAnswer:
    base = store.samples.get(sample_id, parent)
    return JsonAnswer(_render(save_change(store, sample_id, change_document(base.document, changes), parent)))


def _render(kept: Kept) -> dict[str, Any]:
    content = describe_kept(kept)
    sample = render_sample(kept)
    piece = templates.get_template("readings_result.html").render({**content, "sample": sample})
    return {
        "sample": sample,
        "headline": content["headline"],
        "second_line": content["second_line"],
        "unit": content["unit"],
        "columns": [name for name, _ in GRID_COLUMNS],
        "rows": content["grid"],
        "batches": content["batches"],
        "problem": content["problem"],
        "result": piece,
    }
