"""Putting the server together: routes, errors, security."""

from __future__ import annotations

import importlib
from pathlib import Path

from fastapi import APIRouter, FastAPI
from starlette.middleware import Middleware

from app.version import VERSION
from app.web import error_answers, pages, static_files
from app.web.answers import JsonAnswer
from app.web.resources import static_folder
from app.web.security import AnswerHeaders, BodyLimit, LoopbackOnly

DESCRIPTION = """\
Tensor properties of single crystals: what symmetry allows, what readings on cut bars tell, and how a part must be cut.

Every call carries all that it needs and stores nothing. Angles are degrees, lengths angstrom unless said, values bare
numbers in the caller's unit; what does not exist is null. The specimen axes are the rows of a pose's matrix C, written
in the crystal frame; a tensor goes over as C T Cᵀ.
"""


def create_app(data_dir: Path | None = None) -> FastAPI:
    """Make the ASGI application.

    Args:
        data_dir: where stored work is kept; kept in ``app.state.data_dir``, made by whoever first stores something.
    """
    app = FastAPI(
        title="Halfturn",
        version=VERSION,
        description=DESCRIPTION,
        # The usual documentation pages load their script from outside this machine.
        docs_url=None,
        redoc_url=None,
        redirect_slashes=False,
        default_response_class=JsonAnswer,
        # The first is outermost, so that every answer gets its headers.
        middleware=[
            Middleware(AnswerHeaders),
            Middleware(LoopbackOnly),
            Middleware(BodyLimit),
            Middleware(error_answers.LastResort),
        ],
    )
    app.state.data_dir = data_dir
    error_answers.install(app)
    app.include_router(pages.router)
    for router in _calculation_routers():
        app.include_router(router)
    app.include_router(static_files.router)
    app.mount("/static", static_files.RevalidatedFiles(directory=static_folder()), name="static")
    return app


def _calculation_routers() -> list[APIRouter]:
    try:
        calculation = importlib.import_module("app.web.calculation")
    except ModuleNotFoundError as error:
        if error.name != "app.web.calculation":
            raise
        return []
    return [calculation.router]
