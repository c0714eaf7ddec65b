"""Conduction and diffusion in a part: plate, long bar and thin sheet beside each other, and how far the flow walks off.

Of a conductivity-like tensor K (flux = −K gradient) a wide plate of normal n holds the gradient along n, so it shows
nᵀKn and the flux leaves n; a long bar along n holds the flux along n, so it shows 1/(nᵀK⁻¹n) and the gradient leaves n
(J. F. Nye, Physical Properties of Crystals, ch. XI, section 4, from memory). A resistivity-like tensor is the inverse
of one: its bar shows nᵀRn and its plate 1/(nᵀR⁻¹n). A thin sheet with four contacts shows √(det K / mᵀKm), m its
normal, or the inverse of that (L. J. van der Pauw, Philips Res. Repts 16 (1961) 187).
The angle θ between a unit cause n and its effect f = A n changes by first order as
δθ = (e cos θ − n sin θ)ᵀ δA n / |f|, e the unit vector of f across n.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from app.consequences.azimuth import measure_turn
from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal
from app.tensor.quadric import sign_values
from app.tensor.values import compute_flux, compute_flux_angles, compute_rod_values, compute_values

FloatArray = npt.NDArray[np.float64]
Like = Literal["conductivity", "resistivity"]

_VANISHING = 1e-12
"""Sine of the angle between cause and effect below which the two are parallel."""


@dataclass(frozen=True)
class Response:
    """What unit causes do: the effect and the angle between the two.

    Attributes:
        effects: shape (m, 3), unit vectors in the tensor's frame.
        sizes: shape (m,), of the effect of a unit cause.
        angles: shape (m,), degrees between cause and effect.
        sigma: shape (m,), of the angles, degrees; NaN where cause and effect are parallel and not held so by symmetry,
            for there the angle has no first order. None without covariance.
    """

    effects: FloatArray
    sizes: FloatArray
    angles: FloatArray
    sigma: FloatArray | None


@dataclass(frozen=True)
class Conduction:
    """Values for parts that are cut along or across m directions n, all in the unit of the tensor.

    Attributes:
        directions: shape (m, 3), unit vectors.
        plate, plate_sigma: shape (m,), what a wide plate of normal n shows.
        rod, rod_sigma: shape (m,), what a long bar along n shows.
        sheet, sheet_sigma: shape (m,), what a thin sheet of normal n shows with four contacts at its edge.
        in_plate: the flow in a wide plate: causes are gradients along n, effects the flux.
        in_rod: the gradient in a long bar: causes are fluxes along n, effects the gradient.

    Standard deviations are None without covariance.
    """

    directions: FloatArray
    plate: FloatArray
    plate_sigma: FloatArray | None
    rod: FloatArray
    rod_sigma: FloatArray | None
    sheet: FloatArray
    sheet_sigma: FloatArray | None
    in_plate: Response
    in_rod: Response


@dataclass(frozen=True)
class WalkOff:
    """Where the flow through a plate comes out.

    Attributes:
        angle: degrees between the flow and the plate's normal.
        angle_sigma: degrees; None without covariance, NaN where it has no first order.
        shift: sideways way of the flow from face to face, in the unit of the thickness.
        toward: shape (3,), unit vector across the normal; None where the flow is along the normal.
        azimuth: of ``toward`` from the projected edge, degrees over −180 up to 180, right-handed about the normal;
            None without an edge and where there is no sideways flow.
    """

    angle: float
    angle_sigma: float | None
    shift: float
    toward: FloatArray | None
    azimuth: float | None


def respond(estimate: Estimate, causes: FloatArray) -> Response:
    """Effect A n of unit causes (m, 3), and the angle between the two, for any invertible tensor."""
    flux = compute_flux(estimate.matrix, causes)
    sizes = np.linalg.norm(flux, axis=-1)
    angles = compute_flux_angles(causes, flux)
    effects = flux / np.where(sizes > 0.0, sizes, 1.0)[..., None]
    sigma = None
    if estimate.covariance is not None:
        across = effects - causes * np.sum(causes * effects, axis=-1, keepdims=True)
        lengths = np.linalg.norm(across, axis=-1)
        parallel = lengths <= _VANISHING
        unit = across / np.where(parallel, 1.0, lengths)[..., None]
        theta = np.deg2rad(angles)[..., None]
        turning = (unit * np.cos(theta) - causes * np.sin(theta)) / sizes[..., None]
        spread = estimate.propagate(_outer(turning, causes))
        assert spread is not None
        sigma = np.where(parallel, _hold_parallel(estimate, causes, sizes), np.rad2deg(spread))
    return Response(effects, sizes, angles, sigma)


def _hold_parallel(estimate: Estimate, causes: FloatArray, sizes: FloatArray) -> FloatArray:
    """0 where no error that the covariance allows turns the effect off its cause; else NaN."""
    assert estimate.sigma_matrix is not None
    projectors = np.eye(3) - causes[..., :, None] * causes[..., None, :]
    rows = projectors[..., :, :, None] * causes[..., None, None, :]
    moves = estimate.propagate(rows.reshape(*rows.shape[:-2], 9))
    assert moves is not None
    held = np.max(moves, axis=-1) <= _VANISHING * np.maximum(np.max(estimate.sigma_matrix), sizes)
    return np.where(held, 0.0, np.nan)


def compute_conduction(estimate: Estimate, directions: FloatArray, like: Like = "conductivity") -> Conduction:
    """Plate, bar and sheet values, and the angles between flux and gradient.

    Args:
        estimate: a conductivity (also a diffusivity) or a resistivity, symmetric and positive definite.
        directions: shape (m, 3), unit vectors in its frame.
        like: which of the two it is.

    Raises:
        InputError: not positive definite, so that some bar or sheet would show nothing.
    """
    _require_positive(estimate)
    value, value_sigma = compute_values(estimate.matrix, directions), estimate.value_sigma(directions)
    other, other_sigma = compute_rod_values(estimate.matrix, directions), estimate.rod_sigma(directions)
    inverse = estimate.invert()
    conductivity, resistivity = (estimate, inverse) if like == "conductivity" else (inverse, estimate)
    sheet, sheet_sigma = _compute_sheets(estimate, directions, like)
    plate, rod = (
        ((value, value_sigma), (other, other_sigma))
        if like == "conductivity"
        else (
            (other, other_sigma),
            (value, value_sigma),
        )
    )
    return Conduction(
        directions=directions,
        plate=plate[0],
        plate_sigma=plate[1],
        rod=rod[0],
        rod_sigma=rod[1],
        sheet=sheet,
        sheet_sigma=sheet_sigma,
        in_plate=respond(conductivity, directions),
        in_rod=respond(resistivity, directions),
    )


def _require_positive(estimate: Estimate) -> None:
    symmetric = (estimate.matrix + estimate.matrix.T) / 2.0
    size = float(np.max(np.abs(symmetric)))
    if float(np.max(np.abs(estimate.matrix - symmetric))) > 1e-9 * size:
        raise InputError(
            "Plate, bar and sheet are told apart for symmetric tensors only, and this one is not symmetric.",
            hint="In no magnetic field a conductivity is symmetric by Onsager's relations.",
        )
    values = find_principal(Estimate(symmetric, None, estimate.frame)).values
    if np.any(sign_values(values) <= 0.0):
        raise InputError(
            "A conductivity or resistivity has positive principal values, and this tensor has one that is not.",
            hint="Check the values and their signs.",
        )


def _compute_sheets(estimate: Estimate, normals: FloatArray, like: Like) -> tuple[FloatArray, FloatArray | None]:
    # Of a resistivity R the conductivity is R⁻¹, and the sheet's own resistivity the inverse of what that gives:
    # √(det R · mᵀR⁻¹m).
    scale = float(np.max(np.abs(estimate.matrix)))
    matrix = estimate.matrix / scale
    inverse = np.asarray(np.linalg.inv(matrix), dtype=np.float64)
    relative = np.broadcast_to(inverse.T, (*normals.shape[:-1], 3, 3))
    if like == "conductivity":
        across = compute_values(matrix, normals)
        sheets = scale * np.sqrt(np.linalg.det(matrix) / across)
        own = normals[..., :, None] * normals[..., None, :] / across[..., None, None]
    else:
        across = compute_values(inverse, normals)
        sheets = scale * np.sqrt(np.linalg.det(matrix) * across)
        own = (normals @ inverse)[..., :, None] * (normals @ inverse.T)[..., None, :] / across[..., None, None]
    derivative = sheets[..., None, None] / (2.0 * scale) * (relative - own)
    return sheets, estimate.propagate(derivative.reshape(*derivative.shape[:-2], 9))


def follow_flow(
    estimate: Estimate,
    normal: FloatArray,
    thickness: float,
    edge: FloatArray | None = None,
    like: Like = "conductivity",
) -> WalkOff:
    """Where heat or current that enters a wide plate comes out beside the place opposite.

    Args:
        estimate: a conductivity or a resistivity, symmetric and positive definite.
        normal: shape (3,), unit vector of the plate, along which the gradient is held.
        thickness: of the plate, in any unit.
        edge: shape (3,), unit vector, from whose projection on the plate the azimuth counts.
        like: which of the two it is.

    Raises:
        InputError: a thickness that is not above zero, an edge along the normal, a tensor that is not positive
            definite.
    """
    if not (thickness > 0.0 and np.isfinite(thickness)):
        raise InputError("The thickness is a finite number above zero.", field="thickness")
    if edge is not None and measure_turn(normal, normal, edge) is None:
        raise InputError(
            "The edge is along the plate's normal, so it has no direction on the plate.",
            field="edge",
            hint="Name an edge at an angle to the normal.",
        )
    _require_positive(estimate)
    conductivity = estimate if like == "conductivity" else estimate.invert()
    response = respond(conductivity, normal[None, :])
    angle = float(response.angles[0])
    across = response.effects[0] - normal * float(response.effects[0] @ normal)
    length = float(np.linalg.norm(across))
    toward = None if length <= _VANISHING else across / length
    azimuth = None if toward is None or edge is None else measure_turn(toward, normal, edge)
    return WalkOff(
        angle=angle,
        angle_sigma=None if response.sigma is None else float(response.sigma[0]),
        shift=thickness * float(np.tan(np.deg2rad(angle))) if toward is not None else 0.0,
        toward=toward,
        azimuth=azimuth,
    )


def _outer(first: FloatArray, second: FloatArray) -> FloatArray:
    product = first[..., :, None] * second[..., None, :]
    return product.reshape(*product.shape[:-2], 9)
