"""What each reading does in a fit: leaving it out, what it carries, and a fit that bends less to outliers.

Leaving out and carrying are by fits of their own, so they hold for every kind of reading, bars and batches included.
The robust fit is Huber's M-estimate on the standardised residuals by repeated weighting (P. J. Huber, Ann. Math.
Statist. 35 (1964) 73; k = 1.345 for 95 % efficiency at the normal). It stands beside the plain answer and never takes
its place.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.readings.fit import Fit, fit_readings
from app.readings.reading import Reading
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

HUBER: Final = 1.345
MAD_FACTOR: Final = 0.6744897501960817
"""Median of the absolute value of a standard normal variable."""
MAX_ROUNDS: Final = 60
SETTLED: Final = 1e-9
MOST_READINGS: Final = 100


@dataclass(frozen=True)
class Influence:
    """What the N readings do.

    Attributes:
        changes: shape (N, k), free cells without the reading less with it; NaN where they are not determined then.
        determined: shape (N,), whether the others determine the tensor.
        shares: shape (N, k), part of each free cell's variance that the reading's own error brings, columns summing to
            1 for readings of independent errors; None where the covariance is not known.
        correlation: shape (k, k), of the free cells; None where the covariance is not known.
    """

    changes: FloatArray
    determined: npt.NDArray[np.bool_]
    shares: FloatArray | None
    correlation: FloatArray | None


@dataclass(frozen=True)
class RobustFit:
    """Huber's fit beside the plain one.

    Attributes:
        fit: with each reading weighted.
        weights: shape (N,), 1 for a reading that is taken as it is, less for one that is held back.
        scale: of the residuals, in units of σ where σ is given, else in the readings' unit.
        settled: whether the weights came to rest.
    """

    fit: Fit
    weights: FloatArray
    scale: float
    settled: bool


def measure_influence(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    fit: Fit,
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> Influence:
    """Leave every reading out, and nudge every reading's value.

    Args:
        fit: of all readings, determined.

    Raises:
        InputError: too many readings for a fit without each, or a fit that is not determined.
    """
    free = _require(fit, len(readings))
    changes = np.full((len(readings), len(free)), np.nan)
    determined = np.zeros(len(readings), dtype=bool)
    for place in range(len(readings)):
        others = [*readings[:place], *readings[place + 1 :]]
        without = fit_readings(crystal, kind, others, batches=batches, pose=pose) if others else None
        if without is not None and without.free is not None:
            changes[place] = without.free - free
            determined[place] = True
    covariance = fit.free_covariance
    shares = correlation = None
    if covariance is not None and np.all(np.diag(covariance) > 0):
        deviations = np.sqrt(np.diag(covariance))
        correlation = covariance / np.outer(deviations, deviations)
        shares = _share(crystal, kind, readings, fit, batches, pose)
    return Influence(changes, determined, shares, correlation)


def _require(fit: Fit, count: int) -> FloatArray:
    if fit.free is None:
        raise InputError("The readings do not determine a tensor, so no reading can be judged.", field="readings")
    if count > MOST_READINGS:
        raise InputError(
            f"Leaving out one by one is done for up to {MOST_READINGS} readings, not {count}.", field="readings"
        )
    return fit.free


def _share(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    fit: Fit,
    batches: Mapping[str, float] | None,
    pose: Pose,
) -> FloatArray:
    assert fit.readings is not None
    assert fit.free is not None
    used = fit.readings.sigma_used
    moved = np.zeros((len(readings), len(fit.free)))
    for place, reading in enumerate(readings):
        assert reading.value is not None
        step = 1e-3 * float(used[place])
        nudged = [*readings]
        nudged[place] = replace(reading, value=reading.value + step)
        other = fit_readings(crystal, kind, nudged, batches=batches, pose=pose)
        assert other.free is not None
        moved[place] = (other.free - fit.free) / step * used[place]
    squares = moved**2
    total = np.sum(squares, axis=0)
    shares: FloatArray = squares / np.where(total > 0, total, 1.0)
    return shares


def fit_robustly(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    fit: Fit,
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> RobustFit:
    """Huber's estimate from the plain fit on.

    With σ each reading is measured by its own; without, by the median absolute residual of all.

    Raises:
        InputError: a fit that is not determined, or one with no residuals to judge by.
    """
    _require(fit, 0)
    if fit.dof == 0:
        raise InputError(
            "There are as many readings as cells, so every reading fits exactly and none can be held back.",
            field="readings",
            hint="Take more readings.",
        )
    weights, scale, current = np.ones(len(readings)), 1.0, fit
    settled = False
    for _ in range(MAX_ROUNDS):
        assert current.readings is not None
        residual = current.readings.residual
        if fit.covariance_from == "sigma":
            assert fit.readings is not None
            standard = residual / fit.readings.sigma_used
        else:
            scale = float(np.median(np.abs(residual))) / MAD_FACTOR
            standard = residual / scale if scale > 0 else np.zeros_like(residual)
        fresh = np.minimum(1.0, HUBER / np.maximum(np.abs(standard), 1e-300))
        moved = float(np.max(np.abs(fresh - weights)))
        weights = fresh
        if moved < SETTLED:
            settled = True
            break
        current = fit_readings(crystal, kind, _weigh(readings, weights, scale), batches=batches, pose=pose)
    return RobustFit(current, weights, scale, settled)


def _weigh(readings: Sequence[Reading], weights: FloatArray, scale: float) -> list[Reading]:
    """The same readings with their σ widened where they are held back."""
    return [
        replace(
            reading, sigma=(reading.sigma if reading.sigma is not None else max(scale, 1e-300)) / float(np.sqrt(weight))
        )
        for reading, weight in zip(readings, weights, strict=True)
    ]
