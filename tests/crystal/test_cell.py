"""Cells: the metric both ways, the nearest cell that a group leaves unchanged, and how far a cell may be off."""

from __future__ import annotations

from collections.abc import Callable

import gemmi
import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import least_squares

from app.crystal.cell import (
    build_cell,
    compute_metric,
    compute_parameters,
    find_obeying_cell,
    measure_metric_change,
)
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.group import find_group
from app.errors import InputError
from tests.crystal.reference import CELLS, SETTING_NAMES, SETTINGS, Setting


def exact_metric(parameters: tuple[float, ...]) -> np.ndarray:
    """G by mpmath with 40 digits."""
    with mpmath.workdps(40):
        edges = [mpmath.mpf(value) for value in parameters[:3]]
        alpha, beta, gamma = (mpmath.cos(mpmath.radians(mpmath.mpf(value))) for value in parameters[3:])
        cosines = [[1, gamma, beta], [gamma, 1, alpha], [beta, alpha, 1]]
        return np.array([[float(edges[i] * edges[j] * cosines[i][j]) for j in range(3)] for i in range(3)])


@pytest.mark.parametrize("family", CELLS)
def test_metric_and_volume_against_mpmath_and_gemmi(family: str) -> None:
    cell = build_cell(CELLS[family])
    assert cell.metric == pytest.approx(exact_metric(CELLS[family]), rel=1e-14, abs=1e-13)
    assert cell.volume == pytest.approx(gemmi.UnitCell(*CELLS[family]).volume, rel=1e-12)
    assert compute_parameters(cell.metric) == pytest.approx(CELLS[family], rel=1e-13)


def test_right_angles_are_exact() -> None:
    metric = build_cell((5.0, 5.0, 7.0, 90.0, 90.0, 120.0)).metric
    assert metric.tolist() == [[25.0, -12.5, 0.0], [-12.5, 25.0, 0.0], [0.0, 0.0, 49.0]]


def test_metrics_come_in_batches() -> None:
    cells = np.array(list(CELLS.values()))
    metrics = compute_metric(cells)
    assert metrics.shape == (len(CELLS), 3, 3)
    for cell, metric in zip(CELLS.values(), metrics, strict=True):
        assert metric == pytest.approx(exact_metric(cell), rel=1e-14, abs=1e-13)
    assert compute_parameters(metrics) == pytest.approx(cells, rel=1e-13)


@settings(max_examples=100, deadline=None)
@given(
    st.tuples(*[st.floats(1e-2, 1e5)] * 3),
    st.tuples(*[st.floats(30.0, 150.0)] * 3),
)
def test_parameters_come_back_from_their_metric(
    edges: tuple[float, float, float], angles: tuple[float, float, float]
) -> None:
    try:
        cell = build_cell((*edges, *angles))
    except InputError:
        # Refused only where no parallelepiped has these angles (spherical triangle: each below the sum of the others).
        half = sum(angles) / 2
        assert half >= 180.0 - 1e-3 or max(angles) >= half - 1e-3
        return
    assert compute_parameters(cell.metric) == pytest.approx((*edges, *angles), rel=1e-9)


@pytest.mark.parametrize(
    "parameters",
    [
        None,
        [],
        [1, 2, 3, 90, 90],
        [1, 2, 3, 90, 90, 90, 90],
        ["a", 2, 3, 90, 90, 90],
        [[1, 2], [3, 90], [90, 90]],
        [float("nan"), 2, 3, 90, 90, 90],
        [1, float("inf"), 3, 90, 90, 90],
        [0, 2, 3, 90, 90, 90],
        [-1, 2, 3, 90, 90, 90],
        [1e-9, 2, 3, 90, 90, 90],
        [1e9, 2, 3, 90, 90, 90],
        [1, 2, 3, 0, 90, 90],
        [1, 2, 3, 90, 180, 90],
        [1, 2, 3, 90, 90, -90],
        [5, 6, 7, 120, 120, 120],
        [5, 6, 7, 150, 60, 60],
        [5, 6, 7, 60, 60, 120],
        {"a": 5},
        "5 6 7 90 90 90",
    ],
)
def test_what_is_no_cell_is_refused(parameters: object) -> None:
    with pytest.raises(InputError) as caught:
        build_cell(parameters)  # type: ignore[arg-type]
    assert (caught.value.field or "").startswith("cell")
    assert caught.value.hint


