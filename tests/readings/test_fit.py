from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats
from scipy.optimize import least_squares

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.errors import InputError
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.tensor.kind import Kind
from tests.readings.builders import (
    MONOCLINIC,
    MONOCLINIC_MATRIX,
    TETRAGONAL,
    TRICLINIC,
    along,
    build_reading,
    mixed_readings,
    obey,
    random_units,
    true_value,
    vector,
)

SYMMETRIC = Kind()


def test_w9_a_set_that_cannot_answer() -> None:
    # W9: invented data; the answer was computed apart from this project.
    rows = ["[100]", "[010]", "[110]", "[001]", "[011]", "[0-11]"]
    fit = fit_readings(TRICLINIC, SYMMETRIC, [along(row, 1.0 + number) for number, row in enumerate(rows)])
    assert (fit.determined, fit.rank, fit.free, fit.estimate) == (False, 5, None, None)
    (unseen,) = fit.undetermined
    star = TRICLINIC.reciprocal
    expected = np.outer(star[:, 0], star[:, 2])
    expected = (expected + expected.T) / np.linalg.norm(expected + expected.T)
    sense = np.sign(np.sum(expected * unseen.matrix))
    assert unseen.matrix * sense == pytest.approx(expected, abs=1e-9)
    assert np.linalg.norm(fit.form.expand(unseen.combination)) == pytest.approx(1.0)
    assert unseen.suggestion.direction is not None
    direction = TRICLINIC.resolve(unseen.suggestion.direction)
    assert abs(direction @ unseen.matrix @ direction) > 0.3
    # The suggestion, once taken, settles it.
    taken = [along(row, 1.0) for row in rows] + [Reading("along", 1.0, unseen.suggestion.direction)]
    assert fit_readings(TRICLINIC, SYMMETRIC, taken).determined


def test_w10_repeats_do_not_average_a_tilt_away() -> None:
    # W10: invented data; the answer was computed apart from this project.
    diagonal = vector([1, 0, 1])
    repeats = [Reading("along", 8.45, diagonal, sigma=0.01, direction_sigma=1.0, bar="B") for _ in range(10)]
    exact = along("[100]", 6.2, sigma=1e-7)
    fit = fit_readings(TETRAGONAL, SYMMETRIC, [*repeats, exact])
    assert fit.estimate is not None
    sigma = fit.estimate.value_sigma(TETRAGONAL.resolve(diagonal))
    # The tilt alone leaves 0.0785; ten readings of 0.01 add 0.01²/10 under the root.
    assert sigma == pytest.approx(np.hypot(0.0785, 0.01 / np.sqrt(10)), rel=2e-3)
    assert sigma / 8.45 == pytest.approx(0.0093, abs=5e-5)


def test_w10_where_the_first_order_vanishes() -> None:
    # W10: 100, 100, 1, a bar along c, 1° a component: the readings' mean is 1.060 and their deviation 0.060.
    readings = [
        along("[001]", 1.060, sigma=1e-6, direction_sigma=1.0),
        along("[100]", 100.0, sigma=1e-6),
        along("[110]", 100.0, sigma=1e-6),
    ]
    fit = fit_readings(TETRAGONAL, SYMMETRIC, readings)
    assert fit.readings is not None
    assert fit.free is not None
    assert fit.readings.sigma_used[0] == pytest.approx(0.060, abs=5e-4)
    assert fit.free == pytest.approx([100.0, 1.0], abs=5e-4)


