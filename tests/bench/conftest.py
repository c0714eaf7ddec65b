"""Every case beside its floor in the same run: their rounds alternate, so that what else the machine does meets both.

``beside`` times with pytest-benchmark; the floor runs in the set-up of each round. At the end one table tells each
ratio of medians and what it should reach. A ratio that is missed is told, not failed: it depends on the machine.
"""

from __future__ import annotations

import platform
import statistics
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Any

import pytest


@dataclass(frozen=True)
class Line:
    """One line of the table."""

    case: str
    taken: str
    floor: str
    measured: float
    wanted: float
    unit: str = ""


_LINES: list[Line] = []


class Beside:
    """Times a case beside its floor, and keeps the lines of the table."""

    def __init__(self, benchmark: Any) -> None:
        self._benchmark = benchmark

    def compare(
        self,
        name: str,
        case: Callable[[], Any],
        floor: Callable[[], Any],
        wanted: float,
        *,
        rounds: int = 40,
        repeats: int = 1,
    ) -> float:
        """The ratio of the medians of ``rounds`` rounds of ``repeats`` calls each."""
        floors: list[float] = []

        def run_floor() -> None:
            start = time.perf_counter()
            for _ in range(repeats):
                floor()
            floors.append((time.perf_counter() - start) / repeats)

        def run_case() -> None:
            for _ in range(repeats):
                case()

        self._benchmark.pedantic(run_case, setup=run_floor, rounds=rounds, warmup_rounds=2)
        taken = float(self._benchmark.stats.stats.median) / repeats
        below = statistics.median(floors[2:])
        self.tell(name, taken / below, wanted, _print_time(taken), _print_time(below))
        self._benchmark.extra_info.update(ratio=taken / below, wanted=wanted)
        return taken / below

    def tell(
        self, name: str, measured: float, wanted: float, taken: str = "", floor: str = "–", unit: str = ""
    ) -> None:
        """Keep a line of the table."""
        _LINES.append(Line(name, taken, floor, measured, wanted, unit))


def time_call(call: Callable[[], Any], rounds: int = 7) -> float:
    """The median of the times of some calls, in seconds."""
    times = []
    for _ in range(rounds):
        start = time.perf_counter()
        call()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def _print_time(seconds: float) -> str:
    for size, unit in ((1.0, "s"), (1e-3, "ms"), (1e-6, "µs")):
        if seconds >= size:
            return f"{seconds / size:.3g} {unit}"
    return f"{seconds * 1e9:.3g} ns"


@pytest.fixture
def beside(benchmark: Any) -> Iterator[Beside]:
    """Measures of a test beside their floors."""
    yield Beside(benchmark)
    if benchmark.stats is None:
        # Measured otherwise: the plugin warns of a fixture that is not used.
        benchmark.pedantic(lambda: None, rounds=1)


def pytest_terminal_summary(terminalreporter: Any) -> None:
    """The table, as it stands in DEVELOPERS.md."""
    if not _LINES:
        return
    terminalreporter.section("beside the floor")
    terminalreporter.write_line(f"{platform.machine()}, Python {platform.python_version()}")
    terminalreporter.write_line("| case | taken | floor | measured | to reach | |")
    terminalreporter.write_line("|---|---|---|---|---|---|")
    for line in _LINES:
        reached = "reached" if line.measured <= line.wanted else "missed"
        terminalreporter.write_line(
            f"| {line.case} | {line.taken} | {line.floor} | {line.measured:.2f}{line.unit} | "
            f"≤ {line.wanted:g}{line.unit} | {reached} |"
        )