def test_an_error_names_the_parameter() -> None:
    for position, value in ((0, -1.0), (2, 0.0), (3, 0.0), (5, 200.0)):
        parameters = [5.0, 6.0, 7.0, 80.0, 90.0, 100.0]
        parameters[position] = value
        with pytest.raises(InputError) as caught:
            build_cell(parameters)
        assert caught.value.field == f"cell[{position}]"


@pytest.mark.parametrize("sigma", [[0.1] * 5, [-0.1] + [0] * 5, [float("nan")] * 6, "x", [[0.1] * 6]])
def test_what_is_no_cell_sigma_is_refused(sigma: object) -> None:
    with pytest.raises(InputError) as caught:
        build_cell(CELLS["cubic"], sigma)  # type: ignore[arg-type]
    assert caught.value.field == "cell_sigma"


def test_nearly_flat_cells() -> None:
    # alpha + beta = gamma is flat; a hair less is a cell, whose height by spherical trigonometry is checked by mpmath.
    flat = (5.0, 6.0, 7.0, 50.0, 60.0, 110.0 - 1e-6)
    crystal = build_crystal(flat, "1")
    with mpmath.workdps(60):
        matrix = mpmath.matrix(3, 3)
        edges = [mpmath.mpf(value) for value in flat[:3]]
        alpha, beta, gamma = (mpmath.cos(mpmath.radians(mpmath.mpf(value))) for value in flat[3:])
        cosines = [[1, gamma, beta], [gamma, 1, alpha], [beta, alpha, 1]]
        for i in range(3):
            for j in range(3):
                matrix[i, j] = edges[i] * edges[j] * cosines[i][j]
        volume = float(mpmath.sqrt(mpmath.det(matrix)))
    assert crystal.M is not None and crystal.volume is not None
    assert np.isfinite(crystal.M).all()
    # Double precision holds the squared volume to 1e-16 / 1e-8 of itself here.
    assert np.linalg.det(crystal.M) == pytest.approx(volume, rel=1e-6)
    assert crystal.volume == pytest.approx(volume, rel=1e-6)
    with pytest.raises(InputError):
        build_cell((5.0, 6.0, 7.0, 50.0, 60.0, 110.0))


# The obeying cells of each family by their free parameters, from the definition of the crystal systems
# (International Tables A, 2016, Table 3.1.2.1); `nearest` below fits these with scipy.
FREE: dict[str, tuple[int, Callable[[np.ndarray], list[float]]]] = {
    "triclinic": (6, lambda p: list(p)),
    "monoclinic a": (4, lambda p: [p[0], p[1], p[2], p[3], 90.0, 90.0]),
    "monoclinic b": (4, lambda p: [p[0], p[1], p[2], 90.0, p[3], 90.0]),
    "monoclinic c": (4, lambda p: [p[0], p[1], p[2], 90.0, 90.0, p[3]]),
    "orthorhombic": (3, lambda p: [p[0], p[1], p[2], 90.0, 90.0, 90.0]),
    "tetragonal": (2, lambda p: [p[0], p[0], p[1], 90.0, 90.0, 90.0]),
    "hexagonal": (2, lambda p: [p[0], p[0], p[1], 90.0, 90.0, 120.0]),
    "rhombohedral": (2, lambda p: [p[0], p[0], p[0], p[1], p[1], p[1]]),
    "cubic": (1, lambda p: [p[0], p[0], p[0], 90.0, 90.0, 90.0]),
}
STARTS = {1: [5.1], 2: [5.1, 80.0], 3: [5.1, 6.2, 7.3], 4: [5.1, 6.2, 7.3, 100.0], 6: list(CELLS["triclinic"])}


def find_nearest(given_cell: np.ndarray, family: str) -> np.ndarray:
    """The nearest obeying cell by scipy, in the same measure: edges over their mean, angles in radians."""
    count, build = FREE[family]
    units = np.array([np.mean(given_cell[:3])] * 3 + [np.rad2deg(1.0)] * 3)
    start = [6.0, 7.0] if family in ("tetragonal", "hexagonal") else STARTS[count]
    solution = least_squares(lambda p: (np.array(build(p)) - given_cell) / units, start, xtol=1e-15, gtol=1e-15)
    return np.array(build(solution.x))


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_the_nearest_obeying_cell(setting: Setting) -> None:
    seed = np.random.default_rng(11)
    group = find_group(setting.symbol, setting.unique_axis, rhombohedral_cell=setting.family == "rhombohedral")
    for size in (1e-5, 1e-3, 0.03):
        moved = np.array(setting.cell) * (1.0 + size * seed.normal(size=6))
        found = find_obeying_cell(build_cell(moved), group.operations)
        assert found == pytest.approx(find_nearest(moved, setting.family), rel=1e-9)
        assert measure_metric_change(compute_metric(found), group.operations) < 1e-13


