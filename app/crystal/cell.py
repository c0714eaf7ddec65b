"""The unit cell: six parameters, its metric, and the nearest cell that a point group leaves unchanged.

The metric is G_ij = a_i · a_j (International Tables for Crystallography A, 2016, section 1.5.2). Every cell edge and
angle in this module is in angstrom and degrees; arrays of six run a, b, c, alpha, beta, gamma.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

PARAMETER_NAMES: Final = ("a", "b", "c", "alpha", "beta", "gamma")

METRIC_TOLERANCE: Final = 2e-4
"""Largest |ΔG_ij| / √(G_ii G_jj) under an operation that is still taken as rounding of the printed parameters."""

SIGMA_TOLERANCE: Final = 3.0
"""A parameter may move by so many of its standard deviations to make the cell obey its group."""

FLATNESS_LIMIT: Final = 1e-7
"""Least volume over a·b·c: below it the three edges lie in one plane as far as printed digits can tell."""

FLAT: Final = 1e-3
"""Squared volume over (a·b·c)² below which cosines lose digits that the angles still have."""

_EXACT_COSINES: Final = {60.0: 0.5, 90.0: 0.0, 120.0: -0.5}


@dataclass(frozen=True)
class Cell:
    """A unit cell as given.

    Attributes:
        parameters: shape (6,), a b c in angstrom, alpha beta gamma in degrees.
        sigma: shape (6,), standard deviations in the same units, or None where none were given.
    """

    parameters: FloatArray
    sigma: FloatArray | None = None

    @property
    def metric(self) -> FloatArray:
        """The metric G, shape (3, 3), in square angstrom."""
        return compute_metric(self.parameters)

    @property
    def volume(self) -> float:
        """Volume in cubic angstrom."""
        if self.flat_basis is not None:
            return float(np.prod(np.diag(self.flat_basis)))
        return float(np.sqrt(np.linalg.det(self.metric)))

    @property
    def flat_basis(self) -> FloatArray | None:
        """Of a cell so flat that its metric has lost digits, a basis that has them, shape (3, 3); None of others."""
        unit_metric = self.metric / np.outer(self.parameters[:3], self.parameters[:3])
        return compute_flat_basis(self.parameters) if np.linalg.det(unit_metric) < FLAT else None

    @property
    def is_hexagonal(self) -> bool:
        """Whether four-index symbols make sense: a = b, alpha = beta = 90, gamma = 120 (after obeying the group)."""
        a, b, _, alpha, beta, gamma = self.parameters
        angles = np.array([alpha - 90.0, beta - 90.0, gamma - 120.0])
        return bool(abs(a - b) <= 1e-9 * a and np.all(np.abs(angles) <= 1e-7))


def build_cell(parameters: npt.ArrayLike, sigma: npt.ArrayLike | None = None) -> Cell:
    """Check six cell parameters (and their standard deviations) and make a Cell of them.

    Raises:
        InputError: not six finite numbers, an edge that is not positive, an angle outside 0 to 180, three angles
            that no cell can have, or a cell so flat that it has no volume.
    """
    try:
        values = np.array(parameters, dtype=np.float64)
    except (TypeError, ValueError):
        values = np.empty(0)
    if values.shape != (6,) or not np.all(np.isfinite(values)):
        raise InputError(
            "A cell is six finite numbers: a, b, c in angstrom, alpha, beta, gamma in degrees.",
            field="cell",
            hint="Give them in that order, for example [9.83, 6.41, 7.27, 90, 107.4, 90].",
        )
    for index in range(3):
        if not 1e-3 <= values[index] <= 1e6:
            raise InputError(
                f"The edge {PARAMETER_NAMES[index]} is {values[index]:g} Å.",
                field=f"cell[{index}]",
                hint="An edge is a length between 0.001 and 1,000,000 Å.",
            )
        if not 0.0 < values[index + 3] < 180.0:
            raise InputError(
                f"The angle {PARAMETER_NAMES[index + 3]} is {values[index + 3]:g}°.",
                field=f"cell[{index + 3}]",
                hint="A cell angle lies between 0 and 180°, both excluded.",
            )
    edges = values[:3]
    unit_metric = compute_metric(values) / np.outer(edges, edges)
    if np.linalg.det(unit_metric) <= FLATNESS_LIMIT**2:
        raise InputError(
            "No cell has these three angles: its edges would lie in one plane or could not close.",
            field="cell",
            hint="Each angle must be smaller than the sum of the other two, and the three together below 360°.",
        )
    return Cell(values, _check_sigma(sigma))


def _check_sigma(sigma: npt.ArrayLike | None) -> FloatArray | None:
    if sigma is None:
        return None
    try:
        deviations = np.array(sigma, dtype=np.float64)
    except (TypeError, ValueError):
        deviations = np.empty(0)
    if deviations.shape != (6,) or not np.all(np.isfinite(deviations)) or np.any(deviations < 0):
        raise InputError(
            "The standard deviations of a cell are six finite numbers, none negative.",
            field="cell_sigma",
            hint="Give 0 for a parameter that symmetry fixes.",
        )
    return deviations


def compute_metric(parameters: FloatArray) -> FloatArray:
    """Metric of cells.

    Args:
        parameters: shape (..., 6).

    Returns:
        shape (..., 3, 3), G_ij = a_i · a_j; 60, 90 and 120 degrees have their exact cosines.
    """
    parameters = np.asarray(parameters, dtype=np.float64)
    angles = parameters[..., 3:]
    cosines = np.cos(np.deg2rad(angles))
    for angle, cosine in _EXACT_COSINES.items():
        cosines = np.where(angles == angle, cosine, cosines)
    edges = parameters[..., :3]
    metric = edges[..., :, None] * edges[..., None, :]
    for (row, column), cosine_index in {(1, 2): 0, (0, 2): 1, (0, 1): 2}.items():
        metric[..., row, column] *= cosines[..., cosine_index]
        metric[..., column, row] = metric[..., row, column]
    return metric


def compute_flat_basis(parameters: FloatArray) -> FloatArray:
    """A right-handed basis of a cell however flat: a b c as columns, upper triangular, shape (3, 3).

    The metric holds cosines, whose differences lose what small angles, and angles near the limits of a cell, still
    tell. Here all differences are taken of the angles themselves: with s half their sum, the volume is
    2abc √(sin s sin(s−α) sin(s−β) sin(s−γ)) (International Tables for Crystallography C, 2006, chapter 1.1).
    """
    a, b, c = parameters[:3]
    _, beta, gamma = np.deg2rad(parameters[3:])
    # Exact sums of degrees: radians would be rounded before the differences are taken.
    halves = np.deg2rad([math.fsum([*parameters[3:], -2.0 * angle]) / 2.0 for angle in parameters[3:]])
    rest = np.deg2rad(math.fsum([360.0, *-parameters[3:]]) / 2.0)
    volume = 2.0 * np.sqrt(np.sin(rest) * np.prod(np.sin(halves)))
    # cos α − cos β cos γ, as sin β sin γ − 2 sin((α + β − γ)/2) sin((α − β + γ)/2).
    across = np.sin(beta) * np.sin(gamma) - 2.0 * np.sin(halves[2]) * np.sin(halves[1])
    return np.array(
        [
            [a, b * np.cos(gamma), c * np.cos(beta)],
            [0.0, b * np.sin(gamma), c * across / np.sin(gamma)],
            [0.0, 0.0, c * volume / np.sin(gamma)],
        ]
    )


def compute_parameters(metric: FloatArray) -> FloatArray:
    """The six parameters, shape (..., 6), of metrics of shape (..., 3, 3)."""
    edges = np.sqrt(np.diagonal(metric, axis1=-2, axis2=-1))
    cosines = np.stack(
        [
            metric[..., 1, 2] / (edges[..., 1] * edges[..., 2]),
            metric[..., 0, 2] / (edges[..., 0] * edges[..., 2]),
            metric[..., 0, 1] / (edges[..., 0] * edges[..., 1]),
        ],
        axis=-1,
    )
    angles = np.rad2deg(np.arccos(np.clip(cosines, -1.0, 1.0)))
    for angle, cosine in _EXACT_COSINES.items():
        angles = np.where(np.abs(cosines - cosine) < 1e-14, angle, angles)
    return np.concatenate([edges, angles], axis=-1)


def measure_metric_change(metric: FloatArray, operations: FloatArray) -> float:
    """Largest |ΔG_ij| / √(G_ii G_jj) that any operation (shape (n, 3, 3), in the basis a b c) makes."""
    turned = np.swapaxes(operations, -1, -2) @ metric @ operations
    scale = np.sqrt(np.outer(np.diag(metric), np.diag(metric)))
    return float(np.max(np.abs(turned - metric) / scale))


def find_obeying_cell(cell: Cell, operations: FloatArray) -> FloatArray:
    """The parameters nearest to ``cell`` that every operation leaves unchanged, shape (6,).

    Nearest means the least sum of squared changes, edges relative to their mean and angles in radians. The obeying
    metrics are a linear space (the image of the group average), so this is a least-squares projection on it,
    reached by Gauss-Newton steps from the averaged metric.
    """
    metric = cell.metric
    averaged: FloatArray = np.mean(np.swapaxes(operations, -1, -2) @ metric @ operations, axis=0)
    units = np.concatenate([np.full(3, np.mean(cell.parameters[:3])), np.full(3, np.rad2deg(1.0))])
    rows, columns = np.triu_indices(3)
    unit_metrics = np.zeros((6, 3, 3))
    unit_metrics[np.arange(6), rows, columns] = 1.0
    unit_metrics[np.arange(6), columns, rows] = 1.0
    images = np.mean(np.swapaxes(operations, -1, -2)[:, None] @ unit_metrics[None] @ operations[:, None], axis=0)[
        :, rows, columns
    ]
    space = np.linalg.svd(images, full_matrices=False)
    basis = space.Vh[1e-9 * space.S[0] < space.S]
    parameters = compute_parameters(averaged)
    for _ in range(20):
        step_size = 1e-6 * units
        moved = compute_metric(parameters + np.diag(step_size)) - compute_metric(parameters - np.diag(step_size))
        derivative = moved[:, rows, columns].T / 2e-6
        outside = derivative - basis.T @ (basis @ derivative)
        constraint = np.linalg.svd(outside)
        free = constraint.Vh[1e-6 * max(1.0, float(np.max(np.abs(derivative)))) >= constraint.S]
        wanted = (cell.parameters - parameters) / units
        step = free.T @ (free @ wanted)
        moved_parameters = parameters + step * units
        projected = basis.T @ (basis @ compute_metric(moved_parameters)[rows, columns])
        obeying = np.zeros((3, 3))
        obeying[rows, columns] = projected
        obeying[columns, rows] = projected
        parameters = compute_parameters(obeying)
        if np.max(np.abs(step)) < 1e-13:
            break
    return parameters