@pytest.mark.parametrize("with_sigma", [True, False])
def test_plain_least_squares_against_numpy(with_sigma: bool) -> None:
    # Reference: numpy's least squares on the design written out by hand for 2/m: 11, 13, 22, 33.
    rng = np.random.default_rng(21)
    ns = random_units(rng, 15)
    sigmas = rng.uniform(0.02, 0.3, 15) if with_sigma else np.ones(15)
    values = np.einsum("ni,ij,nj->n", ns, MONOCLINIC_MATRIX, ns) + sigmas * rng.normal(size=15) * 0.2
    readings = [
        Reading("along", float(value), vector(n), sigma=float(sigma) if with_sigma else None)
        for value, n, sigma in zip(values, ns, sigmas, strict=True)
    ]
    fit = fit_readings(MONOCLINIC, SYMMETRIC, readings)
    x, y, z = ns.T
    design = np.column_stack([x * x, 2 * x * z, y * y, z * z])
    weighted, observed = design / sigmas[:, None], values / sigmas
    expected = np.linalg.lstsq(weighted, observed)[0]
    inverse = np.linalg.inv(weighted.T @ weighted)
    residual = observed - weighted @ expected
    chi2 = residual @ residual
    assert fit.form.labels == ["11", "13", "22", "33"]
    assert fit.free == pytest.approx(expected, rel=1e-10)
    assert fit.chi2 == pytest.approx(chi2, rel=1e-9)
    assert fit.dof == 11
    assert fit.scale == pytest.approx(np.sqrt(chi2 / 11))
    factor = 1.0 if with_sigma else chi2 / 11
    assert fit.free_covariance == pytest.approx(inverse * factor, rel=1e-8)
    hat = np.diag(weighted @ inverse @ weighted.T)
    assert fit.readings is not None
    assert fit.readings.leverage == pytest.approx(hat)
    assert np.sum(fit.readings.leverage) == pytest.approx(4)
    assert fit.readings.residual == pytest.approx(values - design @ expected, abs=1e-12)
    deviations = sigmas * np.sqrt(factor * (1 - hat))
    assert fit.readings.standardised == pytest.approx((values - design @ expected) / deviations)
    assert fit.readings.sigma_used == pytest.approx(sigmas * np.sqrt(factor))
    assert fit.covariance_from == ("sigma" if with_sigma else "scatter")
    if with_sigma:
        assert fit.p_value == pytest.approx(stats.chi2.sf(chi2, 11))
    else:
        assert fit.p_value is None


def test_condition_of_the_orthonormal_design() -> None:
    # Six icosahedral directions: √(5/2) in the orthonormal basis (Skare et al., J. Magn. Reson. 147 (2000) 340, from
    # memory; derived too); six face diagonals 2; three axes and three face diagonals 3.2255.
    golden = (1 + np.sqrt(5)) / 2
    icosahedral = [(0, 1, golden), (0, -1, golden), (1, golden, 0), (-1, golden, 0), (golden, 0, 1), (golden, 0, -1)]
    faces = [(1, 1, 0), (1, -1, 0), (1, 0, 1), (1, 0, -1), (0, 1, 1), (0, 1, -1)]
    mixed = [(1, 0, 0), (0, 1, 0), (0, 0, 1), (1, 1, 0), (1, 0, 1), (0, 1, 1)]
    for directions, condition in ((icosahedral, np.sqrt(2.5)), (faces, 2.0), (mixed, 3.2255)):
        readings = [Reading("along", 1.0, vector(direction), sigma=1.0) for direction in directions]
        fit = fit_readings(TRICLINIC, SYMMETRIC, readings)
        assert fit.condition == pytest.approx(condition, rel=2e-5)
        if directions is icosahedral:
            # Variances 1 on the diagonal and 5/8 off it, for unit readings (the same source).
            assert fit.free_covariance is not None
            assert np.diag(fit.free_covariance) == pytest.approx([1, 0.625, 0.625, 1, 0.625, 1])


def test_rods_and_sheets_against_scipy() -> None:
    # Reference: scipy's nonlinear least squares over the four free cells, the definition written out in the builders.
    rng = np.random.default_rng(22)
    ns, ms = random_units(rng, 18), random_units(rng, 18)
    kinds = ["rod", "sheet", "along"] * 6
    values = [
        true_value(k, MONOCLINIC_MATRIX, n, m) + 0.3 * rng.normal() for k, n, m in zip(kinds, ns, ms, strict=True)
    ]
    readings = [build_reading(k, v, n, m, sigma=0.3) for k, v, n, m in zip(kinds, values, ns, ms, strict=True)]

    def residuals(free: np.ndarray) -> np.ndarray:
        matrix = np.array([[free[0], 0, free[1]], [0, free[2], 0], [free[1], 0, free[3]]])
        predicted = [true_value(k, matrix, n, m) for k, n, m in zip(kinds, ns, ms, strict=True)]
        return (np.array(values) - predicted) / 0.3

    expected = least_squares(residuals, [10, 0, 20, 15], xtol=1e-14, ftol=1e-14, gtol=1e-14)
    fit = fit_readings(MONOCLINIC, SYMMETRIC, readings)
    assert fit.free == pytest.approx(expected.x, rel=1e-6)
    assert fit.chi2 == pytest.approx(2 * expected.cost, rel=1e-9)
    assert fit.free_covariance == pytest.approx(np.linalg.inv(expected.jac.T @ expected.jac), rel=1e-4, abs=1e-9)


