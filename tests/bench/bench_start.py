"""Starting and importing, each beside the least that a program of this kind can do."""

from __future__ import annotations

import socket
import statistics
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from urllib.error import URLError
from urllib.request import urlopen

import pytest

from tests.bench.conftest import Beside
from tests.processes import ROOT, command_environment

EMPTY = """
import sys, uvicorn
from fastapi import FastAPI, Request
from starlette.templating import Jinja2Templates
app, templates = FastAPI(), Jinja2Templates(directory=sys.argv[2])
@app.get("/")
def page(request: Request):
    return templates.TemplateResponse(request, "page.html", {"name": "matrix"})
uvicorn.run(app, port=int(sys.argv[1]), log_level="error")
"""


def find_port() -> int:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        return int(taken.getsockname()[1])


@pytest.fixture(scope="module")
def environment(tmp_path_factory: pytest.TempPathFactory) -> dict[str, str]:
    """With compiled files kept, as an installation has them."""
    compiled = str(tmp_path_factory.mktemp("compiled"))
    return {**command_environment(), "PYTHONDONTWRITEBYTECODE": "", "PYTHONPYCACHEPREFIX": compiled}


def wait_for_page(command: list[str], port: int, wanted: str, environment: dict[str, str]) -> float:
    """Seconds from the start of a process to a page with the wanted text."""
    start = time.perf_counter()
    process = subprocess.Popen(command, cwd=ROOT, env=environment, stdout=subprocess.DEVNULL)
    try:
        while time.perf_counter() - start < 30.0:
            try:
                with urlopen(f"http://127.0.0.1:{port}/", timeout=20) as answer:
                    assert wanted in answer.read().decode()
                return time.perf_counter() - start
            except (URLError, ConnectionError):
                time.sleep(0.005)
        raise AssertionError("no page")
    finally:
        process.terminate()
        process.wait(timeout=15)


def take_turns(case: Callable[[], float], floor: Callable[[], float], rounds: int) -> tuple[float, float]:
    times = [(case(), floor()) for _ in range(rounds)]
    return statistics.median(time for time, _ in times), statistics.median(time for _, time in times)


def test_start_to_the_first_matrix(beside: Beside, tmp_path: Path, environment: dict[str, str]) -> None:
    (tmp_path / "page.html").write_text("<!DOCTYPE html><title>{{ name }}</title><p>{{ name }}</p>")
    data = tmp_path / "data"

    def start_tool() -> float:
        port = find_port()
        # The page is painted by the server: the matrix stands in it before any script has loaded.
        command = [sys.executable, "-m", "app", "--no-browser", "--port", str(port), "--data", str(data)]
        return wait_for_page(command, port, 'id="crystal-matrix"', environment)

    def start_empty() -> float:
        port = find_port()
        return wait_for_page([sys.executable, "-c", EMPTY, str(port), str(tmp_path)], port, "matrix", environment)

    for start in (start_tool, start_empty):
        start()
    tool, empty = take_turns(start_tool, start_empty, 5)
    beside.tell("start to the first matrix", tool / empty, 1.3, f"{tool:.2f} s", f"{empty:.2f} s")


def time_import(statement: str, environment: dict[str, str]) -> float:
    start = time.perf_counter()
    subprocess.run([sys.executable, "-c", statement], check=True, cwd=ROOT, env=environment)
    return time.perf_counter() - start


def test_import(beside: Beside, environment: dict[str, str]) -> None:
    for name, statement in (("`import app`", "import app"), ("`import app` and its functions", "from app import *")):
        time_import(statement, environment)
        case, floor = take_turns(
            lambda s=statement: time_import(s, environment),
            lambda: time_import("import fastapi, numpy", environment),
            7,
        )
        beside.tell(name, case / floor, 1.15, f"{case:.2f} s", f"{floor:.2f} s")
