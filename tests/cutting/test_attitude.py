"""Attitude from sightings: against scipy, a printed example, and planted mistakes."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import read_direction
from app.cutting.attitude import Sighting, find_attitude
from app.cutting.equivalents import list_equivalents
from app.errors import InputError

MONOCLINIC = ([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
CUBIC = ([5, 5, 5, 90, 90, 90], "m-3m")


def sight(crystal: Crystal, turn: np.ndarray, texts: list[str], noise: float = 0.0, seed: int = 0) -> list[Sighting]:
    rng = np.random.default_rng(seed)
    sightings = []
    for text in texts:
        direction = read_direction(text)
        seen = turn @ crystal.resolve(direction)
        tilt = Rotation.from_rotvec(np.deg2rad(noise) * rng.normal(size=3)).as_matrix()
        sightings.append(Sighting(direction, tilt @ seen))
    return sightings


@pytest.mark.parametrize("seed", range(6))
def test_the_rotation_is_that_of_another_library(seed: int) -> None:
    crystal = build_crystal(*MONOCLINIC)
    turn = Rotation.random(random_state=seed).as_matrix()
    sightings = sight(crystal, turn, ["(1 0 0)", "(0 1 1)", "[1 1 0]", "(-2 0 1)"], 0.4, seed)
    weights = np.random.default_rng(seed).uniform(0.2, 3.0, 4)
    weighted = [Sighting(s.direction, s.seen, float(w)) for s, w in zip(sightings, weights, strict=True)]
    found = find_attitude(crystal, weighted)
    directions = np.array([crystal.resolve(s.direction) for s in weighted])
    reference, _ = Rotation.align_vectors(np.array([s.seen for s in weighted]), directions, weights=weights)
    assert found.matrix == pytest.approx(reference.as_matrix(), abs=1e-9)
    assert np.linalg.det(found.matrix) == pytest.approx(1.0)
    assert found.hand == "right"
    placed = directions @ found.matrix.T
    expected = np.rad2deg(np.arccos(np.clip(np.sum(placed * [s.seen for s in weighted], axis=1), -1, 1)))
    assert found.residuals == pytest.approx(expected, abs=1e-6)
    assert found.rms == pytest.approx(np.sqrt(np.sum(weights * expected**2) / np.sum(weights)), abs=1e-6)


def test_pairs_come_in_their_order_with_angles_of_the_cell() -> None:
    crystal = build_crystal(*MONOCLINIC)
    found = find_attitude(crystal, sight(crystal, np.eye(3), ["(1 0 0)", "(0 1 0)", "(0 0 1)"]))
    assert found.pairs == ((0, 1), (0, 2), (1, 2))
    # n(100) and n(001) of a monoclinic cell meet at 180° − β; both are at right angles to n(010).
    assert found.computed == pytest.approx([90.0, 72.6, 90.0], abs=1e-9)
    assert found.measured == pytest.approx(found.computed, abs=1e-6)


def test_two_sightings_do_not_tell_the_hand() -> None:
    crystal = build_crystal(*MONOCLINIC)
    assert find_attitude(crystal, sight(crystal, np.eye(3), ["(1 0 0)", "(0 1 1)"])).hand == "cannot tell"
    coplanar = find_attitude(crystal, sight(crystal, np.eye(3), ["(1 0 0)", "(0 0 1)", "(1 0 1)"]))
    assert coplanar.hand == "cannot tell"
    assert any("one plane" in note for note in coplanar.notes)


def test_a_mirrored_crystal_is_told() -> None:
    crystal = build_crystal(*MONOCLINIC)
    mirror = Rotation.random(random_state=3).as_matrix() @ np.diag([1.0, 1.0, -1.0])
    found = find_attitude(crystal, sight(crystal, mirror, ["(1 0 0)", "(0 1 1)", "(1 1 -1)", "(-2 1 1)"]))
    assert found.hand == "mirror fits better"
    assert found.rms > 1.0


def test_symmetry_makes_assignments_equal_and_says_which() -> None:
    crystal = build_crystal(*CUBIC)
    found = find_attitude(crystal, sight(crystal, np.eye(3), ["(1 0 0)", "(0 1 0)"]))
    # A pair of cube faces at right angles can be chosen in 6 × 4 ways, and the 24 turns of the cube lead to all.
    assert len(found.ambiguous) == 23
    assert all(entry.equivalent for entry in found.ambiguous)
    assert all(entry.rms < 1e-9 for entry in found.ambiguous)


def test_equal_angles_that_no_operation_explains_are_told_apart() -> None:
    # Of an orthorhombic crystal n(110) and n(1−10), with mmm: taking (110) for (1 −1 0) and the other way round keeps
    # the angle, by a half-turn; the mirror image of a pair in a plane is reached by a half-turn too.
    crystal = build_crystal([5, 7, 9, 90, 90, 90], "mmm")
    found = find_attitude(crystal, sight(crystal, np.eye(3), ["(1 1 0)", "(1 -1 0)"]))
    assert {tuple(entry.forms) for entry in found.ambiguous if entry.equivalent} == {
        ("(1 -1 0)", "(1 1 0)"),
        ("(-1 1 0)", "(-1 -1 0)"),
        ("(-1 -1 0)", "(-1 1 0)"),
    }
    # In class 2 with its axis along c only the half-turn about c is left.
    lower = build_crystal([5, 7, 9, 90, 90, 90], "112")
    again = find_attitude(lower, sight(lower, np.eye(3), ["(1 1 0)", "(1 -1 0)"]))
    assert [tuple(entry.forms) for entry in again.ambiguous] == [("(-1 -1 0)", "(-1 1 0)")]


@pytest.mark.parametrize("text", ["(1 2 3)", "[1 -2 3]", "[1 1 1]", "(1 0 0)"])
@pytest.mark.parametrize(("cell", "group"), [CUBIC, MONOCLINIC, ([5, 5, 8, 90, 90, 120], "-3m")])
def test_equivalents_have_the_indices_of_their_vectors(cell: list[float], group: str, text: str) -> None:
    crystal = build_crystal(cell, group)
    for entry in list_equivalents(crystal, read_direction(text)):
        assert crystal.resolve(read_direction(entry.form)) == pytest.approx(entry.vector, abs=1e-9)
        spread = np.max(np.abs(crystal.rotations @ crystal.resolve(read_direction(text)) - entry.vector), axis=1)
        assert np.min(spread) < 1e-9


@pytest.mark.parametrize("texts", [["(1 0 0)"], ["(1 0 0)", "(2 0 0)"], ["(1 0 0)", "(-1 0 0)", "(3 0 0)"]])
def test_fewer_than_two_independent_directions_are_refused(texts: list[str]) -> None:
    crystal = build_crystal(*MONOCLINIC)
    with pytest.raises(InputError) as caught:
        find_attitude(crystal, sight(crystal, np.eye(3), texts))
    assert caught.value.field == "sightings"


def test_the_error_of_the_rotation_is_that_of_the_sightings() -> None:
    # Seeded: three well-spread sightings of 0.2° per component each, whose mean turn has about 0.2°/√2 a component.
    crystal = build_crystal(*CUBIC)
    turn = Rotation.random(random_state=9)
    errors = []
    for seed in range(300):
        found = find_attitude(crystal, sight(crystal, turn.as_matrix(), ["(1 0 0)", "(0 1 0)", "(0 0 1)"], 0.2, seed))
        errors.append(np.rad2deg((Rotation.from_matrix(found.matrix) * turn.inv()).magnitude()))
    # Each component is seen by two of the three sightings: 0.2°/√2, so √3 times that in all.
    assert np.sqrt(np.mean(np.square(errors))) == pytest.approx(0.2 * np.sqrt(3 / 2), rel=0.1)
