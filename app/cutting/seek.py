"""Directions that answer a question: a wanted value, the largest or smallest one, and two such conditions at once."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final, get_args

import numpy as np
import numpy.typing as npt

from app.cutting.level import Extreme, Level, Locus, find_extreme, find_level, find_range, split_symmetric
from app.cutting.meeting import find_constrained, find_range_within, meet
from app.cutting.miscut import compute_slopes
from app.errors import InputError
from app.tensor.values import compute_values

FloatArray = npt.NDArray[np.float64]

CURVE_POINTS: Final = 361
_ORDINALS: Final = ("first", "second")
_EXTREMES: Final[dict[str, str]] = {"max": "largest", "min": "smallest"}


@dataclass(frozen=True)
class Condition:
    """What is wanted of one tensor.

    Attributes:
        matrix: shape (3, 3), crystal frame; only its symmetric part counts.
        target: a value of nᵀAn, or its largest ("max") or smallest ("min").
    """

    matrix: FloatArray
    target: float | Extreme


@dataclass(frozen=True)
class Sought:
    """The directions that meet all conditions.

    Attributes:
        locus: these directions.
        conditions: what was asked.
        curves: closed lines of unit vectors, each (m, 3) with the first point again at the end.
        points: shape (n, 3), unit vectors: all vertices of the curves, one curve after the other, and the isolated
            directions, each with its opposite.
        values: shape (k, conditions), nᵀAn of every condition along each of ``locus.lines``.
        slopes: shape (k, conditions), the largest first-order change of these values per degree of miscut.
        ranges: lowest and highest value of every condition over all directions.
        fraction_below: the part of the sphere where nᵀAn is below a single numeric target; None otherwise.
        level: of a single condition, its cone; None otherwise.
        sentence: the answer in words.
    """

    locus: Locus
    conditions: tuple[Condition, ...]
    curves: tuple[FloatArray, ...]
    points: FloatArray
    values: FloatArray
    slopes: FloatArray
    ranges: tuple[tuple[float, float], ...]
    fraction_below: float | None
    level: Level | None
    sentence: str


def seek(conditions: Sequence[Condition], curve_points: int = CURVE_POINTS) -> Sought:
    """The directions that meet one or two conditions, in the crystal frame.

    - A number: all directions of this value; within 1e-9 of a principal value (as a part of the largest λ − t) it is
      that value.
    - "max", "min": the directions of the largest or smallest value: an axis, a plane or all.
    - Two numbers: the directions of both, among them where cones only touch.
    - A number and an extreme, in either order: of the directions that meet the number those where the other tensor is
      largest or smallest *among them*.
    - Two extremes: the directions that are the extreme of both over the whole sphere; mostly there are none, and the
      sentence says how far apart the two are.

    Args:
        conditions: one or two.
        curve_points: on each curve.

    Raises:
        InputError: no or too many conditions, or a target that is none.
    """
    if not 1 <= len(conditions) <= 2:
        raise InputError("One or two conditions can be met at once.", field="conditions")
    for index, condition in enumerate(conditions):
        _check_target(condition.target, f"conditions[{index}].target")
    level = _find_level(conditions[0])
    if len(conditions) == 1:
        locus = level.locus
        sentence = _say_one(conditions[0], level)
    else:
        locus, sentence = _seek_two(conditions[0], conditions[1])
    curves = tuple(conic.thin(curve_points) for conic in locus.conics)
    both_ways = np.stack([locus.lines, -locus.lines], axis=1).reshape(-1, 3) + 0.0
    single = len(conditions) == 1
    return Sought(
        locus=locus,
        conditions=tuple(conditions),
        curves=curves,
        points=np.concatenate([*curves, both_ways]),
        values=compute_all_values(conditions, locus.lines),
        slopes=np.stack([compute_slopes(condition.matrix, locus.lines) for condition in conditions], axis=-1),
        ranges=tuple(find_range(condition.matrix) for condition in conditions),
        fraction_below=level.fraction_below if single and not isinstance(conditions[0].target, str) else None,
        level=level if single else None,
        sentence=sentence,
    )


def compute_all_values(conditions: Sequence[Condition], directions: FloatArray) -> FloatArray:
    """The values of every condition, shape (..., conditions), along unit vectors (..., 3)."""
    return np.stack([compute_values(condition.matrix, directions) for condition in conditions], axis=-1)


def _check_target(target: float | str, field: str) -> None:
    if isinstance(target, str):
        if target not in get_args(Extreme):
            raise InputError(f"A target cannot be “{target}”.", field=field, hint='It is a number, "max" or "min".')
    elif not np.isfinite(target):
        raise InputError("A target is a finite number.", field=field, hint='Give a number, "max" or "min".')


def _find_level(condition: Condition) -> Level:
    if condition.target == "max" or condition.target == "min":
        return find_extreme(condition.matrix, condition.target)
    return find_level(condition.matrix, float(condition.target))


def _seek_two(one: Condition, other: Condition) -> tuple[Locus, str]:
    levels = _find_level(one), _find_level(other)
    for condition, level, ordinal in zip((one, other), levels, _ORDINALS, strict=True):
        if level.locus.is_empty:
            return level.locus, f"The {ordinal} condition cannot be met. {_say_one(condition, level)}"
    numeric = [not isinstance(condition.target, str) for condition in (one, other)]
    if numeric[0] != numeric[1]:
        number = 0 if numeric[0] else 1
        wanted = (other, one)[number]
        assert wanted.target == "max" or wanted.target == "min"
        locus = find_constrained(levels[number], wanted.matrix, wanted.target)
        low, high = _find_values_within(levels[number].locus, wanted.matrix)
        found = high if wanted.target == "max" else low
        where = f"Where the {_ORDINALS[number]} has the value {(one, other)[number].target:.6g}"
        what = f"the {_EXTREMES[wanted.target]} of the {_ORDINALS[1 - number]} is {found:.6g}"
        return locus, f"{where}, {what}, {_describe(locus)}."
    locus = meet(*levels)
    if not locus.is_empty:
        what = "both values" if numeric[0] else "both extremes"
        return locus, f"The directions of {what}: {_describe(locus)}."
    if numeric[0]:
        low, high = _find_values_within(levels[0].locus, other.matrix)
        return locus, (
            f"No direction has both values: where the first is {one.target:.6g}, the second lies between {low:.6g} and "
            f"{high:.6g}."
        )
    gap = _measure_gap(levels[0], levels[1])
    return locus, (
        f"No direction is the {_EXTREMES[str(one.target)]} of the first and the {_EXTREMES[str(other.target)]} of the "
        f"second at once: these are {gap:.4g}° apart. With a number for one of the two, the extreme of the other among "
        "the directions of that number is found."
    )


def _find_values_within(locus: Locus, matrix: FloatArray) -> tuple[float, float]:
    scale, deviator, mean = split_symmetric(matrix)
    low, high = find_range_within(locus, deviator)
    return (low + mean) * scale, (high + mean) * scale


def _measure_gap(one: Level, other: Level) -> float:
    """The angle in degrees between two extremes, each a line or a plane, at least one of them a line."""
    if not len(one.locus.lines):
        one, other = other, one
    line = one.locus.lines[0]
    if other.locus.tracks:
        return float(other.locus.tracks[0].find_distances(line[None])[0])
    across = float(np.linalg.norm(np.cross(line, other.locus.lines[0])))
    return float(np.rad2deg(np.arctan2(across, abs(float(line @ other.locus.lines[0])))))


def _say_one(condition: Condition, level: Level) -> str:
    low, high = find_range(condition.matrix)
    target = condition.target
    if level.locus.everywhere:
        return f"Every direction has the value {high:.6g}."
    if isinstance(target, str):
        value = high if target == "max" else low
        return f"The {_EXTREMES[target]} value is {value:.6g}, {_describe(level.locus)}."
    if level.locus.is_empty:
        if not np.any(split_symmetric(condition.matrix)[1]):
            return f"No direction has the value {target:.6g}: it is {high:.6g} along every one."
        return f"No direction has the value {target:.6g}: it lies between {low:.6g} and {high:.6g}."
    return f"The value {target:.6g} is taken {_describe(level.locus)}."


def _describe(locus: Locus) -> str:
    if locus.everywhere:
        return "along every direction"
    planes = sum(track.is_great_circle for track in locus.tracks)
    parts = []
    if planes:
        parts.append("in one plane" if planes == 1 else "in two planes")
    if len(locus.tracks) > planes:
        parts.append("on a cone")
    if count := len(locus.lines):
        parts.append("along one line" if count == 1 else f"along {count} lines")
    return " and ".join(parts)
