"""An error shown as a page, where a person asked for a page; programs get the one shape of every error."""

from __future__ import annotations

import json
from collections.abc import Callable

from fastapi import FastAPI, Request
from starlette.exceptions import HTTPException
from starlette.responses import Response

from app.errors import HalfturnError
from app.web.error_answers import answer_halfturn_error, answer_http_error
from app.web.pages import templates

_NOT_PAGES = ("/api/", "/static/", "/openapi.json", "/live")


def wants_page(request: Request) -> bool:
    """Whether a browser asks for a page: it takes HTML and names an address of one."""
    takes_html = "text/html" in request.headers.get("accept", "")
    return takes_html and request.method in ("GET", "HEAD") and not request.url.path.startswith(_NOT_PAGES)


def _as_page(answer_error: Callable[[Request, Exception], Response]) -> Callable[[Request, Exception], Response]:
    def answer(request: Request, error: Exception) -> Response:
        plain = answer_error(request, error)
        if not wants_page(request):
            return plain
        told = json.loads(bytes(plain.body))["error"]
        context = {"told": told, "page": "error"}
        return templates.TemplateResponse(request, "error.html", context, status_code=plain.status_code)

    return answer


def install(app: FastAPI) -> None:
    """Show errors of pages as pages; to be called after ``error_answers.install``."""
    app.add_exception_handler(HalfturnError, _as_page(answer_halfturn_error))
    app.add_exception_handler(HTTPException, _as_page(answer_http_error))
