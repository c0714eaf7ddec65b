"""Plate, bar and sheet: worked numbers, numerical derivatives, a seeded simulation, and a solved plate."""

from __future__ import annotations

import numpy as np
import pytest

from app.consequences.conduction import compute_conduction, follow_flow, respond
from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.tensor.estimate import Estimate, build_estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind

RANDOM = np.random.default_rng(23)

# W1 and W5: invented data; the answers were computed apart from this project.
CRYSTAL = build_crystal([12.214, 3.0371, 5.7981, 90, 103.83, 90], "2/m")
W1 = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
W4 = np.diag([6.2, 6.2, 10.7])
TRICLINIC = np.array([[9.1, 1.2, -0.7], [1.2, 6.4, 0.9], [-0.7, 0.9, 7.7]])


def plain(matrix: object, covariance: object = None) -> Estimate:
    return Estimate(np.array(matrix, dtype=float), covariance, "")  # type: ignore[arg-type]


def along(*directions: str) -> np.ndarray:
    return np.array([CRYSTAL.resolve(read_direction(text)) for text in directions])


def test_w5() -> None:
    found = compute_conduction(plain(W1), along("(-201)", "(111)"))
    assert found.plate == pytest.approx([13.195526, 22.258631], abs=5e-7)
    assert found.rod == pytest.approx([12.981096, 21.556371], abs=5e-7)
    assert found.in_plate.angles == pytest.approx([7.966857, 9.247028], abs=5e-7)
    assert found.in_rod.angles == pytest.approx([6.623165, 11.027388], abs=5e-7)
    uniaxial = compute_conduction(plain(W4), np.array([[1, 0, 1]]) / np.sqrt(2))
    assert (uniaxial.plate[0], uniaxial.rod[0]) == pytest.approx((8.45, 7.850888), abs=5e-7)


