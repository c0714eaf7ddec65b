"""Reading JSON from a file that anyone may have written: whole, strictly, and within limits that are told.

Refused with a sentence: text that is too long, not UTF-8 or not JSON (with line and column), nested too deeply, a key
that stands twice in one object, NaN and Infinity, numbers beyond every double, half of a character pair.
"""

from __future__ import annotations

import json
import re
from itertools import accumulate
from typing import Any, Final, NoReturn

from app.errors import InputError
from app.store.canonical import DEEPEST, freeze

LARGEST_TEXT: Final = 64 * 1024 * 1024
"""Bytes of a text that is read."""

DEEPEST_TEXT: Final = 40
"""Levels of objects and lists within each other: those of the deepest document, and of what stands around it."""

MOST_VALUES: Final = 4_000_000
"""Values in lists and objects, counted by the commas between them."""

# Python reads a whole number of any length, in a time that grows with the square of it.
_LONG_NUMBER: Final = re.compile(rb"[0-9]{300}")
_STEPS: Final = {ord("["): 1, ord("{"): 1, ord("]"): -1, ord("}"): -1}
_NO_BRACKETS: Final = bytes(byte for byte in range(256) if byte not in _STEPS)
_ESCAPES: Final = re.compile(rb"\\.", re.DOTALL)
_HALVES: Final = re.compile(r"[\ud800-\udfff]")


def read_json(text: str | bytes, most_values: int = MOST_VALUES) -> Any:
    """Return what ``text`` says, as frozen JSON-like data (see ``canonical.py``). Raises InputError."""
    data = text if isinstance(text, bytes) else _encode(text)
    if len(data) > LARGEST_TEXT:
        raise InputError(
            f"The document has {len(data)} bytes; at most {LARGEST_TEXT} ({LARGEST_TEXT // 2**20} MiB) are read.",
            hint="Write samples one by one, or leave their histories out.",
        )
    if not data.strip():
        raise InputError("The document is empty.", hint="Choose a file that this program wrote.")
    if data.count(b",") >= most_values and _leave_out_texts(data).count(b",") >= most_values:
        raise InputError(
            f"The document holds more than {most_values} values, which is more than is read.",
            hint="Write samples one by one, or leave their histories out.",
        )
    _refuse_deep(data)
    long_number = _LONG_NUMBER.search(data) is not None
    try:
        content = json.loads(
            data.decode("utf-8-sig"),
            object_pairs_hook=_build_object,
            parse_constant=_refuse_constant,
            parse_int=_read_whole if long_number else None,
        )
    except UnicodeDecodeError as error:
        raise InputError(
            f"The document is not UTF-8 text: byte {error.start + 1} cannot be read.", hint="Write it in UTF-8."
        ) from None
    except json.JSONDecodeError as error:
        raise InputError(
            f"The document is not valid JSON at line {error.lineno}, column {error.colno}: "
            f"{error.msg[:1].lower()}{error.msg[1:]}.",
            hint="The file may have been cut off; take it anew from where it was written.",
            detail={"line": error.lineno, "column": error.colno},
        ) from None
    return freeze(content, depth=DEEPEST - DEEPEST_TEXT)


def _encode(text: str) -> bytes:
    half = _HALVES.search(text)
    if half is not None:
        raise InputError(
            f"The document holds half of a character pair at its character {half.start() + 1}, which is no character.",
            hint="Write it in UTF-8.",
        )
    return text.encode("utf-8")


def _refuse_deep(data: bytes) -> None:
    """Refuse what is nested too deeply before it is read: reading it would need as many levels of calls."""

    def is_deep(brackets: bytes) -> bool:
        return max(accumulate(map(_STEPS.__getitem__, brackets)), default=0) > DEEPEST_TEXT

    # Brackets within texts count at first, so that this can only be too much.
    if is_deep(data.translate(None, _NO_BRACKETS)) and is_deep(_leave_out_texts(data).translate(None, _NO_BRACKETS)):
        raise InputError(
            f"The document is nested too deeply: it may have {DEEPEST_TEXT} levels of objects and lists.",
            hint="No document that this program writes has more than twenty.",
        )


def _leave_out_texts(data: bytes) -> bytes:
    """What of ``data`` does not stand within a text, found in a time that grows with its length alone."""
    return b"".join(_ESCAPES.sub(b"", data).split(b'"')[::2])


def _build_object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    built = dict(pairs)
    if len(built) != len(pairs):
        seen: set[str] = set()
        for key, _ in pairs:
            if key in seen:
                raise InputError(
                    f"The key {_quote(key)} stands twice in one object.", hint="Keep one of the two and take it anew."
                )
            seen.add(key)
    return built


def _refuse_constant(name: str) -> NoReturn:
    raise InputError(f"{name} is no number that can be kept.", hint="Leave out what is unknown.")


def _read_whole(digits: str) -> int | float:
    # Beyond every double it becomes infinite, and is refused as such.
    return int(digits) if len(digits) < 300 else float(digits)


def _quote(key: str) -> str:
    shown = key.encode("utf-8", "replace").decode("utf-8")
    return f"“{shown[:60]}…”" if len(shown) > 60 else f"“{shown}”"
