"""Reading a crystal from a CIF. All files are invented.

Which operations a symbol has is printed in International Tables for Crystallography A; the operation lists here are
written from memory of it, and those of all settings come from spglib's or gemmi's tables. The grammar of numbers,
missing values and text fields is that of the CIF 1.1 specification (from memory).
"""

from __future__ import annotations

import itertools
import time
from pathlib import Path

import gemmi
import numpy as np
import pytest
import spglib
from hypothesis import given, settings
from hypothesis import strategies as st

import app
from app.crystal.cif import read_cif, read_cif_file
from app.crystal.crystal import build_crystal
from app.crystal.group import find_group
from app.errors import InputError

MONOCLINIC_B = (9.83, 6.41, 7.27, 90, 107.4, 90)
MONOCLINIC_C = (9.83, 6.41, 7.27, 90, 90, 107.4)
HEXAGONAL = (5.0, 5.0, 17.0, 90, 90, 120)
RHOMBOHEDRAL = (6.4, 6.4, 6.4, 46.1, 46.1, 46.1)
CUBIC = (5.6, 5.6, 5.6, 90, 90, 90)
CELL_NAMES = ("length_a", "length_b", "length_c", "angle_alpha", "angle_beta", "angle_gamma")
B_OPERATIONS = ("x,y,z", "-x,y+1/2,-z+1/2", "-x,-y,-z", "x,-y+1/2,z+1/2")


def write_cif(cell, *lines, block="one", mark="_"):
    rows = [f"data_{block}", *(f"_cell{mark}{name} {value}" for name, value in zip(CELL_NAMES, cell, strict=True))]
    return "\n".join([*rows, *lines, ""])


def write_operations(operations, name="_space_group_symop_operation_xyz"):
    return "\n".join(["loop_", name, *(f"'{operation}'" for operation in operations)])


def point_operations(crystal):
    return {tuple(np.rint(matrix).astype(int).ravel()) for matrix in crystal.group.operations}


def expected_operations(symbol, unique_axis=None, rhombohedral=False):
    operations = find_group(symbol, unique_axis, rhombohedral).operations
    return {tuple(np.rint(matrix).astype(int).ravel()) for matrix in operations}


def refused(text, block=None):
    with pytest.raises(InputError) as caught:
        read_cif(text, block)
    assert caught.value.hint or "more than" in caught.value.message
    return caught.value


def has_note(found, *words):
    return any(all(word in note for word in words) for note in found.notes)


# --- what is read


def test_the_example_is_read_whole() -> None:
    path = Path(app.__file__).parent / "examples" / "invented_monoclinic.cif"
    found = read_cif_file(path)
    assert found.cell == list(MONOCLINIC_B)
    assert found.cell_sigma == pytest.approx([0.002, 0.001, 0.002, 0.0, 0.02, 0.0], abs=1e-15)
    assert (found.group, found.unique_axis, found.frame) == ("P 1 21/n 1", None, "x3=c x2=b*")
    assert (found.name, found.formula) == ("invented monoclinic crystal", "Ge3 La2 O10 Zn")
    assert (found.temperature, found.block, found.blocks) == (295.0, "invented_monoclinic", ["invented_monoclinic"])
    assert len(found.notes) == 1 and has_note(found, "x3=c x2=b*")
    assert "Invented" in path.read_text(encoding="utf-8").splitlines()[0]
    assert found.build().M is not None


@pytest.mark.parametrize(
    ("written", "value", "sigma"),
    [
        ("9.123(4)", 9.123, 0.004),
        ("9.12(15)", 9.12, 0.15),
        ("9(1)", 9.0, 1.0),
        ("9.(1)", 9.0, 1.0),
        ("+9.5", 9.5, 0.0),
        ("91.2e-1(3)", 9.12, 0.03),
        ("'9.1(2)'", 9.1, 0.2),
    ],
)
def test_uncertainties_count_in_the_last_digit(written, value, sigma) -> None:
    cell = (written, "6.41(1)", 7.27, 90, 107.4, 90)
    found = read_cif(write_cif(cell, "_space_group_name_H-M_alt 'P 1 2/m 1'"))
    assert found.cell[0] == pytest.approx(value, rel=1e-14)
    assert found.cell_sigma == pytest.approx([sigma, 0.01, 0, 0, 0, 0], rel=1e-12)


