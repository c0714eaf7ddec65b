from __future__ import annotations

import os
import random
import signal
import sqlite3
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterator
from contextlib import closing, contextmanager
from datetime import UTC, datetime
from pathlib import Path
from shutil import copy2
from time import monotonic, sleep
from typing import Any

import pytest

from app.errors import HalfturnError, StoreError
from app.store import Store, open_store
from app.store.canonical import content_hash
from app.store.database import FILE_NAME
from app.store.document import SampleDocument, change_document, write_document
from tests.processes import command_environment

Renamed = Callable[[str], SampleDocument]

# Saves without end, and says each one only once it is acknowledged.
SAVING_PROGRAM = """
import os, sys
from app.store import open_store
from app.store.document import change_document
samples = open_store(sys.argv[1]).samples
kept = samples.get(sys.argv[2])
number = 0
while True:
    number += 1
    changes = {"name": f"{os.getpid()}-{number}", "notes": "x" * (number * 977 % 20000)}
    document = change_document(kept.document, changes)
    kept = samples.save(kept.sample_id, document, kept.revision)
    os.write(1, f"{kept.revision} {kept.hash}\\n".encode())
"""


def test_kills_while_saving_lose_no_acknowledged_save(folder: Path, document: SampleDocument) -> None:
    chance = random.Random(7)
    sample = open_store(folder).samples.create(document).sample_id
    acknowledged: dict[int, str] = {}
    for _ in range(10):
        process = subprocess.Popen(
            [sys.executable, "-c", SAVING_PROGRAM, str(folder), sample],
            env=command_environment(),
            stdout=subprocess.PIPE,
        )
        assert process.stdout is not None
        first = process.stdout.readline()
        until = monotonic() + chance.uniform(0, 0.12)
        while monotonic() < until:
            sleep(0.0005)
        process.send_signal(signal.SIGKILL)
        rest, _ = process.communicate(timeout=10)
        assert process.returncode == -signal.SIGKILL
        for line in (first + rest).decode().splitlines(keepends=True):
            if line.endswith("\n"):
                revision, digest = line.split()
                assert int(revision) not in acknowledged
                acknowledged[int(revision)] = digest

        store = open_store(folder)
        history = {entry.revision: entry.hash for entry in store.samples.history(sample)}
        assert acknowledged.items() <= history.items()
        # At most the one save whose answer the kill cut off is there besides.
        assert store.samples.get(sample).revision - max(acknowledged) in (0, 1)
        assert store.database.notices == ()
        with closing(sqlite3.connect(folder / FILE_NAME)) as connection:
            assert connection.execute("PRAGMA integrity_check").fetchall() == [("ok",)]
            assert connection.execute("PRAGMA foreign_key_check").fetchall() == []
    assert len(acknowledged) > 30
    for revision in (min(acknowledged), max(acknowledged)):
        kept = store.samples.get(sample, revision)
        assert content_hash(write_document(kept.document)) == acknowledged[revision]


