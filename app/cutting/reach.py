"""How near a stage comes to a setting that is beyond its travel."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize

from app.cutting.stage import Axis, compute_turn, turn_about

FloatArray = npt.NDArray[np.float64]

GRID: Final = {1: 721, 2: 73, 3: 19}
"""Places tried along each axis, by how many axes there are, before the best are polished."""
POLISHED: Final = 6


def find_closest(axes: Sequence[Axis], starts: FloatArray, toward: FloatArray) -> tuple[tuple[float, ...], float, int]:
    """The dial readings within travel that bring one of several directions nearest to where it is wanted.

    Args:
        axes: from base to head.
        starts: shape (k, 3), where the directions are with the stage at zero.
        toward: unit vector, laboratory.

    Returns:
        Dials, how far off in degrees, and which direction.
    """
    ranges = [_span(axis) for axis in axes]
    grids = [np.linspace(low, high, GRID[len(axes)]) for low, high in ranges]
    turns = np.eye(3)[None]
    for axis, grid in zip(axes, grids, strict=True):
        each = turn_about(axis.vector, axis.sense * (grid - axis.zero))
        turns = np.einsum("aij,bjk->abik", turns, each).reshape(-1, 3, 3)
    cosines = np.einsum("i,nij,kj->nk", toward, turns, starts)
    order = np.argsort(-cosines, axis=None, kind="stable")[:POLISHED]
    places = np.array(np.unravel_index(order, cosines.shape)).T
    best: tuple[float, tuple[float, ...], int] = (np.inf, (), 0)
    for flat, which in places.tolist():
        dials = np.array(
            [grid[k] for grid, k in zip(grids, np.unravel_index(flat, [len(g) for g in grids]), strict=True)]
        )
        found, off = _polish(axes, ranges, dials, starts[which], toward)
        if off < best[0] - 1e-9:
            best = (off, tuple(found.tolist()), which)
    return best[1], best[0], best[2]


def _span(axis: Axis) -> tuple[float, float]:
    """One turn is all that can differ: of a longer travel the part around zero."""
    if axis.high - axis.low <= 360.0:
        return axis.low, axis.high
    middle = min(max(axis.zero, axis.low + 180.0), axis.high - 180.0)
    return middle - 180.0, middle + 180.0


def _polish(
    axes: Sequence[Axis],
    ranges: Sequence[tuple[float, float]],
    dials: FloatArray,
    start: FloatArray,
    toward: FloatArray,
) -> tuple[FloatArray, float]:
    """The nearest setting from a start on the grid; the square of the distance is smooth, its gradient exact."""

    def measure(trial: FloatArray) -> tuple[float, FloatArray]:
        turn, placed = np.eye(3), []
        for axis, dial in zip(axes, trial, strict=True):
            placed.append(axis.sense * (turn @ axis.vector))
            turn = turn @ turn_about(axis.vector, axis.find_angle(float(dial)))
        moved = turn @ start
        miss = moved - toward
        slopes = np.cross(np.array(placed), moved) * np.deg2rad(1.0)
        return float(miss @ miss), 2.0 * slopes @ miss

    best = minimize(
        measure, dials, jac=True, bounds=list(ranges), method="L-BFGS-B", options={"ftol": 1e-18, "gtol": 1e-14}
    )
    settled = np.clip(best.x, [low for low, _ in ranges], [high for _, high in ranges])
    moved = compute_turn(axes, settled.tolist()) @ start
    off = np.rad2deg(np.arctan2(np.linalg.norm(np.cross(moved, toward)), moved @ toward))
    return settled, float(off)
