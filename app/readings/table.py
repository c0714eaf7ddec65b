"""A table of readings as text: read with every fault reported at once, written so that it reads back the same."""

from __future__ import annotations

import csv
import difflib
import io
import math
from collections import Counter
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np

from app.catalogue.units import convert_unit, find_factor, print_unit
from app.errors import InputError, located
from app.readings.reading import Reading
from app.readings.table_cells import write_direction_cell, write_number_cell, write_text_cell
from app.readings.table_rows import Problems, Row, RowReader
from app.readings.table_text import COLUMNS, decode_table, split_table

DEFAULT_TEMPERATURE_SPAN: Final = 5.0

_REQUIRED: Final = ("kind", "value")
_NUMBER_COLUMNS: Final = ("value", "sigma", "direction_sigma", "temperature")


@dataclass(frozen=True)
class ReadingTable:
    """Readings from a table.

    Attributes:
        readings: in the order of the rows; values and sigmas in ``unit``, temperatures in kelvin.
        unit: the asked unit, else the first row's as it was written; None where the table names none.
        line_numbers: for each reading the line of the table on which its row begins, from 1.
        notes: sentences on what was converted, assumed or taken together.
    """

    readings: tuple[Reading, ...]
    unit: str | None
    line_numbers: tuple[int, ...]
    notes: tuple[str, ...] = ()


def read_table(
    text: str | bytes, *, unit: str | None = None, temperature_span: float = DEFAULT_TEMPERATURE_SPAN
) -> ReadingTable:
    """Read a table of readings; all of it, or nothing.

    The header names the columns, in any order and with any capitals: kind, direction, second, value, sigma, unit,
    direction_sigma, bar, batch, temperature, note; kind and value are needed. Commas, semicolons or tabs part the
    cells, and cells that hold the separator stand in quotes (RFC 4180). In a table with semicolons or tabs the decimal
    sign of all numbers is the comma if any number has one. Lines that begin with # are comments, and so is what
    follows a # outside quotes and outside bar, batch and note. Directions: ``[1 0 -1]`` (row), ``(1 0 -1)`` (plane's
    normal), ``xyz 0.1 0.2 0.3`` (vector in the crystal frame), ``specimen 0 0 1``; they always have decimal points. A
    value may carry its standard deviation, as 12.3(4). Temperatures are kelvin, or degrees Celsius as ``20 °C``.

    Args:
        text: the table; bytes are UTF-8, with or without a byte-order mark.
        unit: the unit wanted; rows without any unit are taken to be in it. None: the first row's unit. Where all rows
            spell their unit alike, it is not looked up, so that it may be one of the user's own.
        temperature_span: kelvin; the largest difference of temperatures that is taken for one temperature.

    Returns:
        A ReadingTable.

    Raises:
        InputError: the text is no table; or rows are bad, with ``detail`` {"problems": [{line, column, reason}],
            "count"}, where the first 1000 of them are listed.
    """
    if not (math.isfinite(temperature_span) and temperature_span >= 0):
        raise InputError("The span of temperatures is a finite number, zero or more.", field="temperature_span")
    rows = split_table(decode_table(text))
    problems = Problems()
    _check_header(rows.header, rows.header_line, problems)
    problems.refuse_if_any()
    raw: list[tuple[int, list[str]]] = []
    try:
        raw.extend(rows.rows)
    except InputError as error:
        if error.detail is None:
            raise
        for problem in error.detail["problems"]:
            problems.add(problem["line"], problem["column"], problem["reason"])
    if not raw:
        problems.refuse_if_any()
        raise InputError("The table has a header and no readings.", hint="Add a row for each measured number.")
    decimal_comma = rows.separator != "," and _has_decimal_commas(rows.header, raw)
    reader = RowReader(rows.header, rows.separator, decimal_comma, problems)
    taken = [row for line, cells in raw if (row := reader.read(line, cells)) is not None]
    notes = ["Numbers have decimal commas."] if decimal_comma else []
    _check_sigmas(taken, problems)
    table_unit = _convert_units(taken, unit, problems, notes)
    _check_temperatures(taken, temperature_span, problems, notes)
    problems.refuse_if_any()
    return ReadingTable(tuple(row.reading for row in taken), table_unit, tuple(row.line for row in taken), tuple(notes))


def _check_header(header: Sequence[str], line: int, problems: Problems) -> None:
    for name, times in Counter(header).items():
        if name not in COLUMNS:
            near = difflib.get_close_matches(name, COLUMNS, n=1)
            hint = f"Did you mean {near[0]}?" if near else f"Known columns: {', '.join(COLUMNS)}."
            problems.add(line, name[:60], f"there is no column “{name[:60]}”. {hint}")
        elif times > 1:
            problems.add(line, name, f"the column {name} is there {times} times.")
    for name in _REQUIRED:
        if name not in header:
            problems.add(line, name, f"the column {name} is missing.")


def _has_decimal_commas(header: Sequence[str], raw: Iterable[tuple[int, list[str]]]) -> bool:
    places = [place for place, name in enumerate(header) if name in _NUMBER_COLUMNS]
    return any("," in cells[place] for _, cells in raw for place in places if place < len(cells))


