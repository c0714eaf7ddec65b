"""The pages as pictures, against small references.

A page is reduced to the luminance of cells of 24 px, smoothed over its neighbours; what is measured is the share of
cells that differ by more than a step. Fonts are those of the machine, and another family moves lines of text about as
much as a small panel that is missing. So the widths of a few words are kept with the references: where the letters are
the same the tolerance is tight, and elsewhere it is wide and finds only what is badly wrong.

To take the references anew, look at them, and keep them:

    HALFTURN_RETAKE_PICTURES=1 pytest tests/browser/test_pictures.py
"""

from __future__ import annotations

import io
import json
import os
from pathlib import Path

import numpy as np
import numpy.typing as npt
import pytest
from PIL import Image, ImageFilter
from playwright.sync_api import Browser, Page

from tests.browser.test_tensor_page import open_copy
from tests.processes import Served

FloatArray = npt.NDArray[np.float64]

PICTURES = Path(__file__).parent / "pictures"
LETTERS = PICTURES / "letters.json"
CELL = 24
STEP = 0.03
"""Luminance, 0 to 1, by which a cell must differ to count."""

TOLERANCE = 0.01
"""Share of cells that may differ where the letters are those of the references; a missing panel changes twice that."""

WIDE_TOLERANCE = 0.25
"""The same where they are not: other letters change up to a fifth, a wrong ground or an empty page nearly all."""

HEIGHT = 1200
SHOTS = [
    ("tensor", 1440, "light"),
    ("tensor", 1440, "dark"),
    ("tensor", 390, "light"),
    ("readings", 1440, "light"),
    ("readings", 390, "dark"),
    ("cut", 1440, "light"),
    ("cut", 1024, "dark"),
    ("series", 1440, "light"),
    ("series", 1024, "dark"),
    ("sheet", 1440, "light"),
    ("sheet", 390, "light"),
]


def reduce(picture: bytes) -> Image.Image:
    """The upper part of a page as cells of grey."""
    whole = Image.open(io.BytesIO(picture)).convert("L")
    part = Image.new("L", (whole.width, HEIGHT), whole.getpixel((2, whole.height - 3)))
    part.paste(whole.crop((0, 0, whole.width, HEIGHT)))
    cells = part.resize((round(whole.width / CELL), round(HEIGHT / CELL)), Image.Resampling.BOX)
    return cells.filter(ImageFilter.BoxBlur(1))


def measure(one: Image.Image, other: Image.Image) -> float:
    """The share of cells that differ by more than a step; 1 where the sizes do."""
    if one.size != other.size:
        return 1.0
    first, second = (np.asarray(image, dtype=np.float64) / 255.0 for image in (one, other))
    return float(np.mean(np.abs(first - second) > STEP))


def open_page(browser: Browser, served: Served, page_name: str, width: int, scheme: str) -> Page:
    dark = scheme == "dark"
    context = browser.new_context(
        base_url=served.url,
        viewport={"width": width, "height": 900},
        color_scheme="dark" if dark else "light",
        reduced_motion="reduce",
    )
    page = context.new_page()
    sample = open_copy(page, served)
    page.goto(f"/samples/{sample}/{page_name}", wait_until="networkidle")
    if page_name == "cut":
        page.click("[data-act='make']")
        page.wait_for_selector("#target-direction")
    page.wait_for_timeout(900)
    return page


def take(page: Page) -> Image.Image:
    return reduce(page.screenshot(full_page=True))


def measure_letters(page: Page) -> list[float]:
    """Widths in px of words in the three faces of the pages: they tell families of letters apart."""
    widths: list[float] = page.evaluate(
        """() => ['--sans', '--serif', '--number'].flatMap(face => ['Halfturn 0123', 'principal axes'].map(words => {
             const span = document.createElement('span');
             span.textContent = words;
             span.style.cssText = `position: absolute; font: 100px var(${face})`;
             document.body.append(span);
             const { width } = span.getBoundingClientRect();
             span.remove();
             return Math.round(width);
           }))"""
    )
    return widths


@pytest.mark.parametrize(("name", "width", "scheme"), SHOTS)
def test_a_page_looks_like_its_reference(browser: Browser, served: Served, name: str, width: int, scheme: str) -> None:
    page = open_page(browser, served, name, width, scheme)
    picture, letters = take(page), measure_letters(page)
    page.context.close()
    file = PICTURES / f"{name}-{width}-{scheme}.png"
    if os.environ.get("HALFTURN_RETAKE_PICTURES") == "1":
        picture.save(file, optimize=True)
        LETTERS.write_text(json.dumps(letters), "utf-8")
    same = np.allclose(letters, json.loads(LETTERS.read_text("utf-8")), atol=2)
    share = measure(picture, Image.open(file))
    assert share <= (TOLERANCE if same else WIDE_TOLERANCE), f"{share:.1%} of the picture differs from {file.name}"


@pytest.mark.parametrize(
    ("name", "missing"),
    [
        ("tensor", "#crystal-matrix"),
        ("tensor", ".views"),
        ("tensor", ".scene"),
        ("tensor", ".read"),
        ("readings", ".table-side"),
        ("readings", ".stereo-holder"),
        ("cut", ".cut-answer"),
        ("series", "#series-form"),
        ("sheet", ".paper-sheet"),
    ],
)
def test_a_missing_panel_would_be_seen(browser: Browser, served: Served, name: str, missing: str) -> None:
    page = open_page(browser, served, name, 1440, "light")
    before = take(page)
    page.add_style_tag(content=f"{missing} {{ visibility: hidden !important; }}")
    page.wait_for_timeout(200)
    share = measure(before, take(page))
    page.context.close()
    assert share > 1.5 * TOLERANCE, f"without {missing} only {share:.1%} differ"


def test_other_letters_are_told_apart_and_stay_within_the_wide_tolerance(browser: Browser, served: Served) -> None:
    page = open_page(browser, served, "tensor", 1440, "light")
    before, letters = take(page), measure_letters(page)
    page.add_style_tag(content=":root { --sans: monospace; --number: monospace; }")
    page.wait_for_timeout(400)
    assert not np.allclose(measure_letters(page), letters, atol=2)
    assert measure(before, take(page)) < WIDE_TOLERANCE
    page.context.close()


def test_a_wrong_ground_is_seen_even_with_other_letters(browser: Browser, served: Served) -> None:
    page = open_page(browser, served, "tensor", 1440, "light")
    before = take(page)
    page.emulate_media(color_scheme="dark")
    page.wait_for_timeout(400)
    assert measure(before, take(page)) > 2 * WIDE_TOLERANCE
    page.context.close()
