"""Tables that leave: read by the csv module, and by the table reader, which must find what was kept."""

from __future__ import annotations

import csv
import io
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from app.errors import InputError
from app.readings.table import read_table
from app.readings.table_text import COLUMNS
from app.store.document import SampleDocument, read_document, readings_of
from app.web.kept import crystal_of
from app.web.kept_readings import take_all
from app.web.tables_out import TENSOR_COLUMNS, guard_text, write_readings_in_use, write_tensors

CELL = [9.83, 6.41, 7.27, 90, 107.4, 90]
# Invented values.
FREE = {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}
COVARIANCE = np.diag([0.0064, 0.0036, 0.04, 0.0081]) + 0.0005
TURN = np.linalg.qr(np.random.default_rng(3).normal(size=(3, 3)))[0]
POSE = TURN * np.sign(np.linalg.det(TURN))


def make_document(readings: Any = (), **more: Any) -> SampleDocument:
    shown = {
        "id": "k",
        "name": "Conductivity",
        "kind": "thermal_conductivity",
        "unit": "W/(m·K)",
        "tensor": {"free": FREE, "covariance": COVARIANCE.tolist()},
        "source": "invented",
        "conditions": {"temperature": 295, "atmosphere": "dry"},
        **more.pop("shown", {}),
    }
    given = {
        "name": "Invented",
        "crystal": {"cell": CELL, "group": "2/m"},
        "properties": [shown, *more.pop("others", [])],
        "pose": {"matrix": POSE.tolist()},
        "readings": list(readings),
        **more,
    }
    return read_document(given)


def read_rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text, newline="")))


def gather(rows: list[dict[str, str]], frame: str) -> tuple[np.ndarray[Any, Any], np.ndarray[Any, Any]]:
    cells = [row for row in rows if row["quantity"] == "cell" and row["frame"] == frame]
    assert len(cells) == 9
    values, sigmas = (np.array([float(row[name]) for row in cells]).reshape(3, 3) for name in ("value", "sigma"))
    return values, sigmas


def test_nine_cells_in_both_frames_with_their_spreads() -> None:
    text = write_tensors(make_document())
    assert text.endswith("\r\n")
    assert next(csv.reader(io.StringIO(text))) == list(TENSOR_COLUMNS)
    rows = read_rows(text)
    values, sigmas = gather(rows, "crystal")
    a, b, c, d = FREE.values()
    expected = np.array([[a, 0, b], [0, c, 0], [b, 0, d]])
    assert values.tolist() == expected.tolist()
    assert sigmas[0, 2] == pytest.approx(np.sqrt(COVARIANCE[1, 1]))
    assert sigmas[0, 1] == 0
    posed, posed_sigmas = gather(rows, "specimen")
    np.testing.assert_allclose(posed, POSE @ expected @ POSE.T, rtol=1e-12, atol=1e-12)
    # Independent of the covariance carried along: seeded draws of the free cells, turned one by one.
    draws = np.random.default_rng(8).multivariate_normal(list(FREE.values()), COVARIANCE, size=60000)
    full = np.zeros((len(draws), 3, 3))
    full[:, 0, 0], full[:, 1, 1], full[:, 2, 2] = draws[:, 0], draws[:, 2], draws[:, 3]
    full[:, 0, 2] = full[:, 2, 0] = draws[:, 1]
    np.testing.assert_allclose(posed_sigmas, (POSE @ full @ POSE.T).std(axis=0), rtol=0.02)


def test_free_cells_covariance_frame_unit_and_conditions() -> None:
    rows = read_rows(write_tensors(make_document()))
    free = {row["cell"]: float(row["value"]) for row in rows if row["quantity"] == "free"}
    assert free == FREE
    found = {(row["cell"], row["with"]): float(row["value"]) for row in rows if row["quantity"] == "covariance"}
    assert [found[one, two] for one in FREE for two in FREE] == COVARIANCE.ravel().tolist()
    assert {row["axes"] for row in rows if row["frame"] == "crystal"} == {"x3 along c, x2 along b*, x1 = x2 × x3"}
    assert {(row["unit"], row["conditions"], row["source"], row["group"]) for row in rows} == {
        ("W/(m·K)", "295 K, atmosphere: dry", "invented", "2/m")
    }
    axes = next(row["axes"] for row in rows if row["frame"] == "specimen")
    numbers = [
        float(part)
        for part in axes.replace("(", ",").replace(")", ",").split(",")
        if part.strip("-. 0123456789") == "" and part.strip()
    ]
    np.testing.assert_allclose(np.reshape(numbers, (3, 3)), POSE, atol=1e-5)


def test_without_covariance_the_spreads_are_empty() -> None:
    rows = read_rows(write_tensors(make_document(shown={"tensor": {"free": FREE}})))
    assert {row["sigma"] for row in rows} == {""}
    assert "covariance" not in {row["quantity"] for row in rows}


def test_a_property_that_cannot_be_computed_says_why_and_the_others_stand() -> None:
    broken = {"id": "b", "name": "Broken", "kind": "other", "unit": "1", "tensor": {"free": {"11": 1.0}}}
    rows = read_rows(write_tensors(make_document(others=[broken])))
    (said,) = [row for row in rows if row["quantity"] == "problem"]
    assert said["property"] == "Broken"
    assert "has no value" in said["axes"]
    assert len(gather(rows, "crystal")[0]) == 3