def test_no_uncertainty_at_all_is_null_and_told() -> None:
    found = read_cif(write_cif(MONOCLINIC_B, "_symmetry_space_group_name_H-M 'P 21/c'"))
    assert found.cell_sigma is None
    assert has_note(found, "no standard uncertainties")
    assert found.group == "P 1 21/c 1"


def test_uncertainties_under_names_of_their_own() -> None:
    text = write_cif(
        MONOCLINIC_B, "_cell.length_a_su 0.003", "_cell.angle_beta_esd 0.02", "_symmetry.Int_Tables_number 14", mark="."
    )
    assert read_cif(text).cell_sigma == pytest.approx([0.003, 0, 0, 0, 0.02, 0])


def test_what_is_missing_is_told() -> None:
    found = read_cif(
        write_cif(
            MONOCLINIC_B,
            "_space_group_name_H-M_alt 'P 1 21/c 1'",
            "_chemical_formula_sum ?",
            "_chemical_name_common .",
            "_diffrn_ambient_temperature ?",
        )
    )
    assert (found.name, found.formula, found.temperature) == ("one", None, None)
    assert has_note(found, "no temperature") and has_note(found, "no chemical formula") and has_note(found, "block's")


@pytest.mark.parametrize("mark", ["_", "."])
def test_names_with_dots_and_names_in_capitals(mark) -> None:
    lines = [
        f"_SPACE_GROUP{mark}name_h-m_ALT 'I 1 2/a 1'",
        f"_chemical{mark}name_mineral\n;\n invented\n stone\n;",
        f"_chemical_formula{mark}sum 'Ge O2'",
        f"_cell_measurement{mark}temperature 100.5(3)",
    ]
    found = read_cif(write_cif(MONOCLINIC_B, *lines, mark=mark))
    assert (found.group, found.name, found.formula, found.temperature) == (
        "I 1 2/a 1",
        "invented stone",
        "Ge O2",
        100.5,
    )


def test_two_temperatures_that_differ_are_told() -> None:
    lines = ["_space_group_IT_number 14", "_cell_measurement_temperature 150(2)", "_diffrn_ambient_temperature 293(1)"]
    found = read_cif(write_cif(MONOCLINIC_B, *lines))
    assert found.temperature == 293.0
    assert has_note(found, "293 K", "150 K")


@pytest.mark.parametrize("value", ["-5", "0", "'room temperature'", "nan"])
def test_what_is_no_temperature_is_left_out_and_told(value) -> None:
    found = read_cif(write_cif(MONOCLINIC_B, "_space_group_IT_number 14", f"_diffrn_ambient_temperature {value}"))
    assert found.temperature is None
    assert has_note(found, "no temperature in kelvin")


# --- blocks


def two_blocks() -> str:
    first = write_cif(MONOCLINIC_B, "_space_group_name_H-M_alt 'P 1 21/c 1'", block="one")
    second = write_cif(CUBIC, "_space_group_name_H-M_alt 'F m -3 m'", block="two")
    return "data_global\n_publ_contact_author_name 'A. Nobody'\n" + first + second


def test_the_first_of_several_blocks_is_taken_and_the_first_note_says_so() -> None:
    found = read_cif(two_blocks())
    assert (found.block, found.blocks, found.group) == ("one", ["one", "two"], "P 1 21/c 1")
    assert found.notes[0] == "The file has 2 blocks with a cell (one, two); the first, one, was taken."
    assert has_note(found, "global", "no complete cell")


@pytest.mark.parametrize("name", ["two", "TWO"])
def test_a_block_can_be_chosen(name) -> None:
    found = read_cif(two_blocks(), name)
    assert (found.block, found.group, found.cell[0]) == ("two", "F m -3 m", 5.6)
    assert not has_note(found, "was taken.") or not has_note(found, "blocks with a cell")


def test_an_unknown_block_is_refused_with_the_names() -> None:
    error = refused(two_blocks(), "three")
    assert error.field == "block"
    assert "one, two" in (error.hint or "")
    assert error.detail == {"blocks": ["one", "two"]}


