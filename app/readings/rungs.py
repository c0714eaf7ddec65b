"""The forms of a tensor that a cell's own symmetry leaves room for, in every orientation: the rungs of a ladder.

A cell that measures like a more symmetric one invites a claim; every group of its metric, in every orientation, allows
one form, and groups that allow the same form are one rung: a 3-, 4- or 6-fold axis give one. Rotations suffice, for an
inversion leaves a polar tensor as it is.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations, product
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.cell import METRIC_TOLERANCE
from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.crystal.lattice import find_nearest
from app.crystal.operation import find_turn
from app.errors import InputError
from app.tensor.form import average_group
from app.tensor.kind import Kind

FloatArray = npt.NDArray[np.float64]

SAME_FORM: Final = 1e-3
"""Projectors nearer than this allow one form: the rotations of a metric are a group within its tolerance only."""


@dataclass(frozen=True)
class Rung:
    """One form, in one orientation.

    Attributes:
        rotations: shape (n, 3, 3), the largest group of rotations of the metric that allows just this form.
        count: independent cells.
        name: what it would be, "isotropic", "one axis, [001]", "three half-turns, …", "one half-turn, [010]".
        within: positions of the rungs whose form is part of this one's, so that they are bolder claims.
    """

    rotations: FloatArray
    count: int
    name: str
    within: tuple[int, ...] = ()


def find_metric_rotations(crystal: Crystal, tolerance: float = METRIC_TOLERANCE) -> FloatArray:
    """Rotations that bring the lattice's cell onto itself within the tolerance, shape (n, 3, 3), crystal frame.

    They are integer matrices with entries −1, 0, 1 that change every |G_ij| by at most ``tolerance`` √(G_ii G_jj), and
    are made orthogonal. Raises InputError for a crystal without a cell.
    """
    basis = crystal.require_basis()
    metric = basis.T @ basis
    size = np.sqrt(np.outer(np.diag(metric), np.diag(metric)))
    # Column j of the matrix is the image of edge j: as long as it, and at its angles to the others.
    columns = np.array(list(product((-1, 0, 1), repeat=3)))
    images: list[list[FloatArray]] = [
        [c for c in columns if abs(float(c @ metric @ c) - metric[j, j]) <= tolerance * metric[j, j]] for j in range(3)
    ]
    found = []
    for chosen in product(*images):
        matrix = np.array(chosen).T
        if round(float(np.linalg.det(matrix))) != 1:
            continue
        if np.all(np.abs(matrix.T @ metric @ matrix - metric) <= tolerance * size):
            left, _, right = np.linalg.svd(basis @ matrix @ np.linalg.inv(basis))
            found.append(left @ right)
    return np.array(found)


def list_rungs(crystal: Crystal, kind: Kind) -> tuple[Rung, ...]:
    """Every distinct form, from the least to the most restricted; the first restricts nothing.

    Raises:
        InputError: a crystal without a cell, or an axial tensor, whose forms need more than rotations.
    """
    if kind.parity != "polar":
        raise InputError(
            "The ladder is for polar tensors; the form of an axial one depends on mirrors that readings do not see.",
            field="tensor.parity",
        )
    rotations = find_metric_rotations(crystal)
    table = _multiply(rotations)
    groups = _list_subgroups(table)
    forms: list[tuple[FloatArray, frozenset[int]]] = []
    for group in sorted(groups, key=len):
        projector = average_group(rotations[sorted(group)], kind)
        for place, (other, members) in enumerate(forms):
            if float(np.max(np.abs(projector - other))) < SAME_FORM:
                # Groups that allow one form generate a larger one that allows it too.
                forms[place] = (other, max(members, group, key=len))
                break
        else:
            forms.append((projector, group))
    forms.sort(key=lambda entry: (-round(float(np.trace(entry[0]))), len(entry[1]), sorted(entry[1])))
    rungs = [
        Rung(rotations[sorted(members)], round(float(np.trace(projector))), _name(crystal, rotations[sorted(members)]))
        for projector, members in forms
    ]
    contained = [
        tuple(
            other
            for other, (inner, _) in enumerate(forms)
            if other != place and float(np.max(np.abs(projector @ inner - inner))) < SAME_FORM
        )
        for place, (projector, _) in enumerate(forms)
    ]
    return tuple(
        Rung(rung.rotations, rung.count, rung.name, within) for rung, within in zip(rungs, contained, strict=True)
    )


def _multiply(rotations: FloatArray) -> npt.NDArray[np.int64]:
    """The multiplication table: the nearest of the rotations to each product."""
    products = np.einsum("aij,bjk->abik", rotations, rotations)
    table: npt.NDArray[np.int64] = np.argmax(np.einsum("abij,cij->abc", products, rotations), axis=-1)
    return table


def _list_subgroups(table: npt.NDArray[np.int64]) -> set[frozenset[int]]:
    """All subgroups that three elements generate, which are all of the rotation groups of a lattice."""
    one = int(np.flatnonzero(table[:, 0] == 0)[0]) if len(table) > 1 else 0
    found: set[frozenset[int]] = {frozenset([one])}
    cyclic = {_generate(table, {one, element}) for element in range(len(table))}
    found |= cyclic
    for first, second in combinations(sorted(cyclic, key=sorted), 2):
        found.add(_generate(table, set(first | second)))
    return found


def _generate(table: npt.NDArray[np.int64], members: set[int]) -> frozenset[int]:
    while True:
        rows = sorted(members)
        together = members | set(np.unique(table[np.ix_(rows, rows)]).tolist())
        if together == members:
            return frozenset(members)
        members = together


def _name(crystal: Crystal, rotations: FloatArray) -> str:
    """What a group would be, with its axes as rows."""
    axes: dict[str, int] = {}
    for rotation in rotations:
        axis, angle, _ = find_turn(rotation)
        if axis is None:
            continue
        row = find_nearest(crystal, _orient(axis), "row", 3)
        order = round(360.0 / angle) if angle > 0 else 1
        name = typeset_indices(row.text)
        axes[name] = max(axes.get(name, 1), order)
    high = sorted(name for name, order in axes.items() if order > 2)
    low = sorted(name for name, order in axes.items() if order == 2)
    if len(high) > 1:
        return "isotropic"
    if high:
        return f"one axis of three, four or six turns along {high[0]}"
    if len(low) >= 2:
        return f"half-turns along {', '.join(low)}"
    return f"a half-turn along {low[0]}" if low else "no restriction"


def _orient(axis: FloatArray) -> FloatArray:
    """The sense of a line whose last component that is not zero is positive."""
    place = int(np.flatnonzero(np.abs(axis) > 1e-6)[-1])
    return axis if axis[place] > 0 else -axis
