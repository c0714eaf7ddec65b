"""A crystal from a CIF: cell with uncertainties, group in the setting of the file, temperature, formula.

Grammar and data names: the core dictionary of the Crystallographic Information Framework (S. R. Hall, F. H. Allen and
I. D. Brown, Acta Cryst. A47 (1991) 655), in its older form (``_symmetry_…``), its newer one (``_space_group_…``) and
with dots. gemmi parses the text. What decides the group, in this order: the list of operations, the Hall symbol, the
Hermann-Mauguin symbol, the number; whatever else the file says is compared with it, and what was missing, assumed or
contradictory is told in notes. The group is never guessed.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Final

import gemmi
import numpy as np

from app.crystal.cif_group import read_group
from app.crystal.cif_text import (
    CELL_NAMES,
    SIZE_LIMIT,
    choose_block,
    decode,
    find_text,
    find_values,
    parse,
    read_number,
    shorten,
)
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.frame import DEFAULT_RULE
from app.errors import InputError

TEMPERATURE_NAMES: Final = (
    ("_diffrn_ambient_temperature", "_diffrn.ambient_temperature", "_diffrn.ambient_temp"),
    ("_cell_measurement_temperature", "_cell_measurement.temperature", "_cell_measurement.temp"),
)
FORMULA_NAMES: Final = ("_chemical_formula_sum", "_chemical_formula.sum")
CRYSTAL_NAMES: Final = tuple(
    f"_chemical{mark}name_{which}" for which in ("common", "mineral", "systematic") for mark in ("_", ".")
)


@dataclass(frozen=True)
class CifCrystal:
    """What a CIF says of a crystal; cell, cell_sigma, group, unique_axis and frame are what ``build_crystal`` takes.

    Attributes:
        cell: a, b, c in angstrom, alpha, beta, gamma in degrees, as in the file.
        cell_sigma: their standard uncertainties, 0 where one has none; None where none has one.
        group: the space group's symbol with its setting where the tables have it, else the oriented point group.
        unique_axis: a, b or c with a short monoclinic point-group symbol, else None.
        frame: the frame rule, the default one: a CIF does not say it.
        name, formula: as in the file; the block's name stands in for a missing name.
        temperature: kelvin, or None.
        block: the name of the block that was taken.
        blocks: names of all blocks that have a cell.
        notes: sentences on what was chosen, missing, assumed or contradictory.
    """

    cell: list[float]
    cell_sigma: list[float] | None
    group: str
    unique_axis: str | None
    frame: str
    name: str | None
    formula: str | None
    temperature: float | None
    block: str
    blocks: list[str]
    notes: list[str]

    def build(self) -> Crystal:
        """The crystal itself."""
        return build_crystal(
            self.cell, self.group, unique_axis=self.unique_axis, frame=self.frame, cell_sigma=self.cell_sigma
        )


def read_cif(text: str | bytes, block: str | None = None) -> CifCrystal:
    """Read a crystal from the text of a CIF.

    Args:
        text: the text, or its bytes: UTF-8, else Latin-1 (which a note tells).
        block: the name of the block to take; None for the first that has a cell.

    Raises:
        InputError: field "text" for what is no CIF (with the line), "block" for a block that does not exist, "cell"
            for a cell that is missing, is none or does not fit the group, "group" for one that is missing or unclear.
    """
    notes: list[str] = []
    document = parse(decode(text, notes))
    chosen, blocks = choose_block(document, block, notes)
    cell, sigma = _read_cell(chosen)
    if sigma is None:
        notes.append("The cell has no standard uncertainties in the file.")
    group, unique_axis = read_group(chosen, cell, sigma, notes)
    crystal = build_crystal(cell, group, unique_axis=unique_axis, cell_sigma=sigma)
    if crystal.cell is not None and np.max(np.abs(crystal.cell.parameters - cell)) > 1e-6:
        kept = ", ".join(f"{value:.6g}" for value in crystal.cell.parameters)
        notes.append(f"The cell obeys its group only to within rounding or its uncertainties; it is used as {kept}.")
    temperature = _read_temperature(chosen, notes)
    formula = find_text(chosen, FORMULA_NAMES)
    if formula is None:
        notes.append("The file gives no chemical formula.")
    name = find_text(chosen, CRYSTAL_NAMES)
    if name is None:
        name = chosen.name.strip() or None
        notes.append("The file names no compound" + ("; the name is the block's." if name else "."))
    notes.append(f"A CIF does not say how x1 x2 x3 lie in the crystal; the frame rule {DEFAULT_RULE} was taken.")
    return CifCrystal(
        cell, sigma, group, unique_axis, DEFAULT_RULE, name, formula, temperature, chosen.name.strip(), blocks, notes
    )


def read_cif_file(path: str | Path, block: str | None = None) -> CifCrystal:
    """``read_cif`` of a file; see there.

    Raises:
        InputError: field "path" where the file cannot be read, and whatever ``read_cif`` raises.
    """
    try:
        with Path(path).open("rb") as file:
            content = file.read(SIZE_LIMIT + 1)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            f"The CIF {path} cannot be read: {reason}.", field="path", hint="Check the path and the file's permissions."
        ) from None
    return read_cif(content, block)


def _read_cell(block: gemmi.cif.Block) -> tuple[list[float], list[float] | None]:
    cell: list[float] = []
    spreads: list[float | None] = []
    for index, name in enumerate(CELL_NAMES):
        values = find_values(block, (f"_cell_{name}", f"_cell.{name}"))
        if len(set(values)) > 1:
            raise InputError(
                f"The data name _cell_{name} has {len(values)} values, so it is unclear which cell is meant.",
                field=f"cell[{index}]",
                hint="Keep one cell in the block.",
            )
        read = read_number(values[0])
        if read is None:
            raise InputError(
                f"The value “{shorten(values[0])}” of _cell_{name} is not a number.",
                field=f"cell[{index}]",
                hint="A number is written like 9.123 or, with its standard uncertainty, 9.123(4).",
            )
        value, spread = read
        if spread is None:
            apart = find_values(block, (f"_cell_{name}_su", f"_cell.{name}_su", f"_cell.{name}_esd"))
            given = read_number(apart[0]) if apart else None
            spread = given[0] if given is not None and given[0] >= 0 else None
        cell.append(value)
        spreads.append(spread)
    if all(spread is None for spread in spreads):
        return cell, None
    return cell, [spread or 0.0 for spread in spreads]


def _read_temperature(block: gemmi.cif.Block, notes: list[str]) -> float | None:
    found: list[float] = []
    for names in TEMPERATURE_NAMES:
        for value in find_values(block, names)[:1]:
            read = read_number(value)
            if read is None or read[0] <= 0:
                notes.append(f"“{shorten(value)}” under {names[0]} is no temperature in kelvin and was left out.")
            else:
                found.append(read[0])
    if len(found) == 2 and found[0] != found[1]:
        notes.append(
            f"Two temperatures are given: {found[0]:g} K of the measurement (taken) and {found[1]:g} K of the cell."
        )
    if not found:
        notes.append("The file gives no temperature.")
    return found[0] if found else None
