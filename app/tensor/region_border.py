"""The border of the area of possible principal axes where symmetry confines it to no line.

By the formula of Binet and Cauchy χ²(n) = Σ_a P_a² / Σ_{a<b} Q_ab² with the cubic forms P_a = det[n, An, D_a n] and
Q_ab = det[n, D_a n, D_b n] (A and D_a as in ``app.tensor.deviation``). The border is therefore the curve of degree
six f = Σ P_a² − bound Σ Q_ab² = 0, and the area is f ≤ 0. Two facts make finding all of it safe:

- every connected part of the area holds a principal axis of A itself: the tensors that the data allow form a ball,
  and each axis moves continuously over it. So every outer border is met on the way out from an axis;
- on a great circle through an axis f is a polynomial of degree six, whose real roots are all its crossings, however
  narrow a part of the area or a gap in it may be.

From these starts each curve is followed by predictor and corrector with steps that fit its curvature (E. L. Allgower
and K. Georg, Introduction to Numerical Continuation Methods (2003), chapters 2 and 6).
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq
from scipy.spatial import cKDTree

from app.tensor.deviation import Deviation

FloatArray = npt.NDArray[np.float64]

_MERIDIANS: Final = 60
_LONGEST_STEP: Final = 0.03
_SHORTEST_STEP: Final = 1e-12
_STALLED: Final = 1e-2
_STEP_LIMIT: Final = 20000
_TURN_LIMIT: Final = float(np.cos(0.16))
_TURN_SMALL: Final = float(np.cos(0.08))

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
class _Border:
    """f as a weighted sum of squares of cubic forms.

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


def trace_border(deviation: Deviation, bound: float) -> list[FloatArray] | None:
    """Closed curves (k, 3) in the crystal frame with the area to their left; None where it is the whole sphere.

    Args:
        deviation: with at least two spreads, and nothing that all of them share with the matrix.
        bound: the quantile of χ² with two degrees of freedom.
    """
    # In the frame of the axes of A small regions about them keep their full precision.
    frame = np.linalg.eigh(deviation.matrix)[1].T[::-1]
    matrix = np.diag(np.einsum("ij,jk,ik->i", frame, deviation.matrix, frame))
    spreads = frame @ deviation.spreads @ frame.T
    true = _build_border(matrix, spreads, bound)
    followed = true if len(spreads) == 5 else _build_border(matrix, _fill_spreads(spreads), bound)
    seeds = _find_seeds(followed)
    if len(seeds) == 0:
        return None
    curves: list[FloatArray] = []
    tangents = np.array([_find_tangent(followed.evaluate(seed)[1], seed) for seed in seeds])
    opposite = np.array([_find_tangent(followed.evaluate(-seed)[1], -seed) for seed in seeds])
    open_seeds = np.ones(len(seeds), dtype=bool)
    while np.any(open_seeds):
        index = int(np.argmax(open_seeds))
        open_seeds[index] = False
        curve, closed = _follow(followed, seeds[index])
        open_seeds[open_seeds] &= ~_lie_on(curve, seeds[open_seeds], tangents[open_seeds])
        open_seeds[open_seeds] &= ~_lie_on(curve, -seeds[open_seeds], opposite[open_seeds])
        if not closed:
            continue
        if followed is not true:
            curve = _settle(true, curve)
        if len(curve) > 3:
            curves += [curve @ frame, -curve[::-1] @ frame]
    return curves


def _build_border(matrix: FloatArray, spreads: FloatArray, bound: float) -> _Border:
    effects = _build_forms(matrix[None], spreads)
    first, second = np.triu_indices(len(spreads), 1)
    variances = _build_forms(spreads[first], spreads[second])
    weights = np.concatenate([np.ones(len(effects)), np.full(len(variances), -bound)])
    return _Border(np.concatenate([effects, variances]), weights)


