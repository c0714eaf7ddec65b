"""The cell parameters that a group leaves independent, and how the metric and the crystal frame move with them.

With M the cell in the crystal frame (a, b, c as columns), G = MᵀM and p one cell parameter, the change of M is
∂M/∂p = L M. Its symmetric part, ½ M⁻ᵀ (∂G/∂p) M⁻¹, does not depend on how the frame is attached; the rest of L is the
turn that keeps the rule: the row stays along its axis and the normal along its own (derived here).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.cell import PARAMETER_NAMES, compute_metric
from app.crystal.cell_locks import SYMBOLS, list_cell_locks
from app.crystal.crystal import Crystal
from app.crystal.frame import FrameRule, compute_basis

FloatArray = npt.NDArray[np.float64]

RADIAN: Final = np.pi / 180.0
_PAIRS: Final = ((1, 2, 3), (0, 2, 4), (0, 1, 5))
"""Two edges and the position of the angle between them."""


@dataclass(frozen=True)
class IndependentParameters:
    """Which of the six parameters are free, and what the others equal.

    Attributes:
        positions: of the free ones among a, b, c, alpha, beta, gamma.
        embedding: shape (6, k), six parameters = embedding · free + fixed.
        fixed: shape (6,), the value of a parameter that symmetry fixes, else 0.
    """

    positions: tuple[int, ...]
    embedding: FloatArray
    fixed: FloatArray

    @property
    def names(self) -> list[str]:
        """Like "a", "c"."""
        return [PARAMETER_NAMES[position] for position in self.positions]

    def expand(self, free: FloatArray) -> FloatArray:
        """Six parameters (..., 6) from the free ones (..., k)."""
        expanded: FloatArray = free @ self.embedding.T + self.fixed
        return expanded

    def reduce(self, parameters: FloatArray) -> FloatArray:
        """The free parameters (..., k) of the obeying cells nearest to (..., 6): means of those that are equal."""
        reduced: FloatArray = (parameters - self.fixed) @ self.embedding / np.sum(self.embedding, axis=0)
        return reduced


def find_independent(crystal: Crystal) -> IndependentParameters:
    """The independent cell parameters of a crystal that has a cell."""
    positions: list[int] = []
    owners: dict[int, int] = {}
    fixed = np.zeros(6)
    for position, lock in enumerate(list_cell_locks(crystal)):
        if lock.state == "fixed":
            # The locks say 90, 120 or 60 degrees; the cell may carry the rounding of a projection.
            whole = round(lock.value)
            fixed[position] = whole if abs(lock.value - whole) < 1e-6 else lock.value
        elif lock.state == "tied" and lock.equals is not None:
            owners[position] = owners[SYMBOLS.index(lock.equals)]
        else:
            owners[position] = len(positions)
            positions.append(position)
    embedding = np.zeros((6, len(positions)))
    for position, owner in owners.items():
        embedding[position, owner] = 1.0
    return IndependentParameters(tuple(positions), embedding, fixed)


def differentiate_metric(parameters: FloatArray) -> FloatArray:
    """∂G/∂p, shape (..., 6, 3, 3), of cells (..., 6), by angstrom and by degree."""
    metric = compute_metric(parameters)
    first = np.zeros((*parameters.shape[:-1], 6, 3, 3))
    for edge in range(3):
        first[..., edge, edge, edge] = 2.0 * parameters[..., edge]
    for i, j, angle in _PAIRS:
        edges = parameters[..., i] * parameters[..., j]
        cosine, sine = metric[..., i, j] / edges, np.sin(parameters[..., angle] * RADIAN)
        changes = {i: parameters[..., j] * cosine, j: parameters[..., i] * cosine, angle: -RADIAN * edges * sine}
        for position, change in changes.items():
            first[..., position, i, j] = first[..., position, j, i] = change
    return first


def differentiate_metric_twice(parameters: FloatArray) -> FloatArray:
    """∂²G/∂p∂q, shape (..., 6, 6, 3, 3), of cells (..., 6)."""
    metric = compute_metric(parameters)
    second = np.zeros((*parameters.shape[:-1], 6, 6, 3, 3))
    for edge in range(3):
        second[..., edge, edge, edge, edge] = 2.0
    for i, j, angle in _PAIRS:
        edges = parameters[..., i] * parameters[..., j]
        cosine, sine = metric[..., i, j] / edges, np.sin(parameters[..., angle] * RADIAN)
        changes = {
            (i, j): cosine,
            (i, angle): -RADIAN * parameters[..., j] * sine,
            (j, angle): -RADIAN * parameters[..., i] * sine,
            (angle, angle): -(RADIAN**2) * edges * cosine,
        }
        for (p, q), change in changes.items():
            for row, column in ((i, j), (j, i)):
                second[..., p, q, row, column] = second[..., q, p, row, column] = change
    return second


@dataclass(frozen=True)
class FrameMotion:
    """How the crystal frame's M moves with the independent parameters, at T cells.

    Attributes:
        cells: shape (T, 6).
        M: shape (T, 3, 3).
        strains: shape (T, k, 3, 3), the symmetric part of (∂M/∂p_j) M⁻¹.
        gradients: shape (T, k, 3, 3), (∂M/∂p_j) M⁻¹ itself.
    """

    cells: FloatArray
    M: FloatArray
    strains: FloatArray
    gradients: FloatArray

    def differentiate_strains(self, independent: IndependentParameters) -> FloatArray:
        """∂strains_i/∂p_j, shape (T, k, k, 3, 3), index i before j."""
        inverse = np.linalg.inv(self.M)[:, None, None]
        embedding = independent.embedding
        second = np.einsum("tpqab,pi,qj->tijab", differentiate_metric_twice(self.cells), embedding, embedding)
        strains, gradients = self.strains[:, :, None], self.gradients[:, None, :]
        turned = strains @ gradients
        curved = np.swapaxes(inverse, -1, -2) @ second @ inverse / 2.0
        derivative: FloatArray = curved - turned - np.swapaxes(turned, -1, -2)
        return derivative


def compute_motion(cells: FloatArray, independent: IndependentParameters, rule: FrameRule) -> FrameMotion:
    """M and its derivatives at cells of shape (T, 6)."""
    basis = compute_basis(compute_metric(cells), rule)
    inverse = np.linalg.inv(basis)[:, None]
    first = np.einsum("tpab,pj->tjab", differentiate_metric(cells), independent.embedding)
    strains = np.swapaxes(inverse, -1, -2) @ first @ inverse / 2.0
    strains = (strains + np.swapaxes(strains, -1, -2)) / 2.0
    # The row M r keeps its axis, so L has no other entry in that column; the normal M⁻ᵀ n keeps its own, so Lᵀ has
    # none in that one. What is missing below the diagonal of this order stands doubled above it.
    order = [rule.row_axis, 3 - rule.row_axis - rule.normal_axis, rule.normal_axis]
    factor = np.zeros((3, 3))
    factor[np.ix_(order, order)] = np.eye(3) + 2.0 * np.triu(np.ones((3, 3)), 1)
    return FrameMotion(cells, basis, strains, strains * factor)
