"""Pairs of equivalent directions on their own: readings that the claimed symmetry makes equal, compared two by two."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.special import erfc

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.readings.prediction import predict
from app.readings.reading import Reading
from app.readings.reading_set import resolve_readings
from app.readings.whitening import Whitening, build_whitening
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

ALIKE = 1e-6

MOST_READINGS: Final = 500
"""Among so many there are 125,000 pairs, and the covariance of all takes tenths of a second."""


@dataclass(frozen=True)
class Pair:
    """Two readings of one kind along directions that an operation of the group, and not a lattice line, makes equal.

    Attributes:
        first, second: positions of the readings.
        difference, sigma: the first less the second, tilts and batches included; sigma None without σ.
        p_value: of so large a difference or a larger one by chance; None without σ.
    """

    first: int
    second: int
    difference: float
    sigma: float | None
    p_value: float | None


def compare_pairs(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    matrix: FloatArray,
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> tuple[Pair, ...]:
    """Every pair of readings ``along`` or ``rod`` that the group makes equal, the most unlike first.

    Args:
        matrix: the tensor (3, 3) at which tilts and batches are weighed.

    Raises:
        InputError: more readings than ``MOST_READINGS``, whose whole covariance would be too large.
    """
    if len(readings) > MOST_READINGS:
        raise InputError(
            f"Equivalent readings are compared among up to {MOST_READINGS} readings, not {len(readings)}.",
            field="readings",
        )
    taken = resolve_readings(crystal, kind, readings, batches=batches, pose=pose)
    prediction = predict(taken, matrix)
    whitening = build_whitening(taken, matrix, prediction.values)
    covariance = None if taken.sigma is None else _compute_covariance(whitening, len(readings))
    known = np.array([reading.kind if reading.kind in ("along", "rod") else "" for reading in readings])
    pairs = []
    for first in range(len(readings)):
        if not known[first]:
            continue
        later = taken.first[first + 1 :]
        alike = np.max(np.abs(crystal.rotations @ taken.first[first] @ later.T), axis=0) >= 1.0 - ALIKE
        same_line = np.abs(later @ taken.first[first]) > 1.0 - ALIKE
        for offset in np.flatnonzero(alike & ~same_line & (known[first + 1 :] == known[first])).tolist():
            second = first + 1 + offset
            difference = float(taken.values[first] - taken.values[second])
            sigma = p = None
            if covariance is not None:
                variance = covariance[first, first] + covariance[second, second] - 2.0 * covariance[first, second]
                sigma = float(np.sqrt(variance))
                p = float(erfc(abs(difference) / sigma / np.sqrt(2.0)))
            pairs.append(Pair(first, second, difference, sigma, p))
    return tuple(sorted(pairs, key=lambda pair: pair.p_value if pair.p_value is not None else -abs(pair.difference)))


def _compute_covariance(whitening: Whitening, count: int) -> FloatArray:
    """The whole V, shape (n, n): the inverse of WᵀW."""
    root = whitening.whiten(np.eye(count))
    covariance: FloatArray = np.asarray(np.linalg.inv(root.T @ root), dtype=np.float64)
    return covariance
