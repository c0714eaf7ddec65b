"""The cells of a table of readings, one reader for each kind of cell, and how they are written."""

from __future__ import annotations

import difflib
import math
import re
from typing import Final

from app.crystal.direction import Direction, format_indices, format_number, parse_direction, read_direction
from app.errors import InputError
from app.readings.reading import READING_KINDS, ReadingKind
from app.tensor.printing import parse_value, replace_minus_signs

TEXT_LIMIT: Final = 2000
ZERO_CELSIUS: Final = 273.15

_VECTOR_WORDS: Final = {"xyz": "vector", "specimen": "specimen"}
_NUMBER: Final = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]{1,3})?")
_TEMPERATURE: Final = re.compile(r"(?P<number>.*?)\s*(?P<scale>K|°\s?C|℃|C|deg ?C)?", re.DOTALL)
# A cell that a spreadsheet would take for a formula, or that begins with the guard against that.
_GUARDED: Final = re.compile(r"[=+\-@\\\uff1d\uff0b\uff0d\uff20]")
_GUARD: Final = "\\"


def read_kind(cell: str) -> ReadingKind:
    """The kind of a reading; capitals do not matter."""
    plain = cell.lower()
    for kind in READING_KINDS:
        if kind == plain:
            return kind
    if not cell:
        raise InputError("The kind is missing.", hint=f"Write one of: {', '.join(READING_KINDS)}.")
    near = difflib.get_close_matches(plain, READING_KINDS, n=1)
    known = f"Known: {', '.join(READING_KINDS)}."
    hint = f"Did you mean {near[0]}? {known}" if near else known
    raise InputError(f"There is no kind of reading “{_shorten(cell)}”.", hint=hint)


def read_direction_cell(cell: str, *, decimal_comma: bool = False) -> Direction:
    """A row, a normal, or a vector behind its word: ``xyz 0.1 0.2 0.3`` (crystal frame), ``specimen 0 0 1``."""
    word, _, rest = cell.partition(" ")
    if word.lower() in _VECTOR_WORDS:
        return _read_vector(word.lower(), rest, cell)
    if decimal_comma and re.search(r"[0-9],", cell) and re.search(r"[^\s,;(\[]\s+[^\s,;)\]]", cell):
        raise InputError(
            f"In “{_shorten(cell)}” a comma may part two indices or be a decimal sign.",
            hint="Part the indices by spaces and write decimals with a point: [0.5 0 1].",
        )
    return parse_direction(cell)


def _read_vector(word: str, rest: str, cell: str) -> Direction:
    parts = replace_minus_signs(rest).replace(",", " ").split()
    if len(parts) != 3 or not all(_NUMBER.fullmatch(part) for part in parts):
        raise InputError(
            f"“{_shorten(cell)}” does not give three numbers after its word.",
            hint=f"Write {word} 0.1 -0.2 0.3, with decimal points and spaces between.",
        )
    numbers = [float(part) for part in parts]
    found = read_direction({"specimen": numbers} if word == "specimen" else {"xyz": numbers})
    return Direction(found.kind, found.values, False, cell)


def read_value_cell(cell: str, *, decimal_comma: bool = False) -> tuple[float, float | None]:
    """The value and, where it is written as 12.3(4) or 12.3 ± 0.4, its standard deviation."""
    if not cell:
        raise InputError("The value is missing.")
    return parse_value(cell, decimal_comma=decimal_comma)


def read_number_cell(cell: str, *, decimal_comma: bool = False) -> float:
    """A number without an uncertainty of its own."""
    value, sigma = parse_value(cell, decimal_comma=decimal_comma)
    if sigma is not None:
        raise InputError(f"“{_shorten(cell)}” has an uncertainty, where a number alone belongs.")
    return value


def read_sigma_cell(cell: str, *, decimal_comma: bool = False) -> float:
    """A standard deviation, above zero."""
    return check_sigma(read_number_cell(cell, decimal_comma=decimal_comma))


def check_sigma(sigma: float) -> float:
    """The same number, if it can be the standard deviation of a reading."""
    if not sigma > 0:
        raise InputError(
            "A standard deviation is above zero.", hint="No measurement is exact; leave all of them empty if unknown."
        )
    return sigma


def read_direction_sigma_cell(cell: str, *, decimal_comma: bool = False) -> float:
    """The standard deviation of each component of a bar's turn, degrees, zero or more."""
    number = read_number_cell(cell, decimal_comma=decimal_comma)
    if number < 0:
        raise InputError("The uncertainty of a direction is not negative.", hint="Give it in degrees.")
    return number


