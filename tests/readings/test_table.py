"""Tables of readings. All data invented; expectations follow from the stated format and RFC 4180, or by hand."""

from __future__ import annotations

import csv
import io
import time
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.direction import parse_direction
from app.errors import InputError
from app.readings.reading import Reading
from app.readings.table import read_table
from app.readings.table_text import COLUMNS, LINE_LIMIT, ROW_LIMIT

HEADER = ",".join(COLUMNS)
FULL = f"""{HEADER}
along,[1 0 0],,12.48,0.08,W/(m·K),0.5,B4,furnace 2,293,"fine, clean"
across,(0 0 1),[0 1 0],0.2,0.05,W/(m·K),,B4,,20 °C,
difference,xyz 0 0 1,specimen 1 0 -0.5,3.1,0.1,W/(m·K),,,,,
mean,,,15(2),,W/(m·K),,,,,
rod,"[1,0,-1]",,12.42,0.08,W/(m·K),,,,,
sheet,,(0 0 1),12,0.3,W/(m·K),,,,,
"""


def problems_of(text: str | bytes, **options: Any) -> list[tuple[int, str | None, str]]:
    with pytest.raises(InputError) as caught:
        read_table(text, **options)
    assert caught.value.detail is not None, str(caught.value)
    listed = caught.value.detail["problems"]
    assert f"line {listed[0]['line']}" in caught.value.message
    return [(problem["line"], problem["column"], problem["reason"]) for problem in listed]


def test_full_table() -> None:
    table = read_table(FULL)
    assert table.unit == "W/(m·K)"
    assert table.line_numbers == (2, 3, 4, 5, 6, 7)
    first, second, third, fourth, fifth, sixth = table.readings
    assert first == Reading(
        "along", 12.48, parse_direction("[1 0 0]"), None, 0.08, 0.5, "B4", "furnace 2", None, 293.0, "fine, clean"
    )
    assert second.direction is not None
    assert (second.direction.kind, second.direction.values) == ("normal", (0, 0, 1))
    assert second.temperature == 293.15
    assert third.direction is not None
    assert (third.direction.kind, third.direction.values) == ("vector", (0, 0, 1))
    assert third.second is not None
    assert (third.second.kind, third.second.values) == ("specimen", (1, 0, -0.5))
    assert (fourth.value, fourth.sigma) == (15, 2)
    assert fifth.direction is not None
    assert fifth.direction.values == (1, 0, -1)
    assert sixth.direction is None
    assert any("4 of 6 rows note no temperature" in note for note in table.notes)


@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("mark", ["", "\ufeff"])
def test_line_endings_and_mark(ending: str, mark: str) -> None:
    text = mark + FULL.replace("\n", ending)
    assert read_table(text) == read_table(FULL)
    assert read_table(text.encode("utf-8")) == read_table(FULL)


@pytest.mark.parametrize("separator", [";", "\t"])
def test_separators(separator: str) -> None:
    text = io.StringIO()
    csv.writer(text, delimiter=separator).writerows(csv.reader(io.StringIO(FULL)))
    assert read_table(text.getvalue()).readings == read_table(FULL).readings


def test_columns_in_any_order_and_capitals() -> None:
    table = read_table('VALUE, Kind ,"direction"\n1.5,Along,[1 0 0]\n')
    assert table.readings == (Reading("along", 1.5, parse_direction("[1 0 0]")),)
    assert table.unit is None


def test_decimal_comma() -> None:
    table = read_table("kind;value;sigma;direction\nalong;12,5;0,2;[1 0 0]\nalong;13;1e-1;[0.5 0 1]\n")
    assert [(reading.value, reading.sigma) for reading in table.readings] == [(12.5, 0.2), (13, 0.1)]
    assert table.notes == ("Numbers have decimal commas.",)
    assert read_table("kind\tvalue\nmean\t12,3(4)\n").readings[0] == Reading("mean", 12.3, sigma=0.4)
    # 1.234 beside 12,5 may be a thousand and more: refused, not guessed.
    found = problems_of("kind;value\nmean;12,5\nmean;1.234\n")
    assert [(line, column) for line, column, _ in found] == [(3, "value")]
    # [0,5 -5 1] could be three indices or four.
    found = problems_of("kind;value;direction\nalong;12,5;[0,5 -5 1]\n")
    assert [(line, column) for line, column, _ in found] == [(2, "direction")]
    # Without any decimal comma the points stand, commas in a direction or not.
    assert read_table("kind;value;direction\nalong;12.5;[1,0,-1]\n").readings[0].value == 12.5


