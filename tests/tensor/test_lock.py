"""Every locked cell's reason is true: the operation that the sentence names forces the cell by itself.

The sentence is read, the operation built from its words (scipy's rotation vectors), its presence in the group checked
against hand-written generators, and what it allows alone is found as a null space by singular values: no projector of
the code under test is used.
"""

from __future__ import annotations

import re

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import parse_direction
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.lock import CellLock, explain_cells, format_relation
from tests.crystal.reference import (
    SETTING_NAMES,
    SETTINGS,
    Setting,
    close_group,
    find_first_independent,
    find_numeric_space,
)

KINDS = [
    (parity, intrinsic) for parity in ("polar", "axial") for intrinsic in ("symmetric", "general", "antisymmetric")
]
LIMITING = ["∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m"]
ANGLES = {"half": 180.0, "third": 120.0, "quarter": 90.0, "sixth": 60.0}
WHERE = r"(−?x[123]|[xyz]|\[[^\]]*\]|any direction at right angles to x3|any direction)"
OPERATION = re.compile(
    rf"inversion|(?P<turn>half|third|quarter|sixth)-turn(?P<improper> with inversion)? about {WHERE}"
    rf"|mirror across {WHERE}|turn by any angle(?: with inversion)? about {WHERE}"
)
ANY_AXES = {
    "any direction": np.array([[0.36, 0.48, 0.8], [0.6, -0.8, 0.0]]),
    "any direction at right angles to x3": np.array([[0.6, 0.8, 0.0], [0.28, -0.96, 0.0], [1.0, 0.0, 0.0]]),
}
EFFECT = re.compile(r"turns (\w\w) into (−?)(\w\w)")
# Poses without any relation to the lattice, along it, and with one axis kept.
POSES = {
    "askew": Rotation.from_euler("ZXZ", [37.0, 51.0, -112.0], degrees=True).as_matrix(),
    "turned about x3": Rotation.from_euler("Z", 25.0, degrees=True).as_matrix(),
    "axes exchanged": np.array([[0.0, 1.0, 0.0], [0.0, 0.0, 1.0], [1.0, 0.0, 0.0]]),
}


def find_axis(where: str, crystal: Crystal, pose: np.ndarray) -> np.ndarray:
    sign = -1.0 if where.startswith("−") else 1.0
    if where[-1] in "123" and where[-2] == "x":
        return sign * np.eye(3)[int(where[-1]) - 1]
    if where in ("x", "y", "z"):
        return pose["xyz".index(where)]
    return crystal.resolve(parse_direction(where))


def build_named(text: str, crystal: Crystal, pose: np.ndarray) -> list[np.ndarray]:
    """The operation that a text names, with its powers; of a turn by any angle, a few unrelated angles."""
    match = OPERATION.fullmatch(text)
    assert match is not None, text
    if text == "inversion":
        return [-np.eye(3)]
    where = next(group for group in reversed(match.groups()) if group is not None)
    if "any" in text:
        # A few unrelated ones of the set, which a limiting group has by its definition.
        assert crystal.group.limiting
        axes = [find_axis(where, crystal, pose)] if not where.startswith("any") else ANY_AXES[where]
        if text.startswith("mirror"):
            return [np.eye(3) - 2.0 * np.outer(axis, axis) for axis in axes]
        angles = [np.pi] if text.startswith("half") else [0.7, 1.9]
        sign = -1.0 if "with inversion" in text else 1.0
        return [sign * Rotation.from_rotvec(angle * axis).as_matrix() for angle in angles for axis in axes]
    axis = find_axis(where, crystal, pose)
    if text.startswith("mirror"):
        return [np.eye(3) - 2.0 * np.outer(axis, axis)]
    matrix = Rotation.from_rotvec(np.deg2rad(ANGLES[match.group("turn")]) * axis).as_matrix()
    return [-matrix if match.group("improper") else matrix]


def is_member(matrix: np.ndarray, symbol: str) -> bool:
    """Whether a limiting group holds an operation, by what each of them leaves alone along x3."""
    proper = np.linalg.det(matrix) > 0
    arrow = matrix[:, 2]
    keeps, reverses = np.allclose(arrow, [0, 0, 1]), np.allclose(arrow, [0, 0, -1])
    return {
        "∞": proper and keeps,
        "∞m": keeps,
        "∞2": proper and (keeps or reverses),
        "∞/m": keeps if proper else reverses,
        "∞/mm": keeps or reverses,
        "∞∞": proper,
        "∞∞m": True,
    }[symbol]


