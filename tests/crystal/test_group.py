"""Group symbols: every one of the interface, every setting of the tables, and whatever else is typed."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.group import LIMITING_SYMBOLS, find_group
from app.errors import InputError
from tests.crystal.reference import (
    HALL_NUMBERS,
    SETTING_NAMES,
    SETTINGS,
    Setting,
    as_set,
    close_group,
    read_setting,
)


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_every_symbol_means_what_its_generators_do(setting: Setting) -> None:
    # Orders and generators: International Tables A (2016), Table 3.2.3.2 (from memory), written by hand.
    group = find_group(setting.symbol, setting.unique_axis, rhombohedral_cell=setting.family == "rhombohedral")
    members = close_group(setting.matrices)
    assert group.order == len(members) == setting.order
    assert as_set(group.operations) == as_set(members)
    assert not group.limiting
    assert group.unique_axis == setting.unique_axis
    assert np.array_equal(group.operations[0], np.eye(3))


# spglib's numbers of settings of P with the point group's own operations; the setting was looked up by its symbol in
# International Tables A. The generators above are thereby checked apart from gemmi, whose tables the code reads.
SPGLIB_SYMBOLS = {
    "1": "P 1",
    "-1": "P -1",
    "211": "P 2 1 1",
    "121": "P 1 2 1",
    "112": "P 1 1 2",
    "m11": "P m 1 1",
    "1m1": "P 1 m 1",
    "11m": "P 1 1 m",
    "2/m11": "P 2/m 1 1",
    "12/m1": "P 1 2/m 1",
    "112/m": "P 1 1 2/m",
    "222": "P 2 2 2",
    "mm2": "P m m 2",
    "m2m": "P m 2 m",
    "2mm": "P 2 m m",
    "mmm": "P 2/m 2/m 2/m",
    "4": "P 4",
    "-4": "P -4",
    "4/m": "P 4/m",
    "422": "P 4 2 2",
    "4mm": "P 4 m m",
    "-42m": "P -4 2 m",
    "-4m2": "P -4 m 2",
    "4/mmm": "P 4/m 2/m 2/m",
    "3": "P 3",
    "-3": "P -3",
    "321": "P 3 2 1",
    "312": "P 3 1 2",
    "3m1": "P 3 m 1",
    "31m": "P 3 1 m",
    "-3m1": "P -3 2/m 1",
    "-31m": "P -3 1 2/m",
    "6": "P 6",
    "-6": "P -6",
    "6/m": "P 6/m",
    "622": "P 6 2 2",
    "6mm": "P 6 m m",
    "-6m2": "P -6 m 2",
    "-62m": "P -6 2 m",
    "6/mmm": "P 6/m 2/m 2/m",
    "23": "P 2 3",
    "m-3": "P 2/m -3",
    "432": "P 4 3 2",
    "-43m": "P -4 3 m",
    "m-3m": "P 4/m -3 2/m",
}


def test_hand_written_generators_agree_with_spglib() -> None:
    by_symbol: dict[str, frozenset[tuple[int, ...]]] = {}
    for number in HALL_NUMBERS:
        _, _, full, matrices = read_setting(number)
        by_symbol.setdefault(full, matrices)
    checked = 0
    for setting in SETTINGS:
        if setting.symbol in SPGLIB_SYMBOLS and setting.family != "rhombohedral" and setting.unique_axis is None:
            assert as_set(close_group(setting.matrices)) == by_symbol[SPGLIB_SYMBOLS[setting.symbol]], setting.name
            checked += 1
    assert checked == len(SPGLIB_SYMBOLS)
    for symbol, space_group in {"3": "R 3", "-3": "R -3", "32": "R 3 2", "3m": "R 3 m", "-3m": "R -3 2/m"}.items():
        (setting,) = (item for item in SETTINGS if item.symbol == symbol and item.family == "rhombohedral")
        assert as_set(close_group(setting.matrices)) == by_symbol[f"{space_group}:R"], symbol


def test_all_530_settings_of_spglib_give_its_operations() -> None:
    # Full symbols, as in International Tables A, Table 1.5.4.4: the code reads gemmi's tables, spglib has its own.
    wrong = []
    for number in HALL_NUMBERS:
        _, _, full, matrices = read_setting(number)
        if as_set(find_group(full).operations) != matrices:
            wrong.append(full)
    assert not wrong


def test_all_230_short_symbols_give_the_operations_of_the_standard_setting() -> None:
    # spglib's first setting of each number is the standard one: unique axis b, hexagonal axes for R.
    seen: set[int] = set()
    for number in HALL_NUMBERS:
        space_group, short, _, matrices = read_setting(number)
        if space_group in seen:
            continue
        seen.add(space_group)
        assert as_set(find_group(short).operations) == matrices, short
        spaced = f"{short[0]} {short[1:]}"
        assert as_set(find_group(spaced).operations) == matrices, spaced
    assert len(seen) == 230


@pytest.mark.parametrize(
    ("symbol", "same"),
    [
        # Spellings of the interface's own text.
        ("32", "321"),
        ("3m", "3m1"),
        ("-3m", "-3m1"),
        ("P 21/c", "P 1 21/c 1"),
        ("P21/c", "12/m1"),
        ("P 1 1 21/b", "112/m"),
        ("P -4 m 2", "-4m2"),
        ("R -3 c :R", "R -3 m:R"),
        ("R -3 c:r", "R -3 c :R"),
        ("R -3 c", "-3m1"),
        # Overbars, true minus signs, spaces.
        ("1̄", "-1"),
        ("4̄2m", "-42m"),
        ("−4 2 m", "-42m"),
        ("P 4̄ m 2", "-4m2"),
        (" m -3 m ", "m-3m"),
        ("P 21 / c", "P 21/c"),
        # Full symbols of International Tables A.
        ("P 21/n 21/m 21/a", "mmm"),
        ("F 4/m -3 2/m", "m-3m"),
        ("P 63/m 2/m 2/c", "6/mmm"),
        ("P -3 1 2/c", "-31m"),
        ("I 41/a m d:2", "4/mmm"),
        # The old way to write the cubic groups.
        ("F m 3 m", "m-3m"),
    ],
)
def test_spellings_of_one_group(symbol: str, same: str) -> None:
    assert as_set(find_group(symbol).operations) == as_set(find_group(same).operations)


@pytest.mark.parametrize("symbol", LIMITING_SYMBOLS)
def test_limiting_groups_in_both_spellings(symbol: str) -> None:
    group = find_group(symbol)
    assert group.limiting and group.order is None
    for word in ("inf", "infinity", "Inf"):
        written = find_group(symbol.replace("∞", word))
        assert written.symbol == symbol
        assert np.array_equal(written.operations, group.operations)


def test_limiting_groups_have_the_right_kinds_of_operation() -> None:
    # The seven groups differ by mirrors along and across the axis and by half-turns (Nye, ch. XV; from memory): of a
    # mirror across x3, a mirror that holds x3, a half-turn that reverses x3.
    expected = {
        "∞": (False, False, False),
        "∞m": (False, True, False),
        "∞2": (False, False, True),
        "∞/m": (True, False, False),
        "∞/mm": (True, True, True),
        "∞∞": (False, False, True),
        "∞∞m": (True, True, True),
    }
    for symbol, answers in expected.items():
        operations = find_group(symbol).operations
        assert np.allclose(operations @ np.swapaxes(operations, 1, 2), np.eye(3))
        determinants, traces = np.linalg.det(operations), np.trace(operations, axis1=1, axis2=2)
        mirrors = np.isclose(determinants, -1.0) & np.isclose(traces, 1.0)
        half_turns = np.isclose(determinants, 1.0) & np.isclose(traces, -1.0)
        last = operations[:, 2, 2]
        found = (mirrors & np.isclose(last, -1.0), mirrors & np.isclose(last, 1.0), half_turns & np.isclose(last, -1.0))
        assert tuple(bool(np.any(kind)) for kind in found) == answers, symbol


@pytest.mark.parametrize("symbol", ["2", "m", "2/m"])
def test_short_monoclinic_symbols_take_a_unique_axis(symbol: str) -> None:
    full = {"a": f"{symbol}11", "b": f"1{symbol}1", "c": f"11{symbol}"}
    for axis, longer in full.items():
        group = find_group(symbol, axis)
        assert group.unique_axis == axis
        assert as_set(group.operations) == as_set(find_group(longer).operations)
    assert as_set(find_group(symbol).operations) == as_set(find_group(symbol, "b").operations)


@pytest.mark.parametrize("symbol", ["1", "121", "112/m", "222", "mm2", "4", "-3m", "m-3m", "P 21/c", "P 1 2 1", "∞m"])
def test_a_unique_axis_anywhere_else_is_an_error(symbol: str) -> None:
    for axis in ("a", "b", "c"):
        with pytest.raises(InputError) as caught:
            find_group(symbol, axis)
        assert caught.value.field == "unique_axis"


def test_a_unique_axis_is_a_b_or_c() -> None:
    for axis in ("x", "", "B", "[0 1 0]"):
        with pytest.raises(InputError) as caught:
            find_group("2/m", axis)
        assert caught.value.field == "unique_axis"


@pytest.mark.parametrize(
    "symbol",
    [
        "",
        " ",
        "P",
        "R",
        "5",
        "-5m",
        "7/m",
        "2/mm",
        "mmmm",
        "m22",
        "XYZ",
        "P 5",
        "P 21/c/c",
        "P 1 1",
        "Q 2",
        "P\ud800",
        "P \x00m",
        "P /m",
        "∞∞2",
        "-∞",
        "2" * 61,
        # Unique axis c in a short symbol: the interface has it mean b, and there is no such group with b.
        "P 21/b",
        "B 2/b",
        # Half a symbol, which without its spaces would be a screw axis: P 32, P 42, P 63.
        "P 3 2",
        "P 4 2",
        "P 6 3",
    ],
)
def test_what_is_no_symbol_is_refused(symbol: str) -> None:
    with pytest.raises(InputError) as caught:
        find_group(symbol)
    assert caught.value.field == "group"
    assert caught.value.message


def test_a_short_symbol_of_unique_axis_c_is_told_how_to_write_it() -> None:
    with pytest.raises(InputError) as caught:
        find_group("P 21/b")
    assert "P 1 1 21/b" in (caught.value.hint or "")
    assert as_set(find_group("P 1 1 21/b").operations) == as_set(find_group("112/m").operations)


def test_trigonal_symbols_follow_the_cell_and_refuse_what_it_cannot_have() -> None:
    assert as_set(find_group("R -3 c", rhombohedral_cell=True).operations) == as_set(find_group("R -3 c:R").operations)
    for symbol in ("312", "31m", "-31m"):
        with pytest.raises(InputError) as caught:
            find_group(symbol, rhombohedral_cell=True)
        assert caught.value.field == "group"


@settings(max_examples=250, deadline=None)
@given(
    st.one_of(
        st.text(alphabet="PABCIFRH 12346mabcdn-/:̄∞finRH−_", max_size=14),
        st.text(max_size=8),
        st.lists(
            st.sampled_from(["P", "R", "-3", "m", "2", "/", "21/c", ":H", ":R", "4/m", "1", "inf"]), max_size=6
        ).map(" ".join),
    ),
    st.sampled_from([None, "a", "b", "c", "d"]),
    st.booleans(),
)
def test_no_text_does_anything_but_name_a_group_or_be_refused(
    symbol: str, axis: str | None, rhombohedral: bool
) -> None:
    try:
        group = find_group(symbol, axis, rhombohedral)
    except InputError:
        return
    # Closed under products, so it is a group at all.
    operations = group.operations
    products = (operations[:, None] @ operations[None]).reshape(-1, 9)
    assert len(np.unique(np.round(products, 6) + 0.0, axis=0)) == len(operations)
    if not group.limiting:
        assert group.order == len(operations)
        assert find_group(group.symbol, group.unique_axis, rhombohedral).order == group.order


@pytest.mark.parametrize("symbol", ["F 1 2/d 1", "P 1 2/d 1"])
def test_a_monoclinic_symbol_without_a_table_is_not_shortened_to_another_class(symbol: str) -> None:
    # F 1 d 1 is in the tables and of the class m; F 1 2/d 1 is of 2/m and in none.
    with pytest.raises(InputError, match="not a space-group symbol in the tables"):
        find_group(symbol)
