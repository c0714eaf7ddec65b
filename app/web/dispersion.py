"""Dispersion: the optical constants along a series of permittivities in wavelength."""

from __future__ import annotations

from dataclasses import replace
from typing import Any, Final

import numpy as np

from app.catalogue.property import Property
from app.consequences.indicatrix import build_indicatrix
from app.consequences.optic_axes import find_optic_axes
from app.consequences.plate import describe_plate
from app.consequences.refraction import refract
from app.crystal.crystal import Crystal
from app.store.document import KeptProperty
from app.tensor.estimate import Estimate
from app.web.consequences_view import Asked
from app.web.followed import Followed

WAVELENGTH: Final = "λ"
PLACES: Final = 5


def take_at_wavelength(
    crystal: Crystal, kept: KeptProperty, followed: Followed | None, wavelength: float
) -> tuple[Estimate, str] | None:
    """The tensor at a wavelength (nm) from the series, and a sentence; None where the series is not in wavelength."""
    if followed is None or followed.symbol != WAVELENGTH:
        return None
    low, high = followed.measured
    beyond = "" if low <= wavelength <= high else f", which lies beyond what was measured ({low:g} to {high:g} nm)"
    tensor = followed.take(crystal, kept, wavelength)
    return tensor.estimate, f"The tensor is that of its series at {wavelength:g} nm{beyond}."


def describe_dispersion(
    crystal: Crystal, kept: KeptProperty, entry: Property, followed: Followed, asked: Asked
) -> dict[str, Any]:
    """A table over the measured wavelengths: principal indices, 2V, and the retardation of the asked plate."""
    rows = []
    for wavelength in np.linspace(*followed.measured, PLACES).tolist():
        estimate = followed.take(crystal, kept, wavelength).estimate
        permittivity = estimate if entry.key == "permittivity" else estimate.invert()
        indicatrix = build_indicatrix(permittivity)
        waves = refract(indicatrix, permittivity, asked.direction)
        here = replace(asked, wavelength=wavelength)
        plate = describe_plate(indicatrix, waves, thickness=here.thickness, wavelength=wavelength, edge=here.edge)
        axes = find_optic_axes(indicatrix, permittivity)
        rows.append(
            [
                f"{wavelength:.4g} nm",
                ", ".join(f"{float(np.sqrt(value)):.5f}" for value in indicatrix.values),
                "–" if axes.two_v is None else f"{axes.two_v:.2f}°",
                "–" if plate.retardation is None else f"{plate.retardation:.5g} nm",
            ]
        )
    head = ["wavelength", "indices", "2V", f"retardation of {asked.thickness:g} mm"]
    return {"title": "Dispersion", "note": "From the series of the property.", "head": head, "rows": rows}
