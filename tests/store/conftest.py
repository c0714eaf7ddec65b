from __future__ import annotations

from collections.abc import Callable
from datetime import UTC, datetime, timedelta
from itertools import count
from pathlib import Path
from typing import Any

import pytest

from app.store import Store, open_store
from app.store.document import SampleDocument, read_document


class SteppingClock:
    """A clock that is one minute later each time it is read."""

    def __init__(self) -> None:
        self._minutes = count()

    def __call__(self) -> datetime:
        return datetime(2031, 5, 4, 12, 0, tzinfo=UTC) + timedelta(minutes=next(self._minutes))


@pytest.fixture
def clock() -> SteppingClock:
    return SteppingClock()


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    return tmp_path / "kept"


@pytest.fixture
def store(folder: Path, clock: SteppingClock) -> Store:
    return open_store(folder, clock)


@pytest.fixture
def document_data() -> dict[str, Any]:
    """A small invented document, every time new."""
    return {
        "name": "Boule 7",
        "crystal": {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m"},
        "properties": [
            {
                "id": "k",
                "name": "Conductivity",
                "kind": "thermal_conductivity",
                "unit": "W/(m·K)",
                "tensor": {"free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}},
            },
            {
                "id": "a",
                "name": "Expansion",
                "kind": "thermal_expansion",
                "unit": "1e-6/K",
                "tensor": {"free": {"11": 5, "13": 1, "22": 6, "33": -7}},
            },
        ],
        "readings": [{"property": "k", "kind": "rod", "direction": "[0 1 0]", "value": 24.5, "sigma": 0.2}],
    }


@pytest.fixture
def document(document_data: dict[str, Any]) -> SampleDocument:
    return read_document(document_data)


@pytest.fixture
def renamed(document_data: dict[str, Any]) -> Callable[[str], SampleDocument]:
    """Make the document under another name: a change that is easy to tell."""
    return lambda name: read_document({**document_data, "name": name})
