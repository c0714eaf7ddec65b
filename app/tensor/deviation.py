"""A tensor and its uncertainty as far as they bear on principal axes: the traceless symmetric part of both.

Multiples of the identity and antisymmetric parts move no principal axis. What is left of the covariance is a handful
of traceless matrices D_a: the tensors that the data allow are A + Σ t_a D_a with |t|² = χ². A direction n can be a
principal axis at χ² exactly where it is one of some A + Σ t_a D_a with |t|² ≤ χ².
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.tensor import PropertyTensor

FloatArray = npt.NDArray[np.float64]

LOST: Final = 1e-9
"""A standard deviation below this part of the largest is none; an effect below this part of ‖A‖ vanishes."""

ON_TOLERANCE: Final = 1e-8
"""A direction within this angle (radians) of a plane, a cone or an axis of symmetry counts as on it."""

_CORRELATION_NOISE: Final = 1e-14
"""An eigenvalue of a correlation matrix below this is rounding."""

_ROUNDING: Final = 1e-12

_NEGLIGIBLE: Final = 1e-100
"""A standard deviation below this part of the largest cell counts as none: its square would leave the range."""


@dataclass(frozen=True)
class Deviation:
    """The traceless symmetric part of a tensor, and of its possible errors.

    Attributes:
        matrix: shape (3, 3), traceless, in units of the largest standard deviation.
        size: Frobenius norm of the whole symmetric part in the same units.
        spreads: shape (r, 3, 3), r ≤ 5, the D_a, largest first, mutually orthogonal.
        axes: shape (m, 3), principal axes common to the matrix and all the spreads (none, one or three; of a uniaxial
            set its axis).
        cone: the normal b where the matrix and all the spreads are b vᵀ + v bᵀ with v across b (class m of an axial
            tensor): its principal axes lie in the plane across b and on the cone at 45° about b. Else None.
    """

    matrix: FloatArray
    size: float
    spreads: FloatArray
    axes: FloatArray
    cone: FloatArray | None

    @property
    def rank(self) -> int:
        """Number of independent errors that can move a principal axis."""
        return len(self.spreads)

    def settle(self, directions: FloatArray) -> FloatArray:
        """Unit vectors (m, 3), those within rounding of a special plane, cone or axis moved onto it."""
        settled = directions
        normals = list(self.axes) + ([] if self.cone is None else [self.cone])
        for normal in normals:
            along = settled @ normal
            # The plane across the normal.
            settled = np.where((np.abs(along) <= ON_TOLERANCE)[:, None], settled - along[:, None] * normal, settled)
        if self.cone is not None:
            along = settled @ self.cone
            near = np.abs(np.arccos(np.clip(np.abs(along), 0.0, 1.0)) - np.pi / 4.0) <= ON_TOLERANCE
            across = settled - along[:, None] * self.cone
            lengths = np.linalg.norm(across, axis=1, keepdims=True)
            on_cone = (np.sign(along)[:, None] * self.cone + across / np.where(near[:, None], lengths, 1.0)) / np.sqrt(
                2
            )
            settled = np.where(near[:, None], on_cone, settled)
        for axis in self.axes:
            along = settled @ axis
            across = np.linalg.norm(settled - along[:, None] * axis, axis=1)
            settled = np.where((across <= ON_TOLERANCE)[:, None], np.sign(along)[:, None] * axis, settled)
        return settled


def build_deviation(crystal: Crystal, tensor: PropertyTensor) -> Deviation:
    """What decides the principal axes of a tensor with covariance.

    Raises:
        InputError: the tensor has no covariance.
    """
    form = tensor.form
    basis = (form.basis + np.swapaxes(form.basis, -1, -2)) / 2.0
    whole = (tensor.estimate.matrix + tensor.estimate.matrix.T) / 2.0
    if tensor.free_covariance is None and np.any(basis):
        raise InputError(
            "The region of possible principal axes needs the covariance of the tensor.",
            field="tensor.covariance",
            hint=f"Give the covariance of the free cells {', '.join(form.labels)}, or fit the tensor to readings.",
        )
    spreads, unit = np.zeros((0, 3, 3)), 0.0
    if tensor.free_covariance is not None and form.count:
        spreads, unit = _find_spreads(basis, tensor.free_covariance)
    largest = float(np.max(np.abs(whole)))
    if unit <= _NEGLIGIBLE * largest:
        spreads, unit = np.zeros((0, 3, 3)), largest or 1.0
    scaled = whole / unit
    matrix = _remove_trace(scaled)
    size = float(np.linalg.norm(scaled))
    axes = _find_axes(crystal, matrix, size, spreads)
    cone = _find_cone(crystal, matrix, size, spreads) if len(axes) == 0 and len(spreads) >= 2 else None
    return Deviation(matrix, size, spreads, axes, cone)


def _remove_trace(matrices: FloatArray) -> FloatArray:
    traces = np.trace(matrices, axis1=-2, axis2=-1)
    removed: FloatArray = matrices - traces[..., None, None] / 3.0 * np.eye(3)
    return removed


def _find_spreads(basis: FloatArray, covariance: FloatArray) -> tuple[FloatArray, float]:
    """The D_a in units of the largest standard deviation of the symmetric part, and that unit."""
    deviations = np.sqrt(np.diag(covariance))
    largest = float(np.max(deviations))
    if largest == 0.0:
        return np.zeros((0, 3, 3)), 0.0
    relative = deviations / largest
    safe = np.where(deviations > 0.0, deviations, 1.0)
    # Of the correlation matrix, so that cells of very different uncertainty do not drown each other.
    variances, vectors = np.linalg.eigh(covariance / safe[:, None] / safe[None, :])
    kept = variances > _CORRELATION_NOISE * variances[-1]
    factor = relative[:, None] * vectors[:, kept] * np.sqrt(variances[kept])
    whole = np.tensordot(factor.T, basis, axes=1)
    scale = float(np.linalg.norm(whole.reshape(-1, 9), ord=2))
    if scale <= LOST * LOST:
        return np.zeros((0, 3, 3)), 0.0
    deviators = _remove_trace(whole / scale)
    _, sizes, rows = np.linalg.svd(deviators.reshape(-1, 9), full_matrices=False)
    lasting = sizes > LOST
    spreads = (sizes[lasting, None] * rows[lasting]).reshape(-1, 3, 3)
    return spreads, scale * largest


def _find_axes(crystal: Crystal, matrix: FloatArray, size: float, spreads: FloatArray) -> FloatArray:
    members = [*spreads / np.linalg.norm(spreads[0])] if len(spreads) else []
    length = float(np.linalg.norm(matrix))
    if length > _ROUNDING * size:
        members.append(matrix / length)
    if not members:
        return np.zeros((0, 3))
    # Unrelated coefficients show every coincidence that all members share and no accidental one.
    weights = np.sqrt(np.array([2.0, 3.0, 5.0, 7.0, 11.0, 13.0])[: len(members)])
    values, vectors = np.linalg.eigh(np.tensordot(weights, np.array(members), axes=1))
    named = [operation.axis for operation in crystal.operations if operation.axis is not None]
    found = []
    for index in range(3):
        axis = vectors[:, index]
        alone = np.sum(np.abs(values - values[index]) <= LOST * np.max(np.abs(values))) == 1
        images = np.array([*spreads, matrix]) @ axis
        off = np.linalg.norm(images - (images @ axis)[:, None] * axis, axis=1)
        limits = np.full(len(images), LOST)
        limits[-1] = LOST * size
        if alone and np.all(off <= limits):
            exact = next((name for name in named if np.linalg.norm(np.cross(name, axis)) < 1e-6), axis)
            found.append(exact * np.sign(exact[int(np.argmax(np.abs(exact)))]))
    found.sort(key=lambda axis: [-round(abs(float(part)), 9) for part in axis])
    return np.array(found).reshape(-1, 3)


def _find_cone(crystal: Crystal, matrix: FloatArray, size: float, spreads: FloatArray) -> FloatArray | None:
    for operation in crystal.operations:
        if operation.axis is None or operation.turn != 2 or not operation.improper:
            continue
        normal = operation.axis
        plane = np.eye(3) - np.outer(normal, normal)
        members = np.array([*spreads, matrix])
        within = np.linalg.norm(plane @ members @ plane, axis=(1, 2)) + np.abs(members @ normal @ normal)
        limits = np.full(len(members), LOST)
        limits[-1] = LOST * size
        if np.all(within <= limits):
            return normal
    return None
