"""Choosing among candidates, against trying every choice there is and against every single exchange."""

from __future__ import annotations

from itertools import combinations_with_replacement
from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import Crystal, build_crystal
from app.errors import InputError
from app.readings.campaign import Campaign, Plan, build_plan, plan_campaign
from app.readings.candidates import list_candidates, resolve_candidates, spread_candidates
from app.readings.exchange import choose_rows, improve
from app.readings.gain import build_gain
from app.readings.reading import Reading
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY
from tests.readings.builders import MONOCLINIC, MONOCLINIC_MATRIX, TRICLINIC, random_units, vector

FloatArray = npt.NDArray[np.float64]

TRICLINIC_MATRIX = np.array([[13.2, 1.0, 1.85], [1.0, 24.6, 2.0], [1.85, 2.0, 15.9]])
SIGMA = 0.2

# Orthonormal coordinates written out by hand: of the six cells of a symmetric tensor, and of the four of 2/m.
ROOT = np.sqrt(0.5)
PAIRS = {
    "1": [(0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)],
    "2/m": [(0, 0), (0, 2), (1, 1), (2, 2)],
}


def hand_basis(crystal: Crystal) -> FloatArray:
    """Orthonormal matrices (k, 3, 3) of the form."""
    found = []
    for row, column in PAIRS[crystal.group.symbol]:
        matrix = np.zeros((3, 3))
        matrix[row, column] = matrix[column, row] = 1.0 if row == column else ROOT
        found.append(matrix)
    return np.array(found)


def information_rows(
    crystal: Crystal, matrix: FloatArray, ns: FloatArray, sigma: FloatArray, tilt: float
) -> FloatArray:
    """Rows over σ of readings along n, each on a bar of its own, straight from the interface's formula of V."""
    basis, s = hand_basis(crystal), np.deg2rad(tilt)
    rows = []
    for n, sig in zip(ns, sigma, strict=True):
        value = n @ matrix @ n
        gradient = 2.0 * np.cross(n, matrix @ n)
        cross = np.array([[0, -n[2], n[1]], [n[2], 0, -n[0]], [-n[1], n[0], 0]])
        bend = cross.T @ (matrix - value * np.eye(3)) @ cross
        variance = sig**2 + s**2 * gradient @ gradient + 2 * s**4 * np.trace(bend @ bend)
        shifted = np.outer(n, n) + s**2 * (np.eye(3) - 3 * np.outer(n, n))
        rows.append(np.einsum("kij,ij->k", basis, shifted) / np.sqrt(variance))
    return np.array(rows).reshape(-1, len(basis))


def reference_value(crystal: Crystal, rows: FloatArray, criterion: Any) -> float:
    """What a criterion is of a set of whitened rows, small is good; infinite where it is not determined."""
    singular = np.linalg.svd(rows, compute_uv=False)
    rank = int(np.sum(singular > 1e-6 * singular[0])) if len(rows) else 0
    basis = hand_basis(crystal)
    if criterion in ("D", "A"):
        if rank < len(basis):
            return float("inf")
        if criterion == "D":
            return float(-np.linalg.slogdet(rows.T @ rows)[1])
        return float(np.trace(np.linalg.inv(rows.T @ rows)))
    row, column = (int(letter) - 1 for letter in criterion["cell"])
    weights = basis[:, row, column]
    hidden = np.linalg.svd(rows)[2][rank:] @ weights
    if np.linalg.norm(hidden) > 1e-6:
        return float("inf")
    inverse = np.linalg.pinv(rows, rcond=1e-6)
    return float(np.sum(np.square(weights @ inverse)))


def signed_value(campaign: Campaign, criterion: Any) -> float:
    if campaign.value is None:
        return float("inf")
    return -campaign.value if criterion == "D" else campaign.value


def make_plan(
    crystal: Crystal, candidates: FloatArray, taken: FloatArray, sigmas: FloatArray, tilt: float
) -> tuple[Plan, FloatArray, FloatArray]:
    """A plan, and the whitened rows of what is taken and of the candidates by the formula."""
    matrix = MONOCLINIC_MATRIX if crystal is MONOCLINIC else TRICLINIC_MATRIX
    readings = [Reading("along", None, vector(n), sigma=float(s)) for n, s in zip(taken, sigmas, strict=True)]
    listed = resolve_candidates(crystal, [vector(n) for n in candidates], IDENTITY)
    plan = build_plan(crystal, Kind(), readings, listed, SIGMA, matrix=matrix, direction_sigma=tilt)
    had = information_rows(crystal, matrix, taken, sigmas, 0.0)
    return plan, had, information_rows(crystal, matrix, candidates, np.full(len(candidates), SIGMA), tilt)


