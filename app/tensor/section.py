"""What a tensor does within a plane: the polar curve of its value there, and the Mohr circle of that plane.

With e1 and e2 = ν × e1 in the plane of normal ν, n(φ) = e1 cos φ + e2 sin φ, m = ν × n and b_ij = e_iᵀ A e_j:

    nᵀAn = c + p cos 2φ + q sin 2φ,    c = (b11 + b22)/2,  p = (b11 − b22)/2,  q = (b12 + b21)/2
    mᵀAn = w + q cos 2φ − p sin 2φ,    w = (b21 − b12)/2

so the point (nᵀAn, mᵀAn) runs on a circle of centre (c, w) and radius √(p² + q²), by twice the angle of n and the other
way round. For a symmetric tensor w is zero (Mohr's construction: J. F. Nye, Physical Properties of Crystals, ch. II;
from memory). For a general one the antisymmetric part x ↦ a × x adds mᵀ(a × n) = a·(n × m) = a·ν to every
transverse part, nothing to any value: the whole circle is shifted by the component of the axial vector a along ν.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.special import chdtri

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import DISTINCT_LEVEL, EQUAL_TOLERANCE

FloatArray = npt.NDArray[np.float64]

SMALLEST_IN_PLANE: Final = 1e-6
"""A direction whose part in the plane is shorter than this has no angle there."""


@dataclass(frozen=True)
class SectionSigma:
    """Standard deviations of a section's numbers, to first order; ``turn`` in radians, infinite where even."""

    mean: float
    radius: float
    shift: float
    turn: float
    largest: float
    smallest: float


@dataclass(frozen=True, eq=False)
class Section:
    """A tensor within a plane.

    Attributes:
        estimate: of the whole tensor; every direction here is in its frame.
        normal, first, second: unit vectors (3,): ν, where angles begin, and where they are 90°.
        mean, radius, shift: c, √(p² + q²) and w of the Mohr circle.
        turn: angle in radians, −π/2 < φ ≤ π/2, of the largest value in the plane; 0 where all are equal.
        even: whether the plane has no largest value: equal within rounding, or as far as the data can tell.
        sigma: None without covariance.
    """

    estimate: Estimate
    normal: FloatArray
    first: FloatArray
    second: FloatArray
    mean: float
    radius: float
    shift: float
    turn: float
    even: bool
    sigma: SectionSigma | None

    @property
    def largest(self) -> float:
        """The largest value in the plane."""
        return self.mean + self.radius

    @property
    def smallest(self) -> float:
        """The smallest value in the plane, across the largest."""
        return self.mean - self.radius

    def directions(self, angles: npt.ArrayLike) -> FloatArray:
        """Unit vectors n (..., 3) at angles (...), radians."""
        given = np.asarray(angles, dtype=np.float64)[..., None]
        turned: FloatArray = np.cos(given) * self.first + np.sin(given) * self.second
        return turned

    def values(self, angles: npt.ArrayLike) -> FloatArray:
        """nᵀAn, shape (...)."""
        given = np.asarray(angles, dtype=np.float64)
        return np.asarray(self.mean + self.radius * np.cos(2.0 * (given - self.turn)))

    def transverse(self, angles: npt.ArrayLike) -> FloatArray:
        """mᵀAn, shape (...): the effect in the plane across a cause along n, counted positive 90° ahead of n."""
        given = np.asarray(angles, dtype=np.float64)
        return np.asarray(self.shift - self.radius * np.sin(2.0 * (given - self.turn)))

    def value_sigma(self, angles: npt.ArrayLike) -> FloatArray | None:
        """σ of nᵀAn, shape (...)."""
        return self.estimate.value_sigma(self.directions(angles))

    def transverse_sigma(self, angles: npt.ArrayLike) -> FloatArray | None:
        """σ of mᵀAn, shape (...)."""
        causes = self.directions(angles)
        return self.estimate.value_sigma(causes, np.cross(self.normal, causes))

    def measure_angle(self, vector: FloatArray) -> float | None:
        """Angle in radians, −π < φ ≤ π, of a vector's (3,) part in the plane; None for one along the normal."""
        right, up = float(vector @ self.first), float(vector @ self.second)
        if np.hypot(right, up) <= SMALLEST_IN_PLANE * float(np.linalg.norm(vector)):
            return None
        return float(np.arctan2(up, right))

    def find_zeros(self) -> list[float]:
        """Angles in radians, 0 ≤ φ < π, at which the value is zero: two, one or none.

        None too where the value is zero everywhere.
        """
        if self.radius <= 0.0 or abs(self.mean) > self.radius:
            return []
        half = float(np.arccos(np.clip(-self.mean / self.radius, -1.0, 1.0))) / 2.0
        angles = {round((self.turn + sense * half) % np.pi, 12) for sense in (1.0, -1.0)}
        return sorted(angles)


