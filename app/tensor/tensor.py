"""A property tensor of a crystal as a caller gives it, made to obey the crystal's symmetry."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.estimate import Estimate, build_estimate, check_covariance
from app.tensor.form import Form, build_form
from app.tensor.kind import Kind
from app.tensor.matrix import LARGEST_CELL, read_matrix

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class PropertyTensor:
    """An allowed tensor with its form.

    Attributes:
        form: which cells are free.
        estimate: the matrix in the crystal frame (made to obey), with covariance where one was given.
        free: shape (k,), values of the free cells.
        free_covariance: shape (k, k), or None.
        misfit: Frobenius norm of what was removed to make the matrix obey, over that of what was given.
    """

    form: Form
    estimate: Estimate
    free: FloatArray
    free_covariance: FloatArray | None
    misfit: float


def build_tensor(
    crystal: Crystal,
    kind: Kind,
    *,
    matrix: npt.ArrayLike | None = None,
    free: Mapping[str, float] | None = None,
    covariance: npt.ArrayLike | None = None,
    unit: str | None = None,
) -> PropertyTensor:
    """A tensor from all nine cells in the crystal frame (then made to obey) or from every free cell by label.

    Args:
        crystal, kind: whose form it takes.
        matrix: shape (3, 3).
        free: label → value, exactly the free cells.
        covariance: shape (k, k), over the free cells in their order.
        unit: the unit's text.

    Raises:
        InputError: both or neither given, cells that are not free or are missing, a covariance that is none.
    """
    form = build_form(crystal, kind)
    misfit = 0.0
    if (matrix is None) == (free is None):
        raise InputError(
            "A tensor is given by its matrix or by its free cells, one of the two.",
            field="matrix" if matrix is not None else None,
            hint=f"The free cells of this crystal and kind are {', '.join(form.labels) or 'none: it vanishes'}.",
        )
    if matrix is not None:
        cells = read_matrix(matrix)
        scale = float(np.max(np.abs(cells))) or 1.0
        obeying = form.project(cells / scale)
        given_size = float(np.linalg.norm(cells / scale))
        misfit = float(np.linalg.norm(cells / scale - obeying)) / given_size if given_size else 0.0
        values = form.pick(obeying) * scale
    else:
        assert free is not None
        values = _read_free(free, form)
    checked = None if covariance is None else check_covariance(covariance, form.count)
    estimate = build_estimate(form, values, checked, crystal.frame_sentence, unit)
    return PropertyTensor(form, estimate, values, checked, misfit)


def _read_free(free: Mapping[str, float], form: Form) -> FloatArray:
    labels = form.labels
    hint = f"The free cells of this crystal and kind are {', '.join(labels) or 'none: it vanishes'}."
    for label in free:
        if label not in labels:
            raise InputError(f"The cell {label} is not free here.", field=f"free.{label}", hint=hint)
    missing = [label for label in labels if label not in free]
    if missing:
        raise InputError(f"The free cell {missing[0]} has no value.", field=f"free.{missing[0]}", hint=hint)
    values = np.zeros(len(labels))
    for index, label in enumerate(labels):
        try:
            values[index] = free[label]
        except (TypeError, ValueError):
            values[index] = np.nan
        if not abs(values[index]) <= LARGEST_CELL:
            raise InputError(
                f"The value of a free cell is a finite number of at most {LARGEST_CELL:g}.", field=f"free.{label}"
            )
    return values