def test_comments_and_blank_rows() -> None:
    text = """# the whole table is invented
kind,direction,value,sigma,note   # header

  # between
along,[1 0 0] ,1.5,0.1,bar #4 # kept
,,,,
along,[0 1 0],2.5,0.1,"first
# still the note"
mean,,3.5,0.2,
"""
    table = read_table(text)
    assert [reading.note for reading in table.readings] == ["bar #4 # kept", "first\n# still the note", None]
    assert table.line_numbers == (5, 7, 9)


def test_trailing_comments() -> None:
    text = 'kind,direction,value,sigma\nalong,"[1,0,-1]",1.5,0.1 # a "quote, "open\nmean,,2,0.1# b\n'
    assert [reading.value for reading in read_table(text).readings] == [1.5, 2.0]


def test_quotes() -> None:
    table = read_table('kind,value,bar,note\nmean,1,"a ""b""","x, y\r\nz"\n')
    assert (table.readings[0].bar, table.readings[0].note) == ('a "b"', "x, y\r\nz")


def test_all_problems_at_once() -> None:
    text = f"""{HEADER}
alng,[1 0 0],,12,0.1,,,,,,
along,,,12,0.1,,,,,,
along,[1 0 0],[0 1 0],12,0.1,,,,,,
mean,[1 0 0],,12,0.1,,,,,,
sheet,,,12,0.1,,,,,,
mean,,,twelve,0.1,,,,,,
mean,,,,0.1,,,,,,
mean,,,nan,0.1,,,,,,
mean,,,1e999,0.1,,,,,,
mean,,,12,0,,,,,,
mean,,,12,-1,,,,,,
mean,,,12(3),0.1,,,,,,
mean,,,12(0),,,,,,,
mean,,,12,0.1,,-1,,,,
along,{{1 0 0}},,12,0.1,,,,,,
along,[0 0 0],,12,0.1,,,,,,
along,xyz 1 2,,12,0.1,,,,,,
mean,,,12,0.1,,,,,-3,
mean,,,12,0.1,,,,,warm,
mean,,,12,,,0.5,,f,,
mean,,,12,0.1(2),,,,,,
,,,12,0.1,,,,,,
mean,,,12,0.1,,,,,,
"""
    found = problems_of(text)
    assert [(line, column) for line, column, _ in found] == [
        (2, "kind"),
        (3, "direction"),
        (4, "second"),
        (5, "direction"),
        (6, "second"),
        (7, "value"),
        (8, "value"),
        (9, "value"),
        (10, "value"),
        (11, "sigma"),
        (12, "sigma"),
        (13, "sigma"),
        (14, "value"),
        (15, "direction_sigma"),
        (16, "direction"),
        (17, "direction"),
        (18, "direction"),
        (19, "temperature"),
        (20, "temperature"),
        (21, "direction_sigma"),
        (21, "batch"),
        (22, "sigma"),
        (23, "kind"),
    ]
    reasons = {line: reason for line, _, reason in found}
    assert "Did you mean along?" in reasons[2]
    assert "twice" in reasons[13]
    assert "Kelvin" in reasons[19]


def test_sigma_all_or_none() -> None:
    found = problems_of("kind,value,sigma\nmean,1,0.1\nmean,2,\nmean,3(1),\nmean,4,\n")
    assert [(line, column) for line, column, _ in found] == [(3, "sigma"), (5, "sigma")]


@pytest.mark.parametrize(
    ("header", "columns"),
    [
        ("kind,valu", ["valu", "value"]),
        ("kind,value,value", ["value"]),
        ("kind,value,colour", ["colour"]),
        ("value,note", ["kind"]),
        ("kind,,value", [""]),
    ],
)
def test_header_problems(header: str, columns: list[str]) -> None:
    assert [(line, column) for line, column, _ in problems_of(f"# c\n{header}\nmean,1\n")] == [
        (2, column) for column in columns
    ]


