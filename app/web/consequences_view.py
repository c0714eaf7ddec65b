"""What a tensor means for a part, by the kind of property: tables of numbers with their uncertainties and words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.catalogue.property import Property
from app.consequences.conduction import Like, Response, compute_conduction, follow_flow, respond
from app.consequences.indicatrix import build_indicatrix
from app.consequences.mismatch import build_isotropic, compare_with_substrate
from app.consequences.optic_axes import find_optic_axes
from app.consequences.plate import describe_plate
from app.consequences.refraction import refract
from app.consequences.thermal_part import compute_angle_changes, compute_changes, find_true_planes, strain_between
from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal
from app.tensor.printing import print_value
from app.tensor.sentence import place_direction
from app.web.consequence_tables import build_table, print_degrees, print_with
from app.web.field_consequences import (
    Fields,
    describe_gyration,
    describe_magnetism,
    describe_thermopower,
    read_factor,
)

FloatArray = npt.NDArray[np.float64]

MICRO: Final = 1e-6
ROW: Final = tuple[str, ...]


@dataclass(frozen=True)
class Asked:
    """What the panel's fields say.

    Attributes:
        direction, edge: unit vectors, crystal frame: the normal (or length) of the part, and an edge in its face.
        thickness: mm.
        wavelength: nm.
        start, end: temperatures, K.
        substrate: expansion of the substrate, 10⁻⁶/K; None for none.
        flux_density: of a magnetic field, T.
        index: mean refractive index.
        conductivity: the sample's thermal conductivity, crystal frame; None where it has none.
        size: of the part along x, y, z, mm; ``axes`` are these three, as rows, crystal frame.
    """

    direction: FloatArray
    edge: FloatArray
    thickness: float
    wavelength: float
    start: float
    end: float
    substrate: float | None
    size: tuple[float, float, float]
    axes: FloatArray
    flux_density: float = 1.0
    index: float = 1.5
    conductivity: Estimate | None = None

    @property
    def fields(self) -> Fields:
        """What the panels of fields need of it."""
        return Fields(
            self.direction,
            self.edge,
            self.flux_density,
            self.start,
            self.wavelength,
            self.index,
            self.conductivity,
        )


_OF_FIELDS: Final = {"magnetic_susceptibility": "magnetism", "thermopower": "thermopower", "gyration": "gyration"}


def choose_panel(entry: Property) -> str:
    """Which panel a property has: "conduction", "optics", "expansion", one named after a field, or "response"."""
    if entry.key in _OF_FIELDS:
        return _OF_FIELDS[entry.key]
    if entry.key in ("permittivity", "impermeability"):
        return "optics"
    if entry.key == "thermal_expansion":
        return "expansion"
    if entry.long_bar == "rod" or entry.plate == "rod":
        return "conduction"
    return "response"


def describe_consequences(
    crystal: Crystal, estimate: Estimate, entry: Property, unit: str, asked: Asked
) -> list[dict[str, Any]]:
    """Tables {title, note, head, rows} of what follows.

    Raises:
        InputError: an indefinite permittivity or conductivity, a length that is not above zero, an edge along the
            normal.
    """
    panel = choose_panel(entry)
    if panel == "optics":
        return _describe_optics(crystal, estimate, entry, asked)
    if panel == "expansion":
        return _describe_expansion(crystal, estimate, unit, asked)
    if panel == "magnetism":
        return describe_magnetism(crystal, estimate, read_factor(unit), asked.fields)
    if panel == "thermopower":
        tables = describe_thermopower(crystal, estimate, unit, asked.fields)
        return [*tables, *_describe_response(crystal, estimate, unit, asked)]
    if panel == "gyration":
        return describe_gyration(crystal, estimate, read_factor(unit), asked.fields)
    if panel == "conduction":
        return _describe_conduction(crystal, estimate, entry, unit, asked)
    return _describe_response(crystal, estimate, unit, asked)


def _first(values: FloatArray | None) -> float | None:
    return None if values is None else float(values[0])


def _place(crystal: Crystal, vector: FloatArray | None) -> str:
    return "any direction" if vector is None else place_direction(crystal, vector).text


def _describe_conduction(
    crystal: Crystal, estimate: Estimate, entry: Property, unit: str, asked: Asked
) -> list[dict[str, Any]]:
    like: Like = "conductivity" if entry.long_bar == "rod" else "resistivity"
    found = compute_conduction(estimate, asked.direction[None], like)
    flow = follow_flow(estimate, asked.direction, asked.thickness, asked.edge, like)
    inverse = estimate.invert()
    sigmas = inverse.sigma_matrix
    values = [
        ["wide plate, across it", f"{print_with(float(found.plate[0]), _first(found.plate_sigma))} {unit}"],
        ["long bar, along it", f"{print_with(float(found.rod[0]), _first(found.rod_sigma))} {unit}"],
        ["thin sheet, four contacts", f"{print_with(float(found.sheet[0]), _first(found.sheet_sigma))} {unit}"],
        [
            "in the plate the flow leaves the gradient by",
            print_degrees(float(found.in_plate.angles[0]), _first(found.in_plate.sigma)),
        ],
        [
            "in the bar the gradient leaves the flow by",
            print_degrees(float(found.in_rod.angles[0]), _first(found.in_rod.sigma)),
        ],
    ]
    out = [
        [f"through {asked.thickness:g} mm it comes out aside by", f"{print_value(flow.shift)} mm"],
        ["toward", _place(crystal, flow.toward) if flow.toward is not None else "nowhere: straight through"],
    ]
    if flow.azimuth is not None:
        out.append(["azimuth from the edge", f"{flow.azimuth:.2f}°".replace("-", "−")])
    cells = [
        [
            print_with(float(inverse.matrix[row, column]), None if sigmas is None else float(sigmas[row, column]))
            for column in range(3)
        ]
        for row in range(3)
    ]
    name = "resistivity" if like == "conductivity" else "conductivity"
    return [
        build_table("Plate, bar and sheet", values, "Rod or plate is decided by cause and effect."),
        build_table("Where the flow comes out", out),
        build_table(f"The inverse, a {name}", cells, f"In 1/({unit}), in the crystal frame: {estimate.frame}."),
    ]


def _print_angle(response: Response) -> str:
    return print_degrees(float(response.angles[0]), _first(response.sigma))


def _describe_response(crystal: Crystal, estimate: Estimate, unit: str, asked: Asked) -> list[dict[str, Any]]:
    found = respond(estimate, asked.direction[None])
    rows = [
        ["size of the effect of a unit cause", f"{print_value(float(found.sizes[0]))} {unit}"],
        ["it points", _place(crystal, found.effects[0]) if found.sizes[0] > 0 else "nowhere: there is none"],
        ["away from the cause by", _print_angle(found)],
    ]
    return [build_table("Cause and effect", rows)]


def _describe_expansion(crystal: Crystal, estimate: Estimate, unit: str, asked: Asked) -> list[dict[str, Any]]:
    if "10⁻⁶" not in unit and unit not in ("1/K", "K⁻¹"):
        raise InputError(f"An expansion in {unit} is not per kelvin.", hint="Choose 10⁻⁶/K or 1/K as its unit.")
    factor = MICRO if "10⁻⁶" in unit else 1.0
    per_kelvin = Estimate(
        factor * estimate.matrix,
        None if estimate.covariance is None else factor**2 * estimate.covariance,
        estimate.frame,
    )
    strain = strain_between(per_kelvin, asked.start, asked.end)
    changes = compute_changes(strain, asked.axes)
    lengths = []
    for number, letter in enumerate("xyz"):
        micrometres = 1000.0 * asked.size[number]
        sigma = None if changes.length_sigma is None else micrometres * float(changes.length_sigma[number])
        lengths.append(
            [
                f"{letter}, {asked.size[number]:g} mm",
                f"{print_with(micrometres * float(changes.lengths[number]), sigma)} µm",
                f"{print_with(float(changes.tilts[number]), None)}°",
            ]
        )
    pairs = [(0, 1), (0, 2), (1, 2)]
    first, second = (asked.axes[[pair[side] for pair in pairs]] for side in (0, 1))
    angles = compute_angle_changes(strain, first, second, "normals")
    minutes = 60.0 * angles.change
    spread = None if angles.sigma is None else 60.0 * angles.sigma
    turned = [
        [
            f"faces {'xyz'[a]} and {'xyz'[b]}",
            f"{print_with(float(minutes[k]), None if spread is None else float(spread[k]))}′",
        ]
        for k, (a, b) in enumerate(pairs)
    ]
    planes = find_true_planes(per_kelvin)
    tables = [
        build_table(
            f"From {asked.start:g} K to {asked.end:g} K",
            lengths,
            "Length along each axis, and by how much a line square on its face leaves the normal.",
            ["along", "longer by", "leans by"],
        ),
        build_table("Angles between faces change by", turned, "In minutes of arc."),
        build_table(
            "Planes that do not warp",
            [[_place(crystal, normal)] for normal in planes.normals],
            planes.sentence,
        ),
    ]
    if asked.substrate is not None:
        other = strain_between(build_isotropic(MICRO * asked.substrate, None, estimate.frame), asked.start, asked.end)
        found = compare_with_substrate(strain, other, asked.direction, asked.edge)
        rows = [
            [
                name,
                print_with(1e6 * float(found.values[k]), None if found.sigma is None else 1e6 * float(found.sigma[k])),
                "any azimuth" if found.azimuths is None else f"{float(found.azimuths[k]):.1f}° from the edge",
            ]
            for k, name in enumerate(("largest", "smallest"))
        ]
        matched = ", ".join(f"{float(azimuth):.1f}°" for azimuth in found.matched)
        note = (
            f"In 10⁻⁶. No mismatch at {matched} from the edge."
            if matched
            else "In 10⁻⁶. No azimuth is without mismatch."
        )
        tables.append(build_table(f"On a substrate of {asked.substrate:g} ×10⁻⁶/K", rows, note.replace("-", "−")))
    return tables


def _print_length(value: float | None, unit: str) -> str:
    return "no birefringence" if value is None else f"{value:.6g} {unit}"


def _describe_optics(crystal: Crystal, estimate: Estimate, entry: Property, asked: Asked) -> list[dict[str, Any]]:
    permittivity = estimate if entry.key == "permittivity" else estimate.invert()
    indicatrix = build_indicatrix(permittivity)
    waves = refract(indicatrix, permittivity, asked.direction)
    plate = describe_plate(indicatrix, waves, thickness=asked.thickness, wavelength=asked.wavelength, edge=asked.edge)
    axes = find_optic_axes(indicatrix, permittivity)
    rows = []
    for number, name in enumerate(("slow", "fast")):
        vibration = None if waves.vibrations is None else waves.vibrations[number]
        walk = "not determined" if waves.walk_off is None else f"{float(waves.walk_off[number]):.3f}°"
        rows.append([name, f"{float(waves.indices[number]):.6f}", _place(crystal, vibration), walk])
    through = [
        ["birefringence", f"{waves.birefringence:.6g}"],
        [
            f"retardation of {asked.thickness:g} mm",
            f"{plate.retardation:.6g} nm" if plate.retardation is not None else "–",
        ],
        [f"in waves of {asked.wavelength:g} nm", f"{plate.waves:.5g}" if plate.waves is not None else "–"],
        ["a quarter wave", f"{plate.quarter_wave:.6g} mm" if plate.quarter_wave is not None else "no birefringence"],
        ["a half wave", f"{plate.half_wave:.6g} mm" if plate.half_wave is not None else "no birefringence"],
        [
            "slow direction from the edge",
            f"{plate.azimuth:.2f}°".replace("-", "−") if plate.azimuth is not None else "–",
        ],
    ]
    if plate.cut is not None and plate.cut.slope is not None:
        through.append(["a degree of tilt of the cut changes it by", f"{plate.cut.slope:.4g} nm at most"])
    whole = [["optic axis", _place(crystal, axis)] for axis in axes.axes]
    if axes.two_v is not None:
        whole.append(["2V", f"{print_with(axes.two_v, axes.two_v_sigma)}°"])
    whole.append(["sign", {"+": "positive", "-": "negative", None: "neither"}[axes.sign]])
    principal = find_principal(permittivity)
    whole.append(["principal indices", ", ".join(f"{float(np.sqrt(value)):.5f}" for value in principal.values)])
    return [
        build_table("Two waves along the normal", rows, "", ["wave", "index", "vibrates", "walks off by"]),
        build_table("A plate", through, "Azimuth right-handed about the outward normal."),
        build_table("The crystal", whole, axes.note or ""),
    ]
