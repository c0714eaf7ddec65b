"""Why a cell is locked: the operation that does it, as a sentence."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import combinations
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.operation import TURN_NAMES, Operation, describe_operation
from app.tensor.form import ZERO_TOLERANCE, CellState, CellTerms, Form, express_cells, name_cell
from app.tensor.kind import CELLS, Kind

FloatArray = npt.NDArray[np.float64]

SPECIMEN_AXES: Final = ("x", "y", "z")
ANY: Final = "any "
NO_OTHER_VALUE: Final = "leaves it no other value"
_CRYSTAL_AXES: Final = ("x1", "x2", "x3")


@dataclass(frozen=True)
class CellLock:
    """One cell with its lock.

    Attributes:
        state: "free", "zero" or "tied".
        terms: shape (k,), coefficients of the crystal frame's free cells.
        because: a sentence.
        equals: what a tied cell equals in its own frame, like "−12"; None for a free or zero cell.
    """

    state: CellState
    terms: FloatArray
    because: str
    equals: str | None


def explain_cells(crystal: Crystal, form: Form, pose: FloatArray | None = None) -> list[CellLock]:
    """Every cell's state, terms and reason, in row order.

    Args:
        crystal: whose operations are named.
        form: the form of the tensor in that crystal.
        pose: C of shape (3, 3) for the cells of a specimen frame; None for the crystal frame.
    """
    cells = express_cells(form, pose)
    functionals = _list_functionals(cells, pose)
    causes = _list_causes(crystal.rotations.tobytes(), len(crystal.rotations), form.kind)
    # What each cause leaves of each functional: shape (causes, 9).
    holds = np.linalg.norm(functionals @ causes.allowed, axis=-1) <= ZERO_TOLERANCE
    locks = []
    for position, (state, terms) in enumerate(zip(cells.states, cells.terms, strict=True)):
        if state == "free":
            locks.append(CellLock(state, terms, "free: no operation of the group decides it", None))
            continue
        relation = cells.relations.get(position, {})
        cell = _LockedCell(crystal, form.kind, functionals[position], position, relation, pose)
        cause = _find_cause(cell, causes, holds[:, position])
        if state == "zero":
            locks.append(CellLock(state, terms, f"zero: {cause}", None))
            continue
        equals = format_relation(relation, cell.axes)
        locks.append(CellLock(state, terms, f"tied, {name_cell(position, cell.axes)} = {equals}: {cause}", equals))
    return locks


@dataclass(frozen=True)
class _LockedCell:
    """A zero or tied cell in the frame of a pose, and the functional of the crystal frame's cells that vanishes."""

    crystal: Crystal
    kind: Kind
    functional: FloatArray
    position: int
    relation: dict[int, float]
    pose: FloatArray | None

    @property
    def axes(self) -> tuple[str, str, str] | None:
        return None if self.pose is None else SPECIMEN_AXES


@dataclass(frozen=True)
class _Causes:
    """What restricts a tensor: its own inner symmetry, then the operations that do so alone.

    Attributes:
        operations: their numbers in the group; the first cause, the inner symmetry, has none.
        allowed: shape (1 + number of operations, 9, 9), projectors on what each allows, the inner symmetry first.
    """

    operations: tuple[int, ...]
    allowed: FloatArray


def _list_functionals(cells: CellTerms, pose: FloatArray | None) -> FloatArray:
    """Of every cell less what it equals, as a functional of the crystal frame's nine cells; shape (9, 9)."""
    wanted = np.eye(9)
    for position, relation in cells.relations.items():
        for cell, coefficient in relation.items():
            wanted[position, cell] -= coefficient
    return wanted if pose is None else (pose.T @ wanted.reshape(9, 3, 3) @ pose).reshape(9, 9)


def format_relation(relation: dict[int, float], axes: tuple[str, str, str] | None) -> str:
    """A sum of cells for print: "−12", "11 − 22", "0.5·11 + 0.866·12"."""
    parts: list[str] = []
    for position, coefficient in relation.items():
        size = abs(coefficient)
        factor = "" if abs(size - 1.0) < 1e-12 else f"{size:.4g}·"
        sign = "−" if coefficient < 0 else ("+" if parts else "")
        spaced = f" {sign} " if parts else sign
        parts.append(f"{spaced}{factor}{name_cell(position, axes)}")
    return "".join(parts)


def _find_cause(cell: _LockedCell, causes: _Causes, holds: npt.NDArray[np.bool_]) -> str:
    if holds[0]:
        return f"the tensor is {cell.kind.intrinsic} by itself"
    operations = cell.crystal.operations
    if np.any(holds):
        operation = operations[causes.operations[int(np.argmax(holds)) - 1]]
        name = _name_operation(cell, operation)
        # Of all turns or all mirrors of a limiting group, the stand-in's own effect is not the reason.
        return f"the {name} {NO_OTHER_VALUE if ANY in name else _describe_effect(cell, operation)}"
    rotations = cell.crystal.rotations
    pairs, common = _list_pairs(rotations.tobytes(), len(rotations), cell.kind)
    together = np.linalg.norm(cell.functional @ common, axis=-1) <= ZERO_TOLERANCE
    if np.any(together):
        names = [_name_operation(cell, operations[index]) for index in pairs[int(np.argmax(together))]]
        enough = next((name for name in names if ANY in name), None)
        if enough is not None:
            return f"the {enough} {NO_OTHER_VALUE}"
        return f"the {names[0]} and the {names[1]} together leave it no other value"
    return "the operations of the group together leave it no other value"


