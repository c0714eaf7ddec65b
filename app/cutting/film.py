"""Laue spots on a flat film or plate, and the plane normals that made them.

The beam runs along laboratory X; the film stands square to it, behind the crystal (transmission) or before it, between
source and crystal (back reflection). Spots are read as x to the right and y up, looking along the beam; with Z up and Y
to the left of the beam a spot lies at (±distance, −x, y). The normal halves the angle between the ray that leaves and
the beam reversed: n ∝ s_out − s_in (B. D. Cullity, Elements of X-Ray Diffraction, ch. 8; from memory).
"""

from __future__ import annotations

from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]
Side = Literal["back", "front"]

BEAM: Final = np.array([1.0, 0.0, 0.0])
STRAIGHT: Final = 1e-9


def find_normals(spots: npt.ArrayLike, distance: float, side: Side) -> FloatArray:
    """Plane normals (m, 3), laboratory, of spots (m, 2) in the unit of the distance.

    Raises:
        InputError: at ``distance`` or ``spots[i]``: not above zero, not finite, or a spot on the beam itself.
    """
    if not (np.isfinite(distance) and distance > 0):
        raise InputError("The distance from crystal to film is above zero.", field="distance")
    places = np.asarray(spots, dtype=np.float64).reshape(-1, 2)
    if not np.all(np.isfinite(places)):
        raise InputError("A spot is two finite numbers.", field="spots")
    along = np.full(len(places), distance if side == "front" else -distance)
    rays = np.stack([along, -places[:, 0], places[:, 1]], axis=1)
    rays /= np.linalg.norm(rays, axis=1)[:, None]
    normals = rays - BEAM
    sizes = np.linalg.norm(normals, axis=1)
    if np.any(sizes < STRAIGHT):
        place = int(np.argmin(sizes))
        raise InputError(
            "A spot on the beam itself is no reflection.", field=f"spots[{place}]", hint="Leave the primary beam out."
        )
    unit: FloatArray = normals / sizes[:, None]
    return unit


def place_spots(normals: FloatArray, distance: float, side: Side) -> FloatArray:
    """Where plane normals (m, 3) throw the beam on the film, shape (m, 2); NaN where they miss it."""
    along = normals @ BEAM
    rays = BEAM - 2.0 * along[:, None] * normals
    toward = rays[:, 0] if side == "front" else -rays[:, 0]
    reaches = toward > 1e-6
    scale = np.where(reaches, distance / np.where(reaches, toward, 1.0), np.nan)
    spots: FloatArray = np.stack([-rays[:, 1] * scale, rays[:, 2] * scale], axis=1)
    return spots
