from __future__ import annotations

import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path

import pytest

from app.errors import StoreError
from app.store import open_store
from app.store.database import FILE_NAME
from app.store.document import SampleDocument
from app.store.migrations import MIGRATIONS, NEWEST, Migration, check_ours, migrate, read_version
from tests.processes import command_environment


@pytest.fixture
def connection() -> Iterator[sqlite3.Connection]:
    with closing(sqlite3.connect(":memory:", isolation_level=None)) as opened:
        yield opened


def read_schema(connection: sqlite3.Connection) -> list[str]:
    return [row[0] for row in connection.execute("SELECT sql FROM sqlite_schema WHERE sql IS NOT NULL ORDER BY name")]


def test_steps_are_numbered_without_a_gap_and_say_their_purpose() -> None:
    assert [step.number for step in MIGRATIONS] == list(range(1, len(MIGRATIONS) + 1))
    assert len(MIGRATIONS) == NEWEST
    assert all(step.purpose and step.statements for step in MIGRATIONS)


def test_taking_all_steps_again_does_nothing(connection: sqlite3.Connection) -> None:
    assert migrate(connection) == tuple(step.number for step in MIGRATIONS)
    schema = read_schema(connection)
    assert read_version(connection) == NEWEST
    assert migrate(connection) == ()
    assert read_schema(connection) == schema
    check_ours(connection)


def test_only_the_missing_steps_are_taken(connection: sqlite3.Connection) -> None:
    migrate(connection)
    later = Migration(NEWEST + 1, "a trial", ("CREATE TABLE trial (x)", "INSERT INTO trial VALUES (1)"))
    assert migrate(connection, (*MIGRATIONS, later)) == (NEWEST + 1,)
    assert migrate(connection, (*MIGRATIONS, later)) == ()
    assert connection.execute("SELECT count(*) FROM trial").fetchone() == (1,)


def test_a_step_that_fails_leaves_nothing_behind(connection: sqlite3.Connection) -> None:
    migrate(connection)
    broken = Migration(NEWEST + 1, "a trial", ("CREATE TABLE trial (x)", "INSERT INTO nowhere VALUES (1)"))
    with pytest.raises(sqlite3.OperationalError, match="nowhere"):
        migrate(connection, (*MIGRATIONS, broken))
    assert read_version(connection) == NEWEST
    assert "trial" not in " ".join(read_schema(connection))


def test_a_file_of_a_newer_version_is_refused_and_left_alone(folder: Path, document: SampleDocument) -> None:
    open_store(folder).samples.create(document)
    with closing(sqlite3.connect(folder / FILE_NAME)) as changed:
        changed.execute(f"PRAGMA user_version = {NEWEST + 1}")
    before = (folder / FILE_NAME).read_bytes()
    with pytest.raises(StoreError, match=f"form {NEWEST + 1}") as refusal:
        open_store(folder).samples.list()
    assert refusal.value.hint
    assert (folder / FILE_NAME).read_bytes() == before


def test_a_database_of_something_else_is_refused_and_left_alone(folder: Path) -> None:
    folder.mkdir()
    with closing(sqlite3.connect(folder / FILE_NAME)) as foreign:
        foreign.execute("CREATE TABLE recipes (x)")
    before = (folder / FILE_NAME).read_bytes()
    with pytest.raises(StoreError, match="something else"):
        open_store(folder).samples.list()
    assert (folder / FILE_NAME).read_bytes() == before
    assert [path.name for path in folder.iterdir()] == [FILE_NAME]


def test_processes_that_start_together_make_one_file(folder: Path) -> None:
    program = (
        "import sys; from app.store import open_store; from app.store.demonstration import seed\n"
        "print('ready', flush=True); sys.stdin.readline(); print(len(seed(open_store(sys.argv[1]).samples)))"
    )
    started = [
        subprocess.Popen(
            [sys.executable, "-c", program, str(folder)],
            env=command_environment(),
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
        )
        for _ in range(3)
    ]
    for process in started:
        assert process.stdout is not None
        assert process.stdout.readline() == "ready\n"
    for process in started:
        assert process.stdin is not None
        process.stdin.write("go\n")
        process.stdin.flush()
    answers = [process.communicate(timeout=30)[0].strip() for process in started]
    assert sorted(answers) == ["0", "0", "2"]
    assert len(open_store(folder).samples.list()) == 2
