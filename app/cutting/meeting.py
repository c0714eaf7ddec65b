"""Directions that meet two conditions at once.

Two cones without a common vertex line meet in at most four lines; they may touch, share a whole curve, or degenerate to
planes and single lines. Of the two the better parametrised one carries the search.
"""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from app.cutting.level import EQUAL, SAME_LINE, Extreme, Level, Locus, find_extreme, split_symmetric
from app.cutting.track import Track

FloatArray = npt.NDArray[np.float64]

TOUCH: Final = 1e-12
"""Two cones touch where the value of the second comes this near to its target along the first, as a part of λ − t."""

_POLISHES: Final = 3


def meet(one: Level, other: Level) -> Locus:
    """The directions that are in both levels."""
    if one.locus.is_empty or other.locus.everywhere:
        return one.locus
    if other.locus.is_empty or one.locus.everywhere:
        return other.locus
    carrier, crossed = sorted((one, other), key=_rank)
    if len(carrier.locus.lines):
        values = np.einsum("ka,ab,kb->k", carrier.locus.lines, crossed.form, carrier.locus.lines)
        return Locus((), carrier.locus.lines[np.abs(values) <= EQUAL])
    tracks: list[Track] = []
    lines: list[FloatArray] = []
    for track in carrier.locus.tracks:
        chosen = track.choose(crossed.form, 0.0, TOUCH)
        if chosen.whole:
            tracks.append(track)
        lines += [_polish(point, carrier.form, crossed.form) for point in chosen.points]
    return collect(tracks, lines)


def _rank(level: Level) -> tuple[int, float]:
    """Lines before planes before cones, of cones the rounder first."""
    if len(level.locus.lines):
        return 0, 0.0
    track = level.locus.tracks[0]
    return (1, 0.0) if track.is_great_circle else (2, -track.roundness)


def find_constrained(level: Level, matrix: FloatArray, extreme: Extreme) -> Locus:
    """The directions of a level along which another tensor (3, 3) has its largest or smallest value among them all."""
    _, deviator, _ = split_symmetric(matrix)
    size = float(np.max(np.abs(deviator)))
    if size == 0.0 or not level.locus.tracks:
        return find_extreme(matrix, extreme).locus if level.locus.everywhere else level.locus
    form = deviator / size
    low, high = find_range_within(level.locus, form)
    wanted = high if extreme == "max" else low
    tracks: list[Track] = []
    lines: list[FloatArray] = []
    for track in level.locus.tracks:
        chosen = track.choose(form, wanted, TOUCH)
        if chosen.whole:
            tracks.append(track)
        lines += list(chosen.points)
    return collect(tracks, lines)


def find_range_within(locus: Locus, form: FloatArray) -> tuple[float, float]:
    """Lowest and highest value of a symmetric form (3, 3) among the directions of a locus that is not empty."""
    if locus.everywhere:
        values = np.linalg.eigvalsh(form)
        return float(values[0]), float(values[2])
    ranges = [track.find_range(form) for track in locus.tracks]
    ranges += [(value, value) for value in np.einsum("ka,ab,kb->k", locus.lines, form, locus.lines).tolist()]
    return min(low for low, _ in ranges), max(high for _, high in ranges)


def collect(tracks: list[Track], lines: list[FloatArray]) -> Locus:
    """A locus in which every line stands once, the larger value of its first component leading, none on a curve."""
    kept: list[FloatArray] = []
    for line in lines:
        alone = all(np.linalg.norm(np.cross(line, other)) > SAME_LINE for other in kept)
        if alone and all(track.find_distances(line[None])[0] > np.rad2deg(SAME_LINE) for track in tracks):
            kept.append(_turn_positive(line))
    kept.sort(key=lambda line: (-np.round(line, 9)).tolist())
    return Locus(tuple(tracks), np.array(kept).reshape(-1, 3))


def _turn_positive(line: FloatArray) -> FloatArray:
    """The one of two opposite vectors whose first component of any size is positive."""
    first = line[int(np.argmax(np.abs(line) > 1e-9))]
    return (line if first > 0.0 else -line) + 0.0


def _polish(point: FloatArray, first: FloatArray, second: FloatArray) -> FloatArray:
    """A unit vector moved onto the lines where both forms vanish, by steps of Gauss and Newton across itself."""
    forms = np.array([first, second])

    def miss(vector: FloatArray) -> FloatArray:
        values: FloatArray = forms @ vector @ vector
        return values

    for _ in range(_POLISHES):
        across = 2.0 * (forms @ point) @ (np.eye(3) - np.outer(point, point))
        # Where cones touch only one combination of the two is known to first order.
        step = np.linalg.pinv(across, rcond=1e-6) @ miss(point)
        moved = point - step
        moved = moved / np.linalg.norm(moved)
        if np.max(np.abs(miss(moved))) >= np.max(np.abs(miss(point))):
            break
        point = moved
    return point
