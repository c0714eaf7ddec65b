"""The outline of a scene's surface against the ground behind it, as it is seen from one side."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.tensor.surface_lines import outline
from app.web.scene import CURVE_POINTS, Scene
from app.web.strokes import write_path, write_runs, write_segments

FloatArray = npt.NDArray[np.float64]

LINE_LIFT: Final = 1.01
RIM_LIFT: Final = 1.015
"""So much outside the surface its outline is taken to be when it is asked whether another part hides it."""


@dataclass(frozen=True, eq=False)
class Contour:
    """A part of the outline, in world lengths of the crystal frame.

    Attributes:
        name: its class.
        points: a line, shape (n, 3), or straight pieces, shape (n, 2, 3).
        tested: shape (n, 3), where each point or piece is taken to be when it is asked whether it is hidden; shape
            (0, 3) for a closed line that nothing can hide.
    """

    name: str
    points: FloatArray
    tested: FloatArray

    def write(self, screen: FloatArray, hidden: npt.NDArray[np.bool_]) -> str:
        """Path data of what is not hidden, with v_screen = screen · v_crystal."""
        drawn = self.points @ screen.T
        if drawn.ndim == 3:
            return write_segments(drawn[~hidden])
        return write_runs(drawn, ~hidden) if len(self.tested) else write_path(drawn, closed=True)


def trace_contours(scene: Scene, toward: FloatArray) -> list[Contour]:
    """The outline seen by a viewer far away along ``toward``."""
    if scene.kind != "quadric":
        return _trace_rim(scene, toward)
    contours = []
    for line in outline(scene.matrix, toward, CURVE_POINTS):
        points = line.points * scene.factor
        tested = np.zeros((0, 3)) if scene.cut is None else points * LINE_LIFT
        contours.append(Contour("outline" if line.sheet == 1 else "outline minus", points, tested))
    return contours


def _trace_rim(scene: Scene, toward: FloatArray) -> list[Contour]:
    """The outline of a value or flux surface: where the mesh turns away from the viewer."""
    facing = scene.normals @ toward
    first, second, third = (facing > 0)[scene.surface.triangles.T]
    mixed = scene.surface.triangles[(first != second) | (second != third)]
    if len(mixed) == 0:
        return []
    # The outline crosses two sides of such a triangle, where the facing between their corners is zero.
    start, end = mixed, mixed[:, [1, 2, 0]]
    crossed = (facing[start] > 0) != (facing[end] > 0)
    start, end = start[crossed], end[crossed]
    part = (facing[start] / (facing[start] - facing[end]))[:, None]
    corners = scene.surface.vertices * scene.factor
    points = corners[start] * (1.0 - part) + corners[end] * part
    pieces = points.reshape(-1, 2, 3)
    return [Contour("outline", pieces, pieces.mean(axis=1) * RIM_LIFT)]
