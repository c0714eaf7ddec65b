"""The front page in a real browser."""

from __future__ import annotations

from playwright.sync_api import Page, expect


def test_a_free_cell_is_edited_and_the_tied_one_follows(page: Page) -> None:
    page.goto("/")
    page.click("[data-cell='13']")
    page.fill(".cell-input", "1.95(6)")
    page.keyboard.press("Enter")
    expect(page.locator("[data-cell='31']")).to_contain_text("1.95(6)")
    page.focus("[data-cell='12']")
    expect(page.locator("#why")).to_contain_text("the half-turn about x2 turns 12 into −12")


def test_looking_changes_no_number_and_turning_does(page: Page) -> None:
    page.goto("/")
    page.wait_for_timeout(1500)
    matrix = page.inner_text("#specimen-matrix")
    page.focus("#figure")
    drawn = page.inner_html("svg.front")
    page.keyboard.press("Shift+ArrowLeft")
    page.wait_for_function("drawn => document.querySelector('svg.front').innerHTML !== drawn", arg=drawn)
    assert page.inner_text("#specimen-matrix") == matrix
    page.keyboard.press("ArrowLeft")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText !== m", arg=matrix)