def test_a_block_without_a_cell_is_refused_by_data_name() -> None:
    error = refused(two_blocks(), "global")
    assert error.field == "cell" and "_cell_length_a" in error.message and "one, two" in (error.hint or "")


def test_blocks_without_a_name() -> None:
    found = read_cif(two_blocks().replace("data_one", "data_"))
    assert found.blocks == ["", "two"] and found.name is None and found.block == ""


# --- the group in its setting

SETTINGS = [
    # symbol as written, cell, the symbol that comes back, a point-group symbol with the same operations
    ("P 1 1 21/b", MONOCLINIC_C, "P 1 1 21/b", ("2/m", "c", False)),
    ("B 2/b", MONOCLINIC_C, "B 1 1 2/b", ("2/m", "c", False)),
    ("P 21/c", MONOCLINIC_B, "P 1 21/c 1", ("2/m", "b", False)),
    ("P21/n", MONOCLINIC_B, "P 1 21/n 1", ("2/m", "b", False)),
    ("P 2(1)/c", MONOCLINIC_B, "P 1 21/c 1", ("2/m", "b", False)),
    ("P 2_1/c", MONOCLINIC_B, "P 1 21/c 1", ("2/m", "b", False)),
    ("P_1_21/c_1", MONOCLINIC_B, "P 1 21/c 1", ("2/m", "b", False)),
    ("I 2/a", MONOCLINIC_B, "I 1 2/a 1", ("2/m", "b", False)),
    ("R -3 c :R", RHOMBOHEDRAL, "R -3 c:R", ("-3m", None, True)),
    ("R -3 c R", RHOMBOHEDRAL, "R -3 c:R", ("-3m", None, True)),
    ("R -3 c", RHOMBOHEDRAL, "R -3 c:R", ("-3m", None, True)),
    ("R -3 c", HEXAGONAL, "R -3 c:H", ("-3m1", None, False)),
    ("R-3cH", HEXAGONAL, "R -3 c:H", ("-3m1", None, False)),
    ("P -3 1 c", HEXAGONAL, "P -3 1 c", ("-31m", None, False)),
    ("P -4 m 2", (5, 5, 7, 90, 90, 90), "P -4 m 2", ("-4m2", None, False)),
    ("P 42/m n m", (5, 5, 7, 90, 90, 90), "P 42/m n m", ("4/mmm", None, False)),
    ("P 42/m 21/n 2/m", (5, 5, 7, 90, 90, 90), "P 42/m n m", ("4/mmm", None, False)),
    ("P m c 21", (5, 6, 7, 90, 90, 90), "P m c 21", ("mm2", None, False)),
    ("P 21 a m", (5, 6, 7, 90, 90, 90), "P 21 a m", ("2mm", None, False)),
    ("Pnma", (5, 6, 7, 90, 90, 90), "P n m a", ("mmm", None, False)),
    ("P 21/n 21/m 21/a", (5, 6, 7, 90, 90, 90), "P n m a", ("mmm", None, False)),
    ("F 4/m -3 2/m", CUBIC, "F m -3 m", ("m-3m", None, False)),
    ("F d -3 m Z", CUBIC, "F d -3 m:2", ("m-3m", None, False)),
    ("F d -3 m S", CUBIC, "F d -3 m:1", ("m-3m", None, False)),
    ("P −1", (5, 6, 7, 80, 95, 103), "P -1", ("-1", None, False)),
]


@pytest.mark.parametrize(("written", "cell", "symbol", "point_group"), SETTINGS, ids=lambda value: str(value)[:20])
@pytest.mark.parametrize("name", ["_symmetry_space_group_name_H-M", "_space_group.name_H-M_alt"])
def test_symbols_in_many_spellings(written, cell, symbol, point_group, name) -> None:
    found = read_cif(write_cif(cell, f"{name} '{written}'"))
    assert (found.group, found.unique_axis) == (symbol, None)
    assert point_operations(found.build()) == expected_operations(*point_group)