def check_cells(
    crystal: Crystal,
    members: list[np.ndarray] | None,
    kind: tuple[str, str],
    pose: np.ndarray | None,
    locks: list[CellLock],
) -> None:
    turn = np.eye(3) if pose is None else pose
    both = np.kron(turn, turn)
    allowed = both @ find_numeric_space(crystal.rotations, *kind) @ both.T
    free = find_first_independent(allowed)
    names = [f"{'xyz'[i]}{'xyz'[j]}" if pose is not None else f"{i + 1}{j + 1}" for i in range(3) for j in range(3)]
    for position, lock in enumerate(locks):
        if position in free:
            assert lock.state == "free" and lock.equals is None
            assert lock.because == "free: no operation of the group decides it"
            continue
        earlier = [cell for cell in free if cell < position]
        coefficients = np.linalg.lstsq(allowed[earlier].T, allowed[position], rcond=None)[0] if earlier else np.zeros(0)
        coefficients = np.where(np.abs(coefficients) < 1e-9, 0.0, coefficients)
        functional = np.eye(9)[position].copy()
        functional[earlier] -= coefficients
        assert np.linalg.norm(functional @ allowed) < 1e-9
        head, _, cause = lock.because.partition(": ")
        if np.any(coefficients):
            assert lock.state == "tied"
            check_printed_relation(lock.equals or "", earlier, coefficients, names)
            assert head == f"tied, {names[position]} = {lock.equals}"
        else:
            assert (lock.state, lock.equals, head) == ("zero", None, "zero")
        if cause == f"the tensor is {kind[1]} by itself":
            alone = find_numeric_space([], "polar", kind[1])
            assert np.linalg.norm(functional @ alone) < 1e-9
            continue
        named = [part.removeprefix("the ") for part in split_names(cause)]
        operations = [matrix for name in named for matrix in build_named(name, crystal, turn)]
        for matrix in operations:
            if members is not None:
                assert any(np.allclose(matrix, member, atol=1e-9) for member in members), cause
            else:
                assert is_member(matrix, crystal.group.symbol), cause
        alone = both @ find_numeric_space(operations, *kind) @ both.T
        assert np.linalg.norm(functional @ alone) < 1e-8, (kind, cause)
        if len(named) == 2:
            # Each by itself does not do it: else one name would have been enough.
            for name in named:
                single = both @ find_numeric_space(build_named(name, crystal, turn), *kind) @ both.T
                assert np.linalg.norm(functional @ single) > 1e-6, cause
        effect = EFFECT.search(cause)
        if effect is not None:
            check_effect(effect, names, position, operations[0], kind[0], turn)


def split_names(cause: str) -> list[str]:
    for ending in (" together leave it no other value", " leaves it no other value"):
        if cause.endswith(ending):
            return cause.removesuffix(ending).split(" and ")
    return [cause[: cause.index(" turns ")]]


def check_effect(
    effect: re.Match[str], names: list[str], position: int, matrix: np.ndarray, parity: str, turn: np.ndarray
) -> None:
    """ "Turns 12 into −21": of a tensor with the one cell 12, R T Rᵀ has −that in cell 21."""
    assert effect.group(1) == names[position]
    cell = np.zeros(9)
    cell[position] = 1.0
    posed = turn @ matrix @ turn.T
    image = (posed @ cell.reshape(3, 3) @ posed.T).ravel() * (np.linalg.det(posed) if parity == "axial" else 1.0)
    expected = np.zeros(9)
    expected[names.index(effect.group(3))] = -1.0 if effect.group(2) else 1.0
    assert image == pytest.approx(expected, abs=1e-9)


def check_printed_relation(text: str, earlier: list[int], coefficients: np.ndarray, names: list[str]) -> None:
    printed = dict.fromkeys(range(9), 0.0)
    for sign, size, name in re.findall(r"([−+]?) ?(?:([\d.e-]+)·)?(\w\w)", text):
        printed[names.index(name)] += (-1.0 if sign == "−" else 1.0) * float(size or 1.0)
    for cell, coefficient in zip(earlier, coefficients, strict=True):
        assert printed.pop(cell) == pytest.approx(coefficient, rel=1e-3, abs=1e-9), text
    assert not any(printed.values()), text


def build(setting: Setting) -> tuple[Crystal, list[np.ndarray]]:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
    assert crystal.M is not None
    inverse = np.linalg.inv(crystal.M)
    return crystal, [crystal.M @ matrix @ inverse for matrix in close_group(setting.matrices)]


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_every_reason_in_the_crystal_frame(setting: Setting) -> None:
    crystal, members = build(setting)
    for kind in KINDS:
        form = build_form(crystal, Kind(*kind))  # type: ignore[arg-type]
        check_cells(crystal, members, kind, None, explain_cells(crystal, form))


@pytest.mark.parametrize("pose", POSES)
@pytest.mark.parametrize(
    "setting",
    [
        s
        for s in SETTINGS
        if s.name in ("-1", "2/m unique b", "mm2", "4", "-4m2", "-3m", "32 rhombohedral", "622", "23", "m")
    ],
    ids=lambda setting: setting.name,
)
def test_every_reason_in_a_posed_frame(setting: Setting, pose: str) -> None:
    crystal, members = build(setting)
    for kind in KINDS:
        form = build_form(crystal, Kind(*kind))  # type: ignore[arg-type]
        check_cells(crystal, members, kind, POSES[pose], explain_cells(crystal, form, POSES[pose]))


@pytest.mark.parametrize("symbol", LIMITING)
def test_every_reason_in_a_limiting_group(symbol: str) -> None:
    crystal = build_crystal(None, symbol)
    for kind in KINDS:
        form = build_form(crystal, Kind(*kind))  # type: ignore[arg-type]
        for pose in (None, *POSES.values()):
            check_cells(crystal, None, kind, pose, explain_cells(crystal, form, pose))


def test_the_reasons_of_one_monoclinic_crystal() -> None:
    # By hand: the half-turn about b = x2 reverses x1 and x3, so it reverses 12 and 23 and nothing else.
    crystal = build_crystal([12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0], "2/m")
    locks = explain_cells(crystal, build_form(crystal, Kind()))
    assert [lock.state for lock in locks] == ["free", "zero", "free", "zero", "free", "zero", "tied", "zero", "free"]
    assert locks[1].because == "zero: the half-turn about x2 turns 12 into −12"
    assert locks[6].because == "tied, 31 = 13: the tensor is symmetric by itself"


def test_relations_as_they_are_printed() -> None:
    assert format_relation({1: -1.0}, None) == "−12"
    assert format_relation({0: 1.0, 4: -1.0}, None) == "11 − 22"
    assert format_relation({0: 0.5, 1: 0.8660254}, ("x", "y", "z")) == "0.5·xx + 0.866·xy"
