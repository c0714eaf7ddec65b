"""Undo in a browser, over a restart of the server."""

from __future__ import annotations

from pathlib import Path

from playwright.sync_api import Browser, expect

from tests.processes import serving


def test_a_change_is_undone_and_done_again_after_a_restart(browser: Browser, tmp_path: Path) -> None:
    data = tmp_path / "data"
    with serving(data) as before:
        page = browser.new_page(base_url=before.url)
        page.goto("/", wait_until="networkidle")
        address = page.url.removeprefix(before.url)
        page.click("[data-cell='11']")
        page.fill(".cell-input", "14.90(8)")
        page.keyboard.press("Enter")
        expect(page.locator("[data-cell='11']")).to_contain_text("14.90(8)")
        page.close()
        before.process.kill()
        before.process.wait()
    with serving(data) as after:
        page = browser.new_page(base_url=after.url)
        page.goto(address, wait_until="networkidle")
        expect(page.locator("[data-cell='11']")).to_contain_text("14.90(8)")
        page.get_by_role("button", name="Undo", exact=True).first.click()
        expect(page.locator("[data-cell='11']")).to_contain_text("13.20(8)")
        page.get_by_role("button", name="Redo", exact=True).click()
        expect(page.locator("[data-cell='11']")).to_contain_text("14.90(8)")
        page.close()
