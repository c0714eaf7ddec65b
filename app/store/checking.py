"""Looking through a file of kept work, without changing it: whether it is sound, and every revision what it was."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterator
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

from app.errors import HalfturnError, StoreError
from app.store.canonical import canonical_json, hash_canonical
from app.store.database import PATIENCE
from app.store.document import read_document
from app.store.failures import explain_failure, is_damage
from app.store.files import open_to_read
from app.store.migrations import APPLICATION_ID, NEWEST, check_ours, read_version

_MOST_LINES = 100
"""Faults of one kind that are told one by one."""


@dataclass(frozen=True)
class Report:
    """What was found in a file.

    Attributes:
        path: the file.
        faults: one sentence each; none where the file is sound.
        form: the number of the last step of migration that it has taken; None where it could not be read.
        samples, deleted, revisions, sheets: how many it holds; deleted ones are not among the samples.
        newest: kept time of the last change; None where there is none.
    """

    path: Path
    faults: tuple[str, ...]
    form: int | None = None
    samples: int = 0
    deleted: int = 0
    revisions: int = 0
    sheets: int = 0
    newest: str | None = None

    @property
    def is_sound(self) -> bool:
        """Whether nothing is wrong with it."""
        return not self.faults

    def describe(self) -> list[str]:
        """What the file holds, then what is wrong with it, a sentence a line."""
        lines = []
        if self.form is not None:
            lines.append(
                f"{_count(self.samples, 'sample')}, {_count(self.deleted, 'deleted sample')}, "
                f"{_count(self.revisions, 'revision')}, {_count(self.sheets, 'sheet')}; last change "
                f"{self.newest or 'none'}."
            )
            if self.form < NEWEST:
                lines.append(f"The file has form {self.form}; it is brought to form {NEWEST} when it is next served.")
        return [*lines, *(self.faults or ["Nothing is wrong with it."])]


def check_file(path: Path) -> Report:
    """Look through the file at ``path``; it may be in use meanwhile.

    Looked at are the pages and indices of the database, its references, the hash of every revision against its text,
    and whether every document, sheet and value can be read. Raises StoreError where there is no file, or it cannot be
    opened for a reason other than damage.
    """
    if not path.is_file():
        raise StoreError(
            f"There is no file of kept work at {path}.", hint="Name the folder with --data, or the file itself."
        )
    try:
        with closing(open_to_read(path, PATIENCE)) as connection:
            connection.execute("BEGIN")
            try:
                return _look_through(connection, path)
            except sqlite3.DatabaseError as error:
                if not is_damage(error):
                    raise
                return Report(path, (f"The file is damaged: {error}.",))
    except sqlite3.Error as error:
        raise explain_failure(error, path) from error


def _look_through(connection: sqlite3.Connection, path: Path) -> Report:
    try:
        check_ours(connection)
    except StoreError as error:
        return Report(path, (error.message,))
    if int(connection.execute("PRAGMA application_id").fetchone()[0]) != APPLICATION_ID:
        return Report(path, ("The file is empty: nothing was ever kept in it.",))
    pages = [str(row[0]) for row in connection.execute(f"PRAGMA integrity_check({_MOST_LINES})")]
    faults = [f"The file is damaged: {line}." for line in pages if line != "ok"]
    faults += _tell_some(_check_references(connection))
    faults += _tell_some(_check_revisions(connection))
    faults += _tell_some(_check_values(connection))

    def count(what: str) -> int:
        return int(connection.execute(f"SELECT count(*) FROM {what}").fetchone()[0])

    return Report(
        path,
        tuple(faults),
        form=read_version(connection),
        samples=count("sample WHERE deleted IS NULL"),
        deleted=count("sample WHERE deleted IS NOT NULL"),
        revisions=count("revision"),
        sheets=count("sheet"),
        newest=connection.execute("SELECT max(changed) FROM sample").fetchone()[0],
    )


def _check_references(connection: sqlite3.Connection) -> Iterator[str]:
    for row in connection.execute("PRAGMA foreign_key_check"):
        yield f"A row of the table {row[0]} ({row[1]}) refers to a row of {row[2]} that is not there."


def _check_revisions(connection: sqlite3.Connection) -> Iterator[str]:
    for row in connection.execute("SELECT sample_id, number, hash, json FROM revision ORDER BY sample_id, number"):
        name = f"Revision {row['number']} of the sample {row['sample_id']}"
        text = row["json"]
        if not isinstance(text, str):
            yield f"{name} is not text."
        elif hash_canonical(text.encode("utf-8", "surrogatepass")) != row["hash"]:
            yield f"{name} is not what it was when it was kept: its hash is another."
        else:
            try:
                read_document(json.loads(text))
            except (HalfturnError, ValueError, RecursionError) as error:
                yield f"{name} cannot be read: {error}"


def _check_values(connection: sqlite3.Connection) -> Iterator[str]:
    for table, key, name in (("sheet", "number", "The sheet"), ("laboratory", "key", "The laboratory's value")):
        for row in connection.execute(f"SELECT {key} AS name, json FROM {table}"):
            try:
                canonical_json(json.loads(row["json"]))
            except (HalfturnError, TypeError, ValueError, RecursionError) as error:
                yield f"{name} {row['name']} cannot be read: {error}"


def _tell_some(faults: Iterator[str]) -> list[str]:
    told: list[str] = []
    more = 0
    for fault in faults:
        if len(told) < _MOST_LINES:
            told.append(fault)
        else:
            more += 1
    return [*told, f"And {more} more of this kind."] if more else told


def _count(number: int, what: str) -> str:
    return f"{number} {what}{'' if number == 1 else 's'}"
