"""What a plane section shows: directions in it that have a value, and planes in which all directions have one value.

In a plane nᵀAn goes as the cosine of twice the azimuth, so at most two directions, up to their sign, have a value.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from app.cutting.level import EQUAL, EVERYWHERE, Locus, find_level, split_symmetric
from app.cutting.meeting import TOUCH, collect
from app.cutting.track import Track, build_track
from app.tensor.conic import find_conics
from app.tensor.region_shapes import find_plane_axes

FloatArray = npt.NDArray[np.float64]


def build_great_circle(normal: FloatArray) -> Track:
    """All directions across a unit vector (3,)."""
    first, second = find_plane_axes(np.zeros((3, 3)), normal)
    return build_track(find_conics(np.array([1.0, 0.0, 0.0]), np.array([normal, first, second])))


def find_level_in_plane(matrix: FloatArray, value: float, normal: FloatArray) -> Locus:
    """The directions across a unit vector (3,) along which the tensor (3, 3) has a value: none, one, two or all."""
    level = find_level(matrix, value)
    track = build_great_circle(normal)
    if level.locus.is_empty:
        return level.locus
    chosen = track.choose(level.form, 0.0, TOUCH)
    return Locus((track,), chosen.points) if chosen.whole else collect([], list(chosen.points))


def find_even_planes(matrix: FloatArray) -> Locus:
    """Normals of the planes in which nᵀAn is the same along all directions (3, 3).

    These are the circular sections: of a uniaxial tensor the one across its axis, of a biaxial one two that share the
    axis of the middle value, of an isotropic one all.
    """
    _, deviator, _ = split_symmetric(matrix)
    if not np.any(deviator):
        return EVERYWHERE
    values = np.linalg.eigvalsh(deviator)
    tracks = find_level(deviator, float(values[1])).locus.tracks
    return collect([], [track.normal for track in tracks])


def find_parallel_flux(matrix: FloatArray) -> Locus:
    """Directions n along which the flux A n is along the gradient n, or opposite to it, or none.

    Of a symmetric tensor these are its principal axes, whole planes where two values are equal; of any other the real
    eigenvectors, at least one.

    Args:
        matrix: shape (3, 3), with its antisymmetric part.
    """
    scaled = matrix / (float(np.max(np.abs(matrix))) or 1.0)
    deviator = scaled - np.eye(3) * np.trace(scaled) / 3.0
    size = float(np.max(np.abs(deviator)))
    if size <= 1e-13:
        return EVERYWHERE
    deviator = deviator / size
    eigenvalues = np.linalg.eigvals(deviator)
    # A double value may come out as a pair √ε apart, on the real line or off it.
    real = np.sort(eigenvalues.real[np.abs(eigenvalues.imag) <= 1e-7])
    tracks: list[Track] = []
    lines: list[FloatArray] = []
    for index, value in enumerate(real):
        if index and value - real[index - 1] <= EQUAL:
            continue
        _, sizes, vectors = np.linalg.svd(deviator - value * np.eye(3))
        if sizes[1] <= 1e-7:
            tracks.append(build_great_circle(vectors[0]))
        else:
            lines.append(vectors[2])
    return collect(tracks, lines)
