"""What the picture is made of, once per tensor: the surface, its engraved lines, mirrors and regions, to one scale.

World lengths are parts of the block's half diagonal, so that the block turns within a sphere of radius 1. The surface
is drawn as large as the block encloses in every pose; only then are the block's front edges truly before it and its
back edges behind. All geometry is in the crystal frame.
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import HalfturnError
from app.tensor.form import find_fixed_axes
from app.tensor.principal import Principal
from app.tensor.region import find_region
from app.tensor.surface import Surface, SurfaceKind, build_surface
from app.tensor.surface_lines import Levels, SurfaceLine, choose_levels, value_lines
from app.tensor.tensor import PropertyTensor
from app.web.settling import NOTHING, Settling
from app.web.sought import Answer

FloatArray = npt.NDArray[np.float64]

MESH_DETAIL: Final = 32
LINE_POINTS: Final = 1500
LIFT: Final = 0.004
FILL: Final = 0.93
SMALLEST_REACH: Final = 0.3
CURVE_POINTS: Final = 121
DOT_COUNT: Final = 700
MOST_MIRRORS: Final = 3


@dataclass(frozen=True, eq=False)
class Subject:
    """The tensor that a page shows, with everything that does not change while it is turned.

    Attributes:
        key: content hash by which the page and the server mean the same subject.
        crystal, tensor, principal: in the crystal frame.
        unit: printed.
        other: what else the value could be read as, see ``app.tensor.sentence.write_sentence``.
        part: the block in mm along x, y, z.
        settling: what would settle the tensor where the readings in use do not tell it.
        followed: the variable that the picture can follow, for the page; None without a series.
        answer: directions that a search of the Cut page found, where the sample keeps it for the scene.
    """

    key: str
    crystal: Crystal
    tensor: PropertyTensor
    principal: Principal
    unit: str
    other: Literal["rod", "plate", None]
    part: tuple[float, float, float]
    settling: Settling = NOTHING
    followed: dict[str, Any] | None = None
    answer: Answer | None = None

    @cached_property
    def half(self) -> FloatArray:
        """Half the block's sides in world lengths, shape (3,)."""
        sides = np.asarray(self.part, dtype=np.float64)
        return sides / float(np.linalg.norm(sides))

    @cached_property
    def fixed(self) -> tuple[bool, bool, bool]:
        """For each principal axis whether symmetry holds it."""
        axes = find_fixed_axes(self.tensor.form).reshape(-1, 3)
        held = [bool(np.any(np.abs(axes @ axis) > 1.0 - 1e-9)) for axis in self.principal.axes]
        return (held[0], held[1], held[2])

    @cached_property
    def mirrors(self) -> FloatArray:
        """Normals of the mirrors, shape (m, 3); none where there are more than a picture can hold."""
        found = [
            operation.axis
            for operation in self.crystal.operations
            if operation.improper and operation.turn == 2 and operation.axis is not None
        ]
        return np.array(found).reshape(-1, 3) if len(found) <= MOST_MIRRORS else np.zeros((0, 3))

    @cached_property
    def regions(self) -> list[tuple[str, FloatArray]]:
        """The 95 % region of the principal axes: kinds and curves of unit vectors; nothing without covariance."""
        if self.tensor.free_covariance is None or not np.any(self.tensor.free_covariance):
            return []
        try:
            region = find_region(self.crystal, self.tensor)
        except HalfturnError:
            return []
        return [(kind, curve) for kind, curve in zip(region.kinds, region.curves, strict=True) if len(curve) > 1]

    @cached_property
    def _scenes(self) -> dict[SurfaceKind, Scene]:
        return {}

    def scene(self, kind: SurfaceKind) -> Scene:
        """The scene of one of the three surfaces, made when it is first asked for."""
        if kind not in self._scenes:
            self._scenes[kind] = build_scene(self, kind)
        return self._scenes[kind]


@dataclass(frozen=True, eq=False)
class Scene:
    """One surface with its lines, in world lengths.

    Attributes:
        kind: which surface.
        matrix: shape (3, 3), in the crystal frame.
        factor: world length of the surface's own unit of length.
        reach: world length of the largest radius.
        cut: world length at which open sheets end; None where nothing is open.
        surface: the mesh.
        levels, lines, heavy: values of the lines, the lines, and which are heavy.
    """

    kind: SurfaceKind
    matrix: FloatArray
    factor: float
    reach: float
    cut: float | None
    surface: Surface
    levels: Levels
    lines: tuple[SurfaceLine, ...]
    heavy: tuple[bool, ...]

    @cached_property
    def normals(self) -> FloatArray:
        """Outward normals at the vertices of the mesh, shape (n, 3), of no particular length."""
        corners = (self.surface.vertices * self.factor)[self.surface.triangles]
        faces = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        normals = np.zeros_like(self.surface.vertices)
        for corner in range(3):
            np.add.at(normals, self.surface.triangles[:, corner], faces)
        return normals

    def radius(self, directions: FloatArray) -> FloatArray:
        """World radius along unit vectors (..., 3); NaN where there is no surface."""
        if self.kind == "flux":
            radii: FloatArray = np.linalg.norm(directions @ self.matrix.T, axis=-1) * self.factor
            return radii
        values = np.abs(np.einsum("...i,...i->...", directions @ self.matrix, directions))
        if self.kind == "value":
            return np.asarray(values * self.factor)
        with np.errstate(divide="ignore"):
            radii = self.factor / np.sqrt(values)
        bounded: FloatArray = np.where(radii <= (self.cut or self.reach) * (1 + 1e-9), radii, np.nan)
        return bounded

    def find_hidden(self, points: FloatArray, toward: FloatArray, steps: int = 28) -> npt.NDArray[np.bool_]:
        """Whether the surface stands between each world point (n, 3) and a viewer far away along ``toward``."""
        if len(self.surface.vertices) == 0:
            return np.zeros(len(points), dtype=bool)
        # A ray meets the surface where a number changes its sign on the way: its least and largest values tell.
        span = np.linspace(0.012, 2.0 * self.reach, steps)
        if self.kind == "quadric":
            values = _follow_form(self.matrix / self.factor**2, points, toward, span)
            if self.cut is None:
                low, high = np.min(values, axis=0), np.max(values, axis=0)
            else:
                # What is inside the cut is one stretch of each ray.
                inside = _follow_form(np.eye(3), points, toward, span) <= self.cut**2
                low = np.min(values, axis=0, initial=np.inf, where=inside)
                high = np.max(values, axis=0, initial=-np.inf, where=inside)
            crossed = (np.sign(low - 1.0) != np.sign(high - 1.0)) | (np.sign(low + 1.0) != np.sign(high + 1.0))
            return np.asarray(crossed & (low <= high))
        squares = np.maximum(_follow_form(np.eye(3), points, toward, span), 0.0)
        scaled = self.matrix * self.factor
        if self.kind == "value":
            outside = squares * np.sqrt(squares) - np.abs(_follow_form(scaled, points, toward, span))
        else:
            effects = _follow_form(scaled.T @ scaled, points, toward, span)
            outside = squares - np.sqrt(np.maximum(effects, 0.0))
        return np.asarray(np.sign(np.min(outside, axis=0)) != np.sign(np.max(outside, axis=0)))