def _check_sigmas(rows: Sequence[Row], problems: Problems) -> None:
    without = [row for row in rows if row.reading.sigma is None]
    carrying = len(rows) - len(without)
    if not carrying:
        return
    for row in without:
        problems.add(row.line, "sigma", f"no sigma here, where {carrying} of {len(rows)} rows have one: all or none.")


def _convert_units(rows: list[Row], asked: str | None, problems: Problems, notes: list[str]) -> str | None:
    """Bring all rows to one unit, in place; the unit."""
    wanted = asked.strip() if asked is not None else None
    named = [row for row in rows if row.unit]
    if not named:
        if wanted is not None and rows:
            notes.append(f"The table names no unit; its values are taken to be in {wanted}.")
        return wanted
    for row in rows:
        if not row.unit:
            problems.add(row.line, "unit", f"no unit here, where {len(named)} of {len(rows)} rows have one.")
    target = named[0].unit if wanted is None else wanted
    sources = Counter(row.unit for row in named if row.unit != target)
    if sources and wanted is not None:
        print_unit(wanted)
    for source, count in sources.items():
        places = [place for place, row in enumerate(rows) if row.unit == source]
        try:
            find_factor(source, target)
        except InputError as error:
            reason = f"{error.message} {error.hint}" if error.hint else error.message
            for place in places:
                problems.add(rows[place].line, "unit", reason)
            continue
        _convert_rows(rows, places, source, target, problems)
        notes.append(f"{count} of {len(rows)} rows were converted from {source} to {target}.")
    return target


def _convert_rows(rows: list[Row], places: Sequence[int], source: str, target: str, problems: Problems) -> None:
    numbers = np.array([[rows[place].reading.value, rows[place].reading.sigma] for place in places], dtype=np.float64)
    try:
        # NaN stands where there is no sigma; a 1 keeps it out of the conversion.
        converted = np.asarray(convert_unit(np.where(np.isnan(numbers), 1.0, numbers), source, target))
    except InputError:
        problems.add(rows[places[0]].line, "value", f"a value in {source} is too large a number in {target}.")
        return
    for place, (value, sigma) in zip(places, converted.tolist(), strict=True):
        row = rows[place]
        if row.reading.sigma is not None and not sigma > 0:
            problems.add(row.line, "sigma", f"the sigma in {source} is too small a number in {target}.")
        own = None if row.reading.sigma is None else sigma
        rows[place] = Row(row.line, replace(row.reading, value=value, sigma=own), target)


def _check_temperatures(rows: Sequence[Row], span: float, problems: Problems, notes: list[str]) -> None:
    noted = [(row.reading.temperature, row.line) for row in rows if row.reading.temperature is not None]
    if not noted:
        return
    (lowest, low_line), (highest, high_line) = min(noted), max(noted)
    spread = highest - lowest
    # Degrees Celsius are exact only to rounding: 25 °C less 20 °C shall be 5 K.
    if spread > span + 1e-9:
        problems.hint = f"Split the table by temperature, or state a span of {math.ceil(spread)} K or more."
        problems.add(
            max(low_line, high_line),
            "temperature",
            f"temperatures lie {spread:.6g} K apart, from {lowest:.6g} K (line {low_line}) to {highest:.6g} K "
            f"(line {high_line}), where {span:g} K are taken for one.",
        )
    elif spread > 0:
        notes.append(f"Temperatures from {lowest:.6g} K to {highest:.6g} K are taken for one.")
    if len(noted) < len(rows):
        notes.append(f"{len(rows) - len(noted)} of {len(rows)} rows note no temperature and are taken with the others.")


def write_table(readings: Iterable[Reading], unit: str | None = None) -> str:
    """The table of readings that ``read_table`` takes back as it was: commas, decimal points, CR LF (RFC 4180).

    A direction is written as it was typed, else in its plainest form; texts that a spreadsheet would take for a
    formula are guarded by a backslash, which the reader takes off.

    Raises:
        InputError: a reading has no value (a plan) or a pose of its own, for which a table has no place; a text or a
            number cannot be kept.
    """
    out = io.StringIO(newline="")
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow(COLUMNS)
    for number, reading in enumerate(readings):
        with located(f"readings[{number}]"):
            writer.writerow(_write_cells(reading, unit or ""))
    return out.getvalue()


def _write_cells(reading: Reading, unit: str) -> tuple[str, ...]:
    if reading.value is None:
        raise InputError("A table holds measured values; this reading has none yet.", field="value")
    if reading.pose is not None:
        raise InputError(
            "A table has no place for a reading's own pose.",
            field="pose",
            hint="Write its directions in the crystal frame.",
        )
    return (
        reading.kind,
        write_direction_cell(reading.direction),
        write_direction_cell(reading.second),
        write_number_cell(reading.value, "value"),
        write_number_cell(reading.sigma, "sigma"),
        unit,
        write_number_cell(reading.direction_sigma, "direction_sigma"),
        write_text_cell(reading.bar, "bar"),
        write_text_cell(reading.batch, "batch"),
        write_number_cell(reading.temperature, "temperature"),
        write_text_cell(reading.note, "note"),
    )
