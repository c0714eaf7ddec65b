"""What kind of second-rank tensor: how it goes over under an improper operation, and its symmetry by itself."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal, get_args

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]
Parity = Literal["polar", "axial"]
Intrinsic = Literal["symmetric", "general", "antisymmetric"]

CELLS: Final = tuple((row, column) for row in range(3) for column in range(3))
"""The nine cells in row order; everywhere a tensor is flattened, it is flattened so."""

LABELS: Final = tuple(f"{row + 1}{column + 1}" for row, column in CELLS)

TRANSPOSE: Final = np.array([3 * column + row for row, column in CELLS])
"""Where each cell's transpose stands in row order."""


@dataclass(frozen=True)
class Kind:
    """Parity and inner symmetry.

    Attributes:
        parity: "polar" (T goes to R T Rᵀ) or "axial" (to det(R) R T Rᵀ).
        intrinsic: "symmetric", "general" or "antisymmetric".
    """

    parity: Parity = "polar"
    intrinsic: Intrinsic = "symmetric"

    def signs(self, rotations: FloatArray) -> FloatArray:
        """The factor det(R) of an axial tensor, or 1, for orthogonal matrices of shape (..., 3, 3)."""
        if self.parity == "polar":
            return np.ones(rotations.shape[:-2])
        signs: FloatArray = np.sign(np.linalg.det(rotations))
        return signs

    @property
    def intrinsic_projector(self) -> FloatArray:
        """Projector on the inner symmetry, shape (9, 9), cells in row order."""
        identity = np.eye(9)
        if self.intrinsic == "general":
            return identity
        sign = 1.0 if self.intrinsic == "symmetric" else -1.0
        projector: FloatArray = (identity + sign * identity[TRANSPOSE]) / 2.0
        return projector


def build_kind(parity: str | None = None, intrinsic: str | None = None) -> Kind:
    """A Kind from two words, both with their defaults (polar, symmetric).

    Raises:
        InputError: an unknown word.
    """
    chosen_parity = parity or "polar"
    chosen_intrinsic = intrinsic or "symmetric"
    if chosen_parity not in get_args(Parity):
        raise InputError(f"The parity cannot be “{parity}”.", field="parity", hint="It is polar or axial.")
    if chosen_intrinsic not in get_args(Intrinsic):
        raise InputError(
            f"The inner symmetry cannot be “{intrinsic}”.",
            field="intrinsic",
            hint="It is symmetric, general or antisymmetric.",
        )
    return Kind(chosen_parity, chosen_intrinsic)  # type: ignore[arg-type]
