"""Choosing directions on the whole sphere: from a dense grid, all together by gradient, then one by one to the end.

The criterion is smooth, so the joint refinement is by BFGS (J. Nocedal and S. J. Wright, Numerical Optimization, 2006,
ch. 6). Afterwards every chosen direction is compared with every local optimum of what could stand in its place; where
one is better it is exchanged and all are refined again, so that in the end no single exchange improves the choice.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize

from app.readings.exchange import IMPROVEMENT
from app.readings.gain import FLOOR, Gain
from app.readings.tangents import find_tangents, move

FloatArray = npt.NDArray[np.float64]

GRID_POINTS: Final = 1500
MAX_ROUNDS: Final = 12
_STEP: Final = 1e-5
_STENCIL: Final = 1e-3
_SAME: Final = 1e-6
_PEAKS: Final = 8
_PEAK_COSINE: Final = 0.93
_NEWTON_STEPS: Final = 7
_LONGEST_STEP: Final = 0.1


@dataclass(frozen=True)
class Sphere:
    """A planning problem over all directions.

    Attributes:
        gain: the same problem over a grid of directions.
        grid: shape (n, 3), these directions.
        see: unit vectors (m, 3) to rows (m, r) in the coordinates of ``gain``.
    """

    gain: Gain
    grid: FloatArray
    see: Callable[[FloatArray], FloatArray]

    def rate(self, held: FloatArray, vectors: FloatArray) -> FloatArray:
        """Logarithm of the criterion after a reading along each of the vectors (m, 3), shape (m,)."""
        rows = self.see(vectors)
        return self.gain.rate_rows(held, rows, rows @ self.gain.rest, FLOOR)


def refine(sphere: Sphere, vectors: FloatArray) -> FloatArray:
    """Unit vectors (N, 3) that no single exchange on the sphere improves, from a start (N, 3)."""
    chosen = _refine_together(sphere, vectors)
    for _ in range(MAX_ROUNDS):
        changed = False
        settled = np.zeros((0, 3))
        for place in range(len(chosen)):
            if np.any(np.linalg.norm(np.cross(settled, chosen[place]), axis=1) < _SAME):
                # Repeats are alike, so one of them speaks for all.
                continue
            others = np.delete(chosen, place, axis=0)
            held = sphere.gain.hold(sphere.see(others))
            better, value = find_best(sphere, held, chosen[place])
            if value < sphere.rate(held, chosen[place][None])[0] - IMPROVEMENT:
                chosen[place] = better
                changed = True
            else:
                settled = np.vstack([settled, chosen[place]])
        if not changed:
            break
        chosen = _refine_together(sphere, chosen)
    return _choose_signs(chosen)


def measure(sphere: Sphere, vectors: FloatArray) -> float:
    """Logarithm of the criterion of a choice (N, 3)."""
    return sphere.gain.measure(sphere.gain.hold(sphere.see(vectors)), FLOOR)[0]


def find_best(sphere: Sphere, held: FloatArray, current: FloatArray) -> tuple[FloatArray, float]:
    """The direction whose reading helps most beside what is held, over the whole sphere, and the criterion then."""
    rated = sphere.gain.rate(held, FLOOR)
    starts = [current]
    order = np.argsort(rated, kind="stable")
    waiting = sphere.grid[order]
    while len(waiting) and len(starts) <= _PEAKS:
        starts.append(waiting[0])
        waiting = waiting[np.abs(waiting @ waiting[0]) < _PEAK_COSINE]
    peaks, values = _climb(sphere, held, np.array(starts))
    best = int(np.argmin(values))
    return peaks[best], float(values[best])


def _climb(sphere: Sphere, held: FloatArray, vectors: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Newton steps from each of the vectors (m, 3) to the local optimum near it; never to a worse place."""
    values = sphere.rate(held, vectors)
    stencil = _STENCIL * np.array([[1, 0], [-1, 0], [0, 1], [0, -1], [1, 1], [-1, -1], [1, -1], [-1, 1]], dtype=float)
    for _ in range(_NEWTON_STEPS):
        tangents = find_tangents(vectors)
        around = move(
            np.repeat(vectors, 8, axis=0), np.repeat(tangents, 8, axis=0), np.tile(stencil, (len(vectors), 1))
        )
        f = sphere.rate(held, around).reshape(-1, 8)
        slope = np.stack([f[:, 0] - f[:, 1], f[:, 2] - f[:, 3]], axis=1) / (2.0 * _STENCIL)
        curvature = np.empty((len(vectors), 2, 2))
        curvature[:, 0, 0] = f[:, 0] + f[:, 1] - 2.0 * values
        curvature[:, 1, 1] = f[:, 2] + f[:, 3] - 2.0 * values
        curvature[:, 0, 1] = curvature[:, 1, 0] = (f[:, 4] + f[:, 5] - f[:, 6] - f[:, 7]) / 4.0
        bends, turns = np.linalg.eigh(curvature / _STENCIL**2)
        inner = np.einsum("mji,mj->mi", turns, slope) / np.maximum(np.abs(bends), 1e-6)
        step = -np.einsum("mij,mj->mi", turns, inner)
        length = np.linalg.norm(step, axis=1, keepdims=True)
        step *= np.minimum(1.0, _LONGEST_STEP / np.maximum(length, 1e-300))
        for shorter in (1.0, 0.25, 0.05):
            tried = move(vectors, tangents, shorter * step)
            found = sphere.rate(held, tried)
            better = found < values
            vectors = np.where(better[:, None], tried, vectors)
            values = np.where(better, found, values)
            step = np.where(better[:, None], 0.0, step)
            if np.all(better):
                break
    return vectors, values


def _refine_together(sphere: Sphere, vectors: FloatArray) -> FloatArray:
    """All directions at once, by their 2 N turns."""
    start, tangents = vectors.copy(), find_tangents(vectors)
    count = len(start)

    def evaluate(flat: FloatArray) -> tuple[float, FloatArray]:
        steps = flat.reshape(count, 2)
        offsets = _STEP * np.array([[0, 0], [1, 0], [-1, 0], [0, 1], [0, -1]], dtype=float)
        moved = np.concatenate([move(start, tangents, steps + offset) for offset in offsets])
        rows, plus1, minus1, plus2, minus2 = np.split(sphere.see(moved), 5)
        value, slope = sphere.gain.measure(sphere.gain.hold(rows), FLOOR)
        pull = 2.0 * rows @ slope
        gradient = np.stack(
            [np.sum(pull * (plus1 - minus1), axis=1), np.sum(pull * (plus2 - minus2), axis=1)], axis=1
        ) / (2.0 * _STEP)
        return value, gradient.ravel()

    before = evaluate(np.zeros(2 * count))[0]
    found = minimize(evaluate, np.zeros(2 * count), jac=True, method="BFGS", options={"gtol": 1e-8, "maxiter": 400})
    if not found.fun < before:
        return start
    return move(start, tangents, np.asarray(found.x, dtype=np.float64).reshape(count, 2))


def _choose_signs(vectors: FloatArray) -> FloatArray:
    """Of n and −n the one in the upper half: x3, else x2, else x1 positive."""
    rounded = np.where(np.abs(vectors) < 1e-9, 0.0, vectors)
    signs = np.sign(rounded)
    sense = np.where(signs[:, 2] != 0, signs[:, 2], np.where(signs[:, 1] != 0, signs[:, 1], signs[:, 0]))
    unit: FloatArray = vectors * sense[:, None] + 0.0
    return unit
