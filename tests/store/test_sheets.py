from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from app.errors import InputError, NotFoundError, StoreError
from app.store import Store, open_store
from app.store.document import SampleDocument, change_document, write_document
from app.store.sheets import hash_inputs

CONTENT = {"title": "Boule 7", "rows": [["z", 12.48, 0.08]], "unit": "W/(m·K)"}


@pytest.fixture
def sample(store: Store, document: SampleDocument) -> str:
    return store.samples.create(document).sample_id


def edit(document: SampleDocument, changes: dict[str, Any]) -> SampleDocument:
    """Apply changes given as paths like ``readings.0.value``."""
    data = write_document(document)
    for path, value in changes.items():
        place: Any = data
        *steps, last = path.split(".")
        for step in steps:
            place = place[int(step) if isinstance(place, list) else step]
        place[int(last) if isinstance(place, list) else last] = value
    return change_document(document, data)


def test_sheets_are_numbered_through_the_laboratory_and_stay_as_printed(
    folder: Path, store: Store, sample: str, document: SampleDocument
) -> None:
    other = store.samples.create(document).sample_id
    content = dict(CONTENT)
    first = store.sheets.freeze(sample, 1, "k", content)
    second = store.sheets.freeze(other, 1, "a", {})
    content["title"] = "changed afterwards"
    assert [first.number, second.number, store.sheets.freeze(sample, 1, "k", {}).number] == [1, 2, 3]
    assert first.inputs_hash == hash_inputs(document, "k") != second.inputs_hash
    again = open_store(folder).sheets.get(1)
    assert again == first
    assert again.content == CONTENT
    assert not again.superseded
    assert [sheet.number for sheet in store.sheets.list()] == [3, 2, 1]
    assert [sheet.number for sheet in store.sheets.list(sample)] == [3, 1]
    with pytest.raises(StoreError, match="never changed"), store.database.writing() as connection:
        connection.execute("UPDATE sheet SET json = '{}'")


@pytest.mark.parametrize(
    "changes",
    [
        {"crystal.frame": "x3=c* x1=a"},
        {"crystal.cell.0": 9.84},
        {"properties.0.tensor.free.13": 1.86},
        {"properties.0.unit": "W/(cm·K)"},
        {"readings.0.value": 24.51},
        {"readings.0.set_aside": "cracked"},
        {"readings": []},
        {"batches": {"furnace": 0.01}},
        {"pose": {"axis": "[0 0 1]", "angle": 1}},
        {"part.2": 6},
        {"properties.0.id": "new", "readings.0.property": "new"},
    ],
    ids=str,
)
def test_a_sheet_is_superseded_when_what_it_used_changes_and_not_after_undo(
    store: Store, sample: str, document: SampleDocument, changes: dict[str, Any]
) -> None:
    store.sheets.freeze(sample, 1, "k", CONTENT)
    store.samples.save(sample, edit(document, changes), 1)
    assert store.sheets.get(1).superseded
    assert store.sheets.get(1).content == CONTENT
    store.samples.undo(sample)
    assert not store.sheets.get(1).superseded


@pytest.mark.parametrize(
    "changes",
    [
        {"name": "Other"},
        {"notes": "more"},
        {"tags": ["t"]},
        {"properties.1.tensor.free.11": 99},
        {"looking": {"property": "a", "surface": "value"}},
        {"poses": [{"name": "p", "pose": {"bunge": [1, 2, 3]}}]},
    ],
    ids=str,
)
def test_a_sheet_stands_when_something_else_changes(
    store: Store, sample: str, document: SampleDocument, changes: dict[str, Any]
) -> None:
    store.sheets.freeze(sample, 1, "k", CONTENT)
    assert store.samples.save(sample, edit(document, changes), 1).revision == 2
    assert not store.sheets.get(1).superseded


def test_a_sheet_of_a_later_hash_is_judged_by_its_revision(store: Store, sample: str, document: SampleDocument) -> None:
    # As a file from another version may hold it: the hash was made of other fields.
    store.sheets.freeze(sample, 1, "k", CONTENT)
    with store.database.writing() as connection:
        connection.execute(
            "INSERT INTO sheet SELECT 2, sample_id, revision, property_id, 'old', json, created FROM sheet"
        )
    assert not store.sheets.get(2).superseded
    store.samples.save(sample, edit(document, {"part.0": 9}), 1)
    assert store.sheets.get(2).superseded


def test_sheets_outlive_their_deleted_sample(store: Store, sample: str) -> None:
    store.sheets.freeze(sample, 1, "k", CONTENT)
    store.samples.delete(sample)
    assert [(sheet.number, sheet.content, sheet.superseded) for sheet in store.sheets.list()] == [(1, CONTENT, False)]


def test_a_sheet_of_nothing_is_refused_and_takes_no_number(store: Store, sample: str) -> None:
    with pytest.raises(NotFoundError):
        store.sheets.freeze(sample, 2, "k", CONTENT)
    with pytest.raises(NotFoundError):
        store.sheets.freeze("nowhere", 1, "k", CONTENT)
    with pytest.raises(InputError):
        store.sheets.freeze(sample, 1, "gone", CONTENT)
    with pytest.raises(InputError):
        store.sheets.freeze(sample, 1, "k", {"value": float("nan")})
    with pytest.raises(NotFoundError):
        store.sheets.get(1)
    assert store.sheets.freeze(sample, 1, "k", CONTENT).number == 1
