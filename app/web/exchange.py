"""Samples as JSON documents over HTTP: out, and in by a plan and a choice for each sample.

A CIF comes in as one new sample, and so does a table of readings together with the crystal it was measured on; both
take the same way as a document, so that nothing kept is replaced without asking.
"""

from __future__ import annotations

import json
import re
from collections.abc import Mapping
from dataclasses import asdict, replace
from typing import Annotated, Any, Final, Literal, Self

from fastapi import APIRouter, Query, Request, Response
from pydantic import Field, ValidationError, model_validator
from pydantic_core import PydanticCustomError

from app.crystal.cif import read_cif
from app.errors import HalfturnError, InputError, located
from app.store.document import SampleDocument, change_document, current_property, read_document
from app.store.exchange import Incoming, export, read_exchange
from app.store.exchange_shapes import FORMAT, MOST_SAMPLES, VERSION, ExchangedStage, write_schema
from app.store.import_plan import ImportPlan, plan_import
from app.store.importing import Choice, import_samples
from app.store.shapes import path_of, sentence_of
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import Change, Typed
from app.web.editing import apply_change
from app.web.file_answers import FileAnswer
from app.web.kept import crystal_of
from app.web.parts import Part, Text
from app.web.readings_table import replace_table
from app.web.requests import MAX_KEPT_READINGS, Crystal
from app.web.samples import store_of
from app.web.stages import KeptAxis, KeptStage, build_axes

router = APIRouter(prefix="/api", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)

JSON: Final = "application/json"
MOST_VALUES: Final = 400_000
"""Values that a document may hold which comes over HTTP, so that it is answered within seconds."""

MOST_PROBLEMS: Final = 200
"""Samples of a document whose crystals are looked at while planning."""

_FILE: Final[dict[int | str, dict[str, Any]]] = {
    200: {"description": "The document, as a file", "content": {JSON: {"schema": {"type": "object"}}}}
}
History = Query(False, description="whether every revision is in it, undone ones included")


class ImportSource(Part):
    """What is to be taken in: a file's text, or a document of samples as an object."""

    text: str | None = Field(
        None,
        description="a document of samples as JSON text, a CIF, or a table of readings as CSV; at most the size of a "
        "body, 8 MiB",
    )
    document: dict[str, Any] | None = Field(None, description="a document of samples as an object, in place of a text")
    name: Typed | None = Field(None, description="name of the sample that a CIF or a table of readings becomes")
    crystal: Crystal | None = Field(None, description="the crystal on which a table of readings was measured")
    property: Text | None = Field(
        None, description="key of the catalogue: what a table of readings is of; other for anything else"
    )

    @model_validator(mode="after")
    def _one_source(self) -> Self:
        if (self.text is None) == (self.document is None):
            raise PydanticCustomError(
                "source", "must have text or document, and not both.", {"hint": "Send the file's text as text."}
            )
        return self


class SampleChoice(Part):
    """What to do with one sample."""

    do: Literal["add", "both", "replace", "skip"] = Field(
        description="add a new one; keep both; replace what is kept by a new revision of it; or pass it over"
    )
    onto: Typed | None = Field(None, description="for replace: id of the kept sample, as the plan named it")
    parent: Annotated[int, Field(ge=1, le=2**53 - 1)] | None = Field(
        None, description="for replace: the revision that the plan showed; 409 where it is no longer the newest"
    )


class ImportRequest(ImportSource):
    """What is to be taken in, and what to do with each sample of it."""

    choices: list[SampleChoice | None] = Field(
        [],
        max_length=MOST_SAMPLES,
        description="one per sample in the order of the plan; null or left out takes what the plan suggests, which is "
        "never to replace",
    )
    stages: Literal["keep", "replace", "both"] | None = Field(
        None, description="what to do with the stages; they are kept as they are unless the laboratory has none"
    )


@router.get("/schema", summary="The JSON Schema of the document in which samples go out and come in")
def schema() -> JsonAnswer:
    """Draft 2020-12, with what every member means."""
    return JsonAnswer(write_schema())


@router.get("/export", summary="All samples as one JSON document", response_class=Response, responses=_FILE)
def export_all(request: Request, history: bool = History) -> Response:
    """Archived ones too, deleted ones not; with the laboratory's stages."""
    return FileAnswer(_write(export(store_of(request), history=history)), JSON, "Halfturn", "samples.json")


@router.get(
    "/samples/{sample_id}/export",
    summary="One sample as a JSON document",
    response_class=Response,
    responses=_FILE,
)
def export_one(sample_id: str, request: Request, history: bool = History) -> Response:
    """As it stands, with or without its history."""
    document = export(store_of(request), sample_id, history=history)
    return FileAnswer(_write(document), JSON, document["samples"][0]["document"]["name"], "sample.json")


@router.post("/import/plan", summary="What taking in a document, a CIF or a table would meet; nothing is changed")
def plan(given: ImportSource, request: Request) -> JsonAnswer:
    """For each sample whether it is new, kept already just so, or differs from what is kept, and what can be chosen."""
    kind, incoming = _read(given)
    found = plan_import(store_of(request), incoming)
    return JsonAnswer({"kind": kind, **_render_plan(found, incoming)})


