"""Patches of a mesh, each built in the principal frame so that its edges and poles are clean.

Everything here is in principal axes and scaled so that the largest principal value is near one. A patch is a grid of
rings around a polar axis, with single vertices at its poles: rings alone are a belt, rings with one pole a cap, rings
with two poles a closed surface. Rings are ellipses of the right proportions, so long thin shapes stay smooth, and no
trigonometry is done per vertex.

The equations solved, with a patch's principal values l of the sheet (l > 0 on it) and g = −l where a value is not
positive (J. F. Nye, Physical Properties of Crystals, ch. I, section 4, has the surfaces; the parametrisation follows by
putting the distance from the centre equal to the cut):

    cap   l z² = 1 + g_x x² + g_y y², the edge over the ellipse x²(1 + g_x/l) + y²(1 + g_y/l) = cut² − 1/l
    belt  l_x x² + l_y y² = 1 + g z², the edge at z² = (cut² − w²)/(1 + g w²), w the waist's radius at that azimuth
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import lru_cache

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
IndexArray = npt.NDArray[np.int32]

FEWEST_CAP_RINGS = 4


@dataclass(frozen=True)
class Grid:
    """Rings of vertices around a polar axis, from its positive end to its negative one, with or without poles.

    Vertices are numbered: the first pole where there is one, the rings one after the other, the last pole. A mirrored
    grid is the image of another through the centre, which needs its triangles the other way round.
    """

    rings: int
    columns: int
    first_pole: bool
    last_pole: bool
    mirrored: bool = False

    @property
    def count(self) -> int:
        """Number of vertices."""
        return self.rings * self.columns + self.first_pole + self.last_pole


@dataclass(frozen=True)
class Patch:
    """A connected piece of a surface.

    Attributes:
        points: shape (n, 3), in axes of the patch, the polar one last. Of an open quadric sheet its vertices; of an
            ellipsoid and a star-shaped surface unit directions.
        axes: shape (3, 3), the patch's axes as rows, of an ellipsoid as long as its semi-axes; left-handed for a
            mirrored one.
        values: shape (n,), the sheet's nᵀAn, not negative.
        grid: how the points hang together.
    """

    points: FloatArray
    axes: FloatArray
    values: FloatArray
    grid: Grid


def build_quadric_patches(values: FloatArray, axes: FloatArray, cut: float, detail: int) -> list[Patch]:
    """The sheet Σ values_i x_i² = 1, as far as the distance ``cut`` from the centre.

    Args:
        values: shape (3,), exactly zero where a value vanishes.
        axes: shape (3, 3), right-handed, principal axes as rows.
        cut: beyond every semi-axis; not used by a closed sheet.
        detail: points per half circle.

    Returns:
        One ellipsoid, one belt, two caps or nothing.
    """
    positive = np.flatnonzero(values > 0)
    if len(positive) == 3:
        order = order_axes(int(np.argmin(values)))
        directions, grid = build_sphere(detail)
        # The axes carry the lengths. On a sheet the value is 1/|x|², without cancellation in principal coordinates.
        lengths = 1.0 / np.sqrt(values[order])
        return [Patch(directions, axes[order] * lengths[:, None], 1.0 / (square_sphere(detail) @ lengths**2), grid)]
    if len(positive) == 2:
        order = order_axes(int(np.argmin(values)))
        return [_build_belt(values[order], axes[order], cut, detail)]
    if len(positive) == 1:
        order = order_axes(int(positive[0]))
        return _mirror(_build_cap(values[order], axes[order], cut, detail))
    return []


def build_value_patches(values: FloatArray, axes: FloatArray, detail: int) -> list[Patch]:
    """The directions where Σ values_i n_i² is positive, and that value; arguments as of the quadric.

    A patch that ends where the value is zero ends in one vertex of value 0 and direction 0 for each of its edges,
    since all of such an edge lies in the origin of a surface whose radius is the value.

    Returns:
        One whole sphere, one belt, two caps or nothing.
    """
    positive = np.flatnonzero(values > 0)
    if len(positive) == 3:
        order = order_axes(int(np.argmin(values)))
        directions, grid = build_sphere(detail)
        return [Patch(directions, axes[order], square_sphere(detail) @ values[order], grid)]
    if len(positive) == 2:
        order = order_axes(int(np.argmin(values)))
        return [_build_value_belt(values[order], axes[order], detail)]
    if len(positive) == 1:
        order = order_axes(int(positive[0]))
        return _mirror(_build_value_cap(values[order], axes[order], detail))
    return []


def order_axes(polar: int) -> list[int]:
    """The three axes in cyclic order with the polar one last, so that they stay right-handed."""
    return [(polar + 1) % 3, (polar + 2) % 3, polar]


@lru_cache(maxsize=8)
def build_sphere(detail: int) -> tuple[FloatArray, Grid]:
    """Unit vectors of a whole sphere, shape (n, 3), read-only, with poles along the third axis."""
    cosines, sines = build_circle(2 * detail)
    angles = np.pi * np.arange(1, detail) / detail
    rings = np.empty((detail - 1, 2 * detail, 3))
    rings[..., 0] = np.sin(angles)[:, None] * cosines
    rings[..., 1] = np.sin(angles)[:, None] * sines
    rings[..., 2] = np.cos(angles)[:, None]
    directions = np.concatenate([[[0.0, 0.0, 1.0]], rings.reshape(-1, 3), [[0.0, 0.0, -1.0]]])
    directions.setflags(write=False)
    return directions, Grid(detail - 1, 2 * detail, first_pole=True, last_pole=True)


@lru_cache(maxsize=8)
def square_sphere(detail: int) -> FloatArray:
    """The squares of the components of ``build_sphere``, shape (n, 3), read-only."""
    squares = np.square(build_sphere(detail)[0])
    squares.setflags(write=False)
    return squares


@lru_cache(maxsize=32)
def build_circle(columns: int) -> tuple[FloatArray, FloatArray]:
    """Cosines and sines of so many equal steps, the first at angle 0, the last one step before the whole turn."""
    angles = 2.0 * np.pi * np.arange(columns) / columns
    cosines, sines = np.cos(angles), np.sin(angles)
    cosines.setflags(write=False)
    sines.setflags(write=False)
    return cosines, sines


@lru_cache(maxsize=8)
def connect_grids(grids: tuple[Grid, ...]) -> IndexArray:
    """Triangles of grids numbered one after the other, shape (m, 3), read-only, counter-clockwise from outside."""
    parts = [np.zeros((0, 3), dtype=np.int32)]
    start = 0
    for grid in grids:
        triangles = _connect_rings(grid)
        parts.append((triangles[:, ::-1] if grid.mirrored else triangles) + np.int32(start))
        start += grid.count
    joined = np.concatenate(parts)
    joined.setflags(write=False)
    return joined


def _connect_rings(grid: Grid) -> IndexArray:
    first, columns = int(grid.first_pole), grid.columns
    near = np.arange(columns, dtype=np.int32)
    far = np.roll(near, -1)
    starts = (first + columns * np.arange(grid.rings - 1, dtype=np.int32))[:, None]
    upper, upper_next = starts + near, starts + far
    lower, lower_next = upper + columns, upper_next + columns
    parts = [np.stack([upper, lower, lower_next, upper, lower_next, upper_next], axis=-1).reshape(-1, 3)]
    if grid.first_pole:
        parts.insert(0, np.stack([np.zeros_like(near), first + near, first + far], axis=-1))
    if grid.last_pole:
        last_ring = first + columns * (grid.rings - 1)
        parts.append(np.stack([np.full_like(near, last_ring + columns), last_ring + far, last_ring + near], axis=-1))
    return np.concatenate(parts).astype(np.int32)


def spread_hyperbolic(positions: FloatArray, width: float) -> FloatArray:
    """Positions in −1 … 1 moved toward 0, where a branch of a hyperbola that is ``width`` units wide bends."""
    total = np.arcsinh(width)
    if total < 1e-6:
        return positions
    spread: FloatArray = np.sinh(positions * total) / np.sinh(total)
    return spread


def spread_circular(positions: FloatArray, width: float) -> FloatArray:
    """Positions in −1 … 1 moved outward as on an arc whose half-chord is ``width`` radii."""
    total = np.arcsin(min(width, 1.0))
    if total < 1e-6:
        return positions
    spread: FloatArray = np.sin(positions * total) / np.sin(total)
    return spread


def _count_cap_rings(detail: int) -> int:
    return max((detail + 1) // 2, FEWEST_CAP_RINGS)


def _count_belt_rings(detail: int) -> int:
    # An odd number of rings puts one on the waist.
    return 2 * ((detail + 1) // 2) + 1


def _build_belt(values: FloatArray, axes: FloatArray, cut: float, detail: int) -> Patch:
    cosines, sines = build_circle(2 * detail)
    bend = -float(values[2])
    waist_x, waist_y = cosines / np.sqrt(values[0]), sines / np.sqrt(values[1])
    waist = np.square(waist_x) + np.square(waist_y)
    reach = np.sqrt((cut**2 - waist) / (1.0 + bend * waist))
    rings = _count_belt_rings(detail)
    fractions = spread_hyperbolic(np.linspace(1.0, -1.0, rings), float(np.sqrt(bend) * np.max(reach)))[:, None]
    grid = Grid(rings, 2 * detail, first_pole=False, last_pole=False)
    points = np.empty((rings, 2 * detail, 3))
    widening = np.sqrt(1.0 + np.square(fractions) * (bend * np.square(reach)))
    np.multiply(widening, waist_x, out=points[..., 0])
    np.multiply(widening, waist_y, out=points[..., 1])
    np.multiply(fractions, reach, out=points[..., 2])
    # The square of the distance from the centre goes evenly from the waist's to the cut's.
    squares = waist + np.square(fractions) * (cut**2 - waist)
    return Patch(points.reshape(-1, 3), axes, (1.0 / squares).ravel(), grid)


def _build_cap(values: FloatArray, axes: FloatArray, cut: float, detail: int) -> Patch:
    cosines, sines = build_circle(2 * detail)
    nearest = 1.0 / float(values[2])
    bends = -values[:2]
    room = cut**2 - nearest
    extent = np.sqrt(room / (1.0 + nearest * bends))
    rings = _count_cap_rings(detail)
    width = float(np.max(np.sqrt(bends) * extent))
    fractions = spread_hyperbolic(np.arange(1, rings + 1) / rings, width)[:, None]
    grid = Grid(rings, 2 * detail, first_pole=True, last_pole=False)
    points = np.empty((grid.count, 3))
    points[0] = 0.0, 0.0, np.sqrt(nearest)
    inner = points[1:].reshape(rings, 2 * detail, 3)
    edge_x, edge_y = extent[0] * cosines, extent[1] * sines
    np.multiply(fractions, edge_x, out=inner[..., 0])
    np.multiply(fractions, edge_y, out=inner[..., 1])
    rise = nearest * (bends[0] * np.square(edge_x) + bends[1] * np.square(edge_y))
    np.sqrt(nearest + np.square(fractions) * rise, out=inner[..., 2])
    ring_values = 1.0 / (nearest + np.square(fractions) * room)
    return Patch(points, axes, np.concatenate([[values[2]], np.repeat(ring_values, 2 * detail)]), grid)


def _build_value_belt(values: FloatArray, axes: FloatArray, detail: int) -> Patch:
    cosines, sines = build_circle(2 * detail)
    opposite = -float(values[2])
    around = values[0] * np.square(cosines) + values[1] * np.square(sines)
    reach = np.sqrt(around / (around + opposite))
    rings = _count_belt_rings(detail) - 2
    positions = np.linspace(1.0, -1.0, rings + 2)[1:-1]
    fractions = spread_circular(positions, float(np.max(reach)))[:, None]
    grid = Grid(rings, 2 * detail, first_pole=True, last_pole=True)
    points = np.zeros((grid.count, 3))
    inner = points[1:-1].reshape(rings, 2 * detail, 3)
    level = np.sqrt(1.0 - np.square(fractions) * np.square(reach))
    np.multiply(level, cosines, out=inner[..., 0])
    np.multiply(level, sines, out=inner[..., 1])
    np.multiply(fractions, reach, out=inner[..., 2])
    point_values = np.zeros(grid.count)
    np.multiply(1.0 - np.square(fractions), around, out=point_values[1:-1].reshape(rings, 2 * detail))
    return Patch(points, axes, point_values, grid)


def _build_value_cap(values: FloatArray, axes: FloatArray, detail: int) -> Patch:
    cosines, sines = build_circle(2 * detail)
    own, opposite = float(values[2]), -values[:2]
    extent, rest = np.sqrt(own / (own + opposite)), opposite / (own + opposite)
    rings = _count_cap_rings(detail) - 1
    fractions = spread_circular(np.arange(1, rings + 1) / (rings + 1), float(np.max(extent)))[:, None]
    inside = 1.0 - np.square(fractions)
    grid = Grid(rings, 2 * detail, first_pole=True, last_pole=True)
    points = np.zeros((grid.count, 3))
    points[0, 2] = 1.0
    inner = points[1:-1].reshape(rings, 2 * detail, 3)
    np.multiply(fractions, extent[0] * cosines, out=inner[..., 0])
    np.multiply(fractions, extent[1] * sines, out=inner[..., 1])
    # 1 − x² − y² without the loss of digits where a cone is almost a plane.
    beside = rest[0] * np.square(cosines) + rest[1] * np.square(sines)
    np.sqrt(inside + np.square(fractions) * beside, out=inner[..., 2])
    ring_values = np.repeat(own * inside, 2 * detail)
    return Patch(points, axes, np.concatenate([[own], ring_values, [0.0]]), grid)


def _mirror(patch: Patch) -> list[Patch]:
    """A patch and its image through the centre."""
    return [patch, Patch(patch.points, -patch.axes, patch.values, replace(patch.grid, mirrored=True))]
