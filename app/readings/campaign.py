"""Which bars to cut next, and what the tensor will be known to afterwards."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.errors import InputError
from app.readings.candidates import Candidates, name_vectors
from app.readings.criterion import Criterion, build_criterion
from app.readings.exchange import choose_rows, order_by_gain
from app.readings.gain import Gain, build_gain
from app.readings.information import (
    Outlook,
    Rows,
    build_planned_rows,
    build_rows,
    check_sigma,
    measure_outlook,
    needs_values,
    resolve_taken,
)
from app.readings.prediction import is_meaningful
from app.readings.reading import Reading
from app.readings.reading_set import ReadingSet
from app.readings.sphere import Sphere, measure, refine
from app.readings.unbiased import MOST_DIRECTIONS, settle_on_quantity
from app.readings.unseen import Unseen, describe_unseen
from app.tensor.form import Form, build_form
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

MAX_ADD: Final = 64
_FEW: Final = 16
"""Up to it, choosing on the sphere is tried from two starts."""


@dataclass(frozen=True)
class Plan:
    """What is taken, what could be taken, and how good each reading is.

    Attributes:
        crystal, form: of the tensor.
        matrix: shape (3, 3), the tensor at which tilts, rods, sheets and batches are judged; None where not given.
        taken: the readings there are.
        taken_rows: their rows.
        candidates: directions of readings to come.
        candidate_rows: their rows, each reading ``along`` a bar of its own.
        sigma: standard deviation of a reading to come.
        direction_sigma: of each component of its bar's turn, degrees.
    """

    crystal: Crystal
    form: Form
    matrix: FloatArray | None
    taken: ReadingSet
    taken_rows: Rows
    candidates: Candidates
    candidate_rows: Rows
    sigma: float
    direction_sigma: float

    def see(self, vectors: FloatArray) -> Rows:
        """Rows of readings along unit vectors (m, 3)."""
        return build_planned_rows(self.form, vectors, self.known_matrix, self.sigma, self.direction_sigma)

    @cached_property
    def digest(self) -> Rows:
        """What is taken in few rows, for questions that are asked many times."""
        return self.taken_rows.digest()

    def judge(self, rows: Rows) -> Outlook:
        """What the taken readings with further rows would know."""
        return measure_outlook(self.form, self.digest.join(rows), self.sigma)

    @property
    def known_matrix(self) -> FloatArray:
        """The tensor where it is given, else zero, which then has no effect."""
        return np.zeros((3, 3)) if self.matrix is None else self.matrix

    def read_criterion(self, given: Any) -> Criterion:
        """The criterion that was asked for, in this plan's form."""
        return build_criterion(self.form, given, self.matrix)


@dataclass(frozen=True)
class Campaign:
    """A proposal of the next bars.

    Attributes:
        form: the allowed cells.
        criterion: by which was chosen.
        chosen: directions, repeats allowed, each next one helping most after those before it.
        vectors: shape (N, 3), the same as unit vectors in the crystal frame.
        steps: the criterion's value after the first, the first two, … of them; None while undetermined.
        value: the criterion's value after all; None where undetermined.
        before, after: what the readings know without and with the chosen ones.
        undetermined: what stays unseen after all.
        notes: sentences that the answer must be read with.
    """

    form: Form
    criterion: Criterion
    chosen: tuple[Direction, ...]
    vectors: FloatArray
    steps: tuple[float | None, ...]
    value: float | None
    before: Outlook
    after: Outlook
    undetermined: tuple[Unseen, ...]
    notes: tuple[str, ...]


