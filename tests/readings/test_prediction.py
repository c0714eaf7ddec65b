from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.errors import InputError
from app.readings.prediction import predict, second_order_factors, turn_derivatives
from app.readings.reading import READING_KINDS, Reading
from app.readings.reading_set import resolve_readings
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY
from tests.readings.builders import (
    MONOCLINIC,
    MONOCLINIC_MATRIX,
    TRICLINIC,
    along,
    build_reading,
    random_units,
    true_value,
    vector,
)


def one(kind: str, n: np.ndarray, m: np.ndarray, intrinsic: str = "symmetric", **more: object):
    reading = build_reading(kind, 1.0, n, m, **more)
    return resolve_readings(TRICLINIC, Kind("polar", intrinsic), [reading], pose=IDENTITY)  # type: ignore[arg-type]


def positive_matrix(rng: np.random.Generator) -> np.ndarray:
    root = rng.normal(size=(3, 3))
    return root @ root.T + np.eye(3)


@pytest.mark.parametrize("kind", READING_KINDS)
def test_values_and_derivatives_follow_the_definition(kind: str) -> None:
    # The definition is written out in the builders; the derivative is taken by central differences.
    rng = np.random.default_rng(11)
    for _ in range(20):
        matrix, (n, m) = positive_matrix(rng), random_units(rng, 2)
        prediction = predict(one(kind, n, m), matrix)
        assert prediction.values[0] == pytest.approx(true_value(kind, matrix, n, m), rel=1e-12)
        change = rng.normal(size=(3, 3))
        change += change.T
        step = 1e-5
        numeric = (true_value(kind, matrix + step * change, n, m) - true_value(kind, matrix - step * change, n, m)) / (
            2 * step
        )
        assert prediction.rows[0] @ change.ravel() == pytest.approx(numeric, rel=1e-6, abs=1e-8)


@pytest.mark.parametrize("kind", READING_KINDS)
def test_turn_derivatives_agree_with_a_small_turn_of_the_bar(kind: str) -> None:
    # Reference: the bar turned by scipy's rotation, central differences.
    rng = np.random.default_rng(12)
    for _ in range(20):
        matrix, (n, m) = positive_matrix(rng), random_units(rng, 2)
        derivative = turn_derivatives(one(kind, n, m), matrix)[0]
        for axis in np.eye(3):
            forward, back = (Rotation.from_rotvec(sign * 1e-5 * axis).as_matrix() for sign in (1, -1))
            numeric = (
                true_value(kind, matrix, forward @ n, forward @ m) - true_value(kind, matrix, back @ n, back @ m)
            ) / 2e-5
            assert derivative @ axis == pytest.approx(numeric, rel=1e-6, abs=1e-7)


def test_an_effect_across_its_cause_sees_the_antisymmetric_part() -> None:
    rng = np.random.default_rng(13)
    matrix, (n, m) = rng.normal(size=(3, 3)), random_units(rng, 2)
    readings = one("across", n, m, intrinsic="general")
    assert predict(readings, matrix).values[0] == pytest.approx(m @ matrix @ n)
    for axis in np.eye(3):
        forward, back = (Rotation.from_rotvec(sign * 1e-5 * axis).as_matrix() for sign in (1, -1))
        numeric = ((forward @ m) @ matrix @ (forward @ n) - (back @ m) @ matrix @ (back @ n)) / 2e-5
        assert turn_derivatives(readings, matrix)[0] @ axis == pytest.approx(numeric, abs=1e-7)


@pytest.mark.parametrize(("kind", "degrees"), [("along", 4.0), ("difference", 4.0)])
def test_tilt_moments_agree_with_a_seeded_simulation(kind: str, degrees: float) -> None:
    # 400,000 seeded random turns n → n + ω × n, renormalised turns being equal to this order: mean and covariance.
    rng = np.random.default_rng(14)
    spread = np.deg2rad(degrees)
    n, m = np.array([0.0, 0.0, 1.0]), np.array([1.0, 0.0, 0.0])
    matrix = np.diag([100.0, 60.0, 1.0])
    sets = one(kind, n, m, sigma=1.0, direction_sigma=degrees)
    turns = rng.normal(size=(400_000, 3)) * spread
    rotations = Rotation.from_rotvec(turns).as_matrix()
    turned_n, turned_m = rotations @ n, rotations @ m
    seen = np.einsum("ni,ij,nj->n", turned_n, matrix, turned_n)
    if kind == "difference":
        seen -= np.einsum("ni,ij,nj->n", turned_m, matrix, turned_m)
    predicted = predict(sets, matrix).values[0]
    variance = spread**4 * np.sum(second_order_factors(sets, matrix)[0] ** 2)
    # n and m are principal axes, so the first order vanishes and the second is all there is.
    assert np.allclose(turn_derivatives(sets, matrix), 0)
    nominal = true_value(kind, matrix, n, m)
    # The next order is s⁴: 2.5 % of the shift at 4°.
    assert np.mean(seen) - nominal == pytest.approx(predicted - nominal, rel=0.03)
    assert np.std(seen) == pytest.approx(np.sqrt(variance), rel=0.03)


def test_w5_rod_and_plate() -> None:
    # W5: invented data; the answer was computed apart from this project.
    readings = [
        Reading(kind, None, along(text, 1.0).direction) for text in ("(-2 0 1)", "(111)") for kind in ("along", "rod")
    ]
    taken = resolve_readings(MONOCLINIC, Kind(), readings, pose=IDENTITY, values_required=False)
    values = predict(taken, MONOCLINIC_MATRIX).values
    assert values == pytest.approx([13.195526, 12.981096, 22.258631, 21.556371], abs=5e-7)


def test_a_rod_of_a_tensor_with_a_negative_value_is_refused() -> None:
    taken = one("rod", np.array([0, 0, 1.0]), np.array([1.0, 0, 0]))
    with pytest.raises(InputError, match="principal value is positive"):
        predict(taken, np.diag([1.0, 2.0, -3.0]))


def test_a_sheet_in_principal_axes_is_the_geometric_mean() -> None:
    # Van der Pauw (1961), for an anisotropic sheet: √(A1 A2) where the plate's normal is the third principal axis.
    taken = resolve_readings(TRICLINIC, Kind(), [Reading("sheet", 1.0, second=vector([0, 0, 1]))], pose=IDENTITY)
    assert predict(taken, np.diag([4.0, 9.0, 2.0])).values[0] == pytest.approx(6.0)
