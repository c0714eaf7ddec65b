"""Which plane to sight next, so that the attitude is best known, and where it will be on the stage."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices
from app.crystal.lattice import compute_directions, list_indices
from app.cutting.attitude import Attitude, Sighting
from app.cutting.settings import Setting, find_settings
from app.cutting.stage import Axis

FloatArray = npt.NDArray[np.float64]

OUT_OF_PLANE: Final = 0.2
"""Sine of the angle out of the plane of the sightings from which a further one decides the hand."""


@dataclass(frozen=True)
class FurtherSighting:
    """A plane to sight.

    Attributes:
        form: its index form.
        setting: where it will be on the stage.
        gain: the largest variance of the attitude's turn over what it will be, along the worst axis.
        decides_hand: whether it lies out of the plane of the sightings so far.
    """

    form: str
    setting: Setting
    gain: float
    decides_hand: bool


def propose_sighting(
    crystal: Crystal,
    attitude: Attitude,
    sightings: Sequence[Sighting],
    axes: Sequence[Axis],
    sight: FloatArray,
    max_index: int = 2,
) -> FurtherSighting | None:
    """The low-index plane within the stage's reach that makes the worst-known turn best known; None without any.

    A sighting of n fixes the two turns across n: the information is Σ (1 − n nᵀ). Of two that serve alike the simpler
    plane is taken, and one that decides the hand before one that does not.
    """
    if crystal.M is None:
        return None
    seen = np.array([attitude.matrix @ crystal.resolve(sighting.direction) for sighting in sightings])
    information = np.sum(np.eye(3) - np.einsum("ni,nj->nij", seen, seen), axis=0)
    before = float(np.linalg.eigvalsh(information)[0])
    flat = len(seen) < 3 or float(np.linalg.svd(seen, compute_uv=False)[-1]) < 1e-6
    normal = np.linalg.svd(seen)[2][-1]
    indices = list_indices(max_index)
    planes = compute_directions(crystal, "normal", indices)
    ranked = []
    for place, plane in enumerate(planes):
        vector = attitude.matrix @ plane
        after = float(np.linalg.eigvalsh(information + np.eye(3) - np.outer(vector, vector))[0])
        out = flat and abs(float(vector @ normal)) > OUT_OF_PLANE
        # Simple planes reflect strongly; an index costs a little.
        score = after + (0.5 if out else 0.0) - 0.02 * float(np.sum(np.square(indices[place])))
        ranked.append((score, place, after, out))
    for _, place, after, out in sorted(ranked, key=lambda entry: -entry[0]):
        for sign in (1, -1):
            settings = find_settings(axes, sign * (attitude.matrix @ planes[place]), sight)
            if settings:
                form = format_indices("normal", (sign * indices[place]).tolist())
                return FurtherSighting(form, settings[0], after / max(before, 1e-9), out)
    return None
