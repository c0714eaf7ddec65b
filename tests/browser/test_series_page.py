"""The Series page in Chromium: cells and tensors taken, sliders, and the picture that follows."""

from __future__ import annotations

import re

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.processes import Served

# Invented: the cell grows along straight lines; so do the free cells of the tensor.
CELLS = "temperature,a,b,c,beta\n" + "".join(
    f"{t},{9.80 * (1 + 2e-5 * (t - 300)):.5f}(5),{6.40 * (1 + 1e-5 * (t - 300)):.5f}(5),{7.30:.5f}(5),107.400(3)\n"
    for t in (200, 250, 300, 350, 400)
)
TENSORS = "temperature,11,13,22,33\n" + "".join(
    f"{t},{13.2 - 0.01 * (t - 300):.2f}(5),1.85(5),{24.6 - 0.02 * (t - 300):.2f}(5),15.90(5)\n"
    for t in (200, 250, 300, 350, 400)
)


def open_series(page: Page, served: Served) -> str:
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == "Demonstration crystal")
    made = httpx.post(f"{served.url}api/samples", json={"from": source}).json()
    page.goto(f"/samples/{made['id']}/series", wait_until="networkidle")
    return str(made["id"])


def drop(page: Page, name: str, text: str) -> None:
    page.evaluate(
        """([name, text]) => {
          const data = new DataTransfer();
          data.items.add(new File([text], name, {type: "text/csv"}));
          document.getElementById("series-side").dispatchEvent(
            new DragEvent("drop", {dataTransfer: data, bubbles: true, cancelable: true}));
        }""",
        [name, text],
    )


def test_dropped_cells_give_the_expansion_and_the_slider_moves_it(page: Page, served: Served) -> None:
    sample = open_series(page, served)
    drop(page, "cells.csv", CELLS)
    # b is held by symmetry and grows by 10 in a million of the edge at 300 K.
    expect(page.locator("#series-answer")).to_contain_text("10.0")
    headline = page.locator("#headline").inner_text()
    page.locator("#at").focus()
    page.keyboard.press("End")
    expect(page.locator("#headline")).to_contain_text("beyond what was measured")
    assert page.locator("#headline").inner_text() != headline
    kept = httpx.get(f"{served.url}api/samples/{sample}").json()["document"]["series"]
    assert [entry["table"] for entry in kept if entry["kind"] == "cells"] == [CELLS]
    page.get_by_role("button", name="Undo").click()
    expect(page.locator("#series-table")).not_to_have_value(CELLS)


def test_a_fault_in_a_table_stands_at_its_line_and_the_text_stays(page: Page, served: Served) -> None:
    open_series(page, served)
    bad = CELLS.replace("107.400(3)", "x", 1)
    page.locator("#series-table").fill(bad)
    page.get_by_role("button", name="Take these cells").click()
    expect(page.locator("#table-fault")).to_contain_text("line 2, beta")
    expect(page.locator("#series-table")).to_have_value(bad)


def test_the_picture_follows_a_series_of_tensors(page: Page, served: Served) -> None:
    open_series(page, served)
    page.locator("#tensor-table").fill(TENSORS)
    page.get_by_role("button", name="Take this series").click()
    expect(page.locator("#tensor-series-answer")).to_contain_text("each followed by its direction")
    page.locator("#tensor-at").focus()
    page.keyboard.press("Home")
    expect(page.locator("#tensor-series-answer")).to_contain_text("no uncertainty covers that")
    page.get_by_role("link", name="Tensor", exact=True).first.click()
    page.wait_for_url(re.compile("/tensor"))
    page.wait_for_load_state("networkidle")
    cell = page.locator('[data-cell="11"]')
    before = str(cell.text_content())
    slider = page.locator("#follow-at")
    expect(slider).to_be_visible()
    slider.focus()
    for _ in range(20):
        page.keyboard.press("ArrowRight")
    # 20 steps of 200 over 260 K from 300 K: 326 K, and a hundredth less for every kelvin.
    expect(page.locator("#follow-text")).to_have_text("326 K")
    expect(cell).to_contain_text("12.94")
    page.get_by_role("button", name="As kept").click()
    expect(page.locator("#follow-text")).to_have_text("as kept")
    expect(cell).to_have_text(before)


@pytest.mark.parametrize("width", [1440, 1024, 390])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_the_page_fits_and_has_no_faults_of_access(page: Page, served: Served, width: int, scheme: str) -> None:
    page.emulate_media(color_scheme="dark" if scheme == "dark" else "light")
    page.set_viewport_size({"width": width, "height": 900})
    open_series(page, served)
    page.locator("#tensor-table").fill(TENSORS)
    page.get_by_role("button", name="Take this series").click()
    expect(page.locator("#use-tensor")).to_be_visible()
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    found = Axe().run(page).response["violations"]
    assert [(entry["id"], entry["nodes"][0]["target"]) for entry in found] == []
