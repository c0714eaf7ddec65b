"""Indices for sighted normals that have none: by their mutual angles against the cell, all assignments ranked."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices
from app.crystal.lattice import compute_directions, list_indices
from app.cutting.attitude import compute_rms, fit_rotation, measure_angles
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

HIGHEST_INDEX: Final = 5
MOST_NORMALS: Final = 60
MOST_PAIRS: Final = 8_000
MOST_WORK: Final = 1e8
"""Turns times spots times planes: of very many, the turns whose two angles fit best are tried. 1e8 takes seconds."""
PAIRS_TRIED: Final = 5
SAME_TURN: Final = 0.2
"""Degrees within which two rotations are one."""
BEST: Final = 24


@dataclass(frozen=True)
class Indexing:
    """One way to index the normals.

    Attributes:
        matrix: U, v_lab = U v_crystal, proper, fitted to the indexed normals.
        forms: index form of each normal; None where none is within the tolerance.
        residuals: shape (m,), degrees; NaN where there is none.
        matched: how many have an index.
        rms: of these, degrees.
        size: the mean of h² + k² + l², for preferring simple indices.
    """

    matrix: FloatArray
    forms: tuple[str | None, ...]
    residuals: FloatArray
    matched: int
    rms: float
    size: float


def index_normals(
    crystal: Crystal, normals: FloatArray, *, tolerance: float = 1.0, max_index: int = 3
) -> list[Indexing]:
    """Assignments of plane indices, those that explain most normals first, then the better fit, then simpler indices.

    A reflection does not tell n from −n, so either sense is tried; of assignments that the proper operations of the
    group make one only the first stays.

    Args:
        crystal: with a cell.
        normals: shape (m, 3), unit vectors, laboratory, two or more.
        tolerance: degrees by which a normal may be off, above zero.
        max_index: 1 to 5.

    Raises:
        InputError: fewer than two independent normals, or an argument out of range.
    """
    if not 1 <= max_index <= HIGHEST_INDEX:
        raise InputError(f"The largest index is from 1 to {HIGHEST_INDEX}.", field="max_index")
    if not (np.isfinite(tolerance) and 0 < tolerance <= 10):
        raise InputError("The tolerance is above 0 and at most 10 degrees.", field="tolerance")
    if not 2 <= len(normals) <= MOST_NORMALS or float(np.linalg.svd(normals, compute_uv=False)[1]) < 1e-3:
        raise InputError(
            f"Indexing needs two to {MOST_NORMALS} spots, not all of one plane.",
            field="spots",
            hint="Read another spot, well away from these.",
        )
    indices = list_indices(max_index)
    lines = compute_directions(crystal, "normal", indices)
    every, signs = np.concatenate([lines, -lines]), np.concatenate([indices, -indices])
    found: list[Indexing] = []
    for turn in _list_turns(crystal, normals, every, len(lines), tolerance):
        indexed = _index_by(turn, normals, every, signs, tolerance)
        if indexed.matched >= 2:
            found.append(indexed)
    found.sort(key=lambda entry: (-entry.matched, round(entry.rms, 6), entry.size))
    return _merge(crystal, found)


def _list_turns(
    crystal: Crystal, normals: FloatArray, every: FloatArray, half: int, tolerance: float
) -> list[FloatArray]:
    """Rotations that bring two planes onto two of the normals: of several pairs, the nearest to a right angle, so that
    one wrong spot does not spoil all."""
    cosines = np.abs(normals @ normals.T)
    one, two = np.triu_indices(len(normals), 1)
    order = np.argsort(cosines[one, two], kind="stable")[:PAIRS_TRIED]
    # A first plane stands for all that a proper operation makes equal to it.
    first = _list_representatives(crystal, every, half)
    angles = measure_angles(every[first][:, None], every[None, :])
    most = min(MOST_PAIRS, int(MOST_WORK / (len(normals) * len(every)))) // len(order)
    turns: list[FloatArray] = []
    for place in order.tolist():
        seen = normals[[one[place], two[place]]]
        wanted = float(measure_angles(seen[0], seen[1]))
        pairs = np.argwhere(np.abs(angles - wanted) <= 2.0 * tolerance)
        misses = np.abs(angles[pairs[:, 0], pairs[:, 1]] - wanted)
        pairs = pairs[np.argsort(misses, kind="stable")][:most]
        turns += [fit_rotation(every[[first[a], b]], seen, np.ones(2)) for a, b in pairs.tolist()]
    return turns


def _list_representatives(crystal: Crystal, every: FloatArray, half: int) -> list[int]:
    proper = crystal.rotations[np.linalg.det(crystal.rotations) > 0]
    chosen: list[int] = []
    taken = np.zeros(len(every), dtype=bool)
    for place in range(len(every)):
        if taken[place]:
            continue
        chosen.append(place)
        images = proper @ every[place]
        taken |= np.any(images @ every.T > 1.0 - 1e-9, axis=0)
    return chosen


def _index_by(
    turn: FloatArray, normals: FloatArray, every: FloatArray, signs: npt.NDArray[np.int64], tolerance: float
) -> Indexing:
    """Every normal with the nearest plane, the rotation fitted to all that are near enough, and once more."""
    for _ in range(2):
        inside = normals @ turn
        nearest = np.argmax(inside @ every.T, axis=1)
        off = measure_angles(inside, every[nearest])
        good = off <= tolerance
        if int(np.sum(good)) < 2:
            break
        turn = fit_rotation(every[nearest[good]], normals[good], np.ones(int(np.sum(good))))
    off = measure_angles(normals @ turn, every[nearest])
    good = off <= tolerance
    forms = tuple(
        format_indices("normal", signs[nearest[place]].tolist()) if good[place] else None
        for place in range(len(normals))
    )
    matched = int(np.sum(good))
    size = float(np.mean(np.sum(signs[nearest[good]] ** 2, axis=1))) if matched else np.inf
    rms = compute_rms(off[good], np.ones(matched)) if matched else np.inf
    return Indexing(turn, forms, np.where(good, off, np.nan), matched, rms, size)


def _merge(crystal: Crystal, found: list[Indexing]) -> list[Indexing]:
    """One of those that are the same attitude, relabelled by a proper operation."""
    proper = crystal.rotations[np.linalg.det(crystal.rotations) > 0]
    kept: list[Indexing] = []
    limit = 1.0 + 2.0 * np.cos(np.deg2rad(SAME_TURN))
    for entry in found:
        relabelled = entry.matrix @ proper
        if any(float(np.max(np.einsum("gij,ij->g", relabelled, other.matrix))) > limit for other in kept):
            continue
        kept.append(entry)
        if len(kept) == BEST:
            break
    return kept
