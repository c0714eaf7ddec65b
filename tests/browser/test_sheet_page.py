"""The Sheet page in Chromium: one page of either paper, and freezing by keyboard."""

from __future__ import annotations

import re
from typing import Any

import httpx
import pytest

from tests.processes import Served


def open_sheet(page: Any, served: Served) -> None:
    newest = httpx.get(served.url).headers["location"]
    page.goto(newest.replace("/tensor", "/sheet"), wait_until="networkidle")


@pytest.mark.parametrize("paper", ["A4", "Letter"])
def test_it_prints_on_one_page(page: Any, served: Served, paper: str) -> None:
    open_sheet(page, served)
    printed = page.pdf(format=paper)
    assert len(re.findall(rb"/Type\s*/Page\b", printed)) == 1


def test_freezing_by_keyboard_leads_to_the_frozen_sheet(page: Any, served: Served) -> None:
    open_sheet(page, served)
    page.get_by_role("button", name="Freeze this sheet").focus()
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile(r"/sheets/\d+"))
    assert page.get_by_text(re.compile(r"^Sheet \d+$")).first.is_visible()


@pytest.mark.parametrize("width", [390, 2560])
def test_it_does_not_scroll_sideways(page: Any, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_sheet(page, served)
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
