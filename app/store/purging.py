"""Deleted samples that can no longer be taken back are removed from the file for good.

A deletion can be taken back for ``DAYS_KEPT`` days. After that the sample goes, with all its revisions, when the file
is next opened. A sample of which a sheet was printed never goes: the paper may still lie in a workshop, its number
leads back to the revision that it was made from, and a number must not come a second time. Such a sample stays
deleted, out of every list, and can be taken back at any time.
"""

from __future__ import annotations

import sqlite3
from datetime import UTC, datetime, timedelta

DAYS_KEPT = 30
"""Days for which a deletion can be taken back."""

_TIME = "%Y-%m-%dT%H:%M:%S.%fZ"

_DUE = (
    "SELECT id FROM sample WHERE deleted IS NOT NULL AND deleted <= ? "
    "AND NOT EXISTS (SELECT 1 FROM sheet WHERE sheet.sample_id = sample.id) ORDER BY id"
)


def list_due(connection: sqlite3.Connection, now: datetime) -> tuple[str, ...]:
    """Return the ids of the samples that are to go at ``now``."""
    before = (now.astimezone(UTC) - timedelta(days=DAYS_KEPT)).strftime(_TIME)
    return tuple(row[0] for row in connection.execute(_DUE, (before,)))


def purge(connection: sqlite3.Connection, now: datetime) -> tuple[str, ...]:
    """Remove what is due within the caller's transaction; return the ids of what went."""
    gone = list_due(connection, now)
    for sample_id in gone:
        # The triggers let revisions go only of a sample that stands in this table, which is empty between purges.
        connection.execute("INSERT INTO purging (sample_id) VALUES (?)", (sample_id,))
        connection.execute("DELETE FROM revision WHERE sample_id = ?", (sample_id,))
        connection.execute("DELETE FROM sample WHERE id = ?", (sample_id,))
        connection.execute("DELETE FROM purging WHERE sample_id = ?", (sample_id,))
    return gone


def kept_until(deleted: str | None, printed: bool) -> str | None:
    """Return until when a deletion can be taken back, as kept times are; None for what is not deleted, or never goes.

    ``deleted`` is the kept time of the deletion, ``printed`` tells that there are sheets of the sample.
    """
    if deleted is None or printed:
        return None
    return (datetime.strptime(deleted, _TIME) + timedelta(days=DAYS_KEPT)).strftime(_TIME)