CRITERIA: list[Any] = ["D", "A", {"cell": "13"}, {"cell": "22"}]


@pytest.mark.parametrize("criterion", CRITERIA, ids=str)
@pytest.mark.parametrize("crystal", [TRICLINIC, MONOCLINIC], ids=["triclinic", "monoclinic"])
@pytest.mark.parametrize("tilt", [0.0, 3.0])
@pytest.mark.parametrize("had", [0, 2, 5])
def test_the_best_of_all_choices_is_found(criterion: Any, crystal: Crystal, tilt: float, had: int) -> None:
    # Reference: every choice of three of eight candidates, repeats allowed, valued by numpy from the printed formula.
    rng = np.random.default_rng(100 + had)
    candidates, taken = random_units(rng, 8), random_units(rng, had)
    candidates[:3] = np.eye(3)
    plan, had_rows, rows = make_plan(crystal, candidates, taken, rng.uniform(0.05, 0.5, had), tilt)
    campaign = plan_campaign(plan, plan.read_criterion(criterion), 3)
    best = min(
        reference_value(crystal, np.vstack([had_rows, rows[list(choice)]]), criterion)
        for choice in combinations_with_replacement(range(8), 3)
    )
    assert signed_value(campaign, criterion) == pytest.approx(best, rel=1e-8)


@settings(max_examples=25, deadline=None)
@given(
    seed=st.integers(0, 10**6),
    had=st.integers(0, 7),
    add=st.integers(1, 9),
    criterion=st.sampled_from(CRITERIA),
    tilt=st.sampled_from([0.0, 2.0]),
    low_index=st.booleans(),
)
def test_no_single_exchange_improves(
    seed: int, had: int, add: int, criterion: Any, tilt: float, low_index: bool
) -> None:
    rng = np.random.default_rng(seed)
    crystal = TRICLINIC if seed % 2 else MONOCLINIC
    candidates = list_candidates(crystal, 1).vectors if low_index else random_units(rng, 15)
    plan, had_rows, rows = make_plan(crystal, candidates, random_units(rng, had), rng.uniform(0.01, 1.0, had), tilt)
    campaign = plan_campaign(plan, plan.read_criterion(criterion), add)
    assert len(campaign.chosen) == add
    places = [int(np.argmax(np.abs(candidates @ n))) for n in campaign.vectors]
    value = reference_value(crystal, np.vstack([had_rows, rows[places]]), criterion)
    assert signed_value(campaign, criterion) == pytest.approx(value, rel=1e-7)
    if not np.isfinite(value):
        return
    slack = 2e-9 * max(1.0, abs(value)) if criterion == "D" else 2e-9 * value
    for position in range(add):
        for other in range(len(candidates)):
            tried = [*places[:position], other, *places[position + 1 :]]
            assert reference_value(crystal, np.vstack([had_rows, rows[tried]]), criterion) >= value - slack


@pytest.mark.parametrize(
    ("criterion", "had", "tilt"),
    # With few readings taken a single quantity may be best known by a set that tells no other: tested elsewhere.
    [(criterion, 8, tilt) for criterion in [*CRITERIA, {"axis": 2}] for tilt in (0.0, 2.0)]
    + [("D", 3, 0.0), ("A", 3, 0.0)],
    ids=str,
)
def test_no_direction_of_the_sphere_improves(criterion: Any, had: int, tilt: float) -> None:
    # Reference: 3,000 seeded random directions in the place of each chosen one.
    rng = np.random.default_rng(7)
    readings = [Reading("along", None, vector(n), sigma=0.3) for n in random_units(rng, had)]
    plan = build_plan(
        TRICLINIC,
        Kind(),
        readings,
        spread_candidates(1500),
        SIGMA,
        matrix=TRICLINIC_MATRIX,
        direction_sigma=tilt,
    )
    asked = plan.read_criterion(criterion)
    campaign = plan_campaign(plan, asked, 4)
    others = random_units(rng, 3000)
    had_rows, chosen, tried = (
        rows.whitened / SIGMA for rows in (plan.taken_rows, plan.see(campaign.vectors), plan.see(others))
    )

    def judge(information: FloatArray) -> FloatArray:
        if criterion == "D":
            return -np.linalg.slogdet(information)[1]
        inverse = np.linalg.inv(information)
        if criterion == "A":
            return np.log(np.trace(inverse, axis1=-2, axis2=-1))
        return np.linalg.slogdet(asked.functionals.T @ inverse @ asked.functionals)[1]

    everything = np.vstack([had_rows, chosen])
    value = judge((everything.T @ everything)[None])[0]
    for position in range(4):
        kept = np.vstack([had_rows, np.delete(chosen, position, axis=0)])
        assert np.min(judge(kept.T @ kept + tried[:, :, None] * tried[:, None, :])) >= value - 1e-8


