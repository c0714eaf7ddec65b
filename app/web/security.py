"""What stands before every route: who may ask, how much may be sent, and what a browser may do with the answer.

The server listens on the loopback address unless told otherwise, but any page open in the same browser can send
requests there. So the Host must name this machine (a foreign name that was made to resolve to 127.0.0.1 is refused);
an Origin, where a browser states one, must be the very origin that is being asked; and where a browser says that
another site is behind a request, only the opening of a page is let through. All are plain ASGI, so that they hold for
WebSockets as they do for HTTP and add nothing to the time of a turn. What ``access.py`` says of tokens is asked here.
"""

from __future__ import annotations

import html

from starlette.datastructures import Headers, MutableHeaders
from starlette.exceptions import HTTPException
from starlette.responses import HTMLResponse, Response
from starlette.types import ASGIApp, Message, Receive, Scope, Send

from app.web.access import Access
from app.web.error_answers import error_answer
from app.web.limits import MAX_BODY_BYTES

Refusal = tuple[int, str, str, str]
"""Status, message, field, hint."""

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


class Gate:
    """Refuses requests from elsewhere, and where a token is demanded, requests without it."""

    def __init__(self, app: ASGIApp, access: Access | None = None) -> None:
        self.app = app
        self.access = access or Access()

    async def __call__(self, scope: Scope, receive: Receive, send: Send) -> None:
        """Pass on what may come in; answer 403 or 401 to the rest."""
        if scope["type"] not in ("http", "websocket"):
            await self.app(scope, receive, send)
            return
        headers = Headers(scope=scope)
        refusal = _refuse_foreign(self.access, headers, scope)
        if refusal is None and self.access.token is not None:
            is_page = scope["type"] == "http" and scope["method"] == "GET"
            shown, rest = self.access.find_in_query(scope["query_string"]) if is_page else (False, "")
            if shown:
                await _let_in(self.access, scope["path"], rest)(scope, receive, send)
                return
            if not self.access.admits(headers):
                refusal = _NO_TOKEN
        if refusal is None:
            await self.app(scope, receive, send)
        elif scope["type"] == "websocket" and "websocket.http.response" not in scope.get("extensions", {}):
            await send({"type": "websocket.close", "code": 1008, "reason": f"refused: {refusal[2]}"})
        else:
            status, message, field, hint = refusal
            told = {"WWW-Authenticate": "Bearer"} if status == 401 else None
            await error_answer(status, message, field=field, hint=hint, headers=told)(scope, receive, send)


_NO_TOKEN: Refusal = (
    401,
    "This server asks for its token.",
    "token",
    "Open the whole address that was printed at the start; programs send the header Authorization: Bearer TOKEN.",
)


def _refuse_foreign(access: Access, headers: Headers, scope: Scope) -> Refusal | None:
    """Say why a request is refused, or None where it comes from this tool's own pages or from a program."""
    hosts = headers.getlist("host")
    if len(hosts) != 1 or not access.welcomes_host(hosts[0]):
        return (
            403,
            "This server answers only requests that are addressed to this machine by a name of its own.",
            "Host",
            "Use the address that was printed at the start.",
        )
    origins = headers.getlist("origin")
    if origins and (len(origins) != 1 or origins[0].lower() != f"http://{hosts[0]}".lower()):
        return (
            403,
            "This server does not answer pages of another origin.",
            "Origin",
            "Make the call from the tool's own page, or from a program that sends no Origin.",
        )
    # Browsers state it with every request to this machine, and no page can change it. A link to a page is let through.
    sites = headers.getlist("sec-fetch-site")
    opens_page = (
        scope["type"] == "http"
        and scope["method"] in ("GET", "HEAD")
        and headers.getlist("sec-fetch-mode") == ["navigate"]
        and headers.getlist("sec-fetch-dest") == ["document"]
    )
    if any(site not in ("same-origin", "none") for site in sites) and not opens_page:
        return (
            403,
            "This server does not answer what a page of another site asks for.",
            "Sec-Fetch-Site",
            "Make the call from the tool's own page, or from a program.",
        )
    return None


def _let_in(access: Access, path: str, query: str) -> Response:
    """Put the token into a cookie and go to the same address without it.

    A page that goes on by itself, not a redirect: a browser that follows a redirect from a link elsewhere would not
    send the cookie, since another site began it.
    """
    # A path that begins with two slashes would name another host.
    target = "/" + path.lstrip("/\\") + (f"?{query}" if query else "")
    page = (
        '<!doctype html><html lang="en-GB"><meta charset="utf-8"><title>Halfturn</title>'
        f'<meta http-equiv="refresh" content="0;url={html.escape(target)}">'
        f'<p><a href="{html.escape(target)}">To the pages</a></p></html>'
    )
    answer = HTMLResponse(page)
    answer.set_cookie(access.cookie, access.token or "", httponly=True, samesite="strict", path="/")
    return answer


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
