"""Shapes on the sphere without width, as closed lines of unit vectors: points, circles and arcs."""

from __future__ import annotations

from typing import Final, Literal

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
CurveKind = Literal["area", "line", "point"]
Curve = tuple[CurveKind, FloatArray]

_STEP: Final = np.deg2rad(1.0)
"""Spacing of points along circles and arcs."""

_POINT: Final = 1e-12
"""An arc shorter than this (radians) is a point."""


def find_plane_axes(matrix: FloatArray, normal: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The principal axes of a matrix within the plane across a normal, the second = normal × first."""
    start = np.eye(3)[int(np.argmin(np.abs(normal)))]
    first = start - normal * (normal @ start)
    first /= np.linalg.norm(first)
    second = np.cross(normal, first)
    angle = np.arctan2(2.0 * (first @ matrix @ second), first @ matrix @ first - second @ matrix @ second) / 2.0
    zero = np.cos(angle) * first + np.sin(angle) * second
    return zero, np.cross(normal, zero)


def build_points(axis: FloatArray) -> list[Curve]:
    """An axis and its opposite."""
    return [("point", (sign * axis)[None, :] + 0.0) for sign in (1.0, -1.0)]


def build_circle(axis: FloatArray) -> FloatArray:
    """The great circle across an axis."""
    zero, right = find_plane_axes(np.zeros((3, 3)), axis)
    angles = np.linspace(0.0, 2.0 * np.pi, round(2.0 * np.pi / _STEP) + 1)
    circle: FloatArray = np.cos(angles)[:, None] * zero + np.sin(angles)[:, None] * right
    circle[-1] = circle[0]
    return circle


def build_arc(zero: FloatArray, right: FloatArray, low: float, high: float) -> Curve:
    """Forth and back between two azimuths (radians, from ``zero`` toward ``right``), or a point where they agree."""
    if high - low <= _POINT:
        angle = (low + high) / 2.0
        return "point", (np.cos(angle) * zero + np.sin(angle) * right)[None, :]
    angles = np.linspace(low, high, max(9, int((high - low) / _STEP) + 2))
    return "line", go_forth_and_back(np.cos(angles)[:, None] * zero + np.sin(angles)[:, None] * right)


def go_forth_and_back(path: FloatArray) -> FloatArray:
    """A path (k, 3) and the same way back."""
    return np.concatenate([path, path[-2::-1]])
