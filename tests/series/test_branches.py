"""Principal curves through planted crossings: the tensors are made from curves and axes that are known."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.series.branches import follow_branches

T = np.linspace(0.0, 1.0, 41)


def make(values: np.ndarray, axes: np.ndarray) -> np.ndarray:
    """Tensors (T, 3, 3) of values (T, 3) along axes (T, 3, 3) as rows."""
    return np.einsum("ti,tia,tib->tab", values, axes, axes)


def turning(angle: np.ndarray, about: tuple[float, float, float] = (0.0, 1.0, 0.0)) -> np.ndarray:
    start = Rotation.from_euler("zxz", [20.0, 35.0, -50.0], degrees=True)
    turns = Rotation.from_rotvec(np.outer(np.deg2rad(angle), about)) * start
    return np.swapaxes(turns.as_matrix(), -1, -2)


def check_curves(found: object, values: np.ndarray, axes: np.ndarray, names: list[int]) -> None:
    assert found.values == pytest.approx(values[:, names], abs=1e-12)  # type: ignore[attr-defined]
    overlap = np.abs(np.sum(found.axes * axes[:, names], axis=-1))  # type: ignore[attr-defined]
    gaps = np.abs(values[:, [0, 1, 2]] - values[:, [1, 2, 0]]).min(axis=1)
    apart = gaps > 1e-8 * np.max(np.abs(values))
    assert overlap[apart] == pytest.approx(np.ones_like(overlap[apart]), abs=1e-9)
    # Where two are equal they have no axes of their own; those carried on are a step's turn, here below 1°, away.
    assert np.all(overlap > np.cos(np.deg2rad(1.0)))


@pytest.mark.parametrize("count", [40, 41])
def test_a_planted_crossing_is_followed(count: int) -> None:
    # The first two curves cross at t = 1/2: on a place of 41, between two of 40.
    t = np.linspace(0.0, 1.0, count)
    values = np.stack([1.0 + t, 2.0 - t, 4.0 + 0.0 * t], axis=-1) * 1e-6
    axes = turning(20.0 * t)
    found = follow_branches(make(values, axes))
    check_curves(found, values, axes, [2, 1, 0])
    # By size the two would have changed places.
    by_size = np.sort(values, axis=1)[:, ::-1]
    assert not np.allclose(found.values, by_size)
    assert np.take_along_axis(by_size, found.order, axis=1) == pytest.approx(found.values)
    assert found.order[0].tolist() == [0, 1, 2]
    assert found.order[-1].tolist() == [0, 2, 1]
    assert not np.any(found.doubtful)


def test_all_three_cross_in_turn() -> None:
    values = np.stack([3.0 * T, 1.0 - T, 1.7 - 0.0 * T], axis=-1)
    axes = turning(15.0 * T, (0.6, 0.0, 0.8))
    check_curves(follow_branches(make(values, axes)), values, axes, [2, 1, 0])


def test_a_point_without_axes_is_passed_straight_through() -> None:
    # At t = 1/2 the tensor is isotropic.
    values = np.stack([1.0 + (T - 0.5), 1.0 - (T - 0.5), 1.0 + 3.0 * (T - 0.5)], axis=-1)
    axes = np.tile(np.eye(3)[[2, 0, 1]], (len(T), 1, 1))
    check_curves(follow_branches(make(values, axes)), values, axes, [1, 0, 2])


def test_axes_are_right_handed_without_jumps_of_sign() -> None:
    values = np.stack([1.0 + T, 2.0 - 0.3 * T, -1.0 + 0.0 * T], axis=-1)
    axes = turning(170.0 * T)
    found = follow_branches(make(values, axes))
    assert np.linalg.det(found.axes) == pytest.approx(np.ones(len(T)))
    assert np.all(np.sum(found.axes[1:] * found.axes[:-1], axis=-1) > 0.9)
    # 170° in 40 steps about an axis: none turns by more than 4.25°.
    assert np.max(found.turns) <= 4.25 + 1e-9


def test_an_avoided_crossing_is_not_crossed() -> None:
    # Off-diagonal part that never vanishes: the axes turn by 90° in all, and each curve keeps its order.
    half = 3.0 * (T - 0.5)
    tensors = np.zeros((len(T), 3, 3))
    tensors[:, 0, 0], tensors[:, 1, 1], tensors[:, 0, 1] = half, -half, 0.4
    tensors[:, 1, 0], tensors[:, 2, 2] = 0.4, 9.0
    found = follow_branches(tensors)
    assert found.values == pytest.approx(
        np.stack([9.0 + 0 * T, np.hypot(half, 0.4), -np.hypot(half, 0.4)], axis=-1), abs=1e-12
    )
    assert not np.any(found.doubtful)


def test_places_too_far_apart_are_marked() -> None:
    values = np.array([[3.0, 2.0, 1.0]] * 3)
    axes = turning(np.array([0.0, 10.0, 50.0]))
    assert follow_branches(make(values, axes)).doubtful.tolist() == [False, False, True]


def test_none_and_one_and_nothing_but_zeros() -> None:
    assert follow_branches(np.zeros((0, 3, 3))).values.shape == (0, 3)
    assert follow_branches(np.diag([1.0, 3.0, 2.0])[None]).values.tolist() == [[3.0, 2.0, 1.0]]
    assert np.all(follow_branches(np.zeros((4, 3, 3))).values == 0.0)
