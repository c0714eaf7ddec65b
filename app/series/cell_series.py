"""Cells measured at several values of a variable, checked against one group and made to obey it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.cell import METRIC_TOLERANCE, PARAMETER_NAMES, SIGMA_TOLERANCE, build_cell, compute_metric
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.frame import FrameRule, compute_basis
from app.crystal.group import find_group
from app.errors import InputError, join_field, located
from app.series.cell_parameters import IndependentParameters, find_independent
from app.series.polynomial import Variable, scale_variable

FloatArray = npt.NDArray[np.float64]

SMALLEST_SIGMA: Final = 1e-50
LARGEST_SIGMA: Final = 1e50
SAME_VARIABLE: Final = 1e-12
"""A reference is the t of a state within this part of the largest |t|: 20 + 273.15 is 293.15."""

_DISOBEDIENT_HINT: Final = (
    "Correct the cell, the group or its setting (unique axis, hexagonal or rhombohedral axes), or give the standard "
    "deviations of the states if the difference is within three of them."
)


@dataclass(frozen=True)
class CellState:
    """A cell at one value of the variable, as it was measured.

    Attributes:
        t: the variable, in the caller's unit.
        cell: a, b, c in angstrom, alpha, beta, gamma in degrees.
        sigma: their standard deviations, or None.
    """

    t: float
    cell: tuple[float, ...]
    sigma: tuple[float, ...] | None = None


@dataclass(frozen=True)
class CellSeries:
    """Cells of one crystal against a variable.

    Attributes:
        crystal: group and frame rule, with the cell that was given for it, else the reference state's.
        independent: the parameters that the group leaves free.
        variable: the measured range.
        t: shape (n,).
        given: shape (n, 6), the cells as they were given.
        free: shape (n, k), their independent parameters, made to obey.
        sigma: shape (n, k), of the independent parameters; None where none were given.
        reference: position of the state that strains refer to.
    """

    crystal: Crystal
    independent: IndependentParameters
    variable: Variable
    t: FloatArray
    given: FloatArray
    free: FloatArray
    sigma: FloatArray | None
    reference: int

    @property
    def cells(self) -> FloatArray:
        """The cells made to obey the group, shape (n, 6)."""
        return self.independent.expand(self.free)

    @property
    def reference_basis(self) -> FloatArray:
        """M of the reference state's cell, shape (3, 3): the frame of the strains."""
        return compute_basis(compute_metric(self.cells[self.reference]), self.rule)

    @property
    def rule(self) -> FrameRule:
        """How the crystal frame is attached to each of the cells."""
        assert self.crystal.frame is not None
        return self.crystal.frame


def build_cell_series(
    states: Sequence[CellState],
    group: str,
    *,
    unique_axis: str | None = None,
    frame: str | None = None,
    cell: npt.ArrayLike | None = None,
    cell_sigma: npt.ArrayLike | None = None,
    reference: float | None = None,
) -> CellSeries:
    """Check a series of cells against its group and frame rule.

    Args:
        states: one or more, in any order; the same t may stand there again for a repeated measurement.
        group, unique_axis, frame: as ``build_crystal`` takes them.
        cell, cell_sigma: a cell of the crystal, where one is at hand. It decides nothing but whether a trigonal group
            is on hexagonal or rhombohedral axes; None takes the reference state's.
        reference: the t of the state that strains refer to; None is the first state's. Of several states at that t, the
            first.

    Raises:
        InputError: at ``crystal.…``, ``states[i].…`` or ``reference``: a limiting group, a cell that the group does not
            leave unchanged, standard deviations of some states only or none above zero for an independent parameter.
    """
    if not states:
        raise InputError("There are no states.", field="states", hint="Give the cell at one value of t or more.")
    with located("states"):
        t = np.array([state.t for state in states], dtype=np.float64)
        variable = scale_variable(t)
        _check_sigmas(states)
        given = np.empty((len(states), 6))
        for index, state in enumerate(states):
            with located(f"[{index}]"):
                given[index] = build_cell(state.cell).parameters
    chosen = _find_reference(t, reference)
    crystal = _build_reference(states[chosen], chosen, group, unique_axis, frame, cell, cell_sigma)
    independent = find_independent(crystal)
    free = independent.reduce(given)
    _check_obedience(states, given, independent.expand(free), crystal)
    sigma = None
    if states[0].sigma is not None:
        every = np.array([state.sigma for state in states], dtype=np.float64)
        sigma = every[:, list(independent.positions)]
        _check_independent_sigma(sigma, independent)
    return CellSeries(crystal, independent, variable, t, given, free, sigma, chosen)


