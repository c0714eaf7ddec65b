"""Running the tool as a process of its own."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


@dataclass(frozen=True)
class Served:
    """A server in a process of its own."""

    url: str
    process: subprocess.Popen[str]
    first_line: str


def command_environment() -> dict[str, str]:
    """The environment in which `python -m app` finds the checkout from any working directory."""
    return {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONWARNINGS": "default"}


@contextmanager
def serving(data: Path, *options: str) -> Iterator[Served]:
    """Start `python -m app` on a free port, wait for its first line, and see that it ends."""
    command: Sequence[str] = [sys.executable, "-m", "app", "--port", "0", "--no-browser", "--data", str(data), *options]
    process = subprocess.Popen(
        command,
        cwd=data.parent,
        env=command_environment(),
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    try:
        assert process.stdout is not None
        first_line = process.stdout.readline()
        if not first_line:
            pytest.fail(f"the server did not start: {process.communicate(timeout=10)[1]}")
        yield Served(first_line.rsplit(" ", 1)[-1].strip(), process, first_line)
    finally:
        if process.poll() is None:
            process.terminate()
        try:
            process.communicate(timeout=15)
        except (subprocess.TimeoutExpired, ValueError):
            process.kill()
            process.wait()
