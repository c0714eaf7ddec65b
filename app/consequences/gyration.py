"""How far an optically active crystal turns the plane of polarisation along a direction.

With the gyration g, an axial tensor, the scalar of the wave normal n is G = nᵀgn and the rotation per length is
ρ = π G / (λ n̄), λ the wavelength in vacuum and n̄ the mean index of the two waves (J. F. Nye, Physical Properties of
Crystals, ch. XIV, from memory). Off the optic axes birefringence covers it: the vibrations are ellipses, and ρ is what
would be seen without birefringence. In a crystal of the other hand every G has the other sign.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.estimate import Estimate

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Rotation:
    """Rotation along one direction.

    Attributes:
        scalar, scalar_sigma: G = nᵀgn.
        power, power_sigma: degrees per millimetre for the hand that the tensor is of; the other hand has −power.
            Its sense is the one that whoever gave g takes as positive.
    """

    scalar: float
    scalar_sigma: float | None
    power: float
    power_sigma: float | None


def compute_rotation(gyration: Estimate, direction: FloatArray, wavelength: float, index: float) -> Rotation:
    """Rotatory power along a unit vector.

    Args:
        gyration: g without unit.
        direction: shape (3,), unit wave normal in the tensor's frame.
        wavelength: in vacuum, nm.
        index: mean refractive index of the two waves.

    Raises:
        InputError: wavelength or index not above zero.
    """
    for name, value in (("wavelength", wavelength), ("index", index)):
        if not (value > 0.0 and np.isfinite(value)):
            raise InputError(f"The {name} is a finite number above zero.", field=name)
    scalar = float(direction @ gyration.matrix @ direction)
    found = gyration.value_sigma(direction)
    sigma = None if found is None else float(found)
    # π G/(λ n̄) is in radians per length; 180°/π turns it into degrees, 10⁶ nm are a millimetre.
    factor = 180.0 * 1e6 / (wavelength * index)
    return Rotation(scalar, sigma, factor * scalar, None if sigma is None else factor * sigma)


def describe_hand(rotations: FloatArray) -> str:
    """Whether crystals of the group come in two hands, from its operations as orthogonal matrices (n, 3, 3)."""
    if np.all(np.linalg.det(rotations) > 0):
        return (
            "Crystals of this group come in two hands: the other one turns the other way along every direction. "
            "Which hand this one has is not told by X-ray Laue work."
        )
    return "This group has operations of the second kind: one crystal turns both ways, by the direction of the light."
