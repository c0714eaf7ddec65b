"""A tensor under a corrected crystal: turns by textbook bases, sums of squares, a seeded simulation, exact forms."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.frame import list_letter_rules
from app.tensor.carrying import Carried, carry_tensor, find_frame_turn
from app.tensor.form import build_form
from app.tensor.kind import LABELS, Kind
from app.tensor.tensor import PropertyTensor, build_tensor
from tests.crystal.reference import (
    CELLS,
    SETTING_NAMES,
    SETTINGS,
    build_textbook_basis,
    close_group,
    find_numeric_space,
)

FloatArray = npt.NDArray[np.float64]

RULES = [rule.text for rule in list_letter_rules()]
TRICLINIC = CELLS["triclinic"]
# Invented.
MONOCLINIC = (12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0)
FREE = {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}


def attach_axes(cell: tuple[float, ...], rule: str) -> FloatArray:
    """x1 x2 x3 as rows in the textbook's frame (a along x, c* along z), for a rule like x3=c x2=b*."""
    basis = build_textbook_basis(cell)
    reciprocal = np.linalg.inv(basis).T
    rows = np.zeros((3, 3))
    placed = []
    for part in rule.split():
        number, letter = int(part[1]) - 1, "abc".index(part[3])
        vector = (reciprocal if part.endswith("*") else basis)[:, letter]
        rows[number] = vector / np.linalg.norm(vector)
        placed.append(number)
    third = 3 - sum(placed)
    rows[third] = np.cross(rows[(third + 1) % 3], rows[(third + 2) % 3])
    return rows


def rebuild(crystal: Crystal, kind: Kind, carried: Carried) -> FloatArray:
    """The matrix that the carried cells make."""
    free = dict(zip(carried.labels, carried.free.tolist(), strict=True))
    return build_tensor(crystal, kind, free=free).estimate.matrix


def random_covariance(size: int, seed: int) -> FloatArray:
    factor = np.random.default_rng(seed).normal(size=(size, size + 2))
    return factor @ factor.T / 100.0


def make_tensor(crystal: Crystal, kind: Kind, seed: int, *, known: bool = True) -> PropertyTensor:
    """A tensor of every allowed cell drawn at random, with a full covariance."""
    form = build_form(crystal, kind)
    values = np.random.default_rng(seed).normal(size=form.count)
    free = dict(zip(form.labels, values.tolist(), strict=True))
    covariance = random_covariance(form.count, seed) if known and form.count else None
    return build_tensor(crystal, kind, free=free, covariance=covariance)


# Another frame rule ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("rule", RULES)
def test_the_turn_between_two_rules_is_that_of_their_axes(rule: str) -> None:
    old = build_crystal(TRICLINIC, "1")
    new = build_crystal(TRICLINIC, "1", frame=rule)
    turn = find_frame_turn(old, new)
    # v_new = (new axes) · v and v_old = (old axes) · v, both from the textbook's frame.
    expected = attach_axes(TRICLINIC, rule) @ attach_axes(TRICLINIC, "x3=c x2=b*").T
    np.testing.assert_allclose(turn, expected, atol=1e-12)
    assert np.linalg.det(turn) == pytest.approx(1.0)


@settings(max_examples=60, deadline=None)
@given(
    st.sampled_from(SETTINGS), st.sampled_from(RULES), st.sampled_from(RULES), st.integers(0, 2**32 - 1), st.booleans()
)
def test_a_frame_rule_turns_the_tensor_whole_in_every_group(
    setting: Any, first: str, second: str, seed: int, axial: bool
) -> None:
    kind = Kind("axial" if axial else "polar", "general")
    old = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=first)
    new = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=second)
    tensor = make_tensor(old, kind, seed)
    carried = carry_tensor(tensor, find_frame_turn(old, new), new)
    turn = attach_axes(setting.cell, second) @ attach_axes(setting.cell, first).T
    matrix = rebuild(new, kind, carried)
    np.testing.assert_allclose(matrix, turn @ tensor.estimate.matrix @ turn.T, atol=1e-9)
    assert carried.removed == 0.0
    assert carried.freed == ()
    assert carried.labels == tuple(build_form(new, kind).labels)
    if tensor.free_covariance is None:
        assert carried.covariance is None
        return
    # σ of nᵀTn is one number whatever the frame: both ways of getting it from the free cells.
    assert carried.covariance is not None
    direction = np.random.default_rng(seed).normal(size=3)
    direction /= np.linalg.norm(direction)
    turned = turn @ direction
    before = np.einsum("kij,i,j->k", build_form(old, kind).basis, direction, direction)
    after = np.einsum("kij,i,j->k", build_form(new, kind).basis, turned, turned)
    assert after @ carried.covariance @ after == pytest.approx(
        before @ tensor.free_covariance @ before, rel=1e-6, abs=1e-12
    )


