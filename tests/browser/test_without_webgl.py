"""The front page where the browser cannot draw in three dimensions."""

from __future__ import annotations

from pathlib import Path

import pytest
from playwright.sync_api import Playwright, expect

from tests.browser.conftest import FLAGS, sandbox_flags
from tests.processes import Served


@pytest.mark.usefixtures("browser")
def test_sentence_matrices_and_turning_are_there_without_webgl(
    driver: Playwright, chromium_path: Path, served: Served
) -> None:
    flags = [flag for flag in FLAGS if "gl" not in flag and "swiftshader" not in flag]
    browser = driver.chromium.launch(
        executable_path=str(chromium_path), args=[*flags, "--disable-3d-apis", "--disable-gpu", *sandbox_flags()]
    )
    try:
        page = browser.new_page(base_url=served.url, viewport={"width": 1440, "height": 900})
        faults: list[str] = []
        page.on("pageerror", lambda error: faults.append(str(error)))
        page.goto("/", wait_until="networkidle")
        assert page.evaluate("document.createElement('canvas').getContext('webgl')") is None
        expect(page.locator("#no-picture")).to_be_visible()
        expect(page.locator("#sentence")).to_contain_text("Along z")
        assert page.locator("svg.front path.outline").count() >= 1
        sentence = page.inner_text("#sentence")
        page.focus("#figure")
        for _ in range(4):
            page.keyboard.press("ArrowUp")
        expect(page.locator("#sentence")).not_to_have_text(sentence)
        assert page.locator("#plot").inner_text().strip() == ""
        assert faults == []
    finally:
        browser.close()
