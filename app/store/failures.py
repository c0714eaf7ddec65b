"""What went wrong with the file of kept work, in a sentence that says what, where and what to do."""

from __future__ import annotations

import errno
import os
import shutil
import sqlite3
from pathlib import Path

from app.errors import StoreError

_SPACE_NEEDED = 256 * 1024
_BUSY = (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED)
_DAMAGED = (sqlite3.SQLITE_CORRUPT, sqlite3.SQLITE_NOTADB)
_FORBIDDEN = (sqlite3.SQLITE_READONLY, sqlite3.SQLITE_PERM, sqlite3.SQLITE_AUTH)

_FULL = ("The disk is full", "Free some space and save again; everything saved before is still there.")
_CLOSED = (
    "It is not allowed to write in the folder of kept work",
    "Give yourself the right to write there, or choose another folder with --data.",
)
_AWAY = (
    "The file of kept work cannot be opened",
    "See that its folder exists, can be written and is connected; then try again or choose another with --data.",
)


def is_damage(error: sqlite3.Error) -> bool:
    """Tell whether the database says that its file is damaged or is no database."""
    return _primary_code(error) in _DAMAGED


def is_busy(error: sqlite3.Error) -> bool:
    """Tell whether another connection holds the file."""
    return _primary_code(error) in _BUSY


def explain_failure(error: sqlite3.Error | OSError, path: Path) -> StoreError:
    """Return the StoreError for a failure of the database or the file system; ``detail`` holds path and cause."""
    what, what_to_do = _words_for(error, path)
    return StoreError(f"{what}: {path}.", hint=what_to_do, detail={"path": str(path), "cause": str(error)})


def _primary_code(error: sqlite3.Error) -> int:
    # Extended codes carry the primary one in their lowest byte.
    return int(getattr(error, "sqlite_errorcode", None) or 0) & 0xFF


def _words_for(error: sqlite3.Error | OSError, path: Path) -> tuple[str, str]:
    if isinstance(error, OSError):
        if error.errno == errno.ENOSPC:
            return _FULL
        if error.errno in (errno.EACCES, errno.EPERM, errno.EROFS):
            return _CLOSED
        return _AWAY
    code = _primary_code(error)
    if code == sqlite3.SQLITE_FULL or (code in (sqlite3.SQLITE_IOERR, sqlite3.SQLITE_CANTOPEN) and _is_full(path)):
        return _FULL
    if code in _FORBIDDEN or (code == sqlite3.SQLITE_CANTOPEN and _is_closed(path)):
        return _CLOSED
    if code == sqlite3.SQLITE_CANTOPEN:
        return _AWAY
    if code in _BUSY:
        return (
            "The file of kept work is held by another program",
            "Wait a moment and save again; if it stays so, close other copies of this program.",
        )
    if code in _DAMAGED:
        return (
            "The file of kept work is damaged",
            "Start again: the damaged file is then moved aside, never deleted. A backup can take its place.",
        )
    if code == sqlite3.SQLITE_IOERR:
        return (
            "The file of kept work could not be read or written",
            "See that the disk is connected and sound, and save again; everything saved before is still there.",
        )
    return (
        f"The file of kept work refused the step ({error})",
        "Nothing was changed. Try again; if it stays so, keep a copy of the file and report it.",
    )


def _is_full(path: Path) -> bool:
    try:
        return shutil.disk_usage(path.parent).free < _SPACE_NEEDED
    except OSError:
        return False


def _is_closed(path: Path) -> bool:
    by_effective_user = os.access in os.supports_effective_ids
    return path.parent.is_dir() and not os.access(path.parent, os.W_OK, effective_ids=by_effective_user)
