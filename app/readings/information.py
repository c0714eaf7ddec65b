"""What readings will tell before they are taken: rows of the design, their information, and the σ to expect.

The information of a set is Xᵀ V⁻¹ X on the orthonormal (Frobenius) basis of the allowed tensors, with X and V at a
given tensor exactly as the fit has them (``prediction.py``, ``whitening.py``). A planned reading is along its own
bar, so its row joins the set independently of all others. All whitened rows here are in units of the campaign's
sigma, so that neither large nor small units leave the range of numbers.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.linalg import qr

from app.crystal.crystal import Crystal
from app.errors import HalfturnError, InputError
from app.readings.prediction import linear_rows, predict
from app.readings.reading import READING_KINDS, Reading
from app.readings.reading_set import MAX_DIRECTION_SIGMA, ReadingSet, resolve_readings
from app.readings.solver import RANK_TOLERANCE, solve_least_squares
from app.readings.whitening import build_whitening
from app.tensor.form import Form
from app.tensor.kind import Kind
from app.tensor.pose import Pose

FloatArray = npt.NDArray[np.float64]

LARGEST_SIGMA: Final = 1e100
"""In the unit of the tensor, and beside the campaign's sigma: beyond, squares leave the range of numbers."""

_FEW_ROWS: Final = 200


@dataclass(frozen=True)
class Rows:
    """N readings as rows over the k coordinates in the orthonormal basis.

    Attributes:
        plain: shape (N, k), derivatives of the predictions.
        whitened: shape (N, k), the same after whitening by V, times the campaign's sigma.
    """

    plain: FloatArray
    whitened: FloatArray

    def __len__(self) -> int:
        return len(self.plain)

    def join(self, other: Rows) -> Rows:
        """These rows and then others that are independent of them."""
        return Rows(np.vstack([self.plain, other.plain]), np.vstack([self.whitened, other.whitened]))

    def pick(self, positions: Sequence[int] | npt.NDArray[np.int64]) -> Rows:
        """Some of the rows, in the order of the positions, each as often as it is named."""
        chosen = np.asarray(positions, dtype=np.int64)
        return Rows(self.plain[chosen], self.whitened[chosen])

    def digest(self) -> Rows:
        """At most as many rows as there are coordinates, or a few, with the same information."""
        if len(self) <= max(_FEW_ROWS, self.plain.shape[1]):
            return self
        return Rows(_reduce_rows(self.plain), _reduce_rows(self.whitened))


@dataclass(frozen=True)
class Outlook:
    """What a fit of a set of readings would know.

    Attributes:
        determined: whether every free cell is determined, by the fit's own rule.
        rank: number of combinations that are seen.
        condition: of the whitened design; None where undetermined.
        log_det: natural logarithm of the determinant of the information; None where undetermined.
        covariance: shape (k, k), of the coordinates in the orthonormal basis, in units of sigma², on the seen space.
        unseen: shape (k, d), orthonormal columns that no reading sees.
        sigma: the campaign's, the unit of ``covariance``.
        sigma_matrix: shape (3, 3), standard deviations of the nine cells; NaN where a cell is not determined.
    """

    determined: bool
    rank: int
    condition: float | None
    log_det: float | None
    covariance: FloatArray
    unseen: FloatArray
    sigma: float
    sigma_matrix: FloatArray

    def sees(self, functionals: FloatArray) -> npt.NDArray[np.bool_]:
        """Which of the quantities with derivatives (k, m) by the coordinates are determined, shape (m,)."""
        largest = np.max(np.abs(functionals), axis=0)
        scaled = functionals / np.where(largest > 0.0, largest, 1.0)
        hidden = np.linalg.norm(self.unseen.T @ scaled, axis=0)
        seen: npt.NDArray[np.bool_] = hidden <= RANK_TOLERANCE * np.linalg.norm(scaled, axis=0)
        return seen


@contextmanager
def renamed(old: str, new: str) -> Iterator[None]:
    """Give ``new`` the place of ``old`` at the head of the field of any error that leaves the block."""
    try:
        yield
    except HalfturnError as error:
        if error.field is not None and error.field.startswith(old):
            error.field = new + error.field[len(old) :]
        raise


def resolve_taken(
    crystal: Crystal,
    kind: Kind,
    taken: Sequence[Reading],
    sigma: float,
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose,
) -> ReadingSet:
    """Readings that are taken (values may be absent) as arrays; where none carries sigma, all have the campaign's.

    Raises:
        InputError: as ``resolve_readings``, at ``taken[…]``.
    """
    with renamed("readings", "taken"):
        resolved = resolve_readings(crystal, kind, taken, batches=batches, pose=pose, values_required=False)
    if resolved.sigma is not None:
        return resolved
    return replace(resolved, sigma=np.full(len(resolved), sigma))


def needs_values(readings: ReadingSet) -> str | None:
    """Why the tensor's values are needed to foretell these readings, as a clause; None where they are not."""
    if readings.has("rod", "sheet"):
        return "the readings of rods and sheets are not linear"
    if np.any(readings.turn_sigma > 0):
        return "what a tilt does to a reading depends on them"
    used = readings.batches[readings.batches >= 0]
    if np.any(readings.batch_sigma[used] > 0):
        return "a calibration error is a part of the value"
    return None


