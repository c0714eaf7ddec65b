"""Kept work: samples with all their revisions, printed sheets, and what belongs to the laboratory."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from app.store.database import Clock, Database, utc_now
from app.store.laboratory import Laboratory
from app.store.samples import Samples, new_identifier
from app.store.sheets import Sheets


@dataclass(frozen=True)
class Store:
    """All kept work of one folder; ``database.notices`` are sentences that the user has to see."""

    database: Database
    samples: Samples
    sheets: Sheets
    laboratory: Laboratory


def open_store(folder: Path | str, clock: Clock = utc_now, identify: Callable[[], str] = new_identifier) -> Store:
    """Return the store in ``folder``; folder and file are made at the first operation, not before."""
    database = Database(folder, clock)
    return Store(database, Samples(database, identify), Sheets(database), Laboratory(database))
