"""Strokes of the picture over the scene: from points on the screen to shapes that the page draws as they come.

Screen coordinates here are world lengths, x right, y up, z toward the viewer; a drawing has its origin in the middle,
y downward, ``PIXELS`` units to the world length.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any, Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
Shape = dict[str, Any]
Point = Sequence[float] | FloatArray
"""One screen point: x, y and, where depth matters, z."""

WIDTH: Final = 660.0
HEIGHT: Final = 716.0
HALF_WINDOW: Final = 1.2
"""World length from the middle of the picture to its upper edge."""

PIXELS: Final = HEIGHT / 2.0 / HALF_WINDOW

_LOWEST: Final = -2048
_TENTHS: Final = [f"{number / 10.0:.1f}" for number in range(_LOWEST, 10240)]
# Every place of a drawing and some way beyond, as it is printed: looking it up is several times faster than printing,
# and a picture has more than a thousand coordinates.
_X_TEXTS: Final = np.array([f"L{text} " for text in _TENTHS], dtype=object)
_Y_TEXTS: Final = np.array(_TENTHS, dtype=object)


def to_drawing(points: FloatArray) -> FloatArray:
    """Drawing coordinates (..., 2) of screen points (..., 2 or 3)."""
    return np.stack([WIDTH / 2.0 + points[..., 0] * PIXELS, HEIGHT / 2.0 - points[..., 1] * PIXELS], axis=-1)


def place_point(point: Point) -> tuple[float, float]:
    """Drawing coordinates of one screen point."""
    return WIDTH / 2.0 + float(point[0]) * PIXELS, HEIGHT / 2.0 - float(point[1]) * PIXELS


def print_places(points: FloatArray) -> list[str]:
    """Screen points (n, 2 or 3) as they stand in path data: two texts each, "L12.3 " and "45.6".

    All points of a picture are printed at once; ``join_places`` makes paths of them.
    """
    numbers = np.rint(to_drawing(points) * 10.0)
    inside = (numbers >= _LOWEST) & (numbers < _LOWEST + len(_TENTHS))
    places = np.where(inside, numbers - _LOWEST, 0.0).astype(np.int64)
    texts = np.stack([_X_TEXTS[places[:, 0]], _Y_TEXTS[places[:, 1]]], axis=-1).ravel().tolist()
    for index in np.flatnonzero(~inside).tolist():
        text = f"{numbers.flat[index] / 10.0:.1f}"
        texts[index] = text if index % 2 else f"L{text} "
    return texts


def join_places(texts: list[str], first: int, last: int, *, closed: bool = False) -> str:
    """Path data through the points from ``first`` to before ``last`` of what ``print_places`` printed."""
    return f"M{''.join(texts[2 * first : 2 * last])[1:]}{'Z' if closed else ''}"


def write_path(points: FloatArray, *, closed: bool = False) -> str:
    """Path data through screen points (n, 2 or 3)."""
    return join_places(print_places(points), 0, len(points), closed=closed)


def split_runs(flags: npt.NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Stretches of True of more than one entry, as first and one past the last."""
    padded = np.concatenate([[False], flags, [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1]).tolist()
    return [(first, last) for first, last in zip(edges[::2], edges[1::2], strict=True) if last - first > 1]


def shape(layer: str, name: str, path: str, **more: Any) -> Shape:
    """One path: ``layer`` back or front, ``name`` its class."""
    return {"layer": layer, "class": name, "d": path, **more}


def write_runs(points: FloatArray, flags: npt.NDArray[np.bool_]) -> str:
    """Path data of those stretches of a polyline where the flags hold."""
    texts = print_places(points)
    return "".join(join_places(texts, first, last) for first, last in split_runs(flags))


def write_segments(segments: FloatArray) -> str:
    """Path data of straight pieces between screen points, shape (n, 2, 2 or 3)."""
    texts = print_places(segments.reshape(-1, segments.shape[-1]))
    texts[::4] = [f"M{text[1:]}" for text in texts[::4]]
    return "".join(texts)


def write_line(start: Point, end: Point) -> str:
    """Path data of one straight piece between two screen points."""
    (first_x, first_y), (last_x, last_y) = place_point(start), place_point(end)
    return f"M{first_x:.1f} {first_y:.1f}L{last_x:.1f} {last_y:.1f}"


def write_diamond(point: Point, size: float) -> str:
    """A diamond about a screen point; size in drawing units."""
    x, y = place_point(point)
    return f"M{x:.1f} {y - size:.1f}l{size} {size}l{-size} {size}l{-size} {-size}Z"


def write_ring(point: Point, size: float) -> str:
    """A circle about a screen point; size in drawing units."""
    x, y = place_point(point)
    return f"M{x - size:.1f} {y:.1f}a{size} {size} 0 1 0 {2 * size} 0a{size} {size} 0 1 0 {-2 * size} 0Z"


def write_taper(start: Point, end: Point) -> str:
    """A stroke that is thin far away and heavy near by, as a closed path."""
    (first_x, first_y), (last_x, last_y) = place_point(start), place_point(end)
    size = math.hypot(last_x - first_x, last_y - first_y)
    if size < 1e-6:
        return ""
    across_x, across_y = (first_y - last_y) / size, (last_x - first_x) / size
    first, last = ((0.8 + 2.9 * (float(point[2]) + 1.0) / 2.0) / 2.0 for point in (start, end))
    return (
        f"M{first_x + across_x * first:.1f} {first_y + across_y * first:.1f}"
        f"L{last_x + across_x * last:.1f} {last_y + across_y * last:.1f}"
        f"L{last_x - across_x * last:.1f} {last_y - across_y * last:.1f}"
        f"L{first_x - across_x * first:.1f} {first_y - across_y * first:.1f}Z"
    )


def write_head(tip: Point, way: Point, length: float, width: float) -> str:
    """A filled arrowhead with its point at ``tip``, along ``way`` on the screen; sizes in drawing units."""
    x, y = place_point(tip)
    size = math.hypot(way[0], way[1])
    if size < 1e-9:
        return ""
    along_x, along_y = float(way[0]) / size, -float(way[1]) / size
    base_x, base_y = x - along_x * length, y - along_y * length
    across_x, across_y = -along_y * width, along_x * width
    return (
        f"M{x:.1f} {y:.1f}L{base_x + across_x:.1f} {base_y + across_y:.1f}"
        f"L{x - along_x * length * 0.78:.1f} {y - along_y * length * 0.78:.1f}"
        f"L{base_x - across_x:.1f} {base_y - across_y:.1f}Z"
    )
