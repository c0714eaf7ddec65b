from __future__ import annotations

import sqlite3
import threading
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.errors import ConflictError, InputError, NotFoundError, StoreError
from app.store import Store, open_store
from app.store.canonical import content_hash
from app.store.document import SampleDocument, change_document, write_document

Renamed = Callable[[str], SampleDocument]


def test_nothing_is_touched_before_the_first_operation(folder: Path) -> None:
    store = open_store(folder)
    assert not folder.exists()
    assert store.samples.list() == ()
    assert folder.exists()


def test_a_new_sample_is_its_revision_one(store: Store, document: SampleDocument) -> None:
    kept = store.samples.create(document)
    assert (kept.revision, kept.current, kept.can_undo, kept.can_redo) == (1, True, False, False)
    assert kept.hash == content_hash(write_document(document))
    assert kept.document == document
    assert store.samples.get(kept.sample_id) == kept


def test_each_save_is_a_revision_and_an_unchanged_one_is_none(store: Store, renamed: Renamed) -> None:
    first = store.samples.create(renamed("one"))
    second = store.samples.save(first.sample_id, renamed("two"), 1)
    again = store.samples.save(first.sample_id, renamed("two"), 2)
    assert (second.revision, again) == (2, second)
    # A save that is sent again because its answer was lost is not a conflict either.
    assert store.samples.save(first.sample_id, renamed("two"), 1) == second
    assert [(line.revision, line.parent, line.current) for line in store.samples.history(first.sample_id)] == [
        (2, 1, True),
        (1, None, False),
    ]
    assert store.samples.get(first.sample_id, 1).document.name == "one"
    assert not store.samples.get(first.sample_id, 1).current


def test_times_are_those_of_the_clock(store: Store, renamed: Renamed) -> None:
    first = store.samples.create(renamed("one"))
    second = store.samples.save(first.sample_id, renamed("two"), 1)
    assert first.time == "2031-05-04T12:00:00.000000Z"
    assert second.time == "2031-05-04T12:01:00.000000Z"


