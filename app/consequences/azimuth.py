"""Directions on a face, told by their angle from the projection of a named edge."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from app.tensor.pose import PARALLEL_LIMIT

FloatArray = npt.NDArray[np.float64]


def measure_turn(vector: FloatArray, normal: FloatArray, edge: FloatArray) -> float | None:
    """Angle from an edge, projected on a face, to a vector in the face: degrees, over −180 up to 180.

    Args:
        vector: shape (3,), across the normal.
        normal: shape (3,), unit outward normal; the angle is right-handed about it.
        edge: shape (3,), unit vector.

    Returns:
        the angle; None where the edge stands on the face and leaves no projection.
    """
    crossed = np.cross(normal, edge)
    if np.linalg.norm(crossed) <= PARALLEL_LIMIT:
        return None
    # n × edge is as long as the projected edge and a quarter-turn ahead of it.
    along = -np.cross(normal, crossed)
    angle = float(np.rad2deg(np.arctan2(vector @ crossed, vector @ along)))
    return 180.0 if angle <= -180.0 else angle


def measure_azimuth(line: FloatArray, normal: FloatArray, edge: FloatArray) -> float | None:
    """The same for a line, which has no sense: degrees, over −90 up to 90."""
    angle = measure_turn(line, normal, edge)
    if angle is None:
        return None
    if angle > 90.0:
        return angle - 180.0
    return angle + 180.0 if angle <= -90.0 else angle
