"""Restoring a revision, finding samples by words, deleting and what becomes of what was deleted."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from contextlib import closing
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

import pytest

from app.errors import ConflictError, InputError, NotFoundError
from app.store import Store, open_store
from app.store.database import FILE_NAME
from app.store.document import SampleDocument, change_document, read_document

Renamed = Callable[[str], SampleDocument]


class SetClock:
    """A clock that shows what it was set to."""

    def __init__(self) -> None:
        self.now = datetime(2031, 5, 4, 12, 0, tzinfo=UTC)

    def __call__(self) -> datetime:
        return self.now


def test_any_revision_comes_back_as_a_new_one(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    store.samples.save(sample, renamed("three"), 2)
    kept = store.samples.restore(sample, 1, 3)
    assert (kept.revision, kept.document.name, kept.current) == (4, "one", True)
    assert [(line.revision, line.parent) for line in store.samples.history(sample)] == [
        (4, 3),
        (3, 2),
        (2, 1),
        (1, None),
    ]
    assert store.samples.undo(sample).document.name == "three"
    # Of a line that was undone and left, too.
    store.samples.save(sample, renamed("five"), 3)
    assert store.samples.restore(sample, 4, 5).document.name == "one"


def test_restoring_against_an_old_revision_is_a_conflict_and_keeps_nothing(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    store.samples.save(sample, renamed("three"), 2)
    with pytest.raises(ConflictError) as conflict:
        store.samples.restore(sample, 1, 2)
    assert conflict.value.detail == {"newest_revision": 3, "parent": 2}
    with pytest.raises(NotFoundError):
        store.samples.restore(sample, 9, 3)
    assert len(store.samples.history(sample)) == 3


def test_restoring_what_stands_makes_no_revision(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    store.samples.save(sample, renamed("one"), 2)
    assert store.samples.restore(sample, 1, 3).revision == 3


@pytest.mark.parametrize(
    ("text", "found"),
    [
        ("", {"boule", "fibre"}),
        ("  \t ", {"boule", "fibre"}),
        ("BOULE", {"boule"}),
        ("boule left", {"boule"}),
        ("left boule", {"boule"}),
        ("cracked", {"boule"}),
        ("to CUT", {"boule"}),
        ("2/m", {"boule"}),
        ("∞m", {"fibre"}),
        ("expansion", {"boule"}),
        ("thermal conductivity", {"boule"}),
        ("masse", {"fibre"}),
        ("MASSE", {"fibre"}),
        ("boule fibre", set()),
        ("%", set()),
        ("_ouleft", set()),
        # An ü of two signs is found by an ü of one.
        ("kühl", {"fibre"}),
    ],
)
def test_all_words_must_be_found_in_any_part(
    store: Store, document_data: dict[str, Any], text: str, found: set[str]
) -> None:
    boule = {**document_data, "name": "Boule 7, left half", "notes": "Cracked on cooling.", "tags": ["to cut", "2031"]}
    store.samples.create(read_document(boule))
    fibre = {"name": "Fibre", "notes": "Maße; ku\u0308hl halten", "crystal": {"cell": None, "group": "∞m"}}
    store.samples.create(read_document(fibre))
    assert {line.name.split()[0].lower() for line in store.samples.list(text=text)} == found


def test_a_search_keeps_to_the_list_that_is_asked_for(store: Store, renamed: Renamed) -> None:
    shown, archived, deleted = (store.samples.create(renamed(f"boule {name}")).sample_id for name in "abc")
    store.samples.archive(archived)
    store.samples.delete(deleted)
    ids = [
        {line.sample_id for line in store.samples.list(text="boule", archived=first, deleted=second)}
        for first, second in ((False, False), (True, False), (False, True))
    ]
    assert ids == [{shown}, {shown, archived}, {shown, deleted}]


def test_a_search_that_is_too_long_says_so(store: Store) -> None:
    with pytest.raises(InputError, match="at most 500"):
        store.samples.list(text="x" * 501)


def test_a_deletion_is_taken_back_within_thirty_days(folder: Path, renamed: Renamed) -> None:
    clock = SetClock()
    sample = open_store(folder, clock).samples.create(renamed("one")).sample_id
    open_store(folder, clock).samples.delete(sample)
    clock.now += timedelta(days=29, hours=23)
    store = open_store(folder, clock)
    # Deleting it again does not begin the days anew.
    store.samples.delete(sample)
    (line,) = store.samples.list(deleted=True)
    assert line.kept_until == "2031-06-03T12:00:00.000000Z"
    store.samples.recover(sample)
    clock.now += timedelta(days=400)
    assert open_store(folder, clock).samples.get(sample).document.name == "one"
    (line,) = store.samples.list()
    assert line.kept_until is None


def test_after_thirty_days_it_is_gone_for_good_at_the_next_opening(folder: Path, renamed: Renamed) -> None:
    clock = SetClock()
    samples = open_store(folder, clock).samples
    gone, stays = (samples.create(renamed(name)).sample_id for name in ("gone", "stays"))
    for number in range(1, 40):
        samples.save(gone, renamed(f"gone {number}"), number)
    samples.delete(gone)
    samples.archive(stays)
    clock.now += timedelta(days=30)
    store = open_store(folder, clock)
    assert [line.sample_id for line in store.samples.list(archived=True, deleted=True)] == [stays]
    with pytest.raises(NotFoundError, match="no sample"):
        store.samples.recover(gone)
    with closing(sqlite3.connect(folder / FILE_NAME)) as connection:
        assert connection.execute("SELECT DISTINCT sample_id FROM revision").fetchall() == [(stays,)]
        assert connection.execute("SELECT count(*) FROM purging").fetchone() == (0,)
        assert connection.execute("PRAGMA foreign_key_check").fetchall() == []


def test_a_purge_says_what_went(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.delete(sample)
    assert store.samples.purge(datetime(2031, 6, 3, 11, 59, tzinfo=UTC)) == ()
    assert store.samples.purge(datetime(2031, 6, 4, tzinfo=UTC)) == (sample,)
    assert store.samples.purge(datetime(2031, 6, 4, tzinfo=UTC)) == ()


def test_a_sample_with_a_printed_sheet_never_goes(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    number = store.sheets.freeze(sample, 1, "k", {"printed": True}).number
    store.samples.delete(sample)
    assert store.samples.purge(datetime(2099, 1, 1, tzinfo=UTC)) == ()
    assert store.sheets.get(number).content == {"printed": True}
    (line,) = store.samples.list(deleted=True)
    assert line.kept_until is None
    store.samples.recover(sample)
    assert store.samples.get(sample).document == document


@pytest.mark.parametrize(
    "statement",
    [
        "DELETE FROM revision WHERE number = 1",
        "UPDATE revision SET json = '{}'",
        "DELETE FROM sample",
        "DELETE FROM sheet",
        "INSERT INTO purging SELECT id FROM sample WHERE deleted IS NULL",
        "INSERT INTO purging SELECT sample_id FROM sheet",
    ],
)
def test_the_file_itself_forbids_the_rest(folder: Path, store: Store, document: SampleDocument, statement: str) -> None:
    sample = store.samples.create(document).sample_id
    store.samples.save(sample, change_document(document, {"name": "two"}), 1)
    printed = store.samples.create(document).sample_id
    store.sheets.freeze(printed, 1, "k", {})
    store.samples.delete(printed)
    with closing(sqlite3.connect(folder / FILE_NAME)) as connection:
        connection.execute("PRAGMA foreign_keys = ON")
        with pytest.raises(sqlite3.IntegrityError):
            connection.execute(statement)
