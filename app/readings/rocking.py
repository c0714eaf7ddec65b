"""The true normal of a face from rocking angles, and rod or plate from the size of a piece.

Turned about the normal of its holder, a face whose normal is tilted reflects at angles that go up and down as a cosine:
angle = offset + tilt · cos(azimuth − φ), three unknowns, linear in (offset, tilt cos φ, tilt sin φ).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

ROD_RATIO: Final = 5.0
PLATE_RATIO: Final = 10.0
"""From about so many times as long as wide a piece reads as a rod, and as wide as thick as a plate; common practice."""

LARGEST_ANGLE: Final = 3600.0
SMALLEST_SIGMA: Final = 1e-9
"""Beyond these no dial reads, and the arithmetic would leave the range of numbers."""

LARGEST_SIZE: Final = 1e9

INDEPENDENT: Final = 1e-6


@dataclass(frozen=True)
class Rocking:
    """The fitted cosine, all in degrees.

    Attributes:
        offset, tilt, azimuth: azimuth over −180 up to 180, of the side toward which the normal leans.
        offset_sigma, tilt_sigma, azimuth_sigma: None where there is no σ and no reading to spare; the azimuth's also
            where the tilt is not told from zero.
        covariance: shape (2, 2), of tilt cos φ and tilt sin φ; None likewise.
        chi2, dof: of the residuals.
    """

    offset: float
    tilt: float
    azimuth: float
    offset_sigma: float | None
    tilt_sigma: float | None
    azimuth_sigma: float | None
    covariance: FloatArray | None
    chi2: float
    dof: int


def fit_rocking(azimuths: npt.ArrayLike, angles: npt.ArrayLike, sigma: npt.ArrayLike | None = None) -> Rocking:
    """Offset, tilt and azimuth from rocking angles at three azimuths or more.

    Args:
        azimuths, angles: shape (n,), degrees.
        sigma: shape (n,) or one number, degrees; None takes the scatter.

    Raises:
        InputError: fewer than three different azimuths, or a σ that is not above zero.
    """
    turn = np.deg2rad(np.asarray(azimuths, dtype=np.float64))
    observed = np.asarray(angles, dtype=np.float64)
    finite = bool(np.all(np.isfinite(turn)) and np.all(np.isfinite(observed)))
    if turn.shape != observed.shape or turn.ndim != 1 or not finite:
        raise InputError("Rocking angles come in pairs of finite numbers, azimuth and angle.", field="angles")
    for field, degrees in (("azimuths", np.asarray(azimuths)), ("angles", observed)):
        if np.any(np.abs(degrees) > LARGEST_ANGLE):
            raise InputError(f"An angle here is at most {LARGEST_ANGLE:g}° in size.", field=field)
    design = np.stack([np.ones_like(turn), np.cos(turn), np.sin(turn)], axis=1)
    if len(turn) < 3 or float(np.linalg.svd(design, compute_uv=False)[-1]) < INDEPENDENT:
        raise InputError(
            "Offset, tilt and azimuth need rocking angles at three different azimuths or more.",
            field="azimuths",
            hint="Measure at 0°, 120° and 240°, say.",
        )
    spread = np.ones(len(turn))
    if sigma is not None:
        spread = np.broadcast_to(np.asarray(sigma, dtype=np.float64), turn.shape).copy()
        if not np.all((spread >= SMALLEST_SIGMA) & (spread <= LARGEST_ANGLE)):
            raise InputError(
                f"The standard deviation of an angle here is {SMALLEST_SIGMA:g} to {LARGEST_ANGLE:g} degrees.",
                field="sigma",
            )
    whitened = design / spread[:, None]
    found, *_ = np.linalg.lstsq(whitened, observed / spread, rcond=None)
    residual = (observed - design @ found) / spread
    chi2, dof = float(residual @ residual), len(turn) - 3
    plain: FloatArray = np.asarray(np.linalg.inv(whitened.T @ whitened), dtype=np.float64)
    covariance: FloatArray | None = plain
    if sigma is None:
        covariance = None if dof == 0 else plain * (chi2 / dof)
    tilt, azimuth = float(np.hypot(found[1], found[2])), float(np.rad2deg(np.arctan2(found[2], found[1])))
    sigmas: list[float | None] = [None, None, None]
    if covariance is not None:
        sigmas[0] = float(np.sqrt(covariance[0, 0]))
        plane = covariance[1:, 1:]
        if tilt > 0:
            along = found[1:] / tilt
            sigmas[1] = float(np.sqrt(along @ plane @ along))
            across = np.array([-along[1], along[0]])
            wide = float(np.sqrt(across @ plane @ across))
            sigmas[2] = float(np.rad2deg(wide / tilt)) if wide < tilt else None
    inner = None if covariance is None else covariance[1:, 1:]
    return Rocking(float(found[0]), tilt, azimuth, sigmas[0], sigmas[1], sigmas[2], inner, chi2, dof)


def find_achieved_direction(nominal: FloatArray, reference: FloatArray, tilt: float, azimuth: float) -> FloatArray:
    """The true normal, unit vector (3,): the nominal one tilted by degrees toward an azimuth.

    Args:
        nominal: unit vector.
        reference: a direction at azimuth 0, not along the nominal one; azimuths are right-handed about it.

    Raises:
        InputError: at ``reference``: it lies along the nominal normal.
    """
    first = reference - nominal * float(nominal @ reference)
    size = float(np.linalg.norm(first))
    if size < 1e-6 * float(np.linalg.norm(reference)):
        raise InputError("The direction of azimuth 0 lies along the normal.", field="reference")
    first = first / size
    second = np.cross(nominal, first)
    turn, lean = np.deg2rad(azimuth), np.deg2rad(tilt)
    achieved: FloatArray = np.cos(lean) * nominal + np.sin(lean) * (np.cos(turn) * first + np.sin(turn) * second)
    return achieved


def judge_piece(length: float, width: float, thickness: float) -> tuple[Literal["rod", "plate", "between"], str]:
    """Whether a piece reads as a rod along its length, as a plate across its thickness, or as neither; with a sentence.

    Raises:
        InputError: at ``length``, ``width`` or ``thickness``: not above zero.
    """
    for name, value in (("length", length), ("width", width), ("thickness", thickness)):
        if not 1.0 / LARGEST_SIZE <= value <= LARGEST_SIZE:
            raise InputError(
                f"A size is a length above zero, here between {1.0 / LARGEST_SIZE:g} and {LARGEST_SIZE:g}.", field=name
            )
    across = max(width, thickness)
    if length >= ROD_RATIO * across:
        return "rod", f"It is {length / across:.3g} times as long as wide, so it reads as a rod along its length."
    if min(length, width) >= PLATE_RATIO * thickness:
        ratio = min(length, width) / thickness
        return "plate", f"It is {ratio:.3g} times as wide as thick, so it reads as a plate across its thickness."
    return "between", (
        f"It is neither long (from about {ROD_RATIO:g} times as long as wide) nor thin (from about {PLATE_RATIO:g} "
        "times as wide as thick), so a reading lies between rod and plate and must not be averaged with either."
    )