def simulate(seed: int, *, claimed: bool = True) -> tuple[np.ndarray, np.ndarray, float, float]:
    """One set with tilts on bars and calibration errors on batches, drawn as the interface states them."""
    from scipy.spatial.transform import Rotation

    rng = np.random.default_rng(seed)
    design = np.random.default_rng(7)
    matrix = MONOCLINIC_MATRIX if claimed else MONOCLINIC_MATRIX + np.array([[0, 0.5, 0], [0.5, 0, 0], [0, 0, 0]])
    batch_error = 1 + 0.01 * rng.normal(size=2)
    readings = []
    for bar in range(10):
        n, m = random_units(design, 2)
        turn = Rotation.from_rotvec(np.deg2rad(1.0) * rng.normal(size=3)).as_matrix()
        for repeat in range(3):
            kind = ("along", "across", "rod")[repeat]
            value = true_value(kind, matrix, turn @ n, turn @ m) * batch_error[bar % 2] + 0.05 * rng.normal()
            readings.append(
                build_reading(
                    kind, float(value), n, m, sigma=0.05, direction_sigma=1.0, bar=f"{bar}", batch="ab"[bar % 2]
                )
            )
    fit = fit_readings(MONOCLINIC, SYMMETRIC, readings, batches={"a": 0.01, "b": 0.01})
    assert fit.free is not None
    assert fit.free_covariance is not None
    assert fit.chi2 is not None
    assert fit.symmetry_test is not None
    assert fit.symmetry_test.p_value is not None
    return fit.free, fit.free_covariance, fit.chi2, fit.symmetry_test.p_value


@pytest.fixture(scope="module")
def simulated() -> list[tuple[np.ndarray, np.ndarray, float, float]]:
    return [simulate(1000 + seed) for seed in range(600)]


def test_sigma_is_what_a_seeded_simulation_scatters(simulated: list) -> None:
    true = np.array([13.2, 1.85, 24.6, 15.9])
    free = np.array([entry[0] for entry in simulated])
    stated = np.mean([entry[1] for entry in simulated], axis=0)
    # 600 sets: a standard deviation is known to 1/√1200 = 3 %, a mean to σ/√600.
    assert np.std(free, axis=0) == pytest.approx(np.sqrt(np.diag(stated)), rel=0.1)
    assert np.mean(free, axis=0) == pytest.approx(true, abs=4 * np.max(np.std(free, axis=0)) / np.sqrt(600))
    distances = [(f - true) @ np.linalg.solve(c, f - true) for f, c, _, _ in simulated]
    assert 0.93 <= np.mean(np.array(distances) <= stats.chi2.ppf(0.95, 4)) <= 0.97


def test_chi2_follows_its_distribution(simulated: list) -> None:
    chi2 = np.array([entry[2] for entry in simulated])
    assert stats.kstest(chi2, stats.chi2(30 - 4).cdf).pvalue > 1e-3


def test_the_symmetry_test_is_fair_and_sees_a_broken_symmetry(simulated: list) -> None:
    fair = np.array([entry[3] for entry in simulated])
    assert stats.kstest(fair, "uniform").pvalue > 1e-3
    broken = np.array([simulate(5000 + seed, claimed=False)[3] for seed in range(40)])
    assert np.mean(broken < 0.05) > 0.5


def test_symmetry_test_by_f_against_two_plain_fits() -> None:
    # Reference: two numpy fits, with and without symmetry, and scipy's F distribution.
    rng = np.random.default_rng(23)
    ns = random_units(rng, 20)
    values = np.einsum("ni,ij,nj->n", ns, MONOCLINIC_MATRIX, ns) + 0.1 * rng.normal(size=20)
    fit = fit_readings(
        MONOCLINIC, SYMMETRIC, [Reading("along", float(v), vector(n)) for v, n in zip(values, ns, strict=True)]
    )
    x, y, z = ns.T
    narrow = np.column_stack([x * x, 2 * x * z, y * y, z * z])
    wide = np.column_stack([narrow, 2 * x * y, 2 * y * z])
    chi2 = [float(np.linalg.lstsq(design, values)[1][0]) for design in (narrow, wide)]
    test = fit.symmetry_test
    assert test is not None
    assert (test.statistic, test.delta_dof) == ("F", 2)
    assert test.delta_chi2 == pytest.approx(chi2[0] - chi2[1])
    assert test.p_value == pytest.approx(stats.f.sf((chi2[0] - chi2[1]) / 2 / (chi2[1] / 14), 2, 14))


