"""Indices of a million, angles at 0 and 180, and directions that are parallel but for a hair."""

from __future__ import annotations

import numpy as np
import pytest
from mpmath import cos, mpf, radians, sin

from tests.hard import reference as exact
from tests.hard.conftest import Ask

CELL = [8.141, 12.79, 7.157, 94.225, 116.597, 87.772]
TRICLINIC = {"cell": CELL, "group": "-1"}
MATRIX = [[4.1, 0.3, -0.7], [0.3, 2.2, 0.5], [-0.7, 0.5, 3.6]]
LARGE = [
    (1000000, 1, 0),
    (999999, 1000000, -1000000),
    (-1000000, 999999, 1),
    (1, 1000000, 1000000),
    (123456, -654321, 999983),
]


@pytest.mark.parametrize("indices", LARGE)
def test_indices_of_a_million(indices: tuple[int, int, int], ask: Ask) -> None:
    columns, tensor = exact.basis(CELL), exact.exact(MATRIX)
    inner = " ".join(map(str, indices))
    answer = ask(
        "along", {"crystal": TRICLINIC, "tensor": {"matrix": MATRIX}, "directions": [f"[{inner}]", f"({inner})"]}
    )
    for number, n in enumerate((exact.row(columns, indices), exact.normal(columns, indices))):
        assert exact.difference(answer["vectors"][number], list(n)) < 2e-14
        assert exact.difference(answer["values"][number], exact.value(tensor, n)) < 2e-14
        assert exact.difference(answer["rod"][number], exact.rod(tensor, n)) < 1e-13
        assert exact.difference(answer["angle"][number], exact.angle_between(n, tensor * n)) < 1e-11


def test_four_large_indices_are_three(ask: Ask) -> None:
    crystal = {"cell": [4.99, 4.99, 17.061, 90, 90, 120], "group": "-3m"}
    body = {"crystal": crystal, "tensor": {"free": {"11": -5.6, "33": 24.9}}}
    answer = ask("along", {**body, "directions": ["(1000000 -999999 -1 7)", "(1000000 -999999 7)"]})
    assert answer["vectors"][0] == pytest.approx(answer["vectors"][1], abs=1e-15)


def test_a_frame_rule_of_large_indices_is_orthonormal_or_refused(ask: Ask) -> None:
    body = {"crystal": {**TRICLINIC, "frame": "x3=[1000000 1 0] x1=(1 -1000000 0)"}, "tensor": {"matrix": MATRIX}}
    M = np.array(ask("state", body)["frame"]["M"])
    columns = exact.basis(CELL)
    # Whatever the frame, the lengths and angles of the edges stay.
    assert exact.difference(M.T @ M, columns.T * columns) < 1e-12
    along = columns * exact.vector([1000000, 1, 0])
    assert pytest.approx([0, 0, float(exact.mp.sqrt(exact.dot(along, along)))], rel=1e-12, abs=1e-5) == M @ [
        1000000,
        1,
        0,
    ]
    error = ask("state", {**body, "crystal": {**TRICLINIC, "frame": "x3=[1000000 1 0] x1=(1 1 0)"}}, refused=True)
    assert error["field"] == "crystal.frame"


@pytest.mark.parametrize("offset", [1e-3, 1e-6, 1e-9, 1e-12, 0.0])
def test_small_angles_between_cause_and_effect(offset: float, ask: Ask) -> None:
    # A n is off n by offset / 2 radians nearly: an angle that 1 − cos would lose below 1e-8.
    for sign in (1, -1):
        matrix = [[sign, sign * offset, 0], [sign * offset, sign, 0], [0, 0, sign]]
        answer = ask("along", {"crystal": TRICLINIC, "tensor": {"matrix": matrix}, "directions": [[1, 0, 0]]})
        wanted = exact.angle_between(exact.vector([1, 0, 0]), exact.exact(matrix) * exact.vector([1, 0, 0]))
        assert answer["angle"][0] == pytest.approx(float(wanted), rel=1e-14, abs=0)
    assert offset or answer["angle"][0] == 180


@pytest.mark.parametrize(
    "angle", [0, 1e-12, 1e-6, 89.999999999, 90, 179.999999, 180, 180.00000001, -180, 360, 720 + 1e-9, 1e6]
)
def test_turns_by_any_angle(angle: float, ask: Ask) -> None:
    body = {"crystal": TRICLINIC, "tensor": {"matrix": MATRIX}}
    turn = mpf(float(angle))
    c, s = cos(radians(turn)), sin(radians(turn))
    wanted = exact.matrix([[c, s, 0], [-s, c, 0], [0, 0, 1]])
    answer = ask("state", {**body, "pose": {"axis": [0, 0, 1], "angle": angle}})
    # The angle in radians is rounded: half a last bit of it, which is 1e-12 for a million degrees.
    slack = 8 * exact.EPS * (1 + abs(np.deg2rad(angle)))
    assert exact.difference(answer["pose"]["matrix"], wanted) < slack
    assert exact.difference(answer["posed"], wanted * exact.exact(MATRIX) * wanted.T) < 60 * slack
    # Whatever the pose is told as, it is the same pose.
    for key in ("bunge", "quaternion"):
        again = ask("state", {**body, "pose": {key: answer["pose"][key]}})
        assert np.array(again["pose"]["matrix"]) == pytest.approx(np.array(answer["pose"]["matrix"]), abs=2e-14)


