"""From the bytes of a table to rows of cells: encoding, separator, comments, bounds. No meaning yet."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Final

from app.errors import InputError

SIZE_LIMIT: Final = 64 * 1024 * 1024
LINE_LIMIT: Final = 20_000
ROW_LIMIT: Final = 200_000
SEPARATORS: Final = {",": "comma", ";": "semicolon", "\t": "tab"}

# Columns whose cells may hold a # of their own; anywhere else it begins a comment.
TEXT_COLUMNS: Final = frozenset({"bar", "batch", "note"})
COLUMNS: Final = (
    "kind",
    "direction",
    "second",
    "value",
    "sigma",
    "unit",
    "direction_sigma",
    "bar",
    "batch",
    "temperature",
    "note",
)

# UTF-32 before UTF-16: the mark of the one begins with the mark of the other.
_FOREIGN_MARKS: Final = (
    (b"\xff\xfe\x00\x00", "UTF-32"),
    (b"\x00\x00\xfe\xff", "UTF-32"),
    (b"\xff\xfe", "UTF-16"),
    (b"\xfe\xff", "UTF-16"),
)
_SAVE_AS: Final = "Save the table as UTF-8 (in a spreadsheet: “CSV UTF-8”)."


def decode_table(given: str | bytes) -> str:
    """The text of a table, without its byte-order mark.

    Raises:
        InputError: it is too large, is UTF-16, is not UTF-8 (with the offset of the first bad byte), or holds
            characters that no text file has.
    """
    if len(given) > SIZE_LIMIT:
        raise InputError(f"The table is larger than {SIZE_LIMIT // 2**20} MiB.", hint="Split it.")
    text = given if isinstance(given, str) else _decode(bytes(given))
    text = text.removeprefix("\ufeff")
    if "\x00" in text:
        raise InputError("The table holds a character NUL, so it is no text, or in another encoding.", hint=_SAVE_AS)
    try:
        text.encode("utf-8")
    except UnicodeEncodeError as error:
        line = text.count("\n", 0, error.start) + 1
        raise InputError(f"Line {line} of the table holds a lone surrogate, which is no character.") from None
    return text


def _decode(raw: bytes) -> str:
    for mark, name in _FOREIGN_MARKS:
        if raw.startswith(mark):
            raise InputError(f"The table is encoded as {name}, not UTF-8.", hint=_SAVE_AS)
    head = raw[:400]
    if head.count(0) > len(head) // 4:
        raise InputError("The table looks like UTF-16 without a mark (every other byte is zero).", hint=_SAVE_AS)
    try:
        return raw.decode("utf-8")
    except UnicodeDecodeError as error:
        line = raw.count(b"\n", 0, error.start) + 1
        raise InputError(
            f"The table is not UTF-8: byte {error.start} (line {line}) is 0x{raw[error.start]:02x}.", hint=_SAVE_AS
        ) from None


@dataclass
class TableRows:
    """Rows of cells with the number of the line on which each begins.

    Attributes:
        separator: comma, semicolon or tab.
        header: column names in lower case, in the order of the table; empty names at the end are dropped.
        header_line: number of the header's line, from 1.
        rows: an iterator of (line number, cells); blank rows and comments are left out, cells are stripped.
    """

    separator: str
    header: tuple[str, ...]
    header_line: int
    rows: Iterator[tuple[int, list[str]]]


def split_table(text: str) -> TableRows:
    """Find the header, the separator and the rows.

    Raises:
        InputError: no header, no or an ambiguous separator, a line that is too long, an unclosed quote (the last two
            also while the rows are drawn).
    """
    # With newline="" CR, LF and CRLF all end a line and stay in quoted cells as they are.
    lines = _Lines(io.StringIO(text, newline=""))
    first = lines.find_first()
    separator = _find_separator(first, lines.number)
    lines.separator = separator
    reader = csv.reader(lines, delimiter=separator, strict=True, skipinitialspace=True)
    lines.push_back(first)
    header_cells = _draw(reader, lines)
    if header_cells is None:
        raise InputError("The table has no header.", hint=f"Its first line is for example {','.join(COLUMNS)}.")
    header = [cell.strip().lower() for cell in header_cells]
    while header and not header[-1]:
        header.pop()
    lines.header = tuple(header)
    return TableRows(separator, tuple(header), lines.first_number, _draw_rows(reader, lines))


def _draw(reader: Iterator[list[str]], lines: _Lines) -> list[str] | None:
    lines.begin_row()
    try:
        return next(reader, None)
    except csv.Error as error:
        reason = str(error)
        if "end of data" in reason:
            reason = "a quote is opened and never closed"
        elif "expected after" in reason:
            reason = "a quoted cell goes on after its closing quote; write a quote within it twice"
        raise InputError(
            f"Line {lines.first_number} of the table cannot be read: {reason}.",
            detail={"problems": [{"line": lines.first_number, "column": None, "reason": reason}]},
        ) from None


def _draw_rows(reader: Iterator[list[str]], lines: _Lines) -> Iterator[tuple[int, list[str]]]:
    count = 0
    while (row := _draw(reader, lines)) is not None:
        cells = [cell.strip() for cell in row]
        if not any(cells):
            continue
        count += 1
        if count > ROW_LIMIT:
            raise InputError(f"The table has more than {ROW_LIMIT} rows.", hint="Split it.")
        yield lines.first_number, cells


@dataclass
class _Lines:
    """Feeds the csv reader line by line, so that comments go only where a row begins, never within quotes."""

    stream: io.StringIO
    separator: str = ","
    header: tuple[str, ...] = ()
    number: int = 0
    first_number: int = 0
    _row_begins: bool = True
    _pushed: list[str] = field(default_factory=list)

    def __iter__(self) -> _Lines:
        return self

    def __next__(self) -> str:
        line = self._take()
        if not self._row_begins:
            return line
        while not line.strip() or line.lstrip().startswith("#"):
            line = self._take()
        self._row_begins = False
        self.first_number = self.number
        return self._cut_comment(line) if "#" in line else line

    def begin_row(self) -> None:
        self._row_begins = True

    def find_first(self) -> str:
        """The first line that is neither blank nor a comment."""
        self.begin_row()
        try:
            return next(self)
        except StopIteration:
            raise InputError(
                "The table is empty.", hint=f"Its first line is for example {','.join(COLUMNS)}."
            ) from None

    def push_back(self, line: str) -> None:
        self._pushed.append(line)
        self.number -= 1

    def _take(self) -> str:
        # Never more than the limit at once, so that one endless line costs nothing.
        line = self._pushed.pop() if self._pushed else self.stream.readline(LINE_LIMIT + 1)
        if not line:
            raise StopIteration
        self.number += 1
        if len(line) > LINE_LIMIT:
            raise InputError(f"Line {self.number} of the table has more than {LINE_LIMIT} characters.")
        return line

    def _cut_comment(self, line: str) -> str:
        """The line up to a # that stands outside quotes and outside the columns of free text."""
        column, position = 0, 0
        while position <= len(line):
            position += len(line[position:]) - len(line[position:].lstrip(" "))
            if line.startswith('"', position):
                end = _find_closing_quote(line, position + 1)
                if end is None:
                    return line
                position = end + 1
            stop = line.find(self.separator, position)
            stop = len(line) if stop < 0 else stop
            name = self.header[column] if column < len(self.header) else ""
            if name not in TEXT_COLUMNS and (mark := line.find("#", position, stop)) >= 0:
                return line[:mark] + line[len(line.rstrip("\r\n")) :]
            column, position = column + 1, stop + 1
        return line


def _find_closing_quote(line: str, position: int) -> int | None:
    while (end := line.find('"', position)) >= 0:
        if not line.startswith('"', end + 1):
            return end
        position = end + 2
    return None


def _find_separator(line: str, number: int) -> str:
    bare = re.sub(r'"[^"]*"', "", line.partition("#")[0])
    present = [separator for separator in SEPARATORS if separator in bare]
    if not present:
        raise InputError(
            f"The header in line {number} has one column only; kind and value are needed.",
            hint=f"Part the columns by commas, semicolons or tabs: {','.join(COLUMNS)}.",
        )
    if len(present) == 1:
        return present[0]
    names = " and ".join(SEPARATORS[separator] for separator in present)
    raise InputError(
        f"The header in line {number} holds {names}, so it is unclear what parts the columns.",
        hint="Use one of them throughout, and no other in the header.",
    )
