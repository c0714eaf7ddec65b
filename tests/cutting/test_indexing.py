"""Spots on a film: geometry against the law of reflection, indexing of seeded, noisy sets, and the next sighting."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.crystal.lattice import compute_directions, list_indices
from app.cutting.attitude import Sighting, find_attitude
from app.cutting.film import find_normals, place_spots
from app.cutting.further_sighting import propose_sighting
from app.cutting.indexing import index_normals
from app.cutting.stage import build_axis, compute_turn
from app.errors import InputError

CUBIC = build_crystal([5.43, 5.43, 5.43, 90, 90, 90], "m-3m")
MONOCLINIC = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
TRICLINIC = build_crystal([5.1, 6.3, 7.9, 82, 95, 101], "-1")


def test_a_spot_lies_at_twice_the_angle_of_its_plane() -> None:
    # Back reflection at 30 mm: a plane whose normal is ε from the beam throws its spot to D tan 2ε.
    for degrees in (3.0, 10.0, 20.0):
        x = 30.0 * np.tan(2 * np.deg2rad(degrees))
        (normal,) = find_normals([[x, 0.0]], 30.0, "back")
        # Looking along the beam x is to the right, which is −Y.
        assert normal == pytest.approx([-np.cos(np.deg2rad(degrees)), -np.sin(np.deg2rad(degrees)), 0.0], abs=1e-12)


@pytest.mark.parametrize("side", ["back", "front"])
def test_spots_and_normals_go_back_and_forth(side: str) -> None:
    rng = np.random.default_rng(3)
    spots = rng.uniform(-40, 40, (20, 2))
    normals = find_normals(spots, 35.0, side)  # type: ignore[arg-type]
    assert place_spots(normals, 35.0, side) == pytest.approx(spots, abs=1e-9)  # type: ignore[arg-type]
    # The ray that leaves is the beam mirrored in the plane.
    beam = np.array([1.0, 0, 0])
    rays = beam - 2 * (normals @ beam)[:, None] * normals
    assert (rays[:, 0] > 0).all() if side == "front" else (rays[:, 0] < 0).all()


@pytest.mark.parametrize(("crystal", "count"), [(CUBIC, 7), (MONOCLINIC, 6), (TRICLINIC, 6)])
@pytest.mark.parametrize("seed", range(4))
def test_seeded_noisy_sets_are_indexed(crystal, count: int, seed: int) -> None:  # type: ignore[no-untyped-def]
    rng = np.random.default_rng(seed)
    turn = Rotation.random(random_state=seed).as_matrix()
    indices = list_indices(2)
    planes = compute_directions(crystal, "normal", indices)
    chosen = rng.choice(len(planes), size=count, replace=False)
    noise = Rotation.from_rotvec(np.deg2rad(0.15) * rng.normal(size=(count, 3)))
    normals = noise.apply(planes[chosen] @ turn.T)
    found = index_normals(crystal, normals, tolerance=0.8, max_index=2)
    assert found[0].matched == count
    proper = crystal.rotations[np.linalg.det(crystal.rotations) > 0]
    # Normals come with their sense here, so the right attitude is among the ways that explain all of them.
    off = [
        min(
            float(np.rad2deg(Rotation.from_matrix(entry.matrix @ operation @ turn.T).magnitude()))
            for operation in proper
        )
        for entry in found
        if entry.matched == count
    ]
    assert min(off) < 0.5


def test_a_wrong_spot_is_left_without_an_index() -> None:
    turn = Rotation.random(random_state=8).as_matrix()
    planes = compute_directions(
        MONOCLINIC, "normal", np.array([[1, 0, 0], [0, 1, 1], [1, 1, 0], [1, -1, 1], [0, 0, 1]])
    )
    normals = np.concatenate([planes @ turn.T, [Rotation.random(random_state=21).apply([0, 0, 1.0])]])
    best = index_normals(MONOCLINIC, normals, tolerance=0.3, max_index=2)[0]
    assert best.matched == 5
    assert best.forms[5] is None
    assert np.isnan(best.residuals[5])


def test_assignments_that_symmetry_makes_one_are_listed_once() -> None:
    planes = compute_directions(CUBIC, "normal", np.array([[1, 0, 0], [0, 1, 0], [1, 1, 1]]))
    found = index_normals(CUBIC, planes, tolerance=0.5, max_index=1)
    turns = [entry.matrix for entry in found]
    proper = CUBIC.rotations[np.linalg.det(CUBIC.rotations) > 0]
    for one in range(len(turns)):
        for two in range(one):
            near = max(float(np.trace(turns[one] @ operation @ turns[two].T)) for operation in proper)
            assert near < 3.0 - 1e-6


@pytest.mark.parametrize(
    ("make", "field"),
    [
        (lambda: find_normals([[0.0, 0.0]], 30.0, "front"), "spots[0]"),
        (lambda: find_normals([[1.0, 0.0]], 0.0, "back"), "distance"),
        (lambda: index_normals(CUBIC, np.eye(3)[:1]), "spots"),
        (lambda: index_normals(CUBIC, np.eye(3)[[0, 0]]), "spots"),
        (lambda: index_normals(CUBIC, np.eye(3), tolerance=0.0), "tolerance"),
        (lambda: index_normals(CUBIC, np.eye(3), max_index=9), "max_index"),
    ],
)
def test_what_cannot_be_indexed_is_refused_at_its_field(make, field: str) -> None:  # type: ignore[no-untyped-def]
    with pytest.raises(InputError) as caught:
        make()
    assert caught.value.field == field


def test_the_next_sighting_is_reachable_and_decides_the_hand() -> None:
    axes = [
        build_axis("turn", [0, 0, 1], -180, 180),
        build_axis("arc", [1, 0, 0], -60, 60),
        build_axis("upper", [0, 1, 0], -60, 60),
    ]
    sight = np.array([-1.0, 0, 0])
    turn = Rotation.from_euler("xyz", [5, -8, 40], degrees=True).as_matrix()
    named = [read_direction(text) for text in ("(1 0 0)", "(0 0 1)")]
    sightings = [Sighting(direction, turn @ MONOCLINIC.resolve(direction)) for direction in named]
    attitude = find_attitude(MONOCLINIC, sightings)
    found = propose_sighting(MONOCLINIC, attitude, sightings, axes, sight)
    assert found is not None
    vector = turn @ MONOCLINIC.resolve(read_direction(found.form))
    assert compute_turn(axes, found.setting.dials) @ vector == pytest.approx(sight, abs=1e-8)
    assert found.decides_hand
    # With it the hand is told.
    third = [*sightings, Sighting(read_direction(found.form), vector)]
    assert find_attitude(MONOCLINIC, third).hand == "right"
    assert found.gain > 1.0
