"""Meshes of the three surfaces of a tensor: its quadric with both sheets, its value surface and its flux surface.

The quadric A_ij x_i x_j = ±1 has the radius 1/√|nᵀAn|, so long is small (J. F. Nye, Physical Properties of Crystals,
ch. I, section 4); the value surface has the radius |nᵀAn| and the flux surface |A n|. Quadric and value surface show
only the symmetric part.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal, get_args

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.matrix import read_matrix
from app.tensor.quadric import ZERO_TOLERANCE, sign_values
from app.tensor.sheet_mesh import Grid, Patch, build_quadric_patches, build_sphere, build_value_patches, connect_grids

FloatArray = npt.NDArray[np.float64]
SurfaceKind = Literal["quadric", "value", "flux"]

CUT_FACTOR: Final = 2.5
"""An open sheet ends at so many times the largest semi-axis."""

LOWEST_DETAIL: Final = 8
HIGHEST_DETAIL: Final = 400
DEFAULT_DETAIL: Final = 60


ROUNDING: Final = 1e-14
"""A symmetric part below this fraction of the largest cell is what rounding left beside an antisymmetric one."""


@dataclass(frozen=True)
class Surface:
    """A mesh, in the frame of the matrix that it was made of.

    Attributes:
        kind: "quadric", "value" or "flux".
        vertices: shape (n, 3). Of a quadric in units of 1/√(unit of A), else in the unit of A.
        triangles: shape (m, 3), vertex numbers counter-clockwise seen from outside (from larger radius);
            read-only, since meshes of the same make share it.
        values: shape (n,), nᵀAn toward each vertex, of the flux surface |A n|; 0 at vertices in the origin.
        sheets: shape (n,), +1 or −1, the sign of the value on the vertex's sheet; no triangle joins the two.
        cut_at: distance from the centre at which every open sheet of a quadric ends; None where nothing is cut.
        axes: shape (3, 3), right-handed, as rows the axes on which the mesh is laid: the principal axes, of the flux
            surface the right singular vectors of A. Those of equal values are arbitrary.
    """

    kind: SurfaceKind
    vertices: FloatArray
    triangles: npt.NDArray[np.int32]
    values: FloatArray
    sheets: npt.NDArray[np.int8]
    cut_at: float | None
    axes: FloatArray


@dataclass(frozen=True)
class ScaledPrincipal:
    """Principal axes of a symmetric part, with the size of the tensor taken out so that no power overflows.

    Attributes:
        values: shape (3,), descending; true value = values · scale; exactly 0 where negligible beside the largest.
        axes: shape (3, 3), right-handed, as rows.
        scale: the largest cell of A, 1 for the zero tensor.
    """

    values: FloatArray
    axes: FloatArray
    scale: float


def build_surface(matrix: npt.ArrayLike, surface: SurfaceKind, detail: int = DEFAULT_DETAIL) -> Surface:
    """The mesh of one of the surfaces.

    Args:
        matrix: shape (3, 3), in any frame; the vertices are in the same one.
        surface: "quadric": n/√|nᵀAn|, the sheet A x x = +1 and the sheet −1, whichever are real. A principal value
            that is negligible beside the largest (see app.tensor.quadric) counts as zero, as it does in the quadric's
            name. Open sheets end where ``find_cut`` says.
            "value": |nᵀAn| n, split where the value is zero; such an edge is one vertex in the origin.
            "flux": |A n| n, of all of A.
        detail: points per half circle, 8 to 400. A whole circle has twice as many.

    Returns:
        A Surface; without vertices where there is nothing to draw. An ellipsoid is closed, each piece of a two-sheet
        hyperboloid (or pair of planes, or hyperbolic cylinder) a disc, a one-sheet hyperboloid (or elliptic cylinder)
        an annulus; pieces of value and flux surfaces are closed.

    Raises:
        InputError: the matrix is not three rows of three finite numbers up to 1e300, or no such surface or detail.
    """
    cells = read_matrix(matrix)
    if surface not in get_args(SurfaceKind):
        raise InputError(f"There is no surface “{surface}”.", field="surface", hint="Take quadric, value or flux.")
    if isinstance(detail, bool) or not isinstance(detail, (int, np.integer)):
        raise InputError("The detail is a whole number.", field="detail")
    if not LOWEST_DETAIL <= detail <= HIGHEST_DETAIL:
        raise InputError(f"The detail is {LOWEST_DETAIL} to {HIGHEST_DETAIL} points per half circle.", field="detail")
    if surface == "flux":
        return _build_flux(cells, int(detail))
    principal = find_scaled_principal(cells)
    if surface == "value":
        return _build_value(principal, int(detail))
    return _build_quadric(principal, int(detail))


def find_scaled_principal(cells: FloatArray) -> ScaledPrincipal:
    """Principal values over the largest cell, and axes.

    The axes of equal values come as they may: a mesh needs axes that fit its values to the last digit, and any will
    do. What is told to a user about axes comes from app.tensor.principal.
    """
    scale = float(np.max(np.abs(cells))) or 1.0
    ascending, vectors = np.linalg.eigh((cells / scale + cells.T / scale) / 2.0)
    values, axes = ascending[::-1], vectors.T[::-1].copy()
    if np.linalg.det(axes) < 0:
        axes[2] = -axes[2]
    values = np.where((sign_values(values) == 0.0) | (np.max(np.abs(values)) <= ROUNDING), 0.0, values)
    return ScaledPrincipal(values, axes, scale)


def find_cut(values: FloatArray) -> float | None:
    """The distance from the centre at which all open sheets of a quadric with these principal values end.

    2.5 times the largest semi-axis 1/√|value| among the values that are not zero: beyond every closed waist and every
    vertex, so that each real sheet shows. None where the quadric is an ellipsoid, real or imaginary, or nothing.

    Args:
        values: shape (3,), exactly zero where a value vanishes.
    """
    signs = np.sign(values)
    if np.all(signs == 0) or np.all(signs > 0) or np.all(signs < 0):
        return None
    return float(CUT_FACTOR / np.sqrt(np.min(np.abs(values[values != 0.0]))))


def _build_quadric(principal: ScaledPrincipal, detail: int) -> Surface:
    values, axes, unit = principal.values, principal.axes, 1.0 / float(np.sqrt(principal.scale))
    cut = find_cut(values)
    positive = build_quadric_patches(values, axes, cut or 0.0, detail)
    negative = build_quadric_patches(-values, axes, cut or 0.0, detail)
    sizes, sheets = _sign_patches(positive, negative)
    patches = positive + negative
    vertices = np.empty((len(sizes), 3))
    for patch, part in zip(patches, _split(vertices, patches), strict=True):
        np.matmul(patch.points, patch.axes * unit, out=part)
    sizes *= principal.scale
    cut_at = None if cut is None else cut * unit
    return Surface("quadric", vertices, connect_grids(_list_grids(patches)), sizes, sheets, cut_at, axes)


def _build_value(principal: ScaledPrincipal, detail: int) -> Surface:
    positive = build_value_patches(principal.values, principal.axes, detail)
    negative = build_value_patches(-principal.values, principal.axes, detail)
    values, sheets = _sign_patches(positive, negative)
    values *= principal.scale
    patches = positive + negative
    vertices = _extend_directions(patches, np.abs(values))
    return Surface("value", vertices, connect_grids(_list_grids(patches)), values, sheets, None, principal.axes)


def _build_flux(cells: FloatArray, detail: int) -> Surface:
    scale = float(np.max(np.abs(cells)))
    if scale == 0.0:
        return Surface("flux", np.zeros((0, 3)), connect_grids(()), np.zeros(0), np.zeros(0, np.int8), None, np.eye(3))
    _, sizes, axes = np.linalg.svd(cells / scale)
    if np.linalg.det(axes) < 0:
        axes = -axes
    if sizes[1] <= ZERO_TOLERANCE * sizes[0]:
        # Every effect is parallel: two lobes that meet on the plane without effect, an edge as of a value surface.
        patches = build_value_patches(np.array([1.0, 0.0, 0.0]), axes, detail)
    else:
        directions, grid = build_sphere(detail)
        patches = [Patch(directions, axes, np.ones(grid.count), grid)]
    # A n as it stands in the left singular vectors, which keeps small effects beside large ones.
    effects = [patch.points @ (patch.axes @ axes.T * sizes) for patch in patches]
    values = scale * np.concatenate([np.sqrt(np.einsum("ij,ij->i", effect, effect)) for effect in effects])
    vertices = _extend_directions(patches, values)
    sheets = np.ones(len(values), dtype=np.int8)
    return Surface("flux", vertices, connect_grids(_list_grids(patches)), values, sheets, None, axes)


def _sign_patches(positive: list[Patch], negative: list[Patch]) -> tuple[FloatArray, npt.NDArray[np.int8]]:
    """The values of the vertices of all patches, and their sheets."""
    count = sum(patch.grid.count for patch in positive)
    values = np.concatenate([np.zeros(0), *(patch.values for patch in positive + negative)])
    np.subtract(0.0, values[count:], out=values[count:])
    sheets = np.ones(len(values), dtype=np.int8)
    sheets[count:] = -1
    return values, sheets


def _extend_directions(patches: list[Patch], radii: FloatArray) -> FloatArray:
    """Vertices at these radii, shape (n,), along the directions of star-shaped patches."""
    vertices = np.empty((len(radii), 3))
    for patch, part in zip(patches, _split(vertices, patches), strict=True):
        np.matmul(patch.points, patch.axes, out=part)
    vertices *= radii[:, None]
    return vertices


def _split(vertices: FloatArray, patches: list[Patch]) -> list[FloatArray]:
    """Views of the rows that belong to each patch."""
    ends = np.cumsum([patch.grid.count for patch in patches])
    return [vertices[end - patch.grid.count : end] for end, patch in zip(ends, patches, strict=True)]


def _list_grids(patches: list[Patch]) -> tuple[Grid, ...]:
    return tuple(patch.grid for patch in patches)
