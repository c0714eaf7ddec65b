"""A real browser: Debian's Chromium, driven by playwright.

Where Chromium is missing these tests skip and say so; with HALFTURN_REQUIRE_BROWSER=1 they fail instead.
"""

from __future__ import annotations

import os
import re
import shutil
from collections.abc import Iterator
from pathlib import Path
from urllib.parse import urlsplit

import pytest
from playwright.sync_api import Browser, ConsoleMessage, Page, Playwright, Request, sync_playwright

from tests.processes import Served

FLAGS = [
    "--disable-quic",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--no-first-run",
    # Drawing in software, so that pictures come out alike on machines with and without a graphics processor.
    "--use-gl=angle",
    "--use-angle=swiftshader",
    "--enable-unsafe-swiftshader",
    # All but the scene is painted by the processor itself, as browsers do where there is no graphics processor:
    # painting it through emulated graphics costs 100 ms a frame.
    "--disable-gpu-rasterization",
]


def sandbox_flags() -> list[str]:
    """The sandbox does not work for root, who runs the build."""
    return ["--no-sandbox"] if hasattr(os, "geteuid") and os.geteuid() == 0 else []


@pytest.fixture(scope="session")
def chromium_path() -> Path:
    found = next((name for name in ("chromium", "chromium-browser", "google-chrome") if shutil.which(name)), None)
    if found is None:
        reason = "Chromium is not installed, so nothing was tested in a browser"
        if os.environ.get("HALFTURN_REQUIRE_BROWSER") == "1":
            pytest.fail(reason)
        pytest.skip(reason)
    return Path(shutil.which(found) or "")


@pytest.fixture(scope="session")
def driver() -> Iterator[Playwright]:
    with sync_playwright() as playwright:
        yield playwright


@pytest.fixture(scope="session")
def browser(chromium_path: Path, driver: Playwright) -> Iterator[Browser]:
    browser = driver.chromium.launch(executable_path=str(chromium_path), args=[*FLAGS, *sandbox_flags()])
    yield browser
    browser.close()


@pytest.fixture
def page(browser: Browser, served: Served) -> Iterator[Page]:
    """A page of the served tool; script errors, policy violations and foreign requests fail the test at its end."""
    context = browser.new_context(base_url=served.url, viewport={"width": 1440, "height": 900})
    page = context.new_page()
    faults: list[str] = []

    def look_at(request: Request) -> None:
        if urlsplit(request.url).scheme.startswith(("http", "ws")) and urlsplit(request.url).netloc != here:
            faults.append(f"request to another host: {request.url}")

    here = urlsplit(served.url).netloc
    page.on("request", look_at)

    def read_failure(request: Request) -> None:
        # What was on its way when the page was left is no fault.
        if request.failure != "net::ERR_ABORTED":
            faults.append(f"failed request: {request.url}: {request.failure}")

    page.on("requestfailed", read_failure)
    page.on("pageerror", lambda error: faults.append(f"script error: {error}"))
    # A refusal is an answer, which the page tells; the browser notes every one of them as an error of its own.
    refusal = re.compile(r"Failed to load resource: the server responded with a status of (409|422)")

    def read_console(message: ConsoleMessage) -> None:
        if message.type == "error" and not refusal.match(message.text):
            faults.append(f"console: {message.text}")

    page.on("console", read_console)
    yield page
    context.close()
    assert faults == []
