"""The glossary as a page, and its lines for the notes that pages show beside a term."""

from __future__ import annotations

from fastapi import APIRouter, Request, Response

from app.web.answers import JsonAnswer
from app.web.pages import templates
from app.web.terms import TERMS

router = APIRouter(include_in_schema=False)


@router.api_route("/glossary", methods=["GET", "HEAD"])
def glossary_page(request: Request) -> Response:
    """Every term in one line with its source, by the alphabet."""
    shown = sorted(TERMS, key=lambda entry: entry.name.lower())
    return templates.TemplateResponse(request, "glossary.html", {"terms": shown, "page": "glossary"})


@router.get("/api/terms")
def list_terms() -> JsonAnswer:
    """Every term by its key."""
    return JsonAnswer({entry.key: {"name": entry.name, "line": entry.line, "source": entry.source} for entry in TERMS})
