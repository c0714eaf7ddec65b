"""A weakly magnetic crystal in a uniform field: magnetisation, torque, and the direction that it settles in.

The magnetisation of a field H h (h a unit vector) is H χ h, the torque of unit volume μ₀ H² (χ h) × h. With h turned in
the plane of u and v (w = u × v) by φ from u toward v, the torque about w is
μ₀ H² [½ (χuu − χvv) sin 2φ − χuv cos 2φ], so its amplitude is ½ √((χuu − χvv)² + 4 χuv²) in units of μ₀ H²
(J. F. Nye, Physical Properties of Crystals, ch. III, from memory). The energy of unit volume is −½ μ₀ H² hᵀχh: a
crystal that is free to turn brings its direction of largest (algebraic) susceptibility into the field, in a diamagnetic
crystal the one that is least repelled. The specimen's own field is left out, as it may be for |χ| far below 1.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import Principal, find_principal

FloatArray = npt.NDArray[np.float64]

MAGNETIC_CONSTANT: Final = 1.25663706127e-6
"""μ₀ in N/A² (CODATA 2022, from memory; 4π·10⁻⁷ to nine digits)."""

LARGEST_SUSCEPTIBILITY: Final = 0.1
"""Beyond it the specimen's own field changes the result in the first digits."""

_ALIKE: Final = 1e-12


@dataclass(frozen=True)
class Torque:
    """The torque while the field turns in a plane, in units of μ₀ H² and of unit volume.

    Attributes:
        amplitude, sigma: ½ √((χuu − χvv)² + 4 χuv²); σ None without covariance, NaN where the plane shows none.
        easy: unit vector in the plane along which the field is at rest stably, shape (3,); None where no direction of
            the plane differs from another.
        azimuth: of ``easy`` from u toward v, degrees over −90 up to 90; None where there is none.
    """

    amplitude: float
    sigma: float | None
    easy: FloatArray | None
    azimuth: float | None


@dataclass(frozen=True)
class Magnetised:
    """A field along one direction.

    Attributes:
        along, along_sigma: hᵀχh.
        magnetisation: χ h, shape (3,), in units of H.
        angle: degrees between magnetisation and field; None where there is no magnetisation.
        torque: (χ h) × h, shape (3,), in units of μ₀ H².
    """

    along: float
    along_sigma: float | None
    magnetisation: FloatArray
    angle: float | None
    torque: FloatArray


def check_susceptibility(matrix: FloatArray) -> None:
    """Refuse a susceptibility so large that the specimen's own field counts.

    Raises:
        InputError: a cell above LARGEST_SUSCEPTIBILITY, or a matrix that is not symmetric.
    """
    size = float(np.max(np.abs(matrix)))
    if size > LARGEST_SUSCEPTIBILITY:
        raise InputError(
            f"A susceptibility of {size:.3g} is no small number: the specimen's own field then depends on its shape.",
            hint=f"These formulas hold for cells up to {LARGEST_SUSCEPTIBILITY:g}. Check the unit.",
        )
    if float(np.max(np.abs(matrix - matrix.T))) > 1e-9 * size:
        raise InputError("A susceptibility is symmetric, and this tensor is not.")


def magnetise(estimate: Estimate, direction: FloatArray) -> Magnetised:
    """What a field along a unit vector (3,) does; susceptibility of unit volume, SI, in the frame of the vector."""
    check_susceptibility(estimate.matrix)
    magnetisation = estimate.matrix @ direction
    size = float(np.linalg.norm(magnetisation))
    torque = np.cross(magnetisation, direction)
    angle = None
    if size > 0.0:
        angle = float(np.rad2deg(np.arctan2(np.linalg.norm(torque), magnetisation @ direction)))
    sigma = estimate.value_sigma(direction)
    return Magnetised(
        float(direction @ magnetisation), None if sigma is None else float(sigma), magnetisation, angle, torque
    )


def turn_in_plane(estimate: Estimate, normal: FloatArray, edge: FloatArray) -> Torque:
    """The torque about a plane's normal while the field turns in the plane.

    Args:
        estimate: susceptibility of unit volume, SI.
        normal: shape (3,), unit vector w.
        edge: shape (3,), from whose projection on the plane azimuths count, right-handed about the normal.

    Raises:
        InputError: an edge along the normal, or a susceptibility that is not small or not symmetric.
    """
    check_susceptibility(estimate.matrix)
    u = edge - normal * float(edge @ normal)
    length = float(np.linalg.norm(u))
    if length < 1e-9 * float(np.linalg.norm(edge)):
        raise InputError("The edge is along the plane's normal, so it has no direction in the plane.", field="edge")
    u = u / length
    v = np.cross(normal, u)
    matrix = estimate.matrix
    difference, double = float(u @ matrix @ u - v @ matrix @ v), 2.0 * float(u @ matrix @ v)
    size = float(np.hypot(difference, double))
    if size <= _ALIKE * float(np.max(np.abs(matrix))):
        return Torque(0.0, None if estimate.covariance is None else np.nan, None, None)
    azimuth = float(np.arctan2(double, difference)) / 2.0
    easy = np.cos(azimuth) * u + np.sin(azimuth) * v
    along = (difference * (np.outer(u, u) - np.outer(v, v)) + double * (np.outer(u, v) + np.outer(v, u))) / size
    sigma = estimate.propagate(along.ravel() / 2.0)
    return Torque(size / 2.0, None if sigma is None else float(sigma), easy, float(np.rad2deg(azimuth)))


def find_easy_direction(estimate: Estimate) -> tuple[Principal, bool]:
    """Principal axes, of which the first (of the largest value) is the easy one, and whether it is one direction."""
    check_susceptibility(estimate.matrix)
    principal = find_principal(estimate)
    return principal, not principal.arbitrary[0]