def test_a_choice_that_could_be_better_is_exchanged() -> None:
    # Twelve times one direction sees one combination; exchange must leave it, however the start was.
    plan, _, _ = make_plan(TRICLINIC, random_units(np.random.default_rng(5), 30), np.zeros((0, 3)), np.zeros(0), 0.0)
    gain = build_gain(plan.taken_rows, plan.candidate_rows, plan.read_criterion("D"))
    assert len(set(improve(gain, [3] * 12))) >= 6


def test_the_same_call_has_the_same_answer() -> None:
    plan, _, _ = make_plan(TRICLINIC, random_units(np.random.default_rng(5), 200), np.zeros((0, 3)), np.zeros(0), 0.0)
    gain = build_gain(plan.taken_rows, plan.candidate_rows, plan.read_criterion("A"))
    assert choose_rows(gain, 9) == choose_rows(gain, 9)


def test_of_equal_candidates_the_first_is_taken() -> None:
    # In a cubic crystal every direction tells the same; the first of the list is the simplest plane.
    cubic = build_crystal([5, 5, 5, 90, 90, 90], "m-3m")
    plan = build_plan(cubic, Kind(), [], list_candidates(cubic, 3), 1.0)
    campaign = plan_campaign(plan, plan.read_criterion("D"), 4)
    assert {(chosen.kind, chosen.values) for chosen in campaign.chosen} == {("normal", (1.0, 0.0, 0.0))}
    assert campaign.value == pytest.approx(np.log(4 / 3))  # Σ (nᵀ 1/√3 n)² = 4/3


def test_taken_readings_of_very_unlike_weight_leave_the_choice_exact() -> None:
    # Five cells known a million times better than a new reading tells: the sixth is all there is to gain.
    rng = np.random.default_rng(11)
    known = np.eye(3)
    readings = [Reading("along", None, vector(n), sigma=1e-6 * SIGMA) for n in known]
    readings += [Reading("across", None, vector(known[0]), vector(known[1]), sigma=1e-6 * SIGMA)]
    readings += [Reading("across", None, vector(known[1]), vector(known[2]), sigma=1e-6 * SIGMA)]
    candidates = np.vstack([random_units(rng, 40), [[ROOT, 0, ROOT]]])
    listed = resolve_candidates(TRICLINIC, [vector(n) for n in candidates], IDENTITY)
    plan = build_plan(TRICLINIC, Kind(), readings, listed, SIGMA)
    for criterion in ("D", "A", {"cell": "13"}):
        campaign = plan_campaign(plan, plan.read_criterion(criterion), 2)
        # 2 n1 n3 is largest for the last candidate, so both bars are cut along it.
        assert campaign.vectors == pytest.approx(np.tile([ROOT, 0, ROOT], (2, 1)))
        assert campaign.after.sigma_matrix[0, 2] == pytest.approx(SIGMA / np.sqrt(2), rel=1e-6)


def test_candidates_that_see_nothing_are_refused() -> None:
    antisymmetric = Kind("polar", "antisymmetric")
    plan = build_plan(TRICLINIC, antisymmetric, [], list_candidates(TRICLINIC, 1), 1.0)
    with pytest.raises(InputError, match="sees any") as refused:
        plan_campaign(plan, plan.read_criterion("D"), 3)
    assert refused.value.field == "candidates"