@pytest.mark.parametrize("text", ['=HYPERLINK("x")', "+1", "-1", "@cmd", "＝1"])
def test_no_cell_begins_as_a_formula(text: str) -> None:
    rows = read_rows(write_tensors(make_document(shown={"name": text, "source": text})))
    assert {row["property"] for row in rows} == {"\\" + text}
    assert guard_text(f"a\r\n{text}\x00\u2028b") == f"a {text} b"


def make_reading(**more: Any) -> dict[str, Any]:
    return {"property": "k", "kind": "along", "direction": "(1 0 0)", "value": 13.2, **more}


def test_the_columns_are_those_of_the_table_reader() -> None:
    text = write_readings_in_use(make_document([make_reading()]), make_document().properties[0])
    assert tuple(next(csv.reader(io.StringIO(text)))) == COLUMNS


def test_what_is_set_aside_follows_as_a_comment_and_is_not_read() -> None:
    document = make_document([make_reading(), make_reading(value=99.0, set_aside="chipped\r\nalong,(1 0 0),,1")])
    text = write_readings_in_use(document, document.properties[0])
    assert [reading.value for reading in read_table(text).readings] == [13.2]
    assert text.splitlines()[-1].startswith("# set aside (chipped along,(1 0 0),,1): along,(1 0 0),,99.0")


def test_a_pose_of_its_own_is_written_in_the_crystal_frame() -> None:
    own = np.roll(np.eye(3), 1, axis=0)
    document = make_document([make_reading(direction={"specimen": [1, 2, 0]}, pose={"matrix": own.tolist()})])
    text = write_readings_in_use(document, document.properties[0])
    (reading,) = read_table(text).readings
    assert reading.direction is not None
    assert reading.direction.kind == "vector"
    # Specimen axes are the rows of C, so v_crystal = Cᵀ v_specimen.
    expected = own.T @ np.array([1, 2, 0]) / np.sqrt(5)
    np.testing.assert_allclose(np.array(reading.direction.values), expected, atol=1e-12)


def test_what_a_table_cannot_keep_is_refused_with_its_place() -> None:
    document = make_document([make_reading(), make_reading(bar=" B1")])
    with pytest.raises(InputError) as caught:
        write_readings_in_use(document, document.properties[0])
    assert caught.value.field == "readings[1].bar"


TEXTS = st.text(st.characters(exclude_categories=["Cs", "Cc", "Zl", "Zp"]), min_size=1, max_size=20).filter(
    lambda text: text == text.strip()
)
NUMBERS = st.floats(-1e6, 1e6, allow_subnormal=False)
INDICES = st.tuples(*[st.integers(-9, 9)] * 3).filter(any)
VECTORS = st.tuples(*[st.floats(-10, 10, allow_subnormal=False)] * 3).filter(lambda v: max(map(abs, v)) > 1e-3)
DIRECTIONS = st.one_of(
    INDICES.map(lambda v: f"[{v[0]} {v[1]} {v[2]}]"),
    INDICES.map(lambda v: f"({v[0]} {v[1]} {v[2]})"),
    VECTORS.map(list),
    VECTORS.map(lambda v: {"xyz": list(v)}),
    VECTORS.map(lambda v: {"specimen": list(v)}),
)


@st.composite
def reading_lists(draw: st.DrawFn) -> list[dict[str, Any]]:
    with_sigma = draw(st.booleans())
    found = []
    for _ in range(draw(st.integers(1, 6))):
        kind = draw(st.sampled_from(["along", "across", "difference", "mean", "rod", "sheet"]))
        entry: dict[str, Any] = {"property": "k", "kind": kind, "value": draw(NUMBERS)}
        if kind not in ("mean", "sheet"):
            entry["direction"] = draw(DIRECTIONS)
        if kind in ("across", "difference", "sheet"):
            entry["second"] = draw(DIRECTIONS)
        if with_sigma:
            entry["sigma"] = draw(st.floats(1e-6, 1e3))
        optional = {"direction_sigma": st.floats(0, 5), "bar": TEXTS, "batch": TEXTS, "note": TEXTS}
        optional["temperature"] = st.floats(293, 296)
        for name, strategy in optional.items():
            if (name not in ("direction_sigma", "batch") or with_sigma) and draw(st.booleans()):
                entry[name] = draw(strategy)
        found.append(entry)
    return found


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(reading_lists())
def test_export_then_import_is_the_identity(given: list[dict[str, Any]]) -> None:
    document = make_document(given)
    kept = take_all(crystal_of(document.crystal), readings_of(document, "k"))
    table = read_table(write_readings_in_use(document, document.properties[0]).encode())
    assert table.unit == "W/(m·K)"
    assert len(table.readings) == len(kept)
    for back, reading in zip(table.readings, kept, strict=True):
        for name in ("kind", "value", "sigma", "direction_sigma", "bar", "batch", "temperature", "note"):
            assert getattr(back, name) == getattr(reading, name), name
        for name in ("direction", "second"):
            one, two = getattr(back, name), getattr(reading, name)
            assert (one is None) == (two is None)
            if one is not None:
                assert (one.kind, tuple(one.values), one.four_index) == (two.kind, tuple(two.values), two.four_index)
