"""All directions along which a tensor has one value: nᵀ(A − t)n = 0, a cone and what it degenerates to.

With λ1 ≥ λ2 ≥ λ3 the directions of a value t are: none where t is out of their range; the axis of λ1 or λ3 alone where
t equals it, or the whole plane where it is double; two planes that share the axis of λ2 where t equals that, the
circular sections (J. F. Nye, Physical Properties of Crystals, ch. I, has the quadric; Mohr's circles give the same);
else a cone about the axis of the odd sign among d = λ − t, of half-angle atan √(−d_odd/d_j) toward another axis j.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.special import elliprf, elliprj

from app.cutting.miscut import ROUNDING
from app.cutting.track import Track, build_track
from app.tensor.conic import Conic, find_conics
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal

FloatArray = npt.NDArray[np.float64]
Extreme = Literal["max", "min"]

EQUAL: Final = 1e-9
"""A value closer than this part of the largest λ − t to a principal value is equal to it."""

SAME_LINE: Final = 1e-7
"""Directions closer than this (radians) are one."""


@dataclass(frozen=True)
class Locus:
    """A set of directions, each with its opposite.

    Attributes:
        tracks: closed curves.
        lines: shape (k, 3), unit vectors along the isolated ones, one of each pair of opposites.
        everywhere: whether it is all directions.
    """

    tracks: tuple[Track, ...]
    lines: FloatArray
    everywhere: bool = False

    @property
    def is_empty(self) -> bool:
        """Whether no direction is in it."""
        return not (self.tracks or len(self.lines) or self.everywhere)

    @property
    def conics(self) -> list[Conic]:
        """All closed curves on the sphere."""
        return [conic for track in self.tracks for conic in track.conics]


NOWHERE: Final = Locus((), np.zeros((0, 3)))
EVERYWHERE: Final = Locus((), np.zeros((0, 3)), True)


@dataclass(frozen=True)
class Cone:
    """How a cone of directions opens.

    Attributes:
        axis: shape (3,), unit vector.
        toward: shape (2, 3), the two principal axes across it, as rows.
        half_angles: shape (2,), from the axis toward each of these, degrees.
    """

    axis: FloatArray
    toward: FloatArray
    half_angles: FloatArray


@dataclass(frozen=True)
class Level:
    """The directions of one value.

    Attributes:
        locus: these directions.
        form: shape (3, 3), symmetric, with nᵀ(form)n = 0 there; its largest principal value is 1 or −1, or all are 0.
        differences: shape (3,), principal values of the form, descending.
        axes: shape (3, 3), its principal axes as rows, right-handed.
        fraction_below: the part of the sphere where nᵀAn is below the value.
    """

    locus: Locus
    form: FloatArray
    differences: FloatArray
    axes: FloatArray
    fraction_below: float

    @property
    def cone(self) -> Cone | None:
        """How the cone, or the two planes, of a value open; None where there is neither."""
        tracks = self.locus.tracks
        if len(tracks) == 2:
            # The planes share the middle axis, and open about that of the lowest value.
            opening = float(np.rad2deg(np.arctan(np.sqrt(-self.differences[2] / self.differences[0]))))
            return Cone(self.axes[2], self.axes[:2], np.array([opening, 90.0]))
        if not tracks or tracks[0].is_great_circle:
            return None
        conic = tracks[0].conics[0]
        return Cone(conic.axes[2], conic.axes[:2], np.rad2deg(np.arctan2(conic.widths, np.sqrt(conic.rests))))


def split_symmetric(matrix: FloatArray) -> tuple[float, FloatArray, float]:
    """Scale, mean and deviator in units of the scale, of the symmetric part of A (3, 3).

    Returns:
        the scale (A's largest cell, or 1), the deviator (3, 3), zero where A is isotropic within rounding, and the mean
        of the principal values.
    """
    scale = float(np.max(np.abs(matrix))) or 1.0
    symmetric = (matrix / scale + matrix.T / scale) / 2.0
    mean = float(np.trace(symmetric)) / 3.0
    deviator = symmetric - mean * np.eye(3)
    if np.max(np.abs(deviator)) <= ROUNDING * abs(mean):
        deviator = np.zeros((3, 3))
    return scale, deviator, mean


def find_range(matrix: FloatArray) -> tuple[float, float]:
    """The lowest and the highest value of nᵀAn over all directions."""
    scale, deviator, mean = split_symmetric(matrix)
    values = np.linalg.eigvalsh(deviator) + mean
    return float(values[0]) * scale, float(values[2]) * scale


def find_level(matrix: FloatArray, value: float) -> Level:
    """All directions along which the tensor of shape (3, 3) has a value."""
    scale, deviator, mean = split_symmetric(matrix)
    values, axes = _find_axes(deviator)
    # A value far out of range is out of range by any measure; this keeps its quotient finite.
    size = max(scale, abs(value) * 1e-6)
    differences = values * (scale / size) + (mean * (scale / size) - value / size)
    rounding = (4e-16 if np.any(deviator) else ROUNDING) * max(abs(mean) * (scale / size), abs(value) / size)
    largest = float(np.max(np.abs(differences)))
    differences = np.where(np.abs(differences) <= max(EQUAL * largest, rounding), 0.0, differences)
    return _build_level(differences, axes)


def find_extreme(matrix: FloatArray, extreme: Extreme) -> Level:
    """All directions along which the tensor of shape (3, 3) has its largest or smallest value."""
    _, deviator, _ = split_symmetric(matrix)
    values, axes = _find_axes(deviator)
    return _build_level(values - values[0 if extreme == "max" else 2], axes)


def _find_axes(deviator: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Principal values, descending, equal ones exactly so, and axes."""
    principal = find_principal(Estimate(deviator, None, ""))
    values, arbitrary = principal.values.copy(), np.array(principal.arbitrary)
    values[arbitrary] = np.mean(values[arbitrary]) if np.any(arbitrary) else 0.0
    return values, principal.axes


def _build_level(differences: FloatArray, axes: FloatArray) -> Level:
    largest = float(np.max(np.abs(differences)))
    if largest == 0.0:
        return Level(EVERYWHERE, np.zeros((3, 3)), np.zeros(3), axes, 0.0)
    scaled = differences / largest
    form = axes.T @ (scaled[:, None] * axes)
    zeros = scaled == 0.0
    conics = find_conics(scaled, axes)
    if conics:
        great_circles = conics[0].rests[0] == 0.0
        tracks = tuple(build_track([conic]) for conic in conics) if great_circles else (build_track(conics),)
        locus = Locus(tracks, np.zeros((0, 3)))
    else:
        # A single zero among values of one sign: its axis alone.
        locus = Locus((), axes[zeros] if np.sum(zeros) == 1 else np.zeros((0, 3)))
    return Level(locus, (form + form.T) / 2.0, scaled, axes, _measure_below(scaled))


def _measure_below(differences: FloatArray) -> float:
    """The part of the sphere where Σ d_i n_i² is negative, d descending and not all zero.

    Inside both halves of a cone with the odd value −z and the others x ≤ y it is 1 − (2/π) ∫ cos θ dφ over a quarter
    turn, cos²θ = P/(P + z), P = x cos²φ + y sin²φ the cone's polar angle at azimuth φ; with t = tan²φ the integral is
    one of Carlson's (Numerical Algorithms 10 (1995) 13; from memory, section 1).
    """
    positive, negative = int(np.sum(differences > 0.0)), int(np.sum(differences < 0.0))
    if negative == 0:
        return 0.0
    if positive == 0:
        return 1.0
    if positive == 1 and negative == 1:
        return float(2.0 / np.pi * np.arctan(np.sqrt(-differences[2] / differences[0])))
    if negative == 1:
        return _measure_inside(float(-differences[2]), float(differences[1]), float(differences[0]))
    return 1.0 - _measure_inside(float(differences[0]), float(-differences[1]), float(-differences[2]))


def _measure_inside(odd: float, small: float, large: float) -> float:
    ratio, outer = small / large, (small + odd) / (large + odd)
    first = float(elliprf(0.0, ratio, outer))
    second = float(elliprj(0.0, ratio, outer, 1.0))
    quarter = (large * first - (large - small) * second / 3.0) / np.sqrt(large * (large + odd))
    return float(1.0 - 2.0 / np.pi * quarter)
