"""The server as a process: first line, stopping, a port that is taken."""

from __future__ import annotations

import re
import signal
import socket
import subprocess
import sys
from pathlib import Path

import httpx
import pytest

from app.errors import InputError
from app.web.serving import bind_loopback
from tests.processes import Served, command_environment, serving


def test_the_first_line_says_where_it_is_and_it_is_there(served: Served) -> None:
    assert re.fullmatch(r"Halfturn is at http://127\.0\.0\.1:[0-9]+/\n", served.first_line)
    answer = httpx.get(served.url, follow_redirects=True)
    assert answer.status_code == 200
    assert "server" not in answer.headers
    assert httpx.get(f"{served.url}openapi.json").json()["info"]["title"] == "Halfturn"


def test_foreign_requests_are_refused_by_the_real_server(served: Served) -> None:
    assert httpx.get(served.url, headers={"Host": "example.org"}).status_code == 403
    assert httpx.get(served.url, headers={"Origin": "http://example.org"}).status_code == 403


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_it_stops_cleanly_when_told(tmp_path: Path, number: signal.Signals) -> None:
    data = tmp_path / "data"
    with serving(data) as server, httpx.Client() as client:
        # A connection that stays open must not hold it up.
        assert client.get(f"{server.url}calls").status_code == 200
        server.process.send_signal(number)
        output, errors = server.process.communicate(timeout=10)
    assert server.process.returncode == 0
    assert output == ""
    assert errors == ""
    assert not data.exists(), "the data folder is made only when something is stored"


def test_a_taken_port_is_one_clear_sentence(tmp_path: Path) -> None:
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        port = other.getsockname()[1]
        done = subprocess.run(
            [sys.executable, "-m", "app", "--port", str(port), "--no-browser", "--data", str(tmp_path)],
            cwd=tmp_path,
            env=command_environment(),
            capture_output=True,
            text=True,
            timeout=30,
        )
    assert done.returncode == 2
    assert done.stdout == ""
    assert len(done.stderr.splitlines()) == 1
    assert f"Port {port}" in done.stderr
    assert "--port" in done.stderr


def test_two_servers_cannot_share_a_port() -> None:
    with bind_loopback(0) as first:
        assert first.getsockname()[0] == "127.0.0.1"
        with pytest.raises(InputError, match="taken"):
            bind_loopback(first.getsockname()[1])
