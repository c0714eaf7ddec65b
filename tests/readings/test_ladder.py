"""The ladder of forms: its rungs counted by hand and by another library's groups, planted truths refuted or not."""

from __future__ import annotations

import numpy as np
import pytest
import spglib
from scipy.stats import norm
from statsmodels.stats.multitest import multipletests

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.readings.ladder import climb_ladder, correct_for_number
from app.readings.reading import Reading
from app.readings.rungs import find_metric_rotations, list_rungs
from app.tensor.kind import Kind

SYMMETRIC = Kind("polar", "symmetric")

# Counted by hand from the axes of the lattice: nothing; each half-turn alone; each set of three half-turns at right
# angles; each axis of three, four or six turns; all directions alike.
COUNTS = [
    ([5, 6, 7, 80, 95, 100], "1", 1),
    ([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m", 1 + 1),
    ([5, 6, 7, 90, 90, 90], "mmm", 1 + 3 + 1),
    ([5, 5, 7, 90, 90, 90], "4/mmm", 1 + 5 + 2 + 1),
    ([5, 5, 7, 90, 90, 120], "6/mmm", 1 + 7 + 3 + 1),
    ([5, 5, 5, 70, 70, 70], "-3m", 1 + 3 + 1),
    ([5, 5, 5, 90, 90, 90], "m-3m", 1 + 9 + 4 + 7 + 1),
]


@pytest.mark.parametrize(("cell", "group", "count"), COUNTS, ids=[entry[1] for entry in COUNTS])
def test_every_lattice_has_its_number_of_rungs(cell: list[float], group: str, count: int) -> None:
    crystal = build_crystal(cell, group)
    rungs = list_rungs(crystal, SYMMETRIC)
    assert len(rungs) == count
    assert rungs[0].count == 6
    assert [rung.count for rung in rungs] == sorted((rung.count for rung in rungs), reverse=True)
    # The claim of the ladder does not depend on the group that is claimed.
    assert len(list_rungs(build_crystal(cell, "1"), SYMMETRIC)) == count


@pytest.mark.parametrize(("cell", "group", "count"), COUNTS, ids=[entry[1] for entry in COUNTS])
def test_the_rotations_of_a_metric_are_those_of_another_library(cell: list[float], group: str, count: int) -> None:
    crystal = build_crystal(cell, "1")
    assert crystal.M is not None
    found = spglib.get_symmetry_dataset((crystal.M.T, [[0, 0, 0]], [1]), symprec=1e-5)
    proper = [rotation for rotation in found.rotations if round(np.linalg.det(rotation)) == 1]
    wanted = np.array([crystal.M @ rotation @ np.linalg.inv(crystal.M) for rotation in proper])
    rotations = find_metric_rotations(crystal)
    assert len(rotations) == len(wanted)
    for rotation in rotations:
        assert np.min(np.max(np.abs(wanted - rotation), axis=(1, 2))) < 1e-9


def test_half_turns_on_the_diagonals_of_a_tetragonal_cell_are_a_rung_of_their_own() -> None:
    names = [rung.name for rung in list_rungs(build_crystal([5, 5, 7, 90, 90, 90], "222"), SYMMETRIC)]
    assert "half-turns along [001], [010], [100]" in names
    assert any("[110]" in name and "[−110]" in name and "[001]" in name for name in names)
    assert sum("three, four or six" in name for name in names) == 1


def test_correction_for_the_number_of_rungs_is_that_of_another_library() -> None:
    p = [0.001, 0.04, 0.03, 0.5, 0.2]
    assert correct_for_number(p) == pytest.approx(multipletests(p, method="holm")[1])


def measure(
    crystal: Crystal, matrix: np.ndarray, seed: int, sigma: float = 0.05, *, with_sigma: bool = True
) -> list[Reading]:
    rng = np.random.default_rng(seed)
    directions = [
        "[1 0 0]",
        "[0 1 0]",
        "[0 0 1]",
        "(1 1 0)",
        "(1 -1 0)",
        "(1 0 1)",
        "(0 1 1)",
        "[1 1 1]",
        "[-1 1 2]",
        "[2 0 1]",
    ]
    readings = []
    for text in directions:
        vector = crystal.resolve(read_direction(text))
        value = float(vector @ matrix @ vector + sigma * rng.normal())
        readings.append(Reading("along", value, read_direction(text), sigma=sigma if with_sigma else None))
    return readings


TETRAGONAL = build_crystal([5, 5, 7, 90, 90, 90], "4/mmm")
PSEUDO = np.array([[10.0, 1.0, 0], [1.0, 10.0, 0], [0, 0, 14.0]])


@pytest.mark.parametrize("with_sigma", [True, False])
def test_a_false_claim_is_refuted_and_what_is_left_is_named(with_sigma: bool) -> None:
    # The cell measures tetragonal, the tensor has its half-turns on the diagonals.
    ladder = climb_ladder(TETRAGONAL, SYMMETRIC, measure(TETRAGONAL, PSEUDO, 1, with_sigma=with_sigma))
    claimed = next(test for test in ladder.rungs if test.claimed)
    assert claimed.verdict == "refuted"
    assert "contradict 4/mmm" in ladder.sentence
    assert "[110]" in ladder.sentence
    edges = next(test for test in ladder.rungs if test.rung.name == "half-turns along [001], [010], [100]")
    assert edges.verdict == "refuted"


def test_a_true_claim_is_not_refuted_nor_confirmed() -> None:
    matrix = np.diag([10.0, 10.0, 14.0])
    ladder = climb_ladder(TETRAGONAL, SYMMETRIC, measure(TETRAGONAL, matrix, 2))
    claimed = next(test for test in ladder.rungs if test.claimed)
    assert claimed.verdict == "not refuted"
    assert "cannot confirm" in ladder.sentence


def test_readings_that_see_no_restriction_cannot_tell() -> None:
    readings = measure(TETRAGONAL, PSEUDO, 3)
    few = [readings[0], readings[2]]
    ladder = climb_ladder(TETRAGONAL, SYMMETRIC, few)
    assert next(test for test in ladder.rungs if test.claimed).verdict == "cannot tell"
    assert "cannot tell" in ladder.sentence


def test_a_true_claim_is_refuted_as_seldom_as_the_level_says() -> None:
    # Seeded: of the sets that obey the claim at most 5 % may be refuted, within three deviations.
    matrix = np.diag([10.0, 10.0, 14.0])
    refuted = 0
    for seed in range(60):
        ladder = climb_ladder(TETRAGONAL, SYMMETRIC, measure(TETRAGONAL, matrix, 1000 + seed))
        refuted += next(test for test in ladder.rungs if test.claimed).verdict == "refuted"
    assert refuted / 60 < 0.05 + 3 * np.sqrt(0.05 * 0.95 / 60)


def test_the_statistic_is_the_square_of_a_normal_for_one_pair() -> None:
    # Two readings along a and b of a tetragonal crystal, and one along c: 4/mmm costs (a − b)²/(2 σ²).
    sigma, a, b = 0.1, 10.0, 10.25
    readings = [
        Reading("along", value, read_direction(text), sigma=sigma)
        for text, value in (("[1 0 0]", a), ("[0 1 0]", b), ("[0 0 1]", 14.0))
    ]
    ladder = climb_ladder(TETRAGONAL, SYMMETRIC, readings)
    claimed = next(test for test in ladder.rungs if test.claimed)
    z = (b - a) / (sigma * np.sqrt(2))
    assert claimed.delta_chi2 == pytest.approx(z**2)
    assert claimed.delta_dof == 1
    assert claimed.p_value == pytest.approx(2 * norm.sf(abs(z)))


def test_axial_tensors_and_limiting_groups_are_refused() -> None:
    with pytest.raises(InputError) as caught:
        list_rungs(TETRAGONAL, Kind("axial", "symmetric"))
    assert caught.value.field == "tensor.parity"
    with pytest.raises(InputError):
        list_rungs(build_crystal(None, "∞m"), SYMMETRIC)
