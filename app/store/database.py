"""The file of kept work: one SQLite database in a folder that the caller names, made at the first use.

Write-ahead log, foreign keys, and a full synchronisation at each commit, so that a save that was acknowledged is on
the disk. A connection per operation, and writers one after another, so that any thread may call.
"""

from __future__ import annotations

import os
import sqlite3
import threading
import time
import weakref
from collections.abc import Callable, Iterator
from contextlib import closing, contextmanager
from datetime import UTC, datetime
from pathlib import Path

from app.errors import StoreError
from app.store.failures import explain_failure, is_busy, is_damage
from app.store.files import BESIDE, copy_database, name_free, open_to_read
from app.store.migrations import check_ours, migrate
from app.store.occupancy import OccupiedError, hold_together
from app.store.purging import list_due, purge

FILE_NAME = "halfturn.sqlite3"
PATIENCE = 10.0
"""Seconds that an operation waits for another process that is writing."""

Clock = Callable[[], datetime]


def utc_now() -> datetime:
    """The present moment in UTC: the default clock of the store."""
    return datetime.now(UTC)


def write_time(moment: datetime) -> str:
    """Return a moment as kept: UTC, to the microsecond, of fixed length, so that text order is time order."""
    return moment.astimezone(UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")


class Database:
    """The database in ``folder``. Nothing is touched before the first operation.

    ``notices`` are sentences that the user has to see, such as that a damaged file was moved aside.
    """

    def __init__(self, folder: Path | str, clock: Clock = utc_now) -> None:
        self.path = Path(folder) / FILE_NAME
        self.notices: tuple[str, ...] = ()
        self._clock = clock
        self._ready = False
        self._held = False
        self._preparing = threading.Lock()
        self._writing = threading.Lock()

    def moment(self) -> datetime:
        """The present moment by the store's clock."""
        return self._clock()

    def now(self) -> str:
        """The present moment by the store's clock, as kept."""
        return write_time(self.moment())

    @contextmanager
    def reading(self) -> Iterator[sqlite3.Connection]:
        """A connection on which all that is read is of one moment. Raises StoreError."""
        with self._transaction("BEGIN DEFERRED") as connection:
            yield connection

    @contextmanager
    def writing(self) -> Iterator[sqlite3.Connection]:
        """A connection whose changes are kept together when the block ends, or not at all. Raises StoreError."""
        with self._writing, self._transaction("BEGIN IMMEDIATE") as connection:
            yield connection

    @contextmanager
    def _transaction(self, begin: str) -> Iterator[sqlite3.Connection]:
        try:
            self._prepare()
            with closing(self._connect("rw")) as connection:
                connection.execute(begin)
                try:
                    yield connection
                    connection.execute("COMMIT")
                except BaseException:
                    if connection.in_transaction:
                        connection.rollback()
                    raise
        except sqlite3.Error as error:
            if is_damage(error):
                # The next operation looks at the file before it does anything, and moves it aside if need be.
                self._ready = False
            raise explain_failure(error, self.path) from error

    def _connect(self, mode: str) -> sqlite3.Connection:
        # Mode "rw" refuses to make a new file in silence where the old one has gone.
        address = f"{self.path.absolute().as_uri()}?mode={mode}"
        connection = sqlite3.connect(address, uri=True, timeout=PATIENCE, isolation_level=None)
        try:
            connection.row_factory = sqlite3.Row
            connection.execute("PRAGMA foreign_keys = ON")
            connection.execute("PRAGMA synchronous = FULL")
        except BaseException:
            connection.close()
            raise
        return connection

    def _prepare(self) -> None:
        with self._preparing:
            if self._ready:
                return
            try:
                self.path.parent.mkdir(parents=True, exist_ok=True)
            except OSError as error:
                raise explain_failure(error, self.path.parent) from error
            self._hold()
            try:
                damage = self._find_damage()
                if damage is None:
                    with closing(self._connect("rwc")) as connection:
                        _switch_to_log(connection)
                        migrate(connection, keep_copy=self._keep_copy)
                        self._purge(connection)
                    self._ready = True
                    return
            except sqlite3.Error as error:
                raise explain_failure(error, self.path) from error
            self._move_aside(damage)

    def _hold(self) -> None:
        """Say to whoever would put another file in its place that this one is in use, for as long as this lives."""
        if self._held:
            return
        try:
            descriptor = hold_together(self.path.parent, PATIENCE)
        except OccupiedError:
            raise StoreError(
                f"Another file is being put in the place of the kept work: {self.path}.",
                hint="Wait until that is done, then try again.",
                detail={"path": str(self.path)},
            ) from None
        if descriptor is not None:
            weakref.finalize(self, os.close, descriptor)
        self._held = True

    def _keep_copy(self, step: int) -> None:
        """Keep the file as it is before the first step of a migration, dated, beside it. Raises StoreError."""
        target = name_free(self.path, f"before-form-{step}", self._clock())
        try:
            with closing(open_to_read(self.path, PATIENCE)) as source:
                copy_database(source, target)
        except (OSError, sqlite3.Error) as error:
            raise explain_failure(error, target) from error
        self.notices = (
            *self.notices,
            f"The file of kept work is brought to a newer form; as it was before, it is kept as {target}.",
        )

    def _purge(self, connection: sqlite3.Connection) -> None:
        """Remove what was deleted long ago; where nothing was, nobody has to be waited for."""
        if not connection.execute("SELECT 1 FROM sample WHERE deleted IS NOT NULL LIMIT 1").fetchone():
            return
        now = self._clock()
        if not list_due(connection, now):
            return
        try:
            connection.execute("BEGIN IMMEDIATE")
            purge(connection, now)
            connection.execute("COMMIT")
        except sqlite3.OperationalError:
            # A full disk, or someone who is writing: no reason to keep anyone from the samples. The next opening does.
            if connection.in_transaction:
                connection.rollback()

    def _find_damage(self) -> str | None:
        """Return what is wrong with the file, None where it is sound, without changing it. Raises StoreError.

        Where a log was left behind, a connection that may write would fold it into the file as it closes, a damaged
        file too; one that only reads leaves both as they are.
        """
        log = Path(f"{self.path}-wal")
        try:
            with closing(self._connect("ro" if log.exists() and log.stat().st_size else "rwc")) as connection:
                check_ours(connection)
                answer = str(connection.execute("PRAGMA quick_check(1)").fetchone()[0])
        except sqlite3.Error as error:
            if not is_damage(error):
                raise
            answer = str(error)
        return None if answer == "ok" else answer

    def _move_aside(self, damage: str) -> None:
        """Rename a damaged file with its log, keep a notice, and raise StoreError that says where it is now."""
        aside = name_free(self.path, "damaged", self._clock())
        try:
            # The log goes first: left behind, it would be taken for the log of the new file.
            for ending in (*BESIDE, ""):
                source = Path(f"{self.path}{ending}")
                if source.exists():
                    source.rename(f"{aside}{ending}")
        except OSError as error:
            raise explain_failure(error, self.path) from error
        message = f"The file of kept work was damaged and has been moved aside, unchanged, to {aside}."
        self.notices = (*self.notices, message)
        raise StoreError(
            message,
            hint="Put a backup in its place, or go on with an empty store; keep the damaged file for a repair.",
            detail={"path": str(self.path), "moved_to": str(aside), "cause": damage},
        )


def _switch_to_log(connection: sqlite3.Connection) -> None:
    """Turn the write-ahead log on; it stays on for the file. SQLite does not wait for others here, so this does."""
    until = time.monotonic() + PATIENCE
    while True:
        try:
            connection.execute("PRAGMA journal_mode = WAL")
            return
        except sqlite3.OperationalError as error:
            if not is_busy(error) or time.monotonic() > until:
                raise
            time.sleep(0.01)
