"""Calls over HTTP beside a route that does nothing, and beside JSON alone."""

from __future__ import annotations

import json
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from tests.bench.conftest import Beside
from tests.bench.server import Client, serve_with_floors

CRYSTAL = {"cell": [7.2, 8.1, 9.3, 90.0, 104.0, 90.0], "group": "2/m"}
TENSOR = {"free": {"11": 12.4, "13": -0.8, "22": 9.1, "33": 14.2}}
POSE = {"bunge": [20.0, 40.0, 70.0]}


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Client]:
    data: Path = tmp_path_factory.mktemp("bench") / "data"
    with serve_with_floors(data) as (url, _), Client(url) as client:
        yield client


def test_state_by_http(beside: Beside, client: Client) -> None:
    body = json.dumps({"crystal": CRYSTAL, "tensor": TENSOR, "pose": POSE}).encode()
    answer = client.send("POST", "/api/v1/state", body)
    client.send("PUT", "/floor/constant/state", answer)
    assert client.send("POST", "/floor/state", body) == answer
    beside.compare(
        "`state` by HTTP",
        lambda: client.send("POST", "/api/v1/state", body),
        lambda: client.send("POST", "/floor/state", body),
        1.3,
        rounds=60,
        repeats=5,
    )


def test_along_twenty_thousand_directions(beside: Beside, client: Client) -> None:
    directions = np.random.default_rng(3).normal(size=(20_000, 3)).tolist()
    body = json.dumps({"crystal": CRYSTAL, "tensor": TENSOR, "directions": directions}).encode()
    answer = json.loads(client.send("POST", "/api/v1/along", body))
    beside.compare(
        "`along` by HTTP, 20,000 directions",
        lambda: client.send("POST", "/api/v1/along", body),
        lambda: (json.loads(body), json.dumps(answer)),
        2.5,
        rounds=12,
    )
