"""The kept samples over HTTP: list, open, make, edit, undo, redo. Every answer of a sample has one shape."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter, Request

from app.catalogue.listing import list_properties
from app.errors import ConflictError, InputError, StoreError, located
from app.store import Store
from app.store.demonstration import seed
from app.store.document import SampleDocument, change_document, read_document
from app.store.revisions import Kept, Summary
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.changes import EditRequest, MarkRequest, NewSampleRequest, StepRequest
from app.web.editing import apply_change
from app.web.kept import print_own_unit, render_entry, render_sample
from app.web.pictures import draw_quadric

router = APIRouter(prefix="/api", route_class=StrictRoute, responses=responses.KEPT_ERROR_RESPONSES)


def store_of(request: Request) -> Store:
    """The store of the application. Raises StoreError where the server was started without a folder."""
    store: Store | None = request.app.state.store
    if store is None:
        raise StoreError(
            "This server was started without a folder for kept work.", hint="Start it with --data and a folder."
        )
    return store


def save_change(store: Store, sample_id: str, document: SampleDocument, parent: int) -> Kept:
    """Keep a document as the next revision. Raises ConflictError, with ``newest``, against an old parent."""
    try:
        return store.samples.save(sample_id, document, parent)
    except ConflictError as error:
        raise _with_newest(error) from None


def list_samples(store: Store, *, archived: bool = False, deleted: bool = False) -> tuple[Summary, ...]:
    """The samples, newest change first; an empty store is given the demonstration samples."""
    seed(store.samples)
    return store.samples.list(archived=archived, deleted=deleted)


def render_summary(summary: Summary) -> dict[str, Any]:
    """One line of the list."""
    looked_at = summary.property
    return {
        "id": summary.sample_id,
        "name": summary.name,
        "tags": list(summary.tags),
        "group": summary.group,
        "cell": None if summary.cell is None else list(summary.cell),
        "crystal": summary.crystal,
        "property": None
        if looked_at is None
        else {
            "name": looked_at["name"],
            "unit": looked_at["unit"],
            "unit_printed": print_own_unit(looked_at["unit"]),
        },
        "revision": summary.revision,
        "saved_at": summary.time,
        "archived": summary.archived,
        "deleted": summary.deleted,
        "picture": draw_quadric(summary),
    }


@router.get("/properties", summary="The catalogue of properties, for the picker")
def properties() -> JsonAnswer:
    """Every property with its units, inner symmetry, parity and sign limit."""
    return JsonAnswer([render_entry(entry) for entry in list_properties()])


@router.get("/samples", summary="The kept samples, newest change first, each with a small picture of its quadric")
def samples(request: Request, archived: bool = False, deleted: bool = False) -> JsonAnswer:
    """Archived and deleted ones only where they are asked for."""
    found = list_samples(store_of(request), archived=archived, deleted=deleted)
    return JsonAnswer([render_summary(summary) for summary in found])


@router.post("/samples", summary="Make a new sample, or a copy of one")
def create(given: NewSampleRequest, request: Request) -> JsonAnswer:
    """A new sample starts as a triclinic crystal without properties, which locks nothing."""
    store = store_of(request)
    name = None if given.name is None else given.name.strip()
    if given.name is not None and not name:
        raise InputError("A sample needs a name.", field="name", hint="Type one; it may be changed at any time.")
    if given.from_ is not None:
        with located("from"):
            return JsonAnswer(render_sample(store.samples.duplicate(given.from_, name)))
    document = read_document(
        {"name": name or "New sample", "crystal": {"cell": [5, 6, 7, 80, 95, 100], "group": "1"}, "tags": []}
    )
    return JsonAnswer(render_sample(store.samples.create(document)))


@router.get("/samples/{sample_id}", summary="One sample with everything that follows from it")
def fetch(sample_id: str, request: Request, revision: int | None = None) -> JsonAnswer:
    """The newest revision, or the one with a number."""
    return JsonAnswer(render_sample(store_of(request).samples.get(sample_id, revision)))


@router.post("/samples/{sample_id}/edit", summary="Change one thing of a sample; kept as a new revision")
def edit(sample_id: str, given: EditRequest, request: Request) -> JsonAnswer:
    """The change is made to the revision ``parent``; 409 where that is no longer the newest."""
    store = store_of(request)
    base = store.samples.get(sample_id, given.parent)
    with located("change"):
        edited = apply_change(base.document, given.change)
    kept = save_change(store, sample_id, edited.document, given.parent)
    return JsonAnswer(render_sample(kept, list(edited.notices)))


@router.post("/samples/{sample_id}/undo", summary="Step back to the revision before")
def undo(sample_id: str, given: StepRequest, request: Request) -> JsonAnswer:
    """Across pages and restarts."""
    try:
        return JsonAnswer(render_sample(store_of(request).samples.undo(sample_id, given.parent)))
    except ConflictError as error:
        raise _with_newest(error) from None


@router.post("/samples/{sample_id}/redo", summary="Step forward again")
def redo(sample_id: str, given: StepRequest, request: Request) -> JsonAnswer:
    """Along the newest line."""
    try:
        return JsonAnswer(render_sample(store_of(request).samples.redo(sample_id, given.parent)))
    except ConflictError as error:
        raise _with_newest(error) from None


@router.post("/samples/{sample_id}/rename", summary="Give a sample another name")
def rename(sample_id: str, given: NewSampleRequest, request: Request) -> JsonAnswer:
    """A new revision of the newest one, whichever that is."""
    name = (given.name or "").strip()
    if not name:
        raise InputError("A sample needs a name.", field="name", hint="Type one; it may be changed at any time.")
    store = store_of(request)
    current = store.samples.get(sample_id)
    change_document(current.document, {"name": name})
    return JsonAnswer(render_sample(store.samples.rename(sample_id, name)))


@router.post("/samples/{sample_id}/mark", summary="Put a sample out of the list, or back into it")
def mark(sample_id: str, given: MarkRequest, request: Request) -> JsonAnswer:
    """Archived: out of the usual list. Deleted: out of every list; its revisions stay and it can be taken back."""
    store = store_of(request)
    if given.deleted is not None:
        (store.samples.delete if given.deleted else store.samples.recover)(sample_id)
    if given.archived is not None:
        store.samples.archive(sample_id, given.archived)
    return JsonAnswer({"id": sample_id, "archived": given.archived, "deleted": given.deleted})


def _with_newest(error: ConflictError) -> ConflictError:
    detail = dict(error.detail or {})
    return ConflictError(
        error.message, field="parent", hint=error.hint, detail={"newest": detail.get("newest_revision"), **detail}
    )
