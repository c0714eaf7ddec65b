"""A served copy with floors, and lean clients for it."""

from __future__ import annotations

import http.client
import json
import subprocess
import sys
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

from tests.processes import ROOT, command_environment


@contextmanager
def serve_with_floors(data: Path) -> Iterator[tuple[str, subprocess.Popen[str]]]:
    """The address of ``tests.bench.served`` in a process of its own."""
    process = subprocess.Popen(
        [sys.executable, "-m", "tests.bench.served", str(data)],
        cwd=ROOT,
        env=command_environment(),
        stdout=subprocess.PIPE,
        text=True,
    )
    assert process.stdout is not None
    try:
        yield process.stdout.readline().rsplit(" ", 1)[-1].strip(), process
    finally:
        process.terminate()
        process.communicate(timeout=15)


class Client:
    """One kept connection; bodies and answers as bytes, so that the client weighs little beside the server."""

    def __init__(self, url: str) -> None:
        parts = urlsplit(url)
        self._connection = http.client.HTTPConnection(parts.hostname or "", parts.port or 0, timeout=60)

    def __enter__(self) -> Client:
        return self

    def __exit__(self, *_: object) -> None:
        self._connection.close()

    def fetch(self, path: str) -> Any:
        """What a GET answers."""
        return json.loads(self.send("GET", path))

    def send(self, method: str, path: str, body: bytes | None = None) -> bytes:
        """The answer's body; anything but success is an error."""
        self._connection.request(method, path, body, {"Content-Type": "application/json"})
        answer = self._connection.getresponse()
        content = answer.read()
        if answer.status >= 300:
            raise AssertionError(f"{method} {path}: {answer.status} {content[:300]!r}")
        return content

    def post(self, path: str, body: Any) -> bytes:
        """The answer to a JSON body."""
        return self.send("POST", path, json.dumps(body).encode())
