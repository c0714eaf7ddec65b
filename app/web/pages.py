"""The pages that a browser opens, and what every template may use."""

from __future__ import annotations

import json
from typing import Any

from fastapi import APIRouter, Request, Response
from fastapi.responses import RedirectResponse
from markupsafe import Markup
from starlette.templating import Jinja2Templates

from app.catalogue.listing import list_properties
from app.crystal.frame import list_letter_rules
from app.store.revisions import Kept
from app.version import VERSION
from app.web.group_choice import list_choices
from app.web.guide_pages import link_page
from app.web.kept import render_entry, render_sample
from app.web.keys import list_keys
from app.web.resources import plotly_version, templates_folder
from app.web.samples import list_samples, render_summary, store_of
from app.web.static_files import HashedAddresses
from app.web.terms import link_term
from app.web.typesetting import typeset

router = APIRouter(include_in_schema=False)

PAGES = (("tensor", "Tensor"), ("readings", "Readings"), ("cut", "Cut"), ("series", "Series"), ("sheet", "Sheet"))
"""The pages of a sample that are there, in the order of the way through it."""

GUIDE_OF = {"tensor": "tensor", "readings": "readings", "cut": "orientation", "series": "series", "sheet": "hand-over"}
"""The page of the guide that each page of a sample leads to."""


def _with_constants(_request: Request) -> dict[str, Any]:
    """What every template may use."""
    return {
        "version": VERSION,
        "plotly_script": f"/static/plotly.min.js?v={plotly_version()}",
        "pages": PAGES,
        "guide_of": GUIDE_OF,
        "list_keys": list_keys,
    }


templates = Jinja2Templates(directory=templates_folder(), context_processors=[_with_constants])
templates.env.add_extension(HashedAddresses)
templates.env.filters["typeset"] = typeset
templates.env.globals["term"] = link_term
templates.env.globals["guide"] = link_page


def embed_json(content: Any) -> Markup:
    """JSON for a data block of a page: no sign in it can end the block or begin a comment."""
    text = json.dumps(content, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    # Signs that mean something to a reader of HTML, and the line ends that old scripts stumble over.
    for sign in "<>&\u2028\u2029":
        text = text.replace(sign, f"\\u{ord(sign):04x}")
    return Markup(text)


def render_page(
    request: Request, template: str, sample_id: str, page: str, kept: Kept | None = None, **more: Any
) -> Response:
    """A page of one sample, of its newest revision or of the one in ``kept``.

    The template finds ``sample`` (the answer of the sample call), ``sample_json`` (the same for the data block),
    ``page`` (the key of the current page) and what the strip needs.
    """
    sample = render_sample(store_of(request).samples.get(sample_id) if kept is None else kept)
    context = {
        "sample": sample,
        "sample_json": embed_json(sample),
        "page": page,
        "catalogue": [render_entry(entry) for entry in list_properties()],
        "catalogue_json": embed_json([render_entry(entry) for entry in list_properties()]),
        "groups_json": embed_json(list_choices()),
        "rules": [rule.text for rule in list_letter_rules()],
        **more,
    }
    return templates.TemplateResponse(request, template, context)


@router.api_route("/", methods=["GET", "HEAD"])
def front_page(request: Request) -> Response:
    """Go to the tensor of the newest sample; an empty store has the demonstration samples put into it."""
    if request.app.state.store is None:
        return RedirectResponse("/calls", status_code=303)
    found = list_samples(store_of(request))
    return RedirectResponse(f"/samples/{found[0].sample_id}/tensor" if found else "/samples", status_code=303)


@router.api_route("/samples", methods=["GET", "HEAD"])
def samples_page(request: Request) -> Response:
    """The list of samples."""
    found = list_samples(store_of(request), archived=True)
    return templates.TemplateResponse(
        request, "samples.html", {"summaries": [render_summary(summary) for summary in found], "page": "samples"}
    )


@router.api_route("/calls", methods=["GET", "HEAD"])
def calls_page(request: Request) -> Response:
    """List the calls, each with the line that the OpenAPI document has for it."""
    paths = request.app.openapi()["paths"]
    calls = [
        {"method": method.upper(), "path": path, "summary": operation.get("summary", "")}
        for path, methods in paths.items()
        for method, operation in methods.items()
    ]
    return templates.TemplateResponse(request, "calls.html", {"calls": calls})
