"""Which cell parameters a group holds: the null space of its constraints on the metric, by sympy's exact arithmetic."""

from __future__ import annotations

import re
from functools import lru_cache

import numpy as np
import numpy.typing as npt
import pytest
import sympy
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.cell_locks import explain_cell_locks, list_cell_locks
from app.crystal.crystal import Crystal, build_crystal
from tests.crystal.reference import CELLS, SETTING_NAMES, SETTINGS, Setting

FloatArray = npt.NDArray[np.float64]

SYMBOLS = ("a", "b", "c", "α", "β", "γ")
# Conditions on the cell of each family: International Tables for Crystallography A (2016), Table 2.1.2.1 (memory).
HELD: dict[str, tuple[str | None, ...]] = {
    "triclinic": (None, None, None, None, None, None),
    "monoclinic a": (None, None, None, None, "90°", "90°"),
    "monoclinic b": (None, None, None, "90°", None, "90°"),
    "monoclinic c": (None, None, None, "90°", "90°", None),
    "orthorhombic": (None, None, None, "90°", "90°", "90°"),
    "tetragonal": (None, "a", None, "90°", "90°", "90°"),
    "hexagonal": (None, "a", None, "90°", "90°", "120°"),
    "rhombohedral": (None, "a", "a", None, "α", "α"),
    "cubic": (None, "a", "a", "90°", "90°", "90°"),
}


def build(setting: Setting) -> Crystal:
    return build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)


@pytest.mark.parametrize("name", SETTING_NAMES)
def test_parameters_are_held_as_the_family_says(name: str) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    locks = list_cell_locks(build(setting))
    assert [lock.name for lock in locks] == ["a", "b", "c", "alpha", "beta", "gamma"]
    assert tuple(lock.symbol for lock in locks) == SYMBOLS
    assert tuple(lock.equals for lock in locks) == HELD[setting.family]
    for lock, value in zip(locks, setting.cell, strict=True):
        expected = "free" if lock.equals is None else ("fixed" if lock.equals.endswith("°") else "tied")
        assert lock.state == expected
        assert lock.value == pytest.approx(value, abs=1e-9)


# Exact ----------------------------------------------------------------------------------------------------------------


@lru_cache(maxsize=256)
def find_exact_holds(matrices: tuple[tuple[int, ...], ...]) -> tuple[str | None, ...]:
    """What metrics with Wᵀ G W = G for all of these W have in common, as the locks print it."""
    entries = sympy.symbols("g11 g12 g13 g22 g23 g33")
    g11, g12, g13, g22, g23, g33 = entries
    metric = sympy.Matrix([[g11, g12, g13], [g12, g22, g23], [g13, g23, g33]])
    equations: list[sympy.Expr] = []
    for numbers in matrices:
        turn = sympy.Matrix(3, 3, numbers)
        equations += list(turn.T * metric * turn - metric)
    solved = (
        metric.subs(sympy.solve([e for e in equations if e != 0], entries, dict=True)[0]) if any(equations) else metric
    )
    edges = [solved[k, k] for k in range(3)]
    held: list[str | None] = []
    for position in range(3):
        equal = [SYMBOLS[k] for k in range(position) if sympy.simplify(edges[k] - edges[position]) == 0]
        held.append(equal[0] if equal else None)
    # Of two angles the squared cosines and their signs; of one whether it is a number at all.
    pairs = [(1, 2), (0, 2), (0, 1)]
    cosines = [(solved[i, j], edges[i] * edges[j]) for i, j in pairs]
    for position, (product, square) in enumerate(cosines):
        ratio = sympy.simplify(product**2 / square)
        if ratio.is_number:
            sign = 0 if product == 0 else (1 if sympy.simplify(product / edges[pairs[position][0]]) > 0 else -1)
            angle = sympy.deg(sympy.acos(sign * sympy.sqrt(ratio)))
            held.append(f"{float(angle):.6g}°")
            continue
        equal = [
            SYMBOLS[3 + k]
            for k in range(position)
            if sympy.simplify(cosines[k][0] ** 2 / cosines[k][1] - ratio) == 0
            and sympy.simplify(cosines[k][0] / product).subs({entry: 1 + n for n, entry in enumerate(entries)}) > 0
        ]
        held.append(equal[0] if equal else None)
    return tuple(held)