def test_no_symmetry_test_where_there_is_nothing_to_test() -> None:
    readings = mixed_readings(np.random.default_rng(1), MONOCLINIC_MATRIX, 12, ["along"], 0.1, sigma=0.1)
    assert fit_readings(TRICLINIC, SYMMETRIC, readings).symmetry_test is None
    # In the mirror plane and along b, a monoclinic form and a triclinic one read alike.
    blind = [along(text, 1.0, sigma=0.1) for text in ("[100]", "[001]", "[101]", "[10-1]", "[010]", "[102]")]
    fit = fit_readings(MONOCLINIC, SYMMETRIC, blind)
    assert fit.determined
    assert fit.symmetry_test is None


def test_as_many_readings_as_cells_prove_nothing() -> None:
    four = [along(text, 10.0 + number) for number, text in enumerate(("[100]", "[010]", "[001]", "[101]"))]
    fit = fit_readings(MONOCLINIC, SYMMETRIC, four)
    assert (fit.dof, fit.scale, fit.free_covariance, fit.covariance_from) == (0, None, None, None)
    assert any("proves nothing" in note for note in fit.notes)
    assert fit.readings is not None
    assert np.all(np.isnan(fit.readings.standardised))
    known = [along(str(r.direction.text), r.value, sigma=0.1) for r in four if r.direction]
    with_sigma = fit_readings(MONOCLINIC, SYMMETRIC, known)
    assert with_sigma.covariance_from == "sigma"
    assert with_sigma.p_value is None
    assert with_sigma.readings is not None
    assert np.all(np.isnan(with_sigma.readings.standardised))  # at leverage 1 a residual has no deviation


def test_a_general_tensor_needs_effects_across() -> None:
    # Class 4: 11, 12, 33 are free; readings along a direction never see 12 = −21.
    crystal = build_crystal([5, 5, 7, 90, 90, 90], "4")
    kind = Kind("polar", "general")
    matrix = np.array([[119.9, -8.1, 0], [8.1, 119.9, 0], [0, 0, 85.3]])
    lengthwise = [along(text, 1.0) for text in ("[100]", "[001]", "[101]", "[111]")]
    fit = fit_readings(crystal, kind, lengthwise)
    assert not fit.determined
    (unseen,) = fit.undetermined
    assert unseen.combination == pytest.approx([0, unseen.combination[1], 0])
    assert unseen.suggestion.kind == "across"
    cause = crystal.resolve(parse_direction("[100]"))
    effect = crystal.resolve(parse_direction("[010]"))
    extra = build_reading("across", float(effect @ matrix @ cause), cause, effect)
    values = [true_value("along", matrix, crystal.resolve(r.direction), cause) for r in lengthwise if r.direction]
    measured = [along(str(r.direction.text), v) for r, v in zip(lengthwise, values, strict=True) if r.direction]
    full = fit_readings(crystal, kind, [*measured, extra])
    assert full.free == pytest.approx([119.9, -8.1, 85.3])


@settings(max_examples=60, deadline=None)
@given(st.integers(0, 2**32 - 1), st.sampled_from(["-1", "2/m", "mmm", "4/m", "4/mmm"]), st.integers(1, 5))
def test_the_reported_combination_really_changes_no_reading(seed: int, group: str, count: int) -> None:
    crystal = build_crystal([5, 5, 7, 90, 90, 90], group)
    rng = np.random.default_rng(seed)
    root = rng.normal(size=(3, 3))
    matrix = obey(crystal, root @ root.T + np.eye(3))
    readings = mixed_readings(rng, matrix, count, ["along", "across", "difference", "mean"], 0.0)
    fit = fit_readings(crystal, SYMMETRIC, readings)
    assert fit.determined == (fit.rank == fit.form.count)
    assert len(fit.undetermined) == fit.form.count - fit.rank
    for unseen in fit.undetermined:
        assert np.linalg.norm(unseen.matrix) == pytest.approx(1.0)
        assert obey(crystal, unseen.matrix) == pytest.approx(unseen.matrix, abs=1e-9)
        for reading in readings:
            n = crystal.resolve(reading.direction) if reading.direction else np.zeros(3)
            m = crystal.resolve(reading.second) if reading.second else np.zeros(3)
            assert abs(true_value(reading.kind, unseen.matrix, n, m)) < 1e-5