def test_the_worked_crystal_in_the_other_usual_rule() -> None:
    # Invented data; the answer was computed apart from this project: 12.495467, 24.6, 16.604533, K13 1.011876.
    old, new = build_crystal(MONOCLINIC, "2/m"), build_crystal(MONOCLINIC, "2/m", frame="x1=a x3=c*")
    tensor = build_tensor(old, Kind(), free=FREE)
    carried = carry_tensor(tensor, find_frame_turn(old, new), new)
    assert carried.labels == ("11", "13", "22", "33")
    np.testing.assert_allclose(carried.free, [12.495467, 1.011876, 24.6, 16.604533], atol=1e-6)
    assert carried.covariance is None


def test_there_and_back_is_where_it_was() -> None:
    old, new = build_crystal(TRICLINIC, "1"), build_crystal(TRICLINIC, "1", frame="x1=b x2=c*")
    tensor = make_tensor(old, Kind(), 4)
    there = carry_tensor(tensor, find_frame_turn(old, new), new)
    free = dict(zip(there.labels, there.free.tolist(), strict=True))
    second = build_tensor(new, Kind(), free=free, covariance=there.covariance)
    back = carry_tensor(second, find_frame_turn(new, old), old)
    np.testing.assert_allclose(back.free, tensor.free, atol=1e-12)
    np.testing.assert_allclose(back.covariance, tensor.free_covariance, atol=1e-12)


def test_covariance_in_another_frame_is_what_a_simulation_finds() -> None:
    old, new = build_crystal(MONOCLINIC, "2/m"), build_crystal(MONOCLINIC, "2/m", frame="x1=a x3=c*")
    covariance = random_covariance(4, 7)
    tensor = build_tensor(old, Kind(), free=FREE, covariance=covariance)
    carried = carry_tensor(tensor, find_frame_turn(old, new), new)
    drawn = np.random.default_rng(11).multivariate_normal(list(FREE.values()), covariance, size=40_000)
    matrices = np.zeros((len(drawn), 3, 3))
    matrices[:, 0, 0], matrices[:, 1, 1], matrices[:, 2, 2] = drawn[:, 0], drawn[:, 2], drawn[:, 3]
    matrices[:, 0, 2] = matrices[:, 2, 0] = drawn[:, 1]
    # x1 turns from a* to a: by β − 90° about x2.
    angle = np.deg2rad(MONOCLINIC[4] - 90.0)
    c, s = np.cos(angle), np.sin(angle)
    turn = np.array([[c, 0, -s], [0, 1, 0], [s, 0, c]])
    turned = turn @ matrices @ turn.T
    cells = np.stack([turned[:, 0, 0], turned[:, 0, 2], turned[:, 1, 1], turned[:, 2, 2]], axis=1)
    scale = np.sqrt(np.outer(np.diag(covariance), np.diag(covariance))).max()
    np.testing.assert_allclose(carried.covariance, np.cov(cells.T), atol=0.03 * scale)


def test_where_cell_or_kind_of_crystal_changes_nothing_turns() -> None:
    old = build_crystal(TRICLINIC, "1")
    other_cell = build_crystal((5.2, 6.2, 7.3, 81.0, 97.0, 104.0), "1")
    for one, two in ((old, other_cell), (old, build_crystal(None, "∞m")), (build_crystal(None, "∞"), old)):
        np.testing.assert_array_equal(find_frame_turn(one, two), np.eye(3))


def test_the_same_crystal_turns_by_nothing() -> None:
    one, two = build_crystal(TRICLINIC, "1"), build_crystal(TRICLINIC, "-1")
    np.testing.assert_allclose(find_frame_turn(one, two), np.eye(3), atol=1e-14)


# Another group --------------------------------------------------------------------------------------------------------


def project_on_group(matrix: FloatArray, crystal: Crystal, setting: Any, kind: Kind) -> FloatArray:
    """The nearest allowed tensor, from the null space of the generated group's constraints."""
    basis = crystal.require_basis()
    rotations = [basis @ member @ np.linalg.inv(basis) for member in close_group(setting.matrices)]
    projector = find_numeric_space(rotations, kind.parity, kind.intrinsic)
    return (projector @ matrix.ravel()).reshape(3, 3)


@pytest.mark.parametrize("name", SETTING_NAMES)
@pytest.mark.parametrize("kind", [Kind(), Kind("axial", "general")], ids=["polar symmetric", "axial general"])
def test_what_the_new_group_forbids_is_removed_and_told(name: str, kind: Kind) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    old = build_crystal(setting.cell, "1")
    new = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
    tensor = make_tensor(old, kind, 5)
    carried = carry_tensor(tensor, find_frame_turn(old, new), new)
    before = tensor.estimate.matrix
    expected = project_on_group(before, new, setting, kind)
    np.testing.assert_allclose(rebuild(new, kind, carried), expected, atol=1e-9)
    removed = np.linalg.norm(before - expected) / np.linalg.norm(before)
    assert carried.removed == pytest.approx(removed, abs=1e-9)
    # From group 1 everything is known, so everything that stays is.
    assert carried.freed == ()
    if not carried.labels:
        return
    assert carried.covariance is not None
    # By a derivative: move one free cell of group 1 and see how the projected cells move.
    pick = [LABELS.index(label) for label in carried.labels]
    columns = [project_on_group(element, new, setting, kind).ravel()[pick] for element in build_form(old, kind).basis]
    derivative = np.array(columns).T
    np.testing.assert_allclose(carried.covariance, derivative @ tensor.free_covariance @ derivative.T, atol=1e-9)


