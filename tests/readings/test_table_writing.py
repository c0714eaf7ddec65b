"""Tables of readings as they are written, and that reading undoes writing. All data invented."""

from __future__ import annotations

import csv
import io
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.direction import Direction, parse_direction
from app.errors import InputError
from app.readings.reading import NEEDS_DIRECTION, NEEDS_SECOND, READING_KINDS, Reading
from app.readings.table import read_table, write_table
from app.readings.table_text import COLUMNS
from app.tensor.pose import Pose


def test_write_is_a_plain_table() -> None:
    # The csv module of the standard library is the outside reader.
    text = write_table(
        [Reading("along", -12.5, parse_direction("[1 0 -1]"), sigma=0.1, bar="B, 4", temperature=293.0)], "S/m"
    )
    assert text.endswith("\r\n")
    (row,) = csv.DictReader(io.StringIO(text, newline=""))
    assert tuple(row) == COLUMNS
    assert (row["kind"], row["direction"], row["second"], row["value"]) == ("along", "[1 0 -1]", "", "-12.5")
    assert (row["sigma"], row["unit"], row["bar"], row["temperature"]) == ("0.1", "S/m", "B, 4", "293.0")


@pytest.mark.parametrize(
    "text", ["=1+1", "+1", "-1", "@sum", "\\=1", "\\", "\\\\", "\\x", "'=1", "＝1", "-", "# x", "=a\n=b", '"=1"']
)
def test_no_cell_is_a_formula(text: str) -> None:
    written = write_table([Reading("mean", 1.0, sigma=1.0, bar=text, batch=text, note=text)])
    rows = list(csv.DictReader(io.StringIO(written, newline="")))
    for column in ("bar", "batch", "note"):
        assert rows[0][column][0] not in "=+-@\t\r＝＋－＠"
    reading = read_table(written).readings[0]
    assert (reading.bar, reading.batch, reading.note) == (text, text, text)


@pytest.mark.parametrize("note", ["-", "=x", "\\alpha", "@ 5"])
def test_what_a_person_typed_is_read_as_it_is(note: str) -> None:
    assert read_table(f"kind,value,note\nmean,1,{note}\n").readings[0].note == note


@pytest.mark.parametrize(
    ("reading", "field"),
    [
        (Reading("mean", None), "value"),
        (Reading("mean", float("nan")), "value"),
        (Reading("mean", 1.0, bar=" B"), "bar"),
        (Reading("mean", 1.0, bar=""), "bar"),
        (Reading("mean", 1.0, note="\x00"), "note"),
        (Reading("mean", 1.0, note="\ud800"), "note"),
        (Reading("mean", 1.0, note="x" * 2001), "note"),
    ],
)
def test_write_refuses(reading: Reading, field: str) -> None:
    with pytest.raises(InputError) as caught:
        write_table([Reading("mean", 1.0), reading])
    assert caught.value.field == f"readings[1].{field}"


def test_write_refuses_a_pose_and_a_broken_direction(identity_pose: Pose) -> None:
    with pytest.raises(InputError, match="pose"):
        write_table([Reading("mean", 1.0, pose=identity_pose)])
    for values in ((0.0, 0.0, 0.0), (float("nan"), 0.0, 1.0), (1e12, 0.0, 1.0)):
        with pytest.raises(InputError, match="cannot be written"):
            write_table([Reading("along", 1.0, Direction("row", values))])


def test_four_indices_without_text_come_back() -> None:
    for text in ("[2 -1 -1 0]", "[1 0 -1 1]", "(1 0 -1 4)", "[0 0 0 1]"):
        direction = replace(parse_direction(text), text=None)
        back = read_table(write_table([Reading("along", 1.0, direction)])).readings[0].direction
        assert back is not None
        assert (back.kind, back.four_index) == (direction.kind, True)
        assert back.values == pytest.approx(direction.values, abs=1e-15)


def test_a_text_that_says_something_else_is_not_written() -> None:
    written = write_table([Reading("along", 1.0, Direction("row", (1.0, 0.0, 0.0), text="[0 0 1]"))])
    back = read_table(written).readings[0].direction
    assert back == parse_direction("[1 0 0]")


@pytest.fixture
def identity_pose() -> Pose:
    return Pose(np.eye(3))


index = st.integers(-9, 9)
coordinate = st.floats(-1e6, 1e6).map(lambda number: 0.0 if abs(number) < 1e-6 else number)
finite = st.floats(allow_nan=False, allow_infinity=False)
positive = st.floats(min_value=1e-300, max_value=1e300)
text_cell = st.one_of(
    st.none(),
    st.text(st.characters(exclude_categories=["Cs"], exclude_characters="\x00"), max_size=20).map(str.strip)
    .filter(bool),
    st.sampled_from(["=1+1", "\\", "a;b", "a,b", 'a"b', "a\r\nb", "a\rb", "# x", "\\\\=", "a\u2028b", "a\x85b"]),
)  # fmt: skip


@st.composite
def directions(draw: st.DrawFn) -> Direction:
    kind = draw(st.sampled_from(["row", "normal", "vector", "specimen"]))
    if kind in {"vector", "specimen"}:
        values = draw(st.tuples(coordinate, coordinate, coordinate).filter(any))
        return Direction(kind, values)
    numbers = draw(st.one_of(st.tuples(index, index, index), st.tuples(coordinate, coordinate, coordinate)).filter(any))
    first, second, third = numbers
    return Direction(kind, (float(first), float(second), float(third)))


@st.composite
def reading_lists(draw: st.DrawFn) -> list[Reading]:
    with_sigma = draw(st.booleans())
    warmest = draw(st.floats(10, 1000))
    readings = []
    for _ in range(draw(st.integers(1, 6))):
        kind = draw(st.sampled_from(READING_KINDS))
        readings.append(
            Reading(
                kind,
                draw(finite),
                draw(directions()) if kind in NEEDS_DIRECTION else None,
                draw(directions()) if kind in NEEDS_SECOND else None,
                draw(positive) if with_sigma else None,
                draw(st.none() | st.floats(0, 90)) if with_sigma else None,
                draw(text_cell),
                draw(text_cell) if with_sigma else None,
                temperature=draw(st.none() | st.floats(warmest - 5, warmest)),
                note=draw(text_cell),
            )
        )
    return readings


def without_text(reading: Reading) -> Reading:
    """The reading, its directions freed of how they were typed."""
    return replace(
        reading,
        direction=reading.direction and replace(reading.direction, text=None),
        second=reading.second and replace(reading.second, text=None),
    )


@given(reading_lists(), st.sampled_from([None, "W/(m·K)", "my own", "10⁻⁶/K"]))
@settings(deadline=None, max_examples=150)
def test_reading_undoes_writing(readings: list[Reading], unit: str | None) -> None:
    written = write_table(readings, unit)
    table = read_table(written)
    assert [without_text(reading) for reading in table.readings] == readings
    assert table.unit == unit
    # As bytes, and a second time, nothing changes any more, not even how directions are typed.
    assert read_table(write_table(table.readings, unit).encode("utf-8")).readings == table.readings
    assert write_table(table.readings, unit) == written
