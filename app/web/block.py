"""The specimen in the picture: its block with true sides, axes with values at the tips, ring handles, dimensions."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from app.web.scene import Subject
from app.web.strokes import Shape, shape, to_drawing, write_head, write_path, write_taper

FloatArray = npt.NDArray[np.float64]


def print_length(millimetres: float) -> str:
    """A side of the block as a drawing prints it: one decimal at least, three digits at most."""
    text = f"{millimetres:.3g}"
    return text if "." in text or "e" in text or millimetres >= 100 else f"{text}.0"


STEM: Final = 0.36
"""How far a specimen axis stands out of its face."""
RING: Final = 0.15
RING_AT: Final = 0.21
OFFSET: Final = 0.13


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
    half = subject.half
    facing = screen[2]
    front: list[Shape] = []
    hull = []
    back_path = ""
    for axis in range(3):
        others = [(axis + 1) % 3, (axis + 2) % 3]
        for first in (1.0, -1.0):
            for second in (1.0, -1.0):
                corner = np.zeros(3)
                corner[others[0]], corner[others[1]] = first * half[others[0]], second * half[others[1]]
                ends = np.array([corner, corner])
                ends[0, axis], ends[1, axis] = -half[axis], half[axis]
                drawn = ends @ screen.T
                seen = [facing[others[0]] * first > 0, facing[others[1]] * second > 0]
                if not any(seen):
                    back_path += write_path(drawn)
                    continue
                if all(seen):
                    front.insert(0, shape("front", "halo wide", write_path(drawn)))
                else:
                    hull.append((axis, drawn))
                front.append(shape("front", "edge", write_taper(drawn[0], drawn[1])))
    shapes.append(shape("back", "far-edge", back_path))
    shapes.extend(front)
    _draw_hit(half, screen, shapes)
    for axis, letter in sorted(enumerate("xyz"), key=lambda pair: facing[pair[0]]):
        _draw_axis(axis, letter, half, screen, shapes, texts, labels[letter])
    _draw_dimensions(subject, hull, shapes, texts)


def _draw_hit(half: FloatArray, screen: FloatArray, shapes: list[Shape]) -> None:
    """The faces toward the viewer, to be taken hold of."""
    path = ""
    for axis in range(3):
        sense = 1.0 if screen[2, axis] > 0 else -1.0
        first, second = (axis + 1) % 3, (axis + 2) % 3
        corners = np.zeros((4, 3))
        corners[:, axis] = sense * half[axis]
        corners[:, first] = half[first] * np.array([1, 1, -1, -1])
        corners[:, second] = half[second] * np.array([1, -1, -1, 1])
        path += write_path(corners @ screen.T, closed=True)
    shapes.append(shape("front", "hold", path, hold="block"))


def _draw_axis(
    axis: int,
    letter: str,
    half: FloatArray,
    screen: FloatArray,
    shapes: list[Shape],
    texts: list[Shape],
    label: dict[str, str],
) -> None:
    unit = np.eye(3)[axis]
    layer = "front" if screen[2, axis] > 0 else "back"
    foot, tip = unit * half[axis], unit * (half[axis] + STEM)
    drawn = np.array([foot, tip]) @ screen.T
    way = drawn[1] - drawn[0]
    shaft = np.array([drawn[0], drawn[0] + way * 0.93])
    cross = ""
    for other in ((axis + 1) % 3, (axis + 2) % 3):
        side = np.eye(3)[other] * 0.035
        cross += write_path(np.array([foot - side, foot + side]) @ screen.T)
    if layer == "front":
        shapes.append(shape(layer, "halo", write_path(drawn)))
    shapes.append(shape(layer, "cross", cross))
    shapes.append(shape(layer, "axis", write_path(shaft)))
    shapes.append(shape(layer, "head", write_head(drawn[1], way, 15.0, 5.2)))
    _draw_handle(axis, letter, unit * (half[axis] + RING_AT), screen, shapes)
    x, y = (float(value) for value in to_drawing(drawn[1]))
    flat = np.array([way[0], -way[1]])
    size = float(np.linalg.norm(flat))
    across = flat / size if size > 1e-6 else np.array([0.0, -1.0])
    x, y = x + 12 * across[0], y + 12 * across[1]
    if across[1] < -0.8:
        anchor, x, y = "end", x - 15, y + 14
    elif across[1] > 0.75:
        anchor, y = "middle", y + 16
    else:
        anchor, y = ("start" if across[0] > 0 else "end"), y + 6
    runs = [[letter, "symbol"], [f" {label['value']}", "value"]]
    texts.append({"class": f"tip tip-{letter}", "x": round(x, 1), "y": round(y, 1), "runs": runs, "anchor": anchor})
    if letter == "z":
        where = [[label["place"], "plain"]]
        texts.append({"class": "tip-place", "x": round(x, 1), "y": round(y + 19, 1), "runs": where, "anchor": anchor})


def _draw_handle(axis: int, letter: str, centre: FloatArray, screen: FloatArray, shapes: list[Shape]) -> None:
    unit, toward = np.eye(3)[axis], screen[2]
    middle = toward - unit * (toward @ unit)
    if np.linalg.norm(middle) < 0.05:
        middle = np.eye(3)[(axis + 1) % 3]
    middle = middle / np.linalg.norm(middle)
    across = np.cross(unit, middle)
    angles = np.deg2rad(np.linspace(-72.0, 72.0, 31))[:, None]
    points = (centre + RING * (np.cos(angles) * middle + np.sin(angles) * across)) @ screen.T
    layer = "front" if toward[axis] > -0.35 else "back"
    if layer == "front":
        shapes.append(shape(layer, "halo thin", write_path(points)))
    shapes.append(shape(layer, "hand", write_path(points[1:-1])))
    heads = write_head(points[-1], points[-1] - points[-5], 10.0, 4.6) + write_head(
        points[0], points[0] - points[4], 10.0, 4.6
    )
    shapes.append(shape(layer, "hand-head", heads))
    shapes.append(shape("front", "ring-hold", write_path(points), hold=letter))


def _draw_dimensions(
    subject: Subject, hull: list[tuple[int, FloatArray]], shapes: list[Shape], texts: list[Shape]
) -> None:
    """A dimension line beside one outer edge per axis: the lowest, or of the steepest axis the rightmost."""
    steep = {axis: abs(float(line[1, 1] - line[0, 1])) for axis, line in hull}
    upright = max(steep, key=lambda axis: steep[axis]) if steep else -1
    for axis in range(3):
        lines = [line for number, line in hull if number == axis]
        if not lines:
            continue
        outward = [float(line[:, 0].sum() if axis == upright else -line[:, 1].sum()) for line in lines]
        line = lines[int(np.argmax(outward))]
        flat = line[:, :2]
        along = flat[1] - flat[0]
        size = float(np.linalg.norm(along))
        if size < 0.12:
            continue
        away = np.array([-along[1], along[0]]) / size
        away = away if away @ flat.mean(axis=0) > 0 else -away
        moved = flat + away * OFFSET
        path = write_path(moved)
        for inner, outer in zip(flat, moved, strict=True):
            path += write_path(np.array([inner + away * 0.03, outer + away * 0.03]))
            slash = (along / size + away) * 0.017
            path += write_path(np.array([outer - slash, outer + slash]))
        shapes.append(shape("front", "dimension", path))
        angle = float(np.rad2deg(np.arctan2(-along[1], along[0])))
        angle = (angle + 90.0) % 180.0 - 90.0
        x, y = to_drawing(moved.mean(axis=0))
        text = print_length(subject.part[axis]) + (" mm" if axis == upright else "")
        texts.append(
            {
                "class": "dimension-text",
                "x": round(float(x), 1),
                "y": round(float(y), 1),
                "runs": [[text, "plain"]],
                "anchor": "middle",
                "rotate": round(angle, 1),
            }
        )
