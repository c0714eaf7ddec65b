"""Strain between two cells: printed values, scipy's polar decomposition, and a simulation for σ."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.linalg import polar

from app.errors import InputError
from app.series.cell_series import CellState, build_cell_series
from app.series.strain import compute_strains
from tests.crystal.reference import CELLS
from tests.series.reference import GENERAL_RULES, LETTER_RULES, build_basis, to_numpy

RANDOM = np.random.default_rng(7)
RULES = {**LETTER_RULES, **GENERAL_RULES}

# Low albite, T. R. Stewart and D. Y. Limbach (1967), as printed by R. M. Hazen and L. W. Finger, Comparative Crystal
# Chemistry (1982), ch. 5, with the strain by the method of Y. Ohashi and C. W. Burnham (1973).
COLD = (8.141, 12.790, 7.157, 94.225, 116.597, 87.772)
HOT = (8.278, 12.863, 7.180, 92.780, 116.045, 87.718)
ALBITE = [CellState(26.0, COLD), CellState(1127.0, HOT)]


def test_albite_in_its_own_frame() -> None:
    strains = compute_strains(build_cell_series(ALBITE, "-1", frame="x3=c x1=a*"), "linear")
    assert np.all(strains.matrices[0] == 0.0)
    found = strains.matrices[1] * 100
    printed = [[2.149069, 0.7216585, 0.1418302], [0.7216585, 0.7261276, 1.260034], [0.1418302, 1.260034, 0.3213644]]
    # Its last digits are those of single precision.
    assert found == pytest.approx(np.array(printed), abs=1.5e-5)
    assert np.linalg.eigvalsh(strains.matrices[1]) == pytest.approx([-0.007989, 0.01332, 0.02663], abs=6e-6)


@pytest.mark.parametrize("rule", RULES)
def test_albite_free_of_the_frame(rule: str) -> None:
    strains = compute_strains(build_cell_series(ALBITE, "-1", frame=rule))
    # Derived from the same printed cells.
    assert np.linalg.eigvalsh(strains.matrices[1]) == pytest.approx([-0.0079140, 0.0134201, 0.0266708], abs=5e-8)
    # The symmetric factor of scipy's polar decomposition, from bases that were laid out by hand.
    gradient = to_numpy(build_basis(HOT, RULES[rule])) @ np.linalg.inv(to_numpy(build_basis(COLD, RULES[rule])))
    assert strains.matrices[1] == pytest.approx(polar(gradient, side="right")[1] - np.eye(3), abs=1e-13)
    linear = compute_strains(build_cell_series(ALBITE, "-1", frame=rule), "linear")
    assert linear.matrices[1] == pytest.approx((gradient + gradient.T) / 2 - np.eye(3), abs=1e-13)


def test_the_linear_form_depends_on_the_frame_and_the_stretch_does_not() -> None:
    values = {
        measure: [
            np.linalg.eigvalsh(compute_strains(build_cell_series(ALBITE, "-1", frame=rule), measure).matrices[1])  # type: ignore[arg-type]
            for rule in LETTER_RULES
        ]
        for measure in ("linear", "stretch")
    }
    assert np.max(np.ptp(values["stretch"], axis=0)) < 1e-14
    assert np.max(np.ptp(values["linear"], axis=0)) > 1e-5


def test_the_reference_may_be_any_state() -> None:
    series = build_cell_series(ALBITE, "-1", reference=1127.0)
    strains = compute_strains(series).matrices
    assert np.all(strains[1] == 0.0)
    gradient = to_numpy(build_basis(COLD)) @ np.linalg.inv(to_numpy(build_basis(HOT)))
    assert strains[0] == pytest.approx(polar(gradient, side="right")[1] - np.eye(3), abs=1e-13)
    assert to_numpy(build_basis(HOT)) == pytest.approx(series.reference_basis, abs=1e-12)


def test_a_strain_of_parts_in_ten_million_keeps_its_digits() -> None:
    grown = tuple(value * (1 + 3e-7) if value < 20 else value for value in CELLS["monoclinic b"])
    strains = compute_strains(build_cell_series([CellState(0.0, CELLS["monoclinic b"]), CellState(1.0, grown)], "2/m"))
    assert strains.matrices[1] == pytest.approx(3e-7 * np.eye(3), abs=3e-15)


@pytest.mark.parametrize("measure", ["stretch", "linear"])
def test_sigma_by_a_seeded_simulation(measure: str) -> None:
    sigma = np.array([1e-3, 2e-3, 1e-3, 0.02, 0.03, 0.02])
    states = [CellState(26.0, COLD, tuple(sigma)), CellState(1127.0, HOT, tuple(2 * sigma))]
    strains = compute_strains(build_cell_series(states, "-1"), measure)  # type: ignore[arg-type]
    drawn = []
    for _ in range(600):
        cells = [np.array(COLD) + RANDOM.normal(0, sigma), np.array(HOT) + RANDOM.normal(0, 2 * sigma)]
        cold, hot = (to_numpy(build_basis(cell)) for cell in cells)
        gradient = hot @ np.linalg.inv(cold)
        drawn.append(polar(gradient)[1] if measure == "stretch" else (gradient + gradient.T) / 2)
    assert strains.sigma is not None
    # 600 draws tell a standard deviation to 1/√1200 of itself; five times that.
    assert strains.sigma[1] == pytest.approx(np.std(drawn, axis=0), rel=5 / np.sqrt(1200))
    assert np.all(strains.sigma[0] == 0.0)


def test_an_unknown_measure_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        compute_strains(build_cell_series(ALBITE, "-1"), "engineering")  # type: ignore[arg-type]
    assert caught.value.field == "strain"
