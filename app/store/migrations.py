"""The steps that bring a file of kept work to the present form, numbered from 1 and never changed once released.

The number of the last step taken stands in the file itself (``PRAGMA user_version``). Each step is one transaction:
it is taken whole or not at all, by one process only, whatever happens in between.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from dataclasses import dataclass

from app.errors import StoreError

APPLICATION_ID = 0x48545231
"""Marks a file as ours, so that a database of something else is never written to."""


@dataclass(frozen=True)
class Migration:
    """One numbered step and its statements."""

    number: int
    purpose: str
    statements: tuple[str, ...]


def _forbid(table: str, act: str) -> str:
    return (
        f"CREATE TRIGGER {table}_no_{act.lower()} BEFORE {act} ON {table} "
        f"BEGIN SELECT RAISE(ABORT, 'a {table} is never changed'); END"
    )


MIGRATIONS: tuple[Migration, ...] = (
    Migration(
        1,
        "samples with their revisions, printed sheets, and what belongs to the laboratory",
        (
            f"PRAGMA application_id = {APPLICATION_ID}",
            """CREATE TABLE sample (
                id TEXT PRIMARY KEY NOT NULL,
                revision INTEGER NOT NULL,
                created TEXT NOT NULL,
                changed TEXT NOT NULL,
                archived TEXT,
                deleted TEXT,
                FOREIGN KEY (id, revision) REFERENCES revision (sample_id, number) DEFERRABLE INITIALLY DEFERRED
            )""",
            """CREATE TABLE revision (
                sample_id TEXT NOT NULL REFERENCES sample (id),
                number INTEGER NOT NULL CHECK (number >= 1),
                parent INTEGER CHECK (parent < number),
                hash TEXT NOT NULL,
                json TEXT NOT NULL,
                created TEXT NOT NULL,
                PRIMARY KEY (sample_id, number),
                FOREIGN KEY (sample_id, parent) REFERENCES revision (sample_id, number)
            )""",
            """CREATE TABLE sheet (
                number INTEGER PRIMARY KEY NOT NULL,
                sample_id TEXT NOT NULL,
                revision INTEGER NOT NULL,
                property_id TEXT NOT NULL,
                inputs_hash TEXT NOT NULL,
                json TEXT NOT NULL,
                created TEXT NOT NULL,
                FOREIGN KEY (sample_id, revision) REFERENCES revision (sample_id, number)
            )""",
            "CREATE TABLE laboratory (key TEXT PRIMARY KEY NOT NULL, json TEXT NOT NULL, changed TEXT NOT NULL)",
            *(_forbid(table, act) for table in ("revision", "sheet") for act in ("UPDATE", "DELETE")),
        ),
    ),
    Migration(
        2,
        "deleted samples can be removed for good; nothing else lets a revision go",
        (
            """CREATE TABLE purging (
                sample_id TEXT PRIMARY KEY NOT NULL REFERENCES sample (id) DEFERRABLE INITIALLY DEFERRED
            )""",
            """CREATE TRIGGER purging_only_deleted BEFORE INSERT ON purging
                WHEN NOT EXISTS (SELECT 1 FROM sample WHERE id = NEW.sample_id AND deleted IS NOT NULL)
                OR EXISTS (SELECT 1 FROM sheet WHERE sample_id = NEW.sample_id)
                BEGIN SELECT RAISE(ABORT, 'only a deleted sample without sheets is removed'); END""",
            "DROP TRIGGER revision_no_delete",
            """CREATE TRIGGER revision_no_delete BEFORE DELETE ON revision
                WHEN NOT EXISTS (SELECT 1 FROM purging WHERE sample_id = OLD.sample_id)
                BEGIN SELECT RAISE(ABORT, 'a revision is never changed'); END""",
            # So that neither undoing, nor removing one of many revisions, looks through all of them.
            "CREATE INDEX revision_by_parent ON revision (sample_id, parent)",
            "CREATE INDEX sheet_by_revision ON sheet (sample_id, revision)",
        ),
    ),
)

NEWEST = MIGRATIONS[-1].number


def read_version(connection: sqlite3.Connection) -> int:
    """Return the number of the last step that the file has taken; 0 for a new file."""
    return int(connection.execute("PRAGMA user_version").fetchone()[0])


def check_ours(connection: sqlite3.Connection) -> None:
    """Refuse a database of something else, and one that a newer version of this program wrote."""
    mark = int(connection.execute("PRAGMA application_id").fetchone()[0])
    version = read_version(connection)
    tables = int(connection.execute("SELECT count(*) FROM sqlite_schema").fetchone()[0])
    if mark != APPLICATION_ID and (mark or version or tables):
        raise StoreError(
            "The file of kept work is a database of something else; nothing in it was touched.",
            hint="Choose another folder with --data, or move that file elsewhere.",
        )
    if version > NEWEST:
        raise StoreError(
            f"The file of kept work has form {version}; this program knows forms up to {NEWEST}. Nothing was touched.",
            hint="Update this program, or choose another folder with --data.",
        )


def migrate(
    connection: sqlite3.Connection,
    steps: tuple[Migration, ...] = MIGRATIONS,
    keep_copy: Callable[[int], None] | None = None,
) -> tuple[int, ...]:
    """Take every step that the file lacks, each in a transaction of its own; return their numbers.

    ``connection`` is in autocommit mode. Taking all steps again does nothing. ``keep_copy`` is called with the number
    of the first step that an older file lacks, before anything is changed and while nobody else can write; where it
    raises, no step is taken.
    """
    taken: list[int] = []
    for step in steps:
        connection.execute("BEGIN IMMEDIATE")
        try:
            version = read_version(connection)
            if version < step.number:
                if keep_copy is not None and version and not taken:
                    keep_copy(step.number)
                for statement in step.statements:
                    connection.execute(statement)
                connection.execute(f"PRAGMA user_version = {step.number}")
                taken.append(step.number)
            connection.execute("COMMIT")
        except BaseException:
            if connection.in_transaction:
                connection.rollback()
            raise
    return tuple(taken)
