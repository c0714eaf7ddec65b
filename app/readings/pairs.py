"""Pairs of equivalent directions on their own: readings that the claimed symmetry makes equal, compared two by two."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from scipy.special import erfc

from app.crystal.crystal import Crystal
from app.readings.prediction import predict
from app.readings.reading import Reading
from app.readings.reading_set import resolve_readings
from app.readings.whitening import Whitening, build_whitening
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

ALIKE = 1e-6


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
    """
    taken = resolve_readings(crystal, kind, readings, batches=batches, pose=pose)
    prediction = predict(taken, matrix)
    whitening = build_whitening(taken, matrix, prediction.values)
    pairs = []
    for first in range(len(readings)):
        for second in range(first + 1, len(readings)):
            if readings[first].kind != readings[second].kind or readings[first].kind not in ("along", "rod"):
                continue
            one, two = taken.first[first], taken.first[second]
            images = np.abs(crystal.rotations @ one @ two)
            same_line = abs(float(one @ two)) > 1.0 - ALIKE
            if same_line or float(np.max(images)) < 1.0 - ALIKE:
                continue
            difference = float(taken.values[first] - taken.values[second])
            sigma = _measure_sigma(whitening, len(readings), first, second) if taken.sigma is not None else None
            p = None if sigma is None else float(erfc(abs(difference) / sigma / np.sqrt(2.0)))
            pairs.append(Pair(first, second, difference, sigma, p))
    return tuple(sorted(pairs, key=lambda pair: pair.p_value if pair.p_value is not None else -abs(pair.difference)))


def _measure_sigma(whitening: Whitening, count: int, first: int, second: int) -> float:
    """The standard deviation of a difference under the whole V: V c by solving for the whitened unit difference."""
    root = whitening.whiten(np.eye(count))
    covariance = np.linalg.inv(root.T @ root)
    contrast = np.zeros(count)
    contrast[first], contrast[second] = 1.0, -1.0
    return float(np.sqrt(contrast @ covariance @ contrast))
