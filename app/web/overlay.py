"""The picture over the scene in one pose and view: block, axes, outline and marks, with what is hidden told apart.

Everything that turns is projected here, so that the page needs no geometry of its own. The back layer stands behind
the transparent canvas of the scene, the front layer before it.
"""

from __future__ import annotations

import math
from bisect import bisect_right
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.web.block import draw_block
from app.web.contour import trace_contours
from app.web.label_places import place_labels
from app.web.marks import LINE_LIFT, Marks, Tip, find_marks
from app.web.marks import LONGEST_EDGE as LONGEST_EDGE
from app.web.marks import SPINE as SPINE
from app.web.scene import Scene, Subject
from app.web.strokes import (
    Point,
    Shape,
    join_places,
    place_point,
    print_places,
    shape,
    split_runs,
    write_diamond,
    write_ring,
)
from app.web.turning import View

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

NUMBERS_APART: Final = 0.075
"""World length below which two numbers would stand on each other."""


def draw_overlay(
    subject: Subject, scene: Scene, pose: FloatArray, view: View, labels: dict[str, dict[str, str]]
) -> dict[str, list[Shape]]:
    """Shapes and texts of both layers, in the order in which they are drawn.

    Args:
        subject, scene: what is shown.
        pose: C, shape (3, 3).
        view: from where.
        labels: for x, y and z the value and the place that stand at the tip.
    """
    screen = view.screen(pose)
    block: list[Shape] = []
    texts: list[Shape] = []
    draw_block(subject, screen @ pose.T, block, labels, texts)
    marks = find_marks(subject, scene)
    contours = trace_contours(scene, screen[2])
    numbers = _choose_numbers(marks, screen)
    tested = [
        marks.tested,
        marks.numbered_points[[number.row for number in numbers]] * LINE_LIFT,
        *(contour.tested for contour in contours),
    ]
    # All at once: whether the surface hides each of the points.
    every = scene.find_hidden(np.concatenate(tested), screen[2])
    hidden, hidden_numbers, *hidden_contours = np.split(every, np.cumsum([len(part) for part in tested])[:-1])
    shapes = [entry for entry in block if entry["layer"] == "back"]
    for contour, flags in zip(contours, hidden_contours, strict=True):
        shapes.append(shape("front", contour.name, contour.write(screen, flags)))
    _draw_numbers([number for number, flag in zip(numbers, hidden_numbers, strict=True) if not flag], texts)
    _draw_marks(marks, marks.points @ screen.T, hidden, shapes, texts)
    shapes += [entry for entry in block if entry["layer"] == "front"]
    return {"shapes": shapes, "texts": place_labels(texts)}


@dataclass(frozen=True)
class _Number:
    """Where the number of a heavy line would stand: its row, the point on the screen and the way of the line there."""

    text: str
    row: int
    point: list[float]
    way: list[float]


def _choose_numbers(marks: Marks, screen: FloatArray) -> list[_Number]:
    """A number for every heavy line, along a diagonal to the upper right, where the line is on the near side."""
    points = marks.numbered_points @ screen.T
    scores = np.abs(points @ np.array([-0.5, 0.866, 0.0])) - 0.5 * np.minimum(points[:, 0], 0.3)
    scores[points[:, 2] <= 0.35 * marks.numbered_radii] = np.inf
    numbers = []
    for line in marks.numbered:
        # The last point is the first one again.
        row = line.first + int(np.argmin(scores[line.first : line.last - 1]))
        if np.isfinite(scores[row]):
            before = row - 1 if row > line.first else line.last - 2
            way = points[row + 1] - points[before]
            numbers.append(_Number(line.text, row, points[row].tolist(), way.tolist()))
    return numbers


def _draw_numbers(numbers: list[_Number], texts: list[Shape]) -> None:
    """Those of the numbers for which there is room, the first ones first."""
    placed: list[list[float]] = []
    for number in numbers:
        x, y, _ = number.point
        if any(math.hypot(x - other[0], y - other[1]) < NUMBERS_APART for other in placed):
            continue
        placed.append(number.point)
        angle = (math.degrees(math.atan2(-number.way[1], number.way[0])) + 90.0) % 180.0 - 90.0
        x, y = place_point(number.point)
        texts.append(_text("level", x, y, [[number.text, "plain"]], "middle", rotate=round(angle, 1)))


def _text(name: str, x: float, y: float, runs: list[list[str]], anchor: str, **more: Any) -> Shape:
    return {"class": name, "x": round(x, 1), "y": round(y, 1), "runs": runs, "anchor": anchor, **more}


def _draw_marks(marks: Marks, drawn: FloatArray, hidden: BoolArray, shapes: list[Shape], texts: list[Shape]) -> None:
    """Lines where they are seen, axes as dots where not, and targets; ``drawn`` are the points on the screen."""
    places = print_places(drawn)
    seen = marks.there & ~hidden
    count = len(drawn) - marks.targets
    whole = _write_lines(marks, places, seen[:count])
    dots = _write_lines(marks, places, (marks.dotted & hidden)[:count])
    for number, line in enumerate(marks.lines):
        if line.tip is None:
            shapes.append(shape("front", line.name, whole[number]))
            continue
        shapes.append(shape("front", "halo", whole[number]))
        shapes.append(shape("front", line.name, whole[number]))
        shapes.append(shape("front", "dots", dots[number]))
        last = marks.firsts[number] + len(line.points) - 1
        if seen[last]:
            _draw_tip(line.tip, drawn[last].tolist(), shapes, texts)
    for row in (count + np.flatnonzero(seen[count:])).tolist():
        path = write_ring(drawn[row], 11.0) + write_ring(drawn[row], 4.0)
        shapes.append(shape("front", "target", path))


def _write_lines(marks: Marks, places: list[str], flags: BoolArray) -> list[str]:
    """Path data of every line where the flags hold."""
    paths = [""] * len(marks.lines)
    for first, last in split_runs(flags):
        paths[bisect_right(marks.firsts, first) - 1] += join_places(places, first, last)
    return paths


def _draw_tip(tip: Tip, point: Point, shapes: list[Shape], texts: list[Shape]) -> None:
    write = write_ring if tip.form == "ring" else write_diamond
    shapes.append(shape("front", tip.mark, write(point, tip.size)))
    if tip.letter:
        _label(texts, tip.letter, point, [list(run) for run in tip.runs], tip.away)
    elif tip.remark:
        x, y = place_point(point)
        texts.append(_text("remark", x + 12, y + 5, [[tip.remark, "plain"]], "start"))


def _label(texts: list[Shape], name: str, point: Point, runs: list[list[str]], away: float) -> None:
    """A letter beside a mark, outward on the screen."""
    size = math.hypot(point[0], point[1])
    right, down = (point[0] / size, -point[1] / size) if size > 0.05 else (0.7, -0.7)
    x, y = place_point(point)
    x, y = x + right * away, y + down * away
    anchor = "middle" if abs(right) < 0.45 else ("start" if right > 0 else "end")
    if any("letter" in other["class"] and abs(other["x"] - x) < 28 and abs(other["y"] - y - 5) < 16 for other in texts):
        y -= 22
    texts.append(_text(name, x, y + 5, runs, anchor))
