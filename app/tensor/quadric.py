"""The representation quadric A_ij x_i x_j = +1 by name, for every pattern of signs (Nye, ch. I, section 4)."""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

ZERO_TOLERANCE: Final = 1e-9
"""A principal value below this part of the largest one counts as zero."""

_NAMES: Final = {
    (3, 0): "ellipsoid",
    (2, 1): "one-sheet hyperboloid",
    (1, 2): "two-sheet hyperboloid",
    (0, 3): "imaginary ellipsoid",
    (2, 0): "elliptic cylinder",
    (1, 1): "hyperbolic cylinder",
    (0, 2): "imaginary cylinder",
    (1, 0): "parallel planes",
    (0, 1): "imaginary planes",
    (0, 0): "none",
}


def name_quadric(principal_values: FloatArray) -> str:
    """Name of the quadric with these three principal values."""
    signs = sign_values(principal_values)
    return _NAMES[int(np.sum(signs > 0)), int(np.sum(signs < 0))]


def sign_values(principal_values: FloatArray) -> FloatArray:
    """+1, −1 or 0 for each principal value, 0 where it vanishes beside the largest."""
    largest = float(np.max(np.abs(principal_values)))
    signs: FloatArray = np.where(np.abs(principal_values) <= ZERO_TOLERANCE * largest, 0.0, np.sign(principal_values))
    return signs
