"""The specimen in the picture: its block with true sides, axes with values at the tips, ring handles, dimensions."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.web.scene import Subject
from app.web.strokes import (
    Shape,
    join_places,
    place_point,
    print_places,
    shape,
    write_head,
    write_line,
    write_taper,
)

FloatArray = npt.NDArray[np.float64]
_Edge = tuple[int, list[float], list[float]]
"""The axis along which an edge runs, and its ends on the screen."""


def print_length(millimetres: float) -> str:
    """A side of the block as a drawing prints it: one decimal at least, three digits at most."""
    text = f"{millimetres:.3g}"
    return text if "." in text or "e" in text or millimetres >= 100 else f"{text}.0"


STEM: Final = 0.36
"""How far a specimen axis stands out of its face."""
SHAFT: Final = 0.93
"""The part of the stem before its arrowhead."""
CROSS: Final = 0.035
RING: Final = 0.15
RING_AT: Final = 0.21
RING_POINTS: Final = 31
OFFSET: Final = 0.13


@dataclass(frozen=True)
class _Part:
    """A path of the block: rows ``first`` to before ``last`` of its points.

    ``senses`` are the outward senses of the faces that it belongs to: of an edge those along the next two axes after
    its own, of a face the one along its own axis.
    """

    axis: int
    first: int
    last: int
    senses: tuple[float, ...] = ()


@dataclass(frozen=True)
class _Layout:
    """Points of every block, signs · half + shifts with shapes (n, 3), and which of them make a path."""

    signs: FloatArray
    shifts: FloatArray
    edges: tuple[_Part, ...]
    faces: tuple[_Part, ...]
    stems: tuple[_Part, ...]
    shafts: tuple[_Part, ...]
    crosses: tuple[_Part, ...]


def _lay_out() -> _Layout:
    signs: list[FloatArray] = []
    shifts: list[FloatArray] = []

    def add(axis: int, corners: list[FloatArray], moved: list[FloatArray], senses: tuple[float, ...] = ()) -> _Part:
        first = len(signs)
        signs.extend(corners)
        shifts.extend(moved)
        return _Part(axis, first, len(signs), senses)

    units, nothing = np.eye(3), np.zeros(3)
    edges, faces, stems, shafts, crosses = [], [], [], [], []
    for axis, unit in enumerate(units):
        one, two = units[(axis + 1) % 3], units[(axis + 2) % 3]
        for first in (1.0, -1.0):
            ends = [(first * one + second * two, second) for second in (1.0, -1.0)]
            edges += [add(axis, [foot - unit, foot + unit], [nothing] * 2, (first, second)) for foot, second in ends]
            around = [one + two, one - two, -one - two, two - one]
            faces.append(add(axis, [first * unit + corner for corner in around], [nothing] * 4, (first,)))
        stems.append(add(axis, [unit, unit], [nothing, STEM * unit]))
        shafts.append(add(axis, [unit, unit], [nothing, SHAFT * STEM * unit]))
        crosses.append(add(axis, [unit] * 4, [-CROSS * one, CROSS * one, -CROSS * two, CROSS * two]))
    groups = (tuple(group) for group in (edges, faces, stems, shafts, crosses))
    return _Layout(np.array(signs), np.array(shifts), *groups)


_LAYOUT: Final = _lay_out()
_ANGLES: Final = np.deg2rad(np.linspace(-72.0, 72.0, RING_POINTS))


@dataclass(frozen=True)
class _Drawn:
    """The block's points on the screen, and their texts from ``print_places``: the layout's, then each handle's."""

    points: list[list[float]]
    texts: list[str]
    facing: list[float]

    def write(self, part: _Part, *, closed: bool = False) -> str:
        return join_places(self.texts, part.first, part.last, closed=closed)


