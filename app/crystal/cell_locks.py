"""Which of the six cell parameters a group holds: at a value, or equal to another one, and by which operation."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.cell import PARAMETER_NAMES, compute_parameters
from app.crystal.crystal import Crystal

FloatArray = npt.NDArray[np.float64]

SYMBOLS: Final = ("a", "b", "c", "α", "β", "γ")
TOLERANCE: Final = 1e-6


@dataclass(frozen=True)
class CellLock:
    """One cell parameter.

    Attributes:
        name: "a" to "gamma".
        symbol: as it is printed, "a" to "γ".
        state: "free", "fixed" (at its value) or "tied" (to an earlier parameter).
        equals: what a fixed or tied parameter equals, like "90°" or "a"; None for a free one.
        value: the value in the obeying cell.
    """

    name: str
    symbol: str
    state: Literal["free", "fixed", "tied"]
    equals: str | None
    value: float


def list_cell_locks(crystal: Crystal) -> list[CellLock]:
    """The six parameters with what holds them; none for a crystal without a cell."""
    if crystal.cell is None:
        return []
    holds = _find_holds(crystal.group.operations)
    return [
        CellLock(name, symbol, state, equals, float(value))
        for name, symbol, (state, equals), value in zip(
            PARAMETER_NAMES, SYMBOLS, holds, crystal.cell.parameters, strict=True
        )
    ]


def explain_cell_locks(crystal: Crystal) -> str:
    """A sentence that names the operations which hold cell parameters: "The half-turn about [0 1 0] holds α and γ."."""
    locks = [lock for lock in list_cell_locks(crystal) if lock.state != "free"]
    if not locks or crystal.cell is None:
        return "The group leaves all six parameters free." if crystal.cell is not None else ""
    alone: dict[str, list[str]] = {}
    together: list[str] = []
    holds = [
        (operation.name, _find_holds(_powers(matrix)))
        for operation, matrix in zip(crystal.operations, crystal.group.operations, strict=True)
        if operation.axis is not None
    ]
    # A turn is the plainer reason than a mirror or a turn with inversion, and a half-turn than a higher one.
    holds.sort(key=lambda entry: ("inversion" in entry[0], "mirror" in entry[0], "half-turn" not in entry[0]))
    for lock in locks:
        position = PARAMETER_NAMES.index(lock.name)
        cause = next((name for name, held in holds if held[position] == (lock.state, lock.equals)), None)
        if cause is None:
            together.append(lock.symbol)
        else:
            alone.setdefault(cause, []).append(lock.symbol)
    parts = [f"The {cause} holds {_list(symbols)}." for cause, symbols in alone.items()]
    if together:
        parts.append(f"The operations together hold {_list(together)}.")
    return " ".join(parts)


def _list(symbols: list[str]) -> str:
    return symbols[0] if len(symbols) == 1 else f"{', '.join(symbols[:-1])} and {symbols[-1]}"


def _powers(operation: FloatArray) -> FloatArray:
    powers = [np.eye(3)]
    while len(powers) < 7 and not np.allclose(operation @ powers[-1], np.eye(3)):
        powers.append(operation @ powers[-1])
    return np.array(powers)


def _find_holds(operations: FloatArray) -> list[tuple[Literal["free", "fixed", "tied"], str | None]]:
    # Metrics without any accidental relation, averaged: what they share is what the operations hold.
    generic = np.array([[[2.0, 0.31, 0.53], [0.31, 3.0, 0.71], [0.53, 0.71, 5.0]]])
    other = np.array([[[7.0, 0.97, 0.83], [0.97, 4.3, 0.61], [0.83, 0.61, 2.9]]])
    metrics = np.concatenate([generic, other])
    averaged = np.mean(np.swapaxes(operations, -1, -2)[None] @ metrics[:, None] @ np.asarray(operations)[None], axis=1)
    drawn = compute_parameters(averaged)
    holds: list[tuple[Literal["free", "fixed", "tied"], str | None]] = []
    for position in range(6):
        values = drawn[:, position]
        if position >= 3 and abs(values[0] - values[1]) < TOLERANCE:
            holds.append(("fixed", f"{values[0]:.6g}°"))
            continue
        start = 0 if position < 3 else 3
        equal = [
            earlier for earlier in range(start, position) if np.all(np.abs(drawn[:, earlier] - values) < TOLERANCE)
        ]
        holds.append(("tied", SYMBOLS[equal[0]]) if equal else ("free", None))
    return holds
