"""Putting the server together: routes, errors, security."""

from __future__ import annotations

from pathlib import Path

from fastapi import FastAPI
from starlette.middleware import Middleware

from app.store import open_store
from app.version import VERSION
from app.web import (
    api_page,
    bar_questions,
    calculation,
    campaign_calls,
    consequences_page,
    cut_page,
    error_answers,
    error_page,
    exchange,
    frame_question,
    glossary_page,
    guide,
    live,
    next_cuts,
    optics_calls,
    outputs,
    pages,
    part_sheet,
    readings_closer,
    readings_page,
    readings_table,
    samples,
    section_page,
    seek_calls,
    series_calls,
    series_page,
    sheet_page,
    sought_page,
    spots,
    stage_calls,
    stages,
    static_files,
    stereogram_panel,
    tensor_copies,
    tensor_page,
    tensor_series,
    twin_question,
)
from app.web.access import Access
from app.web.answers import JsonAnswer
from app.web.resources import static_folder
from app.web.security import AnswerHeaders, BodyLimit, Gate

DESCRIPTION = """\
Tensor properties of single crystals: what symmetry allows, what readings on cut bars tell, and how a part must be cut.

Every call carries all that it needs and stores nothing. Angles are degrees, lengths angstrom unless said, values bare
numbers in the caller's unit; what does not exist is null. The specimen axes are the rows of a pose's matrix C, written
in the crystal frame; a tensor goes over as C T Cᵀ.
"""


def create_app(data_dir: Path | None = None, access: Access | None = None) -> FastAPI:
    """Make the ASGI application.

    Args:
        data_dir: where stored work is kept; kept in ``app.state.data_dir``, made by whoever first stores something.
        access: under which names it answers and which token it demands; loopback without a token unless given.
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
            Middleware(Gate, access=access),
            Middleware(BodyLimit),
            Middleware(error_answers.LastResort),
        ],
    )
    app.state.data_dir = data_dir
    app.state.store = None if data_dir is None else open_store(data_dir)
    error_answers.install(app)
    error_page.install(app)
    api_page.install(app)
    app.include_router(pages.router)
    app.include_router(glossary_page.router)
    app.include_router(api_page.router)
    app.include_router(samples.router)
    app.include_router(exchange.router)
    app.include_router(tensor_page.router)
    app.include_router(live.router)
    app.include_router(readings_page.router)
    app.include_router(tensor_copies.router)
    app.include_router(next_cuts.router)
    app.include_router(readings_closer.router)
    app.include_router(readings_table.router)
    app.include_router(frame_question.router)
    app.include_router(part_sheet.router)
    app.include_router(cut_page.page_router)
    app.include_router(consequences_page.router)
    app.include_router(section_page.router)
    app.include_router(stereogram_panel.router)
    app.include_router(cut_page.router)
    app.include_router(spots.router)
    app.include_router(stages.router)
    app.include_router(series_page.page_router)
    app.include_router(series_page.router)
    app.include_router(sheet_page.router)
    app.include_router(stage_calls.router)
    app.include_router(calculation.router)
    app.include_router(series_calls.router)
    app.include_router(optics_calls.router)
    app.include_router(seek_calls.router)
    app.include_router(campaign_calls.router)
    app.include_router(bar_questions.router)
    app.include_router(twin_question.router)
    app.include_router(sought_page.router)
    app.include_router(tensor_series.router)
    app.include_router(outputs.router)
    app.include_router(guide.router)
    app.include_router(static_files.router)
    app.mount("/static", static_files.RevalidatedFiles(directory=static_folder()), name="static")
    return app