def test_a_tensor_that_obeys_already_keeps_every_digit() -> None:
    old, new = build_crystal(CELLS["orthorhombic"], "1"), build_crystal(CELLS["orthorhombic"], "mmm")
    free = {"11": 0.1 + 0.2, "12": 0.0, "13": 0.0, "22": 1.0 / 3.0, "23": 0.0, "33": -7.0 / 11.0}
    carried = carry_tensor(build_tensor(old, Kind(), free=free), np.eye(3), new)
    assert carried.removed == 0.0
    assert carried.free.tolist() == [free["11"], free["22"], free["33"]]
    # In a hexagonal group the averages over the turns would round.
    old, new = build_crystal(CELLS["hexagonal"], "6/mmm"), build_crystal(CELLS["hexagonal"], "6")
    for value in (0.1 + 0.2, 1.0 / 3.0, 7.0 / 11.0, 12.48, 1e-7 / 3.0):
        carried = carry_tensor(build_tensor(old, Kind(), free={"11": value, "33": 2.0 * value}), np.eye(3), new)
        assert carried.free.tolist() == [value, 2.0 * value]


def test_rounding_is_not_told_as_something_removed() -> None:
    old, new = build_crystal(CELLS["orthorhombic"], "1"), build_crystal(CELLS["orthorhombic"], "mmm")
    free = {"11": 3.0, "12": 1e-12, "13": 0.0, "22": 2.0, "23": 0.0, "33": 1.0}
    assert carry_tensor(build_tensor(old, Kind(), free=free), np.eye(3), new).removed == 0.0
    # By hand: √2 · 0.03 in two cells of a tensor of norm √14.0018.
    free["12"] = 0.03
    carried = carry_tensor(build_tensor(old, Kind(), free=free), np.eye(3), new)
    assert carried.removed == pytest.approx(0.03 * np.sqrt(2 / 14.0018))


@pytest.mark.parametrize(
    ("old", "new", "freed"),
    [
        # A unique axis moved from b to c: 13 is forbidden now, and of 12 nothing was known.
        ("121", "112", ("12",)),
        # From orthorhombic all the cells off the diagonal are new.
        ("mmm", "1", ("12", "13", "23")),
        ("mmm", "12/m1", ("13",)),
    ],
)
def test_cells_about_which_nothing_was_known_are_named(old: str, new: str, freed: tuple[str, ...]) -> None:
    cell = CELLS["orthorhombic"]
    tensor = make_tensor(build_crystal(cell, old), Kind(), 3)
    carried = carry_tensor(tensor, np.eye(3), build_crystal(cell, new))
    assert carried.freed == freed
    assert carried.covariance is None


def test_values_that_were_tied_are_not_known_apart() -> None:
    # 11 = 22 of a tetragonal crystal says nothing about their difference in an orthorhombic one.
    cell = CELLS["tetragonal"]
    tensor = make_tensor(build_crystal(cell, "4/mmm"), Kind(), 3)
    carried = carry_tensor(tensor, np.eye(3), build_crystal(cell, "mmm"))
    assert carried.covariance is None
    assert {"11", "22"} <= set(carried.freed)
    np.testing.assert_allclose(carried.free, [tensor.free[0], tensor.free[0], tensor.free[1]], atol=1e-12)


def test_without_uncertainty_there_is_none_and_nothing_is_freed() -> None:
    cell = CELLS["orthorhombic"]
    tensor = make_tensor(build_crystal(cell, "mmm"), Kind(), 3, known=False)
    carried = carry_tensor(tensor, np.eye(3), build_crystal(cell, "1"))
    assert carried.covariance is None
    assert carried.freed == ()


def test_a_group_that_leaves_nothing_removes_all() -> None:
    # An axial tensor vanishes under an inversion (a polar vector's turn is not an axial one's; Nye, ch. XIV, memory).
    cell = CELLS["triclinic"]
    tensor = make_tensor(build_crystal(cell, "1"), Kind("axial", "symmetric"), 2)
    carried = carry_tensor(tensor, np.eye(3), build_crystal(cell, "-1"))
    assert carried.labels == ()
    assert carried.removed == pytest.approx(1.0)
    assert carried.free.shape == (0,)
    assert carried.covariance is None


def test_the_zero_tensor_loses_nothing() -> None:
    cell = CELLS["orthorhombic"]
    tensor = build_tensor(build_crystal(cell, "1"), Kind(), matrix=np.zeros((3, 3)))
    carried = carry_tensor(tensor, np.eye(3), build_crystal(cell, "mmm"))
    assert carried.removed == 0.0
    np.testing.assert_array_equal(carried.free, np.zeros(3))
