"""The CIF that is written, read back by gemmi alone and by the project's reader."""

from __future__ import annotations

from typing import Any

import gemmi
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.cif import read_cif
from app.crystal.cif_writing import find_space_group, print_with_su, to_ascii, write_cif
from app.crystal.crystal import build_crystal
from app.crystal.group import LIMITING_SYMBOLS, POINT_GROUP_SYMBOLS, find_group
from app.errors import InputError
from tests.crystal.reference import CELLS

MONOCLINIC = [9.83, 6.41, 7.27, 90, 107.4, 90]
RHOMBOHEDRAL = [5.2, 5.2, 5.2, 74.0, 74.0, 74.0]
CASES = {
    "1": CELLS["triclinic"],
    "2/m": MONOCLINIC,
    "P 1 21/c 1": MONOCLINIC,
    "112/m": [6.41, 7.27, 9.83, 90, 90, 107.4],
    "mm2": [5.1, 6.2, 7.3, 90, 90, 90],
    "P n a 21": [5.1, 6.2, 7.3, 90, 90, 90],
    "-42m": [5.1, 5.1, 7.3, 90, 90, 90],
    "I 41/a:2": [5.1, 5.1, 7.3, 90, 90, 90],
    "31m": [5.1, 5.1, 7.3, 90, 90, 120],
    "3m": RHOMBOHEDRAL,
    "R -3 c:R": RHOMBOHEDRAL,
    "R -3 c:H": [5.1, 5.1, 7.3, 90, 90, 120],
    "6/mmm": [5.1, 5.1, 7.3, 90, 90, 120],
    "m-3m": [5.6, 5.6, 5.6, 90, 90, 90],
}


def find_rotations(operations: Any) -> set[tuple[int, ...]]:
    return {tuple(int(part) // operation.DEN for row in operation.rot for part in row) for operation in operations}


@pytest.mark.parametrize("group", CASES)
def test_gemmi_reads_the_same_cell_and_a_group_with_the_same_operations(group: str) -> None:
    crystal = build_crystal(CASES[group], group)
    block = gemmi.cif.read_string(write_cif(crystal, name="Sample")).sole_block()
    structure = gemmi.make_small_structure_from_block(block)
    assert structure.cell.parameters == pytest.approx(CASES[group], abs=1e-12)
    triplets = [gemmi.cif.as_string(value) for value in block.find_values("_space_group_symop_operation_xyz")]
    listed = [gemmi.Op(text) for text in triplets]
    expected = {tuple(np.rint(matrix).astype(int).ravel().tolist()) for matrix in crystal.group.operations}
    assert find_rotations(listed) == expected
    # Symbol, number and Hall symbol say the same as the list, by gemmi's tables.
    symbol = gemmi.cif.as_string(block.find_value("_space_group_name_H-M_alt"))
    entry = gemmi.find_spacegroup_by_name(symbol)
    assert entry.number == int(block.find_value("_space_group_IT_number"))
    assert entry.hall == gemmi.cif.as_string(block.find_value("_space_group_name_Hall"))
    assert find_rotations(entry.operations()) == expected
    assert gemmi.find_spacegroup_by_ops(gemmi.GroupOps(listed)).number == entry.number


@pytest.mark.parametrize("group", CASES)
def test_the_reader_takes_back_the_crystal(group: str) -> None:
    crystal = build_crystal(CASES[group], group, cell_sigma=None)
    back = read_cif(write_cif(crystal)).build()
    assert crystal.cell is not None
    assert back.cell is not None
    assert back.cell.parameters == pytest.approx(crystal.cell.parameters, abs=1e-12)
    assert sorted(map(str, back.group.operations.tolist())) == sorted(map(str, crystal.group.operations.tolist()))
    np.testing.assert_allclose(back.M, crystal.M, atol=1e-9)


@pytest.mark.parametrize("symbol", POINT_GROUP_SYMBOLS)
def test_every_point_group_has_a_space_group_that_states_it_and_no_more(symbol: str) -> None:
    for axis in ("a", "b", "c") if symbol in ("2", "m", "2/m") else (None,):
        group = find_group(symbol, axis)
        entry, known = find_space_group(group)
        assert not known
        assert entry.is_symmorphic()
        assert len(list(entry.operations().sym_ops)) == group.order


def test_what_stands_in_is_called_so_and_what_is_known_is_not() -> None:
    assumed = write_cif(build_crystal(CASES["2/m"], "2/m", unique_axis="b"))
    assert "# Only the point group 2/m with unique axis b is known." in assumed
    assert "Only the point group" not in write_cif(build_crystal(CASES["P 1 21/c 1"], "P 1 21/c 1"))


def test_uncertainties_come_back() -> None:
    sigma = [0.02, 0.013, 0.004, 0.0, 0.1, 0.0]
    crystal = build_crystal(CASES["2/m"], "2/m", cell_sigma=sigma)
    text = write_cif(crystal)
    # Printed by hand, as usual: 9.83(2), 6.410(13), 7.270(4), 107.4(1).
    for printed in ("9.83(2)", "6.410(13)", "7.270(4)", "107.4(1)"):
        assert printed in text
    assert read_cif(text).cell_sigma == pytest.approx(sigma, rel=1e-12)


@pytest.mark.parametrize("symbol", LIMITING_SYMBOLS)
def test_a_limiting_group_is_refused_with_the_reason(symbol: str) -> None:
    with pytest.raises(InputError, match="has no cell") as caught:
        write_cif(build_crystal(None, symbol))
    assert caught.value.field == "group"


def test_the_file_is_ascii_with_the_frame_in_a_comment_and_hostile_text_stays_there() -> None:
    crystal = build_crystal(CASES["2/m"], "2/m")
    hostile = "Näme\r\n_cell_length_a 1.0\n;\ndata_other 'x' " + "long " * 500
    text = write_cif(crystal, name=hostile, remarks=[hostile])
    text.encode("ascii")
    assert max(map(len, text.splitlines())) <= 2048
    comment = next(line for line in text.splitlines() if "Crystal frame" in line)
    assert comment == "# Crystal frame of the tensors: x3 along c, x2 along b*, x1 = x2 x x3."
    document = gemmi.cif.read_string(text)
    assert len(document) == 1
    assert float(gemmi.cif.as_number(document[0].find_value("_cell_length_a"))) == 9.83


def test_a_temperature_is_written_where_there_is_one() -> None:
    crystal = build_crystal(CASES["1"], "1")
    assert read_cif(write_cif(crystal, temperature=295.5)).temperature == 295.5
    assert read_cif(write_cif(crystal)).temperature is None


@settings(max_examples=200, deadline=None)
@given(
    st.decimals(min_value="0.001", max_value="999", places=4),
    st.one_of(st.just(0), st.decimals(min_value="0.0001", max_value="5", places=4)),
)
def test_no_typed_digit_is_lost(value: Any, spread: Any) -> None:
    printed = print_with_su(float(value), float(spread))
    # gemmi's own reader of numbers with uncertainties.
    assert gemmi.cif.as_number(printed) == float(value)
    if spread:
        digits = printed.partition(".")[2].partition("(")[0]
        units = int(printed.partition("(")[2].rstrip(")"))
        kept = units / 10 ** len(digits)
        # Two digits of an uncertainty that count.
        assert kept == pytest.approx(float(spread), rel=0.05, abs=1e-12)


def test_signs_of_the_trade_are_spelled() -> None:
    assert to_ascii("x1 = x2 × x3, −5 °, Ångström\x00\n∞") == "x1 = x2 x x3, -5 deg, Angstrom ?"
