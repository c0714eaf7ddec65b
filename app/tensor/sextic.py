"""The curve of degree six that bounds the directions allowed as principal axes.

χ²(n) = Σ_a P_a² / Σ_{a<b} Q_ab² with the cubic forms P_a = det[n, An, D_a n] and Q_ab = det[n, D_a n, D_b n] (A and D_a
as in ``app.tensor.deviation``; the formula of Binet and Cauchy for gᵀ V⁻¹ g). The border is f = Σ P_a² − bound Σ Q_ab²
= 0, and the area f ≤ 0. As sums of squares both parts keep their precision for regions of any size.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations
from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

_FLOOR: Final = 1e-5
"""Where fewer than five independent errors exist the curve may touch itself; errors this small part the touching
pieces while the curve is followed. Its points are then moved onto the curve itself."""

_EPSILON: Final = np.zeros((3, 3, 3))
for _i, _j, _k in permutations(range(3)):
    _EPSILON[_i, _j, _k] = round(float(np.linalg.det(np.eye(3)[[_i, _j, _k]])))

_EXPONENTS: Final = np.array(
    [[0, 0, 0], [0, 0, 1], [0, 0, 2], [0, 1, 1], [0, 1, 2], [0, 2, 2], [1, 1, 1], [1, 1, 2], [1, 2, 2], [2, 2, 2]]
)
_MULTIPLICITY: Final = np.array([1.0, 3.0, 3.0, 3.0, 6.0, 3.0, 1.0, 3.0, 3.0, 1.0])


@dataclass(frozen=True)
class Sextic:
    """f, a weighted sum of squares of cubic forms.

    Attributes:
        forms: shape (k, 3, 3, 3), symmetric in the last three; the value is the form applied to n three times.
        weights: shape (k,), 1 for P_a and −bound for Q_ab.
    """

    forms: FloatArray
    weights: FloatArray

    def evaluate(self, direction: FloatArray) -> tuple[float, FloatArray]:
        """F and its gradient across a unit vector (3,)."""
        once = (self.forms @ direction) @ direction
        values = once @ direction
        weighted = self.weights * values
        value = float(weighted @ values)
        gradient: FloatArray = 6.0 * (weighted @ once - value * direction)
        return value, gradient

    def measure(self, directions: FloatArray) -> FloatArray:
        """F of vectors (m, 3), shape (m,)."""
        values: FloatArray = self._apply(directions) ** 2 @ self.weights
        return values

    def measure_chi2(self, directions: FloatArray) -> FloatArray:
        """χ² over its bound, shape (m,)."""
        squares = self._apply(directions) ** 2
        effects = self.weights > 0.0
        variances = squares[:, ~effects] @ -self.weights[~effects]
        ratio: FloatArray = np.sum(squares[:, effects], axis=1) / np.maximum(variances, 1e-300)
        return ratio

    def _apply(self, directions: FloatArray) -> FloatArray:
        coefficients = self.forms[:, _EXPONENTS[:, 0], _EXPONENTS[:, 1], _EXPONENTS[:, 2]] * _MULTIPLICITY
        applied: FloatArray = np.prod(directions[:, _EXPONENTS], axis=2) @ coefficients.T
        return applied


def build_sextic(matrix: FloatArray, spreads: FloatArray, bound: float) -> Sextic:
    """The curve of A (3, 3) and D_a (r, 3, 3), r ≥ 2, in the frame of both."""
    effects = _build_forms(matrix[None], spreads)
    first, second = np.triu_indices(len(spreads), 1)
    variances = _build_forms(spreads[first], spreads[second])
    weights = np.concatenate([np.ones(len(effects)), np.full(len(variances), -bound)])
    return Sextic(np.concatenate([effects, variances]), weights)


def _build_forms(first: FloatArray, second: FloatArray) -> FloatArray:
    """det[n, Xn, Yn] as symmetric arrays of shape (k, 3, 3, 3), of X and Y of shape (k, 3, 3)."""
    first, second = np.broadcast_arrays(first, second)
    forms = np.einsum("ajk,njb,nkc->nabc", _EPSILON, first, second)
    turned = [np.transpose(forms, (0, *(1 + i for i in order))) for order in permutations(range(3))]
    averaged: FloatArray = np.mean(turned, axis=0)
    return averaged


def fill_spreads(spreads: FloatArray) -> FloatArray:
    """Small errors added in all traceless directions that have none."""
    identity = np.eye(3).reshape(1, 9)
    skew = _EPSILON.reshape(3, 9)
    taken = np.concatenate([identity, skew, spreads.reshape(-1, 9)])
    missing = np.linalg.svd(taken)[2][len(taken) :].reshape(-1, 3, 3)
    return np.concatenate([spreads, _FLOOR * np.linalg.norm(spreads[0]) * missing])
