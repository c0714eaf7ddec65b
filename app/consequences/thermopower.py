"""Thermoelectric voltages of a crystal without current: in a plate, in a long bar, across a bar, and Peltier's heat.

E = S ∇T with S the thermopower, which need not be symmetric. A wide plate of normal n holds the gradient along n and
shows nᵀSn. A long bar along n holds the heat's flow along n, so the gradient is along κ⁻¹n, with κ the thermal
conductivity: along the bar it shows nᵀSκ⁻¹n/(nᵀκ⁻¹n), and across it, along a unit vector m at right angles to n,
mᵀSκ⁻¹n/(nᵀκ⁻¹n) of the gradient along the bar (C. A. Domenicali, Rev. Mod. Phys. 26 (1954) 237, and J. F. Nye, Physical
Properties of Crystals, ch. XII, both from memory). Kelvin's relation by Onsager's symmetry: Π = T Sᵀ, T in kelvin.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal
from app.tensor.quadric import sign_values

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class BarVoltage:
    """What a long bar shows, per unit gradient of temperature along the bar, in the unit of S.

    Attributes:
        along, along_sigma: the voltage along the bar.
        across, across_sigma: the largest voltage across the bar, not negative.
        toward: unit vector across the bar along which that largest voltage is; None where there is none.
        at_edge, at_edge_sigma: the voltage across the bar along the edge that was named.
        gradient: shape (3,), unit vector of the gradient in the bar.
        leans: degrees between the gradient and the bar.

    Standard deviations take S and κ as independent, and are None where neither has a covariance.
    """

    along: float
    along_sigma: float | None
    across: float
    across_sigma: float | None
    toward: FloatArray | None
    at_edge: float
    at_edge_sigma: float | None
    gradient: FloatArray
    leans: float


def compute_bar_voltage(
    thermopower: Estimate, conductivity: Estimate, direction: FloatArray, edge: FloatArray
) -> BarVoltage:
    """Voltages of a long bar through which heat flows.

    Args:
        thermopower: S, any 3 × 3 tensor.
        conductivity: κ, symmetric and positive definite, in the same frame and any unit.
        direction: shape (3,), unit vector n along the bar.
        edge: shape (3,), from which what is across the bar is taken, along its part at right angles to n.

    Raises:
        InputError: κ is not symmetric and positive definite, or the edge is along the bar.
    """
    _require_conductivity(conductivity)
    scale = float(np.max(np.abs(conductivity.matrix)))
    inverse = np.asarray(np.linalg.inv(conductivity.matrix / scale), dtype=np.float64)
    image = inverse @ direction
    # The gradient whose part along the bar is one.
    gradient = image / float(direction @ image)
    across_edge = edge - direction * float(edge @ direction)
    length = float(np.linalg.norm(across_edge))
    if length < 1e-9 * float(np.linalg.norm(edge)):
        raise InputError("The edge is along the bar, so nothing is across along it.", field="edge")
    across_edge = across_edge / length
    field = thermopower.matrix @ gradient
    rest = field - direction * float(direction @ field)
    size = float(np.linalg.norm(rest))
    none = size <= 1e-12 * float(np.linalg.norm(thermopower.matrix)) * float(np.linalg.norm(gradient))
    toward = None if none else rest / size

    def spread(along: FloatArray) -> float | None:
        return _spread(thermopower, conductivity, inverse / scale, direction, gradient, along)

    return BarVoltage(
        along=float(direction @ field),
        along_sigma=spread(direction),
        across=0.0 if toward is None else size,
        across_sigma=None if toward is None else spread(toward),
        toward=toward,
        at_edge=float(across_edge @ field),
        at_edge_sigma=spread(across_edge),
        gradient=gradient / np.linalg.norm(gradient),
        leans=float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(direction, gradient)), direction @ gradient))),
    )


def _spread(
    thermopower: Estimate,
    conductivity: Estimate,
    inverse: FloatArray,
    direction: FloatArray,
    gradient: FloatArray,
    along: FloatArray,
) -> float | None:
    """σ of mᵀS g, g = κ⁻¹n/(nᵀκ⁻¹n), for m = ``along``: dg = −κ⁻¹ dκ g + g (nᵀκ⁻¹ dκ g)."""
    parts = [thermopower.propagate(np.outer(along, gradient).ravel())]
    image = along @ thermopower.matrix
    left = (image @ gradient) * (direction @ inverse) - image @ inverse
    parts.append(conductivity.propagate(np.outer(left, gradient).ravel()))
    known = [float(part) for part in parts if part is not None]
    return math.hypot(*known) if known else None


def _require_conductivity(conductivity: Estimate) -> None:
    matrix = conductivity.matrix
    if float(np.max(np.abs(matrix - matrix.T))) > 1e-9 * float(np.max(np.abs(matrix))):
        raise InputError("The thermal conductivity is not symmetric.")
    if np.any(sign_values(find_principal(Estimate(matrix, None, conductivity.frame)).values) <= 0.0):
        raise InputError(
            "A thermal conductivity has positive principal values, and this one has one that is not.",
            hint="Check the values of the sample's thermal conductivity.",
        )


def compute_peltier(thermopower: Estimate, temperature: float, unit: str | None = None) -> Estimate:
    """Π = T Sᵀ at an absolute temperature in kelvin, with its covariance.

    Raises:
        InputError: a temperature that is not above zero.
    """
    if not (temperature > 0.0 and np.isfinite(temperature)):
        raise InputError("The temperature is above 0 K.", field="temperature")
    covariance = None
    if thermopower.covariance is not None:
        order = np.arange(9).reshape(3, 3).T.ravel()
        covariance = temperature**2 * thermopower.covariance[np.ix_(order, order)]
    return Estimate(temperature * thermopower.matrix.T, covariance, thermopower.frame, unit)
