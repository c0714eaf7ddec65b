"""Conversion between cells, settings and frames. W1's relabelling stands in tests/web/test_calculation.py too."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.cell import compute_metric, compute_parameters
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import Direction
from app.crystal.frame import list_letter_rules
from app.errors import InputError
from app.tensor.conversion import MATCH_LIMIT, convert_tensor, list_candidates
from app.tensor.kind import Kind
from app.tensor.tensor import PropertyTensor, build_tensor

CELL = [12.214, 3.0371, 5.7981, 90, 103.83, 90]
FREE = {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}
MONOCLINIC = build_crystal(CELL, "2/m")


def monoclinic_tensor(covariance: np.ndarray | None = None) -> PropertyTensor:
    return build_tensor(MONOCLINIC, Kind(), free=FREE, covariance=covariance)


def describe(crystal: Crystal, basis: np.ndarray, group: str, frame: str | None = None, **more: str) -> Crystal:
    """The same crystal on the axes (a b c) P, its cell worked out from the metric."""
    assert crystal.cell is not None
    metric = basis.T @ crystal.cell.metric @ basis
    return build_crystal(compute_parameters(metric), group, frame=frame, **more)


def value_along_row(crystal: Crystal, matrix: np.ndarray, row: np.ndarray) -> float:
    direction = crystal.resolve(Direction("row", tuple(float(part) for part in row)))
    return float(direction @ matrix @ direction)


@pytest.mark.parametrize("rule", [rule.text for rule in list_letter_rules()])
def test_a_change_of_frame_alone(rule: str) -> None:
    # Independent reference: a property along a lattice row does not depend on the frame.
    new = build_crystal(CELL, "2/m", frame=rule)
    result = convert_tensor(MONOCLINIC, monoclinic_tensor(), new, np.eye(3))
    assert result.misfit == pytest.approx(0, abs=1e-12)
    assert result.removed < 1e-9
    assert result.rotation @ result.rotation.T == pytest.approx(np.eye(3), abs=1e-12)
    assert result.rotation @ MONOCLINIC.M == pytest.approx(new.M, abs=1e-9)
    old = monoclinic_tensor().estimate.matrix
    for row in ([1, 0, 0], [1, 1, 2], [-2, 0, 1]):
        expected = value_along_row(MONOCLINIC, old, np.array(row))
        assert value_along_row(new, result.matrix, np.array(row)) == pytest.approx(expected)


# (a' b' c') for the three cell choices of a primitive monoclinic group with a glide plane, unique axis b
# (International Tables for Crystallography A, 2016, section 1.5.4; from memory): P 21/c → P 21/n → P 21/a.
CELL_CHOICES = {
    "P 1 21/n 1": np.array([[-1, 0, 1], [0, 1, 0], [-1, 0, 0]]),
    "P 1 21/a 1": np.array([[0, 0, -1], [0, 1, 0], [1, 0, -1]]),
}


@pytest.mark.parametrize("symbol", CELL_CHOICES)
def test_cell_choices_of_a_monoclinic_group(symbol: str) -> None:
    basis = CELL_CHOICES[symbol].astype(float)
    if np.linalg.det(basis) < 0:
        basis[:, 1] *= -1
    new = describe(MONOCLINIC, basis, symbol)
    result = convert_tensor(MONOCLINIC, monoclinic_tensor(), new, basis)
    assert result.misfit < 1e-9
    assert result.removed < 1e-9
    old = monoclinic_tensor().estimate.matrix
    assert np.linalg.eigvalsh(result.matrix) == pytest.approx(np.linalg.eigvalsh(old))
    for row in itertools.product((-1, 0, 1, 2), repeat=3):
        if any(row):
            # The row [u v w] has the components P⁻¹ (u v w) on the new axes.
            expected = value_along_row(MONOCLINIC, old, np.array(row))
            assert value_along_row(new, result.matrix, np.linalg.solve(basis, row)) == pytest.approx(expected)


def test_rhombohedral_to_hexagonal_axes() -> None:
    # Obverse setting, a_h = a − b, b_h = b − c, c_h = a + b + c (International Tables A, section 1.5.3; from memory);
    # a_h = 2 a sin(α/2), c_h = a √(3 + 6 cos α).
    a, alpha = 6.2, 55.0
    old = build_crystal([a, a, a, alpha, alpha, alpha], "R -3 m:R")
    hexagonal = [2 * a * np.sin(np.deg2rad(alpha / 2)), a * np.sqrt(3 + 6 * np.cos(np.deg2rad(alpha)))]
    new = build_crystal([hexagonal[0], hexagonal[0], hexagonal[1], 90, 90, 120], "R -3 m:H")
    axis = old.resolve(Direction("row", (1.0, 1.0, 1.0)))
    matrix = 3.0 * np.eye(3) + 4.0 * np.outer(axis, axis)
    basis = np.array([[1, 0, 1], [-1, 1, 1], [0, -1, 1]])
    result = convert_tensor(old, build_tensor(old, Kind(), matrix=matrix), new, basis)
    assert result.matrix == pytest.approx(np.diag([3.0, 3.0, 7.0]), abs=1e-9)
    # And back, with the thirds of the inverse.
    back = convert_tensor(new, build_tensor(new, Kind(), matrix=result.matrix), old, np.linalg.inv(basis))
    assert back.matrix == pytest.approx(matrix, abs=1e-9)


def test_a_centred_cubic_cell_on_primitive_axes() -> None:
    # Face-centred to primitive: halves of the face diagonals, edge a/√2, all angles 60°.
    old = build_crystal([5.64, 5.64, 5.64, 90, 90, 90], "F m -3 m")
    edge = 5.64 / np.sqrt(2)
    new = build_crystal([edge, edge, edge, 60, 60, 60], "-3m")
    basis = np.array([[0, 0.5, 0.5], [0.5, 0, 0.5], [0.5, 0.5, 0]])
    result = convert_tensor(old, build_tensor(old, Kind(), free={"11": 2.5}), new, basis)
    assert result.matrix == pytest.approx(2.5 * np.eye(3), abs=1e-12)
    assert result.misfit < 1e-12


def test_an_anisotropic_tensor_on_primitive_axes_of_a_face_centred_cell() -> None:
    # A rhombohedral crystal whose cell happens to be cubic: 7 along [1 1 1] and 3 across it, on both sets of axes.
    # [1 1 1] of the cubic cell is [1 1 1] of the primitive one, and [0 1 -1] is [0 -1 1] (by hand, from the halves).
    old = build_crystal([5.64, 5.64, 5.64, 90, 90, 90], "R -3 m:R")
    edge = 5.64 / np.sqrt(2)
    new = build_crystal([edge, edge, edge, 60, 60, 60], "-3m")
    basis = np.array([[0, 0.5, 0.5], [0.5, 0, 0.5], [0.5, 0.5, 0]])
    axis = old.resolve(Direction("row", (1.0, 1.0, 1.0)))
    tensor = build_tensor(old, Kind(), matrix=3.0 * np.eye(3) + 4.0 * np.outer(axis, axis))
    assert tensor.misfit < 1e-12
    result = convert_tensor(old, tensor, new, basis)
    assert value_along_row(new, result.matrix, np.array([1, 1, 1])) == pytest.approx(7.0)
    assert value_along_row(new, result.matrix, np.array([0, -1, 1])) == pytest.approx(3.0)
    # A cube's edge lies at cos² = 1/3 from the body diagonal; on the new axes it is −a + b + c.
    assert value_along_row(new, result.matrix, np.array([-1, 1, 1])) == pytest.approx(3.0 + 4.0 / 3.0)
    assert result.removed < 1e-9


def test_the_same_crystal_relabelled() -> None:
    # W1: invented data; the answer was computed apart from this project. (a' b' c') = (c a b), unique axis c.
    new = build_crystal([5.7981, 12.214, 3.0371, 90, 90, 103.83], "2/m", unique_axis="c")
    basis = np.array([[0, 1, 0], [0, 0, 1], [1, 0, 0]])
    result = convert_tensor(MONOCLINIC, monoclinic_tensor(), new, basis)
    assert result.matrix == pytest.approx(np.array([[15.9, 1.85, 0], [1.85, 13.2, 0], [0, 0, 24.6]]), abs=1e-9)
    normal = new.resolve(Direction("normal", (1.0, -2.0, 0.0)))
    assert normal @ result.matrix @ normal == pytest.approx(13.195526, abs=5e-7)
    # And its second frame, x1 = a, x3 = c*, of the old cell.
    second = build_crystal(CELL, "2/m", frame="x1=a x3=c*")
    turned = convert_tensor(MONOCLINIC, monoclinic_tensor(), second, np.eye(3)).matrix
    assert turned[[0, 1, 2, 0], [0, 1, 2, 2]] == pytest.approx([12.495467, 24.6, 16.604533, 1.011876], abs=5e-7)


@pytest.mark.parametrize(
    ("basis", "expected"),
    [
        # By hand: a quarter-turn about c exchanges 11 and 22 and reverses 12; a half-turn about [1 1 0] exchanges
        # 11 and 22 and keeps 12. Both are proper, so the axial tensor takes no sign of its own.
        ([[0, -1, 0], [1, 0, 0], [0, 0, 1]], [[-2.0, -1.5, 0], [-1.5, 2.0, 0], [0, 0, 0]]),
        ([[0, 1, 0], [1, 0, 0], [0, 0, -1]], [[-2.0, 1.5, 0], [1.5, 2.0, 0], [0, 0, 0]]),
    ],
)
def test_an_axial_tensor_takes_no_sign(basis: list[list[int]], expected: list[list[float]]) -> None:
    # W7's tensor: invented data, 11 = 2, 22 = −2, 12 = 1.5 in class −4.
    crystal = build_crystal([5, 5, 7, 90, 90, 90], "-4")
    tensor = build_tensor(crystal, Kind("axial"), free={"11": 2.0, "12": 1.5})
    result = convert_tensor(crystal, tensor, crystal, basis)
    assert result.matrix == pytest.approx(np.array(expected), abs=1e-12)
    assert result.removed < 1e-9


def test_the_audit_adds_up_and_names_free_cells() -> None:
    new = build_crystal(CELL, "2/m", frame="x1=a x3=c*")
    result = convert_tensor(MONOCLINIC, monoclinic_tensor(), new, np.eye(3))
    assert [entry.cell for entry in result.audit] == ["11", "12", "13", "21", "22", "23", "31", "32", "33"]
    for entry, value in zip(result.audit, result.matrix.ravel(), strict=True):
        assert sum(coefficient * FREE[label] for label, coefficient in entry.terms.items()) == pytest.approx(value)
    # W1, invented data, computed apart from this project; the angle from c to c* is β − 90°, so by hand:
    turn = np.deg2rad(103.83 - 90)
    c, s = np.cos(turn), np.sin(turn)
    assert result.audit[0].terms == pytest.approx({"11": c * c, "13": -2 * s * c, "33": s * s})
    assert result.audit[4].terms == {"22": 1.0}
    assert result.audit[1].terms == {}
    assert result.matrix[0, 0] == pytest.approx(12.495467, abs=5e-7)


def test_the_covariance_goes_along() -> None:
    # Reference: a seeded simulation of the four free cells.
    rng = np.random.default_rng(41)
    root = rng.normal(size=(4, 4)) * 0.1
    new = build_crystal(CELL, "2/m", frame="x1=a x3=c*")
    result = convert_tensor(MONOCLINIC, monoclinic_tensor(root @ root.T), new, np.eye(3))
    draws = np.array(list(FREE.values())) + rng.normal(size=(20_000, 4)) @ root.T
    basis = monoclinic_tensor().form.basis
    turned = result.rotation @ np.tensordot(draws, basis, axes=1) @ result.rotation.T
    assert result.estimate.sigma_matrix == pytest.approx(np.std(turned, axis=0), rel=0.03, abs=1e-12)
    assert result.estimate.frame == new.frame_sentence


@settings(max_examples=40, deadline=None)
@given(st.lists(st.integers(-2, 2), min_size=9, max_size=9), st.integers(0, 2**32 - 1))
def test_there_and_back_is_the_same(entries: list[int], seed: int) -> None:
    basis = np.array(entries, dtype=float).reshape(3, 3)
    if np.linalg.det(basis) < 0.5:
        return
    old = build_crystal([6.1, 7.2, 8.3, 81, 95, 107], "1")
    try:
        new = describe(old, basis, "1", frame="x1=a x3=c*")
    except InputError:  # a basis so oblique that its cell is refused as flat
        return
    matrix = np.random.default_rng(seed).normal(size=(3, 3))
    kind = Kind("polar", "general")
    there = convert_tensor(old, build_tensor(old, kind, matrix=matrix), new, basis)
    back = convert_tensor(new, build_tensor(new, kind, matrix=there.matrix), old, np.linalg.inv(basis))
    assert back.matrix == pytest.approx(matrix, abs=1e-6)
    assert there.rotation @ back.rotation == pytest.approx(np.eye(3), abs=1e-6)


def test_candidates_are_all_that_match() -> None:
    # Reference: all 3⁹ matrices tried one by one against the same bound.
    relabelled = build_crystal([5.7981, 12.214, 3.0371, 90, 90, 103.83], "2/m", unique_axis="c")
    found = list_candidates(MONOCLINIC, monoclinic_tensor(), relabelled)
    old, new = compute_metric(np.array(CELL)), relabelled.cell.metric if relabelled.cell else None
    assert new is not None
    bases = np.array(list(itertools.product((-1, 0, 1), repeat=9)), dtype=float).reshape(-1, 3, 3)
    changes = np.abs(np.swapaxes(bases, 1, 2) @ old @ bases - new)
    misfits = np.max(changes / np.sqrt(np.outer(np.diag(new), np.diag(new))), axis=(1, 2))
    expected = bases[(np.linalg.det(bases) > 0.5) & (misfits <= MATCH_LIMIT)]
    assert {entry.basis.tobytes() for entry in found} == {(basis + 0.0).tobytes() for basis in expected}
    assert [entry.misfit for entry in found] == sorted(entry.misfit for entry in found)
    assert any(np.array_equal(entry.basis, [[0, 1, 0], [0, 0, 1], [1, 0, 0]]) for entry in found)
    for entry in found:
        assert entry.matrix == pytest.approx(
            convert_tensor(MONOCLINIC, monoclinic_tensor(), relabelled, entry.basis).matrix
        )


def test_a_monoclinic_cell_that_can_be_matched_in_two_ways() -> None:
    # a and c nearly equal: the two may be exchanged, and the tensor differs; both are listed, none is chosen.
    crystal = build_crystal([7.00, 5.0, 7.02, 90, 100, 90], "2/m")
    tensor = build_tensor(crystal, Kind(), free=FREE)
    matrices = [entry.matrix for entry in list_candidates(crystal, tensor, crystal)]
    kinds = {tuple(np.round(matrix, 6).ravel()) for matrix in matrices}
    assert len(kinds) == 2


def test_the_simplest_of_equally_good_candidates_comes_first() -> None:
    # An orthorhombic cell onto itself: identity and three half-turns fit equally well; fewest minus signs first.
    crystal = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    tensor = build_tensor(crystal, Kind(), free={"11": 1.0, "22": 2.0, "33": 3.0})
    found = list_candidates(crystal, tensor, crystal)
    assert np.diag(found[0].basis).tolist() == [1, 1, 1]
    assert {tuple(np.diag(entry.basis)) for entry in found} == {(1, 1, 1), (1, -1, -1), (-1, 1, -1), (-1, -1, 1)}
    assert all(entry.misfit < 1e-12 for entry in found)
    # A cubic cell onto itself: the 24 turns of the cube.
    cubic = build_crystal([5, 5, 5, 90, 90, 90], "m-3m")
    assert len(list_candidates(cubic, build_tensor(cubic, Kind(), free={"11": 1.0}), cubic)) == 24


def test_cells_that_do_not_match_have_no_candidates() -> None:
    other = build_crystal([9, 9, 9, 90, 90, 90], "m-3m")
    assert list_candidates(MONOCLINIC, monoclinic_tensor(), other) == ()


def test_a_basis_that_does_not_fit_is_refused_with_those_that_do() -> None:
    with pytest.raises(InputError) as caught:
        convert_tensor(MONOCLINIC, monoclinic_tensor(), MONOCLINIC, np.diag([2.0, 1.0, 1.0]))
    error = caught.value
    # By hand: the first edge doubles, so its square changes by 4 − 1 times itself.
    assert error.detail["misfit"] == pytest.approx(3.0)
    assert error.detail["candidates"][0]["basis"] == np.eye(3).tolist()
    assert "300 %" in error.message


@pytest.mark.parametrize(("change", "taken"), [(0.0199, True), (0.0201, False), (-0.0199, True), (-0.0201, False)])
def test_the_limit_lies_at_two_per_cent(change: float, taken: bool) -> None:
    # By hand: the old square of the edge is (1 + change) times the new one, so the misfit is |change|.
    crystal = build_crystal([5 * np.sqrt(1 + change), 6, 7, 90, 90, 90], "mmm")
    new = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    tensor = build_tensor(crystal, Kind(), free={"11": 1.0, "22": 2.0, "33": 3.0})
    assert bool(list_candidates(crystal, tensor, new)) == taken
    if taken:
        assert convert_tensor(crystal, tensor, new, np.eye(3)).misfit == pytest.approx(abs(change))
    else:
        with pytest.raises(InputError, match="more than 2 %"):
            convert_tensor(crystal, tensor, new, np.eye(3))


def test_a_limiting_group_has_no_axes_to_change() -> None:
    limiting = build_crystal(None, "∞m")
    tensor = build_tensor(limiting, Kind(), free={"11": 1.0, "33": 2.0})
    for ask in (
        lambda: convert_tensor(limiting, tensor, MONOCLINIC, np.eye(3)),
        lambda: list_candidates(limiting, tensor, MONOCLINIC),
    ):
        with pytest.raises(InputError) as caught:
            ask()
        assert caught.value.field == "from"


REFUSED = {
    "left-handed": (np.diag([1.0, 1.0, -1.0]), MONOCLINIC, "basis"),
    "singular": (np.array([[1.0, 1, 0], [1, 1, 0], [0, 0, 1]]), MONOCLINIC, "basis"),
    "another cell": (np.diag([2.0, 1.0, 1.0]), MONOCLINIC, "basis"),
    "not finite": (np.diag([1.0, 1.0, np.nan]), MONOCLINIC, "basis"),
    "no cell to go to": (np.eye(3), build_crystal(None, "∞m"), "to"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_what_cannot_be_converted_is_refused(name: str) -> None:
    basis, target, field = REFUSED[name]
    with pytest.raises(InputError) as caught:
        convert_tensor(MONOCLINIC, monoclinic_tensor(), target, basis)
    assert caught.value.field is not None
    assert caught.value.field.startswith(field)


def test_a_tensor_that_the_new_group_would_change_is_said_to_be() -> None:
    # 2/m with a third angle of 90° may be claimed to be mmm; 13 would then have to vanish.
    old = build_crystal([5, 6, 7, 90, 90, 90], "2/m")
    tensor = build_tensor(old, Kind(), free=FREE)
    result = convert_tensor(old, tensor, build_crystal([5, 6, 7, 90, 90, 90], "mmm"), np.eye(3))
    size = np.linalg.norm(tensor.estimate.matrix)
    assert result.removed == pytest.approx(np.sqrt(2) * 1.85 / size)
    assert result.matrix == pytest.approx(tensor.estimate.matrix)
