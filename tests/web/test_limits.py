"""Every limit of a request: what lies on it passes, what lies one beyond is told with the limit in it."""

from __future__ import annotations

import json
import os
import signal
import time
from pathlib import Path
from typing import Any

import httpx
import pytest
from fastapi.testclient import TestClient
from websockets.exceptions import ConnectionClosedError
from websockets.sync.client import connect

from app.errors import InputError
from app.web.bodies import parse_object
from app.web.limits import DEEPEST_BODY, LARGEST_FRAME_BYTES, LONGEST_NUMBER, MAX_MESSAGE_BYTES
from app.web.live import read_message
from app.web.server import create_app
from tests.processes import Served, serving


def nested(levels: int) -> bytes:
    """An object in which so many objects and lists stand within each other, itself counted."""
    inner: Any = []
    for level in range(levels - 2):
        inner = [inner] if level % 2 else {"a": inner}
    return json.dumps({"a": inner}).encode()


def test_the_deepest_body_passes_and_one_level_more_does_not() -> None:
    parse_object(nested(DEEPEST_BODY))
    for levels in (DEEPEST_BODY + 1, 10 * DEEPEST_BODY):
        with pytest.raises(InputError, match=f"{DEEPEST_BODY} levels"):
            parse_object(nested(levels))
    with pytest.raises(InputError, match=f"{DEEPEST_BODY} levels"):
        parse_object(b'{"a":' + b"[" * 200_000 + b"]" * 200_000 + b"}")


def test_brackets_in_text_are_no_depth() -> None:
    text = "[{" * 1000
    assert parse_object(json.dumps({"a": text, "b": [[1]]}).encode()) == {"a": text, "b": [[1]]}
    long = {"rows": [[1, [2]]] * 5000}
    assert parse_object(json.dumps(long).encode()) == long


def test_the_longest_number_passes_and_one_digit_more_does_not() -> None:
    assert parse_object(b'{"a": ' + b"9" * LONGEST_NUMBER + b"}") == {"a": int("9" * LONGEST_NUMBER)}
    with pytest.raises(InputError, match="finite"):
        parse_object(b'{"a": ' + b"9" * (LONGEST_NUMBER + 1) + b"}")


def message(size: int) -> str:
    """A message of the live channel of so many bytes; the blanks stand outside of any member."""
    text = json.dumps({"type": "surface", "hash": "unknown", "surface": "quadric"})
    return text + " " * (size - len(text))


def test_the_largest_message_is_read_and_one_byte_more_is_not() -> None:
    assert read_message(message(MAX_MESSAGE_BYTES)).type == "surface"
    with pytest.raises(InputError, match=str(MAX_MESSAGE_BYTES)):
        read_message(message(MAX_MESSAGE_BYTES + 1))


def test_too_large_a_message_does_not_end_the_channel(served: Served) -> None:
    with connect(served.url.replace("http", "ws") + "live", proxy=None) as live:
        live.send(message(MAX_MESSAGE_BYTES + 1))
        assert str(MAX_MESSAGE_BYTES) in json.loads(live.recv(timeout=5))["error"]["message"]
        live.send(message(MAX_MESSAGE_BYTES))
        assert json.loads(live.recv(timeout=5))["type"] == "need"


def test_an_enormous_message_ends_the_channel_and_nothing_else(served: Served) -> None:
    with connect(served.url.replace("http", "ws") + "live", proxy=None) as live:
        live.send("x" * (LARGEST_FRAME_BYTES + 1))
        with pytest.raises(ConnectionClosedError) as ended:
            live.recv(timeout=5)
    assert ended.value.rcvd is not None
    assert ended.value.rcvd.code == 1009
    assert httpx.get(f"{served.url}calls").status_code == 200


def test_a_flood_on_one_channel_does_not_keep_others_waiting(served: Served) -> None:
    with connect(served.url.replace("http", "ws") + "live", proxy=None) as live:
        for _ in range(2000):
            live.send(message(300))
        start = time.perf_counter()
        assert httpx.get(f"{served.url}static/base.css").status_code == 200
        waited = time.perf_counter() - start
        for _ in range(2000):
            live.recv(timeout=10)
    assert waited < 2.0


@pytest.mark.skipif(not hasattr(signal, "SIGSTOP"), reason="signals of POSIX")
def test_a_machine_that_slept_goes_on_where_it_was(tmp_path: Path) -> None:
    with serving(tmp_path / "data") as server:
        with connect(server.url.replace("http", "ws") + "live", proxy=None) as live:
            live.send(message(200))
            live.recv(timeout=10)
            os.kill(server.process.pid, signal.SIGSTOP)
            live.send(message(201))
            time.sleep(1.5)
            os.kill(server.process.pid, signal.SIGCONT)
            assert json.loads(live.recv(timeout=10))["type"] == "need", "what was sent meanwhile is answered"
            live.send(message(202))
            assert json.loads(live.recv(timeout=10))["type"] == "need"
        assert httpx.get(f"{server.url}calls").status_code == 200


def test_a_folder_that_cannot_be_written_is_a_sentence(tmp_path: Path) -> None:
    # A file where the folder should be: it fails for every account, as a folder without rights does for most.
    (tmp_path / "blocked").write_text("")
    app = create_app(tmp_path / "blocked" / "data")
    with TestClient(app, base_url="http://127.0.0.1", raise_server_exceptions=False) as client:
        answer = client.post("/api/samples", json={"name": "Boule"})
        assert answer.status_code == 503
        assert answer.json()["error"]["message"]
        assert client.get("/calls").status_code == 200, "what keeps nothing goes on"