@pytest.mark.parametrize(
    ("hall", "cell", "symbol"),
    [
        # Hall symbols and full symbols as printed in International Tables B (2001), table A1.4.2.7 (from memory).
        ("-P 2yn", MONOCLINIC_B, "P 1 21/n 1"),
        ("-P_2ybc", MONOCLINIC_B, "P 1 21/c 1"),
        ("-P 2bc", MONOCLINIC_C, "P 1 1 21/b"),
        ('-R 3 2"c', HEXAGONAL, "R -3 c:H"),
        ("-P 3* 2n", RHOMBOHEDRAL, "R -3 c:R"),
        ("P 2c -2ac", (5, 6, 7, 90, 90, 90), "P c a 21"),
    ],
)
@pytest.mark.parametrize("name", ["_symmetry_space_group_name_Hall", "_space_group.name_Hall"])
def test_hall_symbols(hall, cell, symbol, name) -> None:
    quote = "'" if '"' in hall else '"'
    assert read_cif(write_cif(cell, f"{name} {quote}{hall}{quote}")).group == symbol


def find_general_cell(rotations) -> list[float]:
    """A cell that the rotations leave unchanged and that has no more symmetry than it must: an averaged metric."""
    start = np.array([[1.0, 0.11, 0.07], [0.11, 1.3, 0.05], [0.07, 0.05, 1.7]]) * 36.0
    metric = np.mean([matrix.T @ start @ matrix for matrix in rotations], axis=0)
    edges = np.sqrt(np.diag(metric))
    cosines = (metric / np.outer(edges, edges))[[1, 0, 0], [2, 2, 1]]
    return [*edges.tolist(), *np.rad2deg(np.arccos(cosines)).tolist()]


def write_triplet(rotation, translation) -> str:
    parts = []
    for row, shift in zip(rotation, translation, strict=True):
        terms = "".join(
            f"{'+' if value > 0 else '-'}{letter}" for value, letter in zip(row, "xyz", strict=True) if value
        )
        parts.append(f"{terms}{round(shift * 24):+d}/24")
    return ",".join(parts)


@pytest.mark.parametrize("by", ["operations", "hall"])
def test_all_530_settings_keep_their_orientation(by) -> None:
    """spglib's data base of the 530 settings (S. R. Hall's list) is the outside reference."""
    known = 0
    for number in range(1, 531):
        data = spglib.get_symmetry_from_database(number)
        kind = spglib.get_spacegroup_type(number)
        cell = find_general_cell(data["rotations"])
        triplets = [write_triplet(*pair) for pair in zip(data["rotations"], data["translations"], strict=True)]
        quote = "'" if '"' in kind.hall_symbol else '"'
        hall = f"_space_group_name_Hall {quote}{kind.hall_symbol}{quote}"
        found = read_cif(write_cif(cell, write_operations(triplets) if by == "operations" else hall))
        expected = {tuple(matrix) for matrix in data["rotations"].reshape(-1, 9).tolist()}
        assert point_operations(found.build()) == expected, (number, kind.hall_symbol, found.group)
        entry = gemmi.find_spacegroup_by_name(found.group) if found.group[0].isalpha() else None
        known += entry is not None and entry.number == kind.number
    assert known == 530


def test_a_setting_that_no_table_has_goes_by_its_operations() -> None:
    # F 1 2/d 1: C 1 2/c 1 on axes that make the cell F-centred; the operations follow from the symbol.
    shifts = [(0, 0, 0), (0, 0.5, 0.5), (0.5, 0, 0.5), (0.5, 0.5, 0)]
    general = ["x,y,z", "-x+1/4,y,-z+1/4", "-x,-y,-z", "x+1/4,-y,z+1/4"]
    operations = []
    for triplet, shift in itertools.product(general, shifts):
        operations.append(",".join(f"{part}{value:+}" for part, value in zip(triplet.split(","), shift, strict=True)))
    text = write_cif(MONOCLINIC_B, "_symmetry_space_group_name_H-M 'F 1 2/d 1'", write_operations(operations))
    found = read_cif(text)
    assert (found.group, found.unique_axis) == ("2/m", "b")
    assert len(found.build().operations) == 4
    assert has_note(found, "F 1 2/d 1", "not in the tables") and has_note(found, "none of the tables", "2/m")
    with_number = read_cif(text + "_space_group_IT_number 15\n")
    assert not has_note(with_number, "contradicts")


