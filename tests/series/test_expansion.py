"""The expansion tensor against exact derivatives in many digits, simulation and printed values."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.series.cell_series import CellState, build_cell_series
from app.series.expansion import ExpansionCurve, compute_expansion, fit_cells
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.principal import find_principal
from tests.crystal.reference import CELLS, SETTINGS, Setting
from tests.series.reference import (
    GENERAL_RULES,
    LETTER_RULES,
    build_basis,
    build_polynomial_cell,
    differentiate_basis,
    to_numpy,
)

RANDOM = np.random.default_rng(42)
RULES = {**LETTER_RULES, **GENERAL_RULES}
TIMES = np.array([80.0, 200.0, 300.0, 450.0, 500.0, 700.0])


def draw_coefficients(family: str, degree: int = 3) -> list[list[float]]:
    """Six polynomials in t/1000 that begin at an invented cell of the family and keep what its symmetry holds."""
    start = CELLS[family]
    rows = [[value, *(RANDOM.normal(0, 0.01, degree) * value)] for value in start]
    for position in range(3, 6):
        if start[position] in (90.0, 120.0):
            rows[position][1:] = [0.0] * degree
    if family in ("tetragonal", "hexagonal", "rhombohedral", "cubic"):
        rows[1] = rows[0]
    if family in ("rhombohedral", "cubic"):
        rows[2] = rows[0]
        rows[4] = rows[5] = rows[3]
    return rows


def sample(coefficients: list[list[float]], sigma: tuple[float, ...] | None = None) -> list[CellState]:
    cell = build_polynomial_cell(coefficients)
    return [CellState(float(t), tuple(float(value) for value in cell(t)), sigma) for t in TIMES]


def expand(states: list[CellState], group: str, degree: int, at: object, **more: object) -> ExpansionCurve:
    return compute_expansion(fit_cells(build_cell_series(states, group, **more), degree), at)  # type: ignore[arg-type]


# Against sym(Ṁ M⁻¹) by mpmath, for every rule of attachment -----------------------------------------------------------


@pytest.mark.parametrize("rule", RULES)
def test_alpha_is_the_symmetric_part_of_the_velocity_for_every_rule(rule: str) -> None:
    coefficients = draw_coefficients("triclinic")
    at = [80.0, 333.0, 810.0]
    curve = expand(sample(coefficients), "-1", 3, at, frame=rule)
    cell = build_polynomial_cell(coefficients)
    default = expand(sample(coefficients), "-1", 3, at)
    for index, t in enumerate(at):
        wanted = differentiate_basis(cell, t, RULES[rule])
        assert curve.alpha[index] == pytest.approx(wanted, abs=1e-9 * np.max(np.abs(wanted)))
        # The tensor turns with the frame: R from the two frames' bases, both laid out by the reference.
        turn = to_numpy(build_basis(cell(t), RULES[rule])) @ np.linalg.inv(to_numpy(build_basis(cell(t))))
        assert turn @ turn.T == pytest.approx(np.eye(3), abs=1e-12)
        assert turn @ default.alpha[index] @ turn.T == pytest.approx(curve.alpha[index], abs=1e-14)
        assert np.linalg.eigvalsh(curve.alpha[index]) == pytest.approx(np.linalg.eigvalsh(wanted), abs=1e-14)
    assert curve.extrapolated.tolist() == [False, False, True]


@pytest.mark.parametrize("setting", SETTINGS, ids=lambda setting: setting.name)
def test_alpha_of_every_group_is_exact_and_of_its_form(setting: Setting) -> None:
    coefficients = draw_coefficients(setting.family)
    states = sample(coefficients)
    curve = expand(states, setting.symbol, 3, [120.0, 650.0], unique_axis=setting.unique_axis)
    cell = build_polynomial_cell(coefficients)
    for index, t in enumerate(curve.t):
        wanted = differentiate_basis(cell, t)
        assert curve.alpha[index] == pytest.approx(wanted, abs=1e-9 * np.max(np.abs(wanted)))
        assert np.array_equal(curve.alpha[index], curve.alpha[index].T)
        # The form of the crystal as it is at t: with x3=c in a rhombohedral cell the frame moves in the symmetry.
        crystal = build_crystal([float(value) for value in cell(t)], setting.symbol, unique_axis=setting.unique_axis)
        form = build_form(crystal, Kind())
        assert form.project(curve.alpha[index]) == pytest.approx(curve.alpha[index], abs=1e-15)
        if setting.family != "rhombohedral":
            # Locked cells are exactly what they are locked to, not up to rounding.
            assert np.array_equal(form.expand(form.pick(curve.alpha[index])), curve.alpha[index])


def test_isotropic_and_uniaxial_axes_are_not_shown_as_results() -> None:
    for family, group, arbitrary in (
        ("cubic", "m-3m", (True, True, True)),
        ("hexagonal", "6/m", None),
        ("rhombohedral", "-3m", None),
    ):
        curve = expand(sample(draw_coefficients(family)), group, 2, [300.0])
        found = find_principal(curve.estimates[0])
        assert found.arbitrary == arbitrary if arbitrary else sum(found.arbitrary) == 2


def test_degree_nought_does_not_expand() -> None:
    curve = expand(sample(draw_coefficients("monoclinic b")), "2/m", 0, [300.0, 1e9])
    assert np.all(curve.alpha == 0.0)
    assert np.all(curve.volume_rate == 0.0)


def test_the_trace_is_the_rate_of_the_logarithm_of_the_volume() -> None:
    curve = expand(sample(draw_coefficients("triclinic")), "1", 3, [299.99, 300.0, 300.01])
    volumes = np.log(np.linalg.det(curve.motion.M))
    assert curve.volume_rate[1] == pytest.approx((volumes[2] - volumes[0]) / 0.02, rel=1e-7)


# Uncertainty ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("rule", ["x3=c x2=b*", "x1=a x3=c*", "x3=[1 1 1] x1=(1 -1 0)"])
@pytest.mark.parametrize("known", [True, False])
def test_sigma_is_that_of_an_independent_propagation(rule: str, known: bool) -> None:
    # numpy.polyfit gives each parameter's coefficients and their covariance; α is a function of the coefficients by
    # mpmath, and its derivatives are differences of that.
    coefficients = draw_coefficients("triclinic", 2)
    states = sample(coefficients)
    noise = RANDOM.normal(0, 1.0, (6, 6)) * np.array([1e-4] * 3 + [1e-3] * 3)
    sigma = (1e-4, 2e-4, 1e-4, 3e-3, 1e-3, 2e-3) if known else None
    states = [
        CellState(state.t, tuple(np.array(state.cell) + shift), sigma)
        for state, shift in zip(states, noise, strict=True)
    ]
    at = 260.0
    curve = expand(states, "-1", 2, [at], frame=rule)
    cells = np.array([state.cell for state in states])
    fits, variances = [], []
    for column in range(6):
        weights = None if sigma is None else np.full(6, 1 / sigma[column])
        wanted, covariance = np.polyfit(TIMES / 1000, cells[:, column], 2, w=weights, cov="unscaled" if known else True)
        fits.append(wanted[::-1])
        variances.append(covariance[::-1, ::-1])
    center = np.array(fits)

    def alpha(flat: np.ndarray) -> np.ndarray:
        return differentiate_basis(build_polynomial_cell(flat.tolist()), at, RULES[rule])

    assert curve.alpha[0] == pytest.approx(alpha(center), rel=1e-7, abs=1e-12)
    total = np.zeros((9, 9))
    for column in range(6):
        jacobian = np.zeros((9, 3))
        for power in range(3):
            step = np.zeros((6, 3))
            step[column, power] = 1e-4
            jacobian[:, power] = ((alpha(center + step) - alpha(center - step)) / 2e-4).ravel()
        total += jacobian @ variances[column] @ jacobian.T
    assert curve.covariance is not None
    assert curve.covariance[0] == pytest.approx(total, abs=1e-6 * np.max(total))
    assert curve.volume_rate_sigma is not None
    assert curve.volume_rate_sigma[0] == pytest.approx(np.sqrt(np.eye(3).ravel() @ total @ np.eye(3).ravel()), rel=1e-6)


def test_sigma_by_a_seeded_simulation() -> None:
    sigma = (2e-4, 2e-4, 3e-4, 0.0, 4e-3, 0.0)
    true = sample(draw_coefficients("monoclinic b", 1), sigma)
    series = build_cell_series(true, "2/m")
    assert series.sigma is not None
    curve = compute_expansion(fit_cells(series, 1), [150.0])
    drawn = [
        compute_expansion(
            fit_cells(replace(series, free=series.free + RANDOM.normal(0, series.sigma)), 1), [150.0]
        ).alpha[0]
        for _ in range(1500)
    ]
    simulated = np.std(drawn, axis=0)
    found = curve.estimates[0].sigma_matrix
    assert found is not None
    # 1500 draws tell a standard deviation to 1/√3000 of itself; five times that.
    assert found == pytest.approx(simulated, rel=5 / np.sqrt(3000), abs=1e-18)
    assert found[0, 1] == 0.0


def test_nothing_is_known_without_sigma_or_scatter() -> None:
    states = sample(draw_coefficients("orthorhombic"))[:3]
    curve = expand(states, "mmm", 2, [100.0])
    assert curve.covariance is None
    assert curve.cell_sigma is None
    assert curve.volume_rate_sigma is None
    assert expand(states, "mmm", 1, [100.0]).covariance is not None


def test_sigma_of_locked_and_dependent_parameters_does_not_matter() -> None:
    states = sample(draw_coefficients("tetragonal", 1))
    with_zeros = [CellState(s.t, s.cell, (1e-4, 0.0, 2e-4, 0.0, 0.0, 0.0)) for s in states]
    with_others = [CellState(s.t, s.cell, (1e-4, 7.0, 2e-4, 1.0, 2.0, 3.0)) for s in states]
    one, other = (expand(given, "4/mmm", 1, [100.0]) for given in (with_zeros, with_others))
    assert one.estimates[0].sigma_matrix is not None
    assert np.array_equal(one.estimates[0].sigma_matrix, other.estimates[0].sigma_matrix)


# Printed values -------------------------------------------------------------------------------------------------------


def test_magnesium_sulphate_between_two_temperatures() -> None:
    # α-MgSO4: A. D. Fortes et al., J. Appl. Cryst. 40 (2007) 761; the mean coefficients are derived from its two cells.
    states = [
        CellState(4.2, (5.16863, 7.86781, 6.46674, 90, 90, 90)),
        CellState(300.0, (5.17471, 7.87563, 6.49517, 90, 90, 90)),
    ]
    curve = expand(states, "mmm", 1, [4.2])
    assert np.diag(curve.alpha[0]) * 1e6 == pytest.approx([3.977, 3.360, 14.863], abs=6e-4)


def test_quartz_from_cells_that_expand_as_printed() -> None:
    # 13.65 across and 7.50 along c, ×10⁻⁶/K: Kosinski, Gualtieri and Ballato (1992, abstract). Cells made to grow so.
    states = [
        CellState(t, (4.9134 * (1 + 13.65e-6 * t),) * 2 + (5.4052 * (1 + 7.5e-6 * t), 90, 90, 120))
        for t in (0.0, 10.0, 20.0)
    ]
    curve = expand(states, "32", 1, [0.0])
    assert curve.alpha[0] * 1e6 == pytest.approx(np.diag([13.65, 13.65, 7.50]), abs=1e-6)


# What is asked too far out --------------------------------------------------------------------------------------------


def test_far_beyond_the_range_there_is_no_cell() -> None:
    states = sample(draw_coefficients("triclinic", 2))
    for t in (1e6, -1e9, 1e80, 1e300, -1.7e308):
        with pytest.raises(InputError, match="beyond the measured range") as caught:
            expand(states, "-1", 2, [300.0, t])
        assert caught.value.field == "at[1]"


def test_a_degree_too_high_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        expand(sample(draw_coefficients("cubic")), "m-3m", 6, [300.0])
    assert caught.value.field == "degree"


def test_no_places_is_an_empty_answer() -> None:
    curve = expand(sample(draw_coefficients("cubic")), "m-3m", 2, [])
    assert curve.alpha.shape == (0, 3, 3)
    assert curve.estimates == []