@contextmanager
def as_ordinary_user() -> Iterator[None]:
    """Let go of the superuser's right to write everywhere, where the tests have it."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)


@pytest.fixture
def closed_folder(document: SampleDocument) -> Iterator[Path]:
    """A folder with one kept sample, in which nobody may write."""
    with tempfile.TemporaryDirectory() as name:
        top = Path(name)
        top.chmod(0o755)
        folder = top / "kept"
        open_store(folder).samples.create(document)
        (folder / FILE_NAME).chmod(0o444)
        folder.chmod(0o555)
        yield folder
        folder.chmod(0o755)


def assert_says_what_where_and_what_to_do(error: HalfturnError, where: Path) -> None:
    assert str(where) in error.message
    assert error.hint
    assert error.hint.endswith(".")


def test_a_folder_that_may_not_be_written_is_told_and_left_as_it_was(
    closed_folder: Path, document: SampleDocument
) -> None:
    before = (closed_folder / FILE_NAME).read_bytes()
    with as_ordinary_user(), pytest.raises(StoreError, match="not allowed to write") as refusal:
        open_store(closed_folder).samples.create(document)
    assert_says_what_where_and_what_to_do(refusal.value, closed_folder)
    assert (closed_folder / FILE_NAME).read_bytes() == before
    with as_ordinary_user(), pytest.raises(StoreError, match="not allowed to write") as refusal:
        open_store(closed_folder / "new").samples.create(document)
    assert_says_what_where_and_what_to_do(refusal.value, closed_folder / "new")


def test_a_folder_that_becomes_closed_loses_nothing(closed_folder: Path, renamed: Renamed) -> None:
    closed_folder.chmod(0o777)
    (closed_folder / FILE_NAME).chmod(0o666)
    with as_ordinary_user():
        store = open_store(closed_folder)
        sample = store.samples.create(renamed("before")).sample_id
    (closed_folder / FILE_NAME).chmod(0o444)
    closed_folder.chmod(0o555)
    with as_ordinary_user(), pytest.raises(StoreError, match="not allowed to write") as refusal:
        store.samples.save(sample, renamed("after"), 1)
    assert_says_what_where_and_what_to_do(refusal.value, closed_folder)
    closed_folder.chmod(0o777)
    (closed_folder / FILE_NAME).chmod(0o666)
    with as_ordinary_user():
        assert store.samples.get(sample).document.name == "before"
        assert store.samples.save(sample, renamed("after"), 1).revision == 2


def test_a_path_that_is_a_file_is_told(tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("not a folder")
    with pytest.raises(StoreError) as refusal:
        open_store(tmp_path / "taken").samples.list()
    assert_says_what_where_and_what_to_do(refusal.value, tmp_path / "taken")


def test_a_full_disk_is_told_and_loses_nothing(store: Store, renamed: Renamed, monkeypatch: pytest.MonkeyPatch) -> None:
    sample = store.samples.create(renamed("before")).sample_id
    connect = sqlite3.connect

    def connect_to_a_full_disk(*arguments: Any, **options: Any) -> sqlite3.Connection:
        connection: sqlite3.Connection = connect(*arguments, **options)
        # SQLite itself then answers as it does when the disk has no page left (SQLITE_FULL).
        connection.execute("PRAGMA max_page_count = 1")
        return connection

    large = change_document(renamed("after"), {"notes": "x" * 100_000})
    with monkeypatch.context() as patch:
        patch.setattr(sqlite3, "connect", connect_to_a_full_disk)
        with pytest.raises(StoreError, match="disk is full") as refusal:
            store.samples.save(sample, large, 1)
    assert_says_what_where_and_what_to_do(refusal.value, store.database.path)
    assert store.samples.get(sample).document.name == "before"
    assert store.samples.save(sample, large, 1).revision == 2


def test_a_file_held_by_another_program_is_told(
    store: Store, renamed: Renamed, monkeypatch: pytest.MonkeyPatch
) -> None:
    sample = store.samples.create(renamed("before")).sample_id
    monkeypatch.setattr("app.store.database.PATIENCE", 0.05)
    with closing(sqlite3.connect(store.database.path, isolation_level=None)) as other:
        other.execute("BEGIN IMMEDIATE")
        assert store.samples.get(sample).document.name == "before"
        with pytest.raises(StoreError, match="held by another program") as refusal:
            store.samples.save(sample, renamed("after"), 1)
        other.execute("ROLLBACK")
    assert_says_what_where_and_what_to_do(refusal.value, store.database.path)
    assert store.samples.save(sample, renamed("after"), 1).revision == 2


def test_a_file_that_went_away_is_told_and_not_made_anew_in_silence(
    folder: Path, store: Store, document: SampleDocument
) -> None:
    sample = store.samples.create(document).sample_id
    (folder / FILE_NAME).rename(folder / "elsewhere")
    with pytest.raises(StoreError) as refusal:
        store.samples.list()
    assert_says_what_where_and_what_to_do(refusal.value, folder / FILE_NAME)
    assert not (folder / FILE_NAME).exists()
    (folder / "elsewhere").rename(folder / FILE_NAME)
    assert store.samples.get(sample).document == document


def overwrite(path: Path, offset: int, length: int) -> None:
    with path.open("r+b") as file:
        file.seek(offset)
        file.write(b"\xa5" * length)


@pytest.mark.parametrize(("offset", "length"), [(0, 100), (0, 5000), (4096, 4000), (2 * 4096, 4096 * 3)])
def test_a_damaged_file_is_moved_aside_with_a_message(
    folder: Path, document: SampleDocument, offset: int, length: int
) -> None:
    open_store(folder).samples.create(change_document(document, {"notes": "x" * 60_000}))
    overwrite(folder / FILE_NAME, offset, length)
    damaged = (folder / FILE_NAME).read_bytes()
    store = open_store(folder)
    with pytest.raises(StoreError, match="damaged and has been moved aside") as refusal:
        store.samples.list()
    moved = Path(refusal.value.detail["moved_to"])
    assert_says_what_where_and_what_to_do(refusal.value, moved)
    assert moved.parent == folder
    assert moved.read_bytes() == damaged
    assert store.database.notices == (refusal.value.message,)
    assert store.samples.list() == ()
    assert store.samples.create(document).revision == 1


def test_a_second_damaged_file_does_not_replace_the_first(folder: Path) -> None:
    moved = set()
    for text in (b"first", b"second"):
        folder.mkdir(exist_ok=True)
        (folder / FILE_NAME).write_bytes(text * 100)
        with pytest.raises(StoreError) as refusal:
            open_store(folder, clock=lambda: datetime(2031, 5, 4, tzinfo=UTC)).samples.list()
        moved.add(Path(refusal.value.detail["moved_to"]).read_bytes())
    assert moved == {b"first" * 100, b"second" * 100}


def test_the_log_goes_aside_with_its_file_and_never_into_the_new_one(
    folder: Path, tmp_path: Path, store: Store, document: SampleDocument
) -> None:
    sample = store.samples.create(change_document(document, {"notes": "x" * 60_000})).sample_id
    with store.database.reading():
        # An open connection keeps the log in being; copied now, file and log are as a kill leaves them.
        store.samples.rename(sample, "in the log only")
        for folder_name in ("sound", "damaged"):
            (tmp_path / folder_name).mkdir()
            for ending in ("", "-wal"):
                copy2(f"{store.database.path}{ending}", tmp_path / folder_name)
    assert open_store(tmp_path / "sound").samples.get(sample).document.name == "in the log only"

    path = tmp_path / "damaged" / FILE_NAME
    overwrite(path, 4096, path.stat().st_size - 4096)
    damaged, log = path.read_bytes(), Path(f"{path}-wal").read_bytes()
    second = open_store(tmp_path / "damaged")
    with pytest.raises(StoreError, match="moved aside") as refusal:
        second.samples.list()
    moved = refusal.value.detail["moved_to"]
    assert Path(moved).read_bytes() == damaged
    assert log
    assert Path(f"{moved}-wal").read_bytes() == log
    assert second.samples.list() == ()


def test_damage_while_running_is_told_and_then_moved_aside(
    folder: Path, store: Store, document: SampleDocument
) -> None:
    store.samples.create(change_document(document, {"notes": "x" * 60_000}))
    overwrite(folder / FILE_NAME, 4096, 4096 * 12)
    with pytest.raises(StoreError, match="damaged"):
        store.samples.list()
    with pytest.raises(StoreError, match="moved aside"):
        store.samples.list()
    assert store.samples.list() == ()
    assert len(list(folder.glob("*damaged*"))) == 1


def test_a_block_that_fails_keeps_nothing(store: Store) -> None:
    def fail_within() -> None:
        with store.database.writing() as connection:
            connection.execute("INSERT INTO laboratory VALUES ('a', '1', 'now')")
            raise ZeroDivisionError

    with pytest.raises(ZeroDivisionError):
        fail_within()
    assert store.laboratory.get("a") is None