def build_plan(
    crystal: Crystal,
    kind: Kind,
    taken: Sequence[Reading],
    candidates: Candidates,
    sigma: float,
    *,
    matrix: FloatArray | None = None,
    direction_sigma: float = 0.0,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> Plan:
    """Lay out what is taken and what could be.

    Args:
        crystal, kind: of the tensor.
        taken: readings that are there; values may be absent and are not looked at. Where none carries a sigma, each
            is taken to be as good as the ones to come.
        candidates: directions of readings to come.
        sigma: standard deviation of each reading to come, in the unit of the tensor.
        matrix: shape (3, 3), crystal frame, the tensor as far as it is known; needed where tilts, rods, sheets or
            batches make the information depend on it.
        direction_sigma: standard deviation of each component of a new bar's random turn, degrees.
        batches: name → relative standard deviation of the calibration that taken readings share.
        pose: for taken directions in the specimen frame.

    Raises:
        InputError: readings or standard deviations that are wrong, a tensor without any free cell, or one whose
            values are needed and not given.
    """
    check_sigma(sigma, direction_sigma)
    form = build_form(crystal, kind)
    if form.count == 0:
        raise InputError(
            "Symmetry holds every cell of this tensor at zero, so there is nothing to measure.",
            field="tensor",
            hint="Check the group, the parity and the inner symmetry.",
        )
    resolved = resolve_taken(crystal, kind, taken, sigma, batches=batches, pose=pose)
    why = needs_values(resolved)
    if why is None and direction_sigma > 0.0:
        why = "what a tilt does to a reading depends on them"
    if why is not None and matrix is None:
        raise InputError(
            f"The tensor's values are needed here, because {why}.",
            field="tensor",
            hint="Give its matrix or free cells: a first estimate, for example of a fit of the readings there are.",
        )
    known = np.zeros((3, 3)) if matrix is None else matrix
    if not is_meaningful(resolved, known):
        raise InputError(
            "Among the taken readings are rods or sheets, and the tensor has a principal value that is not positive.",
            field="tensor",
            hint="Check the tensor's values, or which readings are rods or sheets.",
        )
    taken_rows = build_rows(form, resolved, known, sigma)
    candidate_rows = build_planned_rows(form, candidates.vectors, known, sigma, direction_sigma)
    return Plan(crystal, form, matrix, resolved, taken_rows, candidates, candidate_rows, sigma, direction_sigma)


def plan_campaign(plan: Plan, criterion: Criterion, add: int) -> Campaign:
    """Choose the next ``add`` readings.

    While the taken readings leave something undetermined, what adds to the rank comes first. Among choices of the
    same rank the criterion decides. No single exchange of a chosen direction for another candidate improves it by
    more than a part of 1e-10; the same call always has the same answer.

    Raises:
        InputError: ``add`` out of range, or candidates that see nothing.
    """
    if not 0 <= add <= MAX_ADD:
        raise InputError(f"{add} readings are asked for.", field="add", hint=f"Ask for 0 to {MAX_ADD} at once.")
    chosen, vectors = _choose(plan, criterion, add)
    rows = plan.see(vectors)
    before = measure_outlook(plan.form, plan.taken_rows, plan.sigma)
    after = measure_outlook(plan.form, plan.taken_rows.join(rows), plan.sigma)
    steps = tuple(
        criterion.value(after if count == add else plan.judge(rows.pick(range(count)))) for count in range(1, add + 1)
    )
    return Campaign(
        form=plan.form,
        criterion=criterion,
        chosen=chosen,
        vectors=vectors,
        steps=steps,
        value=criterion.value(after),
        before=before,
        after=after,
        undetermined=describe_unseen(plan.crystal, plan.form, after.unseen) if not after.determined else (),
        notes=_write_notes(plan, criterion, after),
    )


def _choose(plan: Plan, criterion: Criterion, add: int) -> tuple[tuple[Direction, ...], FloatArray]:
    if add == 0:
        return (), np.zeros((0, 3))
    gain = build_gain(plan.taken_rows, plan.candidate_rows, criterion)
    if not plan.candidates.continuous:
        picked = choose_rows(gain, add)
        return tuple(plan.candidates.directions[position] for position in picked), plan.candidates.vectors[picked]
    sphere = build_sphere(plan, gain)
    best: FloatArray | None = None
    for starts in (None, 0) if add <= _FEW else (None,):
        vectors = refine(sphere, plan.candidates.vectors[choose_rows(gain, add, starts)])
        if best is None or measure(sphere, vectors) < measure(sphere, best) - 1e-10:
            best = vectors
    assert best is not None
    best = _settle(plan, criterion, sphere, best)
    order = order_by_gain(_gain_of(plan, gain, best), list(range(add)))
    named = name_vectors(best[order])
    return named.directions, named.vectors


def _settle(plan: Plan, criterion: Criterion, sphere: Sphere, vectors: FloatArray) -> FloatArray:
    """For one cell, directions that see that cell alone where this is no worse."""
    outlook = plan.judge(plan.see(vectors))
    if criterion.kind != "cell" or len(vectors) > MOST_DIRECTIONS or (outlook.condition or np.inf) < 1e3:
        return vectors
    functional = sphere.gain.transform.T @ criterion.functionals[:, 0]
    settled = settle_on_quantity(sphere.see, sphere.gain.start, functional, vectors)
    before, after = criterion.value(outlook), criterion.value(plan.judge(plan.see(settled)))
    return vectors if after is None or (before is not None and after > before * (1.0 + 1e-10)) else settled


def build_sphere(plan: Plan, gain: Gain) -> Sphere:
    """The plan over all directions, ``gain`` being the same over its grid."""

    def see(vectors: FloatArray) -> FloatArray:
        rows: FloatArray = plan.see(vectors).whitened @ gain.transform
        return rows

    return Sphere(gain, plan.candidates.vectors, see)


def _gain_of(plan: Plan, gain: Gain, vectors: FloatArray) -> Gain:
    rows = plan.see(vectors).whitened @ gain.transform
    return Gain(gain.transform, gain.start, rows, gain.mode, gain.metric, gain.rest, rows @ gain.rest)


def _write_notes(plan: Plan, criterion: Criterion, after: Outlook) -> tuple[str, ...]:
    if after.determined:
        return ()
    notes = []
    if criterion.kind in ("cell", "axis") and criterion.value(after) is not None:
        notes.append(f"They tell {criterion.name}, which was asked for, and not the whole tensor.")
    everything = plan.judge(plan.candidate_rows)
    if everything.determined:
        missing = plan.form.count - after.rank
        more = "one more reading is" if missing == 1 else f"{missing} more readings are"
        notes.append(
            f"These readings see {after.rank} of {plan.form.count} independent cells; at least {more} needed before "
            "there is a tensor."
        )
    else:
        count = plan.form.count - everything.rank
        part = "one combination of cells" if count == 1 else f"{count} combinations of cells"
        notes.append(
            f"No number of readings along these candidates, with those taken, sees {part} of {plan.form.count}, so "
            "they do not determine the tensor."
        )
        if plan.form.kind.intrinsic != "symmetric":
            notes.append(
                "A reading along a direction never sees the antisymmetric part: readings across, or differences of "
                "them, do."
            )
    return tuple(notes)
