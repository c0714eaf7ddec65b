"""Labels of the picture do not collide: checked by boxes that this file makes itself, with widths of a real face."""

from __future__ import annotations

import math
import unicodedata
from typing import Any

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.web.label_places import find_box, measure_width, overlap, place_labels
from app.web.overlay import draw_overlay
from app.web.turning import View
from tests.crystal.reference import CELLS
from tests.web.subjects import ELLIPSOID, MONOCLINIC, ONE_SHEET, TRICLINIC, TWO_SHEETS, make_subject, random_rotation

# Advances of Liberation Sans in 1/2048 of its size, read from the font's own table.
ADVANCES = {
    sign: advance
    for signs, advance in (
        ("0123456789ongau", 1139),
        (".,[] ·f", 569),
        ("()", 682),
        ("°", 819),
        ("−", 1196),
        ("xsyz", 1024),
        ("m", 1706),
        ("il", 455),
        ("W", 1933),
    )
    for sign in signs
}

SUBJECTS = {
    "triclinic": make_subject(ELLIPSOID, TRICLINIC),
    "monoclinic": make_subject({"11": 13.2, "22": 24.6, "33": 15.9, "13": 1.85}, MONOCLINIC),
    "one sheet": make_subject(ONE_SHEET, TRICLINIC, part=(5.0, 5.0, 0.4)),
    "two sheets": make_subject(TWO_SHEETS, TRICLINIC, part=(0.3, 0.3, 9.0)),
    "cubic": make_subject({"11": 7.0}, build_crystal(CELLS["cubic"], "m-3m")),
    "limiting": make_subject({"11": 7.0, "33": 5.0}, build_crystal(None, "∞/mm")),
}


def measure(run: str, role: str, size: float) -> float:
    """A symbol is half its size wide, as italic letters are."""
    signs = [sign for sign in run if not unicodedata.combining(sign)]
    if role == "symbol":
        return 0.5 * 1.25 * size * len(signs)
    return sum(ADVANCES[sign] for sign in signs) / 2048 * (11.0 if role == "sub" else size)


def corners(text: Any) -> Any:
    """Left, top, right and bottom by this file's own reckoning: a tenth less high than the line."""
    size = {"tip": 19.0, "level": 13.0, "remark": 17.0}.get(text["class"].split(" ")[0], 15.0)
    width = sum(measure(run, role, size) for run, role in text["runs"])
    x, y = text["x"], text["y"]
    if "rotate" in text:
        turn = math.radians(text["rotate"])
        half = width / 2 * abs(math.cos(turn)) + size / 3 * abs(math.sin(turn))
        rise = width / 2 * abs(math.sin(turn)) + size / 3 * abs(math.cos(turn))
        return x - half, y - rise, x + half, y + rise
    left = x - {"start": 0.0, "middle": width / 2, "end": width}[text["anchor"]]
    return left, y - 0.7 * size, left + width, y + 0.15 * size


@pytest.mark.parametrize("text", ["12.48(8)", "0.8", "[1 0 2]", "\u22124.1", "off 4.1°", "8 mm"])
def test_no_width_is_taken_for_less_than_the_face_gives(text: str) -> None:
    true = sum(ADVANCES[sign] for sign in text) / 2048 * 19.0
    assert true <= measure_width([[text, "plain"]], 19.0) <= 1.2 * true


@pytest.mark.parametrize("name", SUBJECTS)
def test_no_two_labels_stand_on_each_other_in_any_pose(name: str) -> None:
    subject = SUBJECTS[name]
    labels = {
        letter: {"value": f"{17.31 + number:.2f}(12)", "place": "1.3° off n(2\u03050 1)"}
        for number, letter in enumerate("xyz")
    }
    scene = subject.scene("value")
    for seed in range(300):
        view = View("specimen", random_rotation(seed))
        texts = draw_overlay(subject, scene, random_rotation(seed + 10_000), view, labels)["texts"]
        boxes = np.array([corners(text) for text in texts if any(run for run, _ in text["runs"])])
        apart = (boxes[:, None, 2] <= boxes[None, :, 0]) | (boxes[:, None, 3] <= boxes[None, :, 1])
        apart |= apart.T
        np.fill_diagonal(apart, True)
        where = np.argwhere(~apart)
        assert not len(where), (seed, [texts[row]["runs"] for row in where[0]])
        # None of what must be there is missing.
        assert sum(text["class"].startswith("tip tip-") for text in texts) == 3


def label(name: str, x: float, y: float, text: str, **more: Any) -> Any:
    return {"class": name, "x": x, "y": y, "runs": [[text, "plain"]], "anchor": "start", **more}


def test_what_stands_free_is_not_moved() -> None:
    texts = [label("tip tip-x", 100, 100, "17.3"), label("tip tip-y", 300, 100, "17.3")]
    assert place_labels(texts) == texts


def test_the_lesser_text_gives_way_and_the_order_stays() -> None:
    texts = [label("crystal-letter", 100, 100, "a"), label("tip tip-x", 100, 100, "17.3")]
    first, second = place_labels(texts)
    assert second == texts[1]
    assert first["runs"] == [["a", "plain"]] and (first["x"], first["y"]) != (100, 100)
    assert not overlap(find_box(first), find_box(second))
    assert math.hypot(first["x"] - 100, first["y"] - 100) < 60


def test_a_number_on_its_line_is_left_out_rather_than_moved() -> None:
    texts = [label("tip tip-x", 100, 100, "17.3"), label("level", 104, 96, "20", rotate=12.0, anchor="middle")]
    assert place_labels(texts) == texts[:1]


def test_the_same_texts_are_placed_the_same_way_again() -> None:
    texts = [label("crystal-letter", 100 + 3 * number, 100, "abc"[number]) for number in range(3)]
    assert place_labels(texts) == place_labels([dict(text) for text in texts])
