"""Readable names of operations: what is named is what the matrix does."""

from __future__ import annotations

import re

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.crystal.crystal import build_crystal
from app.crystal.operation import describe_operation, find_integer_indices, find_turn
from tests.crystal.reference import SETTING_NAMES, SETTINGS, Setting

ANGLES = {"half-turn": 180.0, "third-turn": 120.0, "quarter-turn": 90.0, "sixth-turn": 60.0}
NAME = re.compile(r"(half|third|quarter|sixth)-turn( with inversion)? about \[(-?\d+) (-?\d+) (-?\d+)\]")
MIRROR = re.compile(r"mirror across \[(-?\d+) (-?\d+) (-?\d+)\]")


def build_from_name(name: str, basis: np.ndarray) -> np.ndarray:
    """The matrix that a name describes, by scipy's rotation vectors."""
    if name == "identity":
        return np.eye(3)
    if name == "inversion":
        return -np.eye(3)
    mirror = MIRROR.fullmatch(name)
    if mirror:
        normal = basis @ np.array([int(index) for index in mirror.groups()])
        normal = normal / np.linalg.norm(normal)
        return np.eye(3) - 2.0 * np.outer(normal, normal)
    turn = NAME.fullmatch(name)
    assert turn is not None, name
    axis = basis @ np.array([int(index) for index in turn.groups()[2:]])
    angle = np.deg2rad(ANGLES[f"{turn.group(1)}-turn"])
    matrix = Rotation.from_rotvec(angle * axis / np.linalg.norm(axis)).as_matrix()
    return -matrix if turn.group(2) else matrix


@pytest.mark.parametrize("frame", ["x3=c x2=b*", "x1=a x3=c*", "x2=[1 0 1] x3=(0 1 0)"])
@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_every_name_describes_its_matrix(setting: Setting, frame: str) -> None:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=frame)
    assert crystal.M is not None
    names = crystal.operation_names
    assert len(names) == len(set(names)) == setting.order
    assert names[0] == "identity"
    for operation in crystal.operations:
        assert operation.matrix == pytest.approx(build_from_name(operation.name, crystal.M), abs=1e-12)
        assert operation.improper is bool(np.linalg.det(operation.matrix) < 0)


def test_the_names_of_the_interface() -> None:
    # Three names stand in the interface's own text.
    assert "half-turn about [0 1 0]" in build_crystal([5, 6, 7, 90, 100, 90], "2/m").operation_names
    assert "mirror across [1 0 0]" in build_crystal([5, 6, 7, 90, 90, 90], "mmm").operation_names
    assert "quarter-turn with inversion about [0 0 1]" in build_crystal([5, 5, 7, 90, 90, 90], "-4").operation_names


@pytest.mark.parametrize("symbol", ["∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m"])
def test_limiting_groups_name_kinds_of_operation(symbol: str) -> None:
    names = build_crystal(None, symbol).operation_names
    assert names[0].startswith("any turn about")
    assert any("mirror" in name for name in names) is ("m" in symbol)
    assert ("inversion" in names) is ("/m" in symbol or symbol == "∞∞m")


def test_turns_against_scipy() -> None:
    random = Rotation.random(200, random_state=np.random.RandomState(5))
    for rotation in random:
        vector = rotation.as_rotvec()
        for sign in (1.0, -1.0):
            axis, angle, improper = find_turn(sign * rotation.as_matrix())
            assert axis is not None
            assert np.deg2rad(angle) * axis == pytest.approx(vector, abs=1e-7)
            assert improper is (sign < 0)


def test_half_turns_about_any_axis() -> None:
    for vector in np.random.default_rng(6).normal(size=(100, 3)):
        unit = vector / np.linalg.norm(vector)
        axis, angle, _ = find_turn(2.0 * np.outer(unit, unit) - np.eye(3))
        assert axis is not None and angle == pytest.approx(180.0)
        assert abs(axis @ unit) == pytest.approx(1.0, abs=1e-14)


def test_whole_numbers_in_a_ratio() -> None:
    # By hand: the smallest whole numbers in the ratio.
    assert find_integer_indices(np.array([0.5, -1.0, 0.25])) == (2, -4, 1)
    assert find_integer_indices(np.array([1 / 3, 1 / 2, 0.0])) == (2, 3, 0)
    assert find_integer_indices(np.array([3e-20, 0.0, 6e-20])) == (1, 0, 2)
    assert find_integer_indices(np.array([1.0, np.sqrt(2.0), np.sqrt(3.0)])) is None


def test_an_axis_without_a_cell_is_named_by_the_frame() -> None:
    assert describe_operation(np.diag([-1.0, -1.0, 1.0]), None).name == "half-turn about x3"
    assert describe_operation(np.diag([-1.0, 1.0, 1.0]), None).name == "mirror across x1"
