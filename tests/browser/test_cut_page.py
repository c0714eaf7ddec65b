"""The Cut page in a real browser: from two sightings to a printed sheet."""

from __future__ import annotations

import io
import re
from typing import Any

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect
from pypdf import PdfReader

from tests.processes import Served


def open_cut(page: Page, served: Served) -> str:
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == "Demonstration crystal")
    made = str(httpx.post(f"{served.url}api/samples", json={"from": source}).json()["id"])
    page.goto(f"/samples/{made}/cut", wait_until="networkidle")
    return made


def fetch(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()


def sight(page: Page, direction: str, *dials: str) -> None:
    page.get_by_label("Direction of a new sighting").fill(direction)
    for number, dial in enumerate(dials):
        page.locator(f"#sighting-new-{number}").fill(dial)
    page.keyboard.press("Enter")


def test_from_two_sightings_to_a_printed_sheet(page: Page, served: Served) -> None:
    sample = open_cut(page, served)
    page.get_by_role("button", name="Make a part").click()
    page.get_by_label("Plane ( ) or row [ ]").fill("(-2 0 1)")
    page.keyboard.press("Enter")
    expect(page.locator("#headline")).to_contain_text("along n(−201)")
    sight(page, "(1 0 0)", "12", "-4", "3")
    expect(page.get_by_label("Direction of sighting 1")).to_have_value("(1 0 0)")
    # One sighting leaves the turn about it open, and the page says so.
    expect(page.locator("#cut-stage")).to_contain_text("leaves the turn about it open")
    sight(page, "(0 0 1)", "-60.4", "-4", "3")
    expect(page.locator(".settings .dials")).to_contain_text("turn")
    expect(page.locator("#cut-stage")).to_contain_text("72.60°")
    assert len(fetch(served, sample)["document"]["sightings"]) == 2
    page.get_by_role("link", name="Sheet for the workshop").click()
    page.wait_for_url(re.compile("/cut/sheet$"))
    page.get_by_role("button", name="Freeze this sheet").click()
    page.wait_for_url(re.compile(r"/sheets/\d+$"))
    for paper in ("A4", "Letter"):
        printed = PdfReader(io.BytesIO(page.pdf(format=paper)))
        assert len(printed.pages) == 1
    text = re.sub(r"\s+", " ", printed.pages[0].extract_text())
    for wanted in (
        "Part 1",
        "Do not cut if",
        "Check reflection",
        "Order of cuts",
        "kerf 0.3 mm",
        "scribe",
        "Local rules and licensed practice",
        "Achieved normal measured by",
    ):
        assert wanted in text, wanted
    assert re.search(r"turn [+−]\d+\.\d°", text)
    assert re.search(r"lower arc [+−]\d+\.\d°", text)


def test_a_bad_target_gets_its_sentence_and_stays(page: Page, served: Served) -> None:
    open_cut(page, served)
    page.get_by_role("button", name="Make a part").click()
    page.get_by_label("Plane ( ) or row [ ]").fill("{100}")
    page.keyboard.press("Enter")
    expect(page.locator("[data-fault='target']")).to_contain_text("a set of equivalent planes")
    expect(page.get_by_label("Plane ( ) or row [ ]")).to_have_value("{100}")


def test_a_direction_is_found_and_cut_for(page: Page, served: Served) -> None:
    sample = open_cut(page, served)
    page.get_by_text("Find a direction").click()
    page.get_by_label("What is wanted in condition 1").select_option("value")
    page.get_by_label("Value of condition 1").fill("15")
    page.get_by_role("button", name="Find", exact=True).click()
    expect(page.locator("#sought")).to_contain_text("on a cone")
    page.locator("#sought [data-cut]").first.click()
    expect(page.locator("#headline")).to_contain_text("Part 1, along")
    assert fetch(served, sample)["document"]["parts"][0]["target"]["by"] == "direction"


def test_a_pole_of_the_stereogram_is_pressed_to_cut_for_it(page: Page, served: Served) -> None:
    open_cut(page, served)
    page.get_by_role("button", name="Make a part").click()
    pole = page.locator("[data-put='(1 0 1)']").first
    pole.focus()
    page.keyboard.press("Enter")
    expect(page.locator("#headline")).to_contain_text("along n(101)")


def test_a_reversed_dial_is_kept_with_the_laboratory(page: Page, served: Served) -> None:
    open_cut(page, served)
    page.get_by_text("My stage", exact=True).click()
    question = page.locator(".questions li").nth(1).inner_text()
    page.get_by_label("Sense of lower arc").select_option("-1")
    page.get_by_role("button", name="Keep as another").click()
    expect(page.locator("#stage-choice option")).to_have_count(4)
    expect(page.locator(".questions li").nth(1)).not_to_have_text(question)
    page.get_by_label("Upper end of lower arc, degrees").fill("-99")
    page.get_by_role("button", name="Keep this stage").click()
    expect(page.locator("#stage-form [data-fault]")).to_be_visible()
    expect(page.get_by_label("Upper end of lower arc, degrees")).to_have_value("-99")


@pytest.mark.parametrize("width", [390, 1024, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_cut(page, served)
    page.get_by_role("button", name="Make a part").click()
    expect(page.locator("#headline")).to_contain_text("Part 1")
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []


def test_a_search_is_shown_on_the_scene_and_put_away(page: Page, served: Served) -> None:
    sample = open_cut(page, served)
    page.get_by_text("Find a direction").click()
    page.locator("#seek-kind-0").select_option("value")
    page.locator("#seek-value-0").fill("15")
    page.locator("#seek-form button[type=submit]").click()
    page.get_by_role("button", name="Show it on the scene").click()
    expect(page.locator("#shown-sought")).to_contain_text("Tensor page")
    page.goto(f"/samples/{sample}/tensor", wait_until="networkidle")
    expect(page.locator("#answer-note")).to_be_visible()
    expect(page.locator("svg.draw.front path.answer").first).to_be_attached()
    page.get_by_role("button", name="put them away").click()
    expect(page.locator("#answer-note")).to_be_hidden()
    expect(page.locator("svg.draw.front path.answer")).to_have_count(0)
