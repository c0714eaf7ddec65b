"""The panels of magnetic susceptibility, thermopower and gyration, as tables of printed text."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from app.consequences.gyration import compute_rotation, describe_hand
from app.consequences.magnetism import MAGNETIC_CONSTANT, find_easy_direction, magnetise, turn_in_plane
from app.consequences.thermopower import compute_bar_voltage, compute_peltier
from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.printing import print_value
from app.tensor.sentence import place_direction
from app.web.consequence_tables import build_table, print_degrees, print_with

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Fields:
    """What the panel's fields say, beside direction and edge (unit vectors, crystal frame).

    Attributes:
        flux_density: of the magnetic field outside, tesla.
        temperature: kelvin, for Peltier's heat.
        wavelength: nm, and ``index`` the mean index, for the rotation of polarisation.
        conductivity: the sample's thermal conductivity; None where it has none.
    """

    direction: FloatArray
    edge: FloatArray
    flux_density: float
    temperature: float
    wavelength: float
    index: float
    conductivity: Estimate | None


def describe_magnetism(crystal: Crystal, estimate: Estimate, factor: float, fields: Fields) -> list[dict[str, Any]]:
    """A field along a direction, a field that turns in the plane across it, and where the crystal settles.

    ``factor`` is what a unit of the kept numbers is worth as a plain number.
    """
    plain = _scale(estimate, factor)
    along, turning = magnetise(plain, fields.direction), turn_in_plane(plain, fields.direction, fields.edge)
    # Of unit volume μ₀ H² is B²/μ₀.
    pressure = fields.flux_density**2 / MAGNETIC_CONSTANT
    first = [
        ["susceptibility along it", print_with(along.along / factor, _part(along.along_sigma, factor))],
        ["magnetisation", f"{print_value(_size(along.magnetisation) * fields.flux_density / MAGNETIC_CONSTANT)} A/m"],
        ["it leaves the field by", "no magnetisation" if along.angle is None else print_degrees(along.angle, None)],
        ["torque", f"{print_value(_size(along.torque) * pressure)} N·m/m³"],
    ]
    rows = [
        ["½√((χuu − χvv)² + 4χuv²)", print_with(turning.amplitude / factor, _part(turning.sigma, factor))],
        ["largest torque", f"{print_with(turning.amplitude * pressure, _part(turning.sigma, 1 / pressure))} N·m/m³"],
    ]
    if turning.easy is None or turning.azimuth is None:
        rows.append(["at rest", "in every direction of the plane alike"])
    else:
        rows.append(["at rest with the field along", place_direction(crystal, turning.easy).text])
        rows.append(["which from the edge is", print_degrees(turning.azimuth, None)])
    principal, one = find_easy_direction(plain)
    easy = place_direction(crystal, principal.axes[0]).text if one else "not one direction: two principal values agree"
    free = [["easy direction", easy], ["susceptibility there", print_with(float(principal.values[0]) / factor, None)]]
    note = f"Flux density outside {fields.flux_density:g} T; the crystal's own field is left out."
    return [
        build_table("Field along the direction", first, note),
        build_table("Field turning in the plane across it", rows, "Torque about the direction, of unit volume."),
        build_table("Free to turn in every way", free, "It settles with its largest susceptibility along the field."),
    ]


def describe_thermopower(crystal: Crystal, estimate: Estimate, unit: str, fields: Fields) -> list[dict[str, Any]]:
    """Plate, long bar with its transverse voltage, and Peltier's tensor."""
    value, sigma = fields.direction @ estimate.matrix @ fields.direction, estimate.value_sigma(fields.direction)
    tables = [
        build_table(
            "Wide plate, across it",
            [["voltage per difference of temperature", f"{print_with(float(value), _float(sigma))} {unit}"]],
        )
    ]
    if fields.conductivity is None:
        tables.append(
            build_table(
                "Long bar, along it",
                [["not told"]],
                "In a long bar the heat runs along the bar and not the gradient, so the thermal conductivity is "
                "needed. Give this sample the property thermal conductivity.",
            )
        )
    else:
        bar = compute_bar_voltage(estimate, fields.conductivity, fields.direction, fields.edge)
        toward = "nowhere: there is none" if bar.toward is None else place_direction(crystal, bar.toward).text
        rows = [
            ["along the bar", f"{print_with(bar.along, bar.along_sigma)} {unit}"],
            ["across it along the edge", f"{print_with(bar.at_edge, bar.at_edge_sigma)} {unit}"],
            ["largest across it", f"{print_with(bar.across, bar.across_sigma)} {unit}"],
            ["that one points", toward],
            ["the gradient leaves the bar by", print_degrees(bar.leans, None)],
        ]
        note = "nᵀSκ⁻¹n/(nᵀκ⁻¹n), with the sample's thermal conductivity κ; per gradient along the bar, no current."
        tables.append(build_table("Long bar, along it", rows, note))
    peltier = compute_peltier(estimate, fields.temperature)
    sigmas = peltier.sigma_matrix
    cells = [
        [
            print_with(float(peltier.matrix[row, column]), None if sigmas is None else float(sigmas[row, column]))
            for column in range(3)
        ]
        for row in range(3)
    ]
    note = f"Π = T Sᵀ in {unit.replace('/K', '')}, in the crystal frame: {peltier.frame}."
    tables.append(build_table(f"Peltier tensor at {fields.temperature:g} K", cells, note))
    return tables


def describe_gyration(crystal: Crystal, estimate: Estimate, factor: float, fields: Fields) -> list[dict[str, Any]]:
    """Rotatory power along a direction, for either hand."""
    found = compute_rotation(_scale(estimate, factor), fields.direction, fields.wavelength, fields.index)
    spread = found.power_sigma
    rows = [
        ["G = nᵀgn", print_with(found.scalar / factor, _part(found.scalar_sigma, factor))],
        ["this hand", f"{print_with(found.power, spread)} °/mm"],
        ["the other hand", f"{print_with(-found.power, spread)} °/mm"],
    ]
    note = (
        f"At {fields.wavelength:g} nm with the mean index {fields.index:g}. Off an optic axis birefringence covers it: "
        "this is what would show without."
    )
    hand = describe_hand(crystal.rotations)
    return [build_table("Rotation of the plane of polarisation", rows, note), build_table("Hand", [[hand]])]


def read_factor(unit: str) -> float:
    """What one unit of kept numbers is worth as a plain number. Raises InputError for any unit that is none."""
    factors = {"": 1.0, "1": 1.0, "10⁻⁴": 1e-4, "10⁻⁶": 1e-6, "ppm": 1e-6}
    if unit not in factors:
        raise InputError(f"{unit} is not a plain number.", hint=f"Choose one of {', '.join(list(factors)[1:])}.")
    return factors[unit]


def _scale(estimate: Estimate, factor: float) -> Estimate:
    covariance = None if estimate.covariance is None else factor**2 * estimate.covariance
    return Estimate(factor * estimate.matrix, covariance, estimate.frame)


def _part(value: float | None, factor: float) -> float | None:
    return None if value is None else value / factor


def _size(vector: FloatArray) -> float:
    return float(np.linalg.norm(vector))


def _float(value: FloatArray | None) -> float | None:
    return None if value is None else float(value)
