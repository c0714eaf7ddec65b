"""From the X-ray bench to the saw: a small rotation between the two, from cuts whose achieved normal was measured."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.cutting.attitude import fit_rotation, measure_angles
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Transfer:
    """The rotation from the saw's frame, as the bench knows it, to what the saw really cuts.

    Attributes:
        matrix: proper, shape (3, 3): a face that the bench sends to n is cut at ``matrix`` n.
        sigma: standard deviation of the direction of a further cut, degrees per component; None where too few cuts were
            measured to tell.
        residuals: degrees, one per cut.
    """

    matrix: FloatArray
    sigma: float | None
    residuals: FloatArray


def find_transfer(wanted: npt.ArrayLike, achieved: npt.ArrayLike) -> Transfer:
    """The least-squares rotation from wanted to achieved normals, both (n, 3), laboratory frame, stage at its settings.

    A direction has two components, a rotation three unknowns: the scatter is over 2n − 3 degrees of freedom, and a
    further cut carries it together with the uncertainty of the rotation itself, to first order.

    Raises:
        InputError: fewer than two cuts, or all along one line.
    """
    first, second = (np.asarray(given, dtype=np.float64).reshape(-1, 3) for given in (wanted, achieved))
    if len(first) < 2 or float(np.linalg.svd(first, compute_uv=False)[1]) < 1e-3:
        raise InputError(
            "A transfer between bench and saw needs two cuts or more, in different directions.",
            field="transfer",
            hint="Measure the achieved normal of another cut.",
        )
    matrix = fit_rotation(first, second, np.ones(len(first)))
    residuals = measure_angles(first @ matrix.T, second)
    spare = 2 * len(first) - 3
    variance = float(np.sum(residuals**2)) / spare
    # The normal matrix of small turns is Σ (1 − n nᵀ); a further cut along n feels the two turns across n.
    normal = np.sum(np.eye(3) - np.einsum("ni,nj->nij", first, first), axis=0)
    carried = float(np.trace(np.linalg.inv(normal))) / 3.0
    return Transfer(matrix, float(np.sqrt(variance * (1.0 + carried))), residuals)
