"""A short seeded run of the fuzzer, and that it reaches every route that there is.

The long run is ``python -m tests.fuzz.run``; a fault that it finds is repeated by its seed.
"""

from __future__ import annotations

import json
import random
from pathlib import Path
from typing import Any
from urllib.parse import urlencode

import pytest
from fastapi import APIRouter, FastAPI

from app.web.answers import JsonAnswer
from app.web.server import create_app
from tests.fuzz.calls import Ground, list_documents, list_routes, list_sockets, needs_seed
from tests.fuzz.client import Call, LiveTalk, Reply, ask, judge, judge_live
from tests.fuzz.loops import run_apart
from tests.fuzz.run import fuzz
from tests.fuzz.seeds import LIVE_SEEDS, SEEDS

CALLS = 500
SEED = 20261201


def test_every_route_with_a_body_has_a_seed() -> None:
    routes = list_routes(create_app())
    named = {route.name for route in routes}
    missing = [route.name for route in routes if needs_seed(route) and route.name not in SEEDS]
    assert not missing, f"give tests/fuzz/seeds.py a good body of {missing}"
    gone = [name for name in SEEDS if name not in named]
    assert not gone, f"there is no route for the seeds of {gone}"
    assert list_sockets(create_app()) == ["/live"], "tests/fuzz/live_calls.py knows one channel"


def test_the_search_for_routes_finds_what_the_document_lists() -> None:
    app = create_app()
    listed = {f"{method.upper()} {path}" for path, methods in app.openapi()["paths"].items() for method in methods}
    assert listed <= {route.name for route in list_routes(app)}


def test_the_seeds_are_good(tmp_path: Path) -> None:
    # What is fuzzed must begin where the arithmetic does, not at a refusal of the seed itself.
    app = create_app(tmp_path)
    # The sample with a bit of everything.
    full = [list_documents()[1]]
    ground = Ground(app, random.Random(0))
    ground.renew(full)
    refused = []

    async def ask_all() -> None:
        for route in list_routes(app):
            for number, seed in enumerate(SEEDS.get(route.name, [])):
                if "/samples" in route.path:
                    ground.renew(full)
                body = ground._fill(seed, ground.samples[0])
                query = "revision=2" if not route.path.startswith("/api") else ""
                form = route.path.startswith("/samples")
                path = route.path.replace("{sample_id}", ground.samples[0])
                content = b"" if body is None else json.dumps(body).encode()
                if form and body is not None:
                    content = urlencode(body).encode()
                reply = await ask(app, Call("POST", path, query, content))
                fault = judge(reply)
                if fault is not None or reply.status >= 400:
                    refused.append(f"{route.name} {number}: {reply.status} {fault} {reply.body[:300]!r}")

    run_apart(ask_all())
    assert refused == []


def test_the_live_seeds_are_good(tmp_path: Path) -> None:
    app = create_app(tmp_path)
    ground = Ground(app, random.Random(0))
    ground.renew()

    async def talk_all() -> list[Any]:
        live = LiveTalk(app)
        answers = []
        for seed in LIVE_SEEDS:
            text, _, fault = await live.ask(json.dumps(ground._fill(seed, ground.samples[1])))
            answers.append((fault, text if isinstance(text, bytes) else json.loads(text or "{}")))
            if isinstance(text, str) and answers[-1][1]["type"] == "subject":
                ground.hashes = [answers[-1][1]["hash"]]
        await live.close()
        return answers

    for fault, answer in run_apart(talk_all()):
        assert fault is None
        assert isinstance(answer, bytes) or answer["type"] in ("subject", "state"), answer


# A server warns and goes on; whether an answer is sound is for the judge to say.
@pytest.mark.filterwarnings("ignore::RuntimeWarning")
def test_a_short_run_finds_nothing(tmp_path: Path) -> None:
    summary = run_apart(fuzz(tmp_path, CALLS, SEED))
    assert summary.calls >= CALLS
    assert not summary.faults, "\n".join(f"{route}: {fault}\n  {call}" for route, fault, call in summary.faults)
    assert summary.statuses["200"] > CALLS / 10, "too few calls get past the door"


# The judge itself ----------------------------------------------------------------------------------------------------

probe = APIRouter()


@probe.get("/probe/bug")
def fail() -> JsonAnswer:
    raise ZeroDivisionError("a defect")


def test_a_route_that_fails_is_told() -> None:
    app = FastAPI()
    app.include_router(probe)
    reply = run_apart(ask(app, Call("GET", "/probe/bug")))
    assert judge(reply) is not None


@pytest.mark.parametrize(
    ("status", "kind", "body"),
    [
        (500, "application/json", b'{"error":{"message":"x","field":null,"hint":null}}'),
        (200, "application/json", b'{"a":NaN}'),
        (200, "application/json", b'{"a":-Infinity}'),
        (200, "application/json", b'{"a":1e999}'),
        (200, "application/json", b'{"a":1,"a":2}'),
        (200, "application/json", b'{"a":"\xff"}'),
        (200, "application/json", b'{"result":"<td>nan</td>"}'),
        (200, "text/html", b'<path d="M 1 2 L nan 3">'),
        (200, "image/svg+xml", b'<circle cx="-inf"/>'),
        (422, "application/json", b'{"detail":"x"}'),
        (422, "application/json", b'{"error":{"message":"","field":null,"hint":null}}'),
        (422, "application/json", b'{"error":{"message":"x","field":1,"hint":null}}'),
        (422, "application/json", b'{"error":{"message":"x","field":null,"hint":null,"more":1}}'),
        (422, "application/json", b'{"error":{"message":"got np.float64(1)","field":null,"hint":null}}'),
        (404, "text/plain", b"Not Found"),
    ],
)
def test_the_judge_tells_what_is_wrong(status: int, kind: str, body: bytes) -> None:
    assert judge(Reply(status, {"content-type": kind}, body)) is not None


def test_the_judge_lets_good_answers_pass() -> None:
    good = b'{"a":[1,2.5,null],"text":"information, banana"}'
    assert judge(Reply(200, {"content-type": "application/json"}, good)) is None
    error = b'{"error":{"message":"The cell is wrong.","field":"cell","hint":null}}'
    assert judge(Reply(422, {"content-type": "application/json"}, error)) is None
    assert judge_live('{"type":"need","hash":"x","seq":1}') is None
    assert judge_live('{"type":"dance"}') is not None