def _follow_form(matrix: FloatArray, points: FloatArray, toward: FloatArray, span: FloatArray) -> FloatArray:
    """xᵀAx along the rays x = p + t d from points (n, 3), at every t of the span (k,); shape (k, n)."""
    start = np.einsum("ni,ni->n", points @ matrix, points)
    slope = points @ ((matrix + matrix.T) @ toward)
    values: FloatArray = span[:, None] * slope
    values += start
    values += (toward @ matrix @ toward * span * span)[:, None]
    return values


def build_scene(subject: Subject, kind: SurfaceKind) -> Scene:
    """The scene of a subject's surface."""
    matrix = subject.tensor.estimate.matrix
    surface = build_surface(matrix, kind, MESH_DETAIL)
    reach = max(FILL * float(np.min(subject.half)), SMALLEST_REACH)
    radii = np.linalg.norm(surface.vertices, axis=1)
    largest = float(np.max(radii)) if len(radii) else 0.0
    factor = reach / largest if largest > 0 else 1.0
    if len(radii) == 0:
        nothing = Levels(np.zeros(0), np.zeros(0, dtype=bool), 0.0, 0.0)
        return Scene(kind, matrix, factor, reach, None, surface, nothing, (), ())
    levels = choose_levels(float(np.min(surface.values)), float(np.max(surface.values)), 26)
    lines = tuple(value_lines(matrix, kind, levels.values, LINE_POINTS, LIFT)) if len(levels.values) else ()
    heavy_values = set(levels.values[levels.heavy].tolist())
    heavy = tuple(line.level in heavy_values for line in lines)
    cut = None if surface.cut_at is None else surface.cut_at * factor
    return Scene(kind, matrix, factor, reach, cut, surface, levels, lines, heavy)


def pack_scene(subject: Subject, kind: SurfaceKind) -> bytes:
    """The scene for drawing, as one binary message.

    Little-endian: int32 length of a JSON header, the header padded with spaces to a multiple of 4, then for every
    entry of its ``arrays`` [name, type, count] the numbers: meshes (float32 x y z, int32 triangles) of the positive
    and negative sheet, lines as float32 x y z with a NaN triple between polylines, and dots on the negative sheet.
    """
    scene = subject.scene(kind)
    arrays: list[tuple[str, str, FloatArray | npt.NDArray[np.int32]]] = []
    for name, sign in (("plus", 1), ("minus", -1)):
        chosen = scene.surface.sheets == sign
        numbers = np.cumsum(chosen) - 1
        triangles = scene.surface.triangles
        own = triangles[chosen[triangles[:, 0]]] if len(triangles) else triangles
        arrays.append((f"{name}_vertices", "f4", scene.surface.vertices[chosen] * scene.factor))
        arrays.append((f"{name}_triangles", "i4", numbers[own].astype(np.int32)))
        for weight, is_heavy in (("heavy", True), ("light", False)):
            picked = [
                line.points * scene.factor
                for line, heavy in zip(scene.lines, scene.heavy, strict=True)
                if line.sheet == sign and heavy == is_heavy
            ]
            arrays.append((f"{name}_{weight}", "f4", _join(picked)))
    negative = scene.surface.vertices[scene.surface.sheets == -1] * scene.factor * (1.0 + LIFT)
    step = max(1, len(negative) // DOT_COUNT)
    arrays.append(("minus_dots", "f4", negative[::step]))
    header: dict[str, Any] = {
        "type": "surface",
        "hash": subject.key,
        "surface": kind,
        "step": scene.levels.step,
        "heavy_step": scene.levels.heavy_step,
        "arrays": [[name, form, int(np.size(array))] for name, form, array in arrays],
    }
    text = json.dumps(header, allow_nan=False).encode()
    text += b" " * (-len(text) % 4)
    body = b"".join(np.ascontiguousarray(array, dtype=f"<{form}").tobytes() for _, form, array in arrays)
    return np.array([len(text)], dtype="<i4").tobytes() + text + body


def _join(lines: list[FloatArray]) -> FloatArray:
    gap = np.full((1, 3), np.nan)
    return np.concatenate([part for line in lines for part in (line, gap)]) if lines else np.zeros((0, 3))
