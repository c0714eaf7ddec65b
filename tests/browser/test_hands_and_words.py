"""Views of the matrices, showing, keys, terms and words, as a user meets them."""

from __future__ import annotations

import json
import re
from collections.abc import Callable
from urllib.parse import parse_qs, urlsplit

import numpy as np
import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Browser, Page, expect

from app.web.keys import KEYS
from tests.browser.test_tensor_page import fetch, open_copy, shown_matrix, wait_for_revision
from tests.processes import Served


def give_clipboard(page: Page) -> None:
    page.context.grant_permissions(["clipboard-read", "clipboard-write"])


def read_clipboard(page: Page) -> str:
    return str(page.evaluate("navigator.clipboard.readText()"))


# Matrices.


def test_the_views_of_the_matrices(page: Page, served: Served) -> None:
    open_copy(page, served)
    rounded = page.inner_text("#crystal-matrix [data-cell='11']")
    page.click("[data-matrix-view='six']")
    assert page.inner_text("#crystal-matrix [data-cell='11']").replace("\n", "") == "13.2"
    page.click("[data-matrix-view='formula']")
    # The printed form of 2/m with the two-fold axis along x2 (Nye, table 3): 11, 22, 33 and 13 alone.
    texts = [text.replace("\n", "").strip() for text in page.locator("#crystal-matrix .cell").all_inner_texts()]
    assert texts == ["a11", "0", "a13", "0", "a22", "0", "= a13", "0", "a33"]
    page.focus("[data-posed='zz']")
    expect(page.locator("#posed-why")).to_contain_text("·11")
    page.click("[data-matrix-view='dots']")
    heavy = page.locator("#crystal-matrix circle.heavy")
    expect(heavy).to_have_count(5)
    expect(page.locator("#crystal-matrix circle.small")).to_have_count(4)
    expect(page.locator("#crystal-matrix svg.links path")).to_have_count(1)
    page.reload(wait_until="networkidle")
    expect(page.locator("#crystal-matrix circle.heavy")).to_have_count(5)
    page.click("[data-matrix-view='numbers']")
    assert page.inner_text("#crystal-matrix [data-cell='11']") == rounded