def test_the_nearest_obeying_cell_where_the_angles_depend_on_each_other() -> None:
    # The primitive cell of a body-centred tetragonal lattice, (−a+b+c)/2 and so on: of its six parameters two are free,
    # and the angles follow from the edges by a formula that is not linear. scipy searches among the tetragonal cells.
    basis = np.array([[-0.5, 0.5, 0.5], [0.5, -0.5, 0.5], [0.5, 0.5, -0.5]])
    operations = np.linalg.inv(basis) @ find_group("4/mmm").operations @ basis

    def build(free: np.ndarray) -> np.ndarray:
        metric = basis.T @ np.diag([free[0] ** 2, free[0] ** 2, free[1] ** 2]) @ basis
        return compute_parameters(metric)

    seed = np.random.default_rng(13)
    for size in (1e-3, 0.02):
        moved = build(np.array([5.1, 7.3])) * (1.0 + size * seed.normal(size=6))
        units = np.array([np.mean(moved[:3])] * 3 + [np.rad2deg(1.0)] * 3)
        solution = least_squares(
            lambda p, moved=moved, units=units: (build(p) - moved) / units, [5.0, 7.0], xtol=1e-15, gtol=1e-15
        )
        found = find_obeying_cell(build_cell(moved), operations)
        assert found == pytest.approx(build(solution.x), rel=1e-8)


def refused(cell: list[float], group: str, sigma: list[float] | None = None) -> InputError | None:
    try:
        build_crystal(cell, group, cell_sigma=sigma)
    except InputError as error:
        return error
    return None


@pytest.mark.parametrize(
    ("group", "build"),
    [
        # The change of the metric in units of √(G_ii G_jj), worked by hand for each: a half-turn about c reverses
        # G_23, so it changes by 2 b c cos(alpha).
        ("112/m", lambda change: [5.1, 6.2, 7.3, np.rad2deg(np.arccos(change / 2)), 90.0, 97.0]),
        ("2/m", lambda change: [5.1, 6.2, 7.3, np.rad2deg(np.arccos(-change / 2)), 97.0, 90.0]),
        ("mmm", lambda change: [5.1, 6.2, 7.3, 90.0, 90.0, np.rad2deg(np.arccos(change / 2))]),
        # A quarter-turn takes a to b: G_11 changes by b² − a², over a² (the larger of both where a is the shorter).
        ("4/m", lambda change: [5.1, 5.1 * np.sqrt(1 + change), 7.3, 90.0, 90.0, 90.0]),
        ("m-3m", lambda change: [5.1 * np.sqrt(1 + change), 5.1, 5.1, 90.0, 90.0, 90.0]),
        # A third-turn takes a to b and b to −a − b: G_22 becomes a² + b² + 2ab cos(gamma), by a²(1 + 2 cos(gamma)).
        ("6/mmm", lambda change: [5.1, 5.1, 7.3, 90.0, 90.0, np.rad2deg(np.arccos((change - 1) / 2))]),
    ],
)
def test_the_limit_of_the_metric_is_where_it_is_said(group: str, build: Callable[[float], list[float]]) -> None:
    # The interface: taken where every operation changes the metric by no more than 2e-4.
    assert refused(build(2e-4 * 0.999), group) is None
    error = refused(build(2e-4 * 1.001), group)
    assert error is not None and error.field == "cell"


def test_a_cell_that_is_taken_is_made_to_obey() -> None:
    crystal = build_crystal([5.1, 5.1003, 7.3, 90.0, 90.003, 90.0], "4/mmm")
    assert crystal.cell is not None and crystal.given_cell is not None
    # The mean of both edges is nearest to both.
    assert crystal.cell.parameters == pytest.approx([5.10015, 5.10015, 7.3, 90.0, 90.0, 90.0], rel=1e-12)
    assert crystal.given_cell.parameters.tolist() == [5.1, 5.1003, 7.3, 90.0, 90.003, 90.0]
    assert np.allclose(crystal.rotations @ np.swapaxes(crystal.rotations, 1, 2), np.eye(3), atol=1e-14)


