"""The guide: the job walked through, a page per panel, the frame rules with a drawing each, printed values, limits."""

from __future__ import annotations

from functools import cache
from typing import Any, Final

from fastapi import APIRouter, Request, Response

from app.crystal.crystal import build_crystal
from app.crystal.frame import list_letter_rules
from app.errors import NotFoundError
from app.web.drawing import draw_frame
from app.web.guide_pages import PAGES, Page, find_page
from app.web.pages import templates

router = APIRouter(include_in_schema=False)

EXAMPLE_CELL: Final = (7.1, 8.4, 6.2, 84.0, 108.0, 97.0)
"""Invented, triclinic: in it no two of the 36 frames are one."""


@cache
def draw_rules() -> tuple[dict[str, Any], ...]:
    """The 36 frame rules of letters, each with its sentence and a drawing of one invented triclinic cell."""
    drawn = []
    for rule in list_letter_rules():
        crystal = build_crystal(EXAMPLE_CELL, "1", frame=rule.text)
        drawn.append({"text": rule.text, "sentence": rule.sentence, "drawing": draw_frame(crystal)})
    return tuple(drawn)


@router.api_route("/guide", methods=["GET", "HEAD"])
def guide(request: Request) -> Response:
    """The contents, with the question of each page."""
    return _show(request, "guide/contents.html", None)


@router.api_route("/guide/{slug}", methods=["GET", "HEAD"])
def guide_page(slug: str, request: Request) -> Response:
    """One page. Raises NotFoundError for any other."""
    page = find_page(slug)
    if page is None:
        raise NotFoundError("The guide has no such page.", hint="Its contents are at /guide.")
    return _show(request, f"guide/{page.slug}.html", page)


def _show(request: Request, template: str, page: Page | None) -> Response:
    place = PAGES.index(page) if page else -1
    following = PAGES[place + 1] if place + 1 < len(PAGES) else None
    rules = draw_rules() if page and page.slug == "crystal" else ()
    context = {"guide_pages": PAGES, "guide_page": page, "following": following, "rules": rules, "page": "guide"}
    return templates.TemplateResponse(request, template, context)
