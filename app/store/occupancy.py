"""Telling whether someone has a folder of kept work open: a lock on the folder itself, gone when its holder ends.

Whoever uses the store holds it together with others; whoever puts another file in place of the store's needs it alone.
Where a system has no such locks (Windows, some network drives) nobody can tell, and both go on.
"""

from __future__ import annotations

import errno
import os
import sys
import time
from pathlib import Path

if sys.platform != "win32":
    import fcntl

_REFUSED = (errno.EWOULDBLOCK, errno.EAGAIN, errno.EACCES)
_STEP = 0.02


class OccupiedError(Exception):
    """Others hold the folder in a way that does not go together with what was asked."""


def hold_together(folder: Path, patience: float) -> int | None:
    """Hold ``folder`` beside others; return a descriptor to be closed, None where that cannot be told here.

    Raises OccupiedError where someone has held it alone for ``patience`` seconds.
    """
    return _hold(folder, alone=False, patience=patience)


def hold_alone(folder: Path) -> int | None:
    """Hold ``folder`` alone; return a descriptor to be closed, None where that cannot be told here.

    Raises OccupiedError where others hold it.
    """
    return _hold(folder, alone=True, patience=0.0)


def _hold(folder: Path, *, alone: bool, patience: float) -> int | None:
    if sys.platform == "win32":
        return None
    try:
        descriptor = os.open(folder, os.O_RDONLY)
    except OSError:
        return None
    until = time.monotonic() + patience
    while True:
        try:
            fcntl.flock(descriptor, (fcntl.LOCK_EX if alone else fcntl.LOCK_SH) | fcntl.LOCK_NB)
            return descriptor
        except OSError as error:
            if error.errno not in _REFUSED:
                os.close(descriptor)
                return None
            if time.monotonic() >= until:
                os.close(descriptor)
                raise OccupiedError from None
        time.sleep(_STEP)
