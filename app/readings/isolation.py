"""The few bars that isolate one cell: a cutting list and arithmetic that can be done by hand.

Weights w with Σ w_i P(n_i n_iᵀ) = P(E), P the projection on the allowed tensors and E the cell, make Σ w_i y_i the
cell's value whatever the tensor is; its variance is sigma² Σ w_i². The fewest bars are found by trying every set of
them as long as that takes no more than a second; beyond, a vertex of the least Σ |w_i| (S. S. Chen, D. L. Donoho and
M. A. Saunders, SIAM Rev. 43 (2001) 129) has no more bars than the form has cells.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from fractions import Fraction
from itertools import combinations, islice
from math import comb
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import linprog

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, format_indices, typeset_indices
from app.errors import InputError
from app.readings.candidates import Candidates
from app.readings.criterion import cell_functional
from app.readings.information import build_planned_rows
from app.tensor.form import build_form
from app.tensor.kind import Kind

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

EXACT: Final = 1e-9
"""A combination that misses the cell by less than this part isolates it."""

_WORK: Final = 60_000_000
_CHUNK: Final = 2_000_000


@dataclass(frozen=True)
class Isolation:
    """How to get one cell from few bars.

    Attributes:
        cell: label.
        directions: of the bars.
        weights: shape (m,), the cell is Σ weight · reading along the direction.
        variance: Σ w², the cell's variance for readings of unit variance.
        fewest: whether no smaller number of the candidates isolates the cell.
        sentence: the arithmetic in words.
    """

    cell: str
    directions: tuple[Direction, ...]
    weights: FloatArray
    variance: float
    fewest: bool
    sentence: str


def isolate_cell(crystal: Crystal, kind: Kind, label: str, candidates: Candidates) -> Isolation:
    """The fewest bars among the candidates that isolate a cell, of so many the ones of least variance.

    Of equal ones the earlier in the list are taken. Tilts are left out: the arithmetic is exact for exact directions.

    Args:
        crystal, kind: of the tensor.
        label: of the cell, free or tied.
        candidates: directions; equivalent ones tell the same and are tried once.

    Raises:
        InputError: a cell that is none or zero by symmetry, or that readings along these candidates do not see.
    """
    form = build_form(crystal, kind)
    wanted = cell_functional(form, label, "cell")
    # Without tilts neither the tensor nor sigma has an effect on the rows.
    rows = build_planned_rows(form, candidates.vectors, np.zeros((3, 3)), 1.0, 0.0).plain
    distinct = _find_distinct(rows)
    columns = rows[distinct].T
    everything = np.linalg.lstsq(columns, wanted, rcond=1e-10)[0]
    if np.linalg.norm(columns @ everything - wanted) > EXACT * np.linalg.norm(wanted):
        raise InputError(
            f"Readings along these candidates do not isolate the cell {label}.",
            field="candidates",
            hint="Add candidates; an antisymmetric part is seen only by readings across.",
        )
    chosen, weights, fewest = _search(columns, wanted)
    directions = tuple(candidates.directions[distinct[position]] for position in chosen)
    return Isolation(
        cell=label,
        directions=directions,
        weights=weights,
        variance=float(weights @ weights),
        fewest=fewest,
        sentence=f"{label} = {_write_sum(directions, weights)}",
    )


def _find_distinct(rows: FloatArray) -> IntArray:
    """Positions of the first of each set of equal rows; blind ones are left out."""
    seen = np.flatnonzero(np.linalg.norm(rows, axis=1) > EXACT)
    _, firsts = np.unique(np.round(rows[seen], 9) + 0.0, axis=0, return_index=True)
    return seen[np.sort(firsts)].astype(np.int64)


def _search(columns: FloatArray, wanted: FloatArray) -> tuple[list[int], FloatArray, bool]:
    cells, count = columns.shape
    for size in range(1, min(cells, count) + 1):
        if comb(count, size - 1) * count * cells > _WORK:
            break
        found = _find_sets(columns, wanted, size)
        if len(found):
            return (*_choose_set(columns, wanted, found), True)
    chosen, weights = _relax(columns, wanted)
    return chosen, weights, False


def _find_sets(columns: FloatArray, wanted: FloatArray, size: int) -> IntArray:
    """All sets (found, size) of so many columns whose span holds the wanted vector."""
    count = columns.shape[1]
    scale = float(np.linalg.norm(wanted))
    found = []
    for kept in _draw_sets(count, size - 1, max(1, _CHUNK // columns.size)):
        held = np.moveaxis(columns[:, kept], 0, 1)  # (sets, k, size − 1)
        orthogonal = np.linalg.qr(held).Q
        left = wanted - np.einsum("ski,si->sk", orthogonal, orthogonal.transpose(0, 2, 1) @ wanted)
        others = columns - orthogonal @ (orthogonal.transpose(0, 2, 1) @ columns)
        lengths = np.linalg.norm(others, axis=1)
        along = np.einsum("sk,skn->sn", left, others) / np.where(lengths > EXACT, lengths, np.inf)
        missed = np.linalg.norm(
            left[:, :, None] - others * (along / np.where(lengths > EXACT, lengths, np.inf))[:, None, :], axis=1
        )
        sets, last = np.nonzero(missed <= EXACT * scale)
        later = last > (kept[sets, -1] if size > 1 else -1)
        found.append(np.column_stack([kept[sets[later]], last[later]]))
    return np.concatenate(found)


def _draw_sets(count: int, size: int, most: int) -> Iterator[IntArray]:
    """All sets of ``size`` of ``count`` positions, in chunks (m, size)."""
    sets = combinations(range(count), size)
    while chunk := list(islice(sets, most)):
        yield np.array(chunk, dtype=np.int64).reshape(len(chunk), size)


def _choose_set(columns: FloatArray, wanted: FloatArray, sets: IntArray) -> tuple[list[int], FloatArray]:
    """Of several sets the one of least Σ w², the first of equal ones."""
    inverses = np.linalg.pinv(np.moveaxis(columns[:, sets], 0, 1))
    weights = inverses @ wanted
    variances = np.sum(np.square(weights), axis=1)
    best = int(np.argmax(variances <= np.min(variances) * (1.0 + 1e-9)))
    return sets[best].tolist(), weights[best]


def _relax(columns: FloatArray, wanted: FloatArray) -> tuple[list[int], FloatArray]:
    count = columns.shape[1]
    solved = linprog(np.ones(2 * count), A_eq=np.hstack([columns, -columns]), b_eq=wanted, method="highs-ds")
    sizes = solved.x[:count] - solved.x[count:]
    chosen = np.flatnonzero(np.abs(sizes) > 1e-7 * np.max(np.abs(sizes)))
    weights: FloatArray = np.linalg.lstsq(columns[:, chosen], wanted, rcond=None)[0].astype(np.float64)
    return chosen.tolist(), weights


def _write_sum(directions: tuple[Direction, ...], weights: FloatArray) -> str:
    """ "1/2 y [101] − 1/2 y [10−1]": simple fractions as such, other weights with four digits."""
    parts = []
    for direction, weight in zip(directions, weights, strict=True):
        sign = "−" if weight < 0 else "+"
        parts.append(f"{sign} {_write_factor(abs(float(weight)))}y {_name(direction)}")
    text = " ".join(parts)
    return text[2:] if text.startswith("+ ") else "−" + text[2:]


def _write_factor(size: float) -> str:
    simple = Fraction(size).limit_denominator(12)
    if abs(float(simple) - size) > 1e-9 * size:
        return f"{size:.4f} "
    if simple == 1:
        return ""
    return f"{simple} "


def _name(direction: Direction) -> str:
    if direction.kind == "row" or direction.kind == "normal":
        return typeset_indices(format_indices(direction.kind, direction.values))
    return "(" + ", ".join(f"{value:.4g}" for value in direction.values) + ")"
