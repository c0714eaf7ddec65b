"""A turn over the live channel: beside an echo, under eight clients, and while something large is calculated."""

from __future__ import annotations

import asyncio
import itertools
import json
import statistics
import threading
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from websockets.asyncio.client import connect as connect_async
from websockets.sync.client import ClientConnection, connect

from tests.bench.conftest import Beside
from tests.bench.server import Client, serve_with_floors

SECONDS = 60
CLIENTS = 8
TURNS_A_SECOND = 200


@pytest.fixture(scope="module")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[str, int]]:
    data: Path = tmp_path_factory.mktemp("bench") / "data"
    with serve_with_floors(data) as (url, process):
        yield url, process.pid


def turn_message(subject: str, pose: Any, number: int) -> str:
    turn = {"drag": [0.003 * (number % 400), 0.002 * (number % 300)]}
    return json.dumps({"type": "turn", "hash": subject, "seq": number, "pose": pose, "turn": turn, "catch": True})


def prepare(url: str, socket: ClientConnection) -> tuple[str, Any]:
    """The hash of the demonstration sample's tensor and its pose."""
    with Client(url) as client:
        sample = client.fetch("/api/samples")[0]["id"]
        document = client.fetch(f"/api/samples/{sample}")["document"]
    socket.send(json.dumps({"type": "tensor", "sample": sample}))
    return json.loads(socket.recv())["hash"], document["pose"]


def live_address(url: str, path: str) -> str:
    return url.replace("http", "ws", 1).rstrip("/") + path


def test_turn_beside_an_echo(beside: Beside, served: tuple[str, int]) -> None:
    url, _ = served
    with connect(live_address(url, "/live"), max_size=None, compression=None) as socket:
        subject, pose = prepare(url, socket)
        socket.send(turn_message(subject, pose, 7))
        answer = socket.recv(decode=False)
        with Client(url) as client:
            client.send("PUT", "/floor/constant/turn", bytes(answer))
        with connect(live_address(url, "/floor/echo"), max_size=None, compression=None) as floor:
            numbers = itertools.count(8)

            def turn(to: ClientConnection) -> None:
                to.send(turn_message(subject, pose, next(numbers)))
                to.recv(decode=False)

            beside.compare(
                "one turn over the live channel",
                lambda: turn(socket),
                lambda: turn(floor),
                1.25,
                rounds=100,
                repeats=3,
            )


async def _load(url: str, subject: str, pose: Any, times: list[float]) -> None:
    async with connect_async(live_address(url, "/live"), max_size=None, compression=None) as socket:
        pause = CLIENTS / TURNS_A_SECOND
        start = time.perf_counter()
        for number in itertools.count():
            due = start + number * pause
            if due > start + SECONDS:
                return
            await asyncio.sleep(max(0.0, due - time.perf_counter()))
            sent = time.perf_counter()
            await socket.send(turn_message(subject, pose, number))
            answer = json.loads(await socket.recv())
            assert answer["type"] == "state", answer
            assert answer["seq"] == number
            times.append(time.perf_counter() - sent)


def read_memory(process: int) -> float:
    """Resident memory in MB, by Linux's own file."""
    for line in Path(f"/proc/{process}/status").read_text().splitlines():
        if line.startswith("VmRSS:"):
            return int(line.split()[1]) / 1024.0
    raise AssertionError("no VmRSS")


def test_eight_clients(beside: Beside, served: tuple[str, int]) -> None:
    url, process = served
    with connect(live_address(url, "/live"), max_size=None, compression=None) as socket:
        subject, pose = prepare(url, socket)
    times: list[float] = []
    memory: list[float] = []

    async def run() -> None:
        loads = asyncio.gather(*(_load(url, subject, pose, times) for _ in range(CLIENTS)))
        await asyncio.sleep(5.0)
        memory.append(read_memory(process))
        await loads
        memory.append(read_memory(process))

    asyncio.run(run())
    ordered = sorted(times)
    median, late = statistics.median(ordered), ordered[int(0.99 * len(ordered))]
    assert len(times) >= 0.98 * TURNS_A_SECOND * SECONDS
    name = f"{CLIENTS} clients, {len(times) / SECONDS:.0f} turns a second together, {SECONDS} s"
    beside.tell(f"{name}: p99 over median", late / median, 5.0, f"{late * 1e3:.1f} ms", f"{median * 1e3:.1f} ms")
    beside.tell(f"{name}: growth of memory after the first 5 s, MB", memory[1] - memory[0], 4.0)


def test_turn_while_a_large_simulation_runs(beside: Beside, served: tuple[str, int]) -> None:
    url, _ = served
    with Client(url) as client:
        samples = [entry["id"] for entry in client.fetch("/api/samples")]
        sample = next(entry for entry in samples if client.fetch(f"/api/samples/{entry}")["document"]["readings"])
    with connect(live_address(url, "/live"), max_size=None, compression=None) as socket:
        subject, pose = prepare(url, socket)

        def take(seconds: float) -> list[float]:
            times = []
            end = time.perf_counter() + seconds
            for number in itertools.count():
                if time.perf_counter() > end:
                    return times
                start = time.perf_counter()
                socket.send(turn_message(subject, pose, number))
                socket.recv(decode=False)
                times.append(time.perf_counter() - start)
                time.sleep(0.01)
            raise AssertionError

        take(1.0)
        idle = take(6.0)
        stop = threading.Event()
        errors: list[BaseException] = []

        def calculate() -> None:
            with Client(url) as client:
                while not stop.is_set():
                    try:
                        client.send("POST", f"/api/samples/{sample}/readings/closer", b"")
                    except AssertionError as error:
                        errors.append(error)
                        return

        thread = threading.Thread(target=calculate)
        thread.start()
        busy = take(6.0)
        stop.set()
        thread.join()
    assert not errors, errors
    late_idle, late_busy = (sorted(times)[int(0.99 * len(times))] for times in (idle, busy))
    beside.tell(
        "a turn's p99 while a large simulation runs",
        late_busy / late_idle,
        2.0,
        f"{late_busy * 1e3:.1f} ms",
        f"{late_idle * 1e3:.1f} ms idle",
    )