def test_header_suggests() -> None:
    assert "Did you mean direction_sigma?" in problems_of("kind,value,directionsigma\n")[0][2]


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("", "empty"),
        ("# only a comment\n", "empty"),
        ("kind\nmean\n", "one column only"),
        ("kind,value;sigma\n", "comma and semicolon"),
        ("kind,value\n", "no readings"),
        (b"kind,value\nmean,\xff1\n", "byte 16 (line 2) is 0xff"),
        ("kind,value\nmean,1\n".encode("utf-16"), "UTF-16"),
        ("kind,value\nmean,1\n".encode("utf-16-be"), "UTF-16"),
        ("kind,value\nmean,1\n".encode("utf-32"), "UTF-32"),
        ("kind,value\nmean,1\x00\n", "NUL"),
        ("kind,note,value\nmean,\ud800,1\n", "surrogate"),
        ("kind,value\nmean," + "1" * LINE_LIMIT + "\n", "Line 2"),
        ("kind,value\n" + "mean,1\n" * (ROW_LIMIT + 1), str(ROW_LIMIT)),
        (b" " * (64 * 2**20 + 1), "64 MiB"),
    ],
    ids=lambda given: repr(given)[:40],
)
def test_no_table(text: str | bytes, says: str) -> None:
    with pytest.raises(InputError) as caught:
        read_table(text)
    assert says in caught.value.message


def test_endless_line_is_bounded_by_its_length() -> None:
    with pytest.raises(InputError, match="Line 1 "):
        read_table("x" * (8 * 2**20))


def test_unquoted_direction_is_explained() -> None:
    for row in ("along,[1,0,-1],12,0.1", "along,[1,0,-1],12", "along,[1,0,-1]"):
        ((line, column, reason),) = problems_of(f"kind,direction,value,sigma\n{row}\n")
        assert (line, column) == (2, "direction")
        assert '"[1,0,-1]"' in reason
        assert "[1 0 -1]" in reason


def test_width_of_rows() -> None:
    found = problems_of("kind,value,sigma\nmean,1\nmean,1,0.1,surplus\nmean,1,0.1,,\n")
    assert [(line, column) for line, column, _ in found] == [(2, None), (3, None)]


def test_broken_quotes_do_not_hide_earlier_problems() -> None:
    found = problems_of('kind,value,note\nmean,x,\nmean,1,"open\nmean,2,\n')
    assert [(line, column) for line, column, _ in found] == [(2, "value"), (3, None)]
    found = problems_of('kind,value,note\nmean,1,"a"b\n')
    assert "closing quote" in found[0][2]


def test_units_are_converted() -> None:
    # 1 mW/(cm K) is 0.1 W/(m K), by the prefixes.
    text = "kind,value,sigma,unit\nmean,1.23,0.1,W/(m·K)\nmean,12.3,2,mW/(cm K)\nmean,12.3(4),,mW/(cm K)\n"
    table = read_table(text)
    assert table.unit == "W/(m·K)"
    assert [(reading.value, reading.sigma) for reading in table.readings] == [(1.23, 0.1), (1.23, 0.2), (1.23, 0.04)]
    assert table.notes == ("2 of 3 rows were converted from mW/(cm K) to W/(m·K).",)
    asked = read_table(text, unit="mW/(m K)")
    assert asked.unit == "mW/(m K)"
    assert [reading.value for reading in asked.readings] == pytest.approx([1230, 1230, 1230], rel=1e-15)


def test_units_missing_or_unlike() -> None:
    found = problems_of("kind,value,unit\nmean,1,W/(m K)\nmean,2,\nmean,3,S/m\nmean,4,W/m K\nmean,5,wat\nmean,6,K\n")
    assert [(line, column) for line, column, _ in found] == [
        (3, "unit"), (4, "unit"), (5, "unit"), (6, "unit"), (7, "unit")
    ]  # fmt: skip
    assert "parentheses" in found[2][2]
    table = read_table("kind,value\nmean,1\n", unit="S/m")
    assert table.unit == "S/m"
    assert "taken to be in S/m" in table.notes[0]
    with pytest.raises(InputError) as caught:
        read_table("kind,value,unit\nmean,1,S/m\n", unit="nonsense")
    assert caught.value.field == "unit"


