"""What a miscut does to a value: nominal, slope per degree, exact extremes over a cone, the largest tilt allowed.

A part that is meant to lie along n may lie anywhere within a half-angle of it. With B = A − (nᵀAn) 1 and a tilt by θ
toward the unit vector e across n, the value changes by exactly

    Δ = 2 sin θ cos θ eᵀBn + sin²θ eᵀBe,

which keeps its digits for tilts of any size. Over a cap the extremes of a quadratic form lie at a principal axis inside
it or on its rim, where Δ is a trigonometric polynomial of degree two, stationary at the roots of a quartic on the unit
circle. As n and −n have the same value, a cap of 90° holds every direction. Only the symmetric part of A counts.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.region_shapes import find_plane_axes

FloatArray = npt.NDArray[np.float64]
Sense = Literal[1, -1]

WHOLE: Final = 90.0
"""The half-angle in degrees of a cap that holds every direction up to its sign."""

ROUNDING: Final = 1e-13
"""Principal values that differ by less than this part of the largest are those of an isotropic tensor."""


@dataclass(frozen=True)
class Miscut:
    """The value along a direction and what tilts of up to a half-angle do to it.

    Attributes:
        nominal: nᵀAn along the direction meant.
        lowest, highest: the extremes of nᵀAn over the cap.
        slope: the largest first-order change of the value per degree of tilt, not negative.
        half_angle: of the cap, degrees, 0 to 90.
        lowest_at, highest_at: unit vectors (3,) in the estimate's frame where the extremes are taken.
        steepest: unit vector (3,) across the direction, toward which the value grows fastest; None where the slope is
            zero within rounding.
        sigma: standard deviation of the nominal value; None without covariance.
    """

    nominal: float
    lowest: float
    highest: float
    slope: float
    half_angle: float
    lowest_at: FloatArray
    highest_at: FloatArray
    steepest: FloatArray | None
    sigma: float | None


def measure_miscut(estimate: Estimate, direction: FloatArray, half_angle: float) -> Miscut:
    """Exact extremes over the cap of ``half_angle`` degrees about a unit vector (3,) in the estimate's frame.

    Raises:
        InputError: the half-angle is not between 0 and 90.
    """
    if not 0.0 <= half_angle <= WHOLE:
        raise InputError(
            f"A half-angle is between 0 and {WHOLE:g} degrees.",
            field="half_angle",
            hint="A direction and its opposite have the same value, so 90 holds all directions.",
        )
    return _Tilt(estimate, direction).report(half_angle)


def find_allowed_miscut(estimate: Estimate, direction: FloatArray, tolerance: float) -> Miscut:
    """The largest cap about a unit vector (3,) in which the value stays within nominal ± ``tolerance``.

    The half-angle is 90 where all directions do, and 0 for a tolerance of 0 unless the tensor is isotropic.

    Raises:
        InputError: the tolerance is negative or not finite.
    """
    if not 0.0 <= tolerance < np.inf:
        raise InputError(
            "A tolerance is a finite number that is not negative.",
            field="tolerance",
            hint="It is absolute, in the unit of the tensor: the value may be off by this much either way.",
        )
    tilt = _Tilt(estimate, direction)
    return tilt.report(min(tilt.find_reach(tolerance, 1), tilt.find_reach(tolerance, -1)))


def compute_slopes(matrix: FloatArray, directions: FloatArray) -> FloatArray:
    """The largest first-order change of nᵀAn per degree, shape (...), at unit vectors (..., 3): 2 |A n − (nᵀAn) n|."""
    scale = float(np.max(np.abs(matrix))) or 1.0
    symmetric = (matrix / scale + matrix.T / scale) / 2.0
    flux = directions @ symmetric
    across = flux - np.sum(flux * directions, axis=-1, keepdims=True) * directions
    slopes: FloatArray = 2.0 * np.deg2rad(np.linalg.norm(across, axis=-1)) * scale
    return slopes


class _Tilt:
    """The change of the value by tilts from one direction, in axes across it that diagonalise it there.

    Everything inside is in units of ``scale``.
    """

    def __init__(self, estimate: Estimate, direction: FloatArray) -> None:
        matrix = estimate.matrix
        self.scale = float(np.max(np.abs(matrix))) or 1.0
        symmetric = (matrix / self.scale + matrix.T / self.scale) / 2.0
        self.direction = direction
        self.estimate = estimate
        self.nominal = float(direction @ symmetric @ direction)
        values, vectors = np.linalg.eigh(symmetric)
        self.isotropic = bool(values[2] - values[0] <= ROUNDING * np.max(np.abs(values)))
        self.across = np.array(find_plane_axes(symmetric, direction))
        excess = symmetric - self.nominal * np.eye(3)
        self.gradient = np.zeros(2) if self.isotropic else self.across @ excess @ direction
        curvature = np.zeros(2) if self.isotropic else np.einsum("ia,ab,ib->i", self.across, excess, self.across)
        self.curvature = curvature
        # Each principal axis on the direction's side: its tilt, and toward where.
        axes = vectors.T * np.where(vectors.T @ direction < 0.0, -1.0, 1.0)[:, None]
        parts = axes @ self.across.T
        self.axis_tilts = np.arctan2(np.linalg.norm(parts, axis=1), axes @ direction)
        self.axis_azimuths = np.arctan2(parts[:, 1], parts[:, 0])

    def change(self, tilt: float | FloatArray, azimuths: FloatArray) -> FloatArray:
        """Δ of tilts in radians toward azimuths in radians."""
        sine, cosine = np.sin(tilt), np.cos(tilt)
        toward = np.stack([np.cos(azimuths), np.sin(azimuths)], axis=-1)
        changed: FloatArray = sine * (2.0 * cosine * (toward @ self.gradient) + sine * (toward**2 @ self.curvature))
        return changed

    def find_extreme(self, tilt: float, sense: Sense) -> tuple[float, float, float]:
        """The highest (sense 1) or lowest (−1) Δ over the cap of ``tilt`` radians, with its own tilt and azimuth."""
        inside = self.axis_tilts <= tilt
        azimuths = np.concatenate([self._find_stationary(tilt), self.axis_azimuths[inside], [0.0]])
        tilts = np.full(len(azimuths), tilt)
        tilts[len(tilts) - 1 - int(np.sum(inside)) : -1] = self.axis_tilts[inside]
        tilts[-1] = 0.0
        changes = sense * self.change(tilts, azimuths)
        best = int(np.argmax(changes))
        return float(sense * changes[best]), float(tilts[best]), float(azimuths[best])

    def _find_stationary(self, tilt: float) -> FloatArray:
        """Azimuths on the rim at which Δ = p cos φ + q sin φ + r cos 2φ + … is stationary, or nearly so."""
        p, q = 2.0 * np.cos(tilt) * self.gradient
        r = np.sin(tilt) * (self.curvature[0] - self.curvature[1]) / 2.0
        linear = complex(p, -q)
        if abs(r) <= 1e-17 * abs(linear):
            r = 0.0
        if r == 0.0 and linear == 0.0:
            return np.zeros(1)
        # With z = e^{iφ} the derivative vanishes where 2r z⁴ + w z³ − w* z − 2r = 0, w = p − iq. At a root of any
        # multiplicity the error of Δ is far below that of the root, so roots a little off the circle serve as well.
        roots = np.roots([2.0 * r, linear, 0.0, -linear.conjugate(), -2.0 * r])
        azimuths: FloatArray = np.arctan2(roots.imag, roots.real)
        for _ in range(2):
            slopes = -p * np.sin(azimuths) + q * np.cos(azimuths) - 2.0 * r * np.sin(2.0 * azimuths)
            bends = -p * np.cos(azimuths) - q * np.sin(azimuths) - 4.0 * r * np.cos(2.0 * azimuths)
            steps = np.where(np.abs(bends) > np.abs(slopes), slopes / np.where(bends == 0.0, 1.0, bends), 0.0)
            azimuths = azimuths - np.where(np.abs(steps) < 1e-3, steps, 0.0)
        return azimuths

    def find_reach(self, tolerance: float, sense: Sense) -> float:
        """The largest half-angle in degrees over which Δ does not pass the tolerance on one side."""
        allowed = tolerance / self.scale
        if self.isotropic:
            return WHOLE
        if allowed == 0.0:
            return 0.0
        whole = sense * self.find_extreme(np.pi / 2.0, sense)[0]
        # A tolerance that reaches the extreme value itself reaches all directions, rounding apart.
        if whole <= allowed * (1.0 + 1e-12) + 1e-16:
            return WHOLE

        def excess(tilt: float) -> float:
            return sense * self.find_extreme(tilt, sense)[0] - allowed

        return float(np.rad2deg(brentq(excess, 0.0, np.pi / 2.0, xtol=1e-18, rtol=1e-15, maxiter=400)))

    def report(self, half_angle: float) -> Miscut:
        """Everything about the cap of a half-angle in degrees."""
        tilt = float(np.deg2rad(half_angle))
        low, low_tilt, low_azimuth = self.find_extreme(tilt, -1)
        high, high_tilt, high_azimuth = self.find_extreme(tilt, 1)
        slope = 2.0 * float(np.linalg.norm(self.gradient))
        steepest = None
        if slope > ROUNDING:
            steepest = self.gradient @ self.across / (slope / 2.0)
        sigma = self.estimate.value_sigma(self.direction)
        return Miscut(
            nominal=self.nominal * self.scale,
            lowest=(self.nominal + low) * self.scale,
            highest=(self.nominal + high) * self.scale,
            slope=float(np.deg2rad(slope)) * self.scale,
            half_angle=half_angle,
            lowest_at=self._point(low_tilt, low_azimuth),
            highest_at=self._point(high_tilt, high_azimuth),
            steepest=steepest,
            sigma=None if sigma is None else float(sigma),
        )

    def _point(self, tilt: float, azimuth: float) -> FloatArray:
        toward = np.array([np.cos(azimuth), np.sin(azimuth)]) @ self.across
        point: FloatArray = np.cos(tilt) * self.direction + np.sin(tilt) * toward
        return point / np.linalg.norm(point)
