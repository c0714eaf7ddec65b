"""Every error that leaves the server has one shape, and this module is its one home.

    {"error": {"message": what is wrong, "field": where, "hint": what to do, "detail": further facts}}

``field`` is a path such as ``readings[3].sigma``; ``detail`` is there only where there is something to add.
"""

from __future__ import annotations

import logging
import traceback
from collections.abc import Sequence
from typing import Any

import numpy as np
from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from starlette.exceptions import HTTPException
from starlette.requests import ClientDisconnect
from starlette.responses import JSONResponse, Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from app.errors import ConflictError, HalfturnError, InputError, NotFoundError, StoreError, join_field
from app.web.answers import JsonAnswer

_log = logging.getLogger(__name__)

UNEXPECTED = "Something went wrong inside the tool; the request may well have been right."

_PROBLEMS_LISTED = 20
_LONGEST_NAME = 80

_STATUS: tuple[tuple[type[HalfturnError], int], ...] = (
    (NotFoundError, 404),
    (ConflictError, 409),
    (StoreError, 503),
    (HalfturnError, 422),
)


def error_answer(
    status: int,
    message: str,
    *,
    field: str | None = None,
    hint: str | None = None,
    detail: Any = None,
    headers: dict[str, str] | None = None,
) -> JSONResponse:
    """Shape one error as an answer.

    A ``detail`` that cannot be written as JSON (a number that is not finite) is left out: the message still tells.
    """
    error: dict[str, Any] = {"message": message, "field": field, "hint": hint}
    if detail is not None:
        try:
            return JsonAnswer({"error": {**error, "detail": detail}}, status_code=status, headers=headers)
        except InputError:
            _log.warning("the detail of an error could not be written")
    return JsonAnswer({"error": error}, status_code=status, headers=headers)


def answer_halfturn_error(_request: Request, error: Exception) -> Response:
    """Answer an error that the tool raised on purpose."""
    assert isinstance(error, HalfturnError)
    status = next(status for kind, status in _STATUS if isinstance(error, kind))
    return error_answer(status, error.message, field=error.field, hint=error.hint, detail=error.detail)


def explain(error: Exception) -> HalfturnError:
    """What an error means to whoever asked: itself, if the tool raised it on purpose; else in plain words.

    Arithmetic that left the range of numbers is a bad request, as any answer that would not be finite is. What nobody
    expected is logged; there must be none.
    """
    if isinstance(error, HalfturnError):
        return error
    # A decomposition fails only on what has left the range of numbers on the way to it.
    if isinstance(error, OverflowError | FloatingPointError | np.linalg.LinAlgError):
        return InputError(
            "The answer would not be finite: a number in the request is too large or too small to calculate with.",
            hint="Give the values in a unit in which they are neither extremely large nor extremely small.",
        )
    if isinstance(error, RecursionError):
        return InputError(
            "The body is nested too deeply to be read.", hint="No call needs more than a few levels of nesting."
        )
    _log.error("unexpected error\n%s", tell_places(error))
    return HalfturnError(UNEXPECTED, hint="The server's log has the particulars. Nothing that was kept is lost.")


def tell_places(error: BaseException) -> str:
    """Where an error arose, for the log: its kind and the lines that led to it, of its causes too.

    Without the error's own words, which may quote what was sent: the log holds no data of a sample.
    """
    told = []
    seen: list[BaseException] = []
    current: BaseException | None = error
    while current is not None and current not in seen:
        seen.append(current)
        frames = traceback.extract_tb(current.__traceback__)
        told += [f"  {frame.filename}:{frame.lineno} in {frame.name}" for frame in frames]
        told.append(f"{type(current).__module__}.{type(current).__qualname__}")
        current = current.__cause__ or current.__context__
    return "\n".join(told)


def answer_explained(request: Request, error: Exception) -> Response:
    """Answer an error that ``explain`` puts into words."""
    return answer_halfturn_error(request, explain(error))


def answer_http_error(request: Request, error: Exception) -> Response:
    """Answer an unknown address, a wrong method and whatever else the routing refuses."""
    assert isinstance(error, HTTPException)
    headers = dict(error.headers) if error.headers else None
    path = _shortened(request.url.path)
    if error.status_code == 404 and error.detail == "Not Found":
        return error_answer(
            404, f"There is nothing at {path}.", hint="The calls are listed at / and in /openapi.json.", headers=headers
        )
    if error.status_code == 405:
        allowed = (headers or {}).get("Allow", (headers or {}).get("allow"))
        hint = f"Use {allowed}." if allowed else "The calls take POST."
        return error_answer(405, f"{path} does not take {_shortened(request.method)}.", hint=hint, headers=headers)
    return error_answer(error.status_code, str(error.detail), headers=headers)


def answer_invalid_request(_request: Request, error: Exception) -> Response:
    """Answer a body that does not have the shape of its call: the first problem leads, all stand in the detail."""
    assert isinstance(error, RequestValidationError)
    problems = [_problem(entry) for entry in error.errors()[:_PROBLEMS_LISTED]]
    detail = {"problems": problems, "count": len(error.errors())}
    return error_answer(422, **problems[0], detail=detail)


