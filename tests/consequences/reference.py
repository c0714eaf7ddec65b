"""Plane waves from Maxwell's equations alone, in fifty digits: an independent way to everything in the optics.

For a plane wave with the wave vector k (in units of 2π/λ) Maxwell's equations without currents read k × H = −D,
k × E = H, so (|k|² 1 − k kᵀ) E = ε E. Neither the impermeability nor the optic axes are used.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from mpmath import mp, mpf, polyroots

FloatArray = npt.NDArray[np.float64]
DIGITS = 50


def wave_determinant(permittivity: Any, vector: Any) -> Any:
    """det(|k|² 1 − k kᵀ − ε), zero where a wave of this wave vector exists (Fresnel's equation)."""
    with mp.workdps(DIGITS):
        k = mp.matrix([mpf(part) for part in vector])
        square = sum(part**2 for part in k)
        return mp.det(square * mp.eye(3) - k * k.T - mp.matrix(permittivity))


def find_normal_parts(permittivity: FloatArray, normal: FloatArray, along_face: FloatArray) -> list[Any]:
    """The four roots κ of Fresnel's equation for k = along_face + κ normal, ascending by their real parts."""
    with mp.workdps(DIGITS):
        places = [mpf(place) for place in range(-2, 3)]
        k = [
            [mpf(float(a)) + place * mpf(float(n)) for a, n in zip(along_face, normal, strict=True)] for place in places
        ]
        epsilon = [[mpf(float(cell)) for cell in row] for row in permittivity]
        values = mp.matrix([wave_determinant(epsilon, vector) for vector in k])
        powers = mp.matrix(5, 5)
        for row, place in enumerate(places):
            for power in range(5):
                powers[row, power] = place**power
        coefficients = mp.lu_solve(powers, values)
        roots = polyroots(list(reversed(list(coefficients))), maxsteps=500, extraprec=400)
        return sorted(roots, key=lambda root: mp.re(root))


def find_indices(permittivity: FloatArray, normal: FloatArray) -> list[float]:
    """Both indices of a wave normal, the larger first."""
    with mp.workdps(DIGITS):
        length = mp.sqrt(sum(mpf(float(part)) ** 2 for part in normal))
        roots = find_normal_parts(permittivity, normal, np.zeros(3))
        return [float(mp.re(root) * length) for root in reversed(roots[2:])]


def find_fields(permittivity: FloatArray, normal: FloatArray, index: float) -> tuple[FloatArray, FloatArray]:
    """Unit D and unit ray of the wave with this index: E from the null space, the ray across E and H."""
    k = index * normal
    matrix = index**2 * np.eye(3) - np.outer(k, k) - permittivity
    electric = np.linalg.svd(matrix)[2][2]
    displacement = permittivity @ electric
    magnetic = np.cross(k, electric)
    ray = np.cross(electric, magnetic)
    return displacement / np.linalg.norm(displacement), ray / np.linalg.norm(ray)


def build_permittivity(indices: Any, axes: FloatArray) -> FloatArray:
    """ε with these principal indices along the rows of ``axes``."""
    return (axes.T * np.square(np.asarray(indices, dtype=np.float64))) @ axes
