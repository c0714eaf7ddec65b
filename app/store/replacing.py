"""Backups of the file of kept work, and putting one in its place; what was there is moved aside, never deleted."""

from __future__ import annotations

import os
import sqlite3
from contextlib import closing
from datetime import datetime
from pathlib import Path

from app.errors import InputError, StoreError
from app.store.checking import Report, check_file
from app.store.database import FILE_NAME, PATIENCE
from app.store.failures import explain_failure, is_damage
from app.store.files import BESIDE, copy_database, name_free, open_to_read, sync_folder
from app.store.migrations import APPLICATION_ID
from app.store.occupancy import OccupiedError, hold_alone


def back_up(folder: Path, target: Path | None, moment: datetime) -> Report:
    """Copy the file of kept work in ``folder``, as of one moment, while it may be in use; look through the copy.

    Args:
        folder: of the kept work.
        target: the copy to be made, or a folder for it; None: beside the original. A dated name is found where none
            is given.
        moment: the present one.

    Returns:
        what was found in the copy; its ``path`` is where it is.

    Raises:
        StoreError: there is nothing to copy, or the copy cannot be written. InputError: ``target`` exists already.
    """
    path = folder / FILE_NAME
    if not path.is_file():
        raise StoreError(f"There is no file of kept work at {path}.", hint="Name the folder with --data.")
    if target is None:
        target = name_free(path, "backup", moment)
    elif target.is_dir():
        target = name_free(target / FILE_NAME, "backup", moment)
    try:
        with closing(open_to_read(path, PATIENCE)) as source:
            copy_database(source, target)
    except FileExistsError:
        raise InputError(
            f"{target} exists already, and a backup replaces nothing.", hint="Choose another name for the backup."
        ) from None
    except OSError as error:
        raise explain_failure(error, target) from error
    except sqlite3.Error as error:
        raise explain_failure(error, path if is_damage(error) else target) from error
    return check_file(target)


def put_back(folder: Path, source: Path, moment: datetime) -> Path | None:
    """Put a copy of ``source``, which was looked through before, in the place of the kept work in ``folder``.

    Returns where the file is now that was there before; None where there was none.

    Raises:
        InputError: ``source`` is the very file that would be replaced. StoreError: the store is in use, or a file
        cannot be written; then what was there still is.
    """
    path = folder / FILE_NAME
    if path.exists() and source.exists() and path.samefile(source):
        raise InputError(f"{source} is the file of kept work itself.", hint="Name a backup of it.")
    try:
        folder.mkdir(parents=True, exist_ok=True)
        holding = hold_alone(folder)
    except OccupiedError:
        raise StoreError(
            f"A running Halfturn has the kept work in {folder} open.", hint="Stop it first, then restore."
        ) from None
    except OSError as error:
        raise explain_failure(error, folder) from error
    coming = name_free(path, "coming", moment)
    try:
        with closing(open_to_read(source, PATIENCE)) as opened:
            copy_database(opened, coming)
        aside = _set_aside(path, moment)
        try:
            os.replace(coming, path)
        except OSError:
            if aside is not None and not path.exists():
                aside.rename(path)
            raise
        sync_folder(folder)
    except (OSError, sqlite3.Error) as error:
        coming.unlink(missing_ok=True)
        raise explain_failure(error, path) from error
    finally:
        if holding is not None:
            os.close(holding)
    return aside


def _set_aside(path: Path, moment: datetime) -> Path | None:
    """Give the file at ``path`` a second name, so that it is never missing, and take its log from beside it."""
    if not path.exists():
        return None
    _fold_log(path)
    aside = name_free(path, "replaced", moment)
    for ending in BESIDE:
        # A log that could not be folded in stays with its file, not with the one that comes.
        beside = Path(f"{path}{ending}")
        if beside.exists():
            beside.rename(f"{aside}{ending}")
    try:
        os.link(path, aside)
    except OSError:
        path.rename(aside)
    return aside


def _fold_log(path: Path) -> None:
    """Bring what stands in the log into the file, where the file is sound enough for that."""
    try:
        with closing(sqlite3.connect(path, timeout=PATIENCE, isolation_level=None)) as connection:
            if int(connection.execute("PRAGMA application_id").fetchone()[0]) == APPLICATION_ID:
                connection.execute("PRAGMA wal_checkpoint(TRUNCATE)")
                connection.execute("PRAGMA journal_mode = DELETE")
    except sqlite3.Error:
        return
