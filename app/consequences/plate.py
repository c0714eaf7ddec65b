"""A plate between its two waves: retardation, the thickness of a quarter and a half wave, and where its slow axis lies.

Thickness is in millimetres, wavelength and retardation in nanometres, the wavelength that of the light in vacuum. The
light meets the plate squarely: its wave normal is the plate's normal.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.consequences.azimuth import measure_azimuth
from app.consequences.indicatrix import Indicatrix
from app.consequences.refraction import Refraction
from app.consequences.tilt import TiltTolerance, find_tilt_tolerance
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

NM_PER_MM: Final = 1e6
DEFAULT_PART: Final = 0.01
"""Part of the wavelength by which the retardation may change where no tolerance is given: common practice."""


@dataclass(frozen=True)
class Plate:
    """What a plate does to light that goes through it along its normal.

    Attributes:
        retardation: slow path less fast path, nm; None without a thickness.
        retardation_sigma: from the permittivity's covariance; None without either, NaN where it has no first order.
        waves: the retardation in wavelengths; None without a wavelength.
        quarter_wave, half_wave: the least thicknesses with that retardation, mm; None without a wavelength and where
            there is no birefringence.
        tolerance: change of the retardation that a tilt may make, nm; None where none is known.
        cut, beam: what a tilt does, in nm; None without a thickness.
        azimuth: from the projected edge to the slow vibration, degrees over −90 up to 90, right-handed about the
            outward normal, which is the wave normal; None without an edge or without a slow direction.
    """

    retardation: float | None
    retardation_sigma: float | None
    waves: float | None
    quarter_wave: float | None
    half_wave: float | None
    tolerance: float | None
    cut: TiltTolerance | None
    beam: TiltTolerance | None
    azimuth: float | None


def describe_plate(
    indicatrix: Indicatrix,
    refraction: Refraction,
    *,
    thickness: float | None = None,
    wavelength: float | None = None,
    tolerance: float | None = None,
    edge: FloatArray | None = None,
) -> Plate:
    """A plate whose normal is the wave normal of the refraction.

    Args:
        indicatrix: of the crystal.
        refraction: of the plate's normal.
        thickness: mm, above zero.
        wavelength: nm, above zero, of the light in vacuum.
        tolerance: nm, above zero, allowed change of the retardation by a tilt; default a hundredth of the wavelength.
        edge: shape (3,), unit vector in the crystal frame, from whose projection the azimuth counts.

    Raises:
        InputError: a length that is not above zero, or an edge along the normal.
    """
    for name, value in (("thickness", thickness), ("wavelength", wavelength), ("tolerance", tolerance)):
        if value is not None and not (value > 0.0 and np.isfinite(value)):
            raise InputError(f"The {name} is a finite number above zero.", field=name)
    birefringence = refraction.birefringence
    quarter = None
    if wavelength is not None and birefringence > 0.0:
        quarter = wavelength / (4.0 * birefringence * NM_PER_MM)
    if tolerance is None and wavelength is not None:
        tolerance = DEFAULT_PART * wavelength
    retardation = sigma = waves = cut = beam = None
    if thickness is not None:
        length = thickness * NM_PER_MM
        retardation = birefringence * length
        waves = None if wavelength is None else retardation / wavelength
        if refraction.birefringence_sigma is not None:
            sigma = refraction.birefringence_sigma * length
        cut, beam = _find_tilts(indicatrix, refraction.normal, length, tolerance)
    return Plate(
        retardation=retardation,
        retardation_sigma=sigma,
        waves=waves,
        quarter_wave=quarter,
        half_wave=None if quarter is None else 2.0 * quarter,
        tolerance=tolerance,
        cut=cut,
        beam=beam,
        azimuth=None if edge is None else _measure_slow_azimuth(refraction, edge),
    )


def _find_tilts(
    indicatrix: Indicatrix, normal: FloatArray, length: float, tolerance: float | None
) -> tuple[TiltTolerance, TiltTolerance]:
    part = None if tolerance is None else tolerance / length
    found = [find_tilt_tolerance(indicatrix, normal, kind, part) for kind in ("cut", "beam")]
    cut, beam = (TiltTolerance(tilt.kind, tilt.slope * length, tilt.toward, tilt.largest) for tilt in found)
    return cut, beam


def _measure_slow_azimuth(refraction: Refraction, edge: FloatArray) -> float | None:
    # Any direction across the normal shows whether the edge leaves a projection.
    slow = refraction.normal if refraction.vibrations is None else refraction.vibrations[0]
    azimuth = measure_azimuth(slow, refraction.normal, edge)
    if azimuth is None:
        raise InputError(
            "The edge is along the wave normal, so it has no direction on the plate.",
            field="edge",
            hint="Name an edge at an angle to the normal.",
        )
    return None if refraction.vibrations is None else azimuth
