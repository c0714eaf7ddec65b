"""Stage settings that bring a crystal direction to a laboratory direction.

With two axes the turns are found in closed form: the direction meets two cones, one about either axis (subproblems of
B. Paden and W. Kahan; R. M. Murray, Z. Li, S. S. Sastry, A Mathematical Introduction to Robotic Manipulation, 1994,
section 3.2). A third axis leaves a family of settings. Of it the least travel lies where a dial stands at its zero or
at an end of its travel, which leaves two axes, or where the travel is stationary, which is searched along the family.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize_scalar

from app.cutting.family import scan_family
from app.cutting.stage import Axis, compute_turn, find_axes_in_lab, turn_about

FloatArray = npt.NDArray[np.float64]
Objective = Callable[[tuple[float, ...]], float]

EXACT: Final = 1e-10
"""A sine below this is zero: parallel axes, a direction along an axis."""
REACHED: Final = 1e-9
"""Sine of the angle by which a solution may miss through rounding."""
STEPS: Final = 241
SAME: Final = 1e-4
"""Degrees by which two settings may differ and still be one: a searched one ends so near to the exact one."""
AS_GOOD: Final = 1e-6
"""Degrees by which settings of a family may be worse than the best and still be listed."""


@dataclass(frozen=True)
class Setting:
    """Dial readings that bring the target to where it is wanted.

    Attributes:
        dials: one per axis, degrees.
        travel: the sum of the ways from zero, degrees.
        level_off: angle of the second direction from where it is wanted, degrees; None where none was asked for.
    """

    dials: tuple[float, ...]
    travel: float
    level_off: float | None = None


@dataclass(frozen=True)
class Level:
    """A second direction, where it is in the laboratory with the stage at zero, and where it shall be near to."""

    start: FloatArray
    toward: FloatArray


def find_settings(
    axes: Sequence[Axis], start: FloatArray, toward: FloatArray, level: Level | None = None
) -> list[Setting]:
    """All settings within travel of one or two axes; of three the best ones of the family, best first.

    Args:
        axes: from base to head.
        start: unit vector, laboratory, where the target is with the stage at zero.
        toward: unit vector, laboratory, where it is wanted.
        level: with three axes decides among the family; without, the least travel does.
    """

    def judge(dials: tuple[float, ...]) -> float:
        if level is None:
            return measure_travel(axes, dials)
        placed = compute_turn(axes, dials) @ level.start
        return float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(placed, level.toward)), placed @ level.toward)))

    candidates = list(_solve(axes, start, toward))
    if len(axes) == 3:
        known = min((judge(dials) for dials in candidates), default=np.inf)
        candidates += _search_family(axes, start, toward, judge, level, known)
    found: list[tuple[float, ...]] = []
    for dials in sorted(candidates, key=lambda entry: (judge(entry), measure_travel(axes, entry))):
        if all(max(abs(a - b) for a, b in zip(dials, other, strict=True)) > SAME for other in found):
            found.append(dials)
    if len(axes) == 3:
        best = judge(found[0]) if found else 0.0
        found = [dials for dials in found if judge(dials) <= best + AS_GOOD]
    return [Setting(dials, measure_travel(axes, dials), None if level is None else judge(dials)) for dials in found]


def measure_travel(axes: Sequence[Axis], dials: Sequence[float]) -> float:
    """Σ |dial − zero|, degrees."""
    return float(sum(abs(dial - axis.zero) for axis, dial in zip(axes, dials, strict=True)))


def measure_sensitivity(axes: Sequence[Axis], dials: Sequence[float], toward: FloatArray) -> FloatArray:
    """Degrees by which the target tilts for a degree of each axis: the sine between them, shape (n,)."""
    sines: FloatArray = np.linalg.norm(np.cross(find_axes_in_lab(axes, dials), toward), axis=-1)
    return sines


def _solve(axes: Sequence[Axis], start: FloatArray, toward: FloatArray) -> Iterable[tuple[float, ...]]:
    """Isolated settings: of one or two axes all, of three those in which one dial stands at zero or at an end."""
    if len(axes) == 1:
        yield from _solve_one(axes[0], start, toward)
    elif len(axes) == 2:
        yield from _solve_two(axes[0], axes[1], start, toward)
    else:
        for place in range(3):
            axis = axes[place]
            for dial in sorted({min(max(axis.zero, axis.low), axis.high), axis.low, axis.high}):
                yield from _solve_with(axes, place, dial, start, toward)


def _solve_with(
    axes: Sequence[Axis], place: int, dial: float, start: FloatArray, toward: FloatArray
) -> Iterable[tuple[float, ...]]:
    """Settings of three axes with one dial held."""
    held = turn_about(axes[place].vector, axes[place].find_angle(dial))
    if place == 0:
        for second, third in _solve_two(axes[1], axes[2], start, held.T @ toward):
            yield dial, second, third
    elif place == 1:
        moved = Axis(axes[2].name, held @ axes[2].vector, axes[2].low, axes[2].high, axes[2].zero, axes[2].sense)
        for first, third in _solve_two(axes[0], moved, held @ start, toward):
            yield first, dial, third
    else:
        for first, second in _solve_two(axes[0], axes[1], held @ start, toward):
            yield first, second, dial


def _solve_one(axis: Axis, start: FloatArray, toward: FloatArray) -> Iterable[tuple[float, ...]]:
    if abs(float(axis.vector @ start - axis.vector @ toward)) > REACHED:
        return
    dial = _read(axis, start, toward)
    if dial is not None and _reaches([axis], (dial,), start, toward):
        yield (dial,)


def _solve_two(first: Axis, second: Axis, start: FloatArray, toward: FloatArray) -> Iterable[tuple[float, ...]]:
    """Where the cone of ``start`` about the second axis meets the cone of ``toward`` about the first."""
    between = float(first.vector @ second.vector)
    across = np.cross(first.vector, second.vector)
    square = float(across @ across)
    if square < EXACT**2:
        yield from _solve_parallel(first, second, start, toward)
        return
    one, two = float(first.vector @ toward), float(second.vector @ start)
    alpha = (one - between * two) / square
    beta = (two - between * one) / square
    middle = alpha * first.vector + beta * second.vector
    rest = 1.0 - float(middle @ middle)
    if rest < -1e-12:
        return
    height = np.sqrt(max(rest, 0.0) / square)
    for sign in (1.0, -1.0) if height > 1e-9 else (1.0,):
        between_them = middle + sign * height * across
        between_them /= np.linalg.norm(between_them)
        for dials in _combine(first, second, start, between_them, toward):
            if _reaches([first, second], dials, start, toward):
                yield dials


def _combine(
    first: Axis, second: Axis, start: FloatArray, middle: FloatArray, toward: FloatArray
) -> Iterable[tuple[float, float]]:
    one, two = _read(first, middle, toward), _read(second, start, middle)
    if one is not None and two is not None:
        yield one, two


def _solve_parallel(first: Axis, second: Axis, start: FloatArray, toward: FloatArray) -> Iterable[tuple[float, ...]]:
    """Two axes along one line turn together: one of them stands at its zero or at an end of its travel."""
    for place, (held, free) in enumerate(((first, second), (second, first))):
        for dial in sorted({min(max(held.zero, held.low), held.high), held.low, held.high}):
            turn = turn_about(held.vector, held.find_angle(dial))
            if place == 0:
                for (other,) in _solve_one(free, start, turn.T @ toward):
                    yield dial, other
            else:
                for (other,) in _solve_one(free, turn @ start, toward):
                    yield other, dial


def _read(axis: Axis, start: FloatArray, end: FloatArray) -> float | None:
    """The dial that turns one vector into another about an axis; where any does, the one nearest to zero."""
    flat_start = start - axis.vector * float(axis.vector @ start)
    flat_end = end - axis.vector * float(axis.vector @ end)
    if min(float(np.linalg.norm(flat_start)), float(np.linalg.norm(flat_end))) < EXACT:
        return min(max(axis.zero, axis.low), axis.high)
    angle = np.rad2deg(np.arctan2(axis.vector @ np.cross(flat_start, flat_end), flat_start @ flat_end))
    return axis.read_dial(float(angle))


def _reaches(axes: Sequence[Axis], dials: Sequence[float], start: FloatArray, toward: FloatArray) -> bool:
    placed = compute_turn(axes, dials) @ start
    return bool(placed @ toward > 0 and float(np.linalg.norm(np.cross(placed, toward))) < REACHED)


def _search_family(
    axes: Sequence[Axis],
    start: FloatArray,
    toward: FloatArray,
    judge: Objective,
    level: Level | None,
    known: float,
) -> list[tuple[float, ...]]:
    """Settings at which the family of three axes is stationary and better than what is known, along each dial."""
    found: list[tuple[float, ...]] = []
    for place in range(3):
        grid = _list_dials(axes[place])
        for dials in scan_family(axes, place, grid, start, toward):
            scores = _judge_all(axes, dials, level)
            for low, high, score in _bracket(scores):
                # Between two places of the grid a score can fall by little more than it changes there.
                near = scores[low : high + 1]
                slack = float(np.ptp(near[np.isfinite(near)])) + 1e-9
                if score - slack > min(known, *(judge(entry) for entry in found), np.inf):
                    continue

                def score_at(dial: float, held: int = place) -> tuple[float, tuple[float, ...] | None]:
                    options = [(judge(entry), entry) for entry in _solve_with(axes, held, dial, start, toward)]
                    return min(options, default=(np.inf, None))

                polished = minimize_scalar(
                    lambda dial, look=score_at: min(look(float(dial))[0], 1e6),
                    bounds=(float(grid[low]), float(grid[high])),
                    method="bounded",
                    options={"xatol": 1e-10},
                )
                setting = score_at(float(polished.x))[1]
                if setting is not None:
                    found.append(setting)
    return found


def _list_dials(axis: Axis) -> FloatArray:
    """Dial readings over one turn, or over the travel where that is less."""
    span = min(axis.high - axis.low, 360.0)
    middle = min(max(axis.zero, axis.low + span / 2), axis.high - span / 2)
    return np.linspace(middle - span / 2, middle + span / 2, STEPS)


def _judge_all(axes: Sequence[Axis], dials: FloatArray, level: Level | None) -> FloatArray:
    """What ``find_settings`` judges by, of dials (n, 3); infinite where there is no setting."""
    if level is None:
        scores: FloatArray = np.sum(np.abs(dials - np.array([axis.zero for axis in axes])), axis=1)
    else:
        turns = np.eye(3)
        for place, axis in enumerate(axes):
            angles = axis.sense * (np.nan_to_num(dials[:, place]) - axis.zero)
            turns = turns @ turn_about(axis.vector, angles)
        placed = turns @ level.start
        sines = np.linalg.norm(np.cross(placed, level.toward), axis=-1)
        scores = np.rad2deg(np.arctan2(sines, placed @ level.toward))
    return np.where(np.any(np.isnan(dials), axis=1), np.inf, scores)


def _bracket(scores: FloatArray) -> list[tuple[int, int, float]]:
    """Neighbourhoods of the lowest local minima, at most three, with their scores."""
    padded = np.concatenate([[np.inf], scores, [np.inf]])
    low = np.flatnonzero(np.isfinite(scores) & (scores <= padded[:-2]) & (scores <= padded[2:]))
    chosen = sorted(low.tolist(), key=lambda place: float(scores[place]))[:3]
    return [(max(0, place - 1), min(len(scores) - 1, place + 1), float(scores[place])) for place in chosen]
