"""The long run: at least so many calls of every route, of the live channel and of what the OpenAPI document promises.

    python -m tests.fuzz.run --calls 100000 --seed 1

Two processes share the calls; each keeps its samples in a folder of its own, which is removed afterwards. Prints the
slowest calls and every fault with the call that showed it, and ends with 1 where there is one.
"""

from __future__ import annotations

import argparse
import asyncio
import faulthandler
import logging
import multiprocessing
import random
import sys
import tempfile
import threading
import time
import traceback
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from app.web.server import create_app
from tests.fuzz.calls import Ground, Route
from tests.fuzz.client import LONGEST_CALL, Call, LiveTalk, Reply, ask, judge
from tests.fuzz.live_calls import talk

LIVE_SHARE = 0.1
SCHEMA_SHARE = 0.1
SLOWEST = 12
HANGING = 60.0
CALLS_PER_STORE = 6000


@dataclass
class Summary:
    """What a run saw."""

    calls: int = 0
    statuses: Counter[str] = field(default_factory=Counter)
    routes: Counter[str] = field(default_factory=Counter)
    slowest: list[tuple[float, str]] = field(default_factory=list)
    faults: list[tuple[str, str, str]] = field(default_factory=list)

    def note(self, route: str, status: str, seconds: float, described: str, fault: str | None) -> None:
        """Take one call into account."""
        self.calls += 1
        self.statuses[status] += 1
        self.routes[route] += 1
        if len(self.slowest) < SLOWEST or seconds > self.slowest[-1][0]:
            self.slowest = sorted([*self.slowest, (seconds, described[:600])], reverse=True)[:SLOWEST]
        if fault is not None:
            self.faults.append((route, fault, described))

    def join(self, other: Summary) -> None:
        """Take another run's summary in."""
        self.calls += other.calls
        self.statuses += other.statuses
        self.routes += other.routes
        self.slowest = sorted([*self.slowest, *other.slowest], reverse=True)[:SLOWEST]
        self.faults += other.faults

    def print(self) -> None:
        """To standard output."""
        say = sys.stdout.write
        say(f"{self.calls} calls over {len(self.routes)} routes, {len(self.faults)} faults\n")
        say("answers: " + ", ".join(f"{status} {count}" for status, count in sorted(self.statuses.items())) + "\n")
        say("fewest calls: " + ", ".join(f"{name} {count}" for name, count in self.routes.most_common()[:-6:-1]) + "\n")
        say("slowest:\n" + "".join(f"  {seconds:.2f} s  {call[:160]}\n" for seconds, call in self.slowest))
        for route, fault, described in self.faults:
            say(f"FAULT {route}: {fault}\n    {described}\n")


class Watch:
    """Tells of a call that does not come back, with the stack where it hangs, while it hangs."""

    def __init__(self) -> None:
        self.current = ""
        self.since = time.monotonic()
        threading.Thread(target=self._look, daemon=True).start()

    def begin(self, call: str) -> None:
        """A call begins."""
        self.current, self.since = call, time.monotonic()

    def _look(self) -> None:
        while True:
            time.sleep(5)
            if self.current and time.monotonic() - self.since > HANGING:
                sys.stderr.write(f"hanging since {HANGING:g} s: {self.current}\n")
                faulthandler.dump_traceback(all_threads=True)
                self.since = time.monotonic()


async def fuzz(folder: Path, calls: int, seed: int, routes: list[str] | None = None) -> Summary:
    """So many mutated calls, of all routes or of those that contain one of the given texts."""
    summary, watch = Summary(), Watch()
    random_source = random.Random(seed)
    left = calls
    turn = 0
    while left > 0:
        turn += 1
        store = folder / f"store{turn}"
        app = create_app(store)
        ground, live = Ground(app, random_source), LiveTalk(app)
        ground.renew()
        chosen = [route for route in ground.routes if routes and any(text in route.name for text in routes)]
        if not routes:
            await _visit_all(ground, summary, watch)
        for _ in range(min(left, CALLS_PER_STORE)):
            if not routes and random_source.random() < LIVE_SHARE:
                told = await talk(ground, live)
                fault = f"{told.fault}; {_last_logged.text}" if told.fault else None
                summary.note("live", told.kind, told.seconds, f"live {told.text[:3000]}", fault)
            else:
                await _ask(ground, summary, watch, random_source.choice(chosen) if chosen else None)
        left -= CALLS_PER_STORE
        watch.begin("")
        sys.stderr.write(f"seed {seed}: {summary.calls} calls, {len(summary.faults)} faults\n")
        await live.close()
    return summary