def test_own_unit_is_taken_as_it_is() -> None:
    assert read_table("kind,value,unit\nmean,1,counts\nmean,2,counts\n").unit == "counts"


def test_conversion_out_of_range() -> None:
    found = problems_of("kind,value,unit\nmean,1,nm\nmean,1e305,m\n")
    assert [(line, column) for line, column, _ in found] == [(3, "value")]
    found = problems_of("kind,value,sigma,unit\nmean,1,1,Gm\nmean,1,1e-320,nm\n")
    assert [(line, column) for line, column, _ in found] == [(3, "sigma")]


@pytest.mark.parametrize("cell", ["293.15", "293.15 K", "293.15K", "20 C", "20 °C", "20°C", "20 ℃"])
def test_temperatures(cell: str) -> None:
    assert read_table(f"kind,value,temperature\nmean,1,{cell}\n").readings[0].temperature == 293.15


def test_temperatures_are_not_merged_in_silence() -> None:
    text = "kind,value,temperature\nmean,1,20 °C\nmean,1,25 °C\n"
    assert read_table(text).notes == ("Temperatures from 293.15 K to 298.15 K are taken for one.",)
    wide = "kind,value,temperature\nmean,1,20 °C\nmean,1,280\nmean,1,\n"
    with pytest.raises(InputError, match=r"13\.15 K apart") as caught:
        read_table(wide)
    assert caught.value.hint == "Split the table by temperature, or state a span of 14 K or more."
    assert caught.value.detail["problems"][0]["line"] == 3
    assert len(read_table(wide, temperature_span=14).readings) == 3
    with pytest.raises(InputError):
        read_table(text, temperature_span=0)
    for span in (-1.0, float("nan"), float("inf")):
        with pytest.raises(InputError) as caught:
            read_table(text, temperature_span=span)
        assert caught.value.field == "temperature_span"


def test_many_problems_are_counted_and_bounded() -> None:
    with pytest.raises(InputError, match="3000 problems") as caught:
        read_table("kind,value\n" + "maen,1\n" * 3000)
    assert len(caught.value.detail["problems"]) == 1000
    assert caught.value.detail["count"] == 3000


def test_long_cells_are_cheap() -> None:
    started = time.perf_counter()
    blank = " " * 6000
    found = problems_of(f'kind,value,temperature,direction\nalong,"1{blank}1","1{blank}1","[1{blank}1"\n')
    assert {column for _, column, _ in found} == {"value", "temperature", "direction"}
    assert time.perf_counter() - started < 1


def test_a_large_table_is_read_in_seconds() -> None:
    rows = "".join(
        f"along,[{i % 7} {i % 5} 1],,{12 + i * 1e-4:.4f},0.1,{'W/(m·K)' if i % 2 else 'mW/(cm K)'},0.5,B{i},f,293,\n"
        for i in range(100_000)
    )
    started = time.perf_counter()
    table = read_table(f"{HEADER}\n{rows}")
    assert len(table.readings) == 100_000
    # Some 4 s on two slow cores; a bound against something that grows with the square of the rows.
    assert time.perf_counter() - started < 30


@given(
    st.text(st.sampled_from('kind,value;sigma\t\n\r"#[]() 0123456789.-=\\along mean xyz'), max_size=120), st.booleans()
)
@settings(deadline=None, max_examples=200)
def test_any_text_is_read_or_refused(text: str, with_header: bool) -> None:
    try:
        table = read_table(f"kind,value,direction,note\n{text}" if with_header else text)
    except InputError:
        return
    assert table.readings
    assert len(table.readings) == len(table.line_numbers)


@given(st.binary(max_size=200))
@settings(deadline=None, max_examples=100)
def test_any_bytes_are_read_or_refused(raw: bytes) -> None:
    for given_bytes in (raw, b"kind,value\n" + raw):
        try:
            read_table(given_bytes)
        except InputError:
            continue
