"""Reading a request body as JSON more strictly than the framework does.

Refused with a sentence: what is not JSON (with line and column), not UTF-8, not an object; numbers that are not finite
(NaN, Infinity, 1e999) wherever they stand; a key that stands twice in one object, where readers silently keep the
last; half of a surrogate pair, which no answer could quote; objects and lists nested deeper than any call needs. The
media type that the caller states is not asked for: the body is JSON or it is refused, and pages of other origins are
kept out by their Origin.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Callable, Coroutine, Iterator
from itertools import accumulate
from typing import Any, Final

from fastapi import Request, Response
from fastapi.routing import APIRoute

from app.errors import InputError
from app.web.error_answers import field_path
from app.web.limits import DEEPEST_BODY, LONGEST_NUMBER

# Cheap to search for, and present in every body that holds a number that is not finite or half of a surrogate pair.
# Where it is found in innocent text, the only cost is one more walk through the body.
_SUSPICIOUS = re.compile(rb"NaN|Infinity|[eE]\+?[0-9]{3}|[0-9]{200}|\\u[dD][89a-fA-F]")
# How each bracket changes the depth; what is no bracket is left out before.
_STEPS: Final = {ord("["): 1, ord("{"): 1, ord("]"): -1, ord("}"): -1}
_NO_BRACKETS: Final = bytes(byte for byte in range(256) if byte not in _STEPS)


class StrictRoute(APIRoute):
    """A route whose body is read by ``parse_object``; give it to every router as ``route_class``."""

    def get_route_handler(self) -> Callable[[Request], Coroutine[Any, Any, Response]]:
        """Read the body before the framework does, and hand the result to it."""
        handle = super().get_route_handler()
        if self.body_field is None:
            return handle

        async def handle_strictly(request: Request) -> Response:
            return await handle(_ParsedRequest(request, parse_object(await request.body())))

        return handle_strictly


class _ParsedRequest(Request):
    """The same request, its body read already and said to be JSON."""

    def __init__(self, request: Request, content: dict[str, Any]) -> None:
        headers = [header for header in request.scope["headers"] if header[0].lower() != b"content-type"]
        headers.append((b"content-type", b"application/json"))
        super().__init__({**request.scope, "headers": headers}, request.receive)
        self._content = content

    async def body(self) -> bytes:
        """Something that is not empty: the framework asks whether there is a body before it asks for the content."""
        return b"{}"

    async def json(self) -> Any:
        """The content."""
        return self._content


class _Doubled(dict[str, Any]):
    """An object in which the key ``doubled`` stands more than once."""

    doubled: str = ""


def parse_object(body: bytes) -> dict[str, Any]:
    """Read a request body.

    Returns:
        the object, with only finite numbers.

    Raises:
        InputError: whatever is wrong with it, at its field or its line and column.
    """
    if not body.strip():
        raise InputError("The body is missing.", hint="Send a JSON object.")
    seen_twice = False

    def build_object(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        nonlocal seen_twice
        built = dict(pairs)
        if len(built) == len(pairs):
            return built
        seen_twice = True
        marked = _Doubled(built)
        keys = [key for key, _ in pairs]
        marked.doubled = next(key for key in keys if keys.count(key) > 1)
        return marked

    suspicious = _SUSPICIOUS.search(body) is not None
    try:
        content = json.loads(
            body.decode("utf-8-sig"),
            object_pairs_hook=build_object,
            parse_int=_parse_integer if suspicious else None,
        )
    except RecursionError:
        raise _too_deep() from None
    except UnicodeDecodeError as error:
        raise InputError(
            f"The body is not UTF-8 text: byte {error.start + 1} cannot be read.", hint="Send JSON in UTF-8."
        ) from None
    except json.JSONDecodeError as error:
        raise InputError(
            f"The body is not valid JSON at line {error.lineno}, column {error.colno}: {error.msg[:1].lower()}"
            f"{error.msg[1:]}.",
            hint="Send one JSON object in UTF-8.",
            detail={"line": error.lineno, "column": error.colno},
        ) from None
    if not isinstance(content, dict):
        raise InputError("The body must be a JSON object with named members.", hint='Send an object: {"crystal": …}.')
    # Brackets within text count here, so that this can only be too much: then the content itself is looked at.
    if max(accumulate(map(_STEPS.__getitem__, body.translate(None, _NO_BRACKETS))), default=0) > DEEPEST_BODY:
        for location, value in _walk(content):
            if len(location) >= DEEPEST_BODY and isinstance(value, dict | list):
                raise _too_deep(field_path(location[:3]))
    if suspicious or seen_twice:
        _refuse_unfit(content)
    return content


def _too_deep(field: str | None = None) -> InputError:
    return InputError(
        f"The body is nested too deeply: it may have {DEEPEST_BODY} levels of objects and lists.",
        field=field,
        hint="No call needs more than ten.",
    )


def _parse_integer(digits: str) -> int | float:
    """Read an integer; one beyond every float becomes infinite, and is refused with its field afterwards."""
    return int(digits) if len(digits) <= LONGEST_NUMBER else float(digits)


def _refuse_unfit(content: dict[str, Any]) -> None:
    """Raise for the first number that is not finite, doubled key or half surrogate pair."""
    for location, value in _walk(content):
        field = field_path(location) or None
        if isinstance(value, float) and not math.isfinite(value):
            raise InputError(
                f"{field} is not a finite number.", field=field, hint="Give a finite number; leave out what is unknown."
            )
        if isinstance(value, _Doubled):
            doubled = field_path([*location, value.doubled])
            raise InputError(f"{doubled} is given twice in one object.", field=doubled, hint="Keep one of the two.")
        if isinstance(value, str) and _is_broken(value):
            raise InputError(
                f"{field or 'A key'} holds half of a surrogate pair, which is no character.",
                field=field,
                hint="Write the character itself in UTF-8.",
            )


def _walk(content: dict[str, Any]) -> Iterator[tuple[tuple[int | str, ...], Any]]:
    """All values with their places, in the order in which they stand; keys come as values at the object's place."""
    waiting: list[tuple[tuple[int | str, ...], Any]] = [((), content)]
    while waiting:
        location, value = waiting.pop()
        yield location, value
        if isinstance(value, dict):
            for key in value:
                if _is_broken(key):
                    yield location, key
            waiting.extend(((*location, key), inner) for key, inner in reversed(value.items()))
        elif isinstance(value, list):
            waiting.extend(((*location, index), value[index]) for index in range(len(value) - 1, -1, -1))


def _is_broken(text: str) -> bool:
    try:
        text.encode()
    except UnicodeEncodeError:
        return True
    return False