async def _visit_all(ground: Ground, summary: Summary, watch: Watch) -> None:
    """Every route once at least, however short the run."""
    for route in ground.routes:
        await _ask(ground, summary, watch, route)


async def _ask(ground: Ground, summary: Summary, watch: Watch, route: Route | None) -> None:
    call = ground.make_call(route)
    watch.begin(call.describe())
    reply = await ask(ground.app, call)
    fault = judge(reply)
    if fault is None and reply.seconds > LONGEST_CALL:
        fault = await _time_again(ground.app, call, reply)
    if fault is not None and reply.status >= 500:
        fault = f"{fault}; {_last_logged.text}"
    summary.note(call.route, str(reply.status), reply.seconds, call.describe(), fault)


async def _time_again(app: Any, call: Call, reply: Reply) -> str | None:
    again = await ask(app, call)
    seconds = min(reply.seconds, again.seconds)
    return f"took {seconds:.1f} s" if seconds > LONGEST_CALL else None


class _Remember(logging.Handler):
    """Keeps where the last unexpected error was raised, which no answer tells."""

    text = ""

    def emit(self, record: logging.LogRecord) -> None:
        if record.exc_info and record.exc_info[1] is not None:
            error = record.exc_info[1]
            frames = traceback.extract_tb(error.__traceback__)[-3:]
            where = " < ".join(f"{Path(frame.filename).name}:{frame.lineno} {frame.name}" for frame in reversed(frames))
            self.text = f"{type(error).__name__}: {str(error)[:200]} at {where}"
        elif record.levelno >= logging.ERROR:
            # The log quotes no error's words, which may hold what was sent; its last lines say kind and place.
            self.text = " < ".join(line.strip() for line in reversed(record.getMessage().splitlines()[-4:]))


_last_logged = _Remember()


def work(calls: int, seed: int, routes: list[str] | None) -> Summary:
    """One process's share."""
    logging.getLogger("app").addHandler(_last_logged)
    logging.getLogger("app").propagate = False
    with tempfile.TemporaryDirectory(prefix="fuzz") as folder:
        return asyncio.run(fuzz(Path(folder), calls, seed, routes))


def main() -> int:
    """Run, print, and say by the exit status whether anything was found."""
    parser = argparse.ArgumentParser(prog="python -m tests.fuzz.run", description=__doc__)
    parser.add_argument("--calls", type=int, default=100_000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--processes", type=int, default=2)
    parser.add_argument("--route", action="append", help="only routes whose method and path contain this text")
    given = parser.parse_args()
    begun = time.monotonic()
    total = Summary()
    schema_calls = 0 if given.route else int(SCHEMA_SHARE * given.calls)
    share = -(-(given.calls - schema_calls) // given.processes)
    with multiprocessing.get_context("spawn").Pool(given.processes) as pool:
        jobs = [
            pool.apply_async(work, (share, given.seed * 1000 + number, given.route))
            for number in range(given.processes)
        ]
        if schema_calls:
            from tests.fuzz.openapi import check_schema

            jobs.append(pool.apply_async(check_schema, (schema_calls, given.seed)))
        for job in jobs:
            total.join(job.get())
    total.print()
    sys.stdout.write(f"{time.monotonic() - begun:.0f} s, seed {given.seed}\n")
    return 1 if total.faults else 0


if __name__ == "__main__":
    sys.exit(main())
