"""Whole files of kept work: copied while others use them, and put beside each other under names that nothing has yet.

No function here overwrites or deletes a file that it did not make itself.
"""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing, suppress
from datetime import UTC, datetime
from pathlib import Path

BESIDE = ("-wal", "-shm")
"""Endings of the files that the database keeps beside its own: the log, and an index into it."""

_MOST_NAMES = 1000


def name_free(path: Path, what: str, moment: datetime) -> Path:
    """Return a path beside ``path`` that tells what the file is and when it was made, and that nothing has yet."""
    stem = f"{path.stem}-{what}-{moment.astimezone(UTC):%Y%m%dT%H%M%SZ}"
    names = (stem if count == 1 else f"{stem}-{count}" for count in range(1, _MOST_NAMES))
    return next(found for name in names if not (found := path.with_name(name + path.suffix)).exists())


def open_to_read(path: Path, patience: float) -> sqlite3.Connection:
    """Return a connection on which nothing can be changed; no file is made where there is none.

    Where the folder lets nobody write, the log's index cannot be made either; then the file is read as it stands.
    """
    address = path.absolute().as_uri()
    connection = _connect(f"{address}?mode=ro", patience)
    try:
        connection.execute("SELECT 1 FROM sqlite_schema LIMIT 1").fetchall()
    except sqlite3.OperationalError:
        connection.close()
        log = Path(f"{path}-wal")
        if not path.exists() or (log.exists() and log.stat().st_size):
            raise
        connection = _connect(f"{address}?mode=ro&immutable=1", patience)
    except sqlite3.DatabaseError:
        # Whoever asked finds the damage where it looks for it.
        pass
    return connection


def _connect(address: str, patience: float) -> sqlite3.Connection:
    connection = sqlite3.connect(address, uri=True, timeout=patience, isolation_level=None)
    connection.row_factory = sqlite3.Row
    return connection


def copy_database(source: sqlite3.Connection, target: Path) -> None:
    """Copy the whole database of ``source``, of one moment, into the new file ``target``.

    The copy is one file without a log, on the disk when this returns. It first has another name, so that ``target``
    is whole as soon as it is there. Raises FileExistsError where ``target`` exists, OSError and sqlite3.Error; then
    nothing is left behind.
    """
    os.close(os.open(target, os.O_CREAT | os.O_EXCL | os.O_WRONLY, 0o666))
    growing = target.with_name(target.name + ".part")
    try:
        growing.unlink(missing_ok=True)
        with closing(sqlite3.connect(growing, isolation_level=None)) as copy:
            # All pages in one step: a change by someone else meanwhile would else begin it anew, again and again.
            source.backup(copy, pages=-1)
            # A file that is carried elsewhere must not need a log beside it.
            copy.execute("PRAGMA journal_mode = DELETE")
        sync_file(growing)
        os.replace(growing, target)
    except BaseException:
        for path in (growing, target, *(Path(f"{growing}{ending}") for ending in (*BESIDE, "-journal"))):
            with suppress(OSError):
                path.unlink(missing_ok=True)
        raise
    sync_folder(target.parent)


def sync_file(path: Path) -> None:
    """Wait until the content of a file is on the disk."""
    descriptor = os.open(path, os.O_RDWR)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def sync_folder(folder: Path) -> None:
    """Wait until the names in a folder are on the disk, where the system can do that."""
    with suppress(OSError):
        descriptor = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)