def test_an_unusual_rhombohedral_setting_goes_by_its_operations() -> None:
    # Threefold axis along [1 1 1] with an inversion that is not at the origin: −3 on rhombohedral axes.
    cycle = ["x,y,z", "z,x,y", "y,z,x"]
    inverse = [",".join(f"-{letter}+1/3" for letter in triplet.split(",")) for triplet in cycle]
    found = read_cif(write_cif(RHOMBOHEDRAL, write_operations([*cycle, *inverse])))
    assert found.group == "-3" and len(found.build().operations) == 6


@pytest.mark.parametrize("name", ["_symmetry_equiv_pos_as_xyz", "_symmetry_equiv.pos_as_xyz"])
def test_operations_in_many_spellings(name) -> None:
    spelled = ["X,Y,Z", "-X, 1/2+Y, .5-Z", "-x,-y,-z", " +x , 1/2-y , 0.5+z"]
    found = read_cif(write_cif(MONOCLINIC_B, write_operations(spelled, name)))
    assert found.group == "P 1 21/c 1"


def test_a_single_operation_without_a_loop_is_the_group_1() -> None:
    found = read_cif(write_cif(MONOCLINIC_B, "_space_group_symop_operation_xyz x,y,z"))
    assert found.group == "P 1"


def test_only_a_number_takes_the_reference_setting_and_tells() -> None:
    found = read_cif(write_cif(MONOCLINIC_B, "_symmetry_Int_Tables_number 14"))
    assert found.group == "P 1 21/c 1"
    assert has_note(found, "number 14 alone", "assumed")


def test_a_number_whose_reference_setting_the_cell_rules_out() -> None:
    found = read_cif(write_cif(MONOCLINIC_C, "_space_group_IT_number 14"))
    assert (found.group, found.unique_axis) == ("2/m", "c")
    assert has_note(found, "number 14 alone", "2/m with unique axis c alone")
    trigonal = read_cif(write_cif(RHOMBOHEDRAL, "_space_group_IT_number 167"))
    assert trigonal.group == "R -3 c:R" and len(trigonal.build().operations) == 12


def test_a_number_on_a_cell_that_allows_more_than_one_orientation_says_so() -> None:
    found = read_cif(write_cif((5, 6, 7, 90, 90, 90), "_space_group_IT_number 26"))
    assert found.group == "P m c 21"
    assert has_note(found, "more than one orientation", "mm2", "m2m", "2mm")


def test_a_number_that_no_setting_fits_is_refused_at_the_cell() -> None:
    error = refused(write_cif(MONOCLINIC_B, "_space_group_IT_number 225"))
    assert error.field == "cell" and "number 225" in (error.hint or "") and "cell" in error.detail


@pytest.mark.parametrize("value", ["0", "231", "-1", "abc", "99999999999999999999"])
def test_a_number_that_is_none_is_refused_or_passed_over(value) -> None:
    assert refused(write_cif(MONOCLINIC_B, f"_space_group_IT_number {value}")).field == "group"
    found = read_cif(write_cif(MONOCLINIC_B, f"_space_group_IT_number {value}", "_space_group_name_Hall '-P 2yn'"))
    assert found.group == "P 1 21/n 1" and has_note(found, "no number of a space group")


def test_symbol_and_operations_that_disagree_are_both_named_and_the_operations_win() -> None:
    lines = ["_symmetry_space_group_name_H-M 'P 1 1 21/b'", write_operations(B_OPERATIONS)]
    found = read_cif(write_cif(MONOCLINIC_B, *lines))
    assert found.group == "P 1 21/c 1"
    assert has_note(found, "contradicts itself", "P 1 1 21/b", "unique axis b", "unique axis c")


def test_number_and_operations_that_disagree() -> None:
    found = read_cif(write_cif(MONOCLINIC_B, "_symmetry_Int_Tables_number 15", write_operations(B_OPERATIONS)))
    assert found.group == "P 1 21/c 1"
    assert has_note(found, "contradicts itself", "15", "C 1 2/c 1")


def test_another_space_group_of_the_same_point_group_is_told_mildly() -> None:
    lines = ["_symmetry_space_group_name_H-M 'P 2/m'", write_operations(B_OPERATIONS)]
    found = read_cif(write_cif(MONOCLINIC_B, *lines))
    assert has_note(found, "no tensor changes") and not has_note(found, "contradicts")


