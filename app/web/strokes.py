"""Strokes of the picture over the scene: from points on the screen to shapes that the page draws as they come.

Screen coordinates here are world lengths, x right, y up, z toward the viewer; a drawing has its origin in the middle,
y downward, ``PIXELS`` units to the world length.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
Shape = dict[str, Any]

WIDTH: Final = 660.0
HEIGHT: Final = 716.0
HALF_WINDOW: Final = 1.2
"""World length from the middle of the picture to its upper edge."""

PIXELS: Final = HEIGHT / 2.0 / HALF_WINDOW


def to_drawing(points: FloatArray) -> FloatArray:
    """Drawing coordinates (..., 2) of screen points (..., 2 or 3)."""
    return np.stack([WIDTH / 2.0 + points[..., 0] * PIXELS, HEIGHT / 2.0 - points[..., 1] * PIXELS], axis=-1)


def write_path(points: FloatArray, *, closed: bool = False) -> str:
    """Path data through screen points (n, 2 or 3)."""
    places = to_drawing(points)
    steps = "L".join(f"{x:.1f} {y:.1f}" for x, y in places)
    return f"M{steps}{'Z' if closed else ''}"


def split_runs(flags: npt.NDArray[np.bool_]) -> list[tuple[int, int]]:
    """Stretches of True of more than one entry, as first and one past the last."""
    padded = np.concatenate([[False], flags, [False]])
    edges = np.flatnonzero(padded[1:] != padded[:-1])
    return [(int(first), int(last)) for first, last in edges.reshape(-1, 2) if last - first > 1]


def shape(layer: str, name: str, path: str, **more: Any) -> Shape:
    """One path: ``layer`` back or front, ``name`` its class."""
    return {"layer": layer, "class": name, "d": path, **more}


def write_runs(points: FloatArray, flags: npt.NDArray[np.bool_]) -> str:
    """Path data of those stretches of a polyline where the flags hold."""
    return "".join(write_path(points[first:last]) for first, last in split_runs(flags))


def write_diamond(point: FloatArray, size: float) -> str:
    """A diamond about a screen point; size in drawing units."""
    x, y = to_drawing(point)
    return f"M{x:.1f} {y - size:.1f}l{size} {size}l{-size} {size}l{-size} {-size}Z"


def write_ring(point: FloatArray, size: float) -> str:
    """A circle about a screen point; size in drawing units."""
    x, y = to_drawing(point)
    return f"M{x - size:.1f} {y:.1f}a{size} {size} 0 1 0 {2 * size} 0a{size} {size} 0 1 0 {-2 * size} 0Z"


def write_taper(start: FloatArray, end: FloatArray) -> str:
    """A stroke that is thin far away and heavy near by, as a closed path."""
    places = to_drawing(np.array([start, end]))
    along = places[1] - places[0]
    size = float(np.linalg.norm(along))
    if size < 1e-6:
        return ""
    across = np.array([-along[1], along[0]]) / size
    widths = [(0.8 + 2.9 * (float(point[2]) + 1.0) / 2.0) / 2.0 for point in (start, end)]
    corners = [
        places[0] + across * widths[0],
        places[1] + across * widths[1],
        places[1] - across * widths[1],
        places[0] - across * widths[0],
    ]
    return "M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in corners) + "Z"


def write_head(tip: FloatArray, way: FloatArray, length: float, width: float) -> str:
    """A filled arrowhead with its point at ``tip``, along ``way`` on the screen; sizes in drawing units."""
    point = to_drawing(tip)
    flat = np.array([way[0], -way[1]])
    size = float(np.linalg.norm(flat))
    if size < 1e-9:
        return ""
    along = flat / size
    across = np.array([-along[1], along[0]])
    base = point - along * length
    notch = point - along * length * 0.78
    corners = [point, base + across * width, notch, base - across * width]
    return "M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in corners) + "Z"
