"""Questions about a plan: what each candidate would bring, what a broken bar would cost, how many more are needed."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.direction import Direction
from app.errors import InputError
from app.readings.campaign import Plan
from app.readings.criterion import Criterion
from app.readings.exchange import choose_rows, extend
from app.readings.gain import FLOOR, build_gain
from app.readings.information import Outlook, Rows, build_rows, measure_outlook, renamed
from app.readings.reading_set import ReadingSet

FloatArray = npt.NDArray[np.float64]

MOST_BARS: Final = 200
MOST_READINGS: Final = 500
_ATTEMPTS: Final = 4
_EXCHANGED: Final = 64
"""Up to so many readings a greedy count is tried to be made smaller by exchange."""


@dataclass(frozen=True)
class Ranked:
    """One candidate, if it alone were added.

    Attributes:
        position: among the candidates.
        gain: natural logarithm by which the criterion improves.
        value: the criterion afterwards; None where undetermined.
        after: what would be known.
    """

    position: int
    gain: float
    value: float | None
    after: Outlook


@dataclass(frozen=True)
class Loss:
    """What is left without one bar.

    Attributes:
        readings: positions among the taken ones that go with the bar.
        chosen: position among the chosen ones, each on a bar of its own; None for a taken bar.
        value: the criterion without it; None where undetermined.
        left: what would be known.
    """

    readings: tuple[int, ...]
    chosen: int | None
    value: float | None
    left: Outlook


@dataclass(frozen=True)
class Need:
    """How many more readings bring a cell to a standard deviation.

    Attributes:
        count: None where the cell is never seen or more than MOST_READINGS are needed.
        directions: each with how many readings.
        sigma: what is then reached; None where ``count`` is.
        sentence: the same in words.
    """

    count: int | None
    directions: tuple[tuple[Direction, int], ...]
    sigma: float | None
    sentence: str


def rank_candidates(plan: Plan, criterion: Criterion, most: int) -> tuple[Ranked, ...]:
    """The best single candidates, best first; of equal ones the earlier in the list first.

    Raises:
        InputError: candidates that see nothing.
    """
    gain = build_gain(plan.taken_rows, plan.candidate_rows, criterion)
    held = gain.hold(gain.rows[:0])
    rated = gain.rate(held, FLOOR)
    before = gain.measure(held, FLOOR)[0]
    # Rounding must not decide between equals.
    order = np.lexsort((np.arange(len(rated)), np.round(rated, 9)))[:most]
    found = []
    for position in order.tolist():
        after = plan.judge(plan.candidate_rows.pick([position]))
        found.append(Ranked(position, float(before - rated[position]), criterion.value(after), after))
    return tuple(found)


def list_losses(plan: Plan, criterion: Criterion, chosen: FloatArray) -> tuple[Loss, ...]:
    """What would be left if any one bar broke: of the taken bars in order, then of the chosen directions (N, 3).

    Raises:
        InputError: more than MOST_BARS bars.
    """
    numbers, firsts = np.unique(plan.taken.bars, return_index=True)
    if len(numbers) > MOST_BARS:
        raise InputError(
            f"The taken readings are on {len(numbers)} bars; the loss of each is told for at most {MOST_BARS}.",
            field="losses",
            hint="Ask for the loss of fewer, or name the bars of readings that share one.",
        )
    added = plan.see(chosen)
    found = []
    for number in numbers[np.argsort(firsts)]:
        kept = plan.taken.bars != number
        rows = build_rows(plan.form, _pick_readings(plan.taken, kept), plan.known_matrix, plan.sigma)
        gone = tuple(int(place) for place in np.flatnonzero(~kept))
        found.append(_describe_loss(plan, criterion, rows.join(added), gone, None))
    for position in range(len(chosen)):
        others = added.pick(np.delete(np.arange(len(chosen)), position))
        found.append(_describe_loss(plan, criterion, plan.taken_rows.join(others), (), position))
    return tuple(found)


def _describe_loss(plan: Plan, criterion: Criterion, rows: Rows, readings: tuple[int, ...], chosen: int | None) -> Loss:
    left = measure_outlook(plan.form, rows, plan.sigma)
    return Loss(readings, chosen, criterion.value(left), left)


def _pick_readings(readings: ReadingSet, kept: npt.NDArray[np.bool_]) -> ReadingSet:
    assert readings.sigma is not None
    return replace(
        readings,
        kinds=readings.kinds[kept],
        first=readings.first[kept],
        second=readings.second[kept],
        values=readings.values[kept],
        sigma=readings.sigma[kept],
        turn_sigma=readings.turn_sigma[kept],
        bars=readings.bars[kept],
        batches=readings.batches[kept],
    )


def count_needed(plan: Plan, label: str, goal: float) -> Need:
    """How many more readings along the candidates bring a cell's σ to ``goal``, and which.

    Chosen one after the other, each where it helps that cell most; up to 64 of them the number is then made smaller as
    long as exchange finds fewer that are enough, so it is a number that is enough and seldom more than the least.

    Args:
        plan: with its candidates; of the whole sphere, its grid.
        label: of the cell.
        goal: the standard deviation to reach, in the unit of the tensor.

    Raises:
        InputError: a cell that is none or zero by symmetry, or a goal that is not positive.
    """
    if not (np.isfinite(goal) and goal > 0.0):
        raise InputError("The standard deviation to reach is a positive number.", field="goal.sigma")
    with renamed("criterion", "goal"):
        criterion = plan.read_criterion({"cell": label})
    reached = _reach(plan, criterion, [])
    if reached is not None and reached <= goal:
        return Need(0, (), reached, f"The cell {label} is already known to {reached:.3g}: no more readings are needed.")
    gain = build_gain(plan.taken_rows, plan.candidate_rows, criterion)
    if not plan.judge(plan.candidate_rows).sees(criterion.functionals)[0]:
        return Need(None, (), None, f"No reading along these candidates sees the cell {label}.")
    chosen: list[int] = []
    while len(chosen) < MOST_READINGS and (reached is None or reached > goal):
        chosen = extend(gain, chosen, 1)
        reached = _reach(plan, criterion, chosen)
    if reached is None or reached > goal:
        return Need(
            None, (), None, f"More than {MOST_READINGS} readings would be needed to know the cell {label} to {goal:g}."
        )
    for _ in range(_ATTEMPTS):
        if not 1 < len(chosen) <= _EXCHANGED:
            break
        fewer = choose_rows(gain, len(chosen) - 1, starts=2)
        enough = _reach(plan, criterion, fewer)
        if enough is None or enough > goal:
            break
        chosen, reached = fewer, enough
    counted = {position: chosen.count(position) for position in sorted(set(chosen))}
    directions = tuple((plan.candidates.directions[position], count) for position, count in counted.items())
    readings = "1 more reading brings" if len(chosen) == 1 else f"{len(chosen)} more readings bring"
    return Need(len(chosen), directions, reached, f"{readings} the cell {label} to {reached:.3g}.")


def _reach(plan: Plan, criterion: Criterion, chosen: list[int]) -> float | None:
    variance = criterion.value(plan.judge(plan.candidate_rows.pick(chosen)))
    return None if variance is None else float(np.sqrt(variance))
