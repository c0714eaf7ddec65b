"""The crystal strip, the property's dialog, the conversion's dialog and the list of samples in a real browser."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import httpx
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect

from tests.examples import EXAMPLES
from tests.processes import Served


def open_copy(page: Page, served: Served, name: str = "Demonstration crystal") -> str:
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == name)
    made = str(httpx.post(f"{served.url}api/samples", json={"from": source}).json()["id"])
    page.goto(f"/samples/{made}/tensor", wait_until="networkidle")
    page.get_by_text("Edit the crystal").click()
    return made


def fetch(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()


def test_a_cell_is_edited_and_a_held_angle_shows_its_lock(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    expect(page.locator("[data-parameter='3'] .held")).to_be_visible()
    page.locator("#cell-a").fill("9.95")
    page.keyboard.press("Enter")
    expect(page.locator("#strip-cell")).to_contain_text("9.95")
    assert fetch(served, sample)["document"]["crystal"]["cell"][0] == 9.95


def test_a_cell_that_the_group_does_not_leave_gets_its_sentence_and_stays(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.locator("#group").fill("mmm")
    page.keyboard.press("Enter")
    fault = page.locator("#crystal-form [data-fault]:not([hidden])")
    expect(fault).to_be_visible()
    expect(page.locator("#group")).to_have_value("mmm")
    page.locator("#cell-a").fill("nine")
    page.keyboard.press("Enter")
    expect(page.locator("#crystal-form [data-fault='cell']")).to_contain_text("is not a number")
    expect(page.locator("#cell-a")).to_have_value("nine")
    page.keyboard.press("Escape")
    expect(page.locator("#cell-a")).to_have_value("9.83")
    assert fetch(served, sample)["document"]["crystal"]["group"] == "2/m"


def test_a_group_is_picked_by_system_and_class_with_its_setting_explained(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.get_by_text("Or pick it by system and class").click()
    page.locator("#pick-system").select_option("triclinic")
    page.locator("#pick-class").select_option("-1")
    expect(page.locator("#pick-note")).not_to_be_empty()
    expect(page.locator("#group")).to_have_value("-1")
    page.get_by_role("button", name="Take this crystal").click()
    expect(page.locator("#strip-group")).to_have_text("-1")
    expect(page.locator("[data-cell='12']")).to_have_class(re.compile("free"))
    assert fetch(served, sample)["document"]["crystal"]["group"] == "-1"


def test_a_dropped_cif_fills_the_strip_and_is_taken_on_demand(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    text = (EXAMPLES / "invented_monoclinic.cif").read_text("utf-8")
    page.evaluate(
        """(text) => { const data = new DataTransfer(); data.items.add(new File([text], "x.cif"));
          document.getElementById("drop").dispatchEvent(
            new DragEvent("drop", {dataTransfer: data, bubbles: true, cancelable: true})); }""",
        text,
    )
    expect(page.locator("#cif-note")).to_contain_text("look at it, then take it")
    length = re.search(r"_cell_length_a\s+([\d.]+)", text)
    assert length is not None
    expect(page.locator("#cell-a")).to_have_value(re.compile(length[1].rstrip("0")))
    assert fetch(served, sample)["revision"] == 1
    page.get_by_role("button", name="Take this crystal").click()
    expect(page.locator("#saved-text")).to_contain_text("revision 2")
    assert fetch(served, sample)["document"]["crystal"]["cell"][0] == pytest.approx(float(length[1]))


def test_a_frame_rule_turns_the_matrix_with_it(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)["derived"]["state"]
    page.locator("#frame").fill("x1=a x3=c*")
    page.keyboard.press("Enter")
    expect(page.locator("#frame-sentence")).to_contain_text("x1 along a")
    after = fetch(served, sample)["derived"]["state"]
    # The same tensor: principal values stay, and the cells are those of the turned frame.
    assert after["principal"]["values"] == pytest.approx(before["principal"]["values"], abs=1e-9)
    assert after["matrix"][0][0] != pytest.approx(before["matrix"][0][0], abs=1e-3)
    assert after["matrix"][1][1] == pytest.approx(before["matrix"][1][1], abs=1e-9)


def test_a_unit_converts_the_values_and_a_wrong_one_is_refused(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.get_by_role("button", name="Property and unit").click()
    page.locator("#unit").fill("kg")
    page.keyboard.press("Enter")
    expect(page.locator("#property-form [data-fault]:not([hidden])")).to_be_visible()
    expect(page.locator("#unit")).to_have_value("kg")
    page.locator("#unit").fill("W/(cm*K)")
    page.keyboard.press("Enter")
    expect(page.locator("#property-dialog")).to_be_hidden()
    # 1 W/(m K) is 0.01 W/(cm K).
    expect(page.locator("[data-cell='11']")).to_contain_text("0.1320")
    assert fetch(served, sample)["derived"]["state"]["matrix"][0][0] == pytest.approx(0.132)
    expect(page.locator("#property-line")).to_contain_text("cm")


def test_a_tensor_as_published_in_another_setting_is_converted_to_the_end(page: Page, served: Served) -> None:
    # Invented data; the answer was computed apart from this project: the crystal relabelled (a'b'c') = (c a b).
    made = httpx.post(f"{served.url}api/samples", json={"name": "relabelled"}).json()
    crystal = {"cell": [5.7981, 12.214, 3.0371, 90, 90, 103.83], "group": "2/m", "unique_axis": "c"}
    for change in (
        {"property": {"kind": "thermal_conductivity", "unit": "W/(m*K)"}},
        {"crystal": {**crystal, "frame": "x3=c x2=b*"}},
    ):
        made = httpx.post(
            f"{served.url}api/samples/{made['id']}/edit", json={"parent": made["revision"], "change": change}
        ).json()
        assert "error" not in made, made
    page.goto(f"/samples/{made['id']}/tensor", wait_until="networkidle")
    page.get_by_text("Edit the crystal").click()
    page.get_by_role("button", name="Tensor as published").click()
    page.locator("#from-cell").fill("12.214 3.0371 5.7981 90 103.83 90")
    page.locator("#from-group").fill("2/m")
    page.locator("#from-axis").select_option("b")
    for name, text in zip(
        ("11", "12", "13", "21", "22", "23", "31", "32", "33"),
        ("13.2", "0", "1.85", "0", "24.6", "0", "1.85", "0", "15.9"),
        strict=True,
    ):
        page.locator(f"#from-{name}").fill(text)
    page.get_by_role("button", name="List the ways").click()
    ways = page.locator("#ways button")
    expect(ways.first).to_be_visible()
    page.locator("#ways button", has_text="a′ = c, b′ = a, c′ = b").first.click()
    page.get_by_role("button", name="Use this tensor").click()
    expect(page.locator("#convert-dialog")).to_be_hidden()
    matrix = fetch(served, made["id"])["derived"]["state"]["matrix"]
    for row, expected in zip(matrix, ([15.9, 1.85, 0], [1.85, 13.2, 0], [0, 0, 24.6]), strict=True):
        assert row == pytest.approx(expected, abs=1e-6)


def test_the_open_strip_has_no_accessibility_violation(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.get_by_text("Or pick it by system and class").click()
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []
    for dialog in ("Property and unit", "Tensor as published"):
        page.get_by_role("button", name=dialog).click()
        assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []
        page.keyboard.press("Escape")


def test_samples_are_made_copied_renamed_archived_and_deleted(page: Page, served: Served, tmp_path: Path) -> None:
    page.goto("/samples", wait_until="networkidle")
    page.get_by_label("A new sample").fill("trial boule")
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile("/tensor$"))
    page.goto("/samples", wait_until="networkidle")
    item = page.locator(".sample-item", has_text="trial boule").first
    item.get_by_role("button", name="Rename").click()
    item.get_by_label("New name").fill("  ")
    page.keyboard.press("Enter")
    expect(item.locator("[data-fault='name']")).to_contain_text("A sample needs a name")
    item.get_by_label("New name").fill("boule 7")
    page.keyboard.press("Enter")
    expect(page.get_by_role("link", name="boule 7")).to_be_visible()
    page.get_by_role("button", name="Archive boule 7").click()
    expect(page.get_by_role("button", name="Take back boule 7")).to_be_visible()
    page.get_by_role("button", name="Take back boule 7").click()
    page.get_by_role("button", name="Copy boule 7").click()
    page.wait_for_load_state("networkidle")
    page.goto("/samples", wait_until="networkidle")
    assert page.locator(".sample-item", has_text="boule 7").count() == 2
    page.once("dialog", lambda dialog: dialog.accept())
    page.locator(".sample-item", has_text="boule 7").first.get_by_role("button", name="Delete").click()
    expect(page.locator(".sample-item", has_text="boule 7")).to_have_count(1)
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []
