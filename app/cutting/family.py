"""The family of settings that a third axis leaves, for many readings of one dial at once."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
import numpy.typing as npt

from app.cutting.stage import WITHIN, Axis, turn_about

FloatArray = npt.NDArray[np.float64]

PARALLEL: Final = 1e-10


def scan_family(
    axes: Sequence[Axis], place: int, dials: FloatArray, start: FloatArray, toward: FloatArray
) -> list[FloatArray]:
    """The two branches of settings with one dial held at each of n readings.

    Args:
        axes: three, from base to head.
        place: which is held.
        dials: its readings, shape (n,).
        start, toward: unit vectors, laboratory: where the target is with the stage at zero, and where it is wanted.

    Returns:
        Two arrays (n, 3) of dials; rows of NaN where there is no setting within travel.
    """
    held = turn_about(axes[place].vector, axes[place].sense * (dials - axes[place].zero))
    count = len(dials)
    starts, ends = np.broadcast_to(start, (count, 3)), np.broadcast_to(toward, (count, 3))
    others = [axis for number, axis in enumerate(axes) if number != place]
    first, second = (np.broadcast_to(axis.vector, (count, 3)) for axis in others)
    if place == 0:
        ends = np.einsum("nji,j->ni", held, toward)
    else:
        starts = np.einsum("nij,j->ni", held, start)
        if place == 1:
            second = np.einsum("nij,j->ni", held, axes[2].vector)
    branches = []
    for sign in (1.0, -1.0):
        middle = _meet(first, second, starts, ends, sign)
        columns = [dials, dials, dials]
        columns[place] = np.where(np.isnan(middle[:, 0]), np.nan, dials)
        free = [number for number in range(3) if number != place]
        columns[free[0]] = _read(others[0], first, middle, ends)
        columns[free[1]] = _read(others[1], second, starts, middle)
        branch = np.stack(columns, axis=1)
        branch[np.any(np.isnan(branch), axis=1)] = np.nan
        branches.append(branch)
    return branches


def _meet(first: FloatArray, second: FloatArray, starts: FloatArray, ends: FloatArray, sign: float) -> FloatArray:
    """Where the cones about two axes meet, shape (n, 3); NaN where they do not."""
    between = np.sum(first * second, axis=1)
    across = np.cross(first, second)
    square = np.sum(across * across, axis=1)
    square = np.where(square < PARALLEL**2, np.nan, square)
    one, two = np.sum(first * ends, axis=1), np.sum(second * starts, axis=1)
    alpha, beta = (one - between * two) / square, (two - between * one) / square
    middle = alpha[:, None] * first + beta[:, None] * second
    rest = 1.0 - np.sum(middle * middle, axis=1)
    rest = np.where(rest < -1e-12, np.nan, np.maximum(rest, 0.0))
    met: FloatArray = middle + (sign * np.sqrt(rest / square))[:, None] * across
    return met


def _read(axis: Axis, vectors: FloatArray, starts: FloatArray, ends: FloatArray) -> FloatArray:
    """Dials that turn each start into its end about an axis that lies along ``vectors``; NaN beyond travel."""
    flat_start = starts - vectors * np.sum(vectors * starts, axis=1)[:, None]
    flat_end = ends - vectors * np.sum(vectors * ends, axis=1)[:, None]
    sines = np.sum(vectors * np.cross(flat_start, flat_end), axis=1)
    base = axis.zero + axis.sense * np.rad2deg(np.arctan2(sines, np.sum(flat_start * flat_end, axis=1)))
    lowest = np.ceil((axis.low - WITHIN - base) / 360.0)
    highest = np.floor((axis.high + WITHIN - base) / 360.0)
    turns = np.clip(np.rint((axis.zero - base) / 360.0), lowest, highest)
    return np.where(lowest > highest, np.nan, base + 360.0 * turns)