def test_a_save_against_an_old_revision_is_a_conflict(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    with pytest.raises(ConflictError) as conflict:
        store.samples.save(sample, renamed("mine"), 1)
    assert conflict.value.detail == {"newest_revision": 2, "parent": 1}
    assert conflict.value.hint
    assert store.samples.get(sample).document.name == "two"
    assert len(store.samples.history(sample)) == 2


def test_undo_and_redo_work_across_reopening(folder: Path, store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    store.samples.save(sample, renamed("three"), 2)
    names = []
    for step in ("undo", "undo", "redo", "redo"):
        reopened = open_store(folder)
        getattr(reopened.samples, step)(sample)
        kept = open_store(folder).samples.get(sample)
        names.append((kept.document.name, kept.revision, kept.can_undo, kept.can_redo))
    assert names == [
        ("two", 2, True, True),
        ("one", 1, False, True),
        ("two", 2, True, True),
        ("three", 3, True, False),
    ]


def test_a_save_after_undo_begins_a_new_line_and_keeps_the_old_one(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    store.samples.save(sample, renamed("three"), 2)
    store.samples.undo(sample)
    store.samples.undo(sample)
    new = store.samples.save(sample, renamed("four"), 1)
    assert (new.revision, new.can_redo) == (4, False)
    assert store.samples.get(sample, 3).document.name == "three"
    assert store.samples.undo(sample).document.name == "one"
    assert store.samples.redo(sample).document.name == "four"


def test_undo_against_an_old_revision_is_a_conflict(store: Store, renamed: Renamed) -> None:
    sample = store.samples.create(renamed("one")).sample_id
    store.samples.save(sample, renamed("two"), 1)
    with pytest.raises(ConflictError):
        store.samples.undo(sample, 1)
    assert store.samples.undo(sample, 2).revision == 1
    with pytest.raises(ConflictError):
        store.samples.redo(sample, 2)


def test_nothing_to_undo_or_redo_is_told(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    with pytest.raises(InputError, match="nothing to undo"):
        store.samples.undo(sample)
    with pytest.raises(InputError, match="nothing to redo"):
        store.samples.redo(sample)


@settings(max_examples=15, deadline=None)
@given(st.lists(st.sampled_from(["save", "undo", "redo"]), max_size=14))
def test_undo_and_redo_agree_with_two_stacks(tmp_path_factory: pytest.TempPathFactory, steps: list[str]) -> None:
    # The reference is the textbook pair of stacks: a save clears what could be redone.
    store = open_store(tmp_path_factory.mktemp("stacks"))
    kept = store.samples.create(SampleDocument.model_validate({"name": "0", "crystal": {"cell": None, "group": "∞"}}))
    done, undone = ["0"], list[str]()
    for number, step in enumerate(steps, start=1):
        if step == "save":
            document = change_document(kept.document, {"name": str(number)})
            kept = store.samples.save(kept.sample_id, document, kept.revision)
            done, undone = [*done, str(number)], []
        elif step == "undo" and len(done) > 1:
            kept = store.samples.undo(kept.sample_id)
            undone.append(done.pop())
        elif step == "redo" and undone:
            kept = store.samples.redo(kept.sample_id)
            done.append(undone.pop())
        assert (kept.document.name, kept.can_undo, kept.can_redo) == (done[-1], len(done) > 1, bool(undone))


def test_the_list_has_the_newest_change_first_and_what_a_picture_needs(store: Store, renamed: Renamed) -> None:
    older = store.samples.create(renamed("older")).sample_id
    newer = store.samples.create(change_document(renamed("newer"), {"looking": {"property": "a"}})).sample_id
    assert [line.sample_id for line in store.samples.list()] == [newer, older]
    store.samples.rename(older, "older, renamed")
    top, bottom = store.samples.list()
    assert (top.name, top.group, top.cell, top.revision) == (
        "older, renamed",
        "2/m",
        (9.83, 6.41, 7.27, 90, 107.4, 90),
        2,
    )
    assert top.time == "2031-05-04T12:02:00.000000Z"
    assert top.crystal["frame"] == "x3=c x2=b*"
    assert top.property is not None
    assert top.property["tensor"]["free"] == {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}
    assert bottom.property is not None
    assert bottom.property["unit"] == "1e-6/K"


def test_rename_can_be_undone_and_an_empty_name_is_refused(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    assert store.samples.rename(sample, "New").revision == 2
    assert store.samples.undo(sample).document.name == "Boule 7"
    with pytest.raises(InputError) as refusal:
        store.samples.rename(sample, " ")
    assert refusal.value.field == "name"


def test_a_duplicate_stands_on_its_own(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    copy = store.samples.duplicate(sample)
    assert copy.document == change_document(document, {"name": "Boule 7 (copy)"})
    assert (copy.revision, copy.sample_id == sample) == (1, False)
    store.samples.rename(copy.sample_id, "Theirs")
    assert store.samples.get(sample).document.name == "Boule 7"
    assert store.samples.duplicate(sample, "Both").document.name == "Both"


def test_archived_samples_leave_the_list_and_come_back(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    store.samples.archive(sample)
    assert store.samples.list() == ()
    assert [line.archived for line in store.samples.list(archived=True)] == [True]
    assert store.samples.get(sample).archived
    store.samples.archive(sample, False)
    assert len(store.samples.list()) == 1


def test_a_deletion_is_a_mark_that_can_be_taken_back(store: Store, document: SampleDocument) -> None:
    kept = store.samples.create(document)
    store.samples.delete(kept.sample_id)
    assert store.samples.list(archived=True) == ()
    assert [line.deleted for line in store.samples.list(deleted=True)] == [True]
    for act in (store.samples.get, store.samples.undo, store.samples.duplicate, store.samples.archive):
        with pytest.raises(NotFoundError, match="was deleted on 2031-05-04"):
            act(kept.sample_id)
    store.samples.recover(kept.sample_id)
    assert store.samples.get(kept.sample_id) == kept


def test_what_is_not_there_is_told(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    with pytest.raises(NotFoundError, match="no revision 9"):
        store.samples.get(sample, 9)
    with pytest.raises(NotFoundError, match="no sample nowhere"):
        store.samples.save("nowhere", document, 1)


def test_the_file_itself_refuses_to_change_a_revision(store: Store, document: SampleDocument) -> None:
    sample = store.samples.create(document).sample_id
    for statement in ("UPDATE revision SET json = '{}'", "DELETE FROM revision"):
        with pytest.raises(StoreError, match="never changed"), store.database.writing() as connection:
            connection.execute(statement)
    with pytest.raises(StoreError), store.database.writing() as connection:
        connection.execute("UPDATE sample SET revision = 99")
    assert store.samples.get(sample).document == document


def test_concurrent_saves_lose_none_and_overwrite_none(folder: Path, renamed: Renamed) -> None:
    workers, saves = 6, 12
    # Two stores on one file stand for two servers.
    stores = (open_store(folder), open_store(folder))
    sample = stores[0].samples.create(renamed("start")).sample_id
    together = threading.Barrier(workers)
    acknowledged: list[tuple[int, int, str]] = []
    conflicts: list[int] = []

    def work(worker: int) -> None:
        samples = stores[worker % 2].samples
        together.wait()
        for number in range(saves):
            name = f"{worker}-{number}"
            while True:
                parent = samples.get(sample).revision
                try:
                    kept = samples.save(sample, renamed(name), parent)
                except ConflictError as conflict:
                    conflicts.append(conflict.detail["newest_revision"])
                else:
                    acknowledged.append((kept.revision, parent, name))
                    break

    with ThreadPoolExecutor(workers) as pool:
        for done in [pool.submit(work, worker) for worker in range(workers)]:
            done.result()

    assert conflicts, "the writers never met: the test shows nothing"
    assert sorted(number for number, _, _ in acknowledged) == list(range(2, 2 + workers * saves))
    for number, parent, name in acknowledged:
        assert parent == number - 1
        assert stores[0].samples.get(sample, number).document.name == name


def test_the_laboratory_keeps_values_by_name(folder: Path, store: Store) -> None:
    assert store.laboratory.get("stages") is None
    assert store.laboratory.get("stages", []) == []
    store.laboratory.put("stages", [{"name": "two circles", "axes": [1.5]}])
    store.laboratory.put("stages", [{"name": "three circles"}])
    assert open_store(folder).laboratory.get("stages") == [{"name": "three circles"}]
    with pytest.raises(InputError):
        store.laboratory.put("", 1)
    with pytest.raises(InputError):
        store.laboratory.put("stages", float("nan"))


def test_the_file_is_set_as_promised(store: Store, document: SampleDocument) -> None:
    store.samples.create(document)
    with store.database.reading() as connection:
        settings_now = [
            connection.execute(f"PRAGMA {name}").fetchone()[0]
            for name in ("journal_mode", "synchronous", "foreign_keys", "busy_timeout")
        ]
    # 2 is FULL in SQLite's documentation of the pragma.
    assert settings_now == ["wal", 2, 1, 10_000]
    assert sqlite3.threadsafety > 0
