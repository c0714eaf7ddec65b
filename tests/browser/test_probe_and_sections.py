"""The probe on the surface and the section by a plane, as a user works them: by mouse and by keys."""

from __future__ import annotations

import re

from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.browser.test_tensor_page import open_copy
from tests.processes import Served


def read_number(text: str) -> float:
    found = re.search(r"[−-]?\d+(\.\d+)?", text)
    assert found is not None, text
    return float(found[0].replace("−", "-"))


def test_the_probe_is_dragged_over_the_surface_and_no_matrix_moves(page: Page, served: Served) -> None:
    open_copy(page, served)
    matrix = page.inner_text("#specimen-matrix")
    page.click("#probe-toggle")
    expect(page.locator("#probe-toggle")).to_have_attribute("aria-pressed", "true")
    expect(page.locator("#probe-value")).not_to_have_text("–")
    first = page.inner_text("#probe-value")
    box = page.locator(".stage").bounding_box()
    assert box is not None
    x, y = box["x"] + box["width"] / 2, box["y"] + box["height"] / 2
    page.mouse.move(x, y)
    page.mouse.down()
    page.mouse.move(x + 40, y + 30, steps=4)
    page.mouse.up()
    expect(page.locator("#probe-value")).not_to_have_text(first)
    expect(page.locator("#probe-flux")).to_contain_text("° off the probe")
    expect(page.locator("#probe-place")).to_contain_text("[")
    # Told apart by dash and end, and the foot of the arrows is under the hand.
    expect(page.locator("path.probe-flux")).to_have_count(1)
    under_hand = """([x, y]) => {
        const box = document.querySelector('path.probe-foot').getBoundingClientRect();
        return Math.hypot(box.x + box.width / 2 - x, box.y + box.height / 2 - y) < 3;
    }"""
    page.wait_for_function(under_hand, arg=[x + 40, y + 30])
    assert page.inner_text("#specimen-matrix") == matrix
    # Turning goes on beside the surface, and the probe stays on its direction of the crystal.
    place = page.inner_text("#probe-place")
    page.focus("#figure")
    page.keyboard.press("ArrowLeft")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText !== m", arg=matrix)
    assert page.inner_text("#probe-place") == place


def test_the_probe_goes_by_keys_and_is_put_away(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.keyboard.press("p")
    expect(page.locator("#probe-panel")).to_be_visible()
    expect(page.locator("#probe-value")).not_to_have_text("–")
    before = page.inner_text("#probe-flux")
    page.focus("#probe-panel")
    for _ in range(8):
        page.keyboard.press("ArrowRight")
    expect(page.locator("#probe-flux")).not_to_have_text(before)
    page.keyboard.press("p")
    expect(page.locator("#probe-panel")).to_be_hidden()
    expect(page.locator("path.probe-line")).to_have_count(0)


def test_a_section_follows_the_slider_the_plane_and_the_probe(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#section-panel summary")
    expect(page.locator("#section-result svg.polar")).to_be_visible()
    expect(page.locator("#section-result svg.mohr")).to_be_visible()
    point = page.locator("#section-result svg.mohr circle.section-point")
    here = point.get_attribute("cx"), point.get_attribute("cy")
    page.fill("#section-angle", "40")
    expect(page.locator("#section-angle-text")).to_have_text("40.0°")
    assert (point.get_attribute("cx"), point.get_attribute("cy")) != here
    page.fill("#section-form [name=normal]", "[0 1 0]")
    page.keyboard.press("Tab")
    expect(page.locator("#section-result .section-numbers")).to_contain_text("[100]")
    page.fill("#section-form [name=normal]", "0 1 0")
    page.keyboard.press("Tab")
    expect(page.locator("#section-form .fault")).to_contain_text("does not say whether it is a row")
    page.fill("#section-form [name=normal]", "")
    page.keyboard.press("Tab")
    expect(page.locator("#section-form .fault")).to_be_hidden()
    page.click("#probe-toggle")
    page.focus("#probe-panel")
    expect(page.locator("#section-angle-text")).not_to_have_text("40.0°")
    angle = page.inner_text("#section-angle-text")
    for _ in range(15):
        page.keyboard.press("ArrowRight")
    expect(page.locator("#section-angle-text")).not_to_have_text(angle)


def test_nothing_is_left_for_axe(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#section-panel summary")
    page.click("#probe-toggle")
    expect(page.locator("#section-result svg.mohr")).to_be_visible()
    found = Axe().run(page, options={"resultTypes": ["violations"]})
    assert [(entry["id"], [node["html"] for node in entry["nodes"]]) for entry in found.response["violations"]] == []
