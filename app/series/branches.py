"""Principal values and axes as curves, followed through crossings by the continuity of their axes, not by size.

Sorted by size, two principal values that cross change places and their axes seem to jump by 90°. A branch instead takes
at every step the axis that lies nearest to its own of the step before. Where two values are equal they have no axes of
their own, and a branch carries its axes on, as near as the space of the equal values allows.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations
from typing import Final

import numpy as np
import numpy.typing as npt

from app.tensor.principal import EQUAL_TOLERANCE

FloatArray = npt.NDArray[np.float64]

DOUBTFUL_TURN: Final = 30.0
"""Degrees: where an axis turns further than this from one place to the next, the next place is too far to be sure."""

_ORDERS: Final = np.array(list(permutations(range(3))))


@dataclass(frozen=True)
class Branches:
    """Three principal curves over T places.

    Attributes:
        values: shape (T, 3), one column per branch.
        axes: shape (T, 3, 3), unit vectors as rows, right-handed, without jumps of sign.
        order: shape (T, 3), which of the values sorted in descending order each branch takes.
        turns: shape (T, 3), degrees by which each axis turned since the place before; 0 at the first.
        doubtful: shape (T,), whether an axis turned so far since the place before that the places lie too far apart
            to tell the branches.
    """

    values: FloatArray
    axes: FloatArray
    order: npt.NDArray[np.int64]
    turns: FloatArray
    doubtful: npt.NDArray[np.bool_]


def follow_branches(matrices: FloatArray) -> Branches:
    """Follow the principal axes of symmetric parts of tensors (T, 3, 3), in the order in which they are given.

    It starts where the three values lie farthest apart, where the axes are surest, and goes both ways from there. The
    branches are numbered by their values at the first place, in descending order.
    """
    count = len(matrices)
    symmetric = (matrices + np.swapaxes(matrices, -1, -2)) / 2.0
    size = np.max(np.abs(symmetric), axis=(1, 2), keepdims=True)
    ascending, vectors = np.linalg.eigh(symmetric / np.where(size > 0.0, size, 1.0))
    values, axes = ascending[:, ::-1], np.swapaxes(vectors, -1, -2)[:, ::-1].copy()
    order = np.tile(np.arange(3), (count, 1))
    if count:
        start = int(np.argmax(np.min(values[:, :2] - values[:, 1:], axis=1)))
        if np.linalg.det(axes[start]) < 0:
            axes[start, 2] = -axes[start, 2]
        for places in (range(start + 1, count), range(start - 1, -1, -1)):
            step = 1 if places.step > 0 else -1
            for place in places:
                axes[place], order[place] = _carry_on(values[place], axes[place], axes[place - step])
        # Number the branches by their values at the first place.
        names = np.argsort(order[0], kind="stable")
        order, axes = order[:, names], axes[:, names]
        if np.linalg.det(axes[0]) < 0:
            axes[:, 2] = -axes[:, 2]
    followed = np.take_along_axis(values * size[..., 0], order, axis=1)
    turns = np.zeros((count, 3))
    across = np.linalg.norm(np.cross(axes[1:], axes[:-1]), axis=-1)
    turns[1:] = np.rad2deg(np.arctan2(across, np.abs(np.sum(axes[1:] * axes[:-1], axis=-1))))
    return Branches(followed, axes, order.astype(np.int64), turns, np.any(turns > DOUBTFUL_TURN, axis=1))


def _carry_on(values: FloatArray, axes: FloatArray, before: FloatArray) -> tuple[FloatArray, npt.NDArray[np.int64]]:
    """Axes of this place in the order of the branches, and which sorted value each of them takes."""
    tolerance = EQUAL_TOLERANCE * float(np.max(np.abs(values)))
    equal = values[:2] - values[1:] <= tolerance
    if np.all(equal):
        return before, np.arange(3)
    own = axes.copy()
    for first in np.flatnonzero(equal):
        own[[first, first + 1]] = _settle_plane(axes[2 - 2 * first], before)
    overlap = np.abs(before @ own.T)
    best = _ORDERS[int(np.argmax(np.sum(np.square(overlap[np.arange(3), _ORDERS]), axis=1)))]
    chosen = own[best]
    signs = np.sign(np.sum(chosen * before, axis=1))
    return chosen * np.where(signs == 0.0, 1.0, signs)[:, None], best


def _settle_plane(alone: FloatArray, before: FloatArray) -> FloatArray:
    """The two axes (2, 3) across ``alone`` that lie nearest to those carried on, without preferring either of them."""
    kept = np.delete(before, int(np.argmax(np.abs(before @ alone))), axis=0)
    flat = kept - (kept @ alone)[:, None] * alone
    left, _, right = np.linalg.svd(flat, full_matrices=False)
    settled: FloatArray = left @ right
    return settled