def test_the_joining_line_meets_both_dots(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("[data-matrix-view='dots']")
    ends = page.evaluate(
        """() => {
          const path = document.querySelector('#crystal-matrix svg.links path'), m = path.getScreenCTM();
          const at = l => { const p = path.getPointAtLength(l).matrixTransform(m); return [p.x, p.y]; };
          const box = label => {
            const r = document.querySelector(`[data-cell='${label}'] circle`).getBoundingClientRect();
            return [r.x + r.width / 2, r.y + r.height / 2]; };
          return [at(0), box('13'), at(path.getTotalLength()), box('31')]; }"""
    )
    assert ends[0] == pytest.approx(ends[1], abs=5)
    assert ends[2] == pytest.approx(ends[3], abs=5)


def test_cells_have_names_for_who_does_not_see_them(page: Page, served: Served) -> None:
    open_copy(page, served)
    names = [page.get_attribute(f"[data-cell='{label}']", "aria-label") for label in ("12", "31", "11")]
    assert names[0] == "row 1 column 2, zero, locked by the half-turn about x2"
    assert names[1] == "row 3 column 1, 1.85(6), equal to 13, locked because the tensor is symmetric by itself"
    assert names[2] == "row 1 column 1, 13.20(8), free"
    assert "minus" in (page.get_attribute("[data-posed='xy']", "aria-label") or "")


def test_a_matrix_is_copied_in_one_click(page: Page, served: Served) -> None:
    give_clipboard(page)
    open_copy(page, served)
    page.click("[data-copy='crystal']")
    expect(page.locator("#copy-said")).to_contain_text("Copied")
    lines = read_clipboard(page).splitlines()
    assert lines[0] == "thermal conductivity, W/(m·K)"
    assert "x3 along c" in lines[1]
    assert lines[3].split("\t") == ["x1", "13.20(8)", "0", "1.85(6)"]
    page.select_option("#copy-form", "python")
    page.click("[data-copy='specimen']")
    expect(page.locator("#copy-said")).to_contain_text("specimen frame, as Python")
    rows = re.findall(r"(?m)^ {4}\[(.*)\],$", read_clipboard(page))
    copied = np.array([[float(part) for part in row.split(",")] for row in rows[:3]])
    assert copied == pytest.approx(shown_matrix(page), abs=0.06)


# Showing.


def test_a_link_reopens_what_is_shown(page: Page, served: Served) -> None:
    give_clipboard(page)
    sample = open_copy(page, served)
    before = fetch(served, sample)["revision"]
    page.fill("#put-on", "(1 1 1)")
    page.keyboard.press("Enter")
    wait_for_revision(page, served, sample, before)
    page.click("[data-surface='value']")
    page.click("[data-hold='crystal']")
    page.focus("#figure")
    page.keyboard.press("Shift+ArrowRight")
    page.wait_for_timeout(500)
    shown, sentence = page.inner_text("#specimen-matrix"), page.inner_text("#sentence")
    page.click("#copy-link")
    expect(page.locator("#showing-said")).to_contain_text("copied")
    link = read_clipboard(page)
    query = parse_qs(urlsplit(link).query)
    assert json.loads(query["pose"][0])["exact"] == ["z", "(1 1 1)"]
    page.goto("/samples")
    page.goto(link, wait_until="networkidle")
    page.wait_for_timeout(600)
    assert page.inner_text("#specimen-matrix") == shown
    assert page.inner_text("#sentence") == sentence
    expect(page.locator("[data-surface='value']")).to_have_attribute("aria-pressed", "true")
    expect(page.locator("[data-hold='crystal']")).to_have_attribute("aria-pressed", "true")
    expect(page.locator(".link-notices")).to_have_count(0)


def test_a_bad_link_opens_with_a_sentence(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.goto(f"/samples/{sample}/tensor?pose=nonsense&surface=pyramid&revision=999", wait_until="networkidle")
    expect(page.locator(".link-notices")).to_contain_text("pose was left out")
    expect(page.locator(".link-notices")).to_contain_text("no revision 999")
    expect(page.locator("#sentence")).to_contain_text("Along z")


def test_the_slow_turn_goes_from_the_crystal_frame_to_the_specimen_frame(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before, end = fetch(served, sample)["revision"], shown_matrix(page)
    page.click("#slow-turn")
    page.wait_for_timeout(450)
    # The demonstration sample's invented tensor in its crystal frame, rounded.
    crystal = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    assert shown_matrix(page) == pytest.approx(crystal, abs=0.06)
    expect(page.locator("#way-said")).to_have_text("specimen frame", timeout=12000)
    page.wait_for_timeout(300)
    assert shown_matrix(page) == pytest.approx(end, abs=1e-9)
    assert fetch(served, sample)["revision"] == before


def test_with_reduced_motion_the_turn_goes_in_steps(page: Page, served: Served) -> None:
    page.emulate_media(reduced_motion="reduce")
    open_copy(page, served)
    said = []
    for _ in range(5):
        page.click("#slow-turn")
        said.append(page.inner_text("#way-said"))
        page.wait_for_timeout(250)
        assert page.inner_text("#way-said") == said[-1]
    assert [text.replace("\u00a0", " ") for text in said] == [
        "crystal frame",
        "25 % of the way",
        "50 % of the way",
        "75 % of the way",
        "specimen frame",
    ]


def test_the_full_window_fills_it_and_leaves(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#full-window")
    expect(page.locator("main.showing")).to_have_count(1)
    box = page.locator("main").bounding_box()
    assert box is not None
    assert (box["x"], box["y"]) == (0, 0)
    assert box["width"] >= page.evaluate("innerWidth") - 20
    expect(page.locator("#large-type")).to_be_visible()
    small = page.evaluate("getComputedStyle(document.querySelector('.cell')).fontSize")
    page.click("#large-type")
    assert float(page.evaluate("parseFloat(getComputedStyle(document.querySelector('.cell')).fontSize)")) > float(
        small[:-2]
    )
    page.click("#full-window")
    expect(page.locator("main.showing")).to_have_count(0)


# Hands: every listed key.


def dispatch_blur(page: Page) -> None:
    page.evaluate("document.activeElement?.blur()")


def press_help(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.keyboard.press("?")
    expect(page.locator("#keys-dialog")).to_be_visible()


def press_close(page: Page, served: Served) -> None:
    press_help(page, served)
    page.keyboard.press("Escape")
    expect(page.locator("#keys-dialog")).to_be_hidden()


def turned_copy(page: Page, served: Served) -> tuple[str, str, str]:
    sample = open_copy(page, served)
    before, revision = page.inner_text("#sentence"), fetch(served, sample)["revision"]
    page.fill("#put-on", "(1 1 1)")
    page.keyboard.press("Enter")
    wait_for_revision(page, served, sample, revision)
    expect(page.locator("#sentence")).to_contain_text("n(111)")
    dispatch_blur(page)
    return sample, before, page.inner_text("#sentence")


def press_undo_and_redo(page: Page, served: Served) -> None:
    _, before, after = turned_copy(page, served)
    page.keyboard.press("Control+z")
    expect(page.locator("#sentence")).not_to_contain_text("n(111)")
    for keys in ("Control+y", "Control+Shift+z"):
        page.keyboard.press(keys)
        expect(page.locator("#sentence")).to_contain_text("n(111)")
        page.keyboard.press("Control+z")
        expect(page.locator("#sentence")).not_to_contain_text("n(111)")
    assert before != after


def press_strip_reset(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#crystal > summary")
    page.fill("#group", "mmm")
    page.keyboard.press("Escape")
    expect(page.locator("#group")).to_have_value("2/m")


def press_surface(kind: str, key: str) -> Callable[[Page, Served], None]:
    def press(page: Page, served: Served) -> None:
        open_copy(page, served)
        page.click(f"[data-surface='{'value' if kind == 'quadric' else 'quadric'}']")
        dispatch_blur(page)
        page.keyboard.press(key)
        expect(page.locator(f"[data-surface='{kind}']")).to_have_attribute("aria-pressed", "true")

    return press


def press_slow_turn(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.keyboard.press("t")
    expect(page.locator("#slow-turn")).to_have_text("Stop")
    page.keyboard.press("t")
    expect(page.locator("#way-said")).to_have_text("specimen frame")


def press_cursor(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#stereogram-panel > summary")
    expect(page.locator("#stereogram-disc svg")).to_be_visible()
    page.focus("#stereogram-disc")
    for key in ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown", "Shift+ArrowRight"):
        before = page.inner_text("#stereogram-told")
        page.keyboard.press(key)
        expect(page.locator("#stereogram-told")).not_to_have_text(before)
    matrix = page.inner_text("#specimen-matrix")
    page.keyboard.press("Enter")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText !== m", arg=matrix)


def press_probe(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.keyboard.press("p")
    expect(page.locator("#probe-value")).not_to_have_text("–")
    page.focus("#probe-panel")
    for key in ("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"):
        before = page.locator("path.probe-foot").get_attribute("d") or ""
        page.keyboard.press(f"Shift+{key}")
        expect(page.locator("path.probe-foot")).not_to_have_attribute("d", before)
    page.keyboard.press("p")
    expect(page.locator("#probe-panel")).to_be_hidden()


def press_full_window(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.keyboard.press("w")
    expect(page.locator("main.showing")).to_have_count(1)
    page.keyboard.press("l")
    expect(page.locator("main.large")).to_have_count(1)
    page.keyboard.press("w")
    expect(page.locator("main.showing")).to_have_count(0)


def press_in_picture(keys: tuple[str, ...], changes: bool) -> Callable[[Page, Served], None]:
    def press(page: Page, served: Served) -> None:
        open_copy(page, served)
        page.focus("#figure")
        for key in keys:
            matrix, drawn = page.inner_text("#specimen-matrix"), page.inner_html("svg.front")
            page.keyboard.press(key)
            page.wait_for_function("drawn => document.querySelector('svg.front').innerHTML !== drawn", arg=drawn)
            if changes:
                moved = "matrix => document.getElementById('specimen-matrix').innerText !== matrix"
                page.wait_for_function(moved, arg=matrix)
            else:
                assert page.inner_text("#specimen-matrix") == matrix, key

    return press


def press_reset(page: Page, served: Served) -> None:
    open_copy(page, served)
    matrix = page.inner_text("#specimen-matrix")
    page.focus("#figure")
    page.keyboard.press("ArrowLeft")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText !== m", arg=matrix)
    page.keyboard.press("Home")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText === m", arg=matrix)


def press_catch(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.focus("#figure")
    page.keyboard.press("c")
    expect(page.locator("#said")).to_have_text("Gentle catch off")


def press_in_cell(key: str, shown: str) -> Callable[[Page, Served], None]:
    def press(page: Page, served: Served) -> None:
        open_copy(page, served)
        page.click("[data-cell='11']")
        page.fill(".cell-input", "14.1(2)")
        page.keyboard.press(key)
        expect(page.locator("[data-cell='11']")).to_contain_text(shown)

    return press


def press_in_grid(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.goto(f"/samples/{sample}/readings", wait_until="networkidle")
    rows = page.locator("#grid tbody tr")
    first = page.locator("#grid tbody tr:nth-child(1) input[data-column='value']")
    second = page.locator("#grid tbody tr:nth-child(2) input[data-column='value']")
    first.focus()
    for key in ("ArrowDown", "Enter"):
        page.keyboard.press(key)
        expect(
            second if key == "ArrowDown" else page.locator("#grid tbody tr:nth-child(3) input[data-column='value']")
        ).to_be_focused()
    page.keyboard.press("ArrowUp")
    expect(second).to_be_focused()
    count = rows.count()
    rows.last.locator("input[data-column='value']").focus()
    page.keyboard.press("Enter")
    expect(rows).to_have_count(count + 1)


def cut_page(page: Page, served: Served) -> str:
    sample = open_copy(page, served)
    page.goto(f"/samples/{sample}/cut", wait_until="networkidle")
    page.click("[data-act='make']")
    expect(page.locator("#target-direction")).to_be_visible()
    return sample


def press_in_cut_field(page: Page, served: Served) -> None:
    cut_page(page, served)
    page.fill("#target-direction", "(1 1 1)")
    page.keyboard.press("Enter")
    expect(page.locator("#headline")).to_contain_text("n(111)")


def press_on_mark(page: Page, served: Served) -> None:
    cut_page(page, served)
    before = page.inner_text("#headline")
    page.locator("#cut-result [data-put]").first.focus()
    page.keyboard.press("Enter")
    page.wait_for_function("text => document.getElementById('headline').innerText !== text", arg=before)


EFFECTS: dict[str, Callable[[Page, Served], None]] = {
    "help": press_help,
    "close": press_close,
    "undo": press_undo_and_redo,
    "redo": press_undo_and_redo,
    "strip-reset": press_strip_reset,
    "surface-quadric": press_surface("quadric", "q"),
    "surface-value": press_surface("value", "v"),
    "surface-flux": press_surface("flux", "f"),
    "slow-turn": press_slow_turn,
    "full-window": press_full_window,
    "large-type": press_full_window,
    "turn": press_in_picture(("ArrowLeft", "ArrowRight", "ArrowUp", "ArrowDown"), True),
    "turn-about-z": press_in_picture((",", "."), True),
    "look": press_in_picture(("Shift+ArrowLeft", "Shift+ArrowRight", "Shift+ArrowUp", "Shift+ArrowDown"), False),
    "reset": press_reset,
    "catch": press_catch,
    "probe": press_probe,
    "move-probe": press_probe,
    "move-cursor": press_cursor,
    "put-on-cursor": press_cursor,
    "take-cell": press_in_cell("Enter", "14.1(2)"),
    "leave-cell": press_in_cell("Escape", "13.20(8)"),
    "grid-down": press_in_grid,
    "grid-up": press_in_grid,
    "take-field": press_in_cut_field,
    "cut-for-mark": press_on_mark,
}


def test_every_listed_key_is_pressed_here() -> None:
    assert set(EFFECTS) == {entry.name for entry in KEYS}


@pytest.mark.parametrize("press", sorted(set(EFFECTS.values()), key=str), ids=lambda press: str(press).split()[1])
def test_a_listed_key_does_what_the_list_says(
    page: Page, served: Served, press: Callable[[Page, Served], None]
) -> None:
    press(page, served)


def test_letters_can_be_switched_off(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("#keys-open")
    page.uncheck("#letters-act")
    page.keyboard.press("Escape")
    dispatch_blur(page)
    page.keyboard.press("v")
    page.keyboard.press("?")
    expect(page.locator("[data-surface='quadric']")).to_have_attribute("aria-pressed", "true")
    expect(page.locator("#keys-dialog")).to_be_hidden()


def test_a_finger_turns_the_block_and_looks_around(browser: Browser, served: Served) -> None:
    context = browser.new_context(base_url=served.url, viewport={"width": 390, "height": 844}, has_touch=True)
    page = context.new_page()
    open_copy(page, served)
    page.locator("#figure").scroll_into_view_if_needed()
    matrix, drawn = page.inner_text("#specimen-matrix"), page.inner_html("svg.front")
    box = page.locator(".stage").bounding_box()
    assert box is not None
    hand = context.new_cdp_session(page)

    def stroke(x: float, y: float, right: float, down: float) -> None:
        hand.send("Input.dispatchTouchEvent", {"type": "touchStart", "touchPoints": [{"x": x, "y": y}]})
        for part in range(1, 7):
            point = {"x": x + right * part / 6, "y": y + down * part / 6}
            hand.send("Input.dispatchTouchEvent", {"type": "touchMove", "touchPoints": [point]})
            page.wait_for_timeout(40)
        hand.send("Input.dispatchTouchEvent", {"type": "touchEnd", "touchPoints": []})
        page.wait_for_timeout(500)

    stroke(box["x"] + 8, box["y"] + box["height"] - 20, 60, -30)
    assert page.inner_html("svg.front") != drawn
    assert page.inner_text("#specimen-matrix") == matrix
    stroke(box["x"] + box["width"] / 2, box["y"] + box["height"] / 2, 50, 20)
    assert page.inner_text("#specimen-matrix") != matrix
    context.close()


# Words.


def test_a_term_is_explained_by_keyboard_and_by_mouse(page: Page, served: Served) -> None:
    open_copy(page, served)
    term = page.locator("main a.term[data-term='quadric']").first
    term.focus()
    page.keyboard.press("Enter")
    note = page.locator("#term-note")
    expect(note).to_contain_text("Source: Nye")
    page.keyboard.press("Escape")
    expect(note).to_be_hidden()
    expect(term).to_be_focused()
    term.click()
    expect(note).to_be_visible()
    page.mouse.click(5, 5)
    expect(note).to_be_hidden()
    assert page.url.endswith("/tensor")


def test_indices_are_barred_copied_with_a_minus_and_said(page: Page, served: Served) -> None:
    open_copy(page, served)
    bar = page.locator("#sentence .indices")
    assert bar.get_attribute("aria-label") == "plane minus 2 0 1"
    assert page.evaluate("getComputedStyle(document.querySelector('#sentence .over')).textDecorationLine") == "overline"
    copied = page.evaluate(
        """() => {
          const range = document.createRange();
          range.selectNodeContents(document.querySelector('#sentence .l1'));
          const all = getSelection(); all.removeAllRanges(); all.addRange(range); return all.toString(); }"""
    )
    assert "n(−201)" in copied
    wide = page.evaluate("document.querySelector('#sentence .minus').getBoundingClientRect().width")
    page.click("#keys-open")
    page.uncheck("#bars-over")
    assert page.evaluate("document.querySelector('#sentence .minus').getBoundingClientRect().width") > wide + 5
    page.reload(wait_until="networkidle")
    assert page.evaluate("getComputedStyle(document.querySelector('#sentence .over')).textDecorationLine") == "none"


@pytest.mark.parametrize("width", [390, 768, 1024, 1440, 2560])
@pytest.mark.parametrize("scheme", ["light", "dark"])
def test_pages_fit_every_width_without_a_rule_broken(browser: Browser, served: Served, width: int, scheme: str) -> None:
    context = browser.new_context(
        base_url=served.url,
        viewport={"width": width, "height": 900},
        color_scheme="dark" if scheme == "dark" else "light",
    )
    page = context.new_page()
    sample = open_copy(page, served)
    faults: list[str] = []
    for name in ("tensor", "readings", "cut", "series", "sheet"):
        page.goto(f"/samples/{sample}/{name}", wait_until="networkidle")
        page.wait_for_timeout(200)
        wide = page.evaluate("document.documentElement.scrollWidth - innerWidth")
        if wide > 1:
            faults.append(f"{name} scrolls sideways by {wide} px")
        if width in (390, 1440):
            options = {
                "runOnly": {
                    "type": "tag",
                    "values": ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa", "best-practice"],
                }
            }
            broken = Axe().run(page, options=options).response["violations"]
            faults += [f"{name}: {found['id']}: {found['nodes'][0]['target']}" for found in broken]
    context.close()
    assert faults == []