def draw_block(
    subject: Subject,
    screen: FloatArray,
    shapes: list[Shape],
    labels: dict[str, dict[str, str]],
    texts: list[Shape],
) -> None:
    """Add the block's shapes.

    Args:
        screen: shape (3, 3), v_screen = screen · v_specimen.
        labels: for x, y and z the value and the place at its tip.
    """
    placed = (_LAYOUT.signs * subject.half + _LAYOUT.shifts) @ screen.T
    points = np.concatenate([placed, _trace_handles(subject.half, screen)])
    drawn = _Drawn(points.tolist(), print_places(points), screen[2].tolist())
    hull = _draw_edges(drawn, shapes)
    near = [face for face in _LAYOUT.faces if face.senses[0] == (1.0 if drawn.facing[face.axis] > 0 else -1.0)]
    path = "".join(drawn.write(face, closed=True) for face in near)
    # The faces toward the viewer, to be taken hold of.
    shapes.append(shape("front", "hold", path, hold="block"))
    for axis in sorted(range(3), key=lambda axis: drawn.facing[axis]):
        _draw_axis(axis, drawn, shapes, texts, labels["xyz"[axis]])
    _draw_dimensions(subject, hull, shapes, texts)


def _draw_edges(drawn: _Drawn, shapes: list[Shape]) -> list[_Edge]:
    """Add the edges; the ones on the outline come back."""
    front: list[Shape] = []
    hull: list[_Edge] = []
    back_path = ""
    for edge in _LAYOUT.edges:
        others = (edge.axis + 1) % 3, (edge.axis + 2) % 3
        seen = [drawn.facing[other] * sense > 0 for other, sense in zip(others, edge.senses, strict=True)]
        if not any(seen):
            back_path += drawn.write(edge)
            continue
        start, end = drawn.points[edge.first : edge.last]
        if all(seen):
            front.insert(0, shape("front", "halo wide", drawn.write(edge)))
        else:
            hull.append((edge.axis, start, end))
        front.append(shape("front", "edge", write_taper(start, end)))
    shapes.append(shape("back", "far-edge", back_path))
    shapes.extend(front)
    return hull


def _draw_axis(axis: int, drawn: _Drawn, shapes: list[Shape], texts: list[Shape], label: dict[str, str]) -> None:
    letter = "xyz"[axis]
    layer = "front" if drawn.facing[axis] > 0 else "back"
    stem, cross = _LAYOUT.stems[axis], _LAYOUT.crosses[axis]
    foot, tip = drawn.points[stem.first : stem.last]
    way = tip[0] - foot[0], tip[1] - foot[1]
    if layer == "front":
        shapes.append(shape(layer, "halo", drawn.write(stem)))
    middle = cross.first + 2
    path = join_places(drawn.texts, cross.first, middle) + join_places(drawn.texts, middle, cross.last)
    shapes.append(shape(layer, "cross", path))
    shapes.append(shape(layer, "axis", drawn.write(_LAYOUT.shafts[axis])))
    shapes.append(shape(layer, "head", write_head(tip, way, 15.0, 5.2)))
    _draw_handle(axis, drawn, shapes)
    x, y = place_point(tip)
    size = math.hypot(*way)
    right, down = (way[0] / size, -way[1] / size) if size > 1e-6 else (0.0, -1.0)
    x, y = x + 12 * right, y + 12 * down
    if down < -0.8:
        anchor, x, y = "end", x - 15, y + 14
    elif down > 0.75:
        anchor, y = "middle", y + 16
    else:
        anchor, y = ("start" if right > 0 else "end"), y + 6
    runs = [[letter, "symbol"], [f" {label['value']}", "value"]]
    texts.append({"class": f"tip tip-{letter}", "x": round(x, 1), "y": round(y, 1), "runs": runs, "anchor": anchor})
    if letter == "z":
        where = [[label["place"], "plain"]]
        texts.append({"class": "tip-place", "x": round(x, 1), "y": round(y + 19, 1), "runs": where, "anchor": anchor})


