"""Choosing N of many candidates, repeats allowed, until no single exchange improves the choice.

V. V. Fedorov, Theory of Optimal Experiments (1972), for exchange; R. K. Meyer and C. J. Nachtsheim, Technometrics 37
(1995) 60, for going through the chosen one by one. A greedy start and seeded random starts are each exchanged until
nothing improves; the best is kept, and of equal candidates always the first, so the same call has the same answer.
"""

from __future__ import annotations

from typing import Final

import numpy as np
import numpy.typing as npt

from app.readings.gain import COARSE_FLOOR, FLOOR, NO_FLOOR, Gain

FloatArray = npt.NDArray[np.float64]

IMPROVEMENT: Final = 1e-10
"""Smallest relative improvement of the criterion that an exchange is made for."""

TIE: Final = 1e-11
"""Candidates whose criteria differ by less, relatively, are equal, and the first of them is taken."""

SEED: Final = 20_240_607
MAX_SWEEPS: Final = 100
_WORK: Final = 1_500_000
"""Candidates times picks times starts, about: what bounds the number of random starts."""


def choose_rows(gain: Gain, add: int, starts: int | None = None) -> list[int]:
    """Positions of ``add`` candidates, in the order in which each next one helps most.

    Args:
        gain: the problem.
        add: how many.
        starts: random starts beside the greedy one; by default as many as time allows, 4 to 24.

    Returns:
        A choice that no single exchange for another candidate improves by more than 1e-10 of the criterion (of the
        determinant itself for D).
    """
    if add == 0:
        return []
    count = len(gain.rows)
    if starts is None:
        starts = int(np.clip(_WORK // (count * add), 4, 24))
    rng = np.random.default_rng(SEED)
    best = improve(gain, extend(gain, [], add))
    best_value = _measure(gain, best)
    for _ in range(starts):
        tried = improve(gain, rng.integers(count, size=add).tolist())
        value = _measure(gain, tried)
        if value < best_value - IMPROVEMENT:
            best, best_value = tried, value
    if is_full(gain, best):
        best = best if gain.mode == "part" else improve(gain, best, NO_FLOOR)
    elif gain.mode == "sum":
        # What stays unseen outweighs all else in the sum; this lets the rest be told apart.
        best = improve(gain, best, COARSE_FLOOR)
    return order_by_gain(gain, best)


def extend(gain: Gain, chosen: list[int], add: int) -> list[int]:
    """The choice and ``add`` more, each the best next one."""
    longer = list(chosen)
    for _ in range(add):
        longer.append(find_first(gain.rate(gain.hold(gain.rows[longer]), FLOOR)))
    return longer


def improve(gain: Gain, chosen: list[int], floor: float = FLOOR) -> list[int]:
    """Exchange one at a time for the best other candidate until a whole round finds nothing better."""
    current = list(chosen)
    for _ in range(MAX_SWEEPS):
        changed = False
        for candidate in sorted(set(current)):
            # Repeats are alike, so one of them speaks for all.
            place = current.index(candidate)
            others = current[:place] + current[place + 1 :]
            rated = gain.rate(gain.hold(gain.rows[others]), floor)
            better = find_first(rated)
            if rated[better] < rated[candidate] - IMPROVEMENT:
                current[place] = better
                changed = True
        if not changed:
            break
    return current


def find_first(rated: FloatArray) -> int:
    """Position of the smallest, the first of equal ones."""
    return int(np.argmax(rated <= np.min(rated) + TIE))


def is_full(gain: Gain, chosen: list[int]) -> bool:
    """Whether a choice sees all that taken readings and candidates can see."""
    sizes = np.linalg.svd(gain.hold(gain.rows[chosen]), compute_uv=False)
    return bool(sizes[-1] > np.sqrt(FLOOR) * 10.0)


def order_by_gain(gain: Gain, chosen: list[int]) -> list[int]:
    """The same choice, each next one helping most after those before it."""
    left, ordered = sorted(chosen), list[int]()
    while left:
        held = gain.hold(gain.rows[ordered])
        rated = gain.rate_rows(held, gain.rows[left], gain.rest_rows[left], FLOOR)
        ordered.append(left.pop(find_first(rated)))
    return ordered


def _measure(gain: Gain, chosen: list[int]) -> float:
    return gain.measure(gain.hold(gain.rows[chosen]), FLOOR)[0]
