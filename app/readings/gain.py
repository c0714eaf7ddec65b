"""What one more reading does to a criterion, for all candidates at once and without losing digits.

Where a set does not determine everything yet, its information is singular; the criterion is then the limit of the one
with ``floor`` added to every eigenvalue, which ranks first by what becomes determined and then by how well.
A determinant after a rank-one addition is det M · (1 + xᵀ M⁻¹ x) (the matrix determinant lemma; J. Sherman and W. J.
Morrison, Ann. Math. Stat. 21 (1950) 124), evaluated in the eigenvectors of M as a sum of squares. The covariance of
some quantities alone has the determinant det(Nᵀ M N) / det M up to a constant, N spanning what does not touch them.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.linalg import qr

from app.errors import InputError
from app.readings.criterion import Criterion
from app.readings.information import Rows, find_complement
from app.readings.solver import RANK_TOLERANCE, solve_least_squares

FloatArray = npt.NDArray[np.float64]

FLOOR: Final = 1e-12
"""Information, beside 1 for a typical candidate, that stands for none: below the square of the fit's rank tolerance."""

NO_FLOOR: Final = 1e-30
"""For sets that determine everything: nothing but a guard against division by zero."""

_BLIND: Final = 1e-9
"""A row that is smaller than this, beside 1, is rounding."""

COARSE_FLOOR: Final = 1e-6
"""For sums over sets that cannot determine everything."""


@dataclass(frozen=True)
class Gain:
    """A planning problem in coordinates in which taken readings and the average candidate add up to the identity.

    Attributes:
        transform: shape (k, r), z = x · transform takes a whitened row to these coordinates, on the space that taken
            readings and candidates can see.
        start: shape (r, r), a square root of the information of what is taken.
        rows: shape (n, r), the candidates.
        mode: "all" (determinant), "sum" (trace) or "part" (determinant of the covariance of some quantities).
        metric: shape (r, r), the covariance's weights for "sum".
        rest: shape (r, q), N for "part".
        rest_rows: shape (n, q), the candidates in N.
    """

    transform: FloatArray
    start: FloatArray
    rows: FloatArray
    mode: Literal["all", "sum", "part"]
    metric: FloatArray
    rest: FloatArray
    rest_rows: FloatArray

    def hold(self, rows: FloatArray) -> FloatArray:
        """Square root of the information of what is taken and of planned rows (N, r)."""
        return np.vstack([self.start, rows])

    def rate(self, held: FloatArray, floor: float) -> FloatArray:
        """Logarithm of the criterion (small is good, up to a constant) after each candidate is added, shape (n,)."""
        return self.rate_rows(held, self.rows, self.rest_rows, floor)

    def rate_rows(self, held: FloatArray, rows: FloatArray, rest_rows: FloatArray, floor: float) -> FloatArray:
        """The same for any rows (m, r) and the same in N (m, q)."""
        if self.mode == "sum":
            return self._rate_sum(held, rows, floor)
        rated = -_log_det_after(held, rows, floor)
        if self.mode == "part":
            rated += _log_det_after(held @ self.rest, rest_rows, floor)
        return rated

    def _rate_sum(self, held: FloatArray, rows: FloatArray, floor: float) -> FloatArray:
        # With L the metric in the eigenvectors of M and w = 1/λ, the trace after x is added is
        # (tr(L w) + xᵀ K x) / (1 + Σ w x²), K the derivative of tr(L adj M) over det M; written so, nothing cancels
        # where an eigenvalue is next to nothing.
        values, vectors = _decompose(held, floor)
        weights = 1.0 / values
        metric = vectors @ self.metric @ vectors.T
        own = np.diag(metric) * weights
        others = (np.ones_like(metric) - np.eye(len(metric))) @ own
        inner = -metric * np.outer(weights, weights)
        np.fill_diagonal(inner, weights * others)
        parts = rows @ vectors.T
        trace = np.sum(own) + np.einsum("ni,ni->n", parts @ inner, parts)
        rated: FloatArray = np.log(np.maximum(trace, 1e-300)) - np.log1p(np.square(parts) @ weights)
        return rated

    def measure(self, held: FloatArray, floor: float) -> tuple[float, FloatArray]:
        """Logarithm of the criterion of a set, and its derivative (r, r) by the information M."""
        values, vectors = _decompose(held, floor)
        inverse = (vectors.T / values) @ vectors
        if self.mode == "sum":
            trace = float(np.sum(inverse * self.metric))
            return float(np.log(trace)), -inverse @ self.metric @ inverse / trace
        value, slope = -float(np.sum(np.log(values))), -inverse
        if self.mode == "part":
            rest_values, rest_vectors = _decompose(held @ self.rest, floor)
            value += float(np.sum(np.log(rest_values)))
            slope = slope + self.rest @ ((rest_vectors.T / rest_values) @ rest_vectors) @ self.rest.T
        return value, slope


def _decompose(held: FloatArray, floor: float) -> tuple[FloatArray, FloatArray]:
    """Eigenvalues of heldᵀ held + floor and eigenvectors as rows; never fewer rows than columns are handed in."""
    parts = np.linalg.svd(held, full_matrices=False)
    values: FloatArray = np.square(parts.S) + floor
    return values, parts.Vh


def _log_det_after(held: FloatArray, rows: FloatArray, floor: float) -> FloatArray:
    values, vectors = _decompose(held, floor)
    parts = rows @ vectors.T
    result: FloatArray = np.sum(np.log(values)) + np.log1p(np.square(parts) @ (1.0 / values))
    return result


def build_gain(taken: Rows, candidates: Rows, criterion: Criterion) -> Gain:
    """The problem of choosing among candidates by a criterion.

    A criterion about quantities that neither taken readings nor candidates can see is judged by the part of them that
    is seen; where nothing of them is, by all that is seen.

    Raises:
        InputError: candidates that see nothing at all.
    """
    if np.max(np.abs(candidates.plain)) < _BLIND:
        raise InputError(
            "No reading along any of the candidates sees any of the free cells.",
            field="candidates",
            hint="Readings along a direction see the symmetric part only; give other candidates, or plan readings "
            "across.",
        )
    average = Rows(candidates.plain, candidates.whitened / np.sqrt(len(candidates)))
    together = taken.join(average)
    unseen = solve_least_squares(together.whitened, np.zeros(len(together)), unweighted=together.plain).unseen
    seen = find_complement(unseen)
    inside = together.whitened @ seen
    order = np.argsort(-np.max(np.abs(inside), axis=1), kind="stable")
    triangle, pivots = qr(inside[order], mode="r", pivoting=True)
    rank = seen.shape[1]
    transform = seen[:, pivots] @ np.linalg.solve(triangle[:rank, :rank], np.eye(rank))
    rows = candidates.whitened @ transform
    # Their scale is a constant factor of the criterion.
    wanted = criterion.functionals / np.max(np.abs(criterion.functionals))
    functionals = transform.T @ wanted
    mode: Literal["all", "sum", "part"] = "all"
    rest = np.zeros((rank, 0))
    if criterion.kind == "A":
        mode = "sum"
    elif criterion.kind != "D":
        touched = np.linalg.svd(functionals, full_matrices=False)
        size = float(np.linalg.norm(wanted)) * float(np.linalg.norm(transform))
        sizes = touched.S
        kept = sizes > RANK_TOLERANCE * size
        if np.any(kept):
            mode, rest = "part", find_complement(touched.U[:, kept])
    start = qr(np.vstack([taken.whitened @ transform, np.zeros((rank, rank))]), mode="r")[0][:rank]
    return Gain(transform, start, rows, mode, functionals @ functionals.T, rest, rows @ rest)
