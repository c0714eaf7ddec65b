"""Do the readings agree with the symmetry that is claimed? The fit against the same readings without symmetry."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt
from scipy.special import chdtrc, fdtrc

from app.crystal.crystal import Crystal
from app.readings.prediction import is_meaningful, linear_rows, predict
from app.readings.reading_set import ReadingSet
from app.readings.solver import solve_least_squares
from app.readings.whitening import Whitening
from app.tensor.form import Form, build_form_of_rotations

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class SymmetryTest:
    """The likelihood-ratio test of the group's form inside the form of the group 1.

    Attributes:
        delta_chi2: what χ² loses when the symmetry is given up, V held at the constrained fit.
        delta_dof: the number of combinations beyond the symmetry's form that the readings see.
        p_value: probability of so much or more if the symmetry holds; None where no degrees of freedom are left for F.
        statistic: "chi2" where the readings carry sigma, "F" where the covariance comes from their scatter.
    """

    delta_chi2: float
    delta_dof: int
    p_value: float | None
    statistic: Literal["chi2", "F"]


def test_symmetry(
    crystal: Crystal, form: Form, taken: ReadingSet, coordinates: FloatArray, whitening: Whitening
) -> SymmetryTest | None:
    """Test the group against 1; None where the group is 1 or −1 or the readings cannot tell."""
    if crystal.group.is_triclinic:
        return None
    wide = build_form_of_rotations(np.eye(3)[None], form.kind)
    basis = wide.orthonormal.reshape(wide.count, 9)
    linear = linear_rows(taken)
    current = basis @ (coordinates @ form.orthonormal.reshape(form.count, 9))
    start_chi2: float | None = None
    for _ in range(50):
        prediction = predict(taken, (current @ basis).reshape(3, 3), linear)
        residual = whitening.whiten(taken.values - prediction.values)
        design = prediction.rows @ basis.T
        solution = solve_least_squares(whitening.whiten(design), residual, unweighted=design)
        if start_chi2 is None:
            start_chi2 = float(residual @ residual)
        step = solution.solution
        while not is_meaningful(taken, ((current + step) @ basis).reshape(3, 3)):
            step = step / 2.0
        current = current + step
        if np.linalg.norm(step) <= 1e-11 * np.linalg.norm(current) or not taken.has("rod", "sheet"):
            break
    extra = solution.rank - form.count
    if extra <= 0 or start_chi2 is None:
        return None
    prediction = predict(taken, (current @ basis).reshape(3, 3), linear)
    residual = whitening.whiten(taken.values - prediction.values)
    free_chi2 = float(residual @ residual)
    gain = max(start_chi2 - free_chi2, 0.0)
    if taken.sigma is not None:
        return SymmetryTest(gain, extra, float(chdtrc(extra, gain)), "chi2")
    left = len(taken) - solution.rank
    if left <= 0 or free_chi2 <= 0.0:
        return SymmetryTest(gain, extra, None, "F")
    return SymmetryTest(gain, extra, float(fdtrc(extra, left, gain / extra / (free_chi2 / left))), "F")
