"""A tensor as it is given: all nine cells or the free ones, made to obey, refused with a reason."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.tensor.kind import Kind
from app.tensor.tensor import build_tensor
from tests.crystal.reference import SETTINGS, Setting

MONOCLINIC = build_crystal([12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0], "2/m")


def test_a_matrix_is_made_to_obey() -> None:
    # By hand: of a monoclinic tensor 12 and 23 go, 13 becomes the mean of 13 and 31.
    given_matrix = [[13.2, 0.3, 1.8], [-0.1, 24.6, 0.2], [1.9, 0.0, 15.9]]
    tensor = build_tensor(MONOCLINIC, Kind(), matrix=given_matrix)
    assert tensor.estimate.matrix == pytest.approx(np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]))
    assert tensor.free == pytest.approx([13.2, 1.85, 24.6, 15.9])
    removed = np.array([[0, 0.3, -0.05], [-0.1, 0, 0.2], [0.05, 0, 0]])
    assert tensor.misfit == pytest.approx(np.linalg.norm(removed) / np.linalg.norm(given_matrix))


def test_free_cells_by_label() -> None:
    tensor = build_tensor(MONOCLINIC, Kind(), free={"33": 15.9, "11": 13.2, "22": 24.6, "13": 1.85})
    assert tensor.estimate.matrix.tolist() == [[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]
    assert tensor.misfit == 0.0
    assert "x3 along c" in tensor.estimate.frame


@pytest.mark.parametrize(
    ("arguments", "field"),
    [
        ({}, ""),
        ({"matrix": np.eye(3).tolist(), "free": {}}, "matrix"),
        ({"matrix": [[1, 2], [3, 4]]}, "matrix"),
        ({"matrix": [[1, 2, "x"], [3, 4, 5], [6, 7, 8]]}, "matrix"),
        ({"matrix": [[1, 2, float("nan")], [3, 4, 5], [6, 7, 8]]}, "matrix"),
        ({"matrix": [[1e301, 0, 0], [0, 1, 0], [0, 0, 1]]}, "matrix"),
        ({"free": {"11": 1, "13": 0, "22": 1}}, "free.33"),
        ({"free": {"11": 1, "13": 0, "22": 1, "33": 1, "12": 0}}, "free.12"),
        ({"free": {"11": 1, "13": 0, "22": 1, "33": float("inf")}}, "free.33"),
        ({"free": {"11": 1, "13": 0, "22": 1, "33": "much"}}, "free.33"),
        ({"free": {"11": 1, "13": 0, "22": 1, "33": None}}, "free.33"),
        ({"free": {"11": 1, "13": 1e305, "22": 1, "33": 1}}, "free.13"),
        ({"matrix": np.eye(3), "covariance": np.eye(3)}, "covariance"),
        ({"matrix": np.eye(3), "covariance": -np.eye(4)}, "covariance"),
    ],
)
def test_what_is_no_tensor_is_refused(arguments: dict[str, Any], field: str) -> None:
    with pytest.raises(InputError) as caught:
        build_tensor(MONOCLINIC, Kind(), **arguments)
    assert (caught.value.field or "") == field
    assert caught.value.message


@settings(max_examples=80, deadline=None)
@given(
    st.sampled_from(SETTINGS),
    st.sampled_from(["polar", "axial"]),
    st.sampled_from(["symmetric", "general", "antisymmetric"]),
    st.lists(st.floats(-10, 10), min_size=9, max_size=9),
    st.sampled_from([1e-200, 1e-30, 1.0, 1e30, 1e200]),
)
def test_what_obeys_is_left_alone_at_any_scale(
    setting: Setting, parity: str, intrinsic: str, cells: list[float], scale: float
) -> None:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame="x1=a x3=c*")
    kind = Kind(parity, intrinsic)  # type: ignore[arg-type]
    first = build_tensor(crystal, kind, matrix=scale * np.array(cells).reshape(3, 3))
    again = build_tensor(crystal, kind, matrix=first.estimate.matrix)
    largest = float(np.max(np.abs(first.estimate.matrix)))
    assert 0.0 <= first.misfit <= 1.0 + 1e-12
    assert again.estimate.matrix == pytest.approx(first.estimate.matrix, abs=1e-12 * largest)
    if largest > 1e-9 * scale:
        assert again.misfit < 1e-12
    by_label = build_tensor(crystal, kind, free=dict(zip(first.form.labels, first.free.tolist(), strict=True)))
    assert by_label.estimate.matrix == pytest.approx(first.estimate.matrix, abs=1e-12 * largest)
    # It obeys: every operation leaves it alone.
    for rotation in crystal.rotations:
        sign = np.linalg.det(rotation) if parity == "axial" else 1.0
        turned = sign * rotation @ first.estimate.matrix @ rotation.T
        assert turned == pytest.approx(first.estimate.matrix, abs=1e-11 * largest + 1e-300)


def test_a_kind_that_vanishes() -> None:
    # Axial symmetric in 2/m: none (International Tables D, 2006, 1.1.4.7).
    tensor = build_tensor(MONOCLINIC, Kind("axial", "symmetric"), matrix=np.ones((3, 3)), covariance=[])
    assert tensor.free.shape == (0,)
    assert tensor.misfit == 1.0
    assert tensor.estimate.matrix.tolist() == np.zeros((3, 3)).tolist()
    assert build_tensor(MONOCLINIC, Kind("axial", "symmetric"), free={}).misfit == 0.0
    with pytest.raises(InputError, match="not free"):
        build_tensor(MONOCLINIC, Kind("axial", "symmetric"), free={"11": 1.0})


def test_the_covariance_is_spread_over_all_cells() -> None:
    # 31 equals 13, so it has its σ and full correlation; 12 is zero by symmetry and has none.
    covariance = np.diag([0.04, 0.0025, 0.09, 0.01])
    covariance[0, 1] = covariance[1, 0] = 0.003
    tensor = build_tensor(MONOCLINIC, Kind(), matrix=np.eye(3), covariance=covariance)
    assert tensor.estimate.sigma_matrix == pytest.approx(np.array([[0.2, 0, 0.05], [0, 0.3, 0], [0.05, 0, 0.1]]))
    assert tensor.estimate.covariance is not None
    assert tensor.estimate.covariance[2, 6] == pytest.approx(0.0025)
    assert tensor.estimate.covariance[0, 6] == pytest.approx(0.003)


def test_the_zero_tensor() -> None:
    tensor = build_tensor(MONOCLINIC, Kind(), matrix=np.zeros((3, 3)))
    assert tensor.misfit == 0.0
    assert not tensor.estimate.matrix.any()
