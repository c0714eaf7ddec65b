"""A table of cells against a variable as text: every fault at once, each with its line and column."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

from app.crystal.cell import PARAMETER_NAMES
from app.crystal.cell_locks import SYMBOLS, CellLock
from app.errors import InputError
from app.series.cell_series import CellState
from app.series.table_layout import VARIABLE_NAMES, Layout, TableProblems, check_length, find_variable, lay_out_table
from app.tensor.printing import parse_value

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
    problems = TableProblems()
    layout = lay_out_table(text, _EXAMPLE, problems)
    variable = _check_header(layout, locks, problems)
    problems.refuse_if_any()
    layout.require_rows()
    states = [_read_row(layout, line, cells, locks, problems) for line, cells in layout.rows]
    problems.refuse_if_any()
    return CellTable(
        tuple(state for state in states if state is not None), variable, tuple(line for line, _ in layout.rows)
    )


def _check_header(layout: Layout, locks: Sequence[CellLock] | None, problems: TableProblems) -> str:
    header, line = layout.header, layout.header_line
    variable = find_variable(layout, problems)
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
    return variable


def _read_row(
    layout: Layout, line: int, cells: list[str], locks: Sequence[CellLock] | None, problems: TableProblems
) -> CellState | None:
    before = problems.count
    if not check_length(layout, line, cells, problems):
        return None
    t: float | None = None
    values: dict[int, float] = {}
    sigmas: dict[int, float] = {}
    for name, cell in zip(layout.header, cells, strict=False):
        position = _POSITIONS.get(name, _SIGMA_NAMES.get(name))
        if not cell:
            if name not in _SIGMA_NAMES:
                problems.add(line, name, "the cell is empty.")
            continue
        try:
            value, sigma = parse_value(cell, decimal_comma=layout.decimal_comma)
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