@router.post("/import", summary="Take in a document, a CIF or a table: all of it, or nothing")
def take_in(given: ImportRequest, request: Request) -> JsonAnswer:
    """409 where what is kept has changed since the plan; 422 where a sample differs and nothing was chosen for it."""
    _, incoming = _read(given)
    choices = {
        place: Choice(choice.do, choice.onto, choice.parent)
        for place, choice in enumerate(given.choices)
        if choice is not None
    }
    taken = import_samples(store_of(request), incoming, choices, stages=given.stages)
    return JsonAnswer(
        {
            "samples": [
                {"place": entry.place, "done": entry.done, "id": entry.sample_id, "revision": entry.revision}
                for entry in taken
            ]
        }
    )


def _write(document: Mapping[str, Any]) -> str:
    return json.dumps(document, ensure_ascii=False, allow_nan=False, separators=(",", ":"))


def _render_plan(found: ImportPlan, incoming: Incoming) -> dict[str, Any]:
    rendered = asdict(found)
    for entry, sample in zip(rendered["samples"], incoming.document.samples, strict=True):
        if entry["kept"] is not None:
            entry["kept"]["id"] = entry["kept"].pop("sample_id")
        entry["problem"] = _find_problem(sample.document) if entry["place"] < MOST_PROBLEMS else None
    return rendered


def _find_problem(document: SampleDocument) -> str | None:
    """Why the pages could not show the sample's crystal; None where they can."""
    try:
        crystal_of(document.crystal)
    except HalfturnError as error:
        return str(error)
    return None


def _read(given: ImportSource) -> tuple[Literal["samples", "cif", "readings"], Incoming]:
    if given.document is not None:
        with located("document"):
            return "samples", _check(read_exchange(given.document, MOST_VALUES))
    text = given.text or ""
    with located("text"):
        if text.lstrip("\ufeff \t\r\n").startswith(("{", "[")):
            return "samples", _check(read_exchange(text, MOST_VALUES))
        if re.search(r"^\s*(?:data_|loop_|_[a-z])", text, re.IGNORECASE | re.MULTILINE):
            return "cif", _wrap(_read_cif(text, given.name))
    return "readings", _wrap(_read_readings(text, given))


def _wrap(document: SampleDocument) -> Incoming:
    return read_exchange({"format": FORMAT, "version": VERSION, "samples": [{"document": document.plain()}]})


def _read_cif(text: str, name: str | None) -> SampleDocument:
    found = read_cif(text)
    crystal = {"cell": found.cell, "group": found.group, "frame": found.frame}
    crystal |= {
        key: value
        for key, value in (("cell_sigma", found.cell_sigma), ("unique_axis", found.unique_axis))
        if value is not None
    }
    told = [f"Formula {found.formula}." if found.formula else ""]
    told += [f"Cell measured at {found.temperature:g} K." if found.temperature is not None else "", *found.notes]
    return read_document(
        {
            "name": ((name or "").strip() or found.name or "Crystal from a CIF")[:500],
            "notes": "\n".join(line for line in told if line),
            "crystal": json.loads(json.dumps(crystal, default=list)),
        }
    )


def _read_readings(text: str, given: ImportSource) -> SampleDocument:
    """A sample with the readings of a table. Without the crystal its directions would say nothing."""
    if given.crystal is None or given.property is None:
        raise InputError(
            "This is no JSON document and no CIF. A table of readings can be taken in with the crystal that it was "
            "measured on, and with what was measured.",
            field="crystal" if given.crystal is None else "property",
            hint="State both, or make the sample first and take the table on its Readings page.",
        )
    crystal = given.crystal.model_dump(exclude_none=True) | {"cell": given.crystal.cell}
    bare = read_document({"name": (given.name or "").strip() or "New sample", "crystal": crystal})
    crystal_of(bare.crystal)
    with located("property"):
        document = apply_change(bare, Change.model_validate({"property": {"kind": given.property}})).document
    shown = current_property(document)
    assert shown is not None
    with located("text"):
        return change_document(document, {"readings": replace_table(document, shown, text)})


def _check(incoming: Incoming) -> Incoming:
    """Refuse what the pages could not bear, and stages that are none."""
    for place, sample in enumerate(incoming.document.samples):
        counts: dict[str, int] = {}
        for reading in sample.document.readings:
            counts[reading.property] = counts.get(reading.property, 0) + 1
        name, most = max(counts.items(), key=lambda item: item[1], default=("", 0))
        if most > MAX_KEPT_READINGS:
            raise InputError(
                f"A sample keeps at most {MAX_KEPT_READINGS} readings of a property; {name} has {most}.",
                field=f"samples[{place}].document.readings",
                hint="Keep means of repeats.",
            )
    if not incoming.document.stages:
        return incoming
    stages = tuple(_check_stage(stage, f"stages[{place}]") for place, stage in enumerate(incoming.document.stages))
    return replace(incoming, document=incoming.document.model_copy(update={"stages": stages}))


def _check_stage(stage: ExchangedStage, field: str) -> ExchangedStage:
    """The stage with the members that the pages know, as they would keep it."""
    given = stage.plain()
    known = {name: given[name] for name in KeptStage.model_fields if name in given}
    known["axes"] = [{name: axis[name] for name in KeptAxis.model_fields if name in axis} for axis in given["axes"]]
    with located(field):
        try:
            checked = KeptStage.model_validate(known)
        except ValidationError as error:
            fault = error.errors()[0]
            raise InputError(sentence_of(fault), field=path_of(fault) or None, hint="Correct this stage.") from None
        build_axes(checked.model_dump())
    return ExchangedStage.model_validate(checked.model_dump())
