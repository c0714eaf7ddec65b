"""A tensor that is kept while the crystal around it is corrected: another frame rule, another group, another cell.

Where only the frame rule changes, the crystal stays where it is and its axes of description turn: cells go over as
R T Rᵀ, R taking components in the old frame to components in the new one. Where cell or group change, the cells of the
matrix are kept in the frame of the same rule and made to obey the new group.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.tensor.form import build_form
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]

LOSS_LIMIT = 1e-9
"""Of what is removed, relative to the whole (Frobenius): below it, rounding."""


@dataclass(frozen=True)
class Carried:
    """A tensor in a new form.

    Attributes:
        labels: the free cells of the new form, in their order.
        free: shape (k,), their values.
        covariance: shape (k, k), or None where nothing is known, or no longer enough.
        removed: Frobenius norm of what the new form forbids, over that of the whole.
        freed: labels of free cells about whose uncertainty the old tensor says nothing.
    """

    labels: tuple[str, ...]
    free: FloatArray
    covariance: FloatArray | None
    removed: float
    freed: tuple[str, ...]


def find_frame_turn(old: Crystal, new: Crystal) -> FloatArray:
    """R, shape (3, 3), with v_new = R v_old where the two differ by their frame rule only; else the identity.

    For the same lattice R = M_new M_old⁻¹, which is then a proper rotation.
    """
    if old.M is None or new.M is None or old.cell is None or new.cell is None:
        return np.eye(3)
    if not np.allclose(old.cell.parameters, new.cell.parameters, rtol=0.0, atol=1e-12):
        return np.eye(3)
    left, _, right = np.linalg.svd(new.M @ np.linalg.inv(old.M))
    turn: FloatArray = left @ right
    return turn


def carry_tensor(tensor: PropertyTensor, turn: FloatArray, crystal: Crystal) -> Carried:
    """The tensor in the frame v_new = turn v_old, made to obey ``crystal``, covariance included (first order)."""
    form = build_form(crystal, tensor.form.kind)
    turned = turn @ tensor.estimate.matrix @ turn.T
    obeying = form.project(turned)
    size = float(np.linalg.norm(turned))
    removed = float(np.linalg.norm(turned - obeying)) / size if size else 0.0
    covariance: FloatArray | None = None
    freed: tuple[str, ...] = ()
    if tensor.free_covariance is not None and form.count:
        flat = form.orthonormal.reshape(form.count, 9)
        pick = (flat.T @ flat)[list(form.free)]
        moved = pick @ np.kron(turn, turn) @ tensor.form.basis.reshape(tensor.form.count, 9).T
        covariance = moved @ tensor.free_covariance @ moved.T
        covariance = (covariance + covariance.T) / 2.0
        known = np.linalg.norm(moved, axis=1) > LOSS_LIMIT
        freed = tuple(label for label, is_known in zip(form.labels, known, strict=True) if not is_known)
        if form.count > tensor.form.count or freed:
            covariance = None
            freed = freed or tuple(form.labels)
    # Where nothing is removed the cells stay as they are, to the last digit.
    cells = obeying if removed > LOSS_LIMIT else turned
    return Carried(tuple(form.labels), form.pick(cells), covariance, removed if removed > LOSS_LIMIT else 0.0, freed)
