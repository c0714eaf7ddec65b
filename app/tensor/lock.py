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
    return [_explain_cell(crystal, form, cells, position, pose) for position in range(9)]


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


def _explain_cell(crystal: Crystal, form: Form, cells: CellTerms, position: int, pose: FloatArray | None) -> CellLock:
    axes = None if pose is None else SPECIMEN_AXES
    state, terms = cells.states[position], cells.terms[position]
    label = name_cell(position, axes)
    if state == "free":
        return CellLock(state, terms, "free: no operation of the group decides it", None)
    relation = cells.relations.get(position, {})
    wanted = np.zeros(9)
    wanted[position] = 1.0
    for cell, coefficient in relation.items():
        wanted[cell] -= coefficient
    # The same functional of the crystal frame's cells.
    functional = wanted if pose is None else wanted @ np.kron(pose, pose)
    equals = format_relation(relation, axes) if state == "tied" else None
    cause = _find_cause(crystal, form.kind, functional, position, relation, pose)
    if state == "zero":
        return CellLock(state, terms, f"zero: {cause}", None)
    return CellLock(state, terms, f"tied, {label} = {equals}: {cause}", equals)


def _find_cause(
    crystal: Crystal,
    kind: Kind,
    functional: FloatArray,
    position: int,
    relation: dict[int, float],
    pose: FloatArray | None,
) -> str:
    if np.linalg.norm(functional @ kind.intrinsic_projector) <= ZERO_TOLERANCE:
        return f"the tensor is {kind.intrinsic} by itself"
    causes = _list_causes(crystal.rotations.tobytes(), len(crystal.rotations), kind)
    for index, allowed in causes:
        if np.linalg.norm(functional @ allowed) <= ZERO_TOLERANCE:
            operation = crystal.operations[index]
            name = _name_operation(crystal, operation, pose)
            # Of all turns or all mirrors of a limiting group, the stand-in's own effect is not the reason.
            stands_in = ANY in name
            effect = NO_OTHER_VALUE if stands_in else _describe_effect(operation, kind, position, relation, pose)
            return f"the {name} {effect}"
    for first, second in combinations(causes, 2):
        stacked = np.vstack([np.eye(9) - first[1], np.eye(9) - second[1]])
        space = np.linalg.svd(stacked)
        if np.linalg.norm(space.Vh[space.S <= ZERO_TOLERANCE] @ functional) <= ZERO_TOLERANCE:
            names = [_name_operation(crystal, crystal.operations[index], pose) for index, _ in (first, second)]
            enough = next((name for name in names if ANY in name), None)
            if enough is not None:
                return f"the {enough} {NO_OTHER_VALUE}"
            return f"the {names[0]} and the {names[1]} together leave it no other value"
    return "the operations of the group together leave it no other value"


@lru_cache(maxsize=128)
def _list_causes(content: bytes, count: int, kind: Kind) -> tuple[tuple[int, FloatArray], ...]:
    """For the operations that restrict the tensor alone: their number in the group, and what they allow (9 × 9)."""
    rotations = np.frombuffer(content, dtype=np.float64).reshape(count, 3, 3)
    operations = [describe_operation(matrix, None) for matrix in rotations]
    causes: list[tuple[int, FloatArray]] = []
    for index in sorted(range(count), key=lambda number: _rank_operation(operations[number])):
        projector = _average_powers(rotations[index], kind)
        known = [kind.intrinsic_projector, *(allowed for _, allowed in causes)]
        if not any(np.allclose(projector, allowed, atol=ZERO_TOLERANCE) for allowed in known):
            causes.append((index, projector))
    return tuple(causes)


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


def _name_operation(crystal: Crystal, operation: Operation, pose: FloatArray | None) -> str:
    if operation.axis is None:
        return operation.name
    frame_axis = operation.axis if pose is None else pose @ operation.axis
    names = _CRYSTAL_AXES if pose is None else SPECIMEN_AXES
    along = int(np.argmax(np.abs(frame_axis)))
    where = names[along] if abs(abs(frame_axis[along]) - 1.0) < 1e-12 else None
    inverted = " with inversion" if operation.improper else ""
    if operation.turn == 7:
        return f"turn by any angle{inverted} about {where or 'x3'}"
    if where is None and crystal.group.symbol.startswith("∞∞"):
        return f"turn by any angle{inverted} about any direction"
    if where is None and crystal.group.limiting and np.max(np.abs(operation.axis)) < 1.0 - 1e-12:
        return f"{'mirror across' if operation.improper else 'half-turn about'} any direction at right angles to x3"
    if where is None:
        return operation.name
    if operation.turn == 2:
        return f"mirror across {where}" if operation.improper else f"half-turn about {where}"
    name = TURN_NAMES.get(operation.turn, "turn")
    return f"{name}{inverted} about {where}"


def _describe_effect(
    operation: Operation, kind: Kind, position: int, relation: dict[int, float], pose: FloatArray | None
) -> str:
    matrix = operation.matrix if pose is None else pose @ operation.matrix @ pose.T
    axes = None if pose is None else SPECIMEN_AXES
    sign = float(kind.signs(matrix))
    row, column = CELLS[position]
    # Where the operation only permutes and flips the axes of the cell, say which cell it becomes.
    products = sign * np.outer(matrix[:, row], matrix[:, column]).ravel()
    target = int(np.argmax(np.abs(products)))
    whole = abs(abs(products[target]) - 1.0) < 1e-9
    shown = name_cell(position, axes)
    if whole and (target == position) and products[target] < 0 and not relation:
        return f"turns {shown} into −{shown}"
    if whole and list(relation) == [target]:
        return f"turns {shown} into {'−' if products[target] < 0 else ''}{name_cell(target, axes)}"
    if operation.turn == 1:
        return f"turns {shown} into −{shown}"
    return NO_OTHER_VALUE