def test_a_resistivity_is_the_other_way_round() -> None:
    directions = RANDOM.normal(size=(5, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    one = compute_conduction(plain(TRICLINIC), directions)
    other = compute_conduction(plain(np.linalg.inv(TRICLINIC)), directions, "resistivity")
    for name in ("plate", "rod", "sheet"):
        assert getattr(one, name) * getattr(other, name) == pytest.approx(1.0, rel=1e-12)
    assert one.in_plate.angles == pytest.approx(other.in_plate.angles, rel=1e-9)
    assert one.in_rod.angles == pytest.approx(other.in_rod.angles, rel=1e-9)
    # The bar of a resistivity reads it straight.
    straight = np.einsum("mi,ij,mj->m", directions, np.linalg.inv(TRICLINIC), directions)
    assert other.rod == pytest.approx(straight, rel=1e-12)


def test_a_sheet_shows_the_geometric_mean_of_what_runs_in_it() -> None:
    # Where no current leaves the sheet, its conductivity is the inverse of the resistivity's section along it.
    for normal in RANDOM.normal(size=(4, 3)):
        normal /= np.linalg.norm(normal)
        plane = np.linalg.svd(normal[None, :])[2][1:]
        section = plane @ np.linalg.inv(TRICLINIC) @ plane.T
        found = compute_conduction(plain(TRICLINIC), normal[None, :])
        assert found.sheet[0] == pytest.approx(np.prod(np.linalg.eigvalsh(section)) ** -0.5, rel=1e-12)
    # Uniaxial: √(K_perp K_par) in a plane that holds the axis.
    assert compute_conduction(plain(W4), np.array([[1.0, 0, 0]])).sheet[0] == pytest.approx(np.sqrt(6.2 * 10.7))


@pytest.mark.parametrize("like", ["conductivity", "resistivity"])
def test_sigma_by_simulation(like: str) -> None:
    spread = RANDOM.normal(size=(6, 6))
    form = build_form(build_crystal([5.1, 6.2, 7.3, 80, 95, 107], "1"), Kind())
    free = form.pick(TRICLINIC)
    covariance = 1e-5 * spread @ spread.T
    directions = RANDOM.normal(size=(3, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    found = compute_conduction(build_estimate(form, free, covariance, ""), directions, like)  # type: ignore[arg-type]
    drawn = form.expand(RANDOM.multivariate_normal(free, covariance, size=20_000))
    inverse = np.linalg.inv(drawn)
    if like == "conductivity":
        conductivity, resistivity = drawn, inverse
        turn = 1.0
    else:
        conductivity, resistivity = inverse, drawn
        turn = -1.0

    def section(tensors: np.ndarray) -> np.ndarray:
        return np.einsum("mi,nij,mj->nm", directions, tensors, directions)

    def angles(tensors: np.ndarray) -> np.ndarray:
        flux = np.einsum("nij,mj->nmi", tensors, directions)
        return np.rad2deg(np.arccos(np.sum(flux * directions, axis=-1) / np.linalg.norm(flux, axis=-1)))

    sheets = np.sqrt(np.linalg.det(conductivity)[:, None] / section(conductivity)) ** turn
    assert found.plate_sigma == pytest.approx(np.std(section(conductivity) ** turn, axis=0), rel=0.03)
    assert found.rod_sigma == pytest.approx(np.std((1 / section(resistivity)) ** turn, axis=0), rel=0.03)
    assert found.sheet_sigma == pytest.approx(np.std(sheets, axis=0), rel=0.03)
    assert found.in_plate.sigma == pytest.approx(np.std(angles(conductivity), axis=0), rel=0.03)
    assert found.in_rod.sigma == pytest.approx(np.std(angles(resistivity), axis=0), rel=0.03)


def test_w6_a_tensor_that_is_not_symmetric() -> None:
    # Invented data; the answers were computed apart from this project.
    found = respond(plain([[119.9, -8.1, 0], [8.1, 119.9, 0], [0, 0, 85.3]]), np.array([[1, 0, 0], [3**-0.5] * 3]))
    assert found.angles[0] == pytest.approx(3.864818, abs=5e-7)
    theta = np.deg2rad(found.angles[1])
    assert found.sizes[1] * np.cos(theta) == pytest.approx(108.366667, abs=5e-7)
    assert found.sizes[1] * np.sin(theta) == pytest.approx(17.600442, abs=5e-7)


def test_parallel_by_symmetry_and_by_chance() -> None:
    covariance = np.zeros((9, 9))
    for cells in ([0], [4], [8], [2, 6]):
        covariance[np.ix_(cells, cells)] = 1e-4
    axes = np.linalg.eigh(W1)[1].T
    found = respond(plain(W1, covariance), np.array([[0, 1.0, 0], axes[0] if abs(axes[0][1]) < 0.5 else axes[1]]))
    assert found.angles == pytest.approx([0, 0], abs=1e-6)
    # Along b nothing can turn the flux; along the others the angle is there at every change, without a first order.
    assert found.sigma is not None
    assert found.sigma[0] == 0.0
    assert np.isnan(found.sigma[1])


def test_where_the_flow_comes_out() -> None:
    normal = along("(-201)")[0]
    found = follow_flow(plain(W1), normal, 2.0, edge=np.array([0, 1.0, 0]))
    assert found.angle == pytest.approx(7.966857, abs=5e-7)
    assert found.shift == pytest.approx(2.0 * np.tan(np.deg2rad(7.966857)), rel=1e-7)
    # Everything stays in the plane across b: the flow leaves sideways at a right angle to it.
    assert abs(found.azimuth or 0) == pytest.approx(90.0, abs=1e-9)
    assert found.toward is not None
    flux = W1 @ normal
    assert flux / np.linalg.norm(flux) == pytest.approx(
        np.cos(np.deg2rad(found.angle)) * normal + np.sin(np.deg2rad(found.angle)) * found.toward, abs=1e-12
    )
    right = np.cross(normal, [0, 1.0, 0])
    assert np.sign(found.azimuth) == np.sign(found.toward @ right)
    straight = follow_flow(plain(W1), np.array([0, 1.0, 0]), 2.0, edge=np.array([1.0, 0, 0]))
    assert (straight.angle, straight.shift, straight.toward, straight.azimuth) == (0, 0, None, None)
    resisting = follow_flow(plain(np.linalg.inv(W1)), normal, 2.0, like="resistivity")
    assert resisting.angle == pytest.approx(7.966857, abs=5e-7)


def test_refusals() -> None:
    directions = np.array([[1.0, 0, 0]])
    for matrix in (np.diag([1.0, 2.0, -3.0]), np.diag([1.0, 2.0, 0.0]), [[2, 1, 0], [0, 2, 0], [0, 0, 2]]):
        with pytest.raises(InputError):
            compute_conduction(plain(matrix), directions)
        with pytest.raises(InputError):
            follow_flow(plain(matrix), directions[0], 1.0)
    for thickness in (0.0, -1.0, np.nan, np.inf):
        with pytest.raises(InputError) as caught:
            follow_flow(plain(W1), directions[0], thickness)
        assert caught.value.field == "thickness"
    with pytest.raises(InputError) as caught:
        follow_flow(plain(W1), directions[0], 1.0, edge=-directions[0])
    assert caught.value.field == "edge"
