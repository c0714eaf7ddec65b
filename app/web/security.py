"""What stands before every route: who may ask, how much may be sent, and what a browser may do with the answer.

The server listens on the loopback address only, but any page open in the same browser can send requests there. So the
Host must be a loopback name (a foreign name that was made to resolve to 127.0.0.1 is refused), and an Origin, where a
browser states one, must be the very origin that is being asked. All three are plain ASGI, so that they hold for
WebSockets as they do for HTTP and add nothing to the time of a turn.
"""

from __future__ import annotations

import re

from starlette.datastructures import Headers, MutableHeaders
from starlette.exceptions import HTTPException
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from app.web.error_answers import error_answer

MAX_BODY_BYTES = 8 * 1024 * 1024
"""The largest request body, and the largest WebSocket message, in bytes."""

_LOOPBACK_HOST = re.compile(r"(127\.0\.0\.1|localhost|\[::1\])(:[0-9]{1,5})?", re.IGNORECASE | re.ASCII)

CONTENT_SECURITY_POLICY = "; ".join(
    [
        "default-src 'self'",
        "script-src 'self'",
        # The plotting script writes style attributes and a style sheet of its own.
        "style-src 'self' 'unsafe-inline'",
        # Pictures that the page makes itself, to be saved or printed.
        "img-src 'self' data: blob:",
        "connect-src 'self'",
        "font-src 'self'",
        "object-src 'none'",
        "base-uri 'none'",
        "form-action 'self'",
        "frame-ancestors 'none'",
    ]
)

ANSWER_HEADERS = {
    "Content-Security-Policy": CONTENT_SECURITY_POLICY,
    "X-Content-Type-Options": "nosniff",
    "X-Frame-Options": "DENY",
    # Not "no-referrer": under that, browsers state the Origin of a page's own form as "null".
    "Referrer-Policy": "same-origin",
    "Cross-Origin-Opener-Policy": "same-origin",
    "Cross-Origin-Resource-Policy": "same-origin",
}


class BodyTooLargeError(HTTPException):
    """The request body is over the limit; an HTTPException, so that whoever reads the body lets it through."""

    def __init__(self) -> None:
        super().__init__(
            413, f"The request is too large: its body may have {MAX_BODY_BYTES // 2**20} MiB ({MAX_BODY_BYTES} bytes)."
        )


class AnswerHeaders:
    """Puts the headers that restrain a browser on every answer, refusals and failures included."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass on, adding the headers to whatever answer starts."""

        async def send_with_headers(message: Message) -> None:
            if message["type"] in ("http.response.start", "websocket.http.response.start"):
                headers = MutableHeaders(scope=message)
                for name, value in ANSWER_HEADERS.items():
                    headers[name] = value
                headers.setdefault("Cache-Control", "no-store")
            await send(message)

        await self.app(scope, receive, send_with_headers)


class LoopbackOnly:
    """Refuses requests whose Host is not a loopback name or whose Origin is not the origin that is asked."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass on what comes from this machine's own pages and programs; answer 403 to the rest."""
        if scope["type"] not in ("http", "websocket"):
            await self.app(scope, receive, send)
            return
        refusal = _refusal(Headers(scope=scope))
        if refusal is None:
            await self.app(scope, receive, send)
        elif scope["type"] == "websocket" and "websocket.http.response" not in scope.get("extensions", {}):
            await send({"type": "websocket.close", "code": 1008, "reason": "foreign Host or Origin"})
        else:
            message, field, hint = refusal
            await error_answer(403, message, field=field, hint=hint)(scope, receive, send)


def _refusal(headers: Headers) -> tuple[str, str, str] | None:
    """Say why a request with these headers is refused (message, field, hint), or None where it is welcome."""
    hosts = headers.getlist("host")
    if len(hosts) != 1 or _LOOPBACK_HOST.fullmatch(hosts[0]) is None:
        return (
            "This server answers only requests addressed to this machine itself.",
            "Host",
            "Use the address that was printed at the start, with 127.0.0.1 or localhost.",
        )
    origins = headers.getlist("origin")
    if origins and (len(origins) != 1 or origins[0].lower() != f"http://{hosts[0]}".lower()):
        return (
            "This server does not answer pages of another origin.",
            "Origin",
            "Make the call from the tool's own page, or from a program that sends no Origin.",
        )
    return None


class BodyLimit:
    """Refuses bodies over MAX_BODY_BYTES, by what they announce and by what arrives."""

    def __init__(self, app: ASGIApp) -> None:
        self.app = app

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass on, counting the bytes while they are read; answer 413 when they are too many."""
        if scope["type"] != "http":
            await self.app(scope, receive, send)
            return
        announced = Headers(scope=scope).get("content-length", "")
        too_large = BodyTooLargeError()
        if announced.isascii() and announced.isdigit() and len(announced) < 20 and int(announced) > MAX_BODY_BYTES:
            await error_answer(too_large.status_code, too_large.detail)(scope, receive, send)
            return
        received = 0
        started = False

        async def receive_counted() -> Message:
            nonlocal received
            message = await receive()
            if message["type"] == "http.request":
                received += len(message.get("body", b""))
                if received > MAX_BODY_BYTES:
                    raise too_large
            return message

        async def send_noted(message: Message) -> None:
            nonlocal started
            started = started or message["type"] == "http.response.start"
            await send(message)

        try:
            await self.app(scope, receive_counted, send_noted)
        except BodyTooLargeError as error:
            if started:
                raise
            await error_answer(error.status_code, error.detail)(scope, receive, send)