def read_temperature_cell(cell: str, *, decimal_comma: bool = False) -> float:
    """A temperature in kelvin: ``293``, ``293 K``, ``20 C``, ``20 °C``."""
    found = _TEMPERATURE.fullmatch(cell)
    number, scale = (found["number"], found["scale"]) if found else (cell, None)
    try:
        temperature = read_number_cell(number, decimal_comma=decimal_comma)
    except InputError as error:
        raise InputError(error.message, hint="Write a temperature as 293, 293 K or 20 °C.") from None
    kelvin = temperature if scale in {None, "K"} else temperature + ZERO_CELSIUS
    if not kelvin > 0:
        hint = "Kelvin is meant where nothing is said; write 20 °C for degrees Celsius." if scale is None else None
        raise InputError(f"The temperature {_shorten(cell)} is not above absolute zero.", hint=hint)
    return kelvin


def read_text_cell(cell: str) -> str | None:
    """Free text; None for an empty cell. A guard against spreadsheet formulas is taken off again."""
    if len(cell) > TEXT_LIMIT:
        raise InputError(f"A text has at most {TEXT_LIMIT} characters.")
    if cell.startswith(_GUARD) and _GUARDED.match(cell, 1):
        cell = cell[1:]
    return cell or None


def write_text_cell(text: str | None, field: str) -> str:
    """The cell of a free text, which ``read_text_cell`` takes back as it was.

    A spreadsheet runs a cell that begins with = + - @ as a formula, quoted or not. Such a text gets a backslash before
    it, which no spreadsheet takes for anything and which cannot be lost, as an apostrophe or a space can; a text that
    begins with a backslash gets a second one, so that reading is the exact inverse of writing.
    """
    if text is None or (text == "" and field == "note"):
        return ""
    if text != text.strip() or not text:
        raise InputError(
            f"The text “{_shorten(text)}” is empty or has blanks at an end, which a table does not keep.", field=field
        )
    if len(text) > TEXT_LIMIT:
        raise InputError(f"A text has at most {TEXT_LIMIT} characters.", field=field)
    if "\x00" in text or any("\ud800" <= character <= "\udfff" for character in text):
        raise InputError("The text holds a character that no text file has.", field=field)
    return f"{_GUARD}{text}" if _GUARDED.match(text) else text


def write_direction_cell(direction: Direction | None) -> str:
    """The cell of a direction: as it was typed where that says the same, else in the plainest form."""
    if direction is None:
        return ""
    if direction.text is not None and _says(direction.text, direction):
        return direction.text
    if not all(math.isfinite(value) for value in direction.values):
        raise InputError("The direction cannot be written: its numbers are not finite.")
    cell = _spell_direction(direction)
    try:
        read_direction_cell(cell)
    except InputError as error:
        raise InputError(f"The direction cannot be written: {error.message}", hint=error.hint) from None
    return cell


def _spell_direction(direction: Direction) -> str:
    numbers = [float(value) for value in direction.values]
    if direction.kind == "vector" or direction.kind == "specimen":
        word = "xyz" if direction.kind == "vector" else "specimen"
        return f"{word} {' '.join(format_number(number) for number in numbers)}"
    if not direction.four_index:
        return format_indices(direction.kind, numbers)
    first, second, third = numbers
    if direction.kind == "normal":
        return format_indices("normal", (first, second, -first - second, third))
    # Weber symbols of a row; the thirds are written as fractions, so that whole indices come back whole.
    inner = " ".join(_write_third(part) for part in (2 * first - second, 2 * second - first, -first - second))
    return f"[{inner} {format_number(third)}]"


def _write_third(three_times: float) -> str:
    return format_number(three_times / 3) if three_times % 3 == 0 else f"{format_number(three_times)}/3"


def _says(text: str, direction: Direction) -> bool:
    try:
        read = read_direction_cell(text)
    except InputError:
        return False
    same = (read.kind, read.values, read.four_index) == (direction.kind, direction.values, direction.four_index)
    return same and read.text == text


def write_number_cell(number: float | None, field: str) -> str:
    """The shortest text that reads back as the same number."""
    if number is None:
        return ""
    if not math.isfinite(number):
        raise InputError("A number in a table is finite.", field=field)
    return repr(float(number))


def _shorten(text: str) -> str:
    return text if len(text) <= 60 else f"{text[:60]}…"
