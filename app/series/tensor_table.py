"""A table of a tensor's free cells against a variable as text."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.series.table_layout import VARIABLE_NAMES, Layout, TableProblems, check_length, find_variable, lay_out_table
from app.series.tensor_series import TensorState
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.printing import parse_value
from app.tensor.tensor import build_tensor


@dataclass(frozen=True)
class TensorTable:
    """Tensors from a table, in the order of its rows, and the variable's name."""

    states: tuple[TensorState, ...]
    variable: str


def read_tensor_table(text: str, crystal: Crystal, kind: Kind) -> TensorTable:
    """Read free cells against a variable; all of them, or none.

    The header names the variable (t, temperature, pressure, wavelength or composition) and every free cell by its
    label, as 11 or 13; a value may carry its standard deviation, 13.20(8), and then every value does. Different cells
    are taken as independent. Separators and decimal signs are as ``lay_out_table`` has them.

    Raises:
        InputError: the text is no table; a cell of symmetry's own; bad rows, with ``detail`` {"problems", "count"}.
    """
    labels = build_form(crystal, kind).labels
    problems = TableProblems()
    layout = lay_out_table(text, ",".join(["temperature", *labels]), problems)
    variable = find_variable(layout, problems)
    _check_columns(layout, labels, problems)
    problems.refuse_if_any()
    layout.require_rows()
    found = [_read_row(layout, line, cells, problems) for line, cells in layout.rows]
    problems.refuse_if_any()
    carrying = [all(sigma is not None for _, sigma in cells.values()) for _, cells in found]
    states = []
    for (line, _), (t, cells), carries in zip(layout.rows, found, carrying, strict=True):
        if not carries and any(sigma is not None for _, sigma in cells.values()):
            problems.add(line, None, "some values carry an uncertainty and some do not.")
        elif carries != carrying[0]:
            problems.add(line, None, "this row carries uncertainties where the first does not, or the other way round.")
        else:
            states.append(_build_state(crystal, kind, labels, t, cells))
    problems.refuse_if_any()
    return TensorTable(tuple(states), variable)


def _check_columns(layout: Layout, labels: Sequence[str], problems: TableProblems) -> None:
    for place, name in enumerate(layout.header):
        if name not in VARIABLE_NAMES and name not in labels:
            reason = f"“{name[:60]}” is no free cell; they are {', '.join(labels)}."
            problems.add(layout.header_line, name[:60], reason)
        if name in layout.header[:place]:
            problems.add(layout.header_line, name, f"the column {name} is there twice.")
    for label in labels:
        if label not in layout.header:
            problems.add(layout.header_line, label, f"the column {label} is missing.")


def _read_row(
    layout: Layout, line: int, cells: list[str], problems: TableProblems
) -> tuple[float, dict[str, tuple[float, float | None]]]:
    t = 0.0
    values: dict[str, tuple[float, float | None]] = {}
    if not check_length(layout, line, cells, problems):
        return t, values
    for name, cell in zip(layout.header, cells, strict=False):
        if not cell:
            problems.add(line, name, "the cell is empty.")
            continue
        try:
            value, sigma = parse_value(cell, decimal_comma=layout.decimal_comma)
        except InputError as error:
            problems.add(line, name, f"{error.message} {error.hint}" if error.hint else error.message)
            continue
        if name not in VARIABLE_NAMES:
            values[name] = (value, sigma)
        elif sigma is not None:
            problems.add(line, name, f"“{cell}” has an uncertainty, where a number alone belongs.")
        else:
            t = value
    return t, values


def _build_state(
    crystal: Crystal, kind: Kind, labels: Sequence[str], t: float, cells: dict[str, tuple[float, float | None]]
) -> TensorState:
    covariance = None
    sigmas = [cells[label][1] for label in labels]
    if all(sigma is not None for sigma in sigmas):
        covariance = [
            [(sigma or 0.0) ** 2 if row == column else 0.0 for column in range(len(labels))]
            for row, sigma in enumerate(sigmas)
        ]
    free = {label: cells[label][0] for label in labels}
    return TensorState(t, build_tensor(crystal, kind, free=free, covariance=covariance))
