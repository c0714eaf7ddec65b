"""Which of the nine cells a point group leaves free, and what the others equal.

Neumann's principle: the tensors that a crystal may have are the image of the group average
P = (1/|G|) Σ det(R)^axial R ⊗ R, joined with the inner symmetry (J. F. Nye, Physical Properties of Crystals, ch. I;
International Tables for Crystallography D, 2006, section 1.1.4). P commutes with transposition, so the two
projections may be taken one after the other.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.tensor.kind import CELLS, LABELS, Kind

FloatArray = npt.NDArray[np.float64]
CellState = Literal["free", "zero", "tied"]

ZERO_TOLERANCE: Final = 1e-9
"""A coefficient below this, on cells of order one, is rounding: exact zeros come out near 1e-16."""


@dataclass(frozen=True)
class Form:
    """The allowed tensors of a kind under a point group, in the crystal frame.

    Attributes:
        kind: parity and inner symmetry.
        free: positions (0 to 8, row order) of the free cells: the first in row order that are independent.
        basis: shape (k, 3, 3), T = Σ free · basis.
        orthonormal: shape (k, 3, 3), a basis of the same space, orthonormal in the Frobenius product.
        rotations: shape (n, 3, 3), the operations that made it.
    """

    kind: Kind
    free: tuple[int, ...]
    basis: FloatArray
    orthonormal: FloatArray
    rotations: FloatArray

    @property
    def count(self) -> int:
        """Number of independent cells."""
        return len(self.free)

    @property
    def labels(self) -> list[str]:
        """Labels of the free cells, like "11"."""
        return [LABELS[position] for position in self.free]

    @property
    def free_from_orthonormal(self) -> FloatArray:
        """Shape (k, k): free cells = this · coordinates in the orthonormal basis."""
        return self.orthonormal.reshape(self.count, 9)[:, list(self.free)].T

    def expand(self, values: FloatArray) -> FloatArray:
        """Matrices (..., 3, 3) from values of the free cells (..., k)."""
        matrices: FloatArray = np.tensordot(values, self.basis, axes=1)
        return matrices

    def project(self, matrices: FloatArray) -> FloatArray:
        """The allowed tensor nearest in Frobenius norm to each of (..., 3, 3)."""
        flat = self.orthonormal.reshape(self.count, 9)
        cells = matrices.reshape(*matrices.shape[:-2], 9)
        projected: FloatArray = (cells @ flat.T) @ flat
        return projected.reshape(matrices.shape)

    def pick(self, matrices: FloatArray) -> FloatArray:
        """Values of the free cells (..., k) of allowed matrices (..., 3, 3)."""
        picked: FloatArray = matrices.reshape(*matrices.shape[:-2], 9)[..., list(self.free)]
        return picked


@dataclass(frozen=True)
class CellTerms:
    """The nine cells in one frame, by the free cells of the crystal frame.

    Attributes:
        states: nine states in row order, judged in that order in this frame.
        terms: shape (9, k), the coefficient of every free cell of the crystal frame.
        relations: for every tied cell the coefficients of this frame's own free cells, {position: coefficient}.
    """

    states: tuple[CellState, ...]
    terms: FloatArray
    relations: dict[int, dict[int, float]]


def build_form(crystal: Crystal, kind: Kind) -> Form:
    """The form of a kind of tensor in a crystal, in its crystal frame."""
    return build_form_of_rotations(crystal.rotations, kind)


def build_form_of_rotations(rotations: FloatArray, kind: Kind) -> Form:
    """The form under a group of orthogonal matrices, shape (n, 3, 3)."""
    rotations = np.ascontiguousarray(rotations)
    return _build_cached(rotations.tobytes(), len(rotations), kind)


@lru_cache(maxsize=512)
def _build_cached(content: bytes, count: int, kind: Kind) -> Form:
    rotations = np.frombuffer(content, dtype=np.float64).reshape(count, 3, 3)
    projector = average_group(rotations, kind)
    values, vectors = np.linalg.eigh((projector + projector.T) / 2.0)
    space = vectors[:, values > 0.5]
    free = choose_independent(space)
    chosen = space[list(free)]
    coefficients = space @ np.linalg.inv(chosen) if free else np.zeros((9, 0))
    basis = snap_coefficients(coefficients).T.reshape(-1, 3, 3)
    orthonormal = space.T.reshape(-1, 3, 3).copy()
    basis.setflags(write=False)
    orthonormal.setflags(write=False)
    return Form(kind, free, basis, orthonormal, rotations)


def average_group(rotations: FloatArray, kind: Kind) -> FloatArray:
    """The projector on the allowed tensors, shape (9, 9), cells in row order."""
    signs = kind.signs(rotations)
    products = np.einsum("n,nik,njl->ijkl", signs, rotations, rotations).reshape(9, 9) / len(rotations)
    projector: FloatArray = products @ kind.intrinsic_projector
    return projector


def choose_independent(rows: FloatArray) -> tuple[int, ...]:
    """Positions of the first rows, in order, that are linearly independent of those before them."""
    rank = rows.shape[1]
    chosen: list[int] = []
    remaining = rows.copy()
    for position in range(len(rows)):
        if len(chosen) == rank:
            break
        size = np.linalg.norm(remaining[position])
        if size > ZERO_TOLERANCE:
            direction = remaining[position] / size
            remaining = remaining - np.outer(remaining @ direction, direction)
            chosen.append(position)
    return tuple(chosen)


def snap_coefficients(coefficients: FloatArray) -> FloatArray:
    """Whole and half numbers that came out with rounding, made exact; all others left."""
    nearest = np.rint(2.0 * coefficients) / 2.0
    snapped: FloatArray = np.where(np.abs(coefficients - nearest) < 1e-12, nearest, coefficients)
    return snapped + 0.0


def express_cells(form: Form, pose: FloatArray | None = None) -> CellTerms:
    """The nine cells in the crystal frame, or in a specimen frame C (shape (3, 3), specimen axes as rows)."""
    flat = form.basis.reshape(form.count, 9).T
    if pose is not None:
        flat = snap_coefficients(np.kron(pose, pose) @ flat)
    free = choose_independent(flat)
    states: list[CellState] = []
    relations: dict[int, dict[int, float]] = {}
    for position in range(9):
        row = flat[position]
        if position in free:
            states.append("free")
        elif np.linalg.norm(row) <= ZERO_TOLERANCE:
            states.append("zero")
        else:
            states.append("tied")
            earlier = [cell for cell in free if cell < position]
            solution = np.linalg.lstsq(flat[earlier].T, row, rcond=None)[0]
            relations[position] = {
                cell: float(value)
                for cell, value in zip(earlier, snap_coefficients(solution), strict=True)
                if abs(value) > ZERO_TOLERANCE
            }
    return CellTerms(tuple(states), flat, relations)


def find_fixed_axes(form: Form) -> FloatArray:
    """Principal axes common to the symmetric parts of all allowed tensors, as rows of unit vectors, shape (m, 3).

    An axis counts only where it is determined: of a form whose symmetric part is isotropic there is none, and of a
    uniaxial one only the axis itself.
    """
    symmetric = (form.basis + np.swapaxes(form.basis, -1, -2)) / 2.0
    if form.count == 0:
        return np.zeros((0, 3))
    # A tensor with unrelated coefficients shows every coincidence of the form and no accidental one.
    generic = np.tensordot(
        np.sqrt(np.array([2.0, 3.0, 5.0, 7.0, 11.0, 13.0, 17.0, 19.0, 23.0]))[: form.count], symmetric, axes=1
    )
    values, vectors = np.linalg.eigh(generic)
    scale = max(float(np.max(np.abs(values))), 1.0)
    fixed = []
    for index in range(3):
        alone = np.sum(np.abs(values - values[index]) <= 1e-9 * scale) == 1
        axis = vectors[:, index]
        images = symmetric @ axis
        along = images @ axis
        common = np.all(np.linalg.norm(images - along[:, None] * axis, axis=-1) <= 1e-9)
        if alone and common:
            fixed.append(axis * np.sign(axis[int(np.argmax(np.abs(axis)))]))
    fixed.sort(key=lambda axis: [-round(abs(float(component)), 9) for component in axis])
    return np.array(fixed).reshape(-1, 3) + 0.0


def name_cell(position: int, axes: tuple[str, str, str] | None = None) -> str:
    """ "12" in the crystal frame; with axis names x y z, "xy"."""
    row, column = CELLS[position]
    return LABELS[position] if axes is None else f"{axes[row]}{axes[column]}"
