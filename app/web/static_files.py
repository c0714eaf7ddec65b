"""What is served under /static: the tool's own files, and the plotting script from its installed package."""

from __future__ import annotations

import hashlib
import re
from functools import cache

from fastapi import APIRouter, Request, Response
from jinja2.ext import Extension
from starlette.responses import FileResponse
from starlette.staticfiles import StaticFiles
from starlette.types import Scope

from app.web.resources import plotly_script, plotly_version, static_folder

router = APIRouter(include_in_schema=False)

# Ask each time whether the file has changed: on loopback that costs a millisecond, and an update shows at once.
_ASK_EACH_TIME = "no-cache"
_FOR_A_YEAR = "public, max-age=31536000, immutable"
_STAMP = re.compile("[0-9a-f]{12}")


@router.api_route("/static/plotly.min.js", methods=["GET", "HEAD"])
def plotting_script(request: Request, v: str | None = None) -> Response:
    """The plotting script; asked for with its version it may be kept, since another version has another address."""
    keep = _FOR_A_YEAR if v == plotly_version() else _ASK_EACH_TIME
    return FileResponse(plotly_script(), media_type="text/javascript", headers={"Cache-Control": keep})


@cache
def fingerprint() -> str:
    """Twelve hexadecimal digits of the content of all static files, as they were when first asked for."""
    digest = hashlib.sha256()
    for path in sorted(static_folder().rglob("*")):
        if path.is_file():
            digest.update(path.relative_to(static_folder()).as_posix().encode() + b"\0")
            digest.update(hashlib.sha256(path.read_bytes()).digest())
    return digest.hexdigest()[:12]


class HashedAddresses(Extension):
    """Gives every static file in a template an address with the fingerprint.

    Scripts import each other by relative addresses, so that what they import is under the same fingerprint.
    """

    def preprocess(self, source: str, name: str | None, filename: str | None = None) -> str:
        """The source with its addresses changed."""
        return source.replace('"/static/', f'"/static/{fingerprint()}/')


class RevalidatedFiles(StaticFiles):
    """Static files: kept for good under the fingerprint, otherwise asked about before a browser uses them again."""

    async def get_response(self, path: str, scope: Scope) -> Response:
        """The file, or 304 where the browser has it."""
        first, _, rest = path.replace("\\", "/").partition("/")
        # A page that was opened before an update asks under the old fingerprint; what there is now must do.
        stamped = bool(rest) and _STAMP.fullmatch(first) is not None
        answer = await super().get_response(rest if stamped else path, scope)
        answer.headers["Cache-Control"] = _FOR_A_YEAR if stamped and first == fingerprint() else _ASK_EACH_TIME
        return answer
