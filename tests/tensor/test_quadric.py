"""Names of the quadric for every pattern of signs."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from app.tensor.quadric import name_quadric, sign_values

# A_ij x_i x_j = +1, the words of the interface; which is which: Nye, ch. I, section 4 (from memory), and by hand:
# of diag(1, 1, −1) the surface x² + y² − z² = 1 is in one piece, of diag(1, −1, −1) in two.
NAMES = {
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


@pytest.mark.parametrize("signs", list(product((1, 0, -1), repeat=3)))
@pytest.mark.parametrize("scale", [1e-300, 1e-30, 1.0, 1e30, 1e300])
def test_every_pattern_of_signs(signs: tuple[int, int, int], scale: float) -> None:
    values = scale * np.array(signs) * [1.0, 0.7, 0.4]
    assert name_quadric(values) == NAMES[signs.count(1), signs.count(-1)]


def test_what_vanishes_beside_the_largest_is_zero() -> None:
    assert name_quadric(np.array([1.0, 1e-6, -1e-6])) == "one-sheet hyperboloid"
    assert name_quadric(np.array([1.0, 1e-16, -1e-16])) == "parallel planes"
    assert sign_values(np.array([5.0, 1e-15, -2.0])).tolist() == [1.0, 0.0, -1.0]
