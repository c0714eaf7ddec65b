"""By what a plan of readings is judged: all cells together, one cell, or one principal axis.

D: the determinant of the information, A: the trace of the covariance, both in the orthonormal (Frobenius) basis;
one cell's variance; the area of one axis's region (A. C. Atkinson, A. N. Donev and R. D. Tobias, Optimum Experimental
Designs, with SAS, 2007, ch. 10, where the last two are c- and D_s-optimality).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.special import chdtri

from app.errors import InputError
from app.readings.information import Outlook
from app.tensor.estimate import Estimate
from app.tensor.form import Form
from app.tensor.kind import LABELS
from app.tensor.principal import find_principal

FloatArray = npt.NDArray[np.float64]
CriterionKind = Literal["D", "A", "cell", "axis"]

LEVEL: Final = 0.95
"""Of the area of an axis's region."""

_VANISHING: Final = 1e-9
_HINT: Final = 'It is "D", "A", {"cell": "13"} for one cell or {"axis": 1} for one principal axis.'


@dataclass(frozen=True)
class Criterion:
    """What is to be small.

    Attributes:
        kind: "D", "A", "cell" or "axis".
        functionals: shape (k, m), derivatives by the coordinates in the orthonormal basis of the m quantities whose
            covariance counts: all k for D and A, one for a cell, the one or two turns (degrees) that symmetry leaves
            to an axis.
        name: for sentences.
    """

    kind: CriterionKind
    functionals: FloatArray
    name: str

    def value(self, outlook: Outlook) -> float | None:
        """The criterion's own number; None where the readings do not determine it.

        D: log det of the information. A: trace of the covariance. Cell: its variance. Axis: the area of the ellipse
        that holds the axis at 95 % to first order, in square degrees; where symmetry leaves the axis one turn, the
        length of the interval in degrees.

        Raises:
            InputError: a variance too small or too large for a number.
        """
        if self.kind == "D":
            return outlook.log_det
        if not np.all(outlook.sees(self.functionals)):
            return None
        # What overflows is refused just below, with a sentence.
        with np.errstate(over="ignore", invalid="ignore"):
            derivatives = self.functionals * outlook.sigma
            spread = derivatives.T @ outlook.covariance @ derivatives
            value = self._measure_region(spread) if self.kind == "axis" else float(np.trace(spread))
        if not (np.isfinite(value) and value > 0.0):
            raise InputError(
                "The expected uncertainty leaves the range of numbers.",
                field="sigma",
                hint="Give sigma and the readings in another unit.",
            )
        return value

    def _measure_region(self, spread: FloatArray) -> float:
        deviations = np.sqrt(np.maximum(np.diag(spread), 0.0))
        if len(spread) == 1:
            return float(2.0 * np.sqrt(chdtri(1, 1.0 - LEVEL)) * deviations[0])
        # √det without its square: σ1 σ2 √(1 − ρ²).
        product = deviations[0] * deviations[1]
        correlation = spread[0, 1] / product if product > 0.0 else 0.0
        return float(np.pi * chdtri(2, 1.0 - LEVEL) * product * np.sqrt(max(1.0 - correlation**2, 0.0)))


def build_criterion(form: Form, given: Any, matrix: FloatArray | None) -> Criterion:
    """A criterion from "D", "A", {"cell": label} or {"axis": 1, 2 or 3 (principal values descending)}.

    Args:
        form: the allowed tensors.
        given: what was asked.
        matrix: shape (3, 3), the tensor's values, which an axis needs; None where they are not given.

    Raises:
        InputError: at ``criterion``, with the reason.
    """
    if isinstance(given, str) and given in ("D", "A"):
        kind: CriterionKind = "D" if given == "D" else "A"
        return Criterion(kind, np.eye(form.count), "all cells together")
    if isinstance(given, Mapping) and set(given) == {"cell"}:
        return _build_cell(form, given["cell"])
    if isinstance(given, Mapping) and set(given) == {"axis"}:
        return _build_axis(form, given["axis"], matrix)
    raise InputError("This is no criterion to plan by.", field="criterion", hint=_HINT)


def cell_functional(form: Form, label: str, field: str) -> FloatArray:
    """Derivative (k,) of one of the nine cells by the coordinates in the orthonormal basis.

    Raises:
        InputError: no such cell, or one that symmetry holds at zero.
    """
    known = f"The free cells here are {', '.join(form.labels)}; a cell that equals others may be named too."
    if label not in LABELS:
        raise InputError(f"There is no cell “{label}”.", field=field, hint=f"A cell is two digits from 1 to 3. {known}")
    functional: FloatArray = form.orthonormal.reshape(form.count, 9)[:, LABELS.index(label)]
    if np.linalg.norm(functional) < _VANISHING:
        raise InputError(
            f"Symmetry holds the cell {label} at zero, so there is nothing to measure.", field=field, hint=known
        )
    return functional


def _build_cell(form: Form, label: Any) -> Criterion:
    if not isinstance(label, str):
        raise InputError("A cell is named by text like “13”.", field="criterion.cell", hint=_HINT)
    functional = cell_functional(form, label, "criterion.cell")
    return Criterion("cell", functional[:, None], f"the cell {label}")


def _build_axis(form: Form, number: Any, matrix: FloatArray | None) -> Criterion:
    if isinstance(number, bool) or number not in (1, 2, 3):
        raise InputError(
            "A principal axis is 1, 2 or 3, its value from the largest to the smallest.",
            field="criterion.axis",
            hint=_HINT,
        )
    if matrix is None:
        raise InputError(
            "To plan for a principal axis, the tensor's values must be known about.",
            field="tensor",
            hint="Give the tensor's matrix or free cells: a first estimate, for example of an earlier fit.",
        )
    principal = find_principal(Estimate(matrix, None, ""))
    index = int(number) - 1
    if principal.arbitrary[index]:
        raise InputError(
            f"The principal value {number} equals another one, so its axis is not determined.",
            field="criterion.axis",
            hint="Choose an axis whose value stands alone, or plan for all cells together.",
        )
    flat = form.orthonormal.reshape(form.count, 9)
    axis, turns = principal.axes[index], []
    for other in range(3):
        if other != index:
            gap = principal.values[index] - principal.values[other]
            outer = np.outer(axis, principal.axes[other])
            turns.append(np.rad2deg(flat @ (outer + outer.T).ravel() / 2.0 / gap))
    parts = np.linalg.svd(np.column_stack(turns), full_matrices=False)
    smallest = _VANISHING * float(np.rad2deg(1.0)) / float(np.max(np.abs(principal.values)))
    sizes = parts.S
    kept = sizes > smallest
    if not np.any(kept):
        raise InputError(
            f"Symmetry holds the principal axis {number}, so there is nothing to measure.",
            field="criterion.axis",
            hint="Choose another axis, or plan for all cells together.",
        )
    return Criterion("axis", parts.U[:, kept] * sizes[kept], f"the principal axis {number}")