@lru_cache(maxsize=128)
def _list_causes(content: bytes, count: int, kind: Kind) -> _Causes:
    rotations = np.frombuffer(content, dtype=np.float64).reshape(count, 3, 3)
    operations = [describe_operation(matrix, None) for matrix in rotations]
    numbers: list[int] = []
    allowed = [kind.intrinsic_projector]
    for index in sorted(range(count), key=lambda number: _rank_operation(operations[number])):
        projector = _average_powers(rotations[index], kind)
        if not any(np.allclose(projector, known, atol=ZERO_TOLERANCE) for known in allowed):
            numbers.append(index)
            allowed.append(projector)
    return _Causes(tuple(numbers), np.array(allowed))


@lru_cache(maxsize=128)
def _list_pairs(content: bytes, count: int, kind: Kind) -> tuple[list[tuple[int, int]], FloatArray]:
    """Pairs of the operations of ``_list_causes``, and projectors on what both allow, shape (pairs, 9, 9)."""
    causes = _list_causes(content, count, kind)
    pairs, common = [], [np.zeros((0, 9, 9))]
    for first, second in combinations(range(len(causes.operations)), 2):
        stacked = np.vstack([np.eye(9) - causes.allowed[1 + first], np.eye(9) - causes.allowed[1 + second]])
        space = np.linalg.svd(stacked)
        kept = space.Vh[space.S <= ZERO_TOLERANCE]
        pairs.append((causes.operations[first], causes.operations[second]))
        common.append((kept.T @ kept)[None])
    return pairs, np.concatenate(common)


def _rank_operation(operation: Operation) -> tuple[int, int, bool]:
    """The inversion first, then half-turns, mirrors and higher turns: the plainest reason wins."""
    order = {1: 0, 2: 1, 4: 2, 3: 3, 6: 4, 7: 2}[operation.turn]
    backward = operation.axis is not None and float(np.sum(operation.axis)) < 0
    return (order, int(operation.improper), backward)


def _average_powers(matrix: FloatArray, kind: Kind) -> FloatArray:
    powers = [np.eye(3)]
    while len(powers) < 14 and not np.allclose(matrix @ powers[-1], np.eye(3), atol=1e-9):
        powers.append(matrix @ powers[-1])
    stack = np.array(powers)
    signs = kind.signs(stack)
    products = np.einsum("n,nik,njl->ijkl", signs, stack, stack).reshape(9, 9) / len(stack)
    averaged: FloatArray = products @ kind.intrinsic_projector
    return averaged


def _name_operation(cell: _LockedCell, operation: Operation) -> str:
    if operation.axis is None:
        return operation.name
    frame_axis = operation.axis if cell.pose is None else cell.pose @ operation.axis
    names = cell.axes or _CRYSTAL_AXES
    group = cell.crystal.group
    along = int(np.argmax(np.abs(frame_axis)))
    where = names[along] if abs(abs(frame_axis[along]) - 1.0) < 1e-12 else None
    inverted = " with inversion" if operation.improper else ""
    if operation.turn == 7:
        return f"turn by any angle{inverted} about {where or 'x3'}"
    if where is None and group.symbol.startswith("∞∞"):
        return f"turn by any angle{inverted} about any direction"
    if where is None and group.limiting and np.max(np.abs(operation.axis)) < 1.0 - 1e-12:
        return f"{'mirror across' if operation.improper else 'half-turn about'} any direction at right angles to x3"
    if where is None:
        return operation.name
    if operation.turn == 2:
        return f"mirror across {where}" if operation.improper else f"half-turn about {where}"
    name = TURN_NAMES.get(operation.turn, "turn")
    return f"{name}{inverted} about {where}"


def _describe_effect(cell: _LockedCell, operation: Operation) -> str:
    position, axes = cell.position, cell.axes
    shown = name_cell(position, axes)
    if len(cell.relation) <= 1:
        matrix = operation.matrix if cell.pose is None else cell.pose @ operation.matrix @ cell.pose.T
        row, column = CELLS[position]
        # Where the operation only permutes and flips the axes of the cell, say which cell it becomes.
        products = float(cell.kind.signs(matrix)) * np.outer(matrix[:, row], matrix[:, column]).ravel()
        target = int(np.argmax(np.abs(products)))
        whole = abs(abs(products[target]) - 1.0) < 1e-9
        if whole and target == position and products[target] < 0 and not cell.relation:
            return f"turns {shown} into −{shown}"
        if whole and list(cell.relation) == [target]:
            return f"turns {shown} into {'−' if products[target] < 0 else ''}{name_cell(target, axes)}"
    return f"turns {shown} into −{shown}" if operation.turn == 1 else NO_OTHER_VALUE