def _check_sigmas(states: Sequence[CellState]) -> None:
    carrying = sum(state.sigma is not None for state in states)
    for index, state in enumerate(states):
        if state.sigma is None and carrying:
            raise InputError(
                f"This state has no standard deviations, where {carrying} of {len(states)} have them.",
                field=f"[{index}].sigma",
                hint="Give them for all states or for none.",
            )
        if state.sigma is not None and (len(state.sigma) != 6 or not all(0 <= s < np.inf for s in state.sigma)):
            raise InputError(
                "The standard deviations of a cell are six finite numbers, none negative.",
                field=f"[{index}].sigma",
                hint="Give 0 for a parameter that symmetry fixes.",
            )


def _check_independent_sigma(sigma: FloatArray, independent: IndependentParameters) -> None:
    bad = np.argwhere(~((sigma >= SMALLEST_SIGMA) & (sigma <= LARGEST_SIGMA)))
    if len(bad):
        index, column = bad[0]
        position = independent.positions[column]
        name = PARAMETER_NAMES[position]
        raise InputError(
            f"The group leaves {name} free, so its standard deviation is above zero (from {SMALLEST_SIGMA:g} to "
            f"{LARGEST_SIGMA:g}); here it is {sigma[index, column]:g}.",
            field=f"states[{index}].sigma[{position}]",
            hint=f"Give the standard deviation of {name}, or leave out the standard deviations of all states.",
        )


def _find_reference(t: FloatArray, reference: float | None) -> int:
    if reference is None:
        return 0
    off = np.abs(t - reference)
    nearest = int(np.argmin(off))
    if not off[nearest] <= SAME_VARIABLE * float(np.max(np.abs(t))):
        raise InputError(
            f"There is no state at t = {reference:g}, so strains cannot refer to it.",
            field="reference",
            hint=f"Give the t of a state; the nearest is {t[nearest]:g}.",
        )
    return nearest


def _build_reference(
    state: CellState,
    index: int,
    group: str,
    unique_axis: str | None,
    frame: str | None,
    cell: npt.ArrayLike | None,
    cell_sigma: npt.ArrayLike | None,
) -> Crystal:
    if cell_sigma is not None and cell is None:
        raise InputError(
            "There are standard deviations of a cell, and no cell.",
            field="crystal.cell_sigma",
            hint="Give those of the states with the states.",
        )
    with located("crystal"):
        if find_group(group, unique_axis).limiting:
            raise InputError(
                f"The limiting group {group} has no cell, so no expansion comes of cells.",
                field="group",
                hint="Give the point group or space group of the crystal.",
            )
        if cell is not None:
            return build_crystal(cell, group, unique_axis=unique_axis, frame=frame, cell_sigma=cell_sigma)
    try:
        return build_crystal(state.cell, group, unique_axis=unique_axis, frame=frame, cell_sigma=state.sigma)
    except InputError as error:
        # What is wrong with group or frame is the crystal's fault, what is wrong with the cell the state's.
        if error.field != "cell":
            error.field = join_field("crystal", error.field)
        else:
            error.field, error.hint = f"states[{index}].cell", _DISOBEDIENT_HINT
        raise


def _check_obedience(
    states: Sequence[CellState],
    given: FloatArray,
    obeying: FloatArray,
    crystal: Crystal,
) -> None:
    """Refuse the first cell that is not the obeying one within the tolerances of any cell."""
    operations = crystal.group.operations
    change = np.zeros(len(given))
    metric = compute_metric(given)
    lengths = np.sqrt(np.diagonal(metric, axis1=-2, axis2=-1))
    for operation in operations:
        turned = operation.T @ metric @ operation
        relative = np.abs(turned - metric) / (lengths[:, :, None] * lengths[:, None, :])
        change = np.maximum(change, np.max(relative, axis=(1, 2)))
    taken = change <= METRIC_TOLERANCE * (1.0 + 1e-9)
    if states[0].sigma is not None:
        every = np.array([state.sigma for state in states], dtype=np.float64)
        moves = np.abs(obeying - given)
        taken |= np.all(moves <= SIGMA_TOLERANCE * every * (1.0 + 1e-9) + 1e-10, axis=1)
    if np.all(taken):
        return
    index = int(np.argmin(taken))
    moves = obeying[index] - given[index]
    named = [
        f"{name} {value:.6g}"
        for name, value, move in zip(PARAMETER_NAMES, obeying[index], moves, strict=True)
        if abs(move) > 1e-6
    ]
    raise InputError(
        f"The group {crystal.group.symbol} does not leave the cell at t = {states[index].t:g} unchanged; the nearest "
        f"cell that it leaves unchanged has {', '.join(named)}.",
        field=f"states[{index}].cell",
        hint=_DISOBEDIENT_HINT,
        detail={"cell": obeying[index].tolist(), "change": moves.tolist()},
    )
