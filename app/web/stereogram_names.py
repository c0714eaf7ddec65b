"""Places for the names of a stereogram: beside their marks, on no other mark and on no other name."""

from __future__ import annotations

import math
import re
from html import escape
from typing import Final

from app.web.label_places import ASCENT, DESCENT, Box, measure_width, overlap

WAYS: Final = tuple(
    (math.cos(turn), math.sin(turn)) for turn in (math.pi * step / 4.0 for step in (7, 5, 1, 3, 0, 4, 6, 2))
)
"""Above right first, then the other corners, then the sides."""

_NEGATIVE: Final = re.compile("\u2212(\\d)")

FARTHER: Final = (0.0, 3.0)
BOUNDS: Final[Box] = (-121.0, -115.0, 121.0, 115.0)
"""Of the drawing, beyond which a name would be cut off."""


def find_name_box(text: str, size: float, x: float, y: float) -> Box:
    """The box of a name whose baseline starts at (x, y), y downward."""
    return x, y - ASCENT * size, x + measure_width([[text, "plain"]], size), y + DESCENT * size


def bar_name(text: str) -> str:
    """An index form as SVG with a bar over each negative number instead of its sign."""
    return _NEGATIVE.sub(r'<tspan class="stereo-over" text-decoration="overline">\1</tspan>', escape(text))


def place_name(
    text: str, size: float, mark: tuple[float, float], away: float, boxes: list[Box]
) -> tuple[float, float] | None:
    """Where the baseline of a name starts, near a mark; its box is added to ``boxes``. None where there is no room.

    Args:
        text: the name.
        size: of its letters.
        mark: the mark's place, right and down.
        away: from the mark's place to the nearest point of the name; 0 puts the name on the place.
        boxes: what is there already.
    """
    width = measure_width([[text, "plain"]], size)
    height = (ASCENT + DESCENT) * size
    tries = (
        [(0.0, 0.0)]
        if away == 0.0
        else [
            ((away + more) * cosine + width / 2.0 * _sign(cosine), (away + more) * sine + height / 2.0 * _sign(sine))
            for more in FARTHER
            for cosine, sine in WAYS
        ]
    )
    for right, down in tries:
        x = mark[0] + right - width / 2.0
        y = mark[1] + down - height / 2.0 + ASCENT * size
        box = find_name_box(text, size, x, y)
        inside = box[0] >= BOUNDS[0] and box[1] >= BOUNDS[1] and box[2] <= BOUNDS[2] and box[3] <= BOUNDS[3]
        if inside and not any(overlap(box, other) for other in boxes):
            boxes.append(box)
            return x, y
    return None


def _sign(part: float) -> float:
    return 0.0 if abs(part) < 1e-9 else math.copysign(1.0, part)
