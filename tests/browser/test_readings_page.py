"""The Readings page in Chromium: a file becomes the known tensor; keyboard and widths."""

from __future__ import annotations

import re
from typing import Any

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.examples import EXAMPLES
from tests.processes import Served


def open_readings(page: Page, served: Served) -> str:
    """Open the page of a fresh copy of the monoclinic sample, so that the tests do not see each other."""
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == "Demonstration crystal")
    made = httpx.post(f"{served.url}api/samples", json={"from": source}).json()
    page.goto(f"/samples/{made['id']}/readings", wait_until="networkidle")
    return str(made["id"])


def expect_known_tensor(served: Served, sample: str) -> None:
    """The tensor from which the invented readings were drawn, within four of the fit's standard deviations."""
    free = httpx.get(f"{served.url}api/samples/{sample}").json()["document"]["properties"][0]["tensor"]["free"]
    for label, true, sigma in (("11", 13.20, 0.05), ("13", 1.85, 0.04), ("22", 24.6, 0.06), ("33", 15.90, 0.05)):
        assert abs(free[label] - true) < 4 * sigma


def cell(page: Page, row: int, name: str) -> Any:
    return page.get_by_label(f"row {row}, {name}", exact=True)


def kept_readings(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()["document"]["readings"]


def drop(page: Page, text: str) -> None:
    page.evaluate(
        """(text) => {
          const data = new DataTransfer();
          data.items.add(new File([text], "r.csv", {type: "text/csv"}));
          document.getElementById("grid-region").dispatchEvent(
            new DragEvent("drop", {dataTransfer: data, bubbles: true, cancelable: true}));
        }""",
        text,
    )


def test_a_dropped_file_gives_the_known_tensor(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    drop(page, (EXAMPLES / "readings.csv").read_text("utf-8"))
    expect(page.get_by_role("heading", level=1)).to_contain_text("13 readings give 4 cells")
    expect(page.locator("#grid tbody tr")).to_have_count(13)
    page.get_by_role("button", name="Use this tensor").click()
    page.wait_for_url(re.compile("/tensor$"))
    page.wait_for_load_state("networkidle")
    expect_known_tensor(served, sample)


def test_a_chosen_file_is_taken_and_undone(page: Page, served: Served) -> None:
    open_readings(page, served)
    page.set_input_files("#file", EXAMPLES / "readings.csv")
    expect(page.locator("#grid tbody tr")).to_have_count(13)
    page.get_by_role("button", name="Undo").click()
    expect(page.locator("#grid tbody tr")).to_have_count(14)
    expect(page.get_by_role("heading", level=1)).to_contain_text("14 readings give")


def test_a_bad_table_is_told_by_line_and_stays(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    drop(page, "kind,direction,value\nalong,[100],x\nalong,{010},24\n")
    fault = page.locator("#table-fault")
    expect(fault).to_contain_text("line 2, value")
    expect(fault).to_contain_text("line 3, direction")
    expect(page.locator("#table")).to_have_value("kind,direction,value\nalong,[100],x\nalong,{010},24\n")
    assert len(kept_readings(served, sample)) == 14


def test_a_cell_is_edited_in_place_by_keyboard(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    before = page.get_by_role("heading", level=1).inner_text()
    cell(page, 3, "value").focus()
    page.keyboard.press("Control+a")
    page.keyboard.type("25.62")
    page.keyboard.press("Enter")
    expect(page.locator("#saved-text")).to_contain_text("revision 2")
    expect(cell(page, 4, "value")).to_be_focused()
    assert kept_readings(served, sample)[2]["value"] == 25.62
    assert page.get_by_role("heading", level=1).inner_text() != before


def test_a_bad_cell_keeps_what_was_typed_and_says_why(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    cell(page, 2, "direction").fill("(0 0 0)")
    cell(page, 3, "value").focus()
    expect(page.locator("#grid-fault")).to_contain_text("row 2, direction")
    expect(cell(page, 2, "direction")).to_have_value("(0 0 0)")
    expect(cell(page, 2, "direction")).to_have_attribute("aria-invalid", "true")
    assert kept_readings(served, sample)[1]["direction"] != "(0 0 0)"
    cell(page, 2, "direction").fill("(1 0 0)")
    cell(page, 3, "value").focus()
    expect(page.locator("#grid-fault")).to_be_hidden()


def test_rows_are_added_set_aside_and_removed(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    page.get_by_role("button", name="Set aside row 14").click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("13 readings give")
    page.get_by_label("why row 14 is set aside").fill("one edge chipped")
    page.get_by_role("button", name="Add a row").click()
    expect(cell(page, 15, "kind")).to_be_focused()
    expect(page.locator("#saved-text")).to_contain_text("revision 3")
    assert kept_readings(served, sample)[13]["set_aside"] == "one edge chipped"
    for text in ("rod", "[1 1 0]", "18.94", "0.18"):
        page.keyboard.type(text)
        page.keyboard.press("Tab")
    cell(page, 1, "value").focus()
    expect(page.get_by_role("heading", level=1)).to_contain_text("14 readings give")
    page.get_by_role("button", name="Take back row 14").click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("15 readings give")
    page.get_by_role("button", name="Remove row 1", exact=True).click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("14 readings give")
    assert len(kept_readings(served, sample)) == 14


def test_a_block_of_a_spreadsheet_is_pasted_over_cells(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    cell(page, 1, "value").focus()
    page.evaluate(
        """() => {
          const data = new DataTransfer();
          data.setData("text/plain", "13.3\\t0.2\\n13.1\\t0.3\\n");
          document.activeElement.dispatchEvent(
            new ClipboardEvent("paste", {clipboardData: data, bubbles: true, cancelable: true}));
        }""".replace("\\\\", "\\")
    )
    expect(page.locator("#saved-text")).to_contain_text("revision 2")
    readings = kept_readings(served, sample)
    assert [(reading["value"], reading["sigma"]) for reading in readings[:2]] == [(13.3, 0.2), (13.1, 0.3)]


def test_what_is_typed_survives_a_change_made_elsewhere(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    cell(page, 1, "value").fill("13.77")
    other = page.context.new_page()
    other.goto(f"/samples/{sample}/readings", wait_until="networkidle")
    other.get_by_role("button", name="Remove row 14").click()
    expect(other.get_by_role("heading", level=1)).to_contain_text("13 readings give")
    expect(page.locator("#elsewhere")).to_be_visible()
    expect(cell(page, 1, "value")).to_have_value("13.77")
    page.get_by_role("button", name="Show what stands").click()
    expect(page.locator("#grid tbody tr")).to_have_count(13)
    expect(cell(page, 1, "value")).to_have_value("13.19")
    assert kept_readings(served, sample)[0]["value"] == 13.19


@pytest.mark.parametrize("width", [390, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_readings(page, served)
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []


def test_a_pasted_table_leads_to_the_next_cut(page: Page, served: Served) -> None:
    sample = open_readings(page, served)
    page.locator("#as-text > summary").click()
    page.get_by_label("Type, paste or drop a table").fill(
        "kind,direction,value,sigma\nalong,(1 0 0),13.2,0.1\nrod,[0 1 0],24.6,0.2\nrod,[0 0 1],15.7,0.1\n"
    )
    page.get_by_role("button", name="Take this table").click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("3 readings do not determine the tensor")
    page.locator("#next-cuts > summary").click()
    form = page.locator("#next-form")
    form.get_by_label("How many bars").fill("none")
    form.get_by_role("button", name="Propose").click()
    expect(form.locator("[data-fault]:visible, [aria-invalid]")).not_to_have_count(0)
    form.get_by_label("How many bars").fill("1")
    form.get_by_label("σ of a reading").fill("0.1")
    form.get_by_role("button", name="Propose").click()
    answer = page.locator("#next-result")
    expect(answer).to_contain_text("the condition is then")
    expect(answer.locator("svg")).to_be_visible()
    # The proposed cut, taken as a reading, does settle the tensor, as it was said to.
    cut = str(answer.locator(".sought").inner_text()).removeprefix("Cut ").split(";")[0]
    name = cut.removeprefix("n") if cut.startswith("n(") else cut
    typed = re.sub(r"−(\d)|(\d)", lambda found: f" {found.group(0).replace('−', '-')}", name)
    typed = typed.replace("( ", "(").replace("[ ", "[")
    page.get_by_role("button", name="Add a row").click()
    cells = {"kind": "along" if cut.startswith("n") else "rod", "direction": typed, "value": "15.0", "sigma": "0.1"}
    for column, text in cells.items():
        page.locator(
            f"#grid tbody tr:nth-child(4) [data-column={column}] input, "
            f"#grid tbody tr:nth-child(4) input[data-column={column}]"
        ).first.fill(text)
    cell(page, 1, "value").focus()
    expect(page.get_by_role("heading", level=1)).to_contain_text("4 readings give 4 cells")
    assert len(kept_readings(served, sample)) == 4