def _build_forms(first: FloatArray, second: FloatArray) -> FloatArray:
    """det[n, Xn, Yn] as symmetric arrays of shape (k, 3, 3, 3), of X and Y of shape (k, 3, 3)."""
    first, second = np.broadcast_arrays(first, second)
    forms = np.einsum("ajk,njb,nkc->nabc", _EPSILON, first, second)
    turned: FloatArray = (
        sum(np.transpose(forms, (0, *(1 + i for i in order))) for order in permutations(range(3))) / 6.0
    )
    return turned


def _fill_spreads(spreads: FloatArray) -> FloatArray:
    """Small errors added in all traceless directions that have none."""
    identity = np.eye(3).reshape(1, 9)
    skew = _EPSILON.reshape(3, 9)
    taken = np.concatenate([identity, skew, spreads.reshape(-1, 9)])
    missing = np.linalg.svd(taken)[2][len(taken) :].reshape(-1, 3, 3)
    return np.concatenate([spreads, _FLOOR * np.linalg.norm(spreads[0]) * missing])


def _find_seeds(border: _Border) -> FloatArray:
    """Points of the border on every part of it, shape (m, 3)."""
    axes = np.eye(3)
    seeds: list[FloatArray] = []
    outward = np.geomspace(1e-13, np.pi / 2.0, 600)
    for index in range(3):
        pole, zero, right = axes[index], axes[(index + 1) % 3], axes[(index + 2) % 3]
        for azimuth in np.arange(8) * np.pi / 4.0:
            ahead = np.cos(azimuth) * zero + np.sin(azimuth) * right
            seeds += _search_outward(border, pole, ahead, outward)
    for index in range(3):
        pole, zero, right = axes[index], axes[(index + 1) % 3], axes[(index + 2) % 3]
        azimuths = (np.arange(_MERIDIANS) + 0.5) * np.pi / _MERIDIANS
        aheads = np.cos(azimuths)[:, None] * zero + np.sin(azimuths)[:, None] * right
        seeds += _solve_meridians(border, pole, aheads)
    seeds += _search_gaps(border)
    return np.array(seeds).reshape(-1, 3)


def _search_outward(border: _Border, start: FloatArray, ahead: FloatArray, angles: FloatArray) -> list[FloatArray]:
    """The first crossing on the great circle from one direction toward another at right angles."""

    def place(angle: float) -> FloatArray:
        return np.cos(angle) * start + np.sin(angle) * ahead

    values = border.measure(np.cos(angles)[:, None] * start + np.sin(angles)[:, None] * ahead)
    changes = np.flatnonzero(np.sign(values[1:]) * np.sign(values[:-1]) < 0)
    if len(changes) == 0:
        return []
    low, high = float(angles[changes[0]]), float(angles[changes[0] + 1])
    ends = [border.evaluate(place(angle))[0] for angle in (low, high)]
    if ends[0] * ends[1] >= 0.0:
        return []
    angle = float(brentq(lambda value: border.evaluate(place(value))[0], low, high, xtol=1e-20, rtol=1e-14))
    return [place(angle)]


def _solve_meridians(border: _Border, pole: FloatArray, aheads: FloatArray) -> list[FloatArray]:
    """All crossings of the great circles through a pole and each of (m, 3) directions across it."""
    # Along pole + x · ahead every cubic form is a cubic in x.
    forms = border.forms
    polar = forms @ pole
    third = np.einsum("kabc,ma,mb,mc->mk", forms, aheads, aheads, aheads, optimize=True)
    second = 3.0 * np.einsum("kab,ma,mb->mk", polar, aheads, aheads, optimize=True)
    first = 3.0 * np.einsum("kab,b,ma->mk", polar, pole, aheads, optimize=True)
    zeroth = np.broadcast_to((polar @ pole) @ pole, first.shape)
    cubics = np.stack([third, second, first, zeroth], axis=2)
    sextics = np.zeros((len(aheads), 7))
    for i in range(4):
        for j in range(4):
            sextics[:, i + j] += np.sum(border.weights * cubics[:, :, i] * cubics[:, :, j], axis=1)
    found: list[FloatArray] = []
    for ahead, sextic in zip(aheads, sextics, strict=True):
        roots = np.roots(sextic / np.max(np.abs(sextic)))
        real = roots.real[np.abs(roots.imag) <= 1e-4 * np.abs(roots)]
        for x in real:
            start = pole + float(x) * ahead
            point = _correct(border, start / np.linalg.norm(start), 1e-3)
            if point is not None:
                found.append(point)
    return found


