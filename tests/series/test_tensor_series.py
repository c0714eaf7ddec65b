"""Tensors against a variable: an independent generalised least squares, planted polynomials and a simulation."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.series.branches import follow_branches
from app.series.tensor_series import TensorState, evaluate_tensors, fit_tensors
from app.tensor.kind import Kind
from app.tensor.tensor import build_tensor
from tests.crystal.reference import CELLS

RANDOM = np.random.default_rng(99)
CRYSTAL = build_crystal(CELLS["monoclinic b"], "2/m")
LABELS = ("11", "13", "22", "33")
TIMES = np.array([300.0, 80.0, 150.0, 220.0, 300.0, 400.0])

# Free cells 11, 13, 22, 33 as polynomials in t/100, lowest power first. Invented.
PLANTED = np.array([[13.2, -1.1, 0.20], [1.85, 0.4, -0.10], [24.6, -2.0, 0.30], [15.9, -0.7, 0.05]])


def planted(t: float) -> np.ndarray:
    return np.array([np.polynomial.polynomial.polyval(t / 100, row) for row in PLANTED])


def state(
    t: float, free: np.ndarray, covariance: np.ndarray | None = None, unit: str | None = "W/(m·K)"
) -> TensorState:
    named = dict(zip(LABELS, free.tolist(), strict=True))
    return TensorState(t, build_tensor(CRYSTAL, Kind(), free=named, covariance=covariance, unit=unit))


def draw_covariances() -> list[np.ndarray]:
    halves = RANDOM.normal(size=(len(TIMES), 4, 4)) * 0.05
    return [half @ half.T + 1e-4 * np.eye(4) for half in halves]


def test_planted_polynomials_come_back() -> None:
    fit = fit_tensors([state(t, planted(t)) for t in TIMES], 2)
    curve = evaluate_tensors(fit, [100.0, 333.0, 500.0])
    for index, t in enumerate(curve.t):
        assert curve.free[index] == pytest.approx(planted(t), abs=1e-11)
        a11, a13, a22, a33 = planted(t)
        wanted = [[a11, 0, a13], [0, a22, 0], [a13, 0, a33]]
        assert curve.matrices[index] == pytest.approx(np.array(wanted), abs=1e-11)
    assert curve.extrapolated.tolist() == [False, False, True]
    assert curve.estimates[0].unit == "W/(m·K)"
    assert "x3 along c" in curve.estimates[0].frame


def test_values_covariance_and_chi2_are_those_of_one_dense_least_squares() -> None:
    covariances = draw_covariances()
    given = [planted(t) + RANDOM.multivariate_normal(np.zeros(4), c) for t, c in zip(TIMES, covariances, strict=True)]
    fit = fit_tensors([state(*row) for row in zip(TIMES, given, covariances, strict=True)], 1)
    # All 24 numbers at once, with one block-diagonal V, in plain powers of t/100.
    count = len(TIMES)
    weights = np.zeros((4 * count, 4 * count))
    design = np.zeros((4 * count, 8))
    for index, t in enumerate(TIMES):
        block = slice(4 * index, 4 * index + 4)
        weights[block, block] = np.linalg.inv(covariances[index])
        design[block] = np.hstack([np.eye(4), np.eye(4) * t / 100])
    observed = np.concatenate(given)
    normal = np.linalg.inv(design.T @ weights @ design)
    solution = normal @ design.T @ weights @ observed
    residual = observed - design @ solution
    chi2 = residual @ weights @ residual
    assert fit.chi2 == pytest.approx(chi2, rel=1e-9)
    assert fit.dof == 16
    assert fit.p_value == pytest.approx(stats.chi2.sf(chi2, 16), rel=1e-8)
    assert fit.residuals.ravel() == pytest.approx(residual, abs=1e-9)
    curve = evaluate_tensors(fit, [123.0])
    there = np.hstack([np.eye(4), np.eye(4) * 1.23])
    assert curve.free[0] == pytest.approx(there @ solution, rel=1e-10)
    assert curve.free_covariance is not None
    assert curve.free_covariance[0] == pytest.approx(there @ normal @ there.T, rel=1e-8, abs=1e-14)
    hat = design @ normal @ design.T
    deviations = np.sqrt(np.diag(np.linalg.inv(weights) - hat)).reshape(count, 4)
    assert fit.standardised == pytest.approx(residual.reshape(count, 4) / deviations, rel=1e-7)
    # F against the constant, from a second dense fit.
    flat = design[:, :4]
    lower = observed - flat @ np.linalg.solve(flat.T @ weights @ flat, flat.T @ weights @ observed)
    f = (lower @ weights @ lower - chi2) / 4 / (chi2 / 16)
    assert fit.test is not None
    assert fit.test.extra == 4
    assert fit.test.value == pytest.approx(f, rel=1e-8)
    assert fit.test.p_value == pytest.approx(stats.f.sf(f, 4, 16), rel=1e-6)


def test_without_covariance_the_scatter_gives_it() -> None:
    given = [planted(t) + RANDOM.normal(0, 0.05, 4) for t in TIMES]
    fit = fit_tensors([state(t, free) for t, free in zip(TIMES, given, strict=True)], 2)
    assert fit.covariance_from == "scatter"
    assert fit.p_value is None
    # Equal designs: ordinary polynomials of each cell (numpy), off-diagonal cells counting twice in the norm.
    wanted = [np.polyfit(TIMES, column, 2) for column in np.array(given).T]
    curve = evaluate_tensors(fit, [260.0])
    assert curve.free[0] == pytest.approx([np.polyval(row, 260.0) for row in wanted], rel=1e-9)
    residuals = np.array(
        [column - np.polyval(row, TIMES) for row, column in zip(wanted, np.array(given).T, strict=True)]
    )
    chi2 = float(np.sum(residuals[[0, 2, 3]] ** 2) + 2 * np.sum(residuals[1] ** 2))
    assert fit.chi2 == pytest.approx(chi2, rel=1e-9)
    powers = np.vander(TIMES / 100, 3, increasing=True)
    row = np.array([1, 2.6, 2.6**2])
    variance = chi2 / 12 * row @ np.linalg.inv(powers.T @ powers) @ row
    assert curve.free_covariance is not None
    assert np.diag(curve.free_covariance[0]) == pytest.approx(variance * np.array([1, 0.5, 1, 1]), rel=1e-8)
    exact = fit_tensors([state(t, free) for t, free in zip(TIMES[:3], given[:3], strict=True)], 2)
    assert exact.covariance is None
    assert exact.standardised is None
    assert exact.test is None
    assert evaluate_tensors(exact, [100.0]).estimates[0].covariance is None


def test_scatter_does_not_depend_on_the_frame() -> None:
    given = [planted(t) + RANDOM.normal(0, 0.05, 4) for t in TIMES]
    first = [state(t, free) for t, free in zip(TIMES, given, strict=True)]
    other_crystal = build_crystal(CELLS["monoclinic b"], "2/m", frame="x1=a x3=c*")
    assert CRYSTAL.M is not None and other_crystal.M is not None
    turn = other_crystal.M @ np.linalg.inv(CRYSTAL.M)
    second = [
        TensorState(
            s.t, build_tensor(other_crystal, Kind(), matrix=turn @ s.tensor.estimate.matrix @ turn.T, unit=None)
        )
        for s in first
    ]
    one, two = fit_tensors(first, 1), fit_tensors(second, 1)
    assert two.chi2 == pytest.approx(one.chi2, rel=1e-9)
    there, here = evaluate_tensors(two, [200.0]).estimates[0], evaluate_tensors(one, [200.0]).estimates[0]
    assert there.matrix == pytest.approx(turn @ here.matrix @ turn.T, abs=1e-10)
    assert here.covariance is not None and there.covariance is not None
    both = np.kron(turn, turn)
    assert there.covariance == pytest.approx(both @ here.covariance @ both.T, abs=1e-12)


def test_components_are_interpolated_and_their_axes_followed_through_a_crossing() -> None:
    # 11 and 33 of an orthorhombic tensor cross at t = 250; 22 stays above.
    crystal = build_crystal(CELLS["orthorhombic"], "mmm")
    states = [
        TensorState(t, build_tensor(crystal, Kind(), free={"11": 2.0 + t / 500, "22": 9.0, "33": 3.0 - t / 500}))
        for t in (0.0, 500.0)
    ]
    curve = evaluate_tensors(fit_tensors(states, 1), np.linspace(0.0, 500.0, 11))
    branches = follow_branches(curve.matrices)
    assert branches.values[:, 0] == pytest.approx(np.full(11, 9.0))
    assert branches.values[:, 1] == pytest.approx(np.linspace(3.0, 2.0, 11))
    assert branches.values[:, 2] == pytest.approx(np.linspace(2.0, 3.0, 11))
    assert np.abs(branches.axes[-1, 1]) == pytest.approx([0, 0, 1])


def test_refusals_name_the_place() -> None:
    good = np.eye(4) * 1e-2
    base = [state(t, planted(t), good) for t in (1.0, 2.0, 3.0)]
    other = build_tensor(CRYSTAL, Kind("polar", "general"), matrix=np.eye(3), unit="W/(m·K)")
    singular = np.diag([1e-2, 0.0, 1e-2, 1e-2])
    cases = [
        ([], 0, "states"),
        ([*base, TensorState(np.nan, base[0].tensor)], 0, "states[3].t"),
        ([*base, state(4.0, planted(4.0))], 0, "states[3].tensor.covariance"),
        ([*base, state(4.0, planted(4.0), good, "W/(cm·K)")], 0, "states[3].tensor.unit"),
        ([*base, TensorState(4.0, other)], 0, "states[3].tensor"),
        ([base[0], state(4.0, planted(4.0), singular)], 0, "states[1].tensor.covariance"),
        (base, 3, "degree"),
        ([base[0], replace(base[1], t=1.0)], 1, "degree"),
    ]
    for states, degree, field in cases:
        with pytest.raises(InputError) as caught:
            fit_tensors(states, degree)
        assert caught.value.field == field
    fit = fit_tensors(base, 2)
    with pytest.raises(InputError) as caught:
        evaluate_tensors(fit, [2.0, 1e200])
    assert caught.value.field == "at[1]"


def test_a_kind_that_symmetry_forbids_cannot_change() -> None:
    tensor = build_tensor(build_crystal(CELLS["cubic"], "m-3m"), Kind("axial"), matrix=np.zeros((3, 3)))
    with pytest.raises(InputError, match="nothing can change"):
        fit_tensors([TensorState(0.0, tensor)], 0)
