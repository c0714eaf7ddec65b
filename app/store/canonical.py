"""The one form in which kept data are written and hashed, and plain data that cannot be changed in place.

Canonical JSON here is UTF-8 text without spaces, keys sorted by code point, no value that is not finite, and each
number written in one way only: a whole number below 2^53 without a point, so that 4.0 from Python and 4 from a
browser are the same content; everything else as the shortest text that reads back as the same double.
"""

from __future__ import annotations

import hashlib
import json
import math
from collections.abc import Mapping
from typing import Any, NoReturn

from app.errors import InputError

DEEPEST = 32
"""How many levels of lists and objects a value may have; kept work needs fewer than ten."""

_WHOLE = 2**53
_KEEP_PLAIN = "Give text, finite numbers, true, false, null, and lists and objects of them."


class FrozenDict(dict[str, Any]):
    """A dictionary that refuses every change in place; it is still a ``dict`` to readers of JSON-like data."""

    def _refuse(self, *_: Any, **__: Any) -> NoReturn:
        raise TypeError("A kept document is not changed in place; make a new one.")

    __setitem__ = __delitem__ = __ior__ = _refuse
    clear = pop = popitem = setdefault = update = _refuse

    def __reduce__(self) -> tuple[type[FrozenDict], tuple[dict[str, Any]]]:
        return (FrozenDict, (dict(self),))


def freeze(value: Any, depth: int = 0) -> Any:
    """Return JSON-like ``value`` with frozen dictionaries and tuples in place of lists.

    Raises InputError where the value is not JSON: a number that is not finite, a key or a value of another kind,
    text that is not valid Unicode, more than ``DEEPEST`` levels.
    """
    return _walk(value, depth, FrozenDict, tuple)


def plain(value: Any) -> Any:
    """Return JSON-like ``value`` as new dictionaries and lists that may be changed; errors as for ``freeze``."""
    return _walk(value, 0, dict, list)


def canonical_json(value: Any) -> bytes:
    """Return ``value`` as canonical JSON; errors as for ``freeze``."""
    text = json.dumps(plain(value), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False)
    return text.encode("utf-8")


def content_hash(value: Any) -> str:
    """Return the SHA-256 of the canonical JSON of ``value`` as 64 hexadecimal digits."""
    return hash_canonical(canonical_json(value))


def hash_canonical(data: bytes) -> str:
    """Return the SHA-256 of what is canonical JSON already."""
    return hashlib.sha256(data).hexdigest()


def _walk(value: Any, depth: int, to_object: Any, to_list: Any) -> Any:
    if value is None or isinstance(value, bool):
        return value
    if isinstance(value, str):
        return _checked_text(value)
    if isinstance(value, int | float):
        return _one_number(value)
    if depth >= DEEPEST:
        raise InputError(f"The data are nested more than {DEEPEST} levels deep.", hint=_KEEP_PLAIN)
    if isinstance(value, Mapping):
        for key in value:
            if not isinstance(key, str):
                raise InputError(f"The key {key!r} is not text.", hint=_KEEP_PLAIN)
        return to_object({_checked_text(k): _walk(v, depth + 1, to_object, to_list) for k, v in value.items()})
    if isinstance(value, list | tuple):
        return to_list(_walk(item, depth + 1, to_object, to_list) for item in value)
    raise InputError(f"A value of the kind {type(value).__name__} cannot be kept.", hint=_KEEP_PLAIN)


def _checked_text(text: str) -> str:
    try:
        text.encode("utf-8")
    except UnicodeEncodeError:
        raise InputError("A text holds half of a character pair and is not valid Unicode.", hint=_KEEP_PLAIN) from None
    return str(text)


def _one_number(number: int | float) -> int | float:
    try:
        as_float = float(number)
    except OverflowError:
        as_float = math.inf
    if not math.isfinite(as_float):
        raise InputError("A number is not finite, or is too large to keep.", hint=_KEEP_PLAIN)
    return int(as_float) if as_float.is_integer() and abs(as_float) < _WHOLE else as_float
