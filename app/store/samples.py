"""Samples and their revisions: nothing kept is ever overwritten.

Each change of a sample is a new revision, an immutable document under a number that counts up. The sample points at
its current revision; undo moves that pointer to the revision's parent, redo to its newest child. A save after undo
begins a new line from where the pointer stands; the undone revisions stay in the file and can be read by number.
Redo always follows the newest line, because a revision is only ever added where the pointer stands.
"""

from __future__ import annotations

import secrets
import sqlite3
from collections.abc import Callable
from datetime import datetime

from app.errors import InputError
from app.store.database import Database
from app.store.document import SampleDocument, change_document
from app.store.purging import purge
from app.store.revisions import (
    Kept,
    Line,
    Summary,
    add_sample,
    find_sample,
    kept_of,
    newest_child_of,
    parent_of,
    point_at,
    refuse_stale,
    save_revision,
    summary_of,
)
from app.store.search import split_words


def new_identifier() -> str:
    """Return a new sample id: twelve random hexadecimal digits."""
    return secrets.token_hex(6)


class Samples:
    """The samples in a database. All methods may be called from any thread, and raise StoreError."""

    def __init__(self, database: Database, identify: Callable[[], str] = new_identifier) -> None:
        self._database = database
        self.identify = identify

    def create(self, document: SampleDocument) -> Kept:
        """Keep a new sample with ``document`` as its revision 1."""
        with self._database.writing() as connection:
            return self._add_sample(connection, document)

    def create_if_empty(self, documents: tuple[SampleDocument, ...]) -> tuple[Kept, ...]:
        """Keep these samples where no sample was ever kept, deleted ones counted; else do nothing."""
        with self._database.writing() as connection:
            if connection.execute("SELECT 1 FROM sample LIMIT 1").fetchone():
                return ()
            return tuple(self._add_sample(connection, document) for document in documents)

    def list(self, *, archived: bool = False, deleted: bool = False, text: str = "") -> tuple[Summary, ...]:
        """Return the samples, newest change first; archived and deleted ones only where asked for, too.

        With ``text`` only those in which every word of it is found, capitals or not: in the name, the tags, the notes,
        the group or the names of the properties. Raises InputError where the text is too long.
        """
        words = split_words(text)
        with self._database.reading() as connection:
            rows = connection.execute(
                "SELECT s.*, r.hash, r.json, "
                "s.deleted IS NOT NULL AND EXISTS (SELECT 1 FROM sheet WHERE sheet.sample_id = s.id) AS printed "
                "FROM sample s "
                "JOIN revision r ON r.sample_id = s.id AND r.number = s.revision "
                "WHERE (? OR s.archived IS NULL) AND (? OR s.deleted IS NULL) ORDER BY s.changed DESC, s.rowid DESC",
                (archived, deleted),
            ).fetchall()
        return tuple(found for row in rows if (found := summary_of(row, words)) is not None)

    def get(self, sample_id: str, revision: int | None = None) -> Kept:
        """Return the current revision, or the one with a given number. Raises NotFoundError."""
        with self._database.reading() as connection:
            return kept_of(connection, find_sample(connection, sample_id), revision)

    def history(self, sample_id: str) -> tuple[Line, ...]:
        """Return all revisions, undone ones included, newest first."""
        with self._database.reading() as connection:
            sample = find_sample(connection, sample_id)
            rows = connection.execute(
                "SELECT number, parent, hash, created FROM revision WHERE sample_id = ? ORDER BY number DESC",
                (sample_id,),
            ).fetchall()
        return tuple(
            Line(row["number"], row["parent"], row["hash"], row["created"], row["number"] == sample["revision"])
            for row in rows
        )

    def save(self, sample_id: str, document: SampleDocument, parent: int) -> Kept:
        """Keep ``document`` as a new revision, made from the revision ``parent``.

        Where the document is what stands now, no revision is made, so a save may be sent again in doubt. Raises
        ConflictError with ``detail`` {newest_revision, parent} where ``parent`` is no longer the current revision.
        """
        with self._database.writing() as connection:
            sample = find_sample(connection, sample_id)
            return self._save(connection, sample, document, parent)

    def restore(self, sample_id: str, revision: int, parent: int) -> Kept:
        """Keep the document of an earlier (or undone) ``revision`` as a new revision, made from ``parent``.

        Nothing is taken back: what stood in between stays in the history. Where the document is what stands now, no
        revision is made. Raises NotFoundError where there is no such revision, and ConflictError as ``save`` does.
        """
        with self._database.writing() as connection:
            sample = find_sample(connection, sample_id)
            return self._save(connection, sample, kept_of(connection, sample, revision).document, parent)

    def rename(self, sample_id: str, name: str) -> Kept:
        """Give the sample a new name, as a new revision."""
        with self._database.writing() as connection:
            sample = find_sample(connection, sample_id)
            document = change_document(kept_of(connection, sample).document, {"name": name})
            return self._save(connection, sample, document, sample["revision"])

    def duplicate(self, sample_id: str, name: str | None = None) -> Kept:
        """Keep the current document as a new sample, named ``name`` or the old name with "(copy)"."""
        with self._database.writing() as connection:
            document = kept_of(connection, find_sample(connection, sample_id)).document
            new_name = f"{document.name} (copy)" if name is None else name
            return self._add_sample(connection, change_document(document, {"name": new_name}))

    def undo(self, sample_id: str, revision: int | None = None) -> Kept:
        """Make the parent of the current revision the current one.

        ``revision``, where given, is the one that the caller takes for current: ConflictError where it is not.
        Raises InputError where there is nothing to undo.
        """
        return self._step(sample_id, revision, parent_of, "There is nothing to undo: this is the first revision.")

    def redo(self, sample_id: str, revision: int | None = None) -> Kept:
        """Make the newest child of the current revision the current one; otherwise as ``undo``."""
        return self._step(sample_id, revision, newest_child_of, "There is nothing to redo: nothing was undone.")

    def archive(self, sample_id: str, archived: bool = True) -> None:
        """Put the sample out of the usual list, or back into it."""
        self._mark(sample_id, "archived", archived)

    def delete(self, sample_id: str) -> None:
        """Mark the sample as deleted. ``recover`` brings it back until ``purge`` removes it, thirty days later.

        Deleting what is deleted changes nothing, so that the days are counted from the first time.
        """
        self._mark(sample_id, "deleted", True)

    def recover(self, sample_id: str) -> None:
        """Take back ``delete``."""
        self._mark(sample_id, "deleted", False)

    def purge(self, now: datetime | None = None) -> tuple[str, ...]:
        """Remove for good what was deleted thirty days before ``now``, or longer; return the ids of what went.

        Done at each opening of the file, too. A sample of which a sheet was printed stays (see ``purging.py``).
        """
        moment = self._database.moment() if now is None else now
        with self._database.writing() as connection:
            return purge(connection, moment)

    def _add_sample(self, connection: sqlite3.Connection, document: SampleDocument) -> Kept:
        sample_id = self.identify()
        add_sample(connection, sample_id, document, self._database.now())
        return kept_of(connection, find_sample(connection, sample_id))

    def _save(self, connection: sqlite3.Connection, sample: sqlite3.Row, document: SampleDocument, parent: int) -> Kept:
        return save_revision(connection, sample, document, parent, self._database.now())

    def _step(
        self,
        sample_id: str,
        revision: int | None,
        find_target: Callable[[sqlite3.Connection, str, int], int | None],
        nothing: str,
    ) -> Kept:
        with self._database.writing() as connection:
            sample = find_sample(connection, sample_id)
            if revision is not None:
                refuse_stale(sample, revision)
            target = find_target(connection, sample_id, sample["revision"])
            if target is None:
                raise InputError(nothing, hint="The sample stays as it is.")
            return point_at(connection, sample_id, target, self._database.now())

    def _mark(self, sample_id: str, column: str, marked: bool) -> None:
        with self._database.writing() as connection:
            sample = find_sample(connection, sample_id, deleted=column == "deleted")
            if (sample[column] is not None) != marked:
                connection.execute(
                    f"UPDATE sample SET {column} = ? WHERE id = ?",
                    (self._database.now() if marked else None, sample_id),
                )