def _problem(entry: dict[str, Any]) -> dict[str, Any]:
    """Put one entry of a validation error into plain words: message, field, hint."""
    location = entry["loc"]
    if location and location[0] in ("body", "query", "path", "header", "cookie"):
        location = location[1:]
    field = field_path(location)
    context = entry.get("ctx") or {}
    subject = field or "The body"
    words, hint = _words(entry["type"], context, entry)
    return {"message": f"{subject} {words}", "field": field or None, "hint": context.get("hint", hint)}


def _words(kind: str, context: dict[str, Any], entry: dict[str, Any]) -> tuple[str, str | None]:
    """What is wrong, as a predicate ("must be a number."), and what to do, for one type of validation error."""
    given = _described(entry.get("input"))
    match kind:
        case "missing":
            return "is missing.", None
        case "extra_forbidden" | "unknown_key":
            return "is not a known key here.", "Take the key out, or correct its name."
        case "float_type" | "float_parsing":
            return f"must be a number, not {given}.", None
        case "int_type" | "int_parsing" | "int_from_float":
            return f"must be a whole number, not {given}.", None
        case "finite_number":
            return "must be a finite number.", None
        case "bool_type" | "bool_parsing":
            return f"must be true or false, not {given}.", None
        case "string_type":
            return f"must be text, not {given}.", None
        case "list_type":
            return f"must be a list, not {given}.", None
        case "model_type" | "model_attributes_type" | "dict_type":
            return f"must be an object with named members, not {given}.", None
        case "literal_error":
            return f"must be one of {str(context['expected']).replace(chr(39), chr(34))}, not {given}.", None
        case "too_short":
            return f"must have at least {_counted(context['min_length'])}; it has {context['actual_length']}.", None
        case "too_long":
            has = context.get("actual_length")
            return f"may have at most {_counted(context['max_length'])}" + (f"; it has {has}." if has else "."), None
        case "string_too_short":
            return "must not be empty.", None
        case "string_too_long":
            return f"may have at most {context['max_length']} characters.", None
        case "greater_than":
            return f"must be greater than {_number(context['gt'])}.", None
        case "greater_than_equal":
            return f"must be at least {_number(context['ge'])}.", None
        case "less_than":
            return f"must be less than {_number(context['lt'])}.", None
        case "less_than_equal":
            return f"must be at most {_number(context['le'])}.", None
        case _:
            message = str(entry["msg"])
            return message if message.endswith(".") else f"{message}.", None


def _counted(count: int) -> str:
    return f"{count} item" if count == 1 else f"{count} items"


def _number(value: float) -> str:
    return f"{value:g}"


def _described(value: Any) -> str:
    """Name what was given, shortly: the reader has it before them."""
    if value is None:
        return "null"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'the text "{_shortened(value)}"'
    if isinstance(value, int | float):
        return f"{value:.6g}" if abs(value) < 1e300 else "a huge number"
    if isinstance(value, dict):
        return "an object"
    if isinstance(value, list):
        return "a list"
    return "that"


def _shortened(text: str) -> str:
    return text if len(text) <= _LONGEST_NAME else f"{text[:_LONGEST_NAME]}…"


def field_path(location: Sequence[int | str]) -> str:
    """Write a path as the contract does: ("readings", 3, "sigma") is ``readings[3].sigma``."""
    path = ""
    for part in location:
        path = join_field(path, f"[{part}]" if isinstance(part, int) else _shortened(part))
    return path


def install(app: FastAPI) -> None:
    """Make every error of the app's routes leave in the one shape."""
    app.add_exception_handler(HalfturnError, answer_halfturn_error)
    app.add_exception_handler(RequestValidationError, answer_invalid_request)
    app.add_exception_handler(HTTPException, answer_http_error)
    for kind in (RecursionError, OverflowError, FloatingPointError, np.linalg.LinAlgError):
        app.add_exception_handler(kind, answer_explained)


class LastResort:
    """Turns an error that nobody expected into a logged 500 of the one shape; there must be none."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass on; log and answer what is raised, as long as no answer has started."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        started = False

        async def send_noted(message: Message) -> None:
            nonlocal started
            started = started or message["type"] == "http.response.start"
            await send(message)

        try:
            await self.app(scope, receive, send_noted)
        except (ClientDisconnect, HTTPException):
            # The one has nobody left to answer; the other is answered by whoever raised it through us.
            raise
        except Exception as error:
            place = getattr(scope.get("route"), "path", "an address without a route")
            _log.error("unexpected error at %s\n%s", place, tell_places(error))
            if started:
                # The server ends the connection, since the answer is not complete.
                return
            answer = error_answer(
                500,
                UNEXPECTED,
                hint="The server's log has the particulars. Nothing that was kept is lost.",
            )
            await answer(scope, receive, send)
