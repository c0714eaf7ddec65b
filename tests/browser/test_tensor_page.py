"""The front page in a real browser."""

from __future__ import annotations

import io
import re
from typing import Any

import httpx
import numpy as np
import pytest
from axe_playwright_python.sync_playwright import Axe
from PIL import Image
from playwright.sync_api import Page, expect

from tests.processes import Served


def test_a_free_cell_is_edited_and_the_tied_one_follows(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.click("[data-cell='13']")
    page.fill(".cell-input", "1.95(6)")
    page.keyboard.press("Enter")
    expect(page.locator("[data-cell='31']")).to_contain_text("1.95(6)")
    page.focus("[data-cell='12']")
    expect(page.locator("#why")).to_contain_text("the half-turn about x2 turns 12 into −12")


def test_looking_changes_no_number_and_turning_does(page: Page, served: Served) -> None:
    open_copy(page, served)
    matrix = page.inner_text("#specimen-matrix")
    page.focus("#figure")
    drawn = page.inner_html("svg.front")
    page.keyboard.press("Shift+ArrowLeft")
    page.wait_for_function("drawn => document.querySelector('svg.front').innerHTML !== drawn", arg=drawn)
    assert page.inner_text("#specimen-matrix") == matrix
    page.keyboard.press("ArrowLeft")
    page.wait_for_function("m => document.querySelector('#specimen-matrix').innerText !== m", arg=matrix)


def open_copy(page: Page, served: Served, name: str = "Demonstration crystal") -> str:
    """Open a fresh copy of a demonstration sample, so that the tests do not see each other's changes."""
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == name)
    made = str(httpx.post(f"{served.url}api/samples", json={"from": source}).json()["id"])
    page.goto(f"/samples/{made}/tensor", wait_until="networkidle")
    page.wait_for_timeout(800)
    return made