def as_key(matrices: list[FloatArray] | FloatArray) -> tuple[tuple[int, ...], ...]:
    return tuple(tuple(int(value) for value in np.rint(matrix).ravel()) for matrix in matrices)


@pytest.mark.parametrize("name", SETTING_NAMES)
def test_the_generators_leave_just_that_room(name: str) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    found = tuple(lock.equals for lock in list_cell_locks(build(setting)))
    assert found == find_exact_holds(as_key(setting.matrices))


@pytest.mark.parametrize("name", SETTING_NAMES)
def test_the_sentence_names_an_operation_that_alone_holds_what_it_says(name: str) -> None:
    crystal = build(SETTINGS[SETTING_NAMES.index(name)])
    sentence = explain_cell_locks(crystal)
    held = {lock.symbol: lock.equals for lock in list_cell_locks(crystal) if lock.state != "free"}
    if not held:
        assert sentence == "The group leaves all six parameters free."
        return
    named: list[str] = []
    for clause in re.findall(r"The (.*?) holds? (.*?)\.(?= The |$)", sentence):
        cause, symbols = clause[0], re.split(r", | and ", clause[1])
        named += symbols
        if cause == "operations together":
            # Only where no single one does.
            for matrix in crystal.group.operations:
                alone = find_exact_holds(as_key([matrix]))
                assert all(alone[SYMBOLS.index(symbol)] != held[symbol] for symbol in symbols)
            continue
        number = crystal.operation_names.index(cause)
        alone = find_exact_holds(as_key([crystal.group.operations[number]]))
        for symbol in symbols:
            assert alone[SYMBOLS.index(symbol)] == held[symbol]
    assert sorted(named) == sorted(held)


def test_a_half_turn_is_named_before_a_mirror() -> None:
    crystal = build_crystal(CELLS["monoclinic b"], "2/m")
    assert explain_cell_locks(crystal) == "The half-turn about [0 1 0] holds α and γ."
    assert explain_cell_locks(build_crystal(CELLS["monoclinic b"], "m")) == "The mirror across [0 1 0] holds α and γ."


@pytest.mark.parametrize("symbol", ["∞", "∞/mm", "∞∞m"])
def test_without_a_cell_there_are_no_locks(symbol: str) -> None:
    crystal = build_crystal(None, symbol)
    assert list_cell_locks(crystal) == []
    assert explain_cell_locks(crystal) == ""


edges = st.floats(2.0, 30.0)
angles = st.floats(70.0, 110.0)


@settings(max_examples=50, deadline=None)
@given(st.sampled_from(SETTINGS), st.tuples(edges, edges, edges), st.tuples(angles, angles, angles))
def test_locks_are_of_the_group_whatever_the_numbers_of_the_cell(
    setting: Setting, lengths: tuple[float, float, float], corners: tuple[float, float, float]
) -> None:
    drawn = dict(zip(SYMBOLS, (*lengths, *corners), strict=True))
    # A cell of the family: free parameters as drawn, the others by the conditions.
    cell: dict[str, float] = {}
    for symbol, equals in zip(SYMBOLS, HELD[setting.family], strict=True):
        cell[symbol] = drawn[symbol] if equals is None else float(equals[:-1]) if equals[-1] == "°" else cell[equals]
    if setting.family == "rhombohedral" and abs(cell["α"] - 90.0) < 0.1:
        return
    crystal = build_crystal(list(cell.values()), setting.symbol, unique_axis=setting.unique_axis)
    locks = list_cell_locks(crystal)
    assert tuple(lock.equals for lock in locks) == HELD[setting.family]
    np.testing.assert_allclose([lock.value for lock in locks], list(cell.values()), rtol=1e-9)
