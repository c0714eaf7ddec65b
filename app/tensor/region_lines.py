"""Sets of possible principal axes that symmetry confines to points, circles, arcs, or areas with straight sides.

The functions here take a Deviation by the structure that its matrix and spreads share and return the curves of the
set with their kinds, or None where the set is the whole sphere. Arcs run forth and back.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq, minimize_scalar

from app.errors import InputError
from app.tensor.deviation import LOST, Deviation
from app.tensor.region_shapes import (
    Curve,
    build_arc,
    build_circle,
    build_points,
    find_plane_axes,
    go_forth_and_back,
)

FloatArray = npt.NDArray[np.float64]

_SIDE_COUNT: Final = 90
"""Points along each side of an area between two poles: even, so that none lies on the plane between them."""

_FAMILY_TURN: Final = 0.02
"""Largest turn in radians of an axis between neighbours in a family of tensors."""

_MOST_STEPS: Final = 20_000
"""Tensors of a family that are looked at; more are needed only where rounding turns the axes."""


def trace_exact(matrix: FloatArray, size: float) -> list[Curve] | None:
    """The principal axes of a tensor without uncertainty."""
    values, vectors = np.linalg.eigh(matrix)
    low, high = np.diff(values) <= LOST * size
    if low and high:
        return None
    if low or high:
        axis = vectors[:, 2 if low else 0]
        return [*build_points(axis), ("line", build_circle(axis))]
    return [point for index in (2, 1, 0) for point in build_points(vectors[:, index])]


def trace_family(deviation: Deviation, bound: float) -> list[Curve] | None:
    """The principal axes of A + t D for t² ≤ bound: one error that can move an axis."""
    spread = deviation.spreads[0]
    ratio = np.sum(spread * deviation.matrix) / np.sum(spread * spread)
    half = float(np.sqrt(bound))
    if np.linalg.norm(deviation.matrix - ratio * spread) <= LOST * deviation.size:
        # A and D share their axes (a uniaxial form, for one), which t does not move unless it makes the tensor vanish.
        return None if abs(ratio) <= half else trace_exact(spread, float(np.linalg.norm(spread)))
    steps, paths = _follow_axes(deviation.matrix, spread, half)
    curves: list[Curve] = []
    for branch in range(3):
        path = paths[:, branch]
        if np.max(np.linalg.norm(path - path[0], axis=1)) <= LOST:
            # The middle of a path too short to be drawn: A itself.
            curves += build_points(path[int(np.argmin(np.abs(steps)))])
        else:
            curves += [("line", go_forth_and_back(sign * path)) for sign in (1.0, -1.0)]
    return curves + [("line", build_circle(axis)) for axis in _find_meetings(deviation, spread, steps)]


def _follow_axes(matrix: FloatArray, spread: FloatArray, half: float) -> tuple[FloatArray, FloatArray]:
    """Values of t and the axes there, shape (k, 3, 3) with branches as rows, close enough to follow each branch."""
    steps = np.linspace(-half, half, 65)
    for _ in range(48):
        axes = np.swapaxes(np.linalg.eigh(matrix + steps[:, None, None] * spread)[1], 1, 2)
        overlaps = np.max(np.abs(axes[:-1] @ np.swapaxes(axes[1:], 1, 2)), axis=2)
        wide = (np.min(overlaps, axis=1) < np.cos(_FAMILY_TURN)) & (np.diff(steps) > 1e-13 * half)
        if not np.any(wide):
            break
        if len(steps) > _MOST_STEPS:
            raise InputError(
                "The variances lie too many orders of magnitude apart for the region to be traced.",
                field="tensor.covariance",
                hint="Give the covariance in the square of the tensor's unit, and leave out what nothing is known of.",
            )
        steps = np.sort(np.concatenate([steps, (steps[:-1] + steps[1:])[wide] / 2.0]))
    axes = np.swapaxes(np.linalg.eigh(matrix + steps[:, None, None] * spread)[1], 1, 2)
    paths = axes.copy()
    for index in range(1, len(steps)):
        overlap = paths[index - 1] @ axes[index].T
        order = np.argmax(np.abs(overlap), axis=1)
        paths[index] = axes[index][order] * np.sign(overlap[np.arange(3), order])[:, None]
    return steps, paths[:, ::-1]


def _find_meetings(deviation: Deviation, spread: FloatArray, steps: FloatArray) -> list[FloatArray]:
    """The third axis wherever two principal values of A + t D meet."""

    def gap(t: float, lower: int) -> float:
        values = np.linalg.eigvalsh(deviation.matrix + t * spread)
        return float(values[lower + 1] - values[lower])

    reach = deviation.size + float(np.max(np.abs(steps)))
    gaps = np.diff(np.linalg.eigvalsh(deviation.matrix + steps[:, None, None] * spread), axis=1)
    found: list[FloatArray] = []
    for lower in (0, 1):
        padded = np.concatenate([[np.inf], gaps[:, lower], [np.inf]])
        for index in np.flatnonzero((padded[1:-1] <= padded[:-2]) & (padded[1:-1] <= padded[2:])).tolist():
            low, high = steps[max(index - 1, 0)], steps[min(index + 1, len(steps) - 1)]
            best = minimize_scalar(gap, bounds=(low, high), args=(lower,), method="bounded", options={"xatol": 1e-12})
            nearest = float(best.x) if best.fun < gaps[index, lower] else float(steps[index])
            if gap(nearest, lower) <= LOST * reach:
                vectors = np.linalg.eigh(deviation.matrix + nearest * spread)[1]
                axis = vectors[:, 2 if lower == 0 else 0]
                if all(np.linalg.norm(np.cross(axis, other)) > 1e-6 for other in found):
                    found.append(axis)
    return found


def trace_triple(deviation: Deviation, single: float, double: float) -> list[Curve] | None:
    """Three axes held by symmetry: besides them, the circles across an axis or the whole sphere, or nothing."""
    axes = deviation.axes
    values = np.einsum("ni,ij,nj->n", axes, deviation.matrix, axes)
    errors = np.einsum("ni,aij,nj->na", axes, deviation.spreads, axes)
    gaps, gap_errors = np.diff(values), np.diff(errors, axis=0)
    if _can_vanish(gaps, gap_errors.T, double):
        return None
    curves = [point for axis in axes for point in build_points(axis)]
    for alone, first, second in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        gap = abs(values[first] - values[second])
        sigma = float(np.linalg.norm(errors[first] - errors[second]))
        if gap <= max(np.sqrt(single) * sigma, LOST * deviation.size if sigma <= LOST else 0.0):
            curves.append(("line", build_circle(axes[alone])))
    return curves


def trace_plane(deviation: Deviation, single: float, double: float) -> list[Curve] | None:
    """One axis held by symmetry, the other two in the plane across it (the monoclinic case).

    Off the plane and off the axis b, n can be a principal axis only where the value along b equals the one along its
    projection m on the plane, and then so can every direction of the half circle through m from b to −b: χ² depends
    on the azimuth alone, and areas lie between two such half circles.
    """
    axis = deviation.axes[0]
    zero, right = find_plane_axes(deviation.matrix, axis)
    members = np.array([deviation.matrix, *deviation.spreads])
    along_zero, along_right = members @ zero @ zero, members @ right @ right
    triples = np.stack(
        [
            (along_zero + along_right) / 2.0 - members @ axis @ axis,
            (along_zero - along_right) / 2.0,
            members @ right @ zero,
        ],
        axis=1,
    )
    triples[0, 2] = 0.0  # `zero` is a principal axis of the matrix.
    areas = _find_azimuths(triples, double)
    if areas is None:
        return None
    sector = _solve_sector(float(triples[0, 1]), triples[1:, 1:], single)
    curves = build_points(axis)
    if sector is None:
        curves.append(("line", build_circle(axis)))
    else:
        for turn in np.arange(4) * np.pi / 2.0:
            curves.append(build_arc(zero, right, sector[0] / 2.0 + turn, sector[1] / 2.0 + turn))
    for low, high in areas:
        for turn in (0.0, np.pi):
            curves.append(("area", _sector_border(axis, zero, right, low + turn, high + turn)))
    return curves


def trace_cone(deviation: Deviation, normal: FloatArray, single: float, double: float) -> list[Curve] | None:
    """A = b vᵀ + v bᵀ (class m of an axial tensor): axes b × v in the plane across b, and (b ± v)/√2 on a cone."""
    members = np.array([deviation.matrix, *deviation.spreads]) @ normal
    vector = members[0] - (members[0] @ normal) * normal
    length = float(np.linalg.norm(vector))
    ahead = vector / length if length > 0.0 else find_plane_axes(np.diag([1.0, 2.0, 3.0]), normal)[0]
    aside = np.cross(normal, ahead)
    errors = np.stack([members[1:] @ ahead, members[1:] @ aside], axis=1)
    if _can_vanish(np.array([length, 0.0]), errors, double):
        return None
    sector = _solve_sector(length, errors, single)
    if sector is None:
        cones = [(build_circle(normal) + side * normal) / np.sqrt(2.0) for side in (1.0, -1.0)]
        return [("line", curve) for curve in [build_circle(normal), *cones]]
    curves: list[Curve] = []
    for turn in (0.0, np.pi):
        # The sector is of the direction across which v has no part: of the axis itself in the plane, and of the
        # direction at right angles to its azimuth on the cone.
        curves.append(build_arc(aside, -ahead, sector[0] + turn, sector[1] + turn))
        kind, arc = build_arc(ahead, aside, sector[0] + turn, sector[1] + turn)
        curves += [(kind, (arc + side * normal) / np.sqrt(2.0)) for side in (1.0, -1.0)]
    return curves


def _can_vanish(means: FloatArray, errors: FloatArray, bound: float) -> bool:
    """Whether χ² of two quantities (2,) with errors (r, 2) against zero is within a bound (Binet and Cauchy)."""
    first, second = np.triu_indices(len(errors), 1)
    effects = means[0] * errors[:, 1] - means[1] * errors[:, 0]
    variances = errors[first, 0] * errors[second, 1] - errors[first, 1] * errors[second, 0]
    return bool(np.sum(effects**2) <= bound * np.sum(variances**2))


def _solve_sector(mean: float, errors: FloatArray, bound: float) -> tuple[float, float] | None:
    """Angles ψ about 0 where (a·u)² ≤ bound · var(a·u) for u = (−sin ψ, cos ψ), of a = (mean, 0) ± errors (r, 2).

    The set repeats after π. None where it holds for every ψ.
    """
    covariance = errors.T @ errors
    # α s² + 2 β s c + γ c² ≤ 0 with s = sin ψ, c = cos ψ; it holds at ψ = 0.
    alpha = mean**2 - bound * covariance[0, 0]
    beta = bound * covariance[0, 1]
    gamma = -bound * covariance[1, 1]
    discriminant = beta**2 - alpha * gamma
    if alpha <= 0.0 and discriminant <= 0.0:
        return None
    stable = -(beta + np.copysign(np.sqrt(max(discriminant, 0.0)), beta))
    if stable == 0.0:
        return 0.0, 0.0
    first, second = sorted(
        [float(np.arctan(stable / alpha)) if alpha else np.pi / 2.0, float(np.arctan(gamma / stable))]
    )
    if first <= 0.0 <= second:
        return first, second
    return (second - np.pi, first) if first > 0.0 else (second, first + np.pi)


def _find_azimuths(triples: FloatArray, bound: float) -> list[tuple[float, float]] | None:
    """Intervals of azimuth (modulo π) with χ² ≤ bound off the plane; None where all.

    Args:
        triples: shape (1 + r, 3), of the matrix and every spread: mean value in the plane less the one along the
            axis, half the difference of the values along azimuths 0 and π/2, and the cell between these.
    """
    # Both conditions at azimuth φ: x = −p sin 2φ + q cos 2φ and y = d + p cos 2φ + q sin 2φ vanish. χ² is a quotient
    # of sums of squares of x y' − x' y = α + β cos 2φ + γ sin 2φ over pairs (Binet and Cauchy).
    d, p, q = triples.T
    first, second = np.triu_indices(len(triples), 1)
    coefficients = np.stack(
        [
            q[first] * p[second] - p[first] * q[second],
            d[second] * q[first] - d[first] * q[second],
            d[first] * p[second] - d[second] * p[first],
        ],
        axis=1,
    )
    weights = np.where(first == 0, 1.0, -bound)

    def excess(angle: float) -> float:
        parts = coefficients @ np.array([1.0, np.cos(2.0 * angle), np.sin(2.0 * angle)])
        return float(weights @ parts**2)

    # With tan φ as the variable it is a quartic; its roots and a plain grid part the azimuths.
    alpha, beta, gamma = coefficients.T
    quartic = sum(
        w * np.convolve(c, c)
        for w, c in zip(weights, np.stack([alpha - beta, 2 * gamma, alpha + beta], 1), strict=True)
    )
    roots = np.roots(quartic)
    start = -np.pi / 4.0
    grid = start + np.pi * np.arange(16) / 16.0
    parts = np.sort(np.concatenate([grid, (np.arctan(roots.real) - start) % np.pi + start]))
    parts = parts[np.concatenate([[True], np.diff(parts) > 0.0])]
    middles = (parts + np.append(parts[1:], parts[0] + np.pi)) / 2.0
    middles = np.unique(np.concatenate([middles, [0.0, np.pi / 2.0]]))
    values = np.array([excess(angle) for angle in middles])
    return _collect_intervals(excess, middles, values)


def _collect_intervals(
    excess: Callable[[float], float], angles: FloatArray, values: FloatArray
) -> list[tuple[float, float]] | None:
    """Where a function of period π is negative, from values at angles that part all its roots."""
    if np.all(values <= 0.0):
        return None
    entries: list[float] = []
    exits: list[float] = []
    for index in range(len(angles)):
        following = (index + 1) % len(angles)
        low, high = float(angles[index]), float(angles[following]) + (np.pi if following == 0 else 0.0)
        if (values[index] > 0.0) != (values[following] > 0.0):
            root = float(brentq(excess, low, high, xtol=1e-18, rtol=1e-15)) if excess(low) * excess(high) < 0 else high
            (entries if values[index] > 0.0 else exits).append(root)
    return [(entry, min(leave if leave > entry else leave + np.pi for leave in exits)) for entry in entries]


def _sector_border(axis: FloatArray, zero: FloatArray, right: FloatArray, low: float, high: float) -> FloatArray:
    """From the axis down the half circle at azimuth ``low`` to its opposite and up again at ``high``."""
    polar = (np.arange(_SIDE_COUNT) + 0.5) * np.pi / _SIDE_COUNT

    def side(azimuth: float) -> FloatArray:
        outward = np.cos(azimuth) * zero + np.sin(azimuth) * right
        line: FloatArray = np.cos(polar)[:, None] * axis + np.sin(polar)[:, None] * outward
        return line

    # With the axis to the north azimuths grow to the east, so the area is to the left both down and up.
    return np.concatenate([[axis], side(low), [-axis], side(high)[::-1], [axis]]) + 0.0