def check_sigma(sigma: float, direction_sigma: float) -> None:
    """Refuse standard deviations of planned readings that mean nothing.

    Raises:
        InputError: at ``sigma`` or ``direction_sigma``.
    """
    if not 1.0 / LARGEST_SIGMA <= sigma <= LARGEST_SIGMA:
        raise InputError(
            f"The standard deviation of the next readings is {sigma:g}.",
            field="sigma",
            hint="Give what one reading is good to: a positive number in the unit of the tensor.",
        )
    if not 0.0 <= direction_sigma <= MAX_DIRECTION_SIGMA:
        raise InputError(
            f"The standard deviation of the direction is {direction_sigma:g}°.",
            field="direction_sigma",
            hint=f"It lies between 0 and {MAX_DIRECTION_SIGMA:g}°.",
        )


def build_rows(form: Form, readings: ReadingSet, matrix: FloatArray, sigma: float) -> Rows:
    """Rows of readings at a tensor A (3, 3), with the fit's V.

    Raises:
        InputError: rods or sheets of a tensor that is not positive definite, or numbers out of range.
    """
    basis = form.orthonormal.reshape(form.count, 9)
    prediction = predict(readings, matrix, linear_rows(readings))
    # What overflows is refused just below, with a sentence.
    with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
        whitening = build_whitening(readings, matrix, prediction.values)
        plain = prediction.rows @ basis.T
        whitened = whitening.whiten(plain) * sigma
        ratios = np.sqrt(whitening.variances) / sigma
        fine = bool(np.all(np.isfinite(whitened)) and np.all((ratios > 1.0 / LARGEST_SIGMA) & (ratios < LARGEST_SIGMA)))
    if not fine:
        raise InputError(
            "The readings and their standard deviations leave the range of numbers when they are weighed.",
            field="sigma",
            hint="Look for a sigma or a cell of the tensor that is extremely large or small.",
        )
    return Rows(plain, whitened)


def build_planned_rows(
    form: Form, vectors: FloatArray, matrix: FloatArray, sigma: float, direction_sigma: float
) -> Rows:
    """Rows of one reading ``along`` each unit vector (n, 3), each on a bar of its own.

    The variance of each is sigma² + s² |J|² + 2 s⁴ tr(B B), with s the ``direction_sigma`` (degrees) in radians, and
    the row carries the mean shift, as the fit has them.
    """
    count = len(vectors)
    planned = ReadingSet(
        kinds=np.full(count, READING_KINDS.index("along"), dtype=np.int64),
        first=vectors,
        second=np.zeros((count, 3)),
        values=np.full(count, np.nan),
        sigma=np.full(count, sigma),
        turn_sigma=np.full(count, np.deg2rad(direction_sigma)),
        bars=np.arange(count, dtype=np.int64),
        batches=np.full(count, -1, dtype=np.int64),
        batch_sigma=np.zeros(0),
    )
    return build_rows(form, planned, matrix, sigma)


def measure_outlook(form: Form, rows: Rows, sigma: float) -> Outlook:
    """What a fit of these readings would know of the tensor."""
    nothing = np.zeros(len(rows))
    solution = solve_least_squares(rows.whitened, nothing, unweighted=rows.plain)
    cells = form.orthonormal.reshape(form.count, 9)
    determined = solution.rank == form.count
    covariance = solution.covariance
    if not determined and solution.rank:
        # Solved on the seen space alone, so that its accuracy does not hang on what is unseen.
        seen = find_complement(solution.unseen)
        part = solve_least_squares(rows.whitened @ seen, nothing, unweighted=rows.plain @ seen)
        covariance = seen @ part.covariance @ seen.T
    variances = np.einsum("ac,ab,bc->c", cells, covariance, cells)
    outlook = Outlook(
        determined=determined,
        rank=solution.rank,
        condition=solution.condition if determined else None,
        log_det=_compute_log_det(rows.whitened) - 2.0 * form.count * float(np.log(sigma)) if determined else None,
        covariance=covariance,
        unseen=solution.unseen,
        sigma=sigma,
        sigma_matrix=np.empty((3, 3)),
    )
    deviations = sigma * np.sqrt(np.maximum(variances, 0.0))
    known = outlook.sees(cells) | (np.linalg.norm(cells, axis=0) < 1e-9)
    return replace(outlook, sigma_matrix=np.where(known, deviations, np.nan).reshape(3, 3))


def find_complement(columns: FloatArray) -> FloatArray:
    """Orthonormal columns (k, k − d) that complete orthonormal columns (k, d)."""
    complement: FloatArray = np.linalg.svd(columns, full_matrices=True).U[:, columns.shape[1] :]
    return complement


def _reduce_rows(rows: FloatArray) -> FloatArray:
    """R (k, k) with RᵀR = rowsᵀ rows; rows in descending order and pivoting keep small ones exact beside large ones."""
    order = np.argsort(-np.max(np.abs(rows), axis=1), kind="stable")
    triangle, pivots = qr(rows[order], mode="r", pivoting=True)
    reduced = np.zeros((rows.shape[1], rows.shape[1]))
    reduced[:, pivots] = triangle[: rows.shape[1]]
    return reduced


def _compute_log_det(whitened: FloatArray) -> float:
    """Logarithm of det(XᵀX) from the sizes of a triangular factor, whose columns are found in descending order."""
    order = np.argsort(-np.max(np.abs(whitened), axis=1), kind="stable")
    triangle, _ = qr(whitened[order], mode="r", pivoting=True)
    return 2.0 * float(np.sum(np.log(np.abs(np.diag(triangle)))))
