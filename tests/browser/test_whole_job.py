"""The whole job by keyboard only: from the first page to a frozen sheet, with Tab, Enter and typing."""

from __future__ import annotations

import re
from typing import Any

import httpx
from playwright.sync_api import Page, expect

from tests.processes import Served


def tab_to(page: Page, selector: str, most: int = 400) -> None:
    """Press Tab until the element has the focus; it must be reached, and the focus must be visible."""
    for _ in range(most):
        if page.evaluate("selector => document.activeElement?.matches(selector) ?? false", selector):
            outline = page.evaluate(
                "(() => { const s = getComputedStyle(document.activeElement);"
                " return s.outlineStyle !== 'none' && parseFloat(s.outlineWidth) > 0; })()"
            )
            assert outline, f"the focus on {selector} cannot be seen"
            return
        page.keyboard.press("Tab")
    raise AssertionError(f"Tab never reached {selector}")


def retype(page: Page, text: str) -> None:
    page.keyboard.press("Control+a")
    page.keyboard.type(text)


def fetch(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()


def test_from_the_first_page_to_a_frozen_sheet_by_keyboard_only(page: Page, served: Served) -> None:
    page.goto("/samples", wait_until="networkidle")
    tab_to(page, "#new-name")
    page.keyboard.type("boule 12")
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile("/tensor$"))
    page.wait_for_load_state("networkidle")
    sample = page.url.split("/")[-2]

    # The crystal: fold the strip open, type cell and group.
    tab_to(page, "#crystal summary")
    page.keyboard.press("Enter")
    for name, text in (
        ("a", "9.83"),
        ("b", "6.41"),
        ("c", "7.27"),
        ("alpha", "90"),
        ("beta", "107.4"),
        ("gamma", "90"),
    ):
        tab_to(page, f"#cell-{name}")
        retype(page, text)
    tab_to(page, "#group")
    retype(page, "2/m")
    page.keyboard.press("Enter")
    expect(page.locator("#strip-group")).to_contain_text("2/m")

    # The property and its unit.
    tab_to(page, "[data-open='property-dialog']")
    page.keyboard.press("Enter")
    tab_to(page, "#kind")
    page.keyboard.type("Thermal cond")
    tab_to(page, "#unit")
    retype(page, "W/(m K)")
    page.keyboard.press("Enter")
    expect(page.locator("#property-dialog")).to_be_hidden()

    # Readings: four rows typed into the grid.
    page.keyboard.press("Escape")
    page.goto(f"/samples/{sample}/readings", wait_until="networkidle")
    rows = (
        ("along", "(1 0 0)", "13.19", "0.12"),
        ("rod", "[0 1 0]", "24.62", "0.20"),
        ("rod", "[0 0 1]", "15.61", "0.12"),
        ("along", "(0 0 1)", "16.74", "0.12"),
        ("along", "(-2 0 1)", "12.32", "0.12"),
    )
    tab_to(page, "#add-row")
    page.keyboard.press("Enter")
    for number, row in enumerate(rows):
        for text in row:
            page.keyboard.type(text)
            page.keyboard.press("Tab")
        page.keyboard.press("Shift+Tab")
        if number < len(rows) - 1:
            page.keyboard.press("Enter")
    tab_to(page, "#add-row")
    expect(page.get_by_role("heading", level=1)).to_contain_text("5 readings give 4 cells")
    tab_to(page, ".use button")
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile("/tensor$"))
    page.wait_for_load_state("networkidle")
    expect(page.locator("[data-cell='22']")).to_contain_text("24.6")

    # Turn: a direction under z, then keys; a free cell is edited and undone.
    tab_to(page, "#put-on")
    retype(page, "(-2 0 1)")
    page.keyboard.press("Enter")
    expect(page.locator("#sentence")).to_contain_text("on n(−201)")
    page.keyboard.press("Shift+Tab")
    while not page.evaluate("document.activeElement.id === 'figure'"):
        page.keyboard.press("Shift+Tab")
    sentence = page.inner_text("#sentence")
    for _ in range(5):
        page.keyboard.press("ArrowUp")
    expect(page.locator("#sentence")).not_to_have_text(sentence)
    page.keyboard.press("Home")
    tab_to(page, "#undo")
    page.wait_for_timeout(600)
    before = fetch(served, sample)["revision"]
    page.keyboard.press("Enter")
    page.wait_for_timeout(500)
    assert fetch(served, sample)["revision"] != before

    # The sheet.
    tab_to(page, "nav a[href$='/sheet']")
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile("/sheet$"))
    page.wait_for_load_state("networkidle")
    tab_to(page, "form[action*='/sheets'] button")
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile(r"/sheets/\d+$"))
    expect(page.locator(".paper-sheet")).to_contain_text("boule 12")
