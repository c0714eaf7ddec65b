"""Rows of samples and revisions, read and written inside a transaction that the caller holds."""

from __future__ import annotations

import json
import sqlite3
from dataclasses import dataclass
from typing import Any

from app.errors import ConflictError, NotFoundError
from app.store.canonical import canonical_json, content_hash, hash_canonical
from app.store.document import SampleDocument, current_property, read_document
from app.store.purging import kept_until
from app.store.search import matches


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
    None; ``time`` is that of the last change, undo and redo included. ``kept_until`` tells until when a deleted sample
    can be taken back; None where it is not deleted, or is kept for its printed sheets.
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
    kept_until: str | None = None


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


def summary_of(row: sqlite3.Row, words: tuple[str, ...] = ()) -> Summary | None:
    """Return the list's line for a row of a sample joined with its current revision; None where a word is not found."""
    document = read_document(json.loads(row["json"]))
    if not matches(document, words):
        return None
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
        kept_until=kept_until(row["deleted"], bool(row["printed"])),
    )


def add_revision(
    connection: sqlite3.Connection, sample_id: str, number: int, parent: int | None, document: SampleDocument, now: str
) -> None:
    """Write one revision; it is never changed again."""
    data = canonical_json(document.plain())
    connection.execute(
        "INSERT INTO revision (sample_id, number, parent, hash, json, created) VALUES (?, ?, ?, ?, ?, ?)",
        (sample_id, number, parent, hash_canonical(data), data.decode("utf-8"), now),
    )


def add_sample(connection: sqlite3.Connection, sample_id: str, document: SampleDocument, now: str) -> None:
    """Write a new sample with its revision 1."""
    connection.execute("INSERT INTO sample (id, revision, created, changed) VALUES (?, 1, ?, ?)", (sample_id, now, now))
    add_revision(connection, sample_id, 1, None, document, now)


def save_revision(
    connection: sqlite3.Connection, sample: sqlite3.Row, document: SampleDocument, parent: int, now: str
) -> Kept:
    """Write ``document`` as the next revision of a sample's row and make it the current one; none where it stands
    already. Raises ConflictError where ``parent`` is not the current one."""
    if content_hash(document.plain()) == find_revision(connection, sample["id"], sample["revision"])["hash"]:
        return kept_of(connection, sample)
    refuse_stale(sample, parent)
    newest = connection.execute("SELECT max(number) FROM revision WHERE sample_id = ?", (sample["id"],)).fetchone()
    number = int(newest[0]) + 1
    add_revision(connection, sample["id"], number, parent, document, now)
    return point_at(connection, sample["id"], number, now)


def point_at(connection: sqlite3.Connection, sample_id: str, number: int, now: str) -> Kept:
    """Make a revision of a sample the current one."""
    connection.execute("UPDATE sample SET revision = ?, changed = ? WHERE id = ?", (number, now, sample_id))
    return kept_of(connection, find_sample(connection, sample_id))


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
