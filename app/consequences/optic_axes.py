"""Optic axes, the angle 2V between them, and the optic sign, with what the uncertainty of the permittivity leaves.

tan² V_z = (n_α⁻² − n_β⁻²) / (n_β⁻² − n_γ⁻²), V_z between either axis and the axis of the largest index (M. Born and
E. Wolf, Principles of Optics, 7th ed., section 15.3, from memory). The sign is + where the acute angle is about the
axis of the largest index; of a uniaxial crystal where n_e > n_o.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.consequences.indicatrix import Indicatrix
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal

FloatArray = npt.NDArray[np.float64]
OpticSign = Literal["+", "-"]

RIGHT_ANGLE: Final = 1e-12
"""|cos 2V| below this, or what rounding leaves of it, is a right angle, and there is no sign."""


@dataclass(frozen=True)
class OpticAxes:
    """The directions in which both waves run alike.

    Attributes:
        axes: shape (m, 3), unit vectors in the crystal frame: two (biaxial), one (uniaxial) or none (isotropic).
        two_v: the acute angle between two of them, degrees; None unless biaxial.
        two_v_sigma: its standard deviation, degrees; None without covariance or unless biaxial.
        sign: "+" or "-"; None for an isotropic crystal and where 2V is a right angle.
        cone: along an optic axis the rays fill a cone, of which the wave normal is one; its opening in the plane of
            the two axes, which is the largest walk-off there, degrees. None unless biaxial.
        note: what the data cannot tell; None where they can, or where nothing is known of the uncertainty.
    """

    axes: FloatArray
    two_v: float | None
    two_v_sigma: float | None
    sign: OpticSign | None
    cone: float | None
    note: str | None


def find_optic_axes(indicatrix: Indicatrix, estimate: Estimate) -> OpticAxes:
    """Optic axes of an indicatrix; ``estimate`` is the permittivity that it was built from, for its covariance."""
    note = _describe_doubt(indicatrix, estimate)
    if indicatrix.shape == "isotropic":
        return OpticAxes(np.zeros((0, 3)), None, None, None, None, note)
    if indicatrix.shape == "uniaxial":
        positive = bool(indicatrix.values[0] > indicatrix.values[1])
        return OpticAxes(indicatrix.optic_axes[:1].copy(), None, None, "+" if positive else "-", None, note)
    doubled = 2.0 * indicatrix.half_angle
    right = abs(np.cos(doubled)) <= max(RIGHT_ANGLE, 2.0 * indicatrix.rounding)
    sign: OpticSign | None = None if right else ("+" if doubled < np.pi / 2.0 else "-")
    # tan of the opening is n_β² √((n_α⁻² − n_β⁻²)(n_β⁻² − n_γ⁻²)) = ½ n_β² (n_α⁻² − n_γ⁻²) sin 2V (Born and Wolf,
    # section 15.3.4, from memory).
    cone = np.arctan(indicatrix.values[1] * indicatrix.spread * np.sin(doubled) / 2.0)
    return OpticAxes(
        axes=indicatrix.optic_axes.copy(),
        two_v=90.0 if right else float(np.rad2deg(min(doubled, np.pi - doubled))),
        two_v_sigma=_compute_sigma(indicatrix, estimate),
        sign=sign,
        cone=float(np.rad2deg(cone)),
        note=note,
    )


def _compute_sigma(indicatrix: Indicatrix, estimate: Estimate) -> float | None:
    # tan² V = ε_γ (ε_β − ε_α) / (ε_α (ε_γ − ε_β)), so d(2V) = ½ sin 2V d(ln tan² V), and dε_i = p_iᵀ dε p_i.
    largest, middle, smallest = indicatrix.values
    by_values = np.array(
        [
            1.0 / largest - 1.0 / (largest - middle),
            1.0 / (middle - smallest) + 1.0 / (largest - middle),
            -1.0 / smallest - 1.0 / (middle - smallest),
        ]
    )
    outers = (indicatrix.axes[:, :, None] * indicatrix.axes[:, None, :]).reshape(3, 9)
    sigma = estimate.propagate(np.sin(2.0 * indicatrix.half_angle) / 2.0 * by_values @ outers)
    return None if sigma is None else float(np.rad2deg(sigma))


def _describe_doubt(indicatrix: Indicatrix, estimate: Estimate) -> str | None:
    if estimate.covariance is None:
        return None
    shape = find_principal(estimate).shape
    if shape == indicatrix.shape:
        return None
    article = "an isotropic" if shape == "isotropic" else "a uniaxial"
    return (
        f"Within its uncertainty this crystal cannot be told from {article} one (χ², 95 %), so its optic axes mean "
        "little."
    )
