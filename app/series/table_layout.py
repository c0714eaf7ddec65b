"""Text laid out as a table against a variable: separator, decimal sign, header and rows, and all faults at once."""

from __future__ import annotations

import csv
import io
import re
from dataclasses import dataclass, field
from typing import Any, Final

from app.errors import InputError

SIZE_LIMIT: Final = 4 * 1024 * 1024
ROW_LIMIT: Final = 10_000
LISTED_PROBLEMS: Final = 1000
VARIABLE_NAMES: Final = ("t", "temperature", "pressure", "wavelength", "composition")
SEPARATORS: Final = (";", "\t", ",")


@dataclass
class TableProblems:
    """Faults by line and column, from 1; the first thousand are listed."""

    listed: list[dict[str, Any]] = field(default_factory=list)
    count: int = 0

    def add(self, line: int, column: str | None, reason: str) -> None:
        """Note a fault."""
        self.count += 1
        if len(self.listed) < LISTED_PROBLEMS:
            self.listed.append({"line": line, "column": column, "reason": reason})

    def refuse_if_any(self) -> None:
        """Raise InputError with ``detail`` {"problems", "count"} if there is a fault."""
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


@dataclass(frozen=True)
class Layout:
    """A table as it stands.

    Attributes:
        header: names of the columns in small letters.
        header_line: its line, from 1.
        rows: line and cells of each row beneath it.
        decimal_comma: whether the decimal sign is the comma.
    """

    header: list[str]
    header_line: int
    rows: list[tuple[int, list[str]]]
    decimal_comma: bool

    def require_rows(self) -> None:
        """Raise InputError where there are none, or too many."""
        if not self.rows:
            raise InputError("The table has a header and no cells.", hint="Add a row for each value of the variable.")
        if len(self.rows) > ROW_LIMIT:
            raise InputError(f"The table has more than {ROW_LIMIT} rows.", hint="Split it.")


def lay_out_table(text: str, example: str, problems: TableProblems) -> Layout:
    """Part a text into header and rows.

    Semicolons, tabs or commas part the cells; with semicolons or tabs the decimal sign is the comma if any number has
    one. Blank lines, and lines that begin with #, are passed over.

    Args:
        text: the table.
        example: a header, for the hint.
        problems: where faults are noted; they are refused here if there are any.

    Raises:
        InputError: what is no table.
    """
    if len(text) > SIZE_LIMIT:
        raise InputError(f"The table is longer than {SIZE_LIMIT} characters.", hint="Split it.")
    if "\x00" in text:
        raise InputError("The table holds a character NUL, so it is no text.", hint="Save it as UTF-8.")
    lines = _list_lines(text.removeprefix("\ufeff"))
    if not lines:
        raise InputError("The table is empty.", hint=f"Its first line is for example {example}.")
    separator = next((mark for mark in SEPARATORS if mark in lines[0][1]), ",")
    rows = [(number, _split(line, separator, number, problems)) for number, line in lines]
    problems.refuse_if_any()
    header = [name.lower() for name in rows[0][1]]
    while header and not header[-1]:
        header.pop()
    decimal_comma = separator != "," and any("," in cell for _, cells in rows[1:] for cell in cells)
    return Layout(header, rows[0][0], rows[1:], decimal_comma)


def find_variable(layout: Layout, problems: TableProblems) -> str:
    """The name of the one column that is the variable; a fault is noted and "" given where it is not one."""
    variables = [name for name in layout.header if name in VARIABLE_NAMES]
    if len(variables) != 1:
        found = "two columns name a variable" if variables else "no column names the variable"
        problems.add(layout.header_line, None, f"{found}; one of {', '.join(VARIABLE_NAMES)} is needed.")
    return variables[0] if variables else ""


def check_length(layout: Layout, line: int, cells: list[str], problems: TableProblems) -> bool:
    """Whether a row has as many cells as the header has columns; empty ones at its end do not count."""
    if len(cells) >= len(layout.header) and not any(cells[len(layout.header) :]):
        return True
    problems.add(line, None, f"the row has {len(cells)} cells where the header has {len(layout.header)} columns.")
    return False


def _list_lines(text: str) -> list[tuple[int, str]]:
    every = enumerate(re.split(r"\r\n|\n|\r", text), start=1)
    return [(number, line) for number, line in every if line.strip(" \t,;") and not line.lstrip().startswith("#")]


def _split(line: str, separator: str, number: int, problems: TableProblems) -> list[str]:
    try:
        cells = next(csv.reader(io.StringIO(line), delimiter=separator, strict=True, skipinitialspace=True))
    except (csv.Error, StopIteration):
        problems.add(number, None, "a quote is not closed, or stands within a cell.")
        return []
    return [cell.strip() for cell in cells]
