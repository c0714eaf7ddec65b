"""What is handed over, in Chromium: the panel that saves it, and the report opened from the disk with no network."""

from __future__ import annotations

import io
from collections.abc import Iterator
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from PIL import Image, ImageChops
from playwright.sync_api import Browser, Page

from tests.processes import Served

HOSTILE = '</script><script>alert(1)</script>"><img src=x onerror=alert(1)>'


def copy_sample(served: Served, name: str = "Demonstration crystal") -> Any:
    httpx.get(served.url)
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == name)
    return httpx.post(f"{served.url}api/samples", json={"from": source, "name": "Handed over"}).json()


def save_report(served: Served, sample: Any, folder: Path, **query: str) -> str:
    answer = httpx.get(f"{served.url}api/samples/{sample['id']}/out/report.html", params=query)
    path = folder / "report.html"
    path.write_bytes(answer.content)
    return path.as_uri()


@pytest.fixture
def offline(browser: Browser) -> Iterator[Page]:
    """A page without a network; a script error, a dialog, a refused script or any request but the file fails."""
    context = browser.new_context(offline=True, viewport={"width": 1280, "height": 900})
    page = context.new_page()
    faults: list[str] = []
    opened: list[str] = []

    def look_at(request: Any) -> None:
        if urlsplit(request.url).scheme not in ("blob", "data"):
            opened.append(request.url)

    page.on("request", look_at)
    page.on("pageerror", lambda error: faults.append(f"script error: {error}"))
    page.on("dialog", lambda dialog: (faults.append(f"dialog: {dialog.message}"), dialog.dismiss()))
    page.on("console", lambda message: faults.append(message.text) if message.type == "error" else None)
    yield page
    context.close()
    assert faults == []
    assert len(opened) == 1, opened
    assert opened[0].startswith("file://")


def shoot(page: Page) -> Image.Image:
    return Image.open(io.BytesIO(page.locator("#view").screenshot())).convert("L")


def wait_for_scene(page: Page) -> None:
    page.locator("#view[data-drawn=yes]").wait_for(timeout=20000)
    page.wait_for_timeout(400)


def test_the_report_opens_from_the_disk_draws_its_scene_and_turns(
    served: Served, offline: Page, tmp_path: Path
) -> None:
    offline.goto(save_report(served, copy_sample(served), tmp_path))
    wait_for_scene(offline)
    offline.locator("#view").scroll_into_view_if_needed()
    before = shoot(offline)
    # Drawn: paper and ink, not one even ground.
    low, high = before.getextrema()
    assert high - low > 100
    assert sum(before.histogram()[:120]) > 1500
    box = offline.locator("#view").bounding_box()
    assert box is not None
    middle = box["x"] + box["width"] / 2, box["y"] + box["height"] / 2
    offline.mouse.move(*middle)
    offline.mouse.down()
    offline.mouse.move(middle[0] + 120, middle[1] + 30, steps=6)
    offline.mouse.up()
    offline.wait_for_timeout(400)
    dragged = shoot(offline)
    assert ImageChops.difference(before, dragged).getbbox() is not None
    offline.get_by_role("button", name="Turn left").click()
    offline.wait_for_timeout(400)
    assert ImageChops.difference(dragged, shoot(offline)).getbbox() is not None
    offline.get_by_role("button", name="Usual view").click()
    offline.wait_for_timeout(400)
    back = ImageChops.difference(before, shoot(offline))
    assert sum(back.histogram()[60:]) < 400


def test_hostile_texts_run_nothing(served: Served, offline: Page, tmp_path: Path) -> None:
    sample = copy_sample(served)
    sample = httpx.post(f"{served.url}api/samples/{sample['id']}/rename", json={"name": HOSTILE}).json()
    body = {"parent": sample["revision"], "change": {"notes": HOSTILE}}
    assert httpx.post(f"{served.url}api/samples/{sample['id']}/edit", json=body).status_code == 200
    offline.goto(save_report(served, sample, tmp_path))
    wait_for_scene(offline)
    assert offline.locator("h1").inner_text() == HOSTILE
    assert HOSTILE in offline.title()
    assert offline.locator("img").count() == 0


