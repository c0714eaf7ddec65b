"""The scene of a report as plain data: the surface with its lines, the axes and the block, in the specimen frame."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.tensor.pose import AXIS_LETTERS, Pose
from app.tensor.surface import SurfaceKind
from app.web.block import STEM
from app.web.marks import LONGEST_EDGE, SPINE
from app.web.scene import Scene, Subject
from app.web.turning import View

FloatArray = npt.NDArray[np.float64]

DIGITS: Final = 4


def build_scene_data(subject: Subject, kind: SurfaceKind, pose: Pose, view: View) -> dict[str, Any]:
    """What the report's script draws, in world lengths (see ``app.web.scene``) along x y z of the specimen.

    ``bodies``: by sheet, vertices, triangles, light and heavy lines as flat lists, with null triples between lines;
    ``axes``: from, to, name and role of every axis; ``block``: the twelve edges; ``camera``: where one looks from.
    """
    scene = subject.scene(kind)
    turn = pose.matrix.T
    screen = view.screen(pose.matrix) @ turn
    return {
        "bodies": [_pack_body(scene, sign, turn) for sign in (1, -1) if np.any(scene.surface.sheets == sign)],
        "axes": _list_axes(subject, scene, turn),
        "block": _flatten(_join(_list_block(subject.half))),
        "camera": {"eye": (2.0 * screen[2]).tolist(), "up": screen[1].tolist()},
    }


def _pack_body(scene: Scene, sign: int, turn: FloatArray) -> dict[str, Any]:
    chosen = scene.surface.sheets == sign
    numbers = np.cumsum(chosen) - 1
    triangles = scene.surface.triangles
    own = numbers[triangles[chosen[triangles[:, 0]]]]
    lines: dict[bool, list[FloatArray]] = {True: [], False: []}
    for line, heavy in zip(scene.lines, scene.heavy, strict=True):
        if line.sheet == sign:
            lines[heavy].append(line.points * scene.factor @ turn)
    return {
        "sheet": sign,
        "vertices": _flatten(scene.surface.vertices[chosen] * scene.factor @ turn),
        "triangles": own.ravel().tolist(),
        "light": _flatten(_join(lines[False])),
        "heavy": _flatten(_join(lines[True])),
    }


def _list_axes(subject: Subject, scene: Scene, turn: FloatArray) -> list[dict[str, Any]]:
    axes = [
        _axis("specimen", letter, np.zeros(3), np.eye(3)[number] * (float(subject.half[number]) + STEM))
        for number, letter in enumerate(AXIS_LETTERS)
    ]
    basis = subject.crystal.M
    if basis is not None:
        longest = float(np.max(np.linalg.norm(basis, axis=0)))
        for letter, edge in zip("abc", basis.T, strict=True):
            end = edge / longest * LONGEST_EDGE
            end = end * max(1.0, scene.reach * 1.06 / float(np.linalg.norm(end)))
            axes.append(_axis("crystal", letter, np.zeros(3), end @ turn))
    for number in range(3):
        if not subject.principal.arbitrary[number]:
            axis = subject.principal.axes[number]
            radius = float(scene.radius(axis))
            end = axis * ((radius if np.isfinite(radius) else scene.reach) + SPINE) @ turn
            axes.append(_axis("principal", f"p{number + 1}", -end, end))
    return axes


def _axis(role: str, name: str, start: FloatArray, end: FloatArray) -> dict[str, Any]:
    return {"role": role, "name": name, "from": np.round(start, DIGITS).tolist(), "to": np.round(end, DIGITS).tolist()}


def _list_block(half: FloatArray) -> list[FloatArray]:
    edges = []
    for axis in range(3):
        first, second = (axis + 1) % 3, (axis + 2) % 3
        for one in (-1.0, 1.0):
            for other in (-1.0, 1.0):
                ends = np.zeros((2, 3))
                ends[:, axis] = -half[axis], half[axis]
                ends[:, first], ends[:, second] = one * half[first], other * half[second]
                edges.append(ends)
    return edges


def _join(lines: list[FloatArray]) -> FloatArray:
    gap = np.full((1, 3), np.nan)
    return np.concatenate([part for line in lines for part in (line, gap)]) if lines else np.zeros((0, 3))


def _flatten(points: FloatArray) -> list[float | None]:
    numbers = np.round(points, DIGITS).ravel().tolist()
    return [None if number != number else number for number in numbers]
