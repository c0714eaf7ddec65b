"""What is served under /static: the tool's own files, and the plotting script from its installed package."""

from __future__ import annotations

from fastapi import APIRouter, Request, Response
from starlette.responses import FileResponse
from starlette.staticfiles import StaticFiles
from starlette.types import Scope

from app.web.resources import plotly_script, plotly_version

router = APIRouter(include_in_schema=False)

# Ask each time whether the file has changed: on loopback that costs a millisecond, and an update shows at once.
_ASK_EACH_TIME = "no-cache"
_FOR_A_YEAR = "public, max-age=31536000, immutable"


@router.api_route("/static/plotly.min.js", methods=["GET", "HEAD"])
def plotting_script(request: Request, v: str | None = None) -> Response:
    """The plotting script; asked for with its version it may be kept, since another version has another address."""
    keep = _FOR_A_YEAR if v == plotly_version() else _ASK_EACH_TIME
    return FileResponse(plotly_script(), media_type="text/javascript", headers={"Cache-Control": keep})


class RevalidatedFiles(StaticFiles):
    """Static files that a browser keeps, but asks about before it uses them again."""

    async def get_response(self, path: str, scope: Scope) -> Response:
        """The file, or 304 where the browser has it."""
        answer = await super().get_response(path, scope)
        answer.headers["Cache-Control"] = _ASK_EACH_TIME
        return answer
