"""Cells against temperature from a set of CIFs, each of which states its temperature."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from app.crystal.cif import CifCrystal, read_cif
from app.errors import InputError, located
from app.series.cell_parameters import find_independent
from app.series.cell_series import CellState


@dataclass(frozen=True)
class CifSeries:
    """Cells from several CIFs.

    Attributes:
        states: in the order of the texts; t is the temperature in kelvin.
        group, unique_axis: what all of them state, as ``build_cell_series`` takes it.
        frame: the default frame rule, since a CIF states none.
        notes: what was missing or assumed, with the place of the CIF it concerns.
    """

    states: tuple[CellState, ...]
    group: str
    unique_axis: str | None
    frame: str
    notes: tuple[str, ...]


def read_cif_series(texts: Sequence[str]) -> CifSeries:
    """Cell and temperature of every CIF.

    Standard uncertainties are taken where every CIF has them, and left out of all, with a note, where one has none.

    Raises:
        InputError: at ``cifs[i]``: a CIF that cannot be read, has no temperature, or has another group.
    """
    if not texts:
        raise InputError("There are no CIFs.", field="cifs", hint="Give one for every temperature.")
    found: list[CifCrystal] = []
    for index, text in enumerate(texts):
        with located(f"cifs[{index}]"):
            crystal = read_cif(text)
            if crystal.temperature is None:
                raise InputError(
                    f"The CIF “{crystal.block}” states no temperature.",
                    hint="Add _diffrn_ambient_temperature, or give the cells as a table.",
                )
            if found and (crystal.group, crystal.unique_axis) != (found[0].group, found[0].unique_axis):
                raise InputError(
                    f"The CIF “{crystal.block}” has the group {crystal.group}, the first one {found[0].group}.",
                    hint="A series runs within one phase and one setting: convert the cell, or split the series.",
                )
            found.append(crystal)
    notes = [f"CIF {index + 1}: {note}" for index, crystal in enumerate(found) for note in crystal.notes]
    without = sum(not _is_uncertain(crystal) for crystal in found)
    if 0 < without < len(found):
        notes.append(
            f"{without} of {len(found)} CIFs leave a free parameter of the cell without uncertainty, so the "
            "uncertainties of the others were not taken either."
        )
    states = tuple(
        CellState(
            float(crystal.temperature or 0.0),
            tuple(crystal.cell),
            None if without or crystal.cell_sigma is None else tuple(crystal.cell_sigma),
        )
        for crystal in found
    )
    return CifSeries(states, found[0].group, found[0].unique_axis, found[0].frame, tuple(notes))


def _is_uncertain(crystal: CifCrystal) -> bool:
    """Whether every parameter that the group leaves free has an uncertainty."""
    sigma = crystal.cell_sigma
    return sigma is not None and all(sigma[position] > 0.0 for position in find_independent(crystal.build()).positions)
