"""The border of the area of possible principal axes where symmetry confines it to no line.

The border is the curve of degree six f = 0 of ``app.tensor.sextic``. Two facts make finding all of it safe:

- every connected part of the area holds a principal axis of A itself: the tensors that the data allow form a ball,
  and each axis moves continuously over it. So every outer border is met on the way out from an axis;
- on a great circle through an axis f is a polynomial of degree six, whose real roots are all its crossings, however
  narrow a part of the area or a gap in it may be.

From these starts each curve is followed by predictor and corrector with steps that fit its curvature (E. L. Allgower
and K. Georg, Introduction to Numerical Continuation Methods (2003), chapters 2 and 6).
"""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import brentq
from scipy.spatial import cKDTree

from app.tensor.deviation import Deviation
from app.tensor.sextic import Sextic, build_sextic, fill_spreads

FloatArray = npt.NDArray[np.float64]

_MERIDIANS: Final = 36
_LONGEST_STEP: Final = 0.03
_FIRST_STEP: Final = 1e-3
_SHORTEST_STEP: Final = 1e-12
_STALLED: Final = 1e-2
_FARTHEST_MOVE: Final = 1e-6
_STEP_LIMIT: Final = 5000
_SLOPE_LIMIT: Final = 0.3
_TURN_LIMIT: Final = float(np.cos(0.16))
_TURN_SMALL: Final = float(np.cos(0.08))


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
    true = build_sextic(matrix, spreads, bound)
    followed = true if len(spreads) == 5 else build_sextic(matrix, fill_spreads(spreads), bound)
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


def _find_seeds(border: Sextic) -> FloatArray:
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


def _search_outward(border: Sextic, start: FloatArray, ahead: FloatArray, angles: FloatArray) -> list[FloatArray]:
    """The first crossing on the great circle from one direction toward another at right angles."""

    def place(angle: float) -> FloatArray:
        placed: FloatArray = np.cos(angle) * start + np.sin(angle) * ahead
        return placed

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


def _solve_meridians(border: Sextic, pole: FloatArray, aheads: FloatArray) -> list[FloatArray]:
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


def _search_gaps(border: Sextic) -> list[FloatArray]:
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


def _correct(border: Sextic, start: FloatArray, reach: float) -> FloatArray | None:
    """The point of the border down the gradient from a start, at most ``reach`` away; None if there is none."""
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
    unit: FloatArray = tangent / (length or 1.0)
    return unit


def _follow(border: Sextic, start: FloatArray) -> tuple[FloatArray, bool]:
    """The curve through a point of the border, and whether it closed; then its first point is repeated."""
    gradient = border.evaluate(start)[1]
    tangent = first_tangent = _find_tangent(gradient, start)
    steepness = float(np.sqrt(gradient @ gradient))
    point, points, step = start, [start], _FIRST_STEP
    for _ in range(_STEP_LIMIT):
        while True:
            ahead = point + step * tangent
            trial = _correct(border, ahead / np.sqrt(ahead @ ahead), 0.25 * step)
            if trial is not None:
                gradient = border.evaluate(trial)[1]
                turned, slope = _find_tangent(gradient, trial), float(np.sqrt(gradient @ gradient))
                cosine = float(turned @ tangent)
                if cosine >= _TURN_LIMIT and slope >= _SLOPE_LIMIT * steepness:
                    break
            step /= 2.0
            if step < _SHORTEST_STEP:
                landed = _cross_over(border, point, tangent)
                if landed is None:
                    return np.array(points), False
                trial, cosine, gradient = landed, 1.0, border.evaluate(landed)[1]
                turned, slope = _find_tangent(gradient, landed), float(np.sqrt(gradient @ gradient))
                break
        if len(points) > 2 and _passes(point, trial, start, tangent, first_tangent):
            points.append(start)
            return np.array(points), True
        points.append(trial)
        # Where the gradient falls, two parts of the curve come near each other: no leap from the one to the other.
        reach = 0.6 * step * slope / (steepness - slope) if slope < steepness else _LONGEST_STEP
        grown = 1.6 * step if cosine > _TURN_SMALL else step
        step = min(grown, reach, _LONGEST_STEP)
        point, tangent, steepness = trial, turned, slope
    return np.array(points), False


def _cross_over(border: Sextic, point: FloatArray, tangent: FloatArray) -> FloatArray | None:
    """From the tip of a needle, too sharp to be followed round, to a point of the other flank."""
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
        if landed is not None and _find_tangent(border.evaluate(landed)[1], landed) @ tangent < 0.0:
            return landed
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


def _settle(border: Sextic, curve: FloatArray) -> FloatArray:
    """Points of a nearby curve moved onto this border; those where it touches itself are left out."""
    moved = [_correct(border, point, _FARTHEST_MOVE) for point in curve[:-1]]
    kept = [point for point in moved if point is not None]
    return np.array([*kept, kept[0]]).reshape(-1, 3) if kept else np.zeros((0, 3))