def fetch(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()


def wait_for_revision(page: Page, served: Served, sample: str, beyond: int) -> Any:
    for _ in range(60):
        found = fetch(served, sample)
        if found["revision"] > beyond:
            return found
        page.wait_for_timeout(100)
    raise AssertionError("the turn was not saved")


def shown_matrix(page: Page) -> np.ndarray:
    texts = page.locator("#specimen-matrix .cell").all_inner_texts()
    plain = [re.sub(r"\(.*?\)|\s", "", text).replace("−", "-") for text in texts]
    return np.array([float(text) for text in plain]).reshape(3, 3)


def hold_at(page: Page, what: str) -> tuple[float, float]:
    """A place on the screen where the drawing can be taken hold of."""
    place = page.evaluate(
        """what => { for (const path of document.querySelectorAll(`svg.front path[data-hold-on='${what}']`)) {
             const length = path.getTotalLength(), matrix = path.getScreenCTM();
             for (let part = 0.1; part < 1; part += 0.1) {
               const at = path.getPointAtLength(length * part).matrixTransform(matrix);
               if (document.elementFromPoint(at.x, at.y)?.dataset?.holdOn === what) return [at.x, at.y];
             } } return null; }""",
        what,
    )
    assert place is not None, what
    return place[0], place[1]


def drag(page: Page, start: tuple[float, float], right: float, down: float) -> None:
    page.mouse.move(*start)
    page.mouse.down()
    for part in range(1, 9):
        page.mouse.move(start[0] + right * part / 8, start[1] + down * part / 8)
        page.wait_for_timeout(30)
    page.mouse.up()


def test_dragging_the_block_turns_it_and_the_matrix_is_c_t_ct(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)
    drag(page, hold_at(page, "block"), 60, 25)
    after = wait_for_revision(page, served, sample, before["revision"])
    state = after["derived"]["state"]
    turn, tensor = np.array(state["pose"]["matrix"]), np.array(state["matrix"])
    assert not np.allclose(turn, before["derived"]["state"]["pose"]["matrix"])
    assert turn @ turn.T == pytest.approx(np.eye(3), abs=1e-9)
    page.wait_for_timeout(400)
    # Printed to the digits of its uncertainty, so within half of the last one shown.
    assert shown_matrix(page) == pytest.approx(turn @ tensor @ turn.T, abs=0.06)
    assert f"{(turn @ tensor @ turn.T)[2, 2]:.2f}" in page.inner_text("#sentence")


def test_dragging_the_ground_moves_no_number(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before, matrix, sentence = fetch(served, sample)["revision"], shown_matrix(page), page.inner_text("#sentence")
    box = page.locator(".stage").bounding_box()
    assert box is not None
    drawn = page.inner_html("svg.front")
    drag(page, (box["x"] + 12, box["y"] + box["height"] - 60), 70, -30)
    page.wait_for_timeout(500)
    assert page.inner_html("svg.front") != drawn
    assert np.array_equal(shown_matrix(page), matrix)
    assert page.inner_text("#sentence") == sentence
    assert fetch(served, sample)["revision"] == before


def test_a_direction_is_put_under_z_and_all_is_there_after_a_reload(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)["revision"]
    page.fill("#put-on", "(1 1 1)")
    page.keyboard.press("Enter")
    wait_for_revision(page, served, sample, before)
    expect(page.locator("#sentence")).to_contain_text("on n(111)")
    matrix, sentence = shown_matrix(page), page.inner_text("#sentence")
    page.reload(wait_until="networkidle")
    assert np.array_equal(shown_matrix(page), matrix)
    assert page.inner_text("#sentence") == sentence


def test_a_bad_direction_gets_its_sentence_and_stays(page: Page, served: Served) -> None:
    open_copy(page, served)
    page.fill("#put-on", "{100}")
    page.keyboard.press("Enter")
    expect(page.locator("#turn-fault")).to_contain_text("a set of equivalent planes")
    expect(page.locator("#put-on")).to_have_value("{100}")


def test_without_the_plotting_script_it_reads_and_turns(page: Page, served: Served) -> None:
    page.route("**/plotly*", lambda route: route.fulfill(status=200, content_type="text/javascript", body=""))
    sample = open_copy(page, served)
    before = fetch(served, sample)["revision"]
    assert re.search(r"Along z, .*\d\(\d+\)", page.inner_text("#sentence"))
    page.focus("#figure")
    page.keyboard.press("ArrowLeft")
    wait_for_revision(page, served, sample, before)


POSES = [
    "(0 0 1)",
    "(1 0 0)",
    "(1 1 1)",
    "[1 2 -1]",
    "(-2 0 1)",
    "[1 0 0]",
    "(0 1 3)",
    "[-1 3 2]",
    "(2 -1 0)",
    "[0 1 0]",
]


def find_silhouette(page: Page) -> Any:
    """Left, top, right and bottom of what plotly rendered, on the screen, without the overlay."""
    style = page.add_style_tag(
        content="svg.draw, figcaption, .said, .bar.lower, .key { visibility: hidden !important }"
    )
    stage = page.locator(".stage").bounding_box()
    assert stage is not None
    picture = Image.open(io.BytesIO(page.screenshot(clip=stage))).convert("RGB")
    style.evaluate("element => element.remove()")
    pixels = np.asarray(picture, dtype=int)
    inked = np.max(np.abs(pixels - pixels[2, 2]), axis=2) > 3
    rows, columns = np.flatnonzero(inked.any(axis=1)), np.flatnonzero(inked.any(axis=0))
    return [columns[0] + stage["x"], rows[0] + stage["y"], columns[-1] + 1 + stage["x"], rows[-1] + 1 + stage["y"]]


def test_overlay_and_scene_agree_in_rendered_pixels_at_ten_poses(page: Page, served: Served) -> None:
    # The drawn outline against the silhouette of what plotly rendered, without the overlay.
    sample = open_copy(page, served)
    for direction in POSES:
        before = fetch(served, sample)["revision"]
        page.fill("#put-on", direction)
        page.keyboard.press("Enter")
        wait_for_revision(page, served, sample, before)
        page.wait_for_timeout(900)
        outline = page.evaluate(
            "(() => { const b = document.querySelector('svg.front path.outline').getBoundingClientRect();"
            " return [b.left, b.top, b.right, b.bottom]; })()"
        )
        assert find_silhouette(page) == pytest.approx(outline, abs=4), direction


@pytest.mark.parametrize("surface", ["value", "flux"])
def test_the_other_surfaces_are_drawn_within_the_block(page: Page, served: Served, surface: str) -> None:
    open_copy(page, served)
    page.focus("#figure")
    page.keyboard.press(surface[0])
    block = page.evaluate(
        "(() => { const b = [...document.querySelectorAll('svg.draw path.edge')].map(p => p.getBoundingClientRect());"
        " return [Math.min(...b.map(r => r.left)), Math.min(...b.map(r => r.top)),"
        " Math.max(...b.map(r => r.right)), Math.max(...b.map(r => r.bottom))]; })()"
    )
    # The other surface is drawn when it has come over the channel; a busy machine takes its time.
    for _ in range(20):
        page.wait_for_timeout(500)
        left, top, right, bottom = find_silhouette(page)
        if left > block[0] and right < block[2]:
            break
    assert left > block[0]
    assert top > block[1]
    assert right < block[2]
    assert bottom < block[3]
    assert right - left > 80
    expect(page.locator("#lead")).to_have_text("Long is large.")


@pytest.mark.parametrize("width", [390, 1024, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Page, served: Served, width: int) -> None:
    page.set_viewport_size({"width": width, "height": 900})
    open_copy(page, served)
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 1
    assert [violation["id"] for violation in Axe().run(page).response["violations"]] == []


def test_the_hyperboloid_and_the_other_surfaces_draw(page: Page, served: Served) -> None:
    open_copy(page, served, "Second demonstration crystal")
    expect(page.locator("#quadric")).to_have_text("one-sheet hyperboloid")
    page.focus("#figure")
    for key in ("v", "f", "q"):
        page.keyboard.press(key)
        page.wait_for_timeout(500)
    expect(page.locator("[data-surface='quadric']")).to_have_attribute("aria-pressed", "true")


def test_a_fast_hand_on_the_keys_loses_no_step(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)
    page.focus("#figure")
    page.keyboard.press("c")
    page.evaluate(
        """() => { const figure = document.getElementById("figure");
          for (let n = 0; n < 30; n += 1)
            figure.dispatchEvent(new KeyboardEvent("keydown", {key: ".", bubbles: true, cancelable: true}));
          figure.dispatchEvent(new KeyboardEvent("keyup", {key: ".", bubbles: true})); }"""
    )
    after = wait_for_revision(page, served, sample, before["revision"])
    first, last = (np.array(state["derived"]["state"]["pose"]["matrix"]) for state in (before, after))
    # A turn of the specimen about its own z by 30°, right-handed: x goes toward y.
    half = np.sqrt(3) / 2
    assert last == pytest.approx(np.array([[half, 0.5, 0], [-0.5, half, 0], [0, 0, 1]]) @ first, abs=1e-9)


def test_the_catch_goes_off_with_a_key_and_one_key_leads_back_to_the_start(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)
    page.focus("#figure")
    page.keyboard.press("c")
    expect(page.locator("#said")).to_have_text("Gentle catch off")
    page.keyboard.press("ArrowLeft")
    turned = wait_for_revision(page, served, sample, before["revision"])
    page.keyboard.press("Home")
    back = wait_for_revision(page, served, sample, turned["revision"])
    start = before["derived"]["state"]["pose"]["matrix"]
    assert np.array(back["derived"]["state"]["pose"]["matrix"]) == pytest.approx(np.array(start), abs=1e-9)


def test_holding_the_crystal_keeps_the_picture_and_turns_the_block(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)
    page.get_by_role("button", name="Hold the crystal").click()
    page.wait_for_timeout(400)
    outline = page.locator("svg.front path.outline").get_attribute("d")
    crystal = page.locator("svg.front path.crystal").all()[0].get_attribute("d")
    drag(page, hold_at(page, "block"), 70, 10)
    wait_for_revision(page, served, sample, before["revision"])
    page.wait_for_timeout(400)
    assert page.locator("svg.front path.outline").get_attribute("d") == outline
    assert page.locator("svg.front path.crystal").all()[0].get_attribute("d") == crystal


def test_a_ring_turns_about_its_own_axis_only(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    before = fetch(served, sample)
    drag(page, hold_at(page, "z"), 50, 0)
    after = wait_for_revision(page, served, sample, before["revision"])
    first, last = (np.array(state["derived"]["state"]["pose"]["matrix"]) for state in (before, after))
    assert last[2] == pytest.approx(first[2], abs=1e-9)
    assert abs(last[0] @ first[0]) < 0.9999


def test_poses_are_kept_by_name_and_the_block_is_given_its_size(page: Page, served: Served) -> None:
    sample = open_copy(page, served)
    page.get_by_role("button", name="Other ways").click()
    page.get_by_label("Name of the pose").fill("first cut")
    page.keyboard.press("Enter")
    expect(page.get_by_role("button", name="first cut", exact=True)).to_be_visible()
    sentence = page.inner_text("#sentence")
    page.get_by_label("Tilt in degrees").fill("4")
    page.get_by_label("Direction to tilt from").fill("(0 0 1)")
    page.get_by_label("Direction to tilt toward").fill("[1 0 0]")
    page.keyboard.press("Enter")
    expect(page.locator("#sentence")).to_contain_text("4.0° off n(001)")
    page.get_by_role("button", name="first cut", exact=True).click()
    expect(page.locator("#sentence")).to_have_text(sentence)
    page.get_by_label("Block along z in millimetres").fill("-1")
    page.keyboard.press("Enter")
    expect(page.locator("#turn-fault")).to_contain_text("A side of the block is a length above 0 mm.")
    page.get_by_label("Block along z in millimetres").fill("9")
    page.keyboard.press("Enter")
    expect(page.locator("svg.front")).to_contain_text("9.0 mm")
    page.get_by_role("button", name="Forget the pose first cut").click()
    expect(page.locator("#poses li")).to_have_count(0)
    assert fetch(served, sample)["document"]["part"][2] == 9


def test_a_cell_of_the_specimen_frame_says_why_it_is_zero(page: Page, served: Served) -> None:
    open_copy(page, served, "Second demonstration crystal")
    page.focus("[data-posed='xy']")
    expect(page.locator("#posed-why")).not_to_be_empty()
    assert page.locator("[data-posed='xy'] .lock").count() == 1
