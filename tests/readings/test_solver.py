from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.readings.solver import solve_least_squares

# NIST Statistical Reference Datasets, linear regression, "Longley": total employment against price deflator, gross
# national product, unemployment, armed forces, population and year, 1947 to 1962. Certified values beside it.
LONGLEY = np.array(
    [
        [60323, 83.0, 234289, 2356, 1590, 107608, 1947],
        [61122, 88.5, 259426, 2325, 1456, 108632, 1948],
        [60171, 88.2, 258054, 3682, 1616, 109773, 1949],
        [61187, 89.5, 284599, 3351, 1650, 110929, 1950],
        [63221, 96.2, 328975, 2099, 3099, 112075, 1951],
        [63639, 98.1, 346999, 1932, 3594, 113270, 1952],
        [64989, 99.0, 365385, 1870, 3547, 115094, 1953],
        [63761, 100.0, 363112, 3578, 3350, 116219, 1954],
        [66019, 101.2, 397469, 2904, 3048, 117388, 1955],
        [67857, 104.6, 419180, 2822, 2857, 118734, 1956],
        [68169, 108.4, 442769, 2936, 2798, 120445, 1957],
        [66513, 110.8, 444546, 4681, 2637, 121950, 1958],
        [68655, 112.6, 482704, 3813, 2552, 123366, 1959],
        [69564, 114.2, 502601, 3931, 2514, 125368, 1960],
        [69331, 115.7, 518173, 4806, 2572, 127852, 1961],
        [70551, 116.9, 554894, 4007, 2827, 130081, 1962],
    ]
)
CERTIFIED = np.array(
    [
        -3482258.63459582,
        15.0618722713733,
        -0.0358191792925910,
        -2.02022980381683,
        -1.03322686717359,
        -0.0511041056535807,
        1829.15146461355,
    ]
)
CERTIFIED_DEVIATIONS = np.array(
    [
        890420.383607373,
        84.9149257747669,
        0.0334910077722432,
        0.488399681651699,
        0.214274163161675,
        0.226073200069370,
        455.478499142212,
    ]
)


def test_longley_certified_values() -> None:
    design = np.column_stack([np.ones(len(LONGLEY)), LONGLEY[:, 1:]])
    observed = LONGLEY[:, 0]
    solution = solve_least_squares(design, observed, tolerance=1e-14)
    assert solution.rank == 7
    # The condition number is 5e9, so about seven of sixteen digits are left; NIST certifies fifteen.
    assert solution.solution == pytest.approx(CERTIFIED, rel=1e-7)
    residual = observed - design @ solution.solution
    deviations = np.sqrt(np.diag(solution.covariance) * (residual @ residual) / (16 - 7))
    assert deviations == pytest.approx(CERTIFIED_DEVIATIONS, rel=1e-7)


@given(st.integers(0, 2**32 - 1), st.integers(1, 6), st.integers(0, 3))
def test_unseen_combinations_alter_no_observation(seed: int, unknowns: int, lost: int) -> None:
    rng = np.random.default_rng(seed)
    rank = max(unknowns - lost, 1)
    design = rng.normal(size=(12, rank)) @ rng.normal(size=(rank, unknowns))
    solution = solve_least_squares(design, rng.normal(size=12))
    if solution.rank != rank:  # a random factor can come out nearly singular
        assert np.linalg.matrix_rank(design, tol=1e-5 * np.linalg.norm(design)) < rank
        return
    assert solution.unseen.shape == (unknowns, unknowns - rank)
    assert np.max(np.abs(design @ solution.unseen), initial=0.0) <= 1e-5 * np.linalg.norm(design)
    assert (solution.condition == np.inf) == (rank < unknowns)


@given(st.integers(0, 2**32 - 1))
def test_full_rank_agrees_with_numpy(seed: int) -> None:
    rng = np.random.default_rng(seed)
    design, observed = rng.normal(size=(20, 5)), rng.normal(size=20)
    solution = solve_least_squares(design, observed)
    expected, _, rank, sizes = np.linalg.lstsq(design, observed)
    assert solution.rank == rank
    assert solution.solution == pytest.approx(expected, abs=1e-10)
    assert solution.condition == pytest.approx(sizes[0] / sizes[-1])
    assert solution.covariance == pytest.approx(np.linalg.inv(design.T @ design), rel=1e-6, abs=1e-9)


def test_weights_over_many_orders_keep_plain_rows_apart() -> None:
    # Two unknowns, one known to 1e-9 and the other to 1: mpmath-free check by hand, x = 2, y = 2·5 − 2 = 8.
    design = np.array([[1.0, 0.0], [0.5, 0.5]])
    observed = np.array([2.0, 5.0])
    weights = np.array([1e9, 1.0])
    weighted = design * weights[:, None]
    assert solve_least_squares(weighted, observed * weights).rank == 1
    solution = solve_least_squares(weighted, observed * weights, unweighted=design)
    assert solution.rank == 2
    assert solution.solution == pytest.approx([2.0, 8.0], rel=1e-12)
    assert np.sqrt(np.diag(solution.covariance)) == pytest.approx([1e-9, 2.0])
    near = np.array([[1.0, 0.0], [1.0, 1e-8]])
    assert solve_least_squares(near, observed, unweighted=near).rank == 1
