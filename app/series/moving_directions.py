"""Rows, plane normals and principal axes against each other, as they move with the cell.

Frames themselves turn when the cell changes, so the drift of a free axis is stated against a named row and a named
normal, and the angle between two faces against nothing else. σ is first-order, from the covariance of the cell's
parameters and their rates, which moves the tensor, its frame and the named direction together (JCGM 100:2008, section
5.2.2).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.direction import Direction
from app.errors import InputError
from app.series.branches import Branches
from app.series.expansion import ExpansionCurve

FloatArray = npt.NDArray[np.float64]

_STEADY: Final = 1e-9
"""An angle whose sine is below this has no first-order change, and two values closer than this no axes."""


@dataclass(frozen=True)
class AngleCurve:
    """An angle at T values of the variable.

    Attributes:
        degrees: shape (T,).
        sigma: shape (T,), in degrees; NaN where there is no first-order σ (at 0 and 180°, or where an axis is not
            determined); None where nothing is known.
        extrapolated: shape (T,).
    """

    degrees: FloatArray
    sigma: FloatArray | None
    extrapolated: npt.NDArray[np.bool_]


def measure_angle(curve: ExpansionCurve, first: Direction, second: Direction) -> AngleCurve:
    """Angle between two rows, normals or vectors, 0 to 180°: of two normals, the angle between the two faces.

    Raises:
        InputError: four indices off hexagonal axes, or a direction in a specimen frame.
    """
    one, by_one = _move_direction(curve, first)
    two, by_two = _move_direction(curve, second)
    slope = np.einsum("tja,ta->tj", by_one, two) + np.einsum("tja,ta->tj", by_two, one)
    return _finish(curve, one, two, np.stack([slope, np.zeros_like(slope)], axis=-1), line=False)


def measure_drift(curve: ExpansionCurve, branches: Branches, branch: int, direction: Direction) -> AngleCurve:
    """Angle between the line of a principal axis of alpha and a named row or normal, 0 to 90°.

    Args:
        curve: alpha against the variable.
        branches: of ``curve.alpha``.
        branch: 0, 1 or 2.
        direction: the row or normal.
    """
    named, by_parameter = _move_direction(curve, direction)
    axis = branches.axes[:, branch]
    count = len(curve.fit.series.independent.positions)
    change = curve.derivative.reshape(len(axis), 3, 3, count, 2)
    slope = np.zeros((len(axis), count, 2))
    size = np.max(np.abs(branches.values), axis=1, initial=0.0)
    for other in range(3):
        if other == branch:
            continue
        gap = branches.values[:, branch] - branches.values[:, other]
        gap = np.where(np.abs(gap) > _STEADY * size, gap, np.nan)
        mixed = np.einsum("ta,tabjx,tb->tjx", branches.axes[:, other], change, axis)
        # An axis that no change of the cell can turn stays where it is, whatever the gap.
        turned = np.where(np.abs(mixed) > 0.0, mixed / gap[:, None, None], 0.0)
        slope += turned * np.sum(branches.axes[:, other] * named, axis=1)[:, None, None]
    slope[..., 0] += np.einsum("tja,ta->tj", by_parameter, axis)
    return _finish(curve, axis, named, slope, line=True)


def _finish(curve: ExpansionCurve, one: FloatArray, two: FloatArray, slope: FloatArray, *, line: bool) -> AngleCurve:
    """From unit vectors (T, 3) and the change of their cosine (T, k, 2)."""
    cosine = np.sum(one * two, axis=1)
    sine = np.linalg.norm(np.cross(one, two), axis=1)
    degrees = np.rad2deg(np.arctan2(sine, np.abs(cosine) if line else cosine))
    sigma = None
    if curve.joint is not None:
        with np.errstate(invalid="ignore"):
            spread = curve.propagate(slope)
        sigma = np.rad2deg(spread / np.where(sine > _STEADY, sine, np.nan))
    return AngleCurve(degrees, sigma, curve.extrapolated)


def _move_direction(curve: ExpansionCurve, direction: Direction) -> tuple[FloatArray, FloatArray]:
    """Unit vectors (T, 3) in the crystal frame, and their change by each parameter, (T, k, 3)."""
    if direction.kind == "specimen":
        raise InputError("A direction in the specimen frame needs a pose, and there is none here.")
    if direction.four_index:
        curve.fit.series.crystal.require_hexagonal(direction.text or "")
    values = np.asarray(direction.values) / np.max(np.abs(direction.values))
    motion = curve.motion
    if direction.kind == "row":
        vectors = motion.M @ values
        changes = motion.gradients @ vectors[:, None, :, None]
    elif direction.kind == "normal":
        vectors = np.swapaxes(np.linalg.inv(motion.M), -1, -2) @ values
        changes = -np.swapaxes(motion.gradients, -1, -2) @ vectors[:, None, :, None]
    else:
        vectors = np.tile(values, (len(curve.t), 1))
        changes = np.zeros((*motion.gradients.shape[:-1], 1))
    length = np.linalg.norm(vectors, axis=1)
    unit = vectors / length[:, None]
    relative = changes[..., 0] / length[:, None, None]
    across = relative - np.einsum("tja,ta->tj", relative, unit)[..., None] * unit[:, None]
    return unit, across
