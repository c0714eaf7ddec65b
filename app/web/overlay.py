"""The picture over the scene in one pose and view: block, axes, outline and marks, with what is hidden told apart.

Everything that turns is projected here, so that the page needs no geometry of its own. The back layer stands behind
the transparent canvas of the scene, the front layer before it.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.tensor.surface_lines import outline
from app.web.block import draw_block
from app.web.scene import CURVE_POINTS, Scene, Subject
from app.web.strokes import (
    Shape,
    shape,
    to_drawing,
    write_diamond,
    write_path,
    write_ring,
    write_runs,
)
from app.web.turning import View

FloatArray = npt.NDArray[np.float64]

AXIS_POINTS: Final = 48
SPINE: Final = 0.13
"""How far a principal axis stands out of the surface."""
LONGEST_EDGE: Final = 0.9
"""World length of the longest cell edge."""


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
    shapes: list[Shape] = []
    texts: list[Shape] = []
    draw_block(subject, screen @ pose.T, shapes, labels, texts)
    block_front = [entry for entry in shapes if entry["layer"] == "front"]
    block_back = [entry for entry in shapes if entry["layer"] == "back"]
    marks: list[Shape] = []
    _draw_outline(scene, screen, marks)
    _draw_mirrors(subject, scene, screen, marks)
    _draw_regions(subject, scene, screen, marks)
    _draw_numbers(scene, screen, texts)
    _draw_crystal(subject, scene, screen, marks, texts)
    _draw_principal(subject, scene, screen, marks, texts)
    _draw_answer(subject, scene, screen, marks)
    _draw_targets(subject, scene, screen, marks)
    return {"shapes": block_back + marks + block_front, "texts": texts}


def _hidden(scene: Scene, screen: FloatArray, points: FloatArray) -> npt.NDArray[np.bool_]:
    return scene.find_hidden(points, screen[2])


def _draw_outline(scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    if scene.kind != "quadric":
        _draw_rim(scene, screen, marks)
        return
    for line in outline(scene.matrix, screen[2], CURVE_POINTS):
        points = line.points * scene.factor @ screen.T
        name = "outline" if line.sheet == 1 else "outline minus"
        if scene.cut is None:
            marks.append(shape("front", name, write_path(points, closed=True)))
        else:
            hidden = _hidden(scene, screen, line.points * scene.factor * 1.01)
            marks.append(shape("front", name, write_runs(points, ~hidden)))


def _draw_rim(scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    """The outline of a value or flux surface: where the mesh turns away from the viewer."""
    surface = scene.surface
    if len(surface.vertices) == 0:
        return
    corners = surface.vertices[surface.triangles] @ screen.T * scene.factor
    normals = np.zeros_like(surface.vertices)
    faces = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    for corner in range(3):
        np.add.at(normals, surface.triangles[:, corner], faces)
    facing = normals[:, 2][surface.triangles]
    mixed = np.flatnonzero((np.max(facing, axis=1) > 0) & (np.min(facing, axis=1) <= 0))
    pieces = []
    for triangle in mixed.tolist():
        ends = []
        for first, second in ((0, 1), (1, 2), (2, 0)):
            a, b = facing[triangle, first], facing[triangle, second]
            if (a > 0) != (b > 0):
                part = a / (a - b)
                ends.append(corners[triangle, first] * (1 - part) + corners[triangle, second] * part)
        pieces.append(ends[:2])
    if not pieces:
        return
    segments = np.array(pieces)
    middles = segments.mean(axis=1)
    hidden = _hidden(scene, screen, (middles * 1.015) @ screen)
    path = "".join(write_path(segment) for segment in segments[~hidden])
    marks.append(shape("front", "outline", path))


def _engrave(scene: Scene, screen: FloatArray, directions: FloatArray, name: str, marks: list[Shape]) -> None:
    """A line of directions, shape (n, 3), on the surface, where it is there and not hidden."""
    points = directions * scene.radius(directions)[:, None]
    shown = ~np.isnan(points[:, 0])
    points = np.nan_to_num(points)
    shown &= ~_hidden(scene, screen, points * 1.012)
    marks.append(shape("front", name, write_runs(points @ screen.T, shown)))


def _draw_mirrors(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    angles = np.linspace(0.0, 2.0 * np.pi, CURVE_POINTS)
    for normal in subject.mirrors:
        across = np.linalg.svd(normal[None, :])[2][1:]
        directions = np.cos(angles)[:, None] * across[0] + np.sin(angles)[:, None] * across[1]
        _engrave(scene, screen, directions, "mirror", marks)


def _draw_regions(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    for kind, curve in subject.regions:
        _engrave(scene, screen, curve, "region" if kind == "line" else "region area", marks)


def _draw_numbers(scene: Scene, screen: FloatArray, texts: list[Shape]) -> None:
    """A number on every heavy line, along a diagonal to the upper right, where there is room."""
    placed: list[FloatArray] = []
    for line, heavy in zip(scene.lines, scene.heavy, strict=True):
        if not heavy or line.level is None:
            continue
        points = line.points * scene.factor @ screen.T
        middle = points[:-1]
        normals = middle / np.linalg.norm(middle, axis=1, keepdims=True)
        score = np.abs(middle @ np.array([-0.5, 0.866, 0.0])) - 0.5 * np.minimum(middle[:, 0], 0.3)
        score = np.where(normals[:, 2] > 0.35, score, np.inf)
        for index in np.argsort(score)[:1].tolist():
            if not np.isfinite(score[index]) or _hidden(scene, screen, (middle[index] * 1.012)[None] @ screen)[0]:
                continue
            if any(np.linalg.norm(middle[index][:2] - other) < 0.075 for other in placed):
                continue
            placed.append(middle[index][:2])
            way = points[index + 1] - points[index - 1 if index else -2]
            angle = float(np.rad2deg(np.arctan2(-way[1], way[0])))
            angle = (angle + 90.0) % 180.0 - 90.0
            x, y = to_drawing(middle[index])
            text = f"{line.level:.6g}".replace("-", "−")
            texts.append(_text("level", float(x), float(y), [[text, "plain"]], "middle", rotate=round(angle, 1)))


def _text(name: str, x: float, y: float, runs: list[list[str]], anchor: str, **more: Any) -> Shape:
    return {"class": name, "x": round(x, 1), "y": round(y, 1), "runs": runs, "anchor": anchor, **more}


def _draw_crystal(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape], texts: list[Shape]) -> None:
    basis = subject.crystal.M
    if basis is None:
        return
    longest = float(np.max(np.linalg.norm(basis, axis=0)))
    for letter, edge in zip("abc", basis.T, strict=True):
        tip = edge / longest * LONGEST_EDGE
        tip = tip * max(1.0, scene.reach * 1.06 / float(np.linalg.norm(tip)))
        points = np.linspace(0.0, 1.0, AXIS_POINTS)[:, None] * tip
        shown = ~_hidden(scene, screen, points)
        drawn = points @ screen.T
        path = write_runs(drawn, shown)
        marks.append(shape("front", "halo", path))
        marks.append(shape("front", "crystal", path))
        marks.append(shape("front", "dots", write_runs(drawn, ~shown)))
        if shown[-1]:
            marks.append(shape("front", "ring", write_ring(drawn[-1], 5.2)))
            _label(texts, "crystal-letter", drawn[-1], [[letter, "symbol"]], 14)


def _draw_principal(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape], texts: list[Shape]) -> None:
    principal = subject.principal
    # The remark belongs to the ellipsoid: an open sheet has no longest axis.
    closed = scene.kind == "quadric" and bool(np.all(principal.values > 0))
    longest = int(np.argmin(principal.values)) if closed else -1
    said = False
    for number in range(3):
        if principal.arbitrary[number]:
            continue
        locked = " locked" if subject.fixed[number] else ""
        axis = principal.axes[number]
        radius = float(scene.radius(axis))
        reach = (scene.reach if not np.isfinite(radius) else radius) + SPINE
        for sense in (1.0, -1.0):
            points = np.linspace(0.0, reach, AXIS_POINTS)[:, None] * axis * sense
            shown = ~_hidden(scene, screen, points)
            drawn = points @ screen.T
            path = write_runs(drawn, shown)
            marks.append(shape("front", "halo", path))
            marks.append(shape("front", f"principal{locked}", path))
            marks.append(shape("front", "dots", write_runs(drawn, ~shown)))
            if not shown[-1]:
                continue
            mark = "diamond" if sense > 0 else "diamond open"
            marks.append(shape("front", f"{mark}{locked}", write_diamond(drawn[-1], 6 if sense > 0 else 5)))
            if sense > 0:
                _label(texts, f"principal-letter{locked}", drawn[-1], [["p", "symbol"], [str(number + 1), "sub"]], 16)
            elif number == longest and not said:
                said = True
                x, y = to_drawing(drawn[-1])
                texts.append(_text("remark", float(x) + 12, float(y) + 5, [["long is small", "plain"]], "start"))


def _draw_answer(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    """Lines on the surface along which a search is answered."""
    for curve in () if subject.answer is None else subject.answer.curves:
        _engrave(scene, screen, curve, "answer", marks)


def _draw_targets(subject: Subject, scene: Scene, screen: FloatArray, marks: list[Shape]) -> None:
    """Where a further reading would see what the readings in use do not, and single directions that answer a search."""
    found = [] if subject.answer is None else list(subject.answer.directions)
    for direction in [*subject.settling.directions, *found]:
        radius = float(scene.radius(direction))
        for sense in (1.0, -1.0):
            point = direction * sense * (radius if np.isfinite(radius) else scene.reach)
            if not _hidden(scene, screen, (point * 1.015)[None])[0]:
                drawn = point @ screen.T
                marks.append(shape("front", "target", write_ring(drawn, 11.0) + write_ring(drawn, 4.0)))


def _label(texts: list[Shape], name: str, point: FloatArray, runs: list[list[str]], away: float) -> None:
    """A letter beside a mark, outward on the screen."""
    flat = np.array([point[0], -point[1]])
    size = float(np.linalg.norm(flat))
    way = flat / size if size > 0.05 else np.array([0.7, -0.7])
    x, y = to_drawing(point) + way * away
    anchor = "middle" if abs(way[0]) < 0.45 else ("start" if way[0] > 0 else "end")
    if any("letter" in other["class"] and abs(other["x"] - x) < 28 and abs(other["y"] - y - 5) < 16 for other in texts):
        y -= 22
    texts.append(_text(name, float(x), float(y) + 5, runs, anchor))
