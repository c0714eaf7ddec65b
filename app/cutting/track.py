"""Closed curves of directions, and where along them a quadratic form takes a value or is extreme.

The lines of a cone Σ l_i n_i² = 0 are those of v(φ) = (a cos φ, b sin φ, c) in its principal axes, each once; those of
a plane are v(φ) = (cos φ, sin φ, 0). Along either, vᵀBv is a trigonometric polynomial of degree two for every symmetric
B: a value is taken at roots of a quartic, and vᵀBv/vᵀv is stationary at roots of a sextic. Roots that lie close
together come out of these with few digits, so together with a grid they only part the curve, and bisection finds the
rest.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Final

import numpy as np
import numpy.typing as npt

from app.tensor.conic import Conic

FloatArray = npt.NDArray[np.float64]
ComplexArray = npt.NDArray[np.complex128]
IntArray = npt.NDArray[np.int64]
BoolArray = npt.NDArray[np.bool_]

_GRID_STEP: Final = 4
_HALVINGS: Final = 58
_WHOLE_TURN: Final = 2.0 * np.pi


@dataclass(frozen=True)
class Choice:
    """Which directions of a track answer.

    Attributes:
        whole: whether all do.
        points: shape (k, 3), unit vectors, the single ones otherwise.
    """

    whole: bool
    points: FloatArray


@dataclass(frozen=True)
class Track:
    """A closed curve of directions up to their sign: the unit vectors ± v(φ)/|v(φ)|.

    Attributes:
        columns: shape (3, 3); v(φ) = columns · (cos φ, sin φ, 1).
        conics: the same as curves on the sphere: two that are opposite, or one great circle.
    """

    columns: FloatArray
    conics: tuple[Conic, ...]

    @property
    def is_great_circle(self) -> bool:
        """Whether it lies in a plane; v(φ + π) is then −v(φ)."""
        return len(self.conics) == 1

    @property
    def normal(self) -> FloatArray:
        """The axis about which it runs, shape (3,): of a great circle its normal."""
        axis: FloatArray = self.conics[0].axes[2]
        return axis

    @property
    def roundness(self) -> float:
        """How far a cone is from parting into two planes, 0 to 1."""
        return float(self.conics[0].rests[1])

    @cached_property
    def grid(self) -> FloatArray:
        """Angles φ that crowd where the curve bends, shape (k,)."""
        conic = self.conics[0]
        angles = conic.angles[:-1:_GRID_STEP]
        if self.is_great_circle:
            return angles
        across, along = np.sqrt(conic.rests[1]) * np.sin(angles), np.sqrt(conic.rests[0]) * np.cos(angles)
        turned: FloatArray = np.arctan2(across, along) % _WHOLE_TURN
        return turned

    def find_points(self, angles: FloatArray) -> FloatArray:
        """Unit vectors (..., 3) at angles φ (...) in radians."""
        vectors = np.stack([np.cos(angles), np.sin(angles), np.ones_like(angles)], axis=-1) @ self.columns.T
        points: FloatArray = vectors / np.linalg.norm(vectors, axis=-1, keepdims=True)
        return points

    def choose(self, form: FloatArray, wanted: float, tolerance: float) -> Choice:
        """Directions where nᵀBn is within ``tolerance`` of ``wanted``, one for each stretch of such.

        Between neighbours among all angles looked at the form is monotonic, so where two neighbours are within the
        tolerance everything between them is. A zero that touches, of whatever order, is one stretch; its stationary
        angle stands for it.
        """
        angles, rows, turning = self._find_stationary(form[None])
        stationary = np.concatenate([angles[0, :6], turning[rows == 0]])
        zeros = _find_angles(self._expand(form - wanted * np.eye(3)))
        looked_at = _sort(np.concatenate([angles[0], turning, zeros]))
        crossings = _bisect(lambda x, _: self._measure(form, x) - wanted, looked_at[None])[1]
        everything = np.concatenate([stationary, crossings, looked_at]) % _WHOLE_TURN
        rank = np.repeat([0, 1, 2], [len(stationary), len(crossings), len(looked_at)])
        order = np.argsort(everything, kind="stable")
        everything, rank = everything[order], rank[order]
        misses = np.abs(self._measure(form, everything) - wanted)
        # A crossing is one however steep the form is there.
        fits = (misses <= tolerance) | (rank == 1)
        if np.all(misses <= tolerance):
            return Choice(True, np.zeros((0, 3)))
        chosen = [min(run, key=lambda index: (rank[index], misses[index])) for run in _list_runs(fits)]
        return Choice(False, self.find_points(everything[chosen]))

    def find_range(self, form: FloatArray) -> tuple[float, float]:
        """Lowest and highest nᵀBn along the track."""
        angles, _, turning = self._find_stationary(form[None])
        values = self._measure(form, np.concatenate([angles[0], turning]))
        return float(np.min(values)), float(np.max(values))

    def find_distances(self, directions: FloatArray) -> FloatArray:
        """Angles in degrees, 0 to 90, between the lines along unit vectors (k, 3) and the nearest line of the track."""
        outers = directions[:, :, None] * directions[:, None, :]
        angles, rows, turning = self._find_stationary(outers)
        points = self.find_points(angles[:, :6])
        distances: FloatArray = np.min(_measure_lines(points, directions[:, None, :]), axis=1)
        np.minimum.at(distances, rows, _measure_lines(self.find_points(turning), directions[rows]))
        return distances

    def _expand(self, forms: FloatArray) -> ComplexArray:
        """Fourier coefficients (..., 5) of vᵀBv, of e^{−2iφ} to e^{2iφ}, for symmetric B of shape (..., 3, 3)."""
        q = self.columns.T @ forms @ self.columns
        second = (q[..., 0, 0] - q[..., 1, 1]) / 4.0 - 0.5j * q[..., 0, 1]
        first = q[..., 0, 2] - 1j * q[..., 1, 2]
        mean = (q[..., 0, 0] + q[..., 1, 1]) / 2.0 + q[..., 2, 2] + 0j
        return np.stack([second.conj(), first.conj(), mean, first, second], axis=-1)

    def _find_stationary(self, forms: FloatArray) -> tuple[FloatArray, IntArray, FloatArray]:
        """Where nᵀBn is stationary, for symmetric B of shape (k, 3, 3).

        Returns:
            angles (k, m) that part the curve, the first six near the roots of the sextic; then rows (j,) and angles
            (j,) of the places where the form turns between two of them.
        """
        numerator, denominator = self._expand(forms), self._expand(np.eye(3))
        orders = np.arange(-2, 3)
        # N'D − ND'; its terms of order ±4 cancel.
        weights = 1j * (orders[:, None] - orders[None, :]) * denominator
        coefficients = np.zeros((len(forms), 7), dtype=np.complex128)
        for order in range(-3, 4):
            for one in range(max(-2, order - 2), min(2, order + 2) + 1):
                coefficients[:, order + 3] += numerator[:, one + 2] * weights[one + 2, order - one + 2]
        roots = _find_angles(coefficients)
        angles = np.concatenate([roots, np.broadcast_to(self.grid, (len(forms), len(self.grid)))], axis=1)
        rows, turning = _bisect(lambda x, row: self._measure_slopes(forms[row], x), _sort(angles))
        return angles, rows, turning

    def _measure(self, form: FloatArray, angles: FloatArray) -> FloatArray:
        points = self.find_points(angles)
        values: FloatArray = np.einsum("...a,ab,...b->...", points, form, points)
        return values

    def _measure_slopes(self, forms: FloatArray, angles: FloatArray) -> FloatArray:
        """The derivative of nᵀBn along the curve up to a positive factor, one form for each angle (..., m)."""
        points = self.find_points(angles)
        ahead = np.stack([-np.sin(angles), np.cos(angles)], axis=-1) @ self.columns[:, :2].T
        flux = np.einsum("...ab,...b->...a", forms, points)
        flux = flux - np.sum(flux * points, axis=-1, keepdims=True) * points
        slopes: FloatArray = np.sum(ahead * flux, axis=-1)
        return slopes


def build_track(conics: list[Conic]) -> Track:
    """The track of the two opposite curves of a cone, or of one great circle."""
    conic = conics[0]
    if conic.rests[0] == 0.0:
        scales = np.array([1.0, 1.0, 0.0])
    else:
        roots = np.sqrt(conic.rests)
        scales = np.array([conic.widths[0] * roots[1], conic.widths[1] * roots[0], roots[0] * roots[1]])
        scales = scales / np.max(scales)
    return Track(conic.axes.T * scales, tuple(conics))


def _measure_lines(points: FloatArray, directions: FloatArray) -> FloatArray:
    across = np.linalg.norm(np.cross(points, directions), axis=-1)
    angles: FloatArray = np.rad2deg(np.arctan2(across, np.abs(np.sum(points * directions, axis=-1))))
    return angles


def _sort(angles: FloatArray) -> FloatArray:
    ordered: FloatArray = np.sort(angles % _WHOLE_TURN, axis=-1)
    return ordered


def _find_angles(coefficients: ComplexArray) -> FloatArray:
    """Angles (..., 2d) of the roots of real trigonometric polynomials given by (..., 2d + 1) Fourier coefficients.

    A double zero may come out as a pair of roots off the unit circle, so the angles of all roots are given.
    """
    sizes = np.max(np.abs(coefficients), axis=-1, keepdims=True)
    scaled = coefficients / np.where(sizes > 0.0, sizes, 1.0)
    degree = coefficients.shape[-1] - 1
    lead = np.where(np.abs(scaled[..., -1]) > 1e-14, scaled[..., -1], 1e-14)
    companion = np.zeros((*scaled.shape[:-1], degree, degree), dtype=np.complex128)
    companion[..., 1:, :-1] = np.eye(degree - 1)
    companion[..., :, -1] = -scaled[..., :-1] / lead[..., None]
    return np.angle(np.linalg.eigvals(companion))


def _bisect(
    function: Callable[[FloatArray, IntArray | slice], FloatArray], angles: FloatArray
) -> tuple[IntArray, FloatArray]:
    """Where functions change sign between neighbours in rings of sorted angles (k, m): rows (j,) and angles (j,).

    ``function`` takes angles and the rows to which they belong.
    """
    rows_of_all = np.broadcast_to(np.arange(len(angles))[:, None], angles.shape)
    # An exact zero counts as positive, so a change of sign at an angle of the ring itself is seen too.
    negative = function(angles, rows_of_all) < 0.0
    rows, columns = np.nonzero(negative != np.roll(negative, -1, axis=1))
    low = angles[rows, columns]
    following = (columns + 1) % angles.shape[1]
    high = angles[rows, following] + np.where(following == 0, _WHOLE_TURN, 0.0)
    rising = negative[rows, columns]
    for _ in range(_HALVINGS):
        middle = (low + high) / 2.0
        before = (function(middle, rows) < 0.0) == rising
        low, high = np.where(before, middle, low), np.where(before, high, middle)
    return rows, (low + high) / 2.0


def _list_runs(fits: BoolArray) -> list[list[int]]:
    """Unbroken stretches of true entries in a ring; the whole ring where all are true."""
    start = int(np.argmin(fits))
    runs: list[list[int]] = []
    previous = False
    for step in range(len(fits)):
        index = (start + step) % len(fits)
        if fits[index]:
            if previous:
                runs[-1].append(index)
            else:
                runs.append([index])
        previous = bool(fits[index])
    return runs
