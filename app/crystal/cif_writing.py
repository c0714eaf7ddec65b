"""A crystal as a CIF: cell with standard uncertainties, group in its setting with its operations, temperature.

Grammar and data names: the core dictionary of the Crystallographic Information Framework (S. R. Hall, F. H. Allen and
I. D. Brown, Acta Cryst. A47 (1991) 655), written in ASCII as its version 1.1 asks, lines of at most 2048 characters.
``app.crystal.cif`` reads back the same cell and the same group. A CIF has no data name for the crystal frame, which
therefore stands in a comment.
"""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Sequence
from decimal import Decimal
from functools import lru_cache
from typing import Final

import gemmi
import numpy as np
import numpy.typing as npt

from app.crystal.cif_text import CELL_NAMES
from app.crystal.crystal import Crystal
from app.crystal.group import PointGroup, collect_operations
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

LONGEST_COMMENT: Final = 400
MOST_DECIMALS: Final = 10

_SIGNS: Final = {"×": "x", "−": "-", "–": "-", "·": ".", "°": "deg", "Å": "A", "σ": "sigma", "“": '"', "”": '"'}


def write_cif(
    crystal: Crystal,
    *,
    name: str = "",
    remarks: Sequence[str] = (),
    temperature: float | None = None,
) -> str:
    """The CIF of a crystal, with line ends LF.

    Where only the point group is known, the space group P (or R on rhombohedral axes) of that symbol, without screw
    axes and glide planes, stands in for it, and comments say so: a CIF has to name a space group, and this one states
    the point group and its setting and adds nothing.

    Args:
        crystal: with a cell.
        name: of the block; what a block's name cannot hold is left out of it.
        remarks: further lines of comment.
        temperature: kelvin, of the measurement.

    Raises:
        InputError: field "group" for a limiting group, which has no cell.
    """
    if crystal.cell is None or crystal.given_cell is None:
        raise InputError(
            f"The limiting group {crystal.group.symbol} has no cell, and a CIF is about a cell.",
            field="group",
            hint="Hand over the tensor as CSV, or give the crystal a cell and a crystallographic group.",
        )
    entry, known = find_space_group(crystal.group)
    lines = ["#\\#CIF_1.1"]
    if not known:
        axis = f" with unique axis {crystal.group.unique_axis}" if crystal.group.unique_axis else ""
        lines += [
            _comment(f"Only the point group {crystal.group.symbol}{axis} is known. The space group {entry.xhm()},"),
            _comment("which has no screw axes and glide planes, stands in for it; do not take it for a finding."),
        ]
    lines.append(_comment(f"Crystal frame of the tensors: {crystal.frame_sentence}."))
    lines += [_comment(remark) for remark in remarks]
    lines += ["", f"data_{_clean_block(name)}"]
    # What symmetry makes of the cell; where that changes nothing but the last digits, as it was typed.
    kept = np.abs(crystal.cell.parameters - crystal.given_cell.parameters) <= 1e-9
    parameters = np.where(kept, crystal.given_cell.parameters, np.round(crystal.cell.parameters, 8)).tolist()
    spreads = [0.0] * 6 if crystal.given_cell.sigma is None else crystal.given_cell.sigma.tolist()
    for label, value, spread in zip(CELL_NAMES, parameters, spreads, strict=True):
        lines.append(f"{f'_cell_{label}':<34}{print_with_su(value, spread)}")
    lines.append(f"{'_cell_volume':<34}{crystal.cell.volume:.6g}")
    if temperature is not None and math.isfinite(temperature) and temperature > 0:
        lines.append(f"{'_diffrn_ambient_temperature':<34}{temperature!r}")
    lines += [
        f"{'_space_group_crystal_system':<34}{entry.crystal_system_str()}",
        f"{'_space_group_IT_number':<34}{entry.number}",
        f"{'_space_group_name_H-M_alt':<34}'{entry.xhm()}'",
        f"{'_space_group_name_Hall':<34}'{entry.hall}'",
        "loop_",
        "_space_group_symop_id",
        "_space_group_symop_operation_xyz",
        *(f"{number + 1} '{operation.triplet()}'" for number, operation in enumerate(entry.operations())),
    ]
    return "\n".join(lines) + "\n"


def find_space_group(group: PointGroup) -> tuple[gemmi.SpaceGroup, bool]:
    """The table's entry that a group states, and whether it is the group's own or stands in for a point group.

    Raises:
        InputError: field "group" where no entry has these operations; of the groups that are read none is such.
    """
    own = gemmi.find_spacegroup_by_name(group.symbol) if " " in group.symbol else None
    if own is not None and _key(collect_operations(own.operations())) == _key(group.operations):
        return own, True
    entry = _list_plain_groups().get(_key(group.operations))
    if entry is None:  # pragma: no cover - every group that is read has one
        raise InputError(f"No space group states the point group {group.symbol} on these axes.", field="group")
    return entry, False


def _key(operations: FloatArray) -> frozenset[tuple[int, ...]]:
    return frozenset(tuple(row) for row in np.rint(operations).astype(int).reshape(-1, 9).tolist())


@lru_cache(maxsize=1)
def _list_plain_groups() -> dict[frozenset[tuple[int, ...]], gemmi.SpaceGroup]:
    """By their point operations, the entries on primitive axes whose operations move no point but by them."""
    found: dict[frozenset[tuple[int, ...]], gemmi.SpaceGroup] = {}
    for entry in gemmi.spacegroup_table():
        operations = entry.operations()
        if len(list(operations.cen_ops)) == 1 and all(op.tran == [0, 0, 0] for op in operations.sym_ops):
            found.setdefault(_key(collect_operations(operations)), entry)
    return found


def print_with_su(value: float, spread: float) -> str:
    """A number with its standard uncertainty in units of its last digit, ``9.83(2)``; no digit of either is rounded
    away that was typed (ten decimals at most). A spread of zero prints the number alone."""
    exact = Decimal(repr(value))
    if not (math.isfinite(spread) and spread > 0):
        return f"{exact:f}"
    places = max(_count_decimals(exact), _count_decimals(Decimal(repr(spread))))
    # A calculated uncertainty has digits without end; two that count are enough.
    enough = max(1 - math.floor(math.log10(spread)), _count_decimals(exact))
    places = min(places, enough, MOST_DECIMALS) if enough <= MOST_DECIMALS else min(places, MOST_DECIMALS)
    units = max(1, round(spread * 10**places))
    return f"{value:.{places}f}({units})"


def _count_decimals(number: Decimal) -> int:
    exponent = number.normalize().as_tuple().exponent
    return max(0, -exponent) if isinstance(exponent, int) else 0


def to_ascii(text: str) -> str:
    """The text in ASCII, on one line: signs of the trade spelled, letters without their accents, the rest as "?"."""
    for sign, plain in _SIGNS.items():
        text = text.replace(sign, plain)
    text = unicodedata.normalize("NFKD", re.sub(r"\s+", " ", text))
    text = "".join(sign for sign in text if not unicodedata.combining(sign) and unicodedata.category(sign) != "Cc")
    return text.encode("ascii", "replace").decode("ascii").strip()


def _comment(text: str) -> str:
    return f"# {to_ascii(text)[:LONGEST_COMMENT]}"


def _clean_block(name: str) -> str:
    return re.sub(r"[^A-Za-z0-9.-]+", "_", to_ascii(name))[:60].strip("_") or "crystal"
