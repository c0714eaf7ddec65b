"""Rows of samples and revisions, read and written inside a transaction that the caller holds."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass
from typing import Any

from app.errors import ConflictError, NotFoundError
from app.store.canonical import canonical_json, content_hash
from app.store.document import SampleDocument, current_property, read_document


@dataclass(frozen=True)
class Kept:
    """One revision of a sample. ``time`` is UTC text; ``current`` tells whether it is the one that stands now."""

    sample_id: str
    revision: int
    hash: str
    time: str
    document: SampleDocument
    current: bool
    can_undo: bool
    can_redo: bool
    archived: bool


@dataclass(frozen=True)
class Summary:
    """One line of the list of samples, with what a small picture of its quadric needs.

    ``crystal`` and ``property`` are plain JSON-like data as in the document; ``property`` is the one looked at, or
    None; ``time`` is that of the last change, undo and redo included.
    """

    sample_id: str
    name: str
    tags: tuple[str, ...]
    group: str
    cell: tuple[float, ...] | None
    revision: int
    hash: str
    time: str
    created: str
    archived: bool
    deleted: bool
    crystal: dict[str, Any]
    property: dict[str, Any] | None


@dataclass(frozen=True)
class Line:
    """One entry of a sample's history, without its document."""

    revision: int
    parent: int | None
    hash: str
    time: str
    current: bool


def find_sample(connection: sqlite3.Connection, sample_id: str, *, deleted: bool = False) -> sqlite3.Row:
    """Return the row of a sample; NotFoundError where there is none, or it is deleted and ``deleted`` is not set."""
    found: sqlite3.Row | None = connection.execute("SELECT * FROM sample WHERE id = ?", (sample_id,)).fetchone()
    if found is None:
        raise NotFoundError(f"There is no sample {sample_id}.", hint="Go back to the list and choose one from it.")
    if found["deleted"] and not deleted:
        raise NotFoundError(
            f"The sample {sample_id} was deleted on {found['deleted'][:10]}.", hint="Take the deletion back first."
        )
    return found


def find_revision(connection: sqlite3.Connection, sample_id: str, number: int) -> sqlite3.Row:
    """Return the row of a revision; NotFoundError where there is none."""
    found: sqlite3.Row | None = connection.execute(
        "SELECT * FROM revision WHERE sample_id = ? AND number = ?", (sample_id, number)
    ).fetchone()
    if found is None:
        raise NotFoundError(
            f"The sample {sample_id} has no revision {number}.", hint="Choose one that its history lists."
        )
    return found


def find_document(connection: sqlite3.Connection, sample_id: str, number: int | None = None) -> SampleDocument:
    """Return the document of a revision, or of the current one, of a deleted sample too. Raises NotFoundError."""
    if number is None:
        number = find_sample(connection, sample_id, deleted=True)["revision"]
    return read_document(json.loads(find_revision(connection, sample_id, number)["json"]))


def kept_of(connection: sqlite3.Connection, sample: sqlite3.Row, number: int | None = None) -> Kept:
    """Return the current revision of a sample's row, or the one with a given number. Raises NotFoundError."""
    row = find_revision(connection, sample["id"], sample["revision"] if number is None else number)
    current = row["number"] == sample["revision"]
    return Kept(
        sample_id=sample["id"],
        revision=row["number"],
        hash=row["hash"],
        time=row["created"],
        document=read_document(json.loads(row["json"])),
        current=current,
        can_undo=current and row["parent"] is not None,
        can_redo=current and newest_child_of(connection, sample["id"], row["number"]) is not None,
        archived=sample["archived"] is not None,
    )


def summary_of(row: sqlite3.Row) -> Summary:
    """Return the list's line for a row of a sample joined with its current revision."""
    document = read_document(json.loads(row["json"]))
    looked_at = current_property(document)
    return Summary(
        sample_id=row["id"],
        name=document.name,
        tags=document.tags,
        group=document.crystal.group,
        cell=document.crystal.cell,
        revision=row["revision"],
        hash=row["hash"],
        time=row["changed"],
        created=row["created"],
        archived=row["archived"] is not None,
        deleted=row["deleted"] is not None,
        crystal=document.crystal.plain(),
        property=None if looked_at is None else looked_at.plain(),
    )


def add_revision(
    connection: sqlite3.Connection, sample_id: str, number: int, parent: int | None, document: SampleDocument, now: str
) -> None:
    """Write one revision; it is never changed again."""
    data = document.plain()
    connection.execute(
        "INSERT INTO revision (sample_id, number, parent, hash, json, created) VALUES (?, ?, ?, ?, ?, ?)",
        (sample_id, number, parent, content_hash(data), canonical_json(data).decode("utf-8"), now),
    )


def refuse_stale(sample: sqlite3.Row, revision: int) -> None:
    """Raise ConflictError where ``revision`` is not the sample's current one."""
    if revision != sample["revision"]:
        raise ConflictError(
            f"The sample has changed elsewhere: revision {sample['revision']} stands now, not {revision}.",
            hint="Look at the newest revision, then keep yours, keep theirs, or keep both as two samples.",
            detail={"newest_revision": sample["revision"], "parent": revision},
        )


def parent_of(connection: sqlite3.Connection, sample_id: str, number: int) -> int | None:
    """Return the number of the revision that this one was made from; None for the first."""
    parent: int | None = find_revision(connection, sample_id, number)["parent"]
    return parent


def newest_child_of(connection: sqlite3.Connection, sample_id: str, number: int) -> int | None:
    """Return the number of the newest revision made from this one; None where there is none."""
    child: int | None = connection.execute(
        "SELECT max(number) FROM revision WHERE sample_id = ? AND parent = ?", (sample_id, number)
    ).fetchone()[0]
    return child
