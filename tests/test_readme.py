"""What README prints runs as it stands."""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```$", (ROOT / "README.md").read_text("utf-8"), re.M | re.S)


def run(*command: str) -> str:
    environment = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "utf-8"}
    done = subprocess.run(command, cwd=ROOT, env=environment, capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
    return done.stdout


def test_the_notebook_lines() -> None:
    (code,) = blocks("python")
    assert len(code.strip().splitlines()) <= 10
    out = run(sys.executable, "-c", code)
    assert "x3 along c, x2 along b*, x1 = x2 × x3" in out
    assert "Tensor in the specimen frame, W/(m·K)" in out


@pytest.mark.parametrize("block", blocks("sh")[2:])
def test_the_shell_lines(block: str) -> None:
    command, *arguments = shlex.split(block.replace("\\\n", " "))
    assert command == ".venv/bin/halfturn"
    assert "Principal values, W/(m·K), biaxial" in run(sys.executable, "-m", "app", *arguments)
