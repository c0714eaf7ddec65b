"""The same tensor in another cell, setting or frame, with an audit cell by cell; and how two cells match.

Column j of the basis P is the new axis j in the old basis, (a' b' c') = (a b c) P (International Tables for
Crystallography A, 2016, section 1.5.1), so the metrics are related by G' = Pᵀ G P. The new axes stand in the old
crystal frame as M_old P and in the new one as M_new; Q M_old P = M_new gives the rotation between the two frames,
v_new = Q v_old and T_new = Q T_old Qᵀ. It is passive: the crystal stays. Q is proper, so an axial tensor takes no sign.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.form import build_form, snap_coefficients
from app.tensor.kind import LABELS
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]

MATCH_LIMIT: Final = 0.02
"""Largest misfit of two metrics, |ΔG_ij| / √(G_ii G_jj), that still counts as the same crystal."""

ROUNDING: Final = 1e-9
ENTRY_LIMIT: Final = 1000.0
FLATNESS_LIMIT: Final = 1e-9
"""Determinant of the basis with columns of unit length, below which its axes lie in one plane."""


@dataclass(frozen=True)
class AuditEntry:
    """Where one cell of the converted tensor comes from.

    Attributes:
        cell: its label, like "13", in the new crystal frame.
        terms: free cell of the old form → coefficient; what does not contribute is left out.
        value: the cell's value, Σ coefficient · free cell.
    """

    cell: str
    terms: dict[str, float]
    value: float


@dataclass(frozen=True)
class Conversion:
    """A tensor in the frame of another description of the same crystal.

    Attributes:
        matrix: shape (3, 3), in the new crystal frame.
        rotation: Q, shape (3, 3), v_new = Q v_old.
        basis: P, shape (3, 3), column j the new axis j in the old basis.
        audit: nine entries in row order.
        misfit: of the metrics, largest |ΔG_ij| / √(G_ii G_jj) between Pᵀ G P and the new cell's.
        estimate: the same matrix with covariance, frame sentence and unit.
        removed: Frobenius norm of what the new crystal's group would remove, over that of the matrix; 0 where the new
            group allows it as it is.
    """

    matrix: FloatArray
    rotation: FloatArray
    basis: FloatArray
    audit: tuple[AuditEntry, ...]
    misfit: float
    estimate: Estimate
    removed: float


@dataclass(frozen=True)
class Candidate:
    """One way in which the new axes may be chosen from the old ones.

    Attributes:
        basis: P, shape (3, 3), entries −1, 0, 1, positive determinant.
        misfit: of the metrics, as in Conversion.
        matrix: shape (3, 3), the tensor in the new crystal frame.
    """

    basis: FloatArray
    misfit: float
    matrix: FloatArray


def convert_tensor(
    from_crystal: Crystal, tensor: PropertyTensor, to_crystal: Crystal, basis: npt.ArrayLike
) -> Conversion:
    """Carry a tensor from one description of a crystal into another.

    Args:
        from_crystal: the old cell, group and frame, to which the tensor refers.
        tensor: in the old crystal frame.
        to_crystal: the new cell, group and frame.
        basis: P, shape (3, 3), column j the new axis j in the old basis; fractions for a change of centring.

    Raises:
        InputError: field "from" or "to" for a limiting group, which has no cell; field "basis" for a matrix that is
            none, is singular or left-handed, or with which the two cells differ by more than 2 % (the bases of
            −1, 0, 1 that would fit are in ``detail``).
    """
    old, new = _require_cell(from_crystal, "from"), _require_cell(to_crystal, "to")
    chosen = _check_basis(basis)
    old_metric, new_metric = old.T @ old, new.T @ new
    misfit = float(measure_misfit(chosen.T @ old_metric @ chosen, new_metric))
    if misfit > MATCH_LIMIT * (1.0 + ROUNDING):
        raise _refuse_misfit(misfit, old_metric, new_metric)
    rotation = _find_rotations(old @ chosen, new)
    estimate = tensor.estimate.turn(rotation, to_crystal.frame_sentence)
    form = tensor.form
    coefficients = snap_coefficients(np.kron(rotation, rotation) @ form.basis.reshape(form.count, 9).T)
    audit = tuple(
        AuditEntry(
            label,
            {name: float(number) for name, number in zip(form.labels, row, strict=True) if number != 0.0},
            float(value),
        )
        for label, row, value in zip(LABELS, coefficients, estimate.matrix.ravel(), strict=True)
    )
    allowed = build_form(to_crystal, form.kind)
    scale = float(np.max(np.abs(estimate.matrix))) or 1.0
    scaled = estimate.matrix / scale
    size = float(np.linalg.norm(scaled)) or 1.0
    removed = float(np.linalg.norm(scaled - allowed.project(scaled))) / size
    return Conversion(estimate.matrix, rotation, chosen, audit, misfit, estimate, removed)


def list_candidates(from_crystal: Crystal, tensor: PropertyTensor, to_crystal: Crystal) -> tuple[Candidate, ...]:
    """Every basis of −1, 0, 1 with which the two cells match within 2 %, the best first.

    All are listed, also those that a symmetry of the lattice makes alike: where the lattice has more symmetry than the
    tensor (monoclinic settings often admit two ways), only the giver knows which was meant. Equally good ones: the one
    with the fewest minus signs first, then the one most like the identity.

    Raises:
        InputError: field "from" or "to" for a limiting group, which has no cell.
    """
    old, new = _require_cell(from_crystal, "from"), _require_cell(to_crystal, "to")
    bases, misfits = _match_metrics(old.T @ old, new.T @ new)
    rotations = _find_rotations(old @ bases, new)
    matrices = rotations @ tensor.estimate.matrix @ np.swapaxes(rotations, -1, -2)
    return tuple(
        Candidate(basis, float(misfit), matrix) for basis, misfit, matrix in zip(bases, misfits, matrices, strict=True)
    )


def measure_misfit(metrics: FloatArray, target: FloatArray) -> FloatArray:
    """Largest |ΔG_ij| / √(G_ii G_jj) of metrics (..., 3, 3) against one of shape (3, 3), shape (...)."""
    edges = np.sqrt(np.diag(target))
    misfits: FloatArray = np.max(np.abs(metrics - target) / np.outer(edges, edges), axis=(-2, -1))
    return misfits


def _require_cell(crystal: Crystal, field: str) -> FloatArray:
    if crystal.M is None:
        raise InputError(
            f"The limiting group {crystal.group.symbol} has no cell, so its axes cannot be changed.",
            field=field,
            hint="Give a crystal with a cell; to turn a specimen, give a pose.",
        )
    return crystal.M


def _check_basis(given: npt.ArrayLike) -> FloatArray:
    try:
        basis = np.array(given, dtype=np.float64)
    except (TypeError, ValueError):
        basis = np.empty(0)
    if basis.shape != (3, 3) or not np.all(np.isfinite(basis)) or np.max(np.abs(basis)) > ENTRY_LIMIT:
        raise InputError(
            f"A basis is three rows of three numbers, none larger than {ENTRY_LIMIT:g}.",
            field="basis",
            hint="Column j is the new axis j, as multiples of the old a, b, c.",
        )
    lengths = np.max(np.abs(basis), axis=0)
    volume = float(np.linalg.det(basis / np.where(lengths > 0.0, lengths, 1.0)))
    if abs(volume) <= FLATNESS_LIMIT:
        raise InputError(
            "The new axes of the basis lie in one plane: its determinant is zero.",
            field="basis",
            hint="Each column is one new axis in the old basis; the three must be independent.",
        )
    if volume < 0.0:
        raise InputError(
            "The new axes of the basis are left-handed: its determinant is negative.",
            field="basis",
            hint="Reverse one axis or exchange two columns; both cells are right-handed.",
        )
    return basis


def _find_rotations(old_axes: FloatArray, new_axes: FloatArray) -> FloatArray:
    """The proper rotations nearest to M_new (M_old P)⁻¹, shape (..., 3, 3)."""
    # Both sets of axes are right-handed, so the nearest orthogonal matrix is proper.
    left, _, right = np.linalg.svd(new_axes @ np.linalg.inv(old_axes))
    rotations: FloatArray = left @ right
    # Entries that are zero by symmetry come out as rounding; a clean zero keeps the audit clean.
    return np.where(np.abs(rotations) < 1e-15, 0.0, rotations)


def _refuse_misfit(misfit: float, old_metric: FloatArray, new_metric: FloatArray) -> InputError:
    bases, misfits = _match_metrics(old_metric, new_metric)
    if len(bases):
        hint = (
            f"{len(bases)} other bases of −1, 0, 1 match the two cells; the best has the rows "
            f"{bases[0].astype(int).tolist()}. Leave the basis out to list them."
        )
    else:
        hint = (
            "No basis of −1, 0, 1 matches the two cells; check them, and that column j is the new axis j "
            "(not row j, and not the old axis in the new basis)."
        )
    candidates = [{"basis": basis.tolist(), "misfit": float(fit)} for basis, fit in zip(bases, misfits, strict=True)]
    return InputError(
        f"With this basis the two cells differ by {100.0 * misfit:.3g} % of their metrics, more than "
        f"{100.0 * MATCH_LIMIT:g} %.",
        field="basis",
        hint=hint,
        detail={"misfit": misfit, "candidates": candidates},
    )


def _match_metrics(old_metric: FloatArray, new_metric: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Bases (n, 3, 3) of −1, 0, 1 with positive determinant that match within the limit, best first, and misfits."""
    limit = MATCH_LIMIT * (1.0 + ROUNDING)
    span = np.array([-1.0, 0.0, 1.0])
    columns = np.stack(np.meshgrid(span, span, span, indexing="ij"), axis=-1).reshape(-1, 3)
    squares = np.einsum("ni,ij,nj->n", columns, old_metric, columns)
    # A column must have the right length by itself, which leaves a handful of the 26 for each new axis.
    fitting = [columns[np.abs(squares - size) <= limit * size] for size in np.diag(new_metric)]
    first, second, third = np.meshgrid(*(np.arange(len(some)) for some in fitting), indexing="ij")
    bases = np.stack([fitting[axis][index.ravel()] for axis, index in enumerate((first, second, third))], axis=-1)
    bases = bases[np.linalg.det(bases) > 0.5]
    misfits = measure_misfit(np.swapaxes(bases, -1, -2) @ old_metric @ bases, new_metric)
    kept = misfits <= limit
    bases, misfits = bases[kept], misfits[kept]
    order = sorted(range(len(bases)), key=lambda row: _rank(bases[row], float(misfits[row])))
    return bases[order] + 0.0, misfits[order]


def _rank(basis: FloatArray, misfit: float) -> tuple[float, int, float, list[float]]:
    # Misfits that differ by rounding alone are equal.
    return round(misfit, 10), int(np.sum(basis < 0)), -float(np.trace(basis)), (-basis).ravel().tolist()
