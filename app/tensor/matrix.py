"""Reading a 3 × 3 matrix that somebody gives."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

LARGEST_CELL: Final = 1e300
"""Sums of products of larger numbers leave the range of double precision."""


def read_matrix(given: npt.ArrayLike) -> FloatArray:
    """Three rows of three finite numbers, as an array of its own.

    Raises:
        InputError: field ``matrix``, when it is anything else or too large to compute with.
    """
    try:
        matrix = np.array(given, dtype=np.float64)
    except (TypeError, ValueError):
        matrix = np.empty(0)
    if matrix.shape != (3, 3) or not np.all(np.isfinite(matrix)):
        raise InputError("A matrix is three rows of three finite numbers.", field="matrix")
    if np.max(np.abs(matrix)) > LARGEST_CELL:
        raise InputError(
            f"A cell of the matrix is beyond {LARGEST_CELL:g}.",
            field="matrix",
            hint="Give the values in a larger unit.",
        )
    return matrix