def test_two_lists_of_operations_that_disagree() -> None:
    second = write_operations(["x,y,z", "-x,-y,-z"], "_symmetry_equiv_pos_as_xyz")
    found = read_cif(write_cif(MONOCLINIC_B, write_operations(B_OPERATIONS), second))
    assert found.group == "P 1 21/c 1" and has_note(found, "contradicts itself", "_symmetry_equiv_pos_as_xyz", "-1")


def test_sources_that_agree_leave_no_note() -> None:
    lines = [
        "_space_group_IT_number 14",
        "_space_group_name_H-M_alt 'P 21/c'",
        "_space_group_name_Hall '-P 2ybc'",
        write_operations(B_OPERATIONS),
    ]
    found = read_cif(write_cif(MONOCLINIC_B, *lines))
    assert not any("contradict" in note or "By " in note for note in found.notes)


# --- what is refused


def test_no_group_is_refused_and_1_is_never_assumed() -> None:
    error = refused(write_cif(MONOCLINIC_B, "_space_group_name_H-M_alt ?"))
    assert error.field == "group" and "_space_group_name_H-M_alt" in error.message


def test_an_unknown_symbol_alone_is_refused_by_name() -> None:
    error = refused(write_cif(MONOCLINIC_B, "_space_group_name_H-M_alt 'Q 1 2 3'"))
    assert error.field == "group" and "Q 1 2 3" in error.message


@pytest.mark.parametrize("symbol", ["A 21/n", "C 21/c", "F 2/d", "I 21/a", "B 21/b"])
def test_a_monoclinic_symbol_outside_the_tables_is_not_read_as_its_glide_plane_alone(symbol) -> None:
    # 2/m and m differ in every axial tensor: A 21/n without its screw axis would be A n, of class m.
    error = refused(write_cif(MONOCLINIC_B, f"_symmetry_space_group_name_H-M '{symbol}'"))
    assert error.field == "group" and symbol in error.message
    lines = [f"_symmetry_space_group_name_H-M '{symbol}'", write_operations(B_OPERATIONS)]
    found = read_cif(write_cif(MONOCLINIC_B, *lines))
    assert found.group == "P 1 21/c 1" and has_note(found, symbol, "passed over")


@pytest.mark.parametrize("symbol", ["P 3 2", "P 3 1", "P 4 2", "P 6 2", "I 4 1"])
def test_digits_that_stand_apart_are_not_run_together_to_a_screw_axis(symbol) -> None:
    # P 3 2 may be the screw axis 3₂ (class 3) or a half-finished P 3 2 1 (class 32), and their tensors differ.
    error = refused(write_cif((5, 5, 7, 90, 90, 120), f"_symmetry_space_group_name_H-M '{symbol}'"))
    assert error.field == "group" and symbol in error.message


@pytest.mark.parametrize(("symbol", "cell"), [("R 3 2", HEXAGONAL), ("P 2 3", CUBIC), ("P32", HEXAGONAL)])
def test_digits_that_are_parts_of_the_symbol_are_read(symbol, cell) -> None:
    # Classes as in International Tables A: R 3 2 is 32, P 2 3 is 23, P 3₂ is 3.
    orders = {"R 3 2": 6, "P 2 3": 12, "P32": 3}
    found = read_cif(write_cif(cell, f"_symmetry_space_group_name_H-M '{symbol}'"))
    assert len(found.build().operations) == orders[symbol]


def test_a_magnetic_group_alone_is_refused_and_beside_another_is_told() -> None:
    magnetic = "_space_group_magn.number_BNS 14.75"
    assert refused(write_cif(MONOCLINIC_B, magnetic)).field == "group"
    assert has_note(read_cif(write_cif(MONOCLINIC_B, magnetic, "_space_group_IT_number 14")), "magnetic")


@pytest.mark.parametrize("name", CELL_NAMES)
def test_a_missing_parameter_is_named(name) -> None:
    text = write_cif(MONOCLINIC_B, "_space_group_IT_number 14")
    for mended in (
        "\n".join(line for line in text.splitlines() if name not in line),
        "\n".join(f"_cell_{name} ?" if name in line else line for line in text.splitlines()),
    ):
        error = refused(mended)
        assert error.field == "cell" and f"_cell_{name}" in error.message


def test_no_cell_at_all_is_refused() -> None:
    error = refused("data_one\n_space_group_IT_number 14\n")
    assert error.field == "cell" and "_cell_length_a" in error.message


def test_a_cell_that_does_not_fit_the_group_is_refused_with_the_nearest() -> None:
    error = refused(
        write_cif(MONOCLINIC_C, write_operations(B_OPERATIONS), "_symmetry_space_group_name_H-M 'P 1 1 21/b'")
    )
    assert error.field == "cell" and len(error.detail["cell"]) == 6
    assert "contradicts itself" in (error.hint or "")


def test_a_cell_within_its_uncertainties_is_taken_and_told() -> None:
    found = read_cif(write_cif(("5.002(2)", "5.000(2)", "7.1", 90, 90, 90), "_space_group_name_H-M_alt 'P 4/m'"))
    assert found.cell[:2] == [5.002, 5.0] and has_note(found, "obeys its group only")


@pytest.mark.parametrize(
    "value",
    ["nan", "inf", "1e999", "9.1.2", "9,1", "9.1(", "9.1(x)", "abc", "0", "-3", "1" * 5000, f"9.1({'9' * 400})"],
)
def test_a_cell_that_is_no_number_is_refused(value) -> None:
    error = refused(write_cif((value, 6.41, 7.27, 90, 107.4, 90), "_space_group_IT_number 14"))
    assert (error.field or "").startswith("cell")


def test_a_looped_cell_with_two_values_is_refused() -> None:
    text = (
        "data_one\nloop_\n" + "\n".join(f"_cell_{name}" for name in CELL_NAMES) + "\n5 6 7 90 90 90\n5 6 8 90 90 90\n"
    )
    error = refused(text + "_space_group_IT_number 16\n")
    assert error.field == "cell[2]" and "2 values" in error.message


@pytest.mark.parametrize(
    "operations",
    [
        ["x,y,z", "x,y"],
        ["x,y,z", "h,k,l"],
        ["x,y,z", "x,y,q"],
        ["x,y,z", "x,y,z+1/0"],
        ["x,y,z", "x/2,y,z"],
        ["x,y,z", "x,x,z"],
        ["x,y,z", "2*x,y,z"],
        ["x,y,z", "0,0,0"],
        ["x,y,z", "-x,y,-z", "x,-y,-z"],
        ["-x,-y,-z"],
        ["x,y,z", "x" * 5000],
    ],
)
def test_operations_that_make_no_group_are_refused(operations) -> None:
    error = refused(write_cif((5, 6, 7, 90, 90, 90), write_operations(operations), "_space_group_IT_number 16"))
    assert error.field == "group"


def test_a_group_along_axes_that_no_symbol_states_is_refused() -> None:
    # A lone half-turn about [1 1 0]: a monoclinic crystal on the axes of a rhombic prism.
    error = refused(write_cif((5, 5, 7, 90, 90, 101), write_operations(["x,y,z", "y,x,-z"])))
    assert error.field == "group" and "by hand" in (error.hint or "")


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ("data_one\n_cell_length_a 'abc", 2),
        ("data_one\n_cell_length_a\n_cell_length_b 3\n", 2),
        ("data_one\n_x\n;no end\n", 4),
        ("data_one\n_x 1\n_x 2\n", 3),
        ("data_one\nloop_\n_x\n_y\n1 2 3\n", 2),
        ("data_one\n_x 1 2\n", 2),
        ("Dear editor,\nplease find our file below.\n", 1),
        ('{"cell": [5, 6, 7, 90, 90, 90]}', 1),
        ("data_one\nsave_two\n_x 1\n", None),
        ("data_one\n_x 1\ndata_one\n_x 2\n", None),
        ("# only a comment\n", None),
        ("", None),
    ],
)
def test_what_is_no_cif_is_refused_with_its_line(text, line) -> None:
    error = refused(text)
    assert error.field == "text"
    if line is not None:
        assert f"line {line}" in error.message and error.detail == {"line": line}


def test_every_truncation_is_read_or_refused() -> None:
    path = Path(app.__file__).parent / "examples" / "invented_monoclinic.cif"
    content = path.read_bytes()
    for length in range(0, len(content), 7):
        try:
            read_cif(content[:length])
        except InputError as error:
            check_refusal(error)


def test_bytes_that_are_not_utf8_are_read_as_latin_1_and_told() -> None:
    text = write_cif(MONOCLINIC_B, "_space_group_IT_number 14", "_chemical_name_common 'stone of Ö'")
    found = read_cif(text.encode("latin-1"))
    assert found.name == "stone of Ö" and has_note(found, "Latin-1")
    assert not has_note(read_cif(b"\xef\xbb\xbf" + text.encode()), "Latin-1")
    assert read_cif("\ufeff" + text).name == "stone of Ö"


@pytest.mark.parametrize("encoding", ["utf-16", "utf-16-le", "utf-32"])
def test_other_encodings_are_refused(encoding) -> None:
    error = refused(write_cif(MONOCLINIC_B).encode(encoding))
    assert error.field == "text" and "UTF-8" in (error.hint or "")


def test_a_lone_surrogate_is_refused() -> None:
    with pytest.raises(InputError, match=r"Line 2 .* surrogate"):
        read_cif("data_one\n_x '\ud800'\n")


def test_size_and_number_of_blocks_are_bounded() -> None:
    assert "8 MiB" in refused("#" * (8 * 2**20 + 1)).message
    started = time.perf_counter()
    assert "blocks" in refused("".join(f"data_{n}\n_x 1\n" for n in range(300_000))).message
    many = "".join(write_cif(CUBIC, "_space_group_name_H-M_alt 'F m -3 m'", block=str(n)) for n in range(4000))
    found = read_cif(many)
    assert len(found.blocks) == 4000 and "and 3992 more" in found.notes[0] and len(found.notes[0]) < 300
    assert time.perf_counter() - started < 10.0


def test_a_long_list_of_operations_is_refused() -> None:
    error = refused(write_cif(CUBIC, write_operations(["x,y,z"] * 2000)))
    assert error.field == "group"


@pytest.mark.parametrize("name", ["no such file.cif", "nul\0name.cif", "."])
def test_a_path_that_cannot_be_read_is_refused(tmp_path, name) -> None:
    with pytest.raises(InputError) as caught:
        read_cif_file(f"{tmp_path}/{name}")
    assert caught.value.field == "path"


@settings(max_examples=150, deadline=None)
@given(
    st.lists(
        st.sampled_from(
            [
                "data_x", "_cell_length_a 5", "_cell_length_b 5(1)", "_cell_length_c 5", "_cell_angle_alpha 90",
                "_cell_angle_beta 90", "_cell_angle_gamma 90", "loop_", "_space_group_symop_operation_xyz", "x,y,z",
                "'-x,-y,z'", "_space_group_name_Hall", "'-P 2yc (x,y,z)'", "'P 4 3'", "_space_group_IT_number", "75",
                "_symmetry_space_group_name_H-M", "'P 4/m'", "?", ";", "save_", "global_", "stop_", "'", "\u00e9",
            ]
        ),
        max_size=25,
    )
)  # fmt: skip
def test_any_jumble_is_read_or_refused(tokens) -> None:
    cell = "\n".join(["data_first", *(f"_cell_{name} {value}" for name, value in zip(CELL_NAMES, CUBIC, strict=True))])
    for text in ("\n".join(tokens), "\n".join([cell, *tokens])):
        try:
            found = read_cif(text)
        except InputError as error:
            check_refusal(error)
        else:
            assert build_crystal(found.cell, found.group, unique_axis=found.unique_axis).M is not None


def check_refusal(error: InputError) -> None:
    """A refusal says what and where."""
    assert error.message
    assert error.field


@settings(max_examples=200, deadline=None)
@given(st.text(alphabet='PABCIFR-1234567 abcnmduvwxyz"*(),/+:._^', max_size=20))
def test_any_symbol_is_read_or_refused(symbol) -> None:
    for name in ("_space_group_name_Hall", "_space_group_name_H-M_alt"):
        try:
            read_cif(write_cif(CUBIC, f"{name}\n;{symbol}\n;"))
        except InputError as error:
            check_refusal(error)
