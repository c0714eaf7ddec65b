"""Calls of every route that the application has, made from seeds by mutation; and the samples that they ask.

Routes are found in the application itself, so that a new one is asked from its first day. One that takes a body needs a
seed in ``seeds.SEEDS``; a test looks for one that has none. What stands in an address is made from the route's own
description of it.
"""

from __future__ import annotations

import json
import random
import typing
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any, Final
from urllib.parse import quote, urlencode

from fastapi import FastAPI
from fastapi.routing import APIRoute, APIWebSocketRoute

from app.errors import NotFoundError
from app.store.document import SampleDocument, change_document, read_document
from tests.fuzz.client import Call
from tests.fuzz.mutations import MATRICES, NUMBERS, POSES, TEXTS, mutate, write_body
from tests.fuzz.seeds import CELLS, LIVE_SEEDS, SEEDS, TENSORS

CALLS_PER_SAMPLE: Final = 60
"""After so many calls the samples are laid out afresh: each mutation that is taken leads further from sense."""


@dataclass(frozen=True)
class Route:
    """One route and method."""

    method: str
    path: str
    route: APIRoute

    @property
    def name(self) -> str:
        """As it stands in SEEDS."""
        return f"{self.method} {self.path}"


def list_routes(app: FastAPI) -> list[Route]:
    """All routes with their methods, those that the OpenAPI document does not list included; HEAD is a GET."""
    found = {}
    for route in _walk(app.routes):
        if isinstance(route, APIRoute):
            for method in route.methods - {"HEAD"}:
                found[method, route.path] = Route(method, route.path, route)
    return [found[key] for key in sorted(found)]


def list_sockets(app: FastAPI) -> list[str]:
    """The addresses of all WebSocket routes."""
    return sorted({route.path for route in _walk(app.routes) if isinstance(route, APIWebSocketRoute)})


def _walk(routes: Any) -> Iterator[Any]:
    for route in routes:
        yield route
        inner = getattr(route, "original_router", None) or getattr(route, "router", None)
        if inner is not None:
            yield from _walk(inner.routes)


def needs_seed(route: Route) -> bool:
    """Whether a route changes or asks something by more than its address."""
    return route.method != "GET" or route.route.body_field is not None


class Ground:
    """The application, the samples in its store, and the calls to make of them."""

    def __init__(self, app: FastAPI, random_source: random.Random) -> None:
        self.app = app
        self.random = random_source
        self.routes = list_routes(app)
        self.samples: list[str] = []
        self.hashes: list[str] = []
        self._left = 0

    def renew(self, documents: Sequence[SampleDocument] | None = None) -> None:
        """Keep fresh samples, so that calls have something sensible to ask."""
        store = self.app.state.store
        self.samples = []
        for document in documents or list_documents():
            kept = store.samples.create(change_document(document, {"name": f"{document.name} at first"}))
            # A revision to go back to, and one to go forward to.
            kept = store.samples.save(kept.sample_id, document, kept.revision)
            kept = store.samples.save(kept.sample_id, change_document(document, {"notes": "once"}), kept.revision)
            self.samples.append(store.samples.undo(kept.sample_id, kept.revision).sample_id)
        self._left = CALLS_PER_SAMPLE * len(self.samples)

    def _fill(self, body: Any, sample: str) -> Any:
        """A body with what stands for the sample, its revision and its fingerprint put in."""
        if body == "$sample":
            return sample
        if body == "$revision":
            return self._find_revision(sample)
        if body == "$hash":
            return self.random.choice(self.hashes) if self.hashes else "0" * 24
        if isinstance(body, dict):
            return {key: self._fill(value, sample) for key, value in body.items()}
        if isinstance(body, list):
            return [self._fill(value, sample) for value in body]
        return body

    def _find_revision(self, sample: str) -> int:
        try:
            return int(self.app.state.store.samples.get(sample).revision)
        except NotFoundError:
            # A call before this one has deleted it; that is asked, too.
            return 1

    def take_sample(self) -> str:
        """One of the samples."""
        self._left -= 1
        if self._left < 0:
            self.renew()
        return self.random.choice(self.samples)

    def make_call(self, route: Route | None = None) -> Call:
        """A mutated call, of any route or of one."""
        # The calculation calls hold most of the arithmetic and come twice as often.
        route = route or self.random.choice([r for r in self.routes for _ in range(2 if "/v1/" in r.path else 1)])
        sample = self.take_sample()
        path = self._write_path(route, sample)
        query = self._write_query(route, sample)
        body, content_type = b"", "application/json"
        seeds = SEEDS.get(route.name)
        if seeds:
            seed = self._fill(self.random.choice(seeds), sample)
            if seed is not None:
                body = write_body(mutate(seed, self.random), self.random)
                if not route.path.startswith("/api"):
                    body, content_type = self._write_form(seed), "application/x-www-form-urlencoded"
        return Call(route.method, path, query, body, content_type, route.name)

    def make_message(self) -> str:
        """A mutated message of the live channel."""
        seed = self._fill(self.random.choice(LIVE_SEEDS), self.take_sample())
        return write_body(mutate(seed, self.random), self.random).decode("utf-8", "replace")

    def make_opening(self) -> str:
        """A good message that makes a sample's tensor known."""
        return json.dumps({"type": "tensor", "sample": self.take_sample()})

    def _write_form(self, seed: Any) -> bytes:
        mutated = mutate(seed, self.random)
        if not isinstance(mutated, dict):
            return str(mutated).encode("utf-8", "replace")
        return urlencode({str(key): str(value) for key, value in mutated.items()}, errors="replace").encode()

    def _write_path(self, route: Route, sample: str) -> str:
        path = route.path
        for parameter in route.route.dependant.path_params:
            choices = _list_literals(parameter.field_info.annotation)
            value = sample if parameter.name == "sample_id" else "1"
            if choices:
                value = str(self.random.choice(choices))
            if self.random.random() < 0.03:
                value = str(self.random.choice((*TEXTS, *NUMBERS, "nan")))
            # A server decodes an address with replacement, so no half of a surrogate pair comes through.
            value = value.encode("utf-8", "replace").decode()
            path = path.replace("{" + parameter.name + "}", value).replace("{" + parameter.name + ":path}", value)
        return path

    def _write_query(self, route: Route, sample: str) -> str:
        pairs = []
        for parameter in route.route.dependant.query_params:
            required = bool(parameter.field_info.is_required())
            if not required and self.random.random() < 0.6:
                continue
            pairs.append((parameter.alias, self._take_value(parameter.alias, parameter.field_info.annotation, sample)))
        for name in ("pose", "view", "hold", "at", "matrix", "x"):
            # What a page reads from its address by itself is not in its description.
            if route.method == "GET" and self.random.random() < 0.04:
                value = self._take_value(name, None, sample)
                pairs.append((name, value))
        return "&".join(f"{quote(name)}={quote(value.encode('utf-8', 'replace'))}" for name, value in pairs)

    def _take_value(self, name: str, annotation: Any, sample: str) -> str:
        if name in ("revision", "parent") and self.random.random() < 0.7:
            return str(self._find_revision(sample))
        choices = _list_literals(annotation)
        if choices and self.random.random() < 0.85:
            return str(self.random.choice(choices))
        if name == "property" and self.random.random() < 0.6:
            return "conductivity"
        if name == "pose" and self.random.random() < 0.7:
            return json.dumps(self.random.choice(POSES))
        if name in ("view", "matrix") and self.random.random() < 0.7:
            return json.dumps(self.random.choice(MATRICES))
        kinds = _list_types(annotation)
        if (int in kinds or float in kinds) and self.random.random() < 0.7:
            return str(self.random.choice((1, 2, 8, 20, 60, 160, 300, 320.5, "nan", "inf", "-inf", "1e999", *NUMBERS)))
        return str(self.random.choice((*TEXTS, *NUMBERS, "true", "false", "yes", "nan", "inf", sample)))


