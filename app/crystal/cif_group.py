"""Which group a block of a CIF states, in the setting of the file.

What decides, in this order: the list of operations, the Hall symbol, the Hermann-Mauguin symbol, the number. Whatever
else the block says is compared with it, and a contradiction is told. The group is never guessed. Symbols and
operations: gemmi's tables, after International Tables for Crystallography A and B.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import gemmi
import numpy as np
import numpy.typing as npt

from app.crystal.cif_text import find_values, shorten
from app.crystal.crystal import build_crystal
from app.crystal.group import POINT_GROUP_SYMBOLS, SHORT_MONOCLINIC, collect_operations, find_group, shorten_symbol
from app.errors import InputError

OperationSet = frozenset[tuple[int, ...]]

OPERATION_LIMIT: Final = 1000
OPERATION_NAMES: Final = (
    ("_space_group_symop_operation_xyz", "_space_group_symop.operation_xyz"),
    ("_symmetry_equiv_pos_as_xyz", "_symmetry_equiv.pos_as_xyz"),
)
HALL_NAMES: Final = (
    ("_space_group_name_Hall", "_space_group.name_Hall"),
    ("_symmetry_space_group_name_Hall", "_symmetry.space_group_name_Hall"),
)
SYMBOL_NAMES: Final = (
    ("_space_group_name_H-M_alt", "_space_group.name_H-M_alt"),
    ("_symmetry_space_group_name_H-M", "_symmetry.space_group_name_H-M"),
    ("_space_group_name_H-M_full", "_space_group.name_H-M_full"),
)
NUMBER_NAMES: Final = (
    "_space_group_IT_number",
    "_space_group.IT_number",
    "_symmetry_Int_Tables_number",
    "_symmetry.Int_Tables_number",
)
MAGNETIC_NAMES: Final = (
    "_space_group_magn.number_BNS",
    "_space_group_magn_number_BNS",
    "_space_group_magn.name_BNS",
    "_space_group_magn_name_BNS",
    "_space_group_symop_magn_operation.xyz",
    "_space_group_symop_magn_operation_xyz",
)

_TRIPLET: Final = re.compile(r"[xyzXYZ0-9+\-*/., ]{1,100}")
_BY_HAND: Final = "Give the cell and the group by hand, for example group 2/m with unique axis b."


@dataclass(frozen=True)
class _Source:
    """One thing in the file that says the group: what it is called in a note, its operations, its table entry."""

    label: str
    matrices: OperationSet
    entry: gemmi.SpaceGroup | None


def read_group(
    block: gemmi.cif.Block, cell: list[float], sigma: list[float] | None, notes: list[str]
) -> tuple[str, str | None]:
    """The symbol and, with a short monoclinic point-group symbol, the unique axis; what was assumed goes to ``notes``.

    Args:
        block: the block of the CIF.
        cell: six parameters, angstrom and degrees, which decide between :R and :H and settings of a number alone.
        sigma: their standard uncertainties or None.
        notes: sentences are appended here.

    Raises:
        InputError: field "group" where none is given or none of the symbols states it, "cell" where it does not fit.
    """
    sources, unread = _gather_sources(block, cell)
    number = _read_space_group_number(block, unread)
    if find_values(block, MAGNETIC_NAMES):
        notes.append("The file gives a magnetic group, which is not read: all forms assume a non-magnetic crystal.")
    if not sources and number is None:
        absent = ", ".join((OPERATION_NAMES[0][0], HALL_NAMES[0][0], SYMBOL_NAMES[0][0], NUMBER_NAMES[0]))
        raise InputError(
            " ".join(unread) or f"The file gives no group: {absent} are all missing.",
            field="group",
            hint=f"Add one of them to the file. {_BY_HAND} No group is assumed.",
        )
    notes.extend(unread)
    if not sources:
        assert number is not None
        return _choose_orientation(number, cell, sigma, notes)
    taken = sources[0]
    said = _compare_sources(sources, number)
    notes.extend(said)
    group, unique_axis = _name_source(taken, notes)
    try:
        crystal = build_crystal(cell, group, unique_axis=unique_axis, cell_sigma=sigma)
    except InputError as error:
        error.hint = " ".join([*filter(None, [error.hint]), f"The group was read from {taken.label}.", *said])
        raise
    if _collect(crystal.group.operations) != taken.matrices:
        raise _refuse_orientation(taken)
    return group, unique_axis


def _gather_sources(block: gemmi.cif.Block, cell: list[float]) -> tuple[list[_Source], list[str]]:
    """All that says the group, the most decisive first, and sentences on what could not be read."""
    sources: list[_Source] = []
    unread: list[str] = []
    for names in OPERATION_NAMES:
        if triplets := find_values(block, names):
            label = f"the operations ({names[0]})" if sources else "the operations"
            sources.append(_read_operations(triplets, label))
    for names in HALL_NAMES:
        for text in find_values(block, names)[:1]:
            try:
                operations = gemmi.symops_from_hall(text)
            except (RuntimeError, ValueError, IndexError, OverflowError):
                unread.append(f"The Hall symbol “{shorten(text)}” cannot be read and was passed over.")
                continue
            matrices = _check_group([operation.rot for operation in operations.sym_ops])
            if matrices is None:
                unread.append(f"The Hall symbol “{shorten(text)}” makes no group on these axes and was passed over.")
                continue
            found = gemmi.find_spacegroup_by_ops(operations)
            sources.append(_Source(f"the Hall symbol “{shorten(text)}”", matrices, found))
    for text in dict.fromkeys(text for names in SYMBOL_NAMES for text in find_values(block, names)[:1]):
        entry = _find_entry(text, cell)
        if entry is None:
            unread.append(f"The symbol “{shorten(text)}” is not in the tables of space groups and was passed over.")
            continue
        matrices = _collect(collect_operations(entry.operations()))
        sources.append(_Source(f"the symbol “{shorten(text)}”", matrices, entry))
    return sources, unread


def _read_operations(triplets: list[str], label: str) -> _Source:
    if len(triplets) > OPERATION_LIMIT:
        raise InputError(f"The file lists more than {OPERATION_LIMIT} operations.", field="group", hint=_BY_HAND)
    operations = []
    for position, triplet in enumerate(triplets):
        try:
            if not _TRIPLET.fullmatch(triplet):
                raise ValueError
            operations.append(gemmi.parse_triplet(triplet).wrap())
        except (RuntimeError, ValueError, IndexError, OverflowError):
            raise InputError(
                f"The operation “{shorten(triplet)}”, number {position + 1} of the list, cannot be read.",
                field="group",
                hint="An operation is written like -x,y+1/2,-z+1/2; correct it or take the list out of the file.",
            ) from None
    matrices = _check_group([operation.rot for operation in operations])
    if matrices is None:
        raise InputError(
            "The operations in the file make no group: two of them one after the other are not in the list, or one "
            "is none of a lattice.",
            field="group",
            hint=f"Correct or complete the list, or take it out of the file. {_BY_HAND}",
        )
    try:
        entry = gemmi.find_spacegroup_by_ops(gemmi.GroupOps(operations))
    except (RuntimeError, ValueError, IndexError):
        entry = None
    return _Source(label, matrices, entry)


def _check_group(rotations: Sequence[Sequence[Sequence[int]]]) -> OperationSet | None:
    """The distinct matrices of gemmi's operations, None unless they are integer and close under multiplication."""
    scaled = np.array(rotations, dtype=np.int64)
    if np.any(scaled % gemmi.Op.DEN):
        return None
    unique = np.unique(scaled // gemmi.Op.DEN, axis=0)
    if len(unique) > 48:
        return None
    matrices = _collect(unique)
    products = _collect(np.einsum("mij,njk->mnik", unique, unique))
    # A finite closed set of matrices that can be inverted is a group; the identity is then among them.
    return matrices if products == matrices and np.all(np.abs(np.linalg.det(unique)) > 0.5) else None


def _collect(matrices: npt.NDArray[np.float64] | npt.NDArray[np.int64]) -> OperationSet:
    return frozenset(tuple(row) for row in np.rint(matrices).astype(np.int64).reshape(-1, 9).tolist())


def _find_entry(text: str, cell: list[float]) -> gemmi.SpaceGroup | None:
    """The table entry of a Hermann-Mauguin symbol in one of the spellings that files have."""
    # P 2(1)/c, P 2_1/c, P_21/c; Z and S after a symbol mean the origin at a centre (2) and at high site symmetry (1).
    plain = re.sub(r"\(([1-5])\)|(?<=\d)_(?=\d)", r"\1", text.replace("−", "-"))
    plain = " ".join(plain.replace("_", " ").split())
    plain = re.sub(r"\s*:?\s*Z$", ":2", re.sub(r"\s+:?\s*S$", ":1", plain))
    if not 2 <= len(plain) <= 60 or not plain[0].isalpha():
        return None
    letter, *words = plain.split()
    entry = _look_up(plain, cell)
    if entry is None:
        entry = _look_up(" ".join([letter, *shorten_symbol(words)]), cell)
        # Shortened, A 21/n would be A n: another class. Only symbols with more than one kind of axis have a short form.
        return None if entry is not None and entry.crystal_system_str() == "monoclinic" else entry
    # The tables run P 3 2 together to P 32, a screw axis; whoever parts the two may mean half-turns across the axis.
    parted = len(words) == 2 and all(word.isdigit() for word in words)
    return None if parted and entry.hm.split()[1:] != words else entry


def _look_up(symbol: str, cell: list[float]) -> gemmi.SpaceGroup | None:
    """The table entry of one spelling; where axes are not stated, alpha and gamma choose them."""
    return gemmi.find_spacegroup_by_name(symbol, cell[3], cell[5])


def _read_space_group_number(block: gemmi.cif.Block, unread: list[str]) -> int | None:
    values = find_values(block, NUMBER_NAMES)
    if not values:
        return None
    if re.fullmatch(r"[0-9]{1,3}", values[0]) and 1 <= int(values[0]) <= 230:
        return int(values[0])
    unread.append(f"“{shorten(values[0])}” is no number of a space group (1 to 230) and was passed over.")
    return None


@lru_cache(maxsize=1)
def _tabulate_point_groups() -> dict[OperationSet, tuple[str, str | None, str]]:
    """Operations → (symbol, unique axis, both in words) for every orientation that a symbol can state."""
    table: dict[OperationSet, tuple[str, str | None, str]] = {}
    for symbol in POINT_GROUP_SYMBOLS:
        for axis in ("a", "b", "c") if symbol in SHORT_MONOCLINIC else (None,):
            for rhombohedral in (False, True):
                try:
                    matrices = _collect(find_group(symbol, axis, rhombohedral).operations)
                except InputError:
                    continue
                words = f"{symbol} with unique axis {axis}" if axis else symbol
                table.setdefault(matrices, (symbol, axis, f"{words} on rhombohedral axes" if rhombohedral else words))
    return table


def _describe(matrices: OperationSet) -> str:
    found = _tabulate_point_groups().get(matrices)
    return found[2] if found else f"one of {len(matrices)} operations on axes that no symbol states"


def _compare_sources(sources: list[_Source], number: int | None) -> list[str]:
    taken = sources[0]
    said = []
    for other in sources[1:]:
        if other.matrices != taken.matrices:
            said.append(
                f"By {taken.label} the point group is {_describe(taken.matrices)}, by {other.label} it is "
                f"{_describe(other.matrices)}: the file contradicts itself, and the first was taken."
            )
        elif taken.entry and other.entry and taken.entry.number != other.entry.number:
            said.append(
                f"By {taken.label} the space group is {taken.entry.xhm()}, by {other.label} it is "
                f"{other.entry.xhm()}; the point group is the same, so no tensor changes."
            )
    if number is not None:
        reference = gemmi.get_spacegroup_reference_setting(number)
        expected = _collect(collect_operations(reference.operations()))
        agrees = taken.entry.number == number if taken.entry else _count_types(taken.matrices) == _count_types(expected)
        if not agrees:
            group = taken.entry.xhm() if taken.entry else _describe(taken.matrices)
            said.append(
                f"By {taken.label} the group is {group}, but the number given is {number}, which is "
                f"{reference.xhm()}: the file contradicts itself, and the first was taken."
            )
    return said


def _count_types(matrices: OperationSet) -> list[tuple[int, int]]:
    """Determinant and trace of every operation, sorted: the same for a point group in all its orientations."""
    arrays = np.array(sorted(matrices)).reshape(-1, 3, 3)
    signs = np.rint(np.linalg.det(arrays)).astype(int).tolist()
    return sorted(zip(signs, np.trace(arrays, axis1=1, axis2=2).tolist(), strict=True))


def _name_source(taken: _Source, notes: list[str]) -> tuple[str, str | None]:
    if taken.entry is not None:
        return taken.entry.xhm(), None
    found = _tabulate_point_groups().get(taken.matrices)
    if found is None:
        raise _refuse_orientation(taken)
    notes.append(f"By {taken.label} the setting is none of the tables of space groups; its point group is {found[2]}.")
    return found[0], found[1]


def _refuse_orientation(taken: _Source) -> InputError:
    return InputError(
        f"The {len(taken.matrices)} point operations that were read from {taken.label} lie along axes that no symbol "
        "states.",
        field="group",
        hint=f"Change to a cell along the symmetry axes. {_BY_HAND}",
    )


def _choose_orientation(
    number: int, cell: list[float], sigma: list[float] | None, notes: list[str]
) -> tuple[str, str | None]:
    """The reference setting of a number, else the one other orientation of its point group that the cell fits."""
    reference = gemmi.get_spacegroup_reference_setting(number)
    fitting: dict[OperationSet, list[str]] = {}
    refusals: list[InputError] = []
    for entry in [reference, *(entry for entry in gemmi.spacegroup_table() if entry.number == number)]:
        try:
            build_crystal(cell, entry.xhm(), cell_sigma=sigma)
        except InputError as error:
            refusals.append(error)
            continue
        fitting.setdefault(_collect(collect_operations(entry.operations())), []).append(entry.xhm())
    usual = _collect(collect_operations(reference.operations()))
    listed = "; ".join(_describe(matrices) for matrices in fitting)
    told = f"The file gives the group by its number {number} alone"
    if usual in fitting:
        other = "" if len(fitting) == 1 else f" The cell would allow more than one orientation ({listed})."
        notes.append(f"{told}; the reference setting {reference.xhm()} was assumed.{other}")
        return reference.xhm(), None
    if len(fitting) == 1:
        matrices, symbols = next(iter(fitting.items()))
        notes.append(f"{told}; the cell rules the reference setting {reference.xhm()} out and fits {listed} alone.")
        found = _tabulate_point_groups().get(matrices)
        return (symbols[0], None) if len(symbols) == 1 or found is None else (found[0], found[1])
    if fitting:
        raise InputError(
            f"{told}; its reference setting does not fit the cell, and several other orientations do: {listed}.",
            field="group",
            hint=_BY_HAND,
            detail={"groups": [symbol for symbols in fitting.values() for symbol in symbols]},
        )
    refusal = refusals[0]
    refusal.hint = " ".join([*filter(None, [refusal.hint]), f"{told}; no setting of it fits the cell."])
    raise refusal
