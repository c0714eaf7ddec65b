"""The Sheet page in Chromium: one page of either paper, its printed text, and freezing by keyboard."""

from __future__ import annotations

import io
import re
from typing import Any

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import expect
from pypdf import PdfReader

from tests.processes import Served


def open_sheet(page: Any, served: Served) -> Any:
    """Open the sheet of a fresh copy of the demonstration sample; the sample."""
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == "Demonstration crystal")
    made = httpx.post(f"{served.url}api/samples", json={"from": source}).json()
    page.goto(f"/samples/{made['id']}/sheet", wait_until="networkidle")
    return made


@pytest.mark.parametrize("paper", ["A4", "Letter"])
def test_it_prints_on_one_page_with_everything_on_it(page: Any, served: Served, paper: str) -> None:
    open_sheet(page, served)
    printed = PdfReader(io.BytesIO(page.pdf(format=paper)))
    assert len(printed.pages) == 1
    text = re.sub(r"\s+", " ", printed.pages[0].extract_text())
    for wanted in (
        "Draft, not frozen",
        "9.83 6.41 7.27 Å",
        "2/m, unique b",
        "off by 1.3°",
        "12.48(8)",
        "13.20(8)",
        "16.84(9)",
        "Local rules and licensed practice",
        "X-rays",
        "Saw and polisher",
        "Dust, slurry and coolant",
        "cleaving material",
        "Oriented and cut by",
        "Checked by",
    ):
        assert wanted in text, wanted
    # What steers the page is not printed.
    assert "Freeze this sheet" not in text
    assert "Edit the crystal" not in text


def test_it_is_legible_in_grey(page: Any, served: Served) -> None:
    open_sheet(page, served)
    page.emulate_media(media="print")
    # On paper every mark and letter is a grey dark enough on white: at most 0x55 of 0xff.
    colours = page.evaluate(
        """() => [...document.querySelectorAll('.paper-sheet *')].flatMap(e => { const s = getComputedStyle(e);
             return [s.color, e.tagName === 'path' ? s.stroke : s.color]; })"""
    )
    for colour in set(colours):
        parts = [int(part) for part in re.findall(r"\d+", colour)[:3]]
        assert not parts or max(parts) - min(parts) == 0, colour
        assert not parts or max(parts) <= 0x99 or parts == [255, 255, 255], colour


def test_freezing_by_keyboard_leads_to_the_frozen_sheet(page: Any, served: Served) -> None:
    open_sheet(page, served)
    page.get_by_role("button", name="Freeze this sheet").focus()
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile(r"/sheets/\d+"))
    assert page.get_by_text(re.compile(r"^Sheet \d+$")).first.is_visible()


def test_a_frozen_sheet_is_marked_as_superseded_when_the_sample_moves_on(page: Any, served: Served) -> None:
    sample = open_sheet(page, served)
    page.get_by_role("button", name="Freeze this sheet").click()
    page.wait_for_url(re.compile(r"/sheets/\d+"))
    address = page.url
    article = page.locator(".paper-sheet").inner_text()
    assert "superseded" not in article
    httpx.post(
        f"{served.url}api/samples/{sample['id']}/edit",
        json={"parent": sample["revision"], "change": {"free": {"11": "14.90(8)"}}},
    ).raise_for_status()
    page.goto(address, wait_until="networkidle")
    expect(page.locator(".stamp .old")).to_have_text("superseded")
    expect(page.locator(".paper-sheet")).to_contain_text("13.20(8)")
    page.get_by_role("link", name="To the sample's draft").click()
    expect(page.locator(".frozen")).to_contain_text("superseded")
    expect(page.locator(".paper-sheet")).to_contain_text("14.90(8)")


@pytest.mark.parametrize("width", [390, 1024, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Any, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_sheet(page, served)
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []
