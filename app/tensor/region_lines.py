"""Sets of possible principal axes that symmetry confines to points, circles, arcs, or areas with straight sides.

The functions here take a Deviation by the structure that its matrix and spreads share and return the curves of the
set with their kinds, or None where the set is the whole sphere. Arcs run forth and back.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq, minimize_scalar

from app.tensor.deviation import LOST, Deviation

FloatArray = npt.NDArray[np.float64]
CurveKind = Literal["area", "line", "point"]
Curve = tuple[CurveKind, FloatArray]

_STEP: Final = np.deg2rad(1.0)
"""Spacing of points along circles and arcs."""

_SIDE_COUNT: Final = 90
"""Points along each side of an area between two poles: even, so that none lies on the plane between them."""

_FAMILY_TURN: Final = 0.02
"""Largest turn in radians of an axis between neighbours in a family of tensors."""


def trace_exact(matrix: FloatArray, size: float) -> list[Curve] | None:
    """The principal axes of a tensor without uncertainty."""
    values, vectors = np.linalg.eigh(matrix)
    low, high = np.diff(values) <= LOST * size
    if low and high:
        return None
    if low or high:
        axis = vectors[:, 2 if low else 0]
        return [*_points(axis), ("line", _circle(axis))]
    return [point for index in (2, 1, 0) for point in _points(vectors[:, index])]


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
            curves += _points(path[0])
        else:
            curves += [("line", _forth_and_back(sign * path)) for sign in (1.0, -1.0)]
    return curves + [("line", _circle(axis)) for axis in _find_meetings(deviation, spread, steps)]


def _follow_axes(matrix: FloatArray, spread: FloatArray, half: float) -> tuple[FloatArray, FloatArray]:
    """Values of t and the axes there, shape (k, 3, 3) with branches as rows, close enough to follow each branch."""
    steps = np.linspace(-half, half, 65)
    for _ in range(48):
        axes = np.swapaxes(np.linalg.eigh(matrix + steps[:, None, None] * spread)[1], 1, 2)
        overlaps = np.max(np.abs(axes[:-1] @ np.swapaxes(axes[1:], 1, 2)), axis=2)
        wide = (np.min(overlaps, axis=1) < np.cos(_FAMILY_TURN)) & (np.diff(steps) > 1e-13 * half)
        if not np.any(wide):
            break
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
        for index in np.flatnonzero((padded[1:-1] <= padded[:-2]) & (padded[1:-1] <= padded[2:])):
            low, high = steps[max(index - 1, 0)], steps[min(index + 1, len(steps) - 1)]
            best = minimize_scalar(gap, bounds=(low, high), args=(lower,), method="bounded", options={"xatol": 1e-12})
            nearest = min((float(best.x), float(steps[index])), key=lambda t: gap(t, lower))
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
    if gaps @ np.linalg.solve(gap_errors @ gap_errors.T, gaps) <= double:
        return None
    curves = [point for axis in axes for point in _points(axis)]
    for alone, first, second in ((0, 1, 2), (1, 2, 0), (2, 0, 1)):
        gap = abs(values[first] - values[second])
        sigma = float(np.linalg.norm(errors[first] - errors[second]))
        if gap <= max(np.sqrt(single) * sigma, LOST * deviation.size if sigma <= LOST else 0.0):
            curves.append(("line", _circle(axes[alone])))
    return curves


def trace_plane(deviation: Deviation, single: float, double: float) -> list[Curve] | None:
    """One axis held by symmetry, the other two in the plane across it (the monoclinic case).

    Off the plane and off the axis b, n can be a principal axis only where the value along b equals the one along its
    projection m on the plane, and then so can every direction of the half circle through m from b to −b: χ² depends
    on the azimuth alone, and areas lie between two such half circles.
    """
    axis = deviation.axes[0]
    zero, right = _find_plane_axes(deviation.matrix, axis)
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
    curves = _points(axis)
    if sector is None:
        curves.append(("line", _circle(axis)))
    else:
        for quarter in range(4):
            curves.append(_arc(zero, right, (np.array(sector) / 2.0) + quarter * np.pi / 2.0))
    for low, high in areas:
        for turn in (0.0, np.pi):
            curves.append(("area", _sector_border(axis, zero, right, low + turn, high + turn)))
    return curves


def trace_cone(deviation: Deviation, normal: FloatArray, single: float, double: float) -> list[Curve] | None:
    """A = b vᵀ + v bᵀ (class m of an axial tensor): axes b × v in the plane across b, and (b ± v)/√2 on a cone."""
    members = np.array([deviation.matrix, *deviation.spreads]) @ normal
    vector = members[0] - (members[0] @ normal) * normal
    length = float(np.linalg.norm(vector))
    ahead = vector / length if length > 0.0 else _find_plane_axes(np.diag([1.0, 2.0, 3.0]), normal)[0]
    aside = np.cross(normal, ahead)
    errors = np.stack([members[1:] @ ahead, members[1:] @ aside], axis=1)
    mean = np.array([length, 0.0])
    if mean @ np.linalg.solve(errors.T @ errors, mean) <= double:
        return None
    sector = _solve_sector(length, errors, single)
    if sector is None:
        cones = [(_circle(normal) + side * normal) / np.sqrt(2.0) for side in (1.0, -1.0)]
        return [("line", curve) for curve in [_circle(normal), *cones]]
    curves: list[Curve] = []
    for turn in (0.0, np.pi):
        # The sector is of the direction across which v has no part: of the axis itself in the plane, and of the
        # direction at right angles to its azimuth on the cone.
        curves.append(_arc(ahead, aside, np.array(sector) + turn + np.pi / 2.0))
        kind, arc = _arc(ahead, aside, np.array(sector) + turn)
        curves += [(kind, (arc + side * normal) / np.sqrt(2.0)) for side in (1.0, -1.0)]
    return curves


def _find_plane_axes(matrix: FloatArray, normal: FloatArray) -> tuple[FloatArray, FloatArray]:
    """The principal axes of a matrix within the plane across a normal, the second = normal × first."""
    start = np.eye(3)[int(np.argmin(np.abs(normal)))]
    first = start - normal * (normal @ start)
    first /= np.linalg.norm(first)
    second = np.cross(normal, first)
    angle = np.arctan2(2.0 * (first @ matrix @ second), first @ matrix @ first - second @ matrix @ second) / 2.0
    zero = np.cos(angle) * first + np.sin(angle) * second
    return zero, np.cross(normal, zero)


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
        return np.cos(polar)[:, None] * axis + np.sin(polar)[:, None] * outward

    # With the axis to the north azimuths grow to the east, so the area is to the left both down and up.
    return np.concatenate([[axis], side(low), [-axis], side(high)[::-1], [axis]]) + 0.0


def _points(axis: FloatArray) -> list[Curve]:
    return [("point", (sign * axis)[None, :] + 0.0) for sign in (1.0, -1.0)]


def _circle(axis: FloatArray) -> FloatArray:
    """The great circle across an axis, closed."""
    zero, right = _find_plane_axes(np.zeros((3, 3)), axis)
    angles = np.linspace(0.0, 2.0 * np.pi, round(2.0 * np.pi / _STEP) + 1)
    circle = np.cos(angles)[:, None] * zero + np.sin(angles)[:, None] * right
    circle[-1] = circle[0]
    return circle


def _arc(zero: FloatArray, right: FloatArray, ends: FloatArray) -> Curve:
    """Forth and back between two azimuths, or a point where they agree."""
    if ends[1] - ends[0] <= LOST * 1e-3:
        angle = float(np.mean(ends))
        return "point", (np.cos(angle) * zero + np.sin(angle) * right)[None, :]
    angles = np.linspace(ends[0], ends[1], max(9, int((ends[1] - ends[0]) / _STEP) + 2))
    return "line", _forth_and_back(np.cos(angles)[:, None] * zero + np.sin(angles)[:, None] * right)


def _forth_and_back(path: FloatArray) -> FloatArray:
    return np.concatenate([path, path[-2::-1]])