def _list_literals(annotation: Any) -> list[Any]:
    """The values of a Literal, also of one that may be None."""
    if typing.get_origin(annotation) is typing.Literal:
        return list(typing.get_args(annotation))
    return [value for inner in typing.get_args(annotation) for value in _list_literals(inner)]


def _list_types(annotation: Any) -> set[Any]:
    return {annotation} | {kind for inner in typing.get_args(annotation) for kind in _list_types(inner)}


def list_documents() -> list[SampleDocument]:
    """Invented samples of all sorts: the demonstration ones, one full of everything, and those with little."""
    from app.store.demonstration import demonstration_documents

    conductor, shrinker = demonstration_documents()
    part = {
        "id": "part1",
        "name": "B4",
        "shape": "bar",
        "size": [10, 2, 2],
        "target": {"by": "direction", "direction": "(-2 0 1)"},
        "edge": "[0 1 0]",
        "tolerance": {"half_angle": 1},
        "kerf": 0.3,
        "stock": 0.1,
        "wedge": 0.1,
        "either_sense": True,
        "equivalents": True,
        "achieved": {"tilt": 0.4, "toward": "[0 1 0]", "sigma": 0.1},
    }
    full = change_document(
        conductor,
        {
            "series": [
                {"kind": "cells", "table": CELLS, "degree": 1, "strain": "stretch", "unit": "K"},
                {"kind": "tensors", "property": "conductivity", "source": "table", "table": TENSORS, "degree": 1},
            ],
            "parts": [part],
            "looking": {**conductor.plain()["looking"], "part": "part1", "stage": "preset3"},
            "sightings": [
                {"direction": "(0 0 1)", "angles": [10, 5, -3]},
                {"direction": "(1 0 0)", "angles": [95, 2, 1]},
            ],
        },
    )
    light = {
        "name": "Clear crystal",
        "crystal": {"cell": [5.679, 15.202, 6.522, 90, 118.43, 90], "group": "2/m"},
        "properties": [
            {
                "id": "light",
                "name": "Permittivity",
                "kind": "permittivity",
                "unit": "1",
                "tensor": {"free": {"11": 2.329156, "13": 0.013466, "22": 2.318311, "33": 2.322441}},
            }
        ],
    }
    turning = {
        "name": "Turning crystal",
        "crystal": {"cell": [5.2, 5.2, 9.1, 90, 90, 90], "group": "-4"},
        "properties": [
            {
                "id": "gyration",
                "name": "Gyration",
                "kind": "gyration",
                "unit": "1",
                "tensor": {"parity": "axial", "free": {"11": 2e-4, "12": 1.5e-4}},
            },
            {
                "id": "power",
                "name": "Thermopower",
                "kind": "thermopower",
                "unit": "V/K",
                "tensor": {"intrinsic": "general", "free": {"11": 1e-4, "12": 2e-5, "33": 3e-4}},
            },
        ],
    }
    rope = {
        "name": "Rope",
        "crystal": {"cell": None, "group": "∞m"},
        "properties": [
            {
                "id": "k",
                "name": "Conductivity",
                "kind": "thermal_conductivity",
                "unit": "W/(m*K)",
                "tensor": {"free": {"11": 1, "33": 9}},
            }
        ],
    }
    empty = {"name": "Empty", "crystal": {"cell": [8.141, 12.79, 7.157, 94.225, 116.597, 87.772], "group": "-1"}}
    return [conductor, full, shrinker, *(read_document(given) for given in (light, turning, rope, empty))]
