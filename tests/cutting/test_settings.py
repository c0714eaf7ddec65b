"""Stage settings: every one reaches, an independent search finds none better, degenerate stages are seen through."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import differential_evolution
from scipy.spatial.transform import Rotation

from app.cutting.reach import find_closest
from app.cutting.settings import Level, find_settings, measure_sensitivity, measure_travel
from app.cutting.stage import Axis, build_axis, compute_turn, turn_about
from app.errors import InputError


def draw_unit(rng: np.random.Generator) -> np.ndarray:
    vector = rng.normal(size=3)
    return np.asarray(vector / np.linalg.norm(vector))


def draw_stage(rng: np.random.Generator, count: int, reach: float = 180.0) -> list[Axis]:
    return [
        build_axis(
            f"axis {k}",
            draw_unit(rng),
            -reach + float(rng.uniform(-5, 5)),
            reach + float(rng.uniform(-5, 5)),
            float(rng.uniform(-10, 10)),
            int(rng.choice([1, -1])),
        )
        for k in range(count)
    ]


def reference_turn(axes: list[Axis], dials: tuple[float, ...]) -> np.ndarray:
    """By scipy's rotation vectors instead of Rodrigues' formula."""
    turn = np.eye(3)
    for axis, dial in zip(axes, dials, strict=True):
        turn = turn @ Rotation.from_rotvec(np.deg2rad(axis.sense * (dial - axis.zero)) * axis.vector).as_matrix()
    return turn


@pytest.mark.parametrize("count", [1, 2, 3])
@pytest.mark.parametrize("seed", range(12))
def test_every_setting_puts_the_target_there_within_travel(count: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    axes = draw_stage(rng, count)
    # A place that the stage reaches, from settings that only this test knows.
    hidden = tuple(float(rng.uniform(axis.low, axis.high)) for axis in axes)
    start = draw_unit(rng)
    toward = reference_turn(axes, hidden) @ start
    settings = find_settings(axes, start, toward)
    assert settings
    for setting in settings:
        placed = reference_turn(axes, setting.dials) @ start
        assert np.linalg.norm(np.cross(placed, toward)) < 1e-9
        assert placed @ toward > 0
        assert all(axis.low <= dial <= axis.high for axis, dial in zip(axes, setting.dials, strict=True))
        assert setting.travel == pytest.approx(
            sum(abs(dial - axis.zero) for axis, dial in zip(axes, setting.dials, strict=True))
        )
    assert settings[0].travel <= measure_travel(axes, hidden) + 1e-6
    assert [setting.travel for setting in settings] == sorted(setting.travel for setting in settings)


@pytest.mark.parametrize("seed", range(8))
def test_with_two_axes_a_dense_search_finds_no_other_setting(seed: int) -> None:
    rng = np.random.default_rng(100 + seed)
    axes = draw_stage(rng, 2)
    start, toward = draw_unit(rng), draw_unit(rng)
    settings = find_settings(axes, start, toward)
    first, second = (np.arange(-180.0, 180.0, 0.5) for _ in range(2))
    one = turn_about(axes[0].vector, first)
    two = turn_about(axes[1].vector, second)
    cosines = np.einsum("i,aij,bjk,k->ab", toward, one, two, start, optimize=True)
    if settings:
        for a, b in np.argwhere(cosines > np.cos(np.deg2rad(0.3))):
            near = [
                max(
                    abs((axes[k].find_angle(setting.dials[k]) - angle + 180.0) % 360.0 - 180.0)
                    for k, angle in enumerate((first[a], second[b]))
                )
                for setting in settings
            ]
            # Where the two axes' cones graze, a small miss is a long way along the dials.
            assert min(near) < 12.0
    else:
        assert np.max(cosines) < 1.0 - 1e-9


@pytest.mark.parametrize("seed", range(6))
def test_with_three_axes_an_independent_search_finds_no_shorter_way(seed: int) -> None:
    rng = np.random.default_rng(200 + seed)
    axes = draw_stage(rng, 3)
    start, toward = draw_unit(rng), draw_unit(rng)
    settings = find_settings(axes, start, toward)

    def cost(dials: np.ndarray) -> float:
        placed = reference_turn(axes, tuple(dials)) @ start
        off = np.rad2deg(np.arctan2(np.linalg.norm(np.cross(placed, toward)), placed @ toward))
        return measure_travel(axes, dials.tolist()) + 100.0 * float(off)

    found = differential_evolution(
        cost, [(axis.low, axis.high) for axis in axes], seed=seed, maxiter=250, popsize=14, tol=1e-9
    )
    if settings:
        # The search pays for what it misses the target by; it may not be cheaper than the exact answer.
        assert found.fun >= settings[0].travel - 0.02
    else:
        assert found.fun > 100.0


@pytest.mark.parametrize("seed", range(4))
def test_a_level_direction_decides_among_the_family(seed: int) -> None:
    rng = np.random.default_rng(300 + seed)
    axes = draw_stage(rng, 3)
    start, toward, second, wanted = (draw_unit(rng) for _ in range(4))
    best = find_settings(axes, start, toward, Level(second, wanted))
    if not best:
        return
    placed = reference_turn(axes, best[0].dials)
    assert np.linalg.norm(np.cross(placed @ start, toward)) < 1e-9
    off = np.rad2deg(np.arccos(np.clip(placed @ second @ wanted, -1, 1)))
    assert best[0].level_off == pytest.approx(off, abs=1e-6)

    def cost(dials: np.ndarray) -> float:
        turn = reference_turn(axes, tuple(dials))
        miss = np.rad2deg(np.arccos(np.clip(turn @ start @ toward, -1, 1)))
        return float(np.rad2deg(np.arccos(np.clip(turn @ second @ wanted, -1, 1))) + 30 * miss)

    found = differential_evolution(
        cost, [(axis.low, axis.high) for axis in axes], seed=seed, maxiter=200, popsize=12, tol=1e-9
    )
    assert found.fun >= best[0].level_off - 0.05  # type: ignore[operator]


Z, X = np.array([0.0, 0.0, 1.0]), np.array([1.0, 0.0, 0.0])


def test_a_target_on_the_last_axis_leaves_that_axis_at_its_zero() -> None:
    axes = [build_axis("turn", Z, -180, 180), build_axis("arc", X, -90, 90), build_axis("spin", Z, -180, 180, 7.0)]
    toward = np.array([0.0, -np.sin(0.3), np.cos(0.3)])
    settings = find_settings(axes, Z, toward)
    assert settings[0].dials == pytest.approx((0.0, np.rad2deg(0.3), 7.0), abs=1e-9)


def test_parallel_axes_share_the_turn_without_wandering() -> None:
    axes = [build_axis("lower", Z, -30, 30), build_axis("upper", Z, -30, 30)]
    toward = np.array([np.cos(np.deg2rad(50)), np.sin(np.deg2rad(50)), 0.0])
    settings = find_settings(axes, X, toward)
    assert settings[0].travel == pytest.approx(50.0)
    assert {tuple(np.round(setting.dials, 6)) for setting in settings} == {(20.0, 30.0), (30.0, 20.0)}


def test_a_dial_with_a_long_travel_takes_the_turn_nearest_to_zero() -> None:
    axis = build_axis("turn", Z, 300.0, 800.0, 400.0, -1)
    toward = np.array([np.cos(np.deg2rad(-100)), np.sin(np.deg2rad(-100)), 0.0])
    (setting,) = find_settings([axis], X, toward)
    # A turn by −100° at sense −1 is 100 on from zero.
    assert setting.dials == pytest.approx((500.0,))


def test_a_shortened_travel_takes_solutions_away_and_says_how_near_it_comes() -> None:
    axes = [build_axis("turn", Z, -180, 180), build_axis("arc", X, -10, 10)]
    toward = np.array([0.0, np.sin(np.deg2rad(25)), np.cos(np.deg2rad(25))])
    assert find_settings(axes, Z, toward) == []
    dials, off, which = find_closest(axes, Z[None], toward)
    assert off == pytest.approx(15.0, abs=1e-6)
    assert which == 0
    assert abs(dials[1]) == pytest.approx(10.0)


@pytest.mark.parametrize("count", [1, 2, 3])
@pytest.mark.parametrize("seed", range(4))
def test_no_place_within_travel_comes_nearer_than_the_closest(count: int, seed: int) -> None:
    rng = np.random.default_rng(400 + seed)
    axes = draw_stage(rng, count, reach=20.0)
    starts = np.array([draw_unit(rng) for _ in range(3)])
    toward = draw_unit(rng)
    dials, off, which = find_closest(axes, starts, toward)
    placed = reference_turn(axes, dials) @ starts[which]
    assert off == pytest.approx(np.rad2deg(np.arccos(np.clip(placed @ toward, -1, 1))), abs=1e-6)
    for _ in range(400):
        trial = tuple(float(rng.uniform(axis.low, axis.high)) for axis in axes)
        assert np.max(reference_turn(axes, trial) @ starts.T * 0 + 1) == 1
        cosines = (reference_turn(axes, trial) @ starts.T).T @ toward
        assert np.rad2deg(np.arccos(np.clip(np.max(cosines), -1, 1))) >= off - 1e-6


@pytest.mark.parametrize("seed", range(5))
def test_sensitivity_is_the_tilt_per_degree(seed: int) -> None:
    rng = np.random.default_rng(500 + seed)
    axes = draw_stage(rng, 3)
    dials = [float(rng.uniform(-60, 60)) for _ in axes]
    toward = draw_unit(rng)
    start = compute_turn(axes, dials).T @ toward
    for place, slope in enumerate(measure_sensitivity(axes, dials, toward)):
        moved = list(dials)
        moved[place] += 1e-4
        placed = reference_turn(axes, tuple(moved)) @ start
        assert np.rad2deg(np.linalg.norm(np.cross(placed, toward))) / 1e-4 == pytest.approx(slope, rel=1e-4)


def test_a_stage_that_cannot_be_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        build_axis("turn", [0, 0, 0], -1, 1)
    assert caught.value.field == "axis"
    with pytest.raises(InputError) as caught:
        build_axis("turn", [0, 0, 1], 10, -10)
    assert caught.value.field == "high"
