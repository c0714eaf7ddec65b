"""An outside for the tests of seeking: searches over the whole sphere that know nothing of cones or their axes."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize
from scipy.spatial import ConvexHull

FloatArray = npt.NDArray[np.float64]


def measure(matrix: FloatArray, directions: FloatArray) -> FloatArray:
    """nᵀAn of unit vectors (k, 3)."""
    return np.asarray(np.einsum("ka,ab,kb->k", directions, matrix, directions))


@lru_cache(maxsize=4)
def build_mesh(count: int = 20_000) -> tuple[FloatArray, npt.NDArray[np.int32]]:
    """Points spread over the sphere by a spiral, and the triangles between them."""
    heights = 1 - (2 * np.arange(count) + 1) / count
    turns = np.arange(count) * np.pi * (3 - np.sqrt(5))
    across = np.sqrt(1 - heights**2)
    points = np.stack([across * np.cos(turns), across * np.sin(turns), heights], axis=1)
    return points, ConvexHull(points).simplices


def search_common(first: FloatArray, second: FloatArray) -> FloatArray:
    """Directions, one of each pair of opposites, where both forms vanish and cross: shape (k, 3).

    From every triangle on whose corners both forms have both signs, or nearly so, Newton's method is started.
    """
    points, triangles = build_mesh()
    forms = np.array([first, second])
    starts = np.ones(len(triangles), dtype=bool)
    for form in forms:
        values = measure(form, points)[triangles]
        slack = 0.3 * np.ptp(values, axis=1)
        starts &= (np.min(values, axis=1) <= slack) & (np.max(values, axis=1) >= -slack)
    found: list[FloatArray] = []
    for corner in points[triangles[starts, 0]]:
        n = corner
        for _ in range(40):
            misses = forms @ n @ n
            step = np.linalg.lstsq(np.vstack([2 * forms @ n, n]), np.append(-misses, 0.0), rcond=None)[0]
            n = (n + step) / np.linalg.norm(n + step)
        if np.max(np.abs(forms @ n @ n)) < 1e-13 * np.max(np.abs(forms)) and all(
            np.linalg.norm(np.cross(n, other)) > 1e-5 for other in found
        ):
            found.append(n)
    return np.array(found).reshape(-1, 3)


def search_extreme(form: FloatArray, matrix: FloatArray, sign: int) -> float:
    """The highest (sign 1) or lowest value of nᵀAn where a form vanishes, by a general optimiser from many starts."""
    points, triangles = build_mesh(2000)
    values = measure(form, points)[triangles]
    near = triangles[(np.min(values, axis=1) < 0) & (np.max(values, axis=1) > 0), 0]
    order = np.argsort(-sign * measure(matrix, points[near]))[:4]
    size = float(np.max(np.abs(matrix)))
    best = -np.inf
    for start in points[near][order]:
        result = minimize(
            lambda n: -sign * (n @ matrix @ n) / size,
            start,
            jac=lambda n: -2 * sign * (matrix @ n) / size,
            method="SLSQP",
            constraints=[
                {"type": "eq", "fun": lambda n: n @ form @ n, "jac": lambda n: 2 * form @ n},
                {"type": "eq", "fun": lambda n: n @ n - 1, "jac": lambda n: 2 * n},
            ],
            options={"ftol": 1e-14, "maxiter": 200},
        )
        best = max(best, -float(result.fun) * size)
    return sign * best