def cut_tensor(estimate: Estimate, normal: FloatArray, zero: FloatArray) -> Section:
    """The section of a tensor by a plane.

    Args:
        estimate: in the frame of the directions.
        normal: unit vector (3,), ν.
        zero: vector (3,) from whose part in the plane angles count, right-handed about ν.

    Raises:
        InputError: ``zero`` has no part in the plane (field "zero").
    """
    inside = zero - normal * float(zero @ normal)
    size = float(np.linalg.norm(inside))
    if size <= SMALLEST_IN_PLANE * float(np.linalg.norm(zero)):
        raise InputError(
            "That direction stands on the plane, so no angle can be counted from it.",
            field="zero",
            hint="Name a direction that lies in the plane or leans toward it.",
        )
    first = inside / size
    second = np.cross(normal, first)
    matrix = estimate.matrix
    across = np.array([first, second])
    # Scaled, so that cells of any size have squares.
    scale = float(np.max(np.abs(matrix))) or 1.0
    block = across @ (matrix / scale) @ across.T
    p, q = (block[0, 0] - block[1, 1]) / 2.0, (block[0, 1] + block[1, 0]) / 2.0
    radius = float(np.hypot(p, q))
    even = radius <= EQUAL_TOLERANCE
    turn = 0.0 if even else float(np.arctan2(q, p)) / 2.0
    mean, shift = float(block[0, 0] + block[1, 1]) / 2.0, float(block[1, 0] - block[0, 1]) / 2.0
    if even:
        radius = 0.0
    sigma = None
    if estimate.covariance is not None:
        sigma, distinct = _measure_sigma(estimate, first, second, turn, (p * scale, q * scale), radius * scale)
        even = even or not distinct
    return Section(
        estimate, normal, first, second, mean * scale, radius * scale, shift * scale, turn, bool(even), sigma
    )


def _outer(effect: FloatArray, cause: FloatArray) -> FloatArray:
    """Derivative of effectᵀ A cause by the nine cells in row order."""
    return np.outer(effect, cause).ravel()


def _measure_sigma(
    estimate: Estimate, first: FloatArray, second: FloatArray, turn: float, parts: tuple[float, float], radius: float
) -> tuple[SectionSigma, bool]:
    """The standard deviations, and whether the data can tell the two values apart (χ² with two degrees, 95 %)."""
    covariance = estimate.covariance
    assert covariance is not None
    along = np.cos(turn) * first + np.sin(turn) * second
    across = -np.sin(turn) * first + np.cos(turn) * second
    high, low = _outer(along, along), _outer(across, across)
    shear = (_outer(across, along) + _outer(along, across)) / 2.0
    rows = np.array([(high + low) / 2.0, (high - low) / 2.0, (_outer(second, first) - _outer(first, second)) / 2.0])
    rows = np.concatenate([rows, [shear, high, low]])
    spreads = estimate.propagate(rows)
    assert spreads is not None
    mean, size, shift, turned, largest, smallest = spreads.tolist()
    derivatives = np.array(
        [
            (_outer(first, first) - _outer(second, second)) / 2.0,
            (_outer(first, second) + _outer(second, first)) / 2.0,
        ]
    )
    spread = derivatives @ covariance @ derivatives.T
    distinct = _exclude_zero(np.array(parts), spread)
    return SectionSigma(
        mean, size, shift, turned / (2.0 * radius) if radius > 0 else float("inf"), largest, smallest
    ), distinct


def _exclude_zero(parts: FloatArray, spread: FloatArray) -> bool:
    """Whether the numbers (2,) with covariance (2, 2) differ from zero; one without spread is known exactly."""
    scale = float(np.max(np.abs(parts)))
    if scale == 0.0:
        return False
    sizes, axes = np.linalg.eigh(spread / scale**2)
    seen = axes.T @ (parts / scale)
    free = sizes > 1e-24
    if np.any(np.abs(seen[~free]) > EQUAL_TOLERANCE):
        return True
    count = int(np.sum(free))
    if count == 0:
        return False
    return bool(np.sum(np.square(seen[free]) / sizes[free]) > chdtri(count, 1.0 - DISTINCT_LEVEL))
