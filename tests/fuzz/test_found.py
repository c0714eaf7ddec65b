"""What the fuzzer has found once, each kept as a test of its own."""

from __future__ import annotations

import json
import time
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.crystal.crystal import build_crystal
from app.cutting.film import find_normals
from app.cutting.indexing import index_normals
from app.errors import InputError
from app.readings.fit import fit_readings
from app.readings.pairs import compare_pairs
from app.readings.reading import Reading
from app.readings.rocking import fit_rocking, judge_piece
from app.readings.twin import fit_twin
from app.store.document import change_document
from app.tensor.kind import Kind
from app.web.requests import MAX_KEPT_READINGS
from app.web.server import create_app
from tests.fuzz.calls import list_documents
from tests.fuzz.client import LiveTalk
from tests.fuzz.loops import run_apart
from tests.readings.builders import TRICLINIC, vector


def talk(app: Any, *messages: str) -> list[Any]:
    """What the live channel answers, one connection for all messages."""

    async def ask() -> list[Any]:
        live = LiveTalk(app)
        answers = []
        for message in messages:
            text, _, fault = await live.ask(message)
            assert fault is None, fault
            answers.append(text if isinstance(text, bytes) else json.loads(text or "{}"))
        await live.close()
        return answers

    return run_apart(ask())


@pytest.mark.parametrize(
    "message",
    [
        '{"type": [1, 2]}',
        '{"type": {"a": 1}}',
        '{"type": "dance", "seq": NaN}',
        '{"type": "dance", "seq": [[1e400]]}',
        '{"type": "tensor", "sample": "x", "revision": 1' + "0" * 300 + "}",
        "[" * 50_000,
        "{}",
        "",
        "null",
    ],
)
def test_no_message_ends_the_live_channel(message: str, tmp_path: Path) -> None:
    error, again = talk(create_app(tmp_path), message, '{"type": "surface", "hash": "none", "surface": "value"}')
    assert error["type"] == "error"
    assert error["error"]["message"]
    assert again["type"] == "need"


def test_a_second_axis_may_be_put_toward_a_direction(tmp_path: Path) -> None:
    # JSON has lists where Python has tuples, which strict reading once refused.
    app = create_app(tmp_path)
    sample = app.state.store.samples.create(list_documents()[0]).sample_id
    (subject,) = talk(app, json.dumps({"type": "tensor", "sample": sample}))
    put = {"axis": "z", "on": "[0 1 0]", "toward": ["x", "[0 0 1]"]}
    turn = {"type": "turn", "hash": subject["hash"], "seq": 1, "pose": {"quaternion": [1, 0, 0, 0]}, "put": put}
    (state,) = talk(app, json.dumps(turn))
    assert state["type"] == "state", state
    # The rule of the sample is x3 along c, x2 along b*; b is along b* where it is the unique axis.
    assert np.array(state["pose"]["matrix"]) == pytest.approx(np.array([[0, 0, 1], [1, 0, 0], [0, 1, 0]]), abs=1e-12)


def test_calls_of_kept_samples_state_that_a_sample_may_be_missing(tmp_path: Path) -> None:
    paths = create_app(tmp_path).openapi()["paths"]
    for path, methods in paths.items():
        if "{sample_id}" in path:
            for method, operation in methods.items():
                assert "404" in operation["responses"], f"{method} {path}"


def test_a_file_is_described_as_a_file(tmp_path: Path) -> None:
    app = create_app(tmp_path)
    paths = app.openapi()["paths"]
    sample = app.state.store.samples.create(list_documents()[0]).sample_id
    client = TestClient(app, base_url="http://127.0.0.1")
    for path, methods in paths.items():
        if "/out/" in path and "get" in methods:
            answer = client.get(path.replace("{sample_id}", sample))
            described = methods["get"]["responses"]["200"]["content"]
            assert answer.headers["content-type"].split(";")[0] in described, path


def test_many_batches_are_refused_rather_than_weighed_for_minutes() -> None:
    units = np.random.default_rng(5).normal(size=(4000, 3))
    readings = [
        Reading("along", 3.0, vector(list(unit)), sigma=0.1, batch=f"furnace {number}")
        for number, unit in enumerate(units)
    ]
    begun = time.process_time()
    with pytest.raises(InputError) as caught:
        fit_readings(TRICLINIC, Kind(), readings, batches={f"furnace {number}": 0.01 for number in range(4000)})
    assert time.process_time() - begun < 5
    assert caught.value.field == "batches"
    # 200 million over 4000 readings allow 223 batches.
    assert "223" in caught.value.message
    few = {f"furnace {number}": 0.01 for number in range(20)}
    shared = [Reading("along", 3.0, r.direction, sigma=0.1, batch=f"furnace {n % 20}") for n, r in enumerate(readings)]
    assert fit_readings(TRICLINIC, Kind(), shared, batches=few).determined


@pytest.mark.parametrize(
    ("azimuths", "angles", "sigma", "field"),
    [
        ([0, 90, 180, 270], [10.1, 10.3, 9.9e300, 9.7], 0.02, "angles"),
        ([0, 90, 180, 1e18], [10.1, 10.3, 9.9, 9.7], 0.02, "azimuths"),
        ([0, 90, 180, 270], [10.1, 10.3, 9.9, 9.7], 1e-300, "sigma"),
    ],
)
def test_rocking_angles_beyond_any_dial_are_refused(azimuths: Any, angles: Any, sigma: float, field: str) -> None:
    with pytest.raises(InputError) as caught:
        fit_rocking(azimuths, angles, sigma)
    assert caught.value.field == field