def _trace_handles(half: FloatArray, screen: FloatArray) -> FloatArray:
    """Points on the screen of the three ring handles, shape (3 · RING_POINTS, 3): arcs about each axis.

    Their middles are toward the viewer; of an axis that points at the viewer, anywhere.
    """
    # Row k of the two holds the columns of the screen along the first and second axis after k.
    one, two = screen.T[[1, 2, 0]], screen.T[[2, 0, 1]]
    middles = np.stack([one[:, 2], two[:, 2]])
    sizes = np.linalg.norm(middles, axis=0)
    middles = np.where(sizes < 0.05, np.array([[1.0], [0.0]]), middles / np.maximum(sizes, 0.05))
    cosines, sines = RING * np.cos(_ANGLES), RING * np.sin(_ANGLES)
    along_one = middles[0, :, None] * cosines - middles[1, :, None] * sines
    along_two = middles[1, :, None] * cosines + middles[0, :, None] * sines
    centres = (half + RING_AT)[:, None] * screen.T
    points = centres[:, None] + along_one[..., None] * one[:, None] + along_two[..., None] * two[:, None]
    return points.reshape(-1, 3)


def _draw_handle(axis: int, drawn: _Drawn, shapes: list[Shape]) -> None:
    first = len(_LAYOUT.signs) + axis * RING_POINTS
    last = first + RING_POINTS
    whole = join_places(drawn.texts, first, last)
    layer = "front" if drawn.facing[axis] > -0.35 else "back"
    if layer == "front":
        shapes.append(shape(layer, "halo thin", whole))
    shapes.append(shape(layer, "hand", join_places(drawn.texts, first + 1, last - 1)))
    heads = ""
    for tip, before in ((last - 1, last - 5), (first, first + 4)):
        end, inner = drawn.points[tip], drawn.points[before]
        heads += write_head(end, (end[0] - inner[0], end[1] - inner[1]), 10.0, 4.6)
    shapes.append(shape(layer, "hand-head", heads))
    shapes.append(shape("front", "ring-hold", whole, hold="xyz"[axis]))


def _draw_dimensions(subject: Subject, hull: list[_Edge], shapes: list[Shape], texts: list[Shape]) -> None:
    """A dimension line beside one outer edge per axis: the lowest, or of the steepest axis the rightmost."""
    steep = {axis: abs(end[1] - start[1]) for axis, start, end in hull}
    upright = max(steep, key=lambda axis: steep[axis]) if steep else -1
    for axis in range(3):
        lines = [(start, end) for number, start, end in hull if number == axis]
        if not lines:
            continue
        start, end = max(
            lines, key=lambda line: line[0][0] + line[1][0] if axis == upright else -line[0][1] - line[1][1]
        )
        right, up = end[0] - start[0], end[1] - start[1]
        size = math.hypot(right, up)
        if size < 0.12:
            continue
        out_x, out_y = -up / size, right / size
        if out_x * (start[0] + end[0]) + out_y * (start[1] + end[1]) <= 0:
            out_x, out_y = -out_x, -out_y
        ends = [(x + out_x * OFFSET, y + out_y * OFFSET) for x, y, _ in (start, end)]
        slash_x, slash_y = (right / size + out_x) * 0.017, (up / size + out_y) * 0.017
        path = write_line(*ends)
        # At each end what leads out to it, and a slash across it.
        for (x, y, _), (moved_x, moved_y) in zip((start, end), ends, strict=True):
            path += write_line(
                (x + out_x * 0.03, y + out_y * 0.03), (moved_x + out_x * 0.03, moved_y + out_y * 0.03)
            ) + write_line((moved_x - slash_x, moved_y - slash_y), (moved_x + slash_x, moved_y + slash_y))
        shapes.append(shape("front", "dimension", path))
        angle = (math.degrees(math.atan2(-up, right)) + 90.0) % 180.0 - 90.0
        x, y = place_point([(ends[0][0] + ends[1][0]) / 2.0, (ends[0][1] + ends[1][1]) / 2.0])
        text = print_length(subject.part[axis]) + (" mm" if axis == upright else "")
        texts.append(
            {
                "class": "dimension-text",
                "x": round(x, 1),
                "y": round(y, 1),
                "runs": [[text, "plain"]],
                "anchor": "middle",
                "rotate": round(angle, 1),
            }
        )
