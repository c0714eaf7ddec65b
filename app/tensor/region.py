"""Which directions the data allow as principal axes of the symmetric part of a tensor.

n is a principal axis where g = (u₁ᵀAn, u₂ᵀAn) vanishes, u₁ and u₂ across n. With V = G C Gᵀ the covariance of g,
χ²(n) = gᵀ V⁻¹ g has two degrees of freedom, fewer where symmetry takes rank from V; the directions with χ² up to its
quantile are a confidence region by inversion of the test (JCGM 102:2011, section 7; D. R. Cox and D. V. Hinkley,
Theoretical Statistics (1974), section 7.2). It is exact for Gaussian errors of any size, and by itself becomes a
girdle where two principal values are near.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.special import gammaincinv

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.deviation import LOST, Deviation, build_deviation
from app.tensor.region_border import trace_border
from app.tensor.region_lines import trace_cone, trace_exact, trace_family, trace_plane, trace_triple
from app.tensor.region_shapes import Curve, CurveKind
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

DEFAULT_LEVEL: Final = 0.95

_TRACED: Final = 3e10
"""Standard deviations in a tensor without symmetry beyond which its areas are points: they are below 1e-10 radians."""

_RESOLVED: Final = 1e13
"""Where ‖A‖ is more than this many standard deviations, rounding of A is what blurs the axes: they count as exact."""


@dataclass(frozen=True)
class DirectionTest:
    """Whether directions can be principal axes.

    Attributes:
        chi2: shape (m,); NaN where symmetry forbids the direction: g does not vanish in the part without variance.
        rank: shape (m,), 0, 1 or 2: the degrees of freedom of χ² there.
        bounds: shape (m,), the quantile of χ² at the level for that rank; 0 for rank 0.
    """

    chi2: FloatArray
    rank: IntArray
    bounds: FloatArray

    @property
    def inside(self) -> npt.NDArray[np.bool_]:
        """Whether each direction is in the set, shape (m,)."""
        return self.chi2 <= self.bounds


@dataclass(frozen=True)
class Region:
    """The set of directions that can be principal axes, by its bounding curves.

    Attributes:
        level: the level of confidence.
        bound: the quantile of χ² with two degrees of freedom.
        everywhere: whether every direction is in the set; there are then no curves.
        curves: each of shape (k, 3), unit vectors in the crystal frame; the first is repeated at the end where there
            is more than one. n and −n are both in the set, so curves come in opposite pairs or are their own opposite.
        kinds: "area", a curve that bounds an area, which lies to its left as seen from outside the sphere; all area
            curves together bound the area. "line", a set without width: a whole circle, or an arc forth and back.
            "point", one direction.
        test: of the directions that were asked for; None if none were.
    """

    level: float
    bound: float
    everywhere: bool
    curves: tuple[FloatArray, ...]
    kinds: tuple[CurveKind, ...]
    test: DirectionTest | None


def measure_directions(
    crystal: Crystal, tensor: PropertyTensor, directions: npt.ArrayLike, level: float = DEFAULT_LEVEL
) -> DirectionTest:
    """χ² of directions as principal axes of the symmetric part.

    Args:
        crystal: whose frame the tensor and the directions are in.
        tensor: with covariance over its free cells.
        directions: shape (m, 3), any length but zero. One within 1e-8 radians of an axis, plane or cone of symmetry
            counts as on it.
        level: of the bounds, between 0 and 1.

    Raises:
        InputError: no covariance, a level out of range, or a direction of length zero.
    """
    bounds = _find_bounds(level)
    return _measure(build_deviation(crystal, tensor), _normalise(directions), bounds)


def find_region(
    crystal: Crystal,
    tensor: PropertyTensor,
    level: float = DEFAULT_LEVEL,
    directions: npt.ArrayLike | None = None,
) -> Region:
    """The set of directions whose χ² is within the quantile at ``level``, by its bounding curves.

    Where symmetry confines the set to planes, cones or axes, the quantile is that of the rank left there: one degree
    of freedom on a plane of symmetry, none on an axis that symmetry holds. The tip of an area that reaches such an
    axis is a vertex of its curve; at every other vertex of an area χ² equals ``bound``.

    Args:
        crystal, tensor: as for ``measure_directions``.
        level: between 0 and 1.
        directions: shape (m, 3), to be tested as well.

    Raises:
        InputError: as ``measure_directions``.
    """
    bounds = _find_bounds(level)
    deviation = build_deviation(crystal, tensor)
    test = None if directions is None else _measure(deviation, _normalise(directions), bounds)
    curves = _trace(deviation, float(bounds[1]), float(bounds[2]))
    everywhere = curves is None
    lines = tuple(curve for _, curve in curves or ())
    kinds = tuple(kind for kind, _ in curves or ())
    return Region(level, float(bounds[2]), everywhere, lines, kinds, test)


def _trace(deviation: Deviation, single: float, double: float) -> list[Curve] | None:
    """Curves of the set by the structure that symmetry leaves; None where it is the whole sphere."""
    if deviation.rank == 0 or deviation.size > _RESOLVED:
        return trace_exact(deviation.matrix, deviation.size)
    if deviation.rank == 1:
        return trace_family(deviation, single)
    if len(deviation.axes) == 3:
        return trace_triple(deviation, single, double)
    if len(deviation.axes) == 1:
        return trace_plane(deviation, single, double)
    if deviation.cone is not None:
        return trace_cone(deviation, deviation.cone, single, double)
    if deviation.size > _TRACED:
        return trace_exact(deviation.matrix, deviation.size)
    border = trace_border(deviation, double)
    return None if border is None else [("area", curve) for curve in border]


def _find_bounds(level: float) -> FloatArray:
    """Quantiles of χ² at the level for 0, 1 and 2 degrees of freedom."""
    if not 0.0 < level < 1.0:
        raise InputError("A level of confidence lies between 0 and 1.", field="level", hint="For example 0.95.")
    return np.array([0.0, 2.0 * gammaincinv(0.5, level), 2.0 * gammaincinv(1.0, level)])


def _normalise(directions: npt.ArrayLike) -> FloatArray:
    vectors = np.asarray(directions, dtype=np.float64).reshape(-1, 3)
    largest = np.max(np.abs(vectors), axis=1, keepdims=True, initial=0.0)
    if not np.all(np.isfinite(vectors)) or np.any(largest == 0.0):
        raise InputError("A direction is three finite numbers, not all zero.", field="directions")
    scaled = vectors / largest
    unit: FloatArray = scaled / np.linalg.norm(scaled, axis=1, keepdims=True)
    return unit


def _measure(deviation: Deviation, directions: FloatArray, bounds: FloatArray) -> DirectionTest:
    normals = deviation.settle(directions)
    across = _find_across(normals)
    effects = np.einsum("mui,mi->mu", across, normals @ deviation.matrix)
    if deviation.rank:
        spreads = np.einsum("mui,ami->mau", across, normals @ deviation.spreads)
    else:
        spreads = np.zeros((len(normals), 1, 2))
    variance = np.einsum("mau,mav->muv", spreads, spreads)
    half_difference = (variance[:, 0, 0] - variance[:, 1, 1]) / 2.0
    spread = np.hypot(half_difference, variance[:, 0, 1])
    larger = (variance[:, 0, 0] + variance[:, 1, 1]) / 2.0 + spread
    # The determinant as a sum of squares (Binet and Cauchy): no cancellation where one variance nearly vanishes.
    first, second = np.triu_indices(spreads.shape[1], 1)
    determinant = np.sum(_cross(spreads[:, first], spreads[:, second]) ** 2, axis=1)
    smaller = determinant / np.where(larger > 0.0, larger, 1.0)
    rank = (larger > LOST**2).astype(np.int64) + (smaller > LOST**2)

    angle = np.arctan2(variance[:, 0, 1], half_difference) / 2.0
    kept = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    in_kept = np.sum(effects * kept, axis=1)
    in_lost = np.where(rank == 0, np.linalg.norm(effects, axis=1), np.abs(_cross(effects, kept)))
    forbidden = (rank < 2) & (in_lost > LOST * deviation.size)
    numerators = np.sum(_cross(effects[:, None, :], spreads) ** 2, axis=1)
    double = numerators / np.where(rank == 2, determinant, 1.0)
    single = in_kept**2 / np.where(rank == 1, larger, 1.0)
    chi2 = np.choose(rank, [np.zeros(len(normals)), single, double])
    return DirectionTest(np.where(forbidden, np.nan, chi2), rank, bounds[rank])


def _cross(first: FloatArray, second: FloatArray) -> FloatArray:
    product: FloatArray = first[..., 0] * second[..., 1] - first[..., 1] * second[..., 0]
    return product


def _find_across(normals: FloatArray) -> FloatArray:
    """Two unit vectors across each normal, shape (m, 2, 3) (T. Duff et al., J. Comput. Graph. Tech. 6 (2017) 1)."""
    x, y, z = normals.T
    sign = np.copysign(1.0, z)
    a = -1.0 / (sign + z)
    b = x * y * a
    first = np.stack([1.0 + sign * x * x * a, sign * b, -sign * x], axis=1)
    second = np.stack([b, sign + y * y * a, -y], axis=1)
    return np.stack([first, second], axis=1)