def test_a_piece_of_no_size_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        judge_piece(1e300, 1e-20, 1e-20)
    assert caught.value.field == "length"


def test_a_twin_of_a_tensor_that_vanishes_is_refused() -> None:
    # An axial tensor of rank two vanishes in every group that has a centre (Nye, ch. XIV, from memory).
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    law = np.diag([1.0, -1.0, -1.0])
    with pytest.raises(InputError) as caught:
        fit_twin(crystal, Kind("axial"), [Reading("along", 1.0, vector([1, 0, 0]), sigma=0.1)], law)
    assert caught.value.field == "law"


def test_spots_beyond_any_film_are_refused(tmp_path: Path) -> None:
    app = create_app(tmp_path)
    sample = app.state.store.samples.create(list_documents()[0]).sample_id
    client = TestClient(app, base_url="http://127.0.0.1")
    body = {"spots": [[1e300, 3.3], [-8.2, 14.0], [4.4, -17.5]], "distance": 30, "angles": [0, 0, 0]}
    answer = client.post(f"/api/samples/{sample}/cut/spots", json=body)
    assert answer.status_code == 422
    assert answer.json()["error"]["field"] == "spots[0][0]"


def test_many_spots_and_a_wide_tolerance_are_indexed_in_time() -> None:
    places = np.random.default_rng(3).normal(size=(60, 2)) * 20
    normals = find_normals(places, 30, "back")
    begun = time.process_time()
    index_normals(TRICLINIC, normals, tolerance=10, max_index=5)
    assert time.process_time() - begun < 10


def test_hundreds_of_equivalent_readings_are_compared_in_time() -> None:
    # In m-3m every (h k l) of one form is equal to every other; each pair's σ once cost an inverse of the whole V.
    crystal = build_crystal([5, 5, 5, 90, 90, 90], "m-3m")
    faces = [vector(face) for face in ([1, 0, 0], [0, 1, 0], [0, 0, 1])]
    readings = [Reading("along", 3.0 + 0.01 * n, faces[n % 3], sigma=0.1, batch="f") for n in range(300)]
    begun = time.process_time()
    pairs = compare_pairs(crystal, Kind(), readings, 3.0 * np.eye(3), batches={"f": 0.01})
    assert time.process_time() - begun < 5
    # All pairs but those of one face: 3 · 100 · 100.
    assert len(pairs) == 30_000
    # A common calibration error r p of both cancels in the difference: what is left is σ √2.
    assert pairs[0].sigma == pytest.approx(0.1 * np.sqrt(2), rel=1e-9)
    with pytest.raises(InputError):
        compare_pairs(crystal, Kind(), readings * 2, 3.0 * np.eye(3), batches={"f": 0.01})


def test_more_readings_than_a_page_can_show_are_refused(tmp_path: Path) -> None:
    app = create_app(tmp_path)
    sample = app.state.store.samples.create(list_documents()[0]).sample_id
    client = TestClient(app, base_url="http://127.0.0.1")
    text = "kind,direction,value,sigma\n" + "along,(1 0 0),13.1,0.1\n" * (MAX_KEPT_READINGS + 1)
    answer = client.post(f"/api/samples/{sample}/readings/table", json={"parent": 1, "text": text})
    assert answer.status_code == 422
    assert str(MAX_KEPT_READINGS) in answer.json()["error"]["message"]


@pytest.mark.parametrize("call", ["series", "tensor-series"])
@pytest.mark.parametrize("key", ["degree", "table"])
def test_null_in_a_change_of_a_series_is_the_usual_value(call: str, key: str, tmp_path: Path) -> None:
    app = create_app(tmp_path)
    sample = app.state.store.samples.create(list_documents()[1]).sample_id
    client = TestClient(app, base_url="http://127.0.0.1")
    answer = client.post(f"/api/samples/{sample}/{call}", json={"parent": 1, "change": {key: None}})
    assert answer.status_code in (200, 422), answer.text[:300]
    assert client.get(f"/api/samples/{sample}/{call}").status_code == 200
    assert client.get(f"/samples/{sample}/series").status_code == 200


def test_a_frame_beyond_all_bounds_is_told_without_an_infinity(tmp_path: Path) -> None:
    app = create_app(tmp_path)
    reading = {"property": "conductivity", "kind": "along", "direction": "[0 1 0]", "value": 24.6, "sigma": 0.1}
    document = change_document(list_documents()[0], {"readings": [reading]})
    sample = app.state.store.samples.create(document).sample_id
    client = TestClient(app, base_url="http://127.0.0.1")
    matrix = [[1e155, 0, 0], [0, 24.6, 0], [0, 0, 15.9]]
    answer = client.post(f"/api/samples/{sample}/frame-question", json={"matrix": matrix, "unsure": False})
    assert answer.status_code == 200, answer.text
    told = [entry["chi2"] for entry in answer.json()["answers"]]
    assert "inf" not in told
    assert "beyond 10³⁰⁸" in told
