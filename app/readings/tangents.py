"""Small turns of directions along their tangent planes."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]


def find_tangents(vectors: FloatArray) -> FloatArray:
    """Two orthonormal tangents at each unit vector (m, 3), as columns, shape (m, 3, 2)."""
    least = np.eye(3)[np.argmin(np.abs(vectors), axis=1)]
    first = np.cross(vectors, least)
    first /= np.linalg.norm(first, axis=1, keepdims=True)
    return np.stack([first, np.cross(vectors, first)], axis=-1)


def move(vectors: FloatArray, tangents: FloatArray, steps: FloatArray) -> FloatArray:
    """Unit vectors (m, 3) after steps (m, 2) along their tangents."""
    moved = vectors + np.einsum("mij,mj->mi", tangents, steps)
    unit: FloatArray = moved / np.linalg.norm(moved, axis=1, keepdims=True)
    return unit
