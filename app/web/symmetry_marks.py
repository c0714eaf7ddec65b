"""Symmetry elements in a stereogram, by the graphic symbols of International Tables for Crystallography.

A lens, triangle, square or hexagon where a two-, three-, four- or six-fold axis leaves the sphere; open with the inner
symbol for the rotoinversions 4̄ and 6̄, with a ring in the middle for 3̄ and for axes with the inversion; heavy great
circles for mirrors; a small ring in the centre for the inversion.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal

FloatArray = npt.NDArray[np.float64]

ORDERS: Final = (6, 4, 3, 2)
SIZE: Final = 5.6
CIRCLE_POINTS: Final = 73


def find_axes(crystal: Crystal) -> list[tuple[FloatArray, int, int]]:
    """Axes of a group as lines: unit vector, highest proper turn (1 for none), highest rotoinversion turn above 2.

    Of a limiting group none: ``draw_elements`` has its own marks for them.
    """
    if crystal.group.limiting:
        return []
    found: list[tuple[FloatArray, int, int]] = []
    for operation in crystal.operations:
        if operation.axis is None or operation.turn not in ORDERS:
            continue
        if operation.improper and operation.turn == 2:
            continue
        proper = 1 if operation.improper else operation.turn
        inverse = operation.turn if operation.improper else 1
        for place, (axis, one, other) in enumerate(found):
            if abs(abs(float(axis @ operation.axis)) - 1.0) < 1e-6:
                found[place] = (axis, max(one, proper), max(other, inverse))
                break
        else:
            found.append((operation.axis, proper, inverse))
    return found


def find_mirrors(crystal: Crystal) -> FloatArray:
    """Normals of the mirrors, shape (m, 3); of a limiting group only the one across its axis, if it is a mirror."""
    if crystal.group.limiting:
        return np.array([[0.0, 0.0, 1.0]] if crystal.group.symbol in ("∞/m", "∞/mm") else []).reshape(-1, 3)
    normals: list[FloatArray] = []
    for operation in crystal.operations:
        if not operation.improper or operation.turn != 2 or operation.axis is None:
            continue
        if all(abs(abs(float(normal @ operation.axis)) - 1.0) > 1e-6 for normal in normals):
            normals.append(operation.axis)
    return np.array(normals).reshape(-1, 3)


def draw_elements(
    crystal: Crystal, screen: FloatArray, project: Callable[[FloatArray], FloatArray], radius: float
) -> list[str]:
    """The symmetry elements as pieces of SVG.

    Args:
        crystal: whose group it is.
        screen: right, up and toward the viewer as rows, in the crystal frame.
        project: from unit vectors in screen axes to places in the circle of radius 1.
        radius: of the circle.
    """
    parts = [
        f'<path class="stereo-mirror" d="{_trace_mirror(screen @ normal, project, radius)}"/>'
        for normal in find_mirrors(crystal)
    ]
    if crystal.group.limiting:
        parts += _draw_limiting(crystal.group.symbol, screen, project, radius)
    inverting = any(operation.improper and operation.turn == 1 for operation in crystal.operations)
    for axis, proper, inverse in find_axes(crystal):
        shown = screen @ axis
        ends = [shown, -shown] if abs(shown[2]) < 1e-6 else [shown if shown[2] > 0 else -shown]
        for end in ends:
            x, y = radius * project(end)
            turn = float(np.rad2deg(np.arctan2(-y, x))) + 90.0 if np.hypot(x, y) > 1e-6 else 0.0
            parts.append(
                f'<g class="stereo-axis" transform="translate({x:.1f} {-y:.1f}) rotate({turn:.1f})">'
                f"{_draw_axis(proper, inverse, inverting)}</g>"
            )
    if inverting:
        parts.append('<circle class="stereo-centre" r="2"/>')
    return parts


def _draw_limiting(
    symbol: str, screen: FloatArray, project: Callable[[FloatArray], FloatArray], radius: float
) -> list[str]:
    """A disc with the sign ∞ where the axis x3 leaves the sphere, and a dotted circle of half-turns across it.

    The tables have no symbol for infinite axes. Of the spheres' groups nothing is drawn: every direction is an axis.
    """
    if symbol.startswith("∞∞"):
        return []
    parts = []
    if symbol in ("∞2", "∞/mm"):
        path = _trace_mirror(screen[:, 2], project, radius)
        parts.append(f'<path class="stereo-half-turns" d="{path}"/>')
    shown = screen[:, 2]
    for end in [shown, -shown] if abs(shown[2]) < 1e-6 else [shown if shown[2] > 0 else -shown]:
        x, y = radius * project(end)
        parts.append(
            f'<g class="stereo-axis" transform="translate({x:.1f} {-y:.1f})"><circle class="stereo-endless" r="5.2"/>'
            '<text class="stereo-endless-sign" y="2.6" text-anchor="middle">∞</text></g>'
        )
    return parts


def _trace_mirror(normal: FloatArray, project: Callable[[FloatArray], FloatArray], radius: float) -> str:
    """The near half of the great circle across a normal; all of it where it is the rim."""
    across = np.cross(normal, [0.0, 0.0, 1.0])
    rim = float(np.linalg.norm(across)) < 1e-6
    first = np.array([1.0, 0.0, 0.0]) if rim else across / np.linalg.norm(across)
    second = np.cross(normal, first)
    if second[2] < 0:
        second = -second
    angles = np.linspace(0.0, 2 * np.pi if rim else np.pi, CIRCLE_POINTS)
    points = np.cos(angles)[:, None] * first + np.sin(angles)[:, None] * second
    places = radius * project(points)
    return "M" + "L".join(f"{x:.1f} {-y:.1f}" for x, y in places.tolist())


def _draw_axis(proper: int, inverse: int, inverting: bool) -> str:
    ring = '<circle class="stereo-hole" r="1.6"/>'
    if inverse == 6 and proper < 6:
        return f'<path class="open" d="{_polygon(6, SIZE)}"/><path d="{_polygon(3, SIZE * 0.8)}"/>'
    if inverse == 4 and proper < 4:
        return f'<path class="open" d="{_polygon(4, SIZE)}"/><path d="{_lens(SIZE * 0.8)}"/>'
    body = _lens(SIZE) if proper == 2 else _polygon(proper, SIZE)
    return f'<path d="{body}"/>' + (ring if inverting else "")


def _polygon(corners: int, size: float) -> str:
    angles = 2 * np.pi * np.arange(corners) / corners - np.pi / 2
    return "M" + "L".join(f"{size * np.cos(a):.2f} {size * np.sin(a):.2f}" for a in angles) + "Z"


def _lens(size: float) -> str:
    return f"M0 {-size:.2f}Q{size * 0.75:.2f} 0 0 {size:.2f}Q{-size * 0.75:.2f} 0 0 {-size:.2f}Z"
