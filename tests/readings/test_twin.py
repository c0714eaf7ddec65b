"""Twin fractions against a fit of the raw readings by scipy, a simulation, and products that cannot be told apart."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from scipy.optimize import least_squares
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.readings.reading import Reading
from app.readings.twin import fit_twin
from app.tensor.kind import build_kind

SYMMETRIC = build_kind()
DIRECTIONS = np.vstack(
    [
        np.eye(3),
        [[1, 1, 0], [1, -1, 0], [1, 0, 1], [1, 0, -1], [0, 1, 1], [0, 1, -1], [2, 1, 0], [1, -2, 1], [1, 1, 1]],
    ]
).astype(float)
DIRECTIONS /= np.linalg.norm(DIRECTIONS, axis=1, keepdims=True)
SIGMA = 0.02


def half_turn(axis: list[float]) -> np.ndarray:
    return Rotation.from_rotvec(np.pi * np.array(axis) / np.linalg.norm(axis)).as_matrix()


def turn_of_sixty() -> np.ndarray:
    # In a pseudo-hexagonal orthorhombic crystal the individuals lie 60 degrees apart, as in aragonite's habit.
    return Rotation.from_rotvec(np.deg2rad(60.0) * np.array([0, 0, 1])).as_matrix()


def average(free: np.ndarray, fraction: float, law: np.ndarray) -> np.ndarray:
    single = np.diag(free)
    return (1 - fraction) * single + fraction * law @ single @ law.T


def take(matrix: np.ndarray, noise: np.ndarray | None = None, sigma: float | None = SIGMA) -> list[Reading]:
    values = np.einsum("ni,ij,nj->n", DIRECTIONS, matrix, DIRECTIONS)
    values = values if noise is None else values + noise
    return [
        Reading("along", float(value), read_direction({"xyz": vector.tolist()}), sigma=sigma)
        for vector, value in zip(DIRECTIONS, values, strict=True)
    ]


def orthorhombic() -> Crystal:
    return build_crystal([5.0, 8.0, 5.7, 90, 90, 90], "mmm")


def test_fraction_and_cells_equal_a_fit_of_the_raw_readings() -> None:
    law, noise = turn_of_sixty(), SIGMA * np.random.default_rng(4).standard_normal(len(DIRECTIONS))
    readings = take(average(np.array([3.0, 5.0, 4.0]), 0.3, law), noise)
    observed = np.array([reading.value for reading in readings], dtype=float)

    def miss(unknowns: np.ndarray) -> np.ndarray:
        matrix = average(unknowns[:3], unknowns[3], law)
        return (np.einsum("ni,ij,nj->n", DIRECTIONS, matrix, DIRECTIONS) - observed) / SIGMA

    raw = least_squares(miss, [3.0, 5.0, 4.0, 0.3], xtol=1e-14, ftol=1e-14, gtol=1e-14)
    covariance = np.linalg.inv(raw.jac.T @ raw.jac)
    found = fit_twin(orthorhombic(), SYMMETRIC, readings, law)
    assert found.fraction == pytest.approx(raw.x[3], abs=1e-6)
    assert found.free == pytest.approx(raw.x[:3], abs=1e-5)
    assert found.fraction_sigma == pytest.approx(np.sqrt(covariance[3, 3]), rel=1e-3)
    assert found.chi2 == pytest.approx(2 * raw.cost, rel=1e-6)
    assert found.dof == len(DIRECTIONS) - 4
    assert found.p_value is not None
    assert found.p_value < 1e-10


def test_the_fraction_scatters_as_its_sigma_says() -> None:
    law, random = turn_of_sixty(), np.random.default_rng(8)
    matrix = average(np.array([3.0, 5.0, 4.0]), 0.3, law)
    pulls = []
    for _ in range(200):
        found = fit_twin(orthorhombic(), SYMMETRIC, take(matrix, SIGMA * random.standard_normal(len(DIRECTIONS))), law)
        assert found.fraction is not None
        assert found.fraction_sigma is not None
        pulls.append((found.fraction - 0.3) / found.fraction_sigma)
    # Of 200 the mean has a standard deviation of 0.07, the spread one of 0.05.
    assert abs(np.mean(pulls)) < 0.28
    assert np.std(pulls) == pytest.approx(1.0, abs=0.2)


def test_no_twinning_is_not_made_out_of_noise() -> None:
    law, random = turn_of_sixty(), np.random.default_rng(9)
    matrix = average(np.array([3.0, 5.0, 4.0]), 0.0, law)
    below = 0
    for _ in range(100):
        found = fit_twin(orthorhombic(), SYMMETRIC, take(matrix, SIGMA * random.standard_normal(len(DIRECTIONS))), law)
        assert found.fraction is not None
        assert found.p_value is not None
        below += found.p_value < 0.05
    # Binomial with p = 0.05: more than 14 of 100 happens less than once in 2000 times.
    assert below <= 14


def test_a_product_is_refused_and_the_rest_is_given() -> None:
    crystal = build_crystal([9.8, 6.4, 7.3, 90, 107.0, 90], "2/m")
    law = half_turn([1, 0, 0])
    single = np.array([[3.0, 0, 0.8], [0, 5.0, 0], [0.8, 0, 4.0]])
    readings = take(0.7 * single + 0.3 * law @ single @ law.T)
    found = fit_twin(crystal, SYMMETRIC, readings, law)
    assert found.fraction is None
    free = dict(zip(found.form.labels, found.free.tolist(), strict=True))
    assert np.isnan(free["13"])
    assert [free["11"], free["22"], free["33"]] == pytest.approx([3.0, 5.0, 4.0])
    assert found.average[0, 2] == pytest.approx(0.4 * 0.8)
    assert "13" in found.sentence
    assert "neither" in found.sentence


def test_a_tensor_that_the_law_leaves_tells_no_fraction() -> None:
    law = turn_of_sixty()
    found = fit_twin(orthorhombic(), SYMMETRIC, take(np.diag([3.0, 3.0, 5.0])), law)
    assert found.fraction is None
    assert "do not tell one fraction from another" in found.sentence


def test_what_cannot_be_asked_is_refused() -> None:
    readings = take(np.diag([3.0, 5.0, 4.0]))
    with pytest.raises(InputError, match="allows already"):
        fit_twin(orthorhombic(), SYMMETRIC, readings, half_turn([1, 0, 0]))
    with pytest.raises(InputError, match="do not determine the average"):
        fit_twin(orthorhombic(), SYMMETRIC, readings[:4], turn_of_sixty())
    bare = [dataclasses.replace(reading, sigma=None) for reading in readings[:6]]
    with pytest.raises(InputError):
        fit_twin(orthorhombic(), SYMMETRIC, bare, turn_of_sixty())
