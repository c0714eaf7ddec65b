"""The Readings page in Chromium: a file becomes the known tensor; keyboard and widths."""

from __future__ import annotations

import re

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.examples import EXAMPLES
from tests.processes import Served


def open_readings(page: Page, served: Served) -> str:
    """Open the page of a fresh copy of the monoclinic sample, so that the tests do not see each other."""
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["group"] == "2/m")
    made = httpx.post(f"{served.url}api/samples", json={"from": source}).json()
    page.goto(f"/samples/{made['id']}/readings", wait_until="networkidle")
    return str(made["id"])


def test_a_chosen_file_gives_the_known_tensor(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    page.set_input_files("#file", EXAMPLES / "readings.csv")
    expect(page.locator("#table")).to_have_value(re.compile("plate of 2 mm"))
    page.get_by_role("button", name="Take this table").click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("13 readings give 4 cells")
    page.get_by_role("button", name="Use this tensor").click()
    page.wait_for_url(re.compile("/tensor$"))
    page.wait_for_load_state("networkidle")
    free = httpx.get(f"{served.url}api/samples/{sample}").json()["document"]["properties"][0]["tensor"]["free"]
    # The tensor from which the invented readings were drawn, within four of the fit's standard deviations.
    for label, true, sigma in (("11", 13.20, 0.05), ("13", 1.85, 0.04), ("22", 24.6, 0.06), ("33", 15.90, 0.05)):
        assert abs(free[label] - true) < 4 * sigma


def test_a_dropped_file_fills_the_table(page: Page, served: Served) -> None:
    open_readings(page, served)
    page.evaluate(
        """() => {
          const data = new DataTransfer();
          data.items.add(new File(["kind,direction,value\\nalong,[100],1\\n"], "r.csv", {type: "text/csv"}));
          document.getElementById("table-form").dispatchEvent(
            new DragEvent("drop", {dataTransfer: data, bubbles: true, cancelable: true}));
        }"""
    )
    expect(page.locator("#table")).to_have_value("kind,direction,value\nalong,[100],1\n")


@pytest.mark.parametrize("width", [390, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_readings(page, served)
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []
