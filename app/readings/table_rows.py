"""One row of a table after another becomes a reading; what is wrong is gathered, not raised."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from typing import Any, Final, TypeVar

from app.crystal.direction import Direction
from app.errors import InputError
from app.readings.reading import NEEDS_DIRECTION, NEEDS_SECOND, Reading
from app.readings.table_cells import (
    check_sigma,
    read_direction_cell,
    read_direction_sigma_cell,
    read_kind,
    read_sigma_cell,
    read_temperature_cell,
    read_text_cell,
    read_value_cell,
)
from app.readings.table_text import SEPARATORS, TEXT_COLUMNS

LISTED_PROBLEMS: Final = 1000
CELL_LIMIT: Final = 200

Result = TypeVar("Result")


@dataclass
class Problems:
    """What is wrong, gathered until the whole table has been seen; ``hint`` is advice beside the reasons."""

    listed: list[dict[str, Any]] = field(default_factory=list)
    count: int = 0
    hint: str | None = None

    def add(self, line: int, column: str | None, reason: str) -> None:
        """Note one; only the first thousand are kept, all are counted."""
        self.count += 1
        if len(self.listed) < LISTED_PROBLEMS:
            self.listed.append({"line": line, "column": column, "reason": reason})

    def refuse_if_any(self) -> None:
        """Raise them all as one InputError."""
        if not self.count:
            return
        self.listed.sort(key=lambda problem: problem["line"])
        first = self.listed[0]
        where = f"line {first['line']}" + (f", {first['column']}" if first["column"] else "")
        many = "one problem" if self.count == 1 else f"{self.count} problems, the first"
        nothing_taken = "Nothing was taken; mend the rows and read the table again." if self.count > 1 else None
        raise InputError(
            f"The table has {many} in {where}: {first['reason']}",
            hint=" ".join(part for part in (nothing_taken, self.hint) if part) or None,
            detail={"problems": self.listed, "count": self.count},
        )


@dataclass
class Row:
    """A reading in its row's own unit, and the line on which the row begins."""

    line: int
    reading: Reading
    unit: str


class RowReader:
    """Reads row after row into readings in the row's own unit; faults go to the problems."""

    def __init__(self, header: Sequence[str], separator: str, decimal_comma: bool, problems: Problems) -> None:
        self.header = header
        self.separator = separator
        self.decimal_comma = decimal_comma
        self.problems = problems
        self.directions: dict[str, Direction] = {}

    def read(self, line: int, cells: list[str]) -> Row | None:
        """The row's reading; None where anything about it went to the problems."""
        width = len(self.header)
        if (broken := self._find_broken_direction(cells)) is not None:
            self.problems.add(line, *broken)
            return None
        if len(cells) != width and (len(cells) < width or any(cells[width:])):
            self.problems.add(line, None, self._explain_width(cells))
            return None
        named = dict(zip(self.header, cells, strict=False))
        before = self.problems.count
        for name, cell in named.items():
            if len(cell) > CELL_LIMIT and name not in TEXT_COLUMNS:
                self.problems.add(line, name, f"the cell has more than {CELL_LIMIT} characters.")
        if self.problems.count > before:
            return None
        kind = self._take(line, "kind", named.get("kind", ""), read_kind)
        direction = self._take_direction(line, "direction", named.get("direction", ""), kind, NEEDS_DIRECTION)
        second = self._take_direction(line, "second", named.get("second", ""), kind, NEEDS_SECOND)
        value, sigma = self._take_value(line, named)
        turn = self._take_number(line, "direction_sigma", named, read_direction_sigma_cell)
        batch = self._take(line, "batch", named.get("batch", ""), read_text_cell)
        temperature = self._take_number(line, "temperature", named, read_temperature_cell)
        bar = self._take(line, "bar", named.get("bar", ""), read_text_cell)
        note = self._take(line, "note", named.get("note", ""), read_text_cell)
        if sigma is None and not named.get("sigma"):
            for name in ("direction_sigma", "batch"):
                if named.get(name):
                    self.problems.add(line, name, f"{name} needs a sigma in the same row.")
        if self.problems.count > before or kind is None:
            return None
        reading = Reading(kind, value, direction, second, sigma, turn, bar, batch, temperature=temperature, note=note)
        return Row(line, reading, named.get("unit", ""))

    def _take(self, line: int, column: str, cell: str, reader: Callable[[str], Result]) -> Result | None:
        try:
            return reader(cell)
        except InputError as error:
            self.problems.add(line, column, f"{error.message} {error.hint}" if error.hint else error.message)
            return None

    def _take_number(self, line: int, column: str, named: dict[str, str], reader: Callable[..., float]) -> float | None:
        cell = named.get(column, "")
        if not cell:
            return None
        return self._take(line, column, cell, lambda given: reader(given, decimal_comma=self.decimal_comma))

    def _take_value(self, line: int, named: dict[str, str]) -> tuple[float | None, float | None]:
        found = self._take(
            line,
            "value",
            named.get("value", ""),
            lambda cell: read_value_cell(cell, decimal_comma=self.decimal_comma),
        )
        sigma = self._take_number(line, "sigma", named, read_sigma_cell)
        if found is None:
            return None, sigma
        value, own_sigma = found
        if own_sigma is None:
            return value, sigma
        if named.get("sigma"):
            self.problems.add(line, "sigma", "the uncertainty is given twice, with the value and as sigma.")
            return value, sigma
        checked = self._take(line, "value", "", lambda _: check_sigma(own_sigma))
        return value, checked

    def _take_direction(
        self, line: int, column: str, cell: str, kind: str | None, needed_by: frozenset[str]
    ) -> Direction | None:
        if not cell:
            if kind in needed_by:
                self.problems.add(line, column, f"a reading “{kind}” needs a {_name_direction(column)}.")
            return None
        if kind is not None and kind not in needed_by:
            self.problems.add(line, column, f"a reading “{kind}” has no {_name_direction(column)}; leave it empty.")
            return None
        known = self.directions.get(cell)
        if known is None:
            known = self._take(
                line,
                column,
                cell,
                lambda given: read_direction_cell(given, decimal_comma=self.decimal_comma),
            )
            if known is not None:
                self.directions[cell] = known
        return known

    def _find_broken_direction(self, cells: list[str]) -> tuple[str, str] | None:
        """Column and reason, where a direction without quotes was cut by the separator within it."""
        for place, cell in enumerate(cells[: len(self.header)]):
            closing = {"[": "]", "(": ")"}.get(cell[:1])
            if closing is None or closing in cell or self.header[place] not in {"direction", "second"}:
                continue
            last = next((i for i in range(place, len(cells)) if closing in cells[i]), None)
            if last is None:
                continue
            parts = cells[place : last + 1]
            whole = self.separator.join(parts)
            return self.header[place], (
                f"the direction {whole} holds the {SEPARATORS[self.separator]} that parts the columns. "
                f'Put it in quotes, "{whole}", or write {" ".join(parts)}.'
            )
        return None

    def _explain_width(self, cells: list[str]) -> str:
        wanted, found = len(self.header), len(cells)
        mend = "Quote cells that hold the separator." if found > wanted else "Write empty cells out."
        return f"the row has {found} cells where the header has {wanted} columns. {mend}"


def _name_direction(column: str) -> str:
    return "direction" if column == "direction" else "second direction"
