"""A clock that was set back: revisions keep their order, for their numbers make it and not their times."""

from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest

from app.errors import ConflictError
from app.store import open_store
from app.store.document import SampleDocument

Renamed = Callable[[str], SampleDocument]


class TurnedBack:
    """A clock that is one year earlier each time it is read."""

    def __init__(self) -> None:
        self._now = datetime(2031, 5, 4, 12, 0, tzinfo=UTC)

    def __call__(self) -> datetime:
        self._now -= timedelta(days=365)
        return self._now


def test_revisions_follow_each_other_while_the_clock_runs_back(folder: Path, renamed: Renamed) -> None:
    samples = open_store(folder, TurnedBack()).samples
    kept = samples.create(renamed("first"))
    for name in ("second", "third"):
        kept = samples.save(kept.sample_id, renamed(name), kept.revision)
    assert [line.revision for line in samples.history(kept.sample_id)] == [3, 2, 1]
    assert samples.get(kept.sample_id).document.name == "third"
    assert samples.undo(kept.sample_id).document.name == "second"
    assert samples.redo(kept.sample_id).document.name == "third"
    with pytest.raises(ConflictError):
        samples.save(kept.sample_id, renamed("late"), 1)
    # Opened anew, by another process say, it reads the same.
    assert open_store(folder, TurnedBack()).samples.get(kept.sample_id).document.name == "third"
