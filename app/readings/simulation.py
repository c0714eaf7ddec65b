"""Whether the linear standard deviations of the principal axes can be trusted: a seeded simulation beside them.

An axis turns by δ ≈ (eᵢᵀ δA eⱼ)/(λᵢ − λⱼ); where two values are near for their uncertainties that is no longer so, and
the axis wanders over a girdle.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.tensor.form import Form
from app.tensor.principal import Principal

FloatArray = npt.NDArray[np.float64]

DRAWS: Final = 2000
SEED: Final = 40_961
TRUSTED: Final = 0.2
"""Part by which the simulated spread may differ from the linear one."""


@dataclass(frozen=True)
class AxisCheck:
    """The turn of one axis toward another.

    Attributes:
        axis, toward: 0, 1 or 2.
        linear, simulated: standard deviations, degrees.
        trusted: whether they agree within 20 %.
    """

    axis: int
    toward: int
    linear: float
    simulated: float
    trusted: bool


def check_axes(form: Form, free: FloatArray, covariance: FloatArray, principal: Principal) -> tuple[AxisCheck, ...]:
    """Every pair of determined axes whose turn has a linear standard deviation; none without one.

    Args:
        form: the allowed space.
        free, covariance: of the free cells, shapes (k,) and (k, k).
        principal: of the tensor, with ``axis_sigma``.
    """
    if principal.axis_sigma is None:
        return ()
    pairs = [
        (one, two)
        for one in range(3)
        for two in range(one + 1, 3)
        if not (principal.arbitrary[one] or principal.arbitrary[two])
        and np.isfinite(principal.axis_sigma[one, two])
        and principal.axis_sigma[one, two] > 1e-9
    ]
    if not pairs:
        return ()
    drawn = np.random.default_rng(SEED).multivariate_normal(free, covariance, size=DRAWS, method="eigh")
    matrices = np.einsum("dk,kij->dij", drawn, form.basis)
    _, vectors = np.linalg.eigh((matrices + np.swapaxes(matrices, 1, 2)) / 2.0)
    # Components of every simulated axis, in descending order, by the axes of the tensor.
    inside = np.einsum("ai,dij->daj", principal.axes, vectors[:, :, ::-1])
    checks = []
    for one, two in pairs:
        # A line has no sense: its angle toward the other axis is taken over a half-turn.
        turned = np.rad2deg(np.arctan2(inside[:, two, one], inside[:, one, one]))
        turned = (turned + 90.0) % 180.0 - 90.0
        simulated, linear = float(np.sqrt(np.mean(turned**2))), float(principal.axis_sigma[one, two])
        checks.append(AxisCheck(one, two, linear, simulated, abs(simulated - linear) <= TRUSTED * linear))
    return tuple(checks)


def describe_axes_check(form: Form, free: FloatArray, covariance: FloatArray, principal: Principal) -> str:
    """A sentence on the axes of a fit: that the linear errors hold, or for which they do not."""
    checks = check_axes(form, free, covariance, principal)
    doubtful = [check for check in checks if not check.trusted]
    if not checks:
        return "No axis is free to turn, or none is determined."
    if not doubtful:
        return "The errors of the axes agree with a simulation within 20 %."
    named = "; ".join(
        f"p{check.axis + 1} toward p{check.toward + 1}: {check.linear:.2g}° by formula, {check.simulated:.2g}° by "
        "simulation"
        for check in doubtful
    )
    return f"Do not trust the errors of the axes; take their region instead ({named})."
