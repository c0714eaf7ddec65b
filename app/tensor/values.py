"""What a tensor does along a direction: value, flux, the angle between cause and effect, what a long bar reads."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

SINGULAR_LIMIT = 1e-13


def compute_values(matrix: FloatArray, directions: FloatArray) -> FloatArray:
    """nᵀAn, shape (...), for unit vectors (..., 3) and A of shape (3, 3)."""
    values: FloatArray = np.einsum("...i,...i->...", directions @ matrix, directions)
    return values


def compute_flux(matrix: FloatArray, directions: FloatArray) -> FloatArray:
    """The effect A n, shape (..., 3), of unit causes (..., 3)."""
    return directions @ matrix.T


def compute_flux_angles(directions: FloatArray, flux: FloatArray) -> FloatArray:
    """Angles in degrees between causes and effects, shape (...); NaN where there is no effect."""
    sizes = np.max(np.abs(flux), axis=-1, keepdims=True)
    scaled = flux / np.where(sizes > 0.0, sizes, 1.0)
    across = np.linalg.norm(np.cross(directions, scaled), axis=-1)
    angles = np.rad2deg(np.arctan2(across, np.sum(directions * scaled, axis=-1)))
    return np.where(sizes[..., 0] > 0.0, angles, np.nan)


def is_singular(matrix: FloatArray) -> bool:
    """Whether A has no inverse as far as double precision can tell."""
    sizes = np.linalg.svd(matrix, compute_uv=False)
    return bool(sizes[-1] <= SINGULAR_LIMIT * sizes[0])


def compute_rod_values(matrix: FloatArray, directions: FloatArray) -> FloatArray:
    """1/(nᵀA⁻¹n), what a long thin bar along n shows of a conductivity-like A (Nye, ch. XI, section 4).

    NaN where A has no inverse or nᵀA⁻¹n is zero.
    """
    if is_singular(matrix):
        return np.full(directions.shape[:-1], np.nan)
    scale = np.max(np.abs(matrix))
    inverse_values = compute_values(np.linalg.inv(matrix / scale), directions)
    with np.errstate(divide="ignore"):
        rods = scale / inverse_values
    return np.where(np.isfinite(rods), rods, np.nan)