def _search_gaps(border: _Border) -> list[FloatArray]:
    """Crossings on the way from the summits of χ² to the axes: the borders of gaps too small for the meridians."""
    count = 1500
    # A spiral of even density over half the sphere; the other half repeats it.
    heights = (np.arange(count) + 0.5) / count
    turns = np.arange(count) * np.pi * (3.0 - np.sqrt(5.0))
    radii = np.sqrt(1.0 - heights**2)
    grid = np.stack([radii * np.cos(turns), radii * np.sin(turns), heights], axis=1)
    ratios = border.measure_chi2(grid)
    neighbours = cKDTree(np.concatenate([grid, -grid])).query(grid, 9)[1][:, 1:] % count
    summits = grid[ratios >= np.max(ratios[neighbours], axis=1)]
    best = border.measure_chi2(summits)
    angles = np.arange(8) * np.pi / 4.0
    reach = 0.04
    for _ in range(40):
        zeros = np.cross(summits, np.eye(3)[np.argmin(np.abs(summits), axis=1)])
        zeros /= np.linalg.norm(zeros, axis=1, keepdims=True)
        rights = np.cross(summits, zeros)
        around = np.cos(angles)[:, None] * zeros[:, None] + np.sin(angles)[:, None] * rights[:, None]
        trials = summits[:, None] + reach * around
        trials /= np.linalg.norm(trials, axis=2, keepdims=True)
        values = border.measure_chi2(trials.reshape(-1, 3)).reshape(len(summits), 8)
        chosen = np.argmax(values, axis=1)
        rows = np.arange(len(summits))
        better = values[rows, chosen] > best
        summits = np.where(better[:, None], trials[rows, chosen], summits)
        best = np.where(better, values[rows, chosen], best)
        reach *= 0.75
    found: list[FloatArray] = []
    for summit in summits[best > 1.0]:
        for axis in np.eye(3):
            toward = axis * np.copysign(1.0, summit @ axis)
            ahead = toward - summit * (summit @ toward)
            length = float(np.linalg.norm(ahead))
            if length > 1e-9:
                angles_out = np.concatenate([[0.0], np.geomspace(1e-9, np.arctan2(length, summit @ toward), 300)])
                found += _search_outward(border, summit, ahead / length, angles_out)
    return found


def _correct(border: _Border, start: FloatArray, reach: float) -> FloatArray | None:
    """The point of the border straight down the gradient from a start, at most ``reach`` away; None if there is none."""
    point, moved, before = start, 0.0, np.inf
    for _ in range(20):
        value, gradient = border.evaluate(point)
        steepness = float(gradient @ gradient)
        if steepness == 0.0:
            return None
        move = -value / steepness * gradient
        size = float(np.sqrt(move @ move))
        moved += size
        if not moved <= reach:
            return None
        point = point + move
        point = point / np.sqrt(point @ point)
        if size <= 1e-12 * reach + 1e-17:
            return point
        if size >= before / 2.0 and size <= _STALLED * reach:
            # As near as rounding lets it come, if f does change its sign here.
            ends = [border.evaluate(point + side * move)[0] for side in (-4.0, 4.0)]
            if ends[0] * ends[1] < 0.0:
                return point
        before = size
    return None


def _find_tangent(gradient: FloatArray, point: FloatArray) -> FloatArray:
    """Along the border with f < 0 to the left as seen from outside."""
    a, b, c = point.tolist()
    x, y, z = gradient.tolist()
    tangent = np.array([b * z - c * y, c * x - a * z, a * y - b * x])
    length = float(np.sqrt(tangent @ tangent))
    return tangent / length if length > 0.0 else tangent