@pytest.mark.parametrize(("width", "scheme"), [(1280, "light"), (390, "dark")])
def test_the_report_is_accessible_and_fits(
    served: Served, offline: Page, tmp_path: Path, width: int, scheme: Any
) -> None:
    offline.set_viewport_size({"width": width, "height": 900})
    offline.emulate_media(color_scheme=scheme)
    offline.goto(save_report(served, copy_sample(served, "Second demonstration crystal"), tmp_path))
    wait_for_scene(offline)
    found = Axe().run(offline)
    assert found.violations_count == 0, found.generate_report()
    assert offline.evaluate("document.documentElement.scrollWidth <= innerWidth")


def test_without_a_script_everything_but_the_scene_is_there(served: Served, browser: Browser, tmp_path: Path) -> None:
    context = browser.new_context(java_script_enabled=False, offline=True)
    page = context.new_page()
    page.goto(save_report(served, copy_sample(served), tmp_path))
    assert page.get_by_text("13.20(8)").first.is_visible()
    assert page.locator("svg.picture").is_visible()
    assert page.get_by_text("The scene needs a script").is_visible()
    assert not page.get_by_role("button", name="Turn left").is_visible()
    context.close()


def open_panel(page: Page, sample: Any) -> None:
    page.goto(f"/samples/{sample['id']}/sheet", wait_until="networkidle")
    page.get_by_role("heading", name="Hand over").click()
    page.locator("[data-about]:not(:empty)").wait_for()


def save(page: Page, button: str) -> tuple[str, bytes]:
    with page.expect_download() as download:
        page.get_by_text(button, exact=True).click()
    return download.value.suggested_filename, Path(download.value.path()).read_bytes()


def test_the_panel_saves_files_and_draws_png_at_the_size_that_was_typed(page: Page, served: Served) -> None:
    open_panel(page, copy_sample(served))
    assert "mm per 1/√(W/(m·K))" in page.locator("[data-about]").inner_text()
    name, content = save(page, "Tensors, CSV")
    assert name == "Handed over tensors.csv"
    assert content.startswith(b"property,unit,frame")
    page.locator("#take-out [name=unit]").select_option("px")
    page.locator("[name=width]").fill("640")
    name, content = save(page, "Picture, PNG")
    assert name == "Handed over quadric.png"
    picture = Image.open(io.BytesIO(content))
    assert picture.width == 640
    assert 640 < picture.height < 1000
    low, high = picture.convert("L").getextrema()
    assert high - low > 150
    page.locator("#take-out [name=unit]").select_option("mm")
    page.locator("[name=width]").fill("50.8")
    _, content = save(page, "Stereogram, PNG")
    # 50.8 mm are two inches, at 300 dots each.
    assert Image.open(io.BytesIO(content)).width == 600
    _, content = save(page, "Stereogram, SVG")
    assert b'width="50.8mm"' in content


def test_a_refusal_is_told_at_its_field_and_goes_away(page: Page, served: Served) -> None:
    open_panel(page, copy_sample(served))
    width = page.locator("[name=width]")
    width.fill("99999")
    page.get_by_text("Picture, PNG", exact=True).click()
    row = page.locator(".out-row", has=width)
    assert "cannot be made" in row.locator(".fault").inner_text()
    assert width.get_attribute("aria-invalid") == "true"
    width.fill("120")
    save(page, "Picture, PNG")
    assert row.locator(".fault").is_hidden()
    assert width.get_attribute("aria-invalid") is None


@pytest.mark.parametrize("width", [1440, 390])
def test_the_open_panel_is_accessible_and_fits(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_panel(page, copy_sample(served))
    found = Axe().run(page)
    assert found.violations_count == 0, found.generate_report()
    assert page.evaluate("document.documentElement.scrollWidth <= innerWidth")