@pytest.mark.parametrize("middle", [0, 1e-13, 1e-8, 1e-4, 180, 180 - 1e-13, 180 - 1e-8])
def test_angles_of_bunge_where_two_of_them_become_one(middle: float, ask: Ask) -> None:
    body = {"crystal": TRICLINIC, "tensor": {"matrix": MATRIX}}
    first, second, third = (radians(mpf(float(a))) for a in (33.0, middle, 21.0))

    def about_z(t: object) -> exact.matrix:
        return exact.matrix([[cos(t), sin(t), 0], [-sin(t), cos(t), 0], [0, 0, 1]])

    about_x = exact.matrix([[1, 0, 0], [0, cos(second), sin(second)], [0, -sin(second), cos(second)]])
    wanted = (about_z(third) * about_x * about_z(first)).T
    answer = ask("state", {**body, "pose": {"bunge": [33, middle, 21]}})["pose"]
    assert exact.difference(answer["matrix"], wanted) < 2e-15
    again = ask("state", {**body, "pose": {"bunge": answer["bunge"]}})["pose"]
    assert np.array(again["matrix"]) == pytest.approx(np.array(answer["matrix"]), abs=1e-14)


@pytest.mark.parametrize("apart", [1e-2, 1e-4, 1e-5, 1e-7, 1e-12, 0.0])
def test_a_pose_by_two_nearly_parallel_directions(apart: float, ask: Ask) -> None:
    pose = {"exact": ["z", [0, 0, 1]], "toward": ["x", [apart, 0, 1]]}
    body = {"crystal": TRICLINIC, "tensor": {"matrix": MATRIX}, "pose": pose}
    if apart >= 1e-5:
        assert ask("state", body)["pose"]["matrix"] == [[1, 0, 0], [0, 1, 0], [0, 0, 1]]
    elif apart <= 1e-12:
        assert ask("state", body, refused=True)["field"].startswith("pose")


@pytest.mark.parametrize("half_angle", [0, 1e-12, 1e-6, 1e-3, 45, 90 - 1e-9, 90])
@pytest.mark.parametrize("from_axis", [0, 1e-7, 45, 90])
def test_extremes_over_the_smallest_and_largest_caps(half_angle: float, from_axis: float, ask: Ask) -> None:
    # Uniaxial: nᵀAn = 6.2 + 4.5 cos² of the angle from c, so over a cap it is extreme where that angle is.
    crystal = {"cell": [5, 5, 9, 90, 90, 90], "group": "4/mmm"}
    tilt = radians(mpf(from_axis))
    direction = [float(sin(tilt)), 0.0, float(cos(tilt))]
    body = {"crystal": crystal, "tensor": {"free": {"11": 6.2, "33": 10.7}}, "direction": direction}
    answer = ask("miscut", {**body, "half_angle": half_angle})
    n = exact.unit(direction)
    tilt = exact.mp.atan2(n[0], n[2])
    reach = radians(mpf(half_angle))
    low, high = mpf(6.2), mpf(10.7)

    def at(angle: object) -> object:
        return low + (high - low) * cos(angle) ** 2

    least, most = max(tilt - reach, 0), min(tilt + reach, exact.pi / 2)
    assert exact.difference(answer["nominal"], at(tilt)) < 1e-14
    assert exact.difference(answer["highest"], at(least)) < 1e-14
    assert exact.difference(answer["lowest"], at(most)) < 1e-14
    assert exact.difference(answer["slope"], abs((high - low) * sin(2 * tilt)) * exact.pi / 180) < 1e-15


@pytest.mark.parametrize("tolerance", [1e-300, 1e-20, 1e-12, 1e-6, 0.5, 4.4, 4.5, 1e300])
def test_the_largest_miscut_for_the_smallest_tolerance(tolerance: float, ask: Ask) -> None:
    # Along c of the same crystal the value falls by 4.5 sin²: the reach is asin √(tolerance / 4.5).
    crystal = {"cell": [5, 5, 9, 90, 90, 90], "group": "4/mmm"}
    body = {
        "crystal": crystal,
        "tensor": {"free": {"11": 6.2, "33": 10.7}},
        "direction": [0, 0, 1],
        "tolerance": tolerance,
    }
    part = mpf(tolerance) / (mpf(10.7) - mpf(6.2))
    wanted = 90.0 if part >= 1 else float(exact.mp.asin(exact.mp.sqrt(part)) * 180 / exact.pi)
    assert ask("miscut", body)["half_angle"] == pytest.approx(wanted, rel=1e-10, abs=1e-100)


@pytest.mark.parametrize("gap", [1e-2, 1e-5, 1e-8])
def test_the_cone_of_a_value_between_nearly_equal_ones(gap: float, ask: Ask) -> None:
    # On the cone of a value v about c: sin² = (a − v)/(a − b); with a and b nearly equal all of it is cancellation.
    crystal = {"cell": [5, 5, 9, 90, 90, 90], "group": "4/mmm"}
    low, high, target = 1.0, 1.0 + gap, 1.0 + 0.25 * gap
    condition = {"tensor": {"free": {"11": low, "33": high}}, "target": target}
    answer = ask("seek", {"crystal": crystal, "conditions": [condition]})
    part = (mpf(high) - mpf(target)) / (mpf(high) - mpf(low))
    wanted = float(exact.mp.asin(exact.mp.sqrt(part)) * 180 / exact.pi)
    assert answer["cone"]["half_angles"] == pytest.approx([wanted] * 2, rel=40 * exact.EPS / gap)
    # The part of the sphere within the cone is above the target.
    assert answer["fraction_below"] == pytest.approx(float(exact.mp.sqrt(1 - part)), rel=40 * exact.EPS / gap)
