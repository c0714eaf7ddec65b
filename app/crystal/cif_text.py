"""From the bytes of a CIF to a block of data names: encoding, bounds, grammar, choice of the block.

gemmi parses; whatever it refuses becomes an InputError with the line. A value ? or . counts as missing.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from typing import Final

import gemmi

from app.errors import InputError

SIZE_LIMIT: Final = 8 * 2**20
BLOCK_LIMIT: Final = 10_000
TEXT_LIMIT: Final = 300

CELL_NAMES: Final = ("length_a", "length_b", "length_c", "angle_alpha", "angle_beta", "angle_gamma")

_NUMBER: Final = re.compile(r"([+-]?)([0-9]*)(?:\.([0-9]*))?(?:[eE]([+-]?[0-9]{1,3}))?(?:\(([0-9]+)\))?")
_PLACE: Final = re.compile(r"[a-z]*:(\d+)(?::\d+\(\d+\))?(?: in [^:]*)?: *(.*)", re.DOTALL)


def decode(text: str | bytes, notes: list[str]) -> bytes:
    """The text as UTF-8 without a mark; bytes that are not UTF-8 are taken as Latin-1, which goes to ``notes``.

    Raises:
        InputError: too large, UTF-16, zero bytes, or a character that is none.
    """
    if isinstance(text, str):
        try:
            content = text.encode("utf-8")
        except UnicodeEncodeError as error:
            line = text.count("\n", 0, error.start) + 1
            raise InputError(
                f"Line {line} of the CIF holds a lone surrogate, which is no character.", field="text"
            ) from None
    else:
        content = bytes(text)
    if len(content) > SIZE_LIMIT:
        raise InputError(
            f"The CIF is larger than {SIZE_LIMIT // 2**20} MiB.",
            field="text",
            hint="Take out reflections and pictures; the cell, the symmetry and the temperature are all that is read.",
        )
    if content.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\x00" in content:
        raise InputError(
            "The CIF holds zero bytes or a mark of UTF-16: it is in another encoding, or no text.",
            field="text",
            hint="Save it as UTF-8.",
        )
    content = content.removeprefix(b"\xef\xbb\xbf")
    try:
        content.decode("utf-8")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        notes.append(f"The file is not UTF-8 (line {line}); it was read as Latin-1, so accents in names may be wrong.")
        content = content.decode("latin-1").encode("utf-8")
    return content


def parse(content: bytes) -> gemmi.cif.Document:
    """The blocks of a CIF.

    Raises:
        InputError: what is no CIF, with the line in the message and in ``detail``; too many blocks, or none.
    """
    # The parser's check for names given twice takes a time that grows as the square of the number of blocks.
    if sum(1 for _ in re.finditer(rb"(?i)(?<!\S)data_", content)) > BLOCK_LIMIT:
        raise InputError(f"The CIF has more than {BLOCK_LIMIT} blocks.", field="text", hint="Split it.")
    try:
        document = gemmi.cif.read_string(content)
    except (ValueError, RuntimeError, IndexError, OverflowError, TypeError) as error:
        found = _PLACE.match(str(error))
        where, reason = (f" in line {found[1]}", found[2]) if found else ("", str(error).removeprefix("string: "))
        raise InputError(
            f"The text cannot be read as a CIF{where}: {shorten(reason)}.",
            field="text",
            hint="Look there for a quote or text field that is left open, a value or a name too many, or the place "
            "where the file was cut off; a CIF begins with data_ and the name of a block.",
            detail={"line": int(found[1])} if found else None,
        ) from None
    if len(document) == 0:
        raise InputError(
            "The text holds no CIF block.", field="text", hint="A CIF begins with data_ and the name of a block."
        )
    return document


def choose_block(
    document: gemmi.cif.Document, wanted: str | None, notes: list[str]
) -> tuple[gemmi.cif.Block, list[str]]:
    """The block that is wanted, else the first with a complete cell, and the names of all that have one.

    Raises:
        InputError: field "block" for a name that is not there, "cell" for a cell that is missing.
    """
    complete = [block for block in document if not _list_missing(block)]
    names = [block.name.strip() for block in complete]
    others = [block.name.strip() for block in document if _list_missing(block)]
    if wanted is not None:
        plain = wanted.strip()
        alike = [block for block in document if block.name.strip() == plain]
        alike = alike or [block for block in document if block.name.strip().lower() == plain.lower()]
        if not alike:
            raise InputError(
                f"The file has no block “{shorten(wanted)}”.",
                field="block",
                hint=f"Its blocks with a cell: {list_names(names)}." if names else "None of its blocks has a cell.",
                detail={"blocks": names},
            )
        chosen = alike[0]
        if missing := _list_missing(chosen):
            raise _refuse_cell(chosen, missing, names)
        return chosen, names
    if not complete:
        nearest = min(document, key=lambda block: len(_list_missing(block)))
        raise _refuse_cell(nearest, _list_missing(nearest), [])
    if len(complete) > 1:
        notes.insert(
            0,
            f"The file has {len(complete)} blocks with a cell ({list_names(names)}); the first, "
            f"{names[0] or 'without a name'}, was taken.",
        )
    if others:
        count = "1 block has" if len(others) == 1 else f"{len(others)} blocks have"
        notes.append(f"{count} no complete cell and cannot be taken: {list_names(others)}.")
    return complete[0], names


def _refuse_cell(block: gemmi.cif.Block, missing: Sequence[str], names: Sequence[str]) -> InputError:
    where = f"block “{shorten(block.name.strip())}”" if block.name.strip() else "block without a name"
    other = f" Or take another block: {list_names(names)}." if names else ""
    return InputError(
        f"The {where} gives no cell: {', '.join(missing)} {'is' if len(missing) == 1 else 'are'} missing.",
        field="cell",
        hint=f"Add what is missing, or give the cell by hand.{other}",
    )


def _list_missing(block: gemmi.cif.Block) -> list[str]:
    return [f"_cell_{name}" for name in CELL_NAMES if not find_values(block, (f"_cell_{name}", f"_cell.{name}"))]


def find_values(block: gemmi.cif.Block, names: Sequence[str]) -> list[str]:
    """The values of the first of these data names that has any; ? and . count as none."""
    for name in names:
        values = [gemmi.cif.as_string(value).strip() for value in block.find_values(name)]
        present = [value for value in values if value not in {"", "?", "."}]
        if present:
            return present
    return []


def find_text(block: gemmi.cif.Block, names: Sequence[str]) -> str | None:
    """The first value as one line of bounded length, or None."""
    values = find_values(block, names)
    return shorten(" ".join(values[0].split()), TEXT_LIMIT) if values else None


def read_number(text: str) -> tuple[float, float | None] | None:
    """The number and its standard uncertainty in units of its last digit, like 9.123(4); None for what is none."""
    found = _NUMBER.fullmatch(text) if len(text) <= 60 else None
    if found is None or not (found[2] or found[3]):
        return None
    power = float(f"1e{found[4] or 0}")
    value = float(f"{found[1]}{found[2] or 0}.{found[3] or 0}e{found[4] or 0}")
    spread = None if found[5] is None else float(f"{found[5]}e-{len(found[3] or '')}") * power
    return (value, spread) if math.isfinite(value) and math.isfinite(spread or 0.0) else None


def list_names(names: Sequence[str]) -> str:
    """The names with commas, at most eight of them spelled out."""
    shown = [shorten(name) or "without a name" for name in names[:8]]
    return ", ".join(shown) + (f" and {len(names) - 8} more" if len(names) > 8 else "")


def shorten(text: str, limit: int = 60) -> str:
    """The text, cut off with an ellipsis where it is longer than ``limit`` characters."""
    return text if len(text) <= limit else f"{text[:limit]}…"
