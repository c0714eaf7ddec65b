"""The stereogram of the front page as a user works it: pressing, dragging, by keys, by touch, and for axe."""

from __future__ import annotations

import re

import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Browser, Page, expect

from tests.browser.test_tensor_page import fetch, open_copy
from tests.processes import Served

MATRIX_MOVED = "m => document.querySelector('#specimen-matrix').innerText !== m"


def unfold(page: Page, served: Served) -> str:
    sample = open_copy(page, served)
    page.click("#stereogram-panel > summary")
    expect(page.locator("#stereogram-disc svg.stereogram")).to_be_visible()
    page.locator("#stereogram-disc").scroll_into_view_if_needed()
    return sample


def place_of(page: Page, right: float, up: float, number: int = 0) -> tuple[float, float]:
    box = page.locator("#stereogram-disc .stereo-rim").nth(number).bounding_box()
    assert box is not None
    half = box["width"] / 2
    return box["x"] + half * (1 + right), box["y"] + half * (1 - up)


def mark_of(page: Page, kind: str) -> list[float]:
    found = page.locator(f"#stereogram-disc path.stereo-mark.{kind}").first.get_attribute("transform") or ""
    return [float(part) for part in re.findall(r"-?[\d.]+", found)]


def number_at(page: Page, label: str) -> str:
    return page.inner_text(f"#specimen-matrix [data-posed='{label}']").replace("\n", "")


def test_a_press_tells_and_puts_z_there(page: Page, served: Served) -> None:
    sample = unfold(page, served)
    page.mouse.click(*place_of(page, 0.0, 0.0))
    expect(page.locator("#stereogram-told")).to_contain_text("direction 0.000 0.000 1.000")
    # x3 is along c in this sample, so the row [001] is in the middle and is offered.
    offer = page.locator("#stereogram-offers button", has_text="[001]")
    expect(offer).to_be_visible()
    value = page.inner_text("#stereogram-told").split("(")[0].split(" ")[0]
    before = page.inner_text("#specimen-matrix")
    revision = fetch(served, sample)["revision"]
    offer.click()
    page.wait_for_function(MATRIX_MOVED, arg=before)
    page.wait_for_function("() => Math.abs(Number(/translate\\(([-\\d.]+)/.exec("
                           "document.querySelectorAll('#stereogram-disc path.specimen')[2].getAttribute('transform'))[1])) < 0.2")  # fmt: skip # noqa: E501
    assert number_at(page, "zz").startswith(value[:3])
    page.wait_for_timeout(900)
    kept = fetch(served, sample)
    assert kept["revision"] > revision
    assert kept["document"]["pose"]["exact"] == ["z", "[0 0 1]"]


def test_a_drag_turns_the_specimen_and_the_matrix_follows(page: Page, served: Served) -> None:
    sample = unfold(page, served)
    before, mark = page.inner_text("#specimen-matrix"), mark_of(page, "specimen")
    revision = fetch(served, sample)["revision"]
    page.mouse.move(*place_of(page, 0.1, 0.1))
    page.mouse.down()
    page.mouse.move(*place_of(page, 0.35, 0.3), steps=5)
    page.wait_for_function(MATRIX_MOVED, arg=before)
    page.mouse.up()
    page.wait_for_timeout(900)
    assert mark_of(page, "specimen") != mark
    assert fetch(served, sample)["revision"] == revision + 1


def test_the_keyboard_moves_a_cursor_and_puts_z_there(page: Page, served: Served) -> None:
    unfold(page, served)
    page.focus("#stereogram-disc")
    for _ in range(3):
        page.keyboard.press("Shift+ArrowRight")
    # Thirty degrees from x3 toward x2: sin 30° and cos 30°.
    expect(page.locator("#stereogram-told")).to_contain_text("direction 0.000 0.500 0.866")
    before = page.inner_text("#specimen-matrix")
    page.keyboard.press("Enter")
    page.wait_for_function(MATRIX_MOVED, arg=before)


def test_projection_hemispheres_middle_and_layers(page: Page, served: Served) -> None:
    unfold(page, served)
    page.check("#stereogram-form [name=projection][value=area]")
    expect(page.locator("#stereogram-words")).to_contain_text("Equal-area")
    page.check("#stereogram-form [name=discs][value=two]")
    expect(page.locator("#stereogram-disc svg.stereogram")).to_have_count(2)
    page.check("#stereogram-form [name=centre][value=z]")
    expect(page.locator("#stereogram-words")).to_contain_text("The specimen is held")
    page.mouse.click(*place_of(page, 0.0, 0.0, 1))
    # The far disc has −z in its middle; its cursor is there and not in the near one.
    expect(page.locator("#stereogram-disc svg[data-side=far] path.cursor")).to_have_count(1)
    expect(page.locator("#stereogram-disc svg[data-side=near] path.cursor")).to_have_count(0)
    page.uncheck("#stereogram-form [name=layers][value=normals]")
    expect(page.locator("#stereogram-disc path.stereo-mark.normal")).to_have_count(0)
    page.check("#stereogram-form [name=layers][value=taken]")
    page.check("#stereogram-form [name=layers][value=proposed]")
    page.fill("#stereogram-form [name=typed]", "1 0 0")
    page.keyboard.press("Tab")
    expect(page.locator("#stereogram-fault")).to_be_visible()
    page.fill("#stereogram-form [name=typed]", "(1 0 0)")
    page.keyboard.press("Tab")
    expect(page.locator("#stereogram-fault")).to_be_hidden()
    expect(page.locator("#stereogram-words")).to_contain_text("points at the reader")
    page.click("#stereogram-words summary")
    expect(page.locator("#stereogram-words")).to_contain_text("Principal axes")


@pytest.mark.parametrize("width", [390, 1440])
def test_nothing_is_left_for_axe_and_nothing_sticks_out(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 844})
    unfold(page, served)
    page.mouse.click(*place_of(page, 0.2, 0.3))
    expect(page.locator("#stereogram-put")).to_be_visible()
    page.click("#stereogram-words summary")
    assert page.evaluate("document.documentElement.scrollWidth - innerWidth") <= 0
    found = Axe().run(page, options={"resultTypes": ["violations"]})
    assert [(entry["id"], [node["html"] for node in entry["nodes"]]) for entry in found.response["violations"]] == []


def test_a_finger_asks_and_puts(browser: Browser, served: Served) -> None:
    context = browser.new_context(base_url=served.url, viewport={"width": 390, "height": 844}, has_touch=True)
    page = context.new_page()
    unfold(page, served)
    page.touchscreen.tap(*place_of(page, 0.3, 0.2))
    expect(page.locator("#stereogram-put")).to_be_visible()
    before = page.inner_text("#specimen-matrix")
    page.locator("#stereogram-offers button").last.tap()
    page.wait_for_function(MATRIX_MOVED, arg=before)
    context.close()