def test_three_sigma_is_the_other_limit() -> None:
    # 0.3 degrees off is far beyond the metric's tolerance; three standard deviations of 0.1 reach it exactly.
    cell = [5.1, 6.2, 7.3, 90.3, 97.0, 90.0]
    for factor, taken in ((1.001, True), (0.999, False)):
        error = refused(cell, "2/m", [0.0, 0.0, 0.0, 0.1 * factor, 0.0, 0.0])
        assert (error is None) is taken
    # a and b move by 0.03 each to their mean: both need their sigma.
    tetragonal = [5.10, 5.16, 7.3, 90.0, 90.0, 90.0]
    assert refused(tetragonal, "4/m", [0.0101, 0.0101, 0.0, 0.0, 0.0, 0.0]) is None
    assert refused(tetragonal, "4/m", [0.0101, 0.0099, 0.0, 0.0, 0.0, 0.0]) is not None
    assert refused(tetragonal, "4/m") is not None


def test_a_refusal_carries_the_nearest_cell_and_the_change() -> None:
    error = refused([5.10, 5.16, 7.3, 90.0, 91.0, 90.0], "4/m")
    assert error is not None
    assert set(error.detail) == {"cell", "change"}
    # By hand: the mean of both edges, right angles.
    assert error.detail["cell"] == pytest.approx([5.13, 5.13, 7.3, 90.0, 90.0, 90.0], rel=1e-12)
    assert error.detail["change"] == pytest.approx([0.03, -0.03, 0.0, 0.0, -1.0, 0.0], abs=1e-12)
    assert "beta 90" in error.message


def test_a_setting_that_does_not_fit_is_refused_not_guessed() -> None:
    # Unique axis c for a cell whose oblique angle is beta, hexagonal symbol on rhombohedral axes and the reverse.
    monoclinic = [9.83, 6.41, 7.27, 90.0, 107.4, 90.0]
    for group in ("112/m", "P 1 1 21/b", "2/m11", "mmm", "R -3 c:H", "R -3 c:R", "m-3m"):
        error = refused(monoclinic, group)
        assert error is not None and error.field == "cell", group
        assert error.detail["cell"][4] == pytest.approx(90.0) or group == "R -3 c:R"
    assert refused([5.1, 5.1, 5.1, 74.0, 74.0, 74.0], "R -3 c:H") is not None
    assert refused([5.1, 5.1, 7.3, 90.0, 90.0, 120.0], "R -3 c:R") is not None


def has_threefold(crystal: Crystal, axis: tuple[int, int, int]) -> bool:
    assert crystal.M is not None
    vector = crystal.M @ np.array(axis, dtype=np.float64)
    return any(np.allclose(matrix @ vector, vector) for matrix in crystal.rotations[1:])


@pytest.mark.parametrize("symbol", ["3", "-3", "32", "3m", "-3m", "R 3", "R -3 c"])
def test_trigonal_groups_are_on_the_axes_of_their_cell(symbol: str) -> None:
    assert has_threefold(build_crystal(CELLS["hexagonal"], symbol), (0, 0, 1))
    assert has_threefold(build_crystal(CELLS["rhombohedral"], symbol), (1, 1, 1))
    # Rounded and uncertain rhombohedral cells are taken for what they are, too.
    assert has_threefold(build_crystal([5.1, 5.1002, 5.1, 74.0, 74.001, 74.0], symbol), (1, 1, 1))
    uncertain = build_crystal([5.1, 5.11, 5.1, 74.0, 74.1, 74.0], symbol, cell_sigma=[0.01] * 3 + [0.1] * 3)
    assert has_threefold(uncertain, (1, 1, 1))


def test_limiting_groups_have_no_cell_and_others_need_one() -> None:
    with pytest.raises(InputError) as caught:
        build_crystal([5, 5, 5, 90, 90, 90], "∞m")
    assert caught.value.field == "cell"
    with pytest.raises(InputError) as caught:
        build_crystal(None, "2/m")
    assert caught.value.field == "cell"
    with pytest.raises(InputError) as caught:
        build_crystal(None, "∞m", frame="x1=a x3=c*")
    assert caught.value.field == "frame"
    assert build_crystal(None, "∞m").cell is None
