"""Reading drawn paths back: from path data in drawing units to points on the screen in world lengths."""

from __future__ import annotations

import re
from typing import Any

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

# The drawing as it is described: 660 × 716 with the origin in the middle, 1.2 world lengths to the upper edge.
PIXELS = 358.0 / 1.2
ROUNDING = 0.11 / PIXELS
"""Path data have one decimal: no coordinate is off by more, in world lengths."""


def to_screen(places: Any) -> FloatArray:
    """Screen points (..., 2), x right and y up, of drawing coordinates."""
    places = np.asarray(places, dtype=np.float64)
    return np.stack([places[..., 0] - 330.0, 358.0 - places[..., 1]], axis=-1) / PIXELS


def read_places(path: str) -> list[FloatArray]:
    """The polylines of absolute path data (M, L and Z alone), in drawing coordinates."""
    assert re.fullmatch(r"(M[-\d. ]+(L[-\d. ]+)*Z?)*", path), path
    return [
        np.array([[float(number) for number in pair.split()] for pair in line.rstrip("Z").split("L")])
        for line in path.split("M")[1:]
    ]


def read_path(path: str) -> list[FloatArray]:
    """The same on the screen, in world lengths."""
    return [to_screen(line) for line in read_places(path)]


def read_centre(path: str) -> FloatArray:
    """The middle of a ring or diamond, on the screen."""
    ring = re.match(r"M(-?[\d.]+) (-?[\d.]+)a([\d.]+) ", path)
    if ring:
        x, y, size = (float(part) for part in ring.groups())
        return to_screen([x + size, y])
    diamond = re.match(r"M(-?[\d.]+) (-?[\d.]+)l([\d.]+) ", path)
    assert diamond, path
    x, y, size = (float(part) for part in diamond.groups())
    return to_screen([x, y + size])
