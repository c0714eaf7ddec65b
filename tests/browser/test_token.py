"""The way in with a token, in Chromium: the address that is printed opens the pages, their scripts and the channel."""

from __future__ import annotations

import re
from pathlib import Path

from playwright.sync_api import Browser, expect

from tests.processes import serving


def test_the_printed_address_opens_the_pages(browser: Browser, tmp_path: Path) -> None:
    token = "an-invented-token_0123456789"
    with serving(tmp_path / "data", "--token", token) as server:
        plain = server.url.partition("?")[0]
        context = browser.new_context()
        try:
            page = context.new_page()
            answer = page.goto(plain)
            assert answer is not None
            assert answer.status == 401
            page.goto(server.url)
            page.wait_for_url(re.compile(r"/samples"))
            assert token not in page.url
            (cookie,) = context.cookies()
            assert cookie["httpOnly"]
            assert cookie["sameSite"] == "Strict"
            page.goto(f"{plain}samples")
            expect(page.locator("h1")).to_be_visible()
            # What the pages' own scripts ask for carries the cookie, and the channel opens with it.
            asked = "fetch('/api/properties').then(answer => answer.status)"
            assert page.evaluate(asked) == 200
            opened = (
                "new Promise(done => { const live = new WebSocket(`ws://${location.host}/live`);"
                " live.onopen = () => done('open'); live.onerror = () => done('refused'); })"
            )
            assert page.evaluate(opened) == "open"
        finally:
            context.close()
