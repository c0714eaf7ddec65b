"""Angles between faces, and the drift of principal axes, as the cell moves."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from app.crystal.direction import parse_direction, read_direction
from app.errors import InputError
from app.series.branches import follow_branches
from app.series.cell_series import CellSeries, CellState, build_cell_series
from app.series.expansion import ExpansionCurve, compute_expansion, fit_cells
from app.series.moving_directions import measure_angle, measure_drift
from tests.series.reference import build_basis, to_numpy

RANDOM = np.random.default_rng(11)


def build(states: list[CellState], group: str, degree: int, at: list[float]) -> ExpansionCurve:
    return compute_expansion(fit_cells(build_cell_series(states, group), degree), at)


def test_albite_faces() -> None:
    # Albite 8.138 12.789 7.156 94.33 116.57 87.65 (from memory): (001)^(010) 86°24′ (from memory), to 10′. That is the
    # acute angle of the two planes; the normals c* and b* stand at its supplement or at itself.
    states = [CellState(0.0, (8.138, 12.789, 7.156, 94.33, 116.57, 87.65))]
    found = measure_angle(build(states, "-1", 0, [0.0]), parse_direction("(001)"), parse_direction("(010)"))
    assert found.degrees[0] == pytest.approx(86 + 24 / 60, abs=10 / 60)
    assert found.sigma is None


SIGMA = (2e-4, 2e-4, 2e-4, 0.004, 0.003, 0.005)
TRICLINIC = [
    CellState(t, (8.1 + 1e-4 * t, 12.8 - 2e-5 * t, 7.1 + 3e-5 * t, 94.2 - 1e-3 * t, 116.6, 87.7 + 5e-4 * t), SIGMA)
    for t in (20.0, 100.0, 250.0, 400.0)
]


def normal_of(cell: np.ndarray, indices: list[int]) -> np.ndarray:
    vector = np.linalg.inv(to_numpy(build_basis(cell))).T @ indices
    return vector / np.linalg.norm(vector)


def row_of(cell: np.ndarray, indices: list[int]) -> np.ndarray:
    vector = to_numpy(build_basis(cell)) @ indices
    return vector / np.linalg.norm(vector)


def angle(one: np.ndarray, two: np.ndarray) -> float:
    return float(np.rad2deg(np.arccos(np.clip(one @ two, -1.0, 1.0))))


def test_angles_between_normals_and_rows_with_sigma() -> None:
    curve = build(TRICLINIC, "-1", 1, [20.0, 333.0, 500.0])
    faces = measure_angle(curve, parse_direction("(1 0 -2)"), parse_direction("(0 1 3)"))
    mixed = measure_angle(curve, parse_direction("(1 1 0)"), parse_direction("[0 -1 2]"))
    assert faces.extrapolated.tolist() == [False, False, True]
    assert faces.sigma is not None and mixed.sigma is not None and curve.cell_sigma is not None
    for place, t in enumerate(curve.t):
        cell = np.array([8.1 + 1e-4 * t, 12.8 - 2e-5 * t, 7.1 + 3e-5 * t, 94.2 - 1e-3 * t, 116.6, 87.7 + 5e-4 * t])
        assert faces.degrees[place] == pytest.approx(angle(normal_of(cell, [1, 0, -2]), normal_of(cell, [0, 1, 3])))
        assert mixed.degrees[place] == pytest.approx(angle(normal_of(cell, [1, 1, 0]), row_of(cell, [0, -1, 2])))
        # σ: the six parameters are independent, so their squared effects add; effects by differences.
        for found, measure in (
            (faces, lambda c: angle(normal_of(c, [1, 0, -2]), normal_of(c, [0, 1, 3]))),
            (mixed, lambda c: angle(normal_of(c, [1, 1, 0]), row_of(c, [0, -1, 2]))),
        ):
            effects = [(measure(cell + step) - measure(cell - step)) / 2e-4 for step in 1e-4 * np.eye(6)]
            wanted = np.sqrt(np.sum(np.square(np.array(effects) * curve.cell_sigma[place])))
            assert found.sigma[place] == pytest.approx(wanted, rel=1e-5)


MONOCLINIC = [
    CellState(t, (6.2 + 9e-5 * t + 2e-8 * t * t, 7.3 + 1e-4 * t, 9.1 - 2e-5 * t, 90.0, 104.0 + 8e-4 * t, 90.0))
    for t in (0.0, 150.0, 300.0, 450.0, 600.0)
]


def with_sigma(states: list[CellState]) -> list[CellState]:
    return [replace(state, sigma=(3e-4, 3e-4, 3e-4, 0.0, 0.006, 0.0)) for state in states]


def test_drift_of_the_free_axes_of_a_monoclinic_crystal() -> None:
    at = np.linspace(0.0, 600.0, 13)
    curve = build(MONOCLINIC, "2/m", 2, at.tolist())
    branches = follow_branches(curve.alpha)
    free = [k for k in range(3) if abs(branches.axes[0, k, 1]) < 0.5]
    fixed = next(k for k in range(3) if k not in free)
    for place in range(13):
        # In the plane across b: tan 2ψ = 2 α13 / (α33 − α11), with ψ from x3 = c toward x1 (a Mohr circle).
        a = curve.alpha[place]
        psi = np.rad2deg(np.arctan2(2 * a[0, 2], a[2, 2] - a[0, 0])) / 2.0
        wanted = sorted(min(abs(psi - shift), 180 - abs(psi - shift)) for shift in (0.0, 90.0))
        row = sorted(measure_drift(curve, branches, k, parse_direction("[001]")).degrees[place] for k in free)
        assert row == pytest.approx(wanted, abs=1e-9)
        # c* stands β − 90° from c in that plane, away from a: the normal sees another drift than the row.
        beta = curve.motion.cells[place, 4]
        aside = [abs(psi + sign * (beta - 90.0)) for sign in (1, -1)]
        options = [sorted(min(x, 180 - x) for x in (value, abs(value - 90.0))) for value in aside]
        normal = sorted(measure_drift(curve, branches, k, parse_direction("(001)")).degrees[place] for k in free)
        assert any(np.allclose(normal, option, atol=1e-9) for option in options)
        assert not np.allclose(normal, row, atol=1.0)
    assert measure_drift(curve, branches, fixed, parse_direction("[010]")).degrees == pytest.approx(
        np.zeros(13), abs=1e-9
    )


def test_sigma_of_the_drift_by_a_seeded_simulation() -> None:
    series = build_cell_series(with_sigma(MONOCLINIC), "2/m")

    def drift(given: CellSeries, sigma: bool = False) -> np.ndarray:
        curve = compute_expansion(fit_cells(given, 1), [250.0])
        branches = follow_branches(curve.alpha)
        free = [k for k in range(3) if abs(branches.axes[0, k, 1]) < 0.5]
        found = [measure_drift(curve, branches, k, parse_direction("(1 0 2)")) for k in free]
        return np.array([entry.sigma[0] if sigma and entry.sigma is not None else entry.degrees[0] for entry in found])

    assert series.sigma is not None
    drawn = [drift(replace(series, free=series.free + RANDOM.normal(0, series.sigma))) for _ in range(700)]
    # 700 draws tell a standard deviation to 1/√1400 of itself; five times that.
    assert drift(series, sigma=True) == pytest.approx(np.std(drawn, axis=0), rel=5 / np.sqrt(1400))


def test_an_axis_that_is_not_determined_has_no_sigma() -> None:
    states = [CellState(t, (5.0 + 1e-4 * t,) * 2 + (7.0 - 1e-4 * t, 90, 90, 90), (1e-4,) * 6) for t in (0.0, 100.0)]
    curve = build(states, "4/m", 1, [50.0])
    branches = follow_branches(curve.alpha)
    unique = int(np.argmax(np.abs(branches.axes[0, :, 2])))
    found = measure_drift(curve, branches, unique, parse_direction("[101]"))
    assert found.sigma is not None and np.isfinite(found.sigma[0])
    other = measure_drift(curve, branches, (unique + 1) % 3, parse_direction("[100]"))
    assert other.sigma is not None and np.isnan(other.sigma[0])


def test_vectors_stand_still_in_the_frame_and_wrong_directions_are_refused() -> None:
    curve = build(TRICLINIC, "-1", 1, [20.0, 400.0])
    along_c = measure_angle(curve, read_direction([0, 0, 1]), parse_direction("[001]"))
    assert along_c.degrees == pytest.approx([0.0, 0.0], abs=1e-9)
    assert along_c.sigma is not None and np.all(np.isnan(along_c.sigma))
    with pytest.raises(InputError):
        measure_angle(curve, read_direction({"specimen": [0, 0, 1]}), parse_direction("[001]"))
    with pytest.raises(InputError, match="four indices"):
        measure_angle(curve, parse_direction("(10-10)"), parse_direction("[001]"))
