"""A table of cells against a variable as text: every fault at once, each with its line and column."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, Final

from app.crystal.cell import PARAMETER_NAMES
from app.crystal.cell_locks import SYMBOLS, CellLock
from app.errors import InputError
from app.series.cell_series import CellState
from app.tensor.printing import parse_value

SIZE_LIMIT: Final = 4 * 1024 * 1024
ROW_LIMIT: Final = 10_000
LISTED_PROBLEMS: Final = 1000
VARIABLE_NAMES: Final = ("t", "temperature", "pressure", "wavelength", "composition")
SEPARATORS: Final = (";", "\t", ",")

_EXAMPLE: Final = "t,a,b,c,alpha,beta,gamma"
_SIGMA_NAMES: Final = {f"{name}_sigma": position for position, name in enumerate(PARAMETER_NAMES)}
_POSITIONS: Final = {
    **{name: position for position, name in enumerate(PARAMETER_NAMES)},
    **{symbol: position for position, symbol in enumerate(SYMBOLS)},
}


@dataclass(frozen=True)
class CellTable:
    """Cells from a table.

    Attributes:
        states: in the order of the rows.
        variable: the name that the table gives the variable, like "t" or "temperature".
        line_numbers: for each state the line of its row, from 1.
    """

    states: tuple[CellState, ...]
    variable: str
    line_numbers: tuple[int, ...]


@dataclass
class _Problems:
    listed: list[dict[str, Any]] = field(default_factory=list)
    count: int = 0

    def add(self, line: int, column: str | None, reason: str) -> None:
        self.count += 1
        if len(self.listed) < LISTED_PROBLEMS:
            self.listed.append({"line": line, "column": column, "reason": reason})

    def refuse_if_any(self) -> None:
        if not self.count:
            return
        first = self.listed[0]
        where = f"line {first['line']}" + (f", {first['column']}" if first["column"] else "")
        many = "one problem" if self.count == 1 else f"{self.count} problems, the first"
        raise InputError(
            f"The table has {many} in {where}: {first['reason']}",
            hint="Nothing was taken; mend the rows and read the table again.",
            detail={"problems": self.listed, "count": self.count},
        )


def read_cell_table(text: str, locks: Sequence[CellLock] | None = None) -> CellTable:
    """Read cells against a variable; all of them, or none.

    The header names the columns, in any order and with any capitals: the variable (t, temperature, pressure, wavelength
    or composition), a, b, c, alpha, beta, gamma (or α, β, γ), and where standard deviations stand apart a_sigma and so
    on. A parameter may carry its own, as 5.1686(2). Semicolons, tabs or commas part the cells; with semicolons or tabs
    the decimal sign is the comma if any number has one. Blank lines, and lines that begin with #, are passed over.

    Args:
        text: the table.
        locks: of the crystal, from ``list_cell_locks``: columns of parameters that its symmetry holds may then be
            missing, like b, alpha, beta, gamma of a tetragonal crystal.

    Returns:
        A CellTable; a state has standard deviations where any of its row's parameters has one, 0 for the others.

    Raises:
        InputError: the text is no table; or rows are bad, with ``detail`` {"problems": [{line, column, reason}],
            "count"}, where the first 1000 are listed.
    """
    if len(text) > SIZE_LIMIT:
        raise InputError(f"The table is longer than {SIZE_LIMIT} characters.", hint="Split it.")
    if "\x00" in text:
        raise InputError("The table holds a character NUL, so it is no text.", hint="Save it as UTF-8.")
    problems = _Problems()
    lines = _list_lines(text.removeprefix("\ufeff"))
    if not lines:
        raise InputError("The table is empty.", hint=f"Its first line is for example {_EXAMPLE}.")
    separator = next((mark for mark in SEPARATORS if mark in lines[0][1]), ",")
    rows = [(number, _split(line, separator, number, problems)) for number, line in lines]
    problems.refuse_if_any()
    header_line, header = rows[0][0], [name.lower() for name in rows[0][1]]
    while header and not header[-1]:
        header.pop()
    variable = _check_header(header, header_line, locks, problems)
    problems.refuse_if_any()
    if len(rows) == 1:
        raise InputError("The table has a header and no cells.", hint="Add a row for each value of the variable.")
    if len(rows) - 1 > ROW_LIMIT:
        raise InputError(f"The table has more than {ROW_LIMIT} rows.", hint="Split it.")
    decimal_comma = separator != "," and any("," in cell for _, cells in rows[1:] for cell in cells)
    states = [_read_row(header, line, cells, locks, decimal_comma, problems) for line, cells in rows[1:]]
    problems.refuse_if_any()
    return CellTable(
        tuple(state for state in states if state is not None), variable, tuple(line for line, _ in rows[1:])
    )


def _list_lines(text: str) -> list[tuple[int, str]]:
    every = enumerate(re.split(r"\r\n|\n|\r", text), start=1)
    return [(number, line) for number, line in every if line.strip(" \t,;") and not line.lstrip().startswith("#")]


def _split(line: str, separator: str, number: int, problems: _Problems) -> list[str]:
    try:
        cells = next(csv.reader(io.StringIO(line), delimiter=separator, strict=True, skipinitialspace=True))
    except (csv.Error, StopIteration):
        problems.add(number, None, "a quote is not closed, or stands within a cell.")
        return []
    return [cell.strip() for cell in cells]


def _check_header(header: list[str], line: int, locks: Sequence[CellLock] | None, problems: _Problems) -> str:
    variables = [name for name in header if name in VARIABLE_NAMES]
    if len(variables) != 1:
        found = "two columns name a variable" if variables else "no column names the variable"
        problems.add(line, None, f"{found}; one of {', '.join(VARIABLE_NAMES)} is needed.")
    seen: set[str | int] = set()
    for name in header:
        key = _POSITIONS.get(name, name)
        if name not in VARIABLE_NAMES and name not in _POSITIONS and name not in _SIGMA_NAMES:
            problems.add(line, name[:60], f"there is no column “{name[:60]}”; the header is for example {_EXAMPLE}.")
        elif key in seen:
            problems.add(line, name, f"the column {name} is there twice.")
        seen.add(key)
    for position, name in enumerate(PARAMETER_NAMES):
        held = locks is not None and len(locks) == 6 and locks[position].state != "free"
        if position not in seen and not held:
            problems.add(line, name, f"the column {name} is missing.")
        if position not in seen and f"{name}_sigma" in seen:
            problems.add(line, f"{name}_sigma", f"there is no column {name} that it could belong to.")
    return variables[0] if variables else ""


def _read_row(
    header: list[str],
    line: int,
    cells: list[str],
    locks: Sequence[CellLock] | None,
    decimal_comma: bool,
    problems: _Problems,
) -> CellState | None:
    before = problems.count
    if len(cells) < len(header) or any(cells[len(header) :]):
        problems.add(line, None, f"the row has {len(cells)} cells where the header has {len(header)} columns.")
        return None
    t: float | None = None
    values: dict[int, float] = {}
    sigmas: dict[int, float] = {}
    for name, cell in zip(header, cells, strict=False):
        position = _POSITIONS.get(name, _SIGMA_NAMES.get(name))
        if not cell:
            if name not in _SIGMA_NAMES:
                problems.add(line, name, "the cell is empty.")
            continue
        try:
            value, sigma = parse_value(cell, decimal_comma=decimal_comma)
        except InputError as error:
            problems.add(line, name, f"{error.message} {error.hint}" if error.hint else error.message)
            continue
        if position is None or name in _SIGMA_NAMES:
            if sigma is not None:
                problems.add(line, name, f"“{cell}” has an uncertainty, where a number alone belongs.")
            elif position is None:
                t = value
            elif value < 0.0:
                problems.add(line, name, "a standard deviation is not negative.")
            elif position in sigmas:
                problems.add(line, name, "the uncertainty is given twice, with the value and in its own column.")
            else:
                sigmas[position] = value
            continue
        values[position] = value
        if sigma is not None:
            if position in sigmas:
                problems.add(line, name, "the uncertainty is given twice, with the value and in its own column.")
            sigmas[position] = sigma
    if problems.count > before or t is None:
        return None
    return CellState(
        t, _complete(values, locks), tuple(sigmas.get(position, 0.0) for position in range(6)) if sigmas else None
    )


def _complete(values: dict[int, float], locks: Sequence[CellLock] | None) -> tuple[float, ...]:
    """Six parameters, those without a column as symmetry holds them."""
    completed = dict(values)
    for position, lock in enumerate(locks or ()):
        if position in completed:
            continue
        completed[position] = completed[SYMBOLS.index(lock.equals or "")] if lock.state == "tied" else lock.value
    return tuple(completed[position] for position in range(6))