def _follow(border: _Border, start: FloatArray) -> tuple[FloatArray, bool]:
    """The curve through a point of the border, and whether it closed; then its first point is repeated."""
    tangent = first_tangent = _find_tangent(border.evaluate(start)[1], start)
    point, points, step = start, [start], _LONGEST_STEP
    for _ in range(_STEP_LIMIT):
        while True:
            ahead = point + step * tangent
            trial = _correct(border, ahead / np.sqrt(ahead @ ahead), 0.25 * step)
            if trial is not None:
                turned = _find_tangent(border.evaluate(trial)[1], trial)
                cosine = float(turned @ tangent)
                if cosine >= _TURN_LIMIT:
                    break
            step /= 2.0
            if step < _SHORTEST_STEP:
                hop = _cross_over(border, point, tangent)
                if hop is None:
                    return np.array(points), False
                trial, turned = hop
                cosine = 1.0
                break
        if len(points) > 2 and _passes(point, trial, start, tangent, first_tangent):
            points.append(start)
            return np.array(points), True
        points.append(trial)
        point, tangent = trial, turned
        if cosine > _TURN_SMALL:
            step = min(1.6 * step, _LONGEST_STEP)
    return np.array(points), False


def _cross_over(border: _Border, point: FloatArray, tangent: FloatArray) -> tuple[FloatArray, FloatArray] | None:
    """From the tip of a needle, too sharp to be followed round, to the other flank: its point and tangent."""
    aside = np.cross(point, tangent)
    widths = np.geomspace(3e-13, 1e-6, 300)
    for side in (1.0, -1.0):
        # Just off the curve f is negative to the left and positive to the right, until the other flank.
        values = np.array([border.evaluate(point + side * width * aside)[0] for width in widths]) * -side
        inner = np.flatnonzero(values > 0.0)
        if len(inner) == 0:
            continue
        outer = np.flatnonzero(values[inner[0] :] < 0.0)
        if len(outer) == 0:
            continue
        width = widths[inner[0] + outer[0]]
        landed = _correct(border, point + side * width * aside, width)
        if landed is not None:
            turned = _find_tangent(border.evaluate(landed)[1], landed)
            if turned @ tangent < 0.0:
                return landed, turned
    return None


def _passes(
    point: FloatArray, following: FloatArray, start: FloatArray, tangent: FloatArray, first_tangent: FloatArray
) -> bool:
    chord, offset = following - point, start - point
    squared = float(chord @ chord)
    part = float(offset @ chord) / squared
    if not 0.0 < part <= 1.0 or float(tangent @ first_tangent) < 0.9:
        return False
    rest = offset - part * chord
    return float(rest @ rest) <= 0.01 * squared


def _lie_on(curve: FloatArray, points: FloatArray, tangents: FloatArray) -> npt.NDArray[np.bool_]:
    """Whether points of the border (m, 3) lie on a curve that has been followed."""
    starts, chords = curve[:-1], np.diff(curve, axis=0)
    squared = np.sum(chords**2, axis=1)
    offsets = points[:, None] - starts
    parts = np.clip(np.sum(offsets * chords, axis=2) / squared, 0.0, 1.0)
    rests = np.sum((offsets - parts[..., None] * chords) ** 2, axis=2)
    along = tangents @ chords.T / np.sqrt(squared)
    near = (rests <= 0.01 * squared + 1e-24) & (along > 0.8)
    matched: npt.NDArray[np.bool_] = np.any(near, axis=1)
    return matched


def _settle(border: _Border, curve: FloatArray) -> FloatArray:
    """Points of a nearby curve moved onto this border; those that find no place on it are left out."""
    moved = [_correct(border, point, 0.01) for point in curve[:-1]]
    kept = [point for point in moved if point is not None]
    return np.array([*kept, kept[0]]).reshape(-1, 3) if kept else np.zeros((0, 3))