def test_nearly_dependent_readings_count_as_undetermined() -> None:
    # Two directions 1e-8 apart cannot carry two unknowns: rounding of the directions would decide.
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    near = vector([1, 1e-8, 0])
    readings = [along("[100]", 1.0), along("[001]", 2.0), Reading("along", 1.1, near)]
    assert fit_readings(crystal, SYMMETRIC, readings).rank == 2


BAD = {
    "a value that is missing": (Reading("along", None, vector([1, 0, 0])), "readings[1].value"),
    "no direction": (Reading("along", 1.0), "readings[1].direction"),
    "no second": (Reading("across", 1.0, vector([1, 0, 0])), "readings[1].second"),
    "a direction too many": (Reading("mean", 1.0, vector([1, 0, 0])), "readings[1].direction"),
    "sigma for one only": (along("[100]", 1.0, sigma=0.1), "readings[0].sigma"),
    "direction_sigma without sigma": (along("[100]", 1.0, direction_sigma=1.0), "readings[1].direction_sigma"),
    "batch without sigma": (along("[100]", 1.0, batch="a"), "readings[1].batch"),
    "a value that is not finite": (along("[100]", float("nan")), "readings[1].value"),
    "a negative rod": (Reading("rod", -1.0, vector([1, 0, 0])), "readings[1].value"),
    "a zero sigma": (along("[100]", 1.0, sigma=0.0), "readings[1].sigma"),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_readings_name_their_place(name: str) -> None:
    reading, field = BAD[name]
    with pytest.raises(InputError) as caught:
        fit_readings(MONOCLINIC, SYMMETRIC, [along("[001]", 1.0), reading], batches={"a": 0.1})
    assert caught.value.field == field
    assert caught.value.message.endswith(".")


def test_batches_and_bars_are_checked() -> None:
    with pytest.raises(InputError, match="no calibration error") as caught:
        fit_readings(MONOCLINIC, SYMMETRIC, [along("[001]", 1.0, sigma=1.0, batch="b")], batches={"a": 0.1})
    assert caught.value.field == "readings[0].batch"
    with pytest.raises(InputError, match="calibration error of the batch"):
        fit_readings(MONOCLINIC, SYMMETRIC, [along("[001]", 1.0, sigma=1.0)], batches={"a": -0.1})
    twice = [along("[001]", 1.0, sigma=1.0, bar="B", direction_sigma=s) for s in (0.5, 0.6)]
    with pytest.raises(InputError, match="two standard deviations") as caught:
        fit_readings(MONOCLINIC, SYMMETRIC, twice)
    assert caught.value.field == "readings[1].direction_sigma"


def test_rods_of_a_general_or_axial_tensor_are_refused() -> None:
    for kind in (Kind("polar", "general"), Kind("axial", "symmetric")):
        with pytest.raises(InputError, match="conductivity-like"):
            fit_readings(TRICLINIC, kind, [Reading("rod", 1.0, vector([1, 0, 0]))])


@pytest.mark.parametrize("factor", [1e-30, 1e-6, 1e30])
def test_the_unit_does_not_matter(factor: float) -> None:
    rng = np.random.default_rng(24)
    readings = mixed_readings(
        rng, MONOCLINIC_MATRIX, 20, ["along", "rod", "sheet"], 0.05, sigma=0.05, direction_sigma=0.5
    )
    scaled = [
        Reading(r.kind, r.value * factor, r.direction, r.second, r.sigma * factor, r.direction_sigma)
        for r in readings
        if r.value and r.sigma
    ]
    plain, other = (fit_readings(MONOCLINIC, SYMMETRIC, each) for each in (readings, scaled))
    assert other.free == pytest.approx(np.asarray(plain.free) * factor, rel=1e-9, abs=0)
    assert other.chi2 == pytest.approx(plain.chi2, rel=1e-7)


def test_a_tensor_that_must_vanish_is_determined_without_readings() -> None:
    # An axial tensor of a crystal with an inversion is zero: nothing is left to determine.
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    fit = fit_readings(crystal, Kind("axial", "symmetric"), [along("[111]", 0.5, sigma=0.1)])
    assert fit.determined
    assert fit.chi2 == pytest.approx(25.0)
    assert fit.estimate is not None
    assert not fit.estimate.matrix.any()
