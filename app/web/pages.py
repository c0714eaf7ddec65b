"""The pages that a browser opens."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter, Request, Response
from starlette.templating import Jinja2Templates

from app.version import VERSION
from app.web.resources import plotly_version, templates_folder

router = APIRouter(include_in_schema=False)


def _with_constants(_request: Request) -> dict[str, Any]:
    """What every template may use."""
    return {"version": VERSION, "plotly_script": f"/static/plotly.min.js?v={plotly_version()}"}


templates = Jinja2Templates(directory=templates_folder(), context_processors=[_with_constants])


@router.api_route("/", methods=["GET", "HEAD"])
def front_page(request: Request) -> Response:
    """List what is there: the calls, each with the line that the OpenAPI document has for it."""
    paths = request.app.openapi()["paths"]
    calls = [
        {"method": method.upper(), "path": path, "summary": operation.get("summary", "")}
        for path, methods in paths.items()
        for method, operation in methods.items()
    ]
    return templates.TemplateResponse(request, "front.html", {"calls": calls})
