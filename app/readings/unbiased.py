"""The best directions for one quantity where they need not tell anything else.

With nothing else to determine, the best readings for one cell may see no more than that cell: their information is
singular, and the criterion falls off a ridge beside them. Written as the best unbiased combination of readings,
least Σ w² with Σ w x = g (G. Elfving, Ann. Math. Stat. 23 (1952) 255), the same problem is smooth.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize

from app.readings.tangents import find_tangents, move

FloatArray = npt.NDArray[np.float64]

MOST_DIRECTIONS: Final = 32
"""Beyond it the time grows out of hand."""

_STEP: Final = 1e-5
_JOINED: Final = 1e-4
_ROUNDS: Final = 3


def settle_on_quantity(
    see: Callable[[FloatArray], FloatArray],
    start: FloatArray,
    functional: FloatArray,
    vectors: FloatArray,
) -> FloatArray:
    """Directions (N, 3) near the given ones whose readings give one quantity with the least variance.

    Args:
        see: unit vectors (m, 3) to whitened rows (m, r).
        start: shape (r, r), rows of what is taken.
        functional: shape (r,), derivative g of the quantity.
        vectors: shape (N, 3).
    """
    current = vectors
    for _ in range(_ROUNDS):
        current = _join(_settle_once(see, start, functional, current))
    return current


def _settle_once(
    see: Callable[[FloatArray], FloatArray],
    start: FloatArray,
    functional: FloatArray,
    vectors: FloatArray,
) -> FloatArray:
    count, rank, tangents = len(vectors), len(start), find_tangents(vectors)
    held = np.vstack([start, see(vectors)])
    weights = np.linalg.lstsq(held.T, functional, rcond=1e-9)[0]
    size = float(np.linalg.norm(weights)) or 1.0
    weighed = rank + count

    def objective(flat: FloatArray) -> tuple[float, FloatArray]:
        gradient = np.zeros_like(flat)
        gradient[:weighed] = 2.0 * flat[:weighed]
        return float(flat[:weighed] @ flat[:weighed]), gradient

    def surplus(flat: FloatArray) -> FloatArray:
        rows = np.vstack([start, see(move(vectors, tangents, flat[weighed:].reshape(count, 2)))])
        result: FloatArray = rows.T @ flat[:weighed] - functional / size
        return result

    def slope(flat: FloatArray) -> FloatArray:
        turns = flat[weighed:].reshape(count, 2)
        offsets = _STEP * np.array([[0, 0], [1, 0], [-1, 0], [0, 1], [0, -1]], dtype=float)
        parts = np.split(see(np.concatenate([move(vectors, tangents, turns + offset) for offset in offsets])), 5)
        derivative = np.zeros((rank, len(flat)))
        derivative[:, :weighed] = np.vstack([start, parts[0]]).T
        own = flat[rank:weighed, None] / (2.0 * _STEP)
        derivative[:, weighed::2] = (own * (parts[1] - parts[2])).T
        derivative[:, weighed + 1 :: 2] = (own * (parts[3] - parts[4])).T
        return derivative

    begin = np.concatenate([weights / size, np.zeros(2 * count)])
    found = minimize(
        objective,
        begin,
        jac=True,
        method="SLSQP",
        constraints=[{"type": "eq", "fun": surplus, "jac": slope}],
        options={"maxiter": 100, "ftol": 1e-15},
    )
    if not np.all(np.isfinite(found.x)):
        return vectors
    return move(vectors, tangents, np.asarray(found.x, dtype=np.float64)[weighed:].reshape(count, 2))


def _join(vectors: FloatArray) -> FloatArray:
    """Directions that have come together made one."""
    joined = vectors.copy()
    left = list(range(len(vectors)))
    while left:
        first = vectors[left[0]]
        group = [place for place in left if np.linalg.norm(np.cross(first, vectors[place])) < _JOINED]
        signs = np.sign(vectors[group] @ first)
        mean = signs @ vectors[group]
        joined[group] = mean / np.linalg.norm(mean)
        left = [place for place in left if place not in group]
    return joined
