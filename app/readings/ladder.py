"""Does the crystal agree with its claimed symmetry? Every form that the cell leaves room for, tested on the readings.

Each rung is fitted to the same readings and tested against no restriction at all, with V held at its own fit, as the
claim is. With several rungs some will look refuted by chance, so p is corrected for their number (S. Holm, Scand. J.
Statist. 6 (1979) 65). It refutes orientations and never confirms a class: a tensor of the readings may always have a
symmetry that the crystal lacks.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.group import find_group
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.readings.rungs import SAME_FORM, Rung, list_rungs
from app.tensor.form import average_group, build_form
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

LEVEL: Final = 0.05
Verdict = Literal["refuted", "not refuted", "cannot tell"]


@dataclass(frozen=True)
class RungTest:
    """A rung and what the readings say of it.

    Attributes:
        rung: the form.
        claimed: whether it is the form of the crystal's own group.
        chi2, dof: of the fit under this form; None where the readings do not determine it.
        delta_chi2, delta_dof: what χ² loses when the restriction is given up, and by how many combinations.
        p_value: of so much or more if the restriction holds; None where the readings cannot tell.
        corrected: the same for the number of rungs tested.
        verdict: at the 5 % level, of the corrected p.
    """

    rung: Rung
    claimed: bool
    chi2: float | None
    dof: int | None
    delta_chi2: float | None
    delta_dof: int | None
    p_value: float | None
    corrected: float | None
    verdict: Verdict


@dataclass(frozen=True)
class Ladder:
    """All rungs, from the least to the most restricted, and the result in one sentence."""

    rungs: tuple[RungTest, ...]
    sentence: str


def climb_ladder(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> Ladder:
    """Test every form that the cell leaves room for.

    Raises:
        InputError: as ``fit_readings`` and ``list_rungs`` do.
    """
    rungs = list_rungs(crystal, kind)
    claimed = average_group(build_form(crystal, kind).rotations, kind)
    # A group that is not triclinic by name, so that the fit tests it.
    stand_in = find_group("222")
    tests: list[RungTest] = []
    for rung in rungs:
        own = float(np.max(np.abs(average_group(rung.rotations, kind) - claimed))) < SAME_FORM
        under = replace(crystal, rotations=rung.rotations, group=stand_in)
        fit = fit_readings(under, kind, readings, batches=batches, pose=pose)
        test = fit.symmetry_test
        known = test is not None and test.p_value is not None
        tests.append(
            RungTest(
                rung,
                own,
                fit.chi2,
                fit.dof,
                None if test is None else test.delta_chi2,
                None if test is None else test.delta_dof,
                test.p_value if test is not None and known else None,
                None,
                "cannot tell",
            )
        )
    judged = _judge(tests)
    return Ladder(tuple(judged), _say(crystal, judged))


def correct_for_number(p_values: Sequence[float]) -> list[float]:
    """Holm's step-down correction, in the order given."""
    order = np.argsort(p_values, kind="stable")
    corrected = np.zeros(len(p_values))
    running = 0.0
    for rank, place in enumerate(order.tolist()):
        running = max(running, min(1.0, (len(p_values) - rank) * float(p_values[place])))
        corrected[place] = running
    return [float(value) for value in corrected]


def _judge(tests: list[RungTest]) -> list[RungTest]:
    tested = [place for place, test in enumerate(tests) if test.p_value is not None]
    corrected = correct_for_number([tests[place].p_value or 0.0 for place in tested])
    judged = list(tests)
    for place, value in zip(tested, corrected, strict=True):
        verdict: Verdict = "refuted" if value < LEVEL else "not refuted"
        judged[place] = replace(tests[place], corrected=value, verdict=verdict)
    # What restricts nothing is no claim.
    return [replace(test, verdict="not refuted") if not test.rung.rotations[1:].size else test for test in judged]


def _say(crystal: Crystal, tests: Sequence[RungTest]) -> str:
    own = next((test for test in tests if test.claimed), None)
    group = crystal.group.symbol
    bolder = [
        tests[place] for place in (own.rung.within if own is not None else ()) if tests[place].verdict == "not refuted"
    ]
    if own is None or own.verdict == "cannot tell":
        head = f"These readings cannot tell whether the crystal obeys {group} as it is oriented here"
        return f"{head}; readings along directions that it makes equal, each on its own bar, would."
    if own.verdict == "refuted":
        others = [test.rung.name for test in tests if test.verdict == "not refuted" and test.rung.rotations[1:].size]
        rest = f" Not refuted: {'; '.join(others)}." if others else ""
        return f"The readings contradict {group} as it is oriented here.{rest}"
    more = (
        f" They do not contradict the bolder {'; '.join(test.rung.name for test in bolder)} either." if bolder else ""
    )
    return f"The readings do not contradict {group} as it is oriented here; they cannot confirm it.{more}"
