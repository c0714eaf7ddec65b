"""A part on a substrate: by how much the two strain apart along every direction of the face between them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.consequences.azimuth import measure_turn
from app.errors import InputError
from app.tensor.estimate import Estimate

FloatArray = npt.NDArray[np.float64]

_ALIKE = 1e-12
"""Of the larger of both strains: below it, what is left of a difference is rounding."""


@dataclass(frozen=True)
class Mismatch:
    """The strain of a part less that of its substrate, in the face between them.

    Azimuths are degrees from the projected edge, right-handed about the face's normal; a line has no sense, so they
    run over −90 up to 90.

    Attributes:
        along, across: shape (3,), the unit vectors at the azimuths 0 and 90, in the crystal frame.
        matrix: shape (2, 2), the mismatch by these two axes.
        values: shape (2,), its largest and its smallest value over all azimuths.
        azimuths: shape (2,), where these are; None where all azimuths are alike.
        sigma: shape (2,), of the two values; None without covariance of the part.
        matched: shape (m,), azimuths without mismatch: two, one (where the smallest or largest is zero) or none.
        everywhere: whether no azimuth has a mismatch.
        difference: the strain of the part less that of the substrate, in the crystal frame.
    """

    along: FloatArray
    across: FloatArray
    matrix: FloatArray
    values: FloatArray
    azimuths: FloatArray | None
    sigma: FloatArray | None
    matched: FloatArray
    everywhere: bool
    difference: Estimate

    def at(self, azimuths: FloatArray) -> tuple[FloatArray, FloatArray | None]:
        """Mismatch sᵀ(ε_part − ε_substrate)s and its σ at azimuths (...) in degrees."""
        angles = np.deg2rad(azimuths)[..., None]
        lines = np.cos(angles) * self.along + np.sin(angles) * self.across
        plane = np.concatenate([np.cos(angles), np.sin(angles)], axis=-1)
        return np.einsum("...i,ij,...j->...", plane, self.matrix, plane), self.difference.value_sigma(lines)


def build_isotropic(value: float, sigma: float | None = None, frame: str = "") -> Estimate:
    """The expansion, or strain, of a glass, a metal or a cubic substrate."""
    flat = np.eye(3).ravel()
    covariance = None if sigma is None else sigma**2 * np.outer(flat, flat)
    return Estimate(value * np.eye(3), covariance, frame)


def compare_with_substrate(part: Estimate, substrate: Estimate, normal: FloatArray, edge: FloatArray) -> Mismatch:
    """Mismatch of a part on a substrate.

    Args:
        part, substrate: both expansions, or both strains, symmetric, in the crystal frame of the part (turn the
            substrate's first). Their errors count as independent, and a substrate without covariance as exact.
        normal: shape (3,), unit normal of the face between them, pointing out of the part's face that one looks at.
        edge: shape (3,), unit vector from whose projection on the face azimuths count.

    Raises:
        InputError: field ``edge``: along the normal.
    """
    crossed = np.cross(normal, edge)
    if measure_turn(normal, normal, edge) is None:
        raise InputError(
            "The edge is along the normal of the face, so it has no direction on it.",
            field="edge",
            hint="Name an edge at an angle to the normal.",
        )
    across = crossed / np.linalg.norm(crossed)
    along = np.cross(across, normal)
    covariance = part.covariance
    if covariance is not None and substrate.covariance is not None:
        covariance = covariance + substrate.covariance
    difference = Estimate(part.matrix - substrate.matrix, covariance, part.frame)
    plane = np.array([along, across])
    matrix = plane @ difference.matrix @ plane.T
    matrix = (matrix + matrix.T) / 2.0
    scale = max(float(np.max(np.abs(part.matrix))), float(np.max(np.abs(substrate.matrix))))
    mean = float(matrix[0, 0] + matrix[1, 1]) / 2.0
    cosine, sine = float(matrix[0, 0] - matrix[1, 1]) / 2.0, float(matrix[0, 1])
    amplitude = float(np.hypot(cosine, sine))
    # mean + amplitude · cos 2(ψ − ψ₀).
    top = np.rad2deg(np.arctan2(sine, cosine)) / 2.0
    azimuths = None if amplitude <= _ALIKE * scale else _wrap(np.array([top, top + 90.0]))
    extremes = np.deg2rad(np.array([top, top + 90.0]))[:, None]
    sigma = difference.value_sigma(np.cos(extremes) * along + np.sin(extremes) * across)
    matched = np.zeros(0)
    if azimuths is not None and abs(mean) <= amplitude + _ALIKE * scale:
        half = np.rad2deg(np.arccos(np.clip(-mean / amplitude, -1.0, 1.0))) / 2.0
        touching = amplitude - abs(mean) <= _ALIKE * scale
        matched = _wrap(np.array([top + half] if touching else [top - half, top + half]))
    return Mismatch(
        along=along,
        across=across,
        matrix=matrix,
        values=np.array([mean + amplitude, mean - amplitude]),
        azimuths=azimuths,
        sigma=sigma,
        matched=matched,
        everywhere=azimuths is None and abs(mean) <= _ALIKE * scale,
        difference=difference,
    )


def _wrap(azimuths: FloatArray) -> FloatArray:
    """Degrees over −90 up to 90."""
    wrapped: FloatArray = 90.0 - np.mod(90.0 - azimuths, 180.0)
    return wrapped
