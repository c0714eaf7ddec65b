"""The two waves of one wave normal: indices, vibrations of D, rays and their walk-off, each with its uncertainty.

E = B D with B = ε⁻¹. For a wave normal n the two D lie across n and are eigenvectors of B seen across n, with the
eigenvalues 1/n²; the ray is across E, so it leaves the normal by the angle between E and D,
tan ρ = |nᵀB d| / (dᵀB d) (M. Born and E. Wolf, Principles of Optics, 7th ed., section 15.2, from memory).
By first order, δ(dᵀB d) = −(B d)ᵀ δε (B d).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.consequences.indicatrix import Indicatrix, find_waves
from app.tensor.estimate import Estimate

FloatArray = npt.NDArray[np.float64]

HELD: Final = 1e-9
"""A standard deviation below this part of the largest one is none: symmetry holds the difference at zero."""


@dataclass(frozen=True)
class Refraction:
    """The two waves of a wave normal, the slow one (of larger index) first.

    Attributes:
        normal: shape (3,), unit vector in the crystal frame.
        indices: shape (2,).
        vibrations: shape (2, 3), unit vectors of D across the normal, up to their sense; None where every direction
            across the normal will do, that is along an optic axis and in an isotropic crystal.
        rays: shape (2, 3), unit vectors of the flow of energy; None along an optic axis of a biaxial crystal.
        walk_off: shape (2,), degrees between ray and wave normal; None along an optic axis of a biaxial crystal,
            where the rays fill a cone (conical refraction).
        birefringence: the slow index less the fast one.
        sigma: shape (2,), of the indices; NaN along an optic axis of a biaxial crystal, where they have no first
            order. None without covariance, as all the following.
        birefringence_sigma: of the birefringence; NaN there too.
        vibration_sigma: of the turn of the vibrations about the normal, degrees; NaN where they are arbitrary.
        walk_off_sigma: shape (2,), degrees; NaN where there is no first order, which is where it vanishes.
    """

    normal: FloatArray
    indices: FloatArray
    vibrations: FloatArray | None
    rays: FloatArray | None
    walk_off: FloatArray | None
    birefringence: float
    sigma: FloatArray | None
    birefringence_sigma: float | None
    vibration_sigma: float | None
    walk_off_sigma: FloatArray | None


def refract(indicatrix: Indicatrix, estimate: Estimate, normal: FloatArray) -> Refraction:
    """The two waves of a unit wave normal (3,) in the crystal frame.

    Args:
        indicatrix: built from the estimate.
        estimate: the relative permittivity, for its covariance.
        normal: the wave normal, not the ray.
    """
    waves = find_waves(indicatrix, normal)
    indices, tilts, vibrations = waves.indices, waves.tilts, waves.vibrations
    slopes = tilts * np.square(indices)
    rays = normal - slopes[:, None] * vibrations
    rays = rays / np.linalg.norm(rays, axis=1, keepdims=True)
    conical, arbitrary = bool(waves.conical), bool(waves.equal)
    refraction = Refraction(
        normal=normal,
        indices=indices,
        vibrations=None if arbitrary else vibrations,
        rays=None if conical else rays,
        walk_off=None if conical else np.rad2deg(np.arctan(np.abs(slopes))),
        birefringence=float(waves.birefringence),
        sigma=None,
        birefringence_sigma=None,
        vibration_sigma=None,
        walk_off_sigma=None,
    )
    if estimate.covariance is None:
        return refraction
    return _add_sigma(refraction, indicatrix, estimate, vibrations, tilts)


def _add_sigma(
    refraction: Refraction, indicatrix: Indicatrix, estimate: Estimate, vibrations: FloatArray, tilts: FloatArray
) -> Refraction:
    cubes = refraction.indices**3
    effects = vibrations @ indicatrix.impermeability
    rows = cubes[:, None] / 2.0 * _outer(effects, effects)
    mixed = _outer(effects[0], effects[1])
    sigma = estimate.propagate(rows)
    difference = estimate.propagate(rows[0] - rows[1])
    turn = estimate.propagate(mixed)
    assert sigma is not None and difference is not None and turn is not None
    nothing = np.full(2, np.nan)
    if refraction.vibrations is None:
        splitting = np.array([float(difference), float(turn) * cubes[0]])
        held = bool(np.all(splitting <= HELD * float(np.max(sigma))))
        return _with_sigma(refraction, sigma if held else nothing, 0.0 if held else np.nan, np.nan, nothing)
    gap = refraction.birefringence * float(np.sum(refraction.indices)) / float(np.prod(np.square(refraction.indices)))
    # δ(tan ρ) of tan ρ = g n² with g = nᵀB d: by B, by the turn of d, and by n² itself.
    images = indicatrix.impermeability @ refraction.normal
    squares = np.square(refraction.indices)
    direct = -_outer(np.broadcast_to(images, (2, 3)), effects)
    turned = np.array([mixed, -mixed]) * tilts[::-1, None] / gap
    tangents = squares[:, None] * (direct + turned) + 2.0 * (tilts * refraction.indices)[:, None] * rows
    spread = estimate.propagate(tangents / (1.0 + np.square(tilts * squares))[:, None])
    assert spread is not None
    small = np.abs(tilts * squares) <= 1e-12
    return _with_sigma(
        refraction,
        sigma,
        float(difference),
        float(np.rad2deg(turn / gap)),
        np.where(small, np.nan, np.rad2deg(spread)),
    )


def _with_sigma(
    refraction: Refraction, sigma: FloatArray, difference: float, turn: float, walk_off: FloatArray
) -> Refraction:
    return Refraction(
        normal=refraction.normal,
        indices=refraction.indices,
        vibrations=refraction.vibrations,
        rays=refraction.rays,
        walk_off=refraction.walk_off,
        birefringence=refraction.birefringence,
        sigma=sigma,
        birefringence_sigma=difference,
        vibration_sigma=turn,
        walk_off_sigma=walk_off,
    )


def _outer(first: FloatArray, second: FloatArray) -> FloatArray:
    """Symmetric outer products (..., 9), so that either order of the cells counts alike."""
    product = (first[..., :, None] * second[..., None, :] + second[..., :, None] * first[..., None, :]) / 2.0
    return product.reshape(*product.shape[:-2], 9)
