"""How the crystal sits on the stage, from directions that were brought to known places: sightings.

Wahba's problem, solved by the singular value decomposition (F. L. Markley, J. Astronaut. Sci. 36 (1988) 245): the
proper rotation U that makes Σ w |seen − U direction|² least.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.cutting.equivalents import Equivalent, list_equivalents
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]
Hand = Literal["right", "mirror fits better", "cannot tell"]

INDEPENDENT: Final = 1e-6
"""Sine of the angle below which two directions are one, and directions lie in one plane."""
AS_WELL: Final = 0.05
"""Degrees of rms by which another assignment may be worse and still fits as well."""
MOST_ASSIGNMENTS: Final = 500
MOST_STEPS: Final = 20_000
COMPARED: Final = 5
"""So many earlier sightings are compared with before a fit decides."""


@dataclass(frozen=True)
class Sighting:
    """A crystal direction and where it was seen.

    Attributes:
        direction: as typed.
        seen: unit vector in the laboratory with every stage axis at zero.
        weight: above zero, inverse variance up to a factor.
    """

    direction: Direction
    seen: FloatArray
    weight: float = 1.0


@dataclass(frozen=True)
class Assignment:
    """Another choice of equivalent directions that fits as well.

    Attributes:
        forms: the direction taken for each sighting.
        rms: of its fit, degrees.
        equivalent: whether one proper operation of the group leads to it, so that it is the same crystal, relabelled.
    """

    forms: tuple[Any, ...]
    rms: float
    equivalent: bool


@dataclass(frozen=True)
class Attitude:
    """The rotation from the crystal to the laboratory, stage at zero.

    Attributes:
        matrix: U, shape (3, 3), proper: v_lab = U v_crystal.
        residuals: shape (n,), degrees between each seen and computed place.
        rms: their weighted root mean square, degrees.
        pairs: (i, j) in the order 01, 02, 12, ….
        measured, computed: angles of the pairs, degrees, as seen and from the cell.
        hand: whether the sightings are those of the crystal or rather of its mirror image.
        ambiguous: other assignments that fit as well, best first.
        notes: what to keep in mind.
    """

    matrix: FloatArray
    residuals: FloatArray
    rms: float
    pairs: tuple[tuple[int, int], ...]
    measured: FloatArray
    computed: FloatArray
    hand: Hand
    ambiguous: tuple[Assignment, ...]
    notes: tuple[str, ...]


def find_attitude(crystal: Crystal, sightings: Sequence[Sighting]) -> Attitude:
    """The least-squares rotation of two or more sightings, with what speaks against it.

    Raises:
        InputError: fewer than two independent directions, on the crystal or in the laboratory; or a weight that is not
            above zero.
    """
    for index, sighting in enumerate(sightings):
        if not (np.isfinite(sighting.weight) and sighting.weight > 0):
            raise InputError("A weight is above zero.", field=f"sightings[{index}].weight")
    directions = np.array([crystal.resolve(sighting.direction) for sighting in sightings]).reshape(-1, 3)
    seen = np.array([sighting.seen for sighting in sightings]).reshape(-1, 3)
    weights = np.array([sighting.weight for sighting in sightings])
    _require_two(directions, "the crystal's directions are")
    _require_two(seen, "the places where they were seen are")
    matrix = fit_rotation(directions, seen, weights)
    residuals = measure_angles(directions @ matrix.T, seen)
    rms = compute_rms(residuals, weights)
    pairs = tuple(sorted(combinations(range(len(sightings)), 2), key=lambda pair: (pair[1], pair[0])))
    first, second = ([pair[side] for pair in pairs] for side in (0, 1))
    hand = _judge_hand(directions, seen, weights, rms)
    ambiguous, complete = _list_ambiguous(crystal, sightings, seen, weights, rms)
    return Attitude(
        matrix,
        residuals,
        rms,
        pairs,
        measure_angles(seen[first], seen[second]),
        measure_angles(directions[first], directions[second]),
        hand,
        ambiguous,
        tuple(_list_notes(crystal, sightings, hand, complete)),
    )


def fit_rotation(directions: FloatArray, seen: FloatArray, weights: FloatArray, *, proper: bool = True) -> FloatArray:
    """The proper (or the improper) orthogonal matrix that carries directions (n, 3) nearest to seen (n, 3)."""
    left, _, right = np.linalg.svd(np.einsum("n,ni,nj->ij", weights / np.sum(weights), seen, directions))
    sign = float(np.sign(np.linalg.det(left) * np.linalg.det(right)))
    matrix: FloatArray = left @ np.diag([1.0, 1.0, sign if proper else -sign]) @ right
    return matrix


def measure_angles(first: FloatArray, second: FloatArray) -> FloatArray:
    """Degrees between unit vectors (..., 3), exact also where they are small."""
    across = np.linalg.norm(np.cross(first, second), axis=-1)
    angles: FloatArray = np.rad2deg(np.arctan2(across, np.sum(first * second, axis=-1)))
    return angles


def compute_rms(residuals: FloatArray, weights: FloatArray) -> float:
    """Weighted root mean square."""
    return float(np.sqrt(np.sum(weights * residuals**2) / np.sum(weights)))


def _require_two(vectors: FloatArray, what: str) -> None:
    if len(vectors) < 2:
        raise InputError(
            "One sighting leaves the turn about it open.",
            field="sightings",
            hint="Bring a second direction, not parallel to the first, to a known place.",
        )
    if float(np.linalg.svd(vectors, compute_uv=False)[1]) < INDEPENDENT:
        raise InputError(
            f"Fewer than two independent sightings: {what} all parallel.",
            field="sightings",
            hint="Add a sighting of a direction that is not parallel to these.",
        )


def _judge_hand(directions: FloatArray, seen: FloatArray, weights: FloatArray, rms: float) -> Hand:
    if float(np.linalg.svd(directions, compute_uv=False)[-1]) < INDEPENDENT or len(directions) < 3:
        return "cannot tell"
    mirrored = fit_rotation(directions, seen, weights, proper=False)
    other = compute_rms(measure_angles(directions @ mirrored.T, seen), weights)
    return "mirror fits better" if other < rms else "right"


def _list_ambiguous(
    crystal: Crystal, sightings: Sequence[Sighting], seen: FloatArray, weights: FloatArray, rms: float
) -> tuple[tuple[Assignment, ...], bool]:
    """Assignments of equivalent directions that fit as well, and whether the search went to its end."""
    choices = [list_equivalents(crystal, sighting.direction) for sighting in sightings]
    vectors = [np.array([choice.vector for choice in group]) for group in choices]
    # Residuals within the limit of rms bound how far an angle of a pair can be off.
    share = np.sqrt(np.sum(weights) / weights)
    between = measure_angles(seen[:, None], seen[None, :])
    found: list[tuple[int, ...]] = []
    waiting: list[tuple[int, ...]] = [()]
    steps = 0
    while waiting and steps < MOST_STEPS and len(found) <= MOST_ASSIGNMENTS:
        taken = waiting.pop()
        place = len(taken)
        if place == len(choices):
            found.append(taken)
            continue
        steps += 1
        fits = np.ones(len(vectors[place]), dtype=bool)
        for earlier, chosen in enumerate(taken[:COMPARED]):
            angles = measure_angles(vectors[place], vectors[earlier][chosen])
            slack = (rms + AS_WELL) * (share[place] + share[earlier])
            fits &= np.abs(angles - between[place, earlier]) <= slack + 1e-9
        waiting += [(*taken, int(choice)) for choice in np.flatnonzero(fits)[::-1]]
    assignments = []
    for taken in found:
        if not any(taken):
            continue
        assigned = np.array([vectors[place][choice] for place, choice in enumerate(taken)])
        fitted = fit_rotation(assigned, seen, weights)
        fit = compute_rms(measure_angles(assigned @ fitted.T, seen), weights)
        if fit <= rms + AS_WELL:
            forms = tuple(choices[place][choice].form for place, choice in enumerate(taken))
            assignments.append(Assignment(forms, fit, _is_relabelling(crystal, choices, assigned)))
    assignments.sort(key=lambda entry: round(entry.rms, 9))
    return tuple(assignments[:MOST_ASSIGNMENTS]), not waiting


def _is_relabelling(crystal: Crystal, choices: list[list[Equivalent]], assigned: FloatArray) -> bool:
    """Whether one proper operation carries every direction as typed to the one assigned."""
    typed = np.array([group[0].vector for group in choices])
    proper = crystal.rotations[np.linalg.det(crystal.rotations) > 0]
    moved = np.einsum("gij,nj->gni", proper, typed)
    return bool(np.any(np.max(np.abs(moved - assigned), axis=(1, 2)) < 1e-6))


def _list_notes(crystal: Crystal, sightings: Sequence[Sighting], hand: Hand, complete: bool) -> list[str]:
    notes = []
    if hand == "cannot tell":
        notes.append(
            "All sightings lie in one plane through the origin, so they do not tell the crystal from its mirror image; "
            "sight a direction out of that plane."
        )
    if hand == "mirror fits better":
        notes.append(
            "The mirror image of the crystal fits better: look for an index with the wrong sign, or a reversed dial."
        )
    if any(sighting.direction.kind == "normal" for sighting in sightings):
        notes.append(
            "A reflection does not tell n from −n (Friedel's law): whether a normal points the way that was typed must "
            "come from elsewhere, from the outer form or an etch for one."
        )
    if crystal.group.limiting:
        notes.append("A limiting group makes whole cones of directions equal; such assignments are not listed.")
    if not complete:
        notes.append(
            f"There are more than {MOST_ASSIGNMENTS} assignments to try; the list of equal ones is not complete."
        )
    return notes
