"""What each kind of reading says of a tensor A, and how that changes with A and with a turn of the bar.

Kinds and the treatment of a bar's random turn are those of the calculation interface: a turn ω takes n to n + ω × n
to first order; to second order nᵀAn has the mean shift s² (tr A − 3 nᵀAn) and, within a bar, the covariance
2 s⁴ tr(B_i B_j) with B = [n]×ᵀ (½(A + Aᵀ) − nᵀAn 1) [n]× (moments of a quadratic form in normal variables:
A. M. Mathai and S. B. Provost, Quadratic Forms in Random Variables, 1992, section 3.2).
Rod and sheet: 1/(nᵀA⁻¹n) (Nye, Physical Properties of Crystals, ch. XI) and √(det A/(mᵀAm)), the geometric mean of
the two principal values of the section of A⁻¹ inverted, what a four-corner measurement on a thin plate shows
(L. J. van der Pauw, Philips Res. Repts 16 (1961) 187).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.readings.reading import ReadingKind
from app.readings.reading_set import ReadingSet

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Prediction:
    """Predictions for N readings.

    Attributes:
        values: shape (N,), with the mean shift of ``along`` and ``difference`` under the bar's turn.
        rows: shape (N, 9), their derivatives by the nine cells in row order.
    """

    values: FloatArray
    rows: FloatArray


def _outer(first: FloatArray, second: FloatArray) -> FloatArray:
    return (first[:, :, None] * second[:, None, :]).reshape(-1, 9)


def _places(readings: ReadingSet, name: ReadingKind) -> slice | npt.NDArray[np.intp] | None:
    """Where readings of a kind stand: everywhere, somewhere or (None) nowhere; a slice copies nothing."""
    inside = readings.where(name)
    if np.all(inside):
        return slice(None)
    return np.flatnonzero(inside) if np.any(inside) else None


def linear_rows(readings: ReadingSet) -> FloatArray:
    """Derivatives (N, 9) of the linear kinds, mean shift included; zero for rods and sheets."""
    rows = np.zeros((len(readings), 9))
    n, m = readings.first, readings.second
    identity = np.eye(3).ravel()
    turn2 = np.square(readings.turn_sigma)[:, None]
    tilted = bool(np.any(turn2))
    if (along := _places(readings, "along")) is not None:
        outer = _outer(n[along], n[along])
        rows[along] = outer + turn2[along] * (identity - 3.0 * outer) if tilted else outer
    if (across := _places(readings, "across")) is not None:
        rows[across] = _outer(m[across], n[across])
    if (difference := _places(readings, "difference")) is not None:
        outer = _outer(n[difference], n[difference]) - _outer(m[difference], m[difference])
        rows[difference] = outer * (1.0 - 3.0 * turn2[difference])
    if (mean := _places(readings, "mean")) is not None:
        rows[mean] = identity / 3.0
    return rows


def isotropic_rows(readings: ReadingSet, linear: FloatArray) -> FloatArray:
    """Derivatives (N, 9) at an isotropic tensor: a rod reads the value along it, a sheet the mean of the two across.

    ``linear`` is ``linear_rows`` of the same readings.
    """
    if not readings.has("rod", "sheet"):
        return linear
    rows = linear.copy()
    rod, sheet = readings.where("rod"), readings.where("sheet")
    rows[rod] = _outer(readings.first[rod], readings.first[rod])
    rows[sheet] = (np.eye(3).ravel() - _outer(readings.second[sheet], readings.second[sheet])) / 2.0
    return rows


def is_meaningful(readings: ReadingSet, matrix: FloatArray) -> bool:
    """Whether rods and sheets have a value for this tensor: it must be positive definite."""
    if not readings.has("rod", "sheet"):
        return True
    return bool(np.min(np.linalg.eigvalsh((matrix + matrix.T) / 2.0)) > 0.0)


def predict(readings: ReadingSet, matrix: FloatArray, linear: FloatArray | None = None) -> Prediction:
    """Predictions and their derivatives at A (3, 3); ``linear`` may hand in ``linear_rows`` computed before.

    Raises:
        InputError: a rod or sheet of a tensor that is not positive definite.
    """
    rows = linear_rows(readings) if linear is None else linear
    values = rows @ matrix.ravel()
    if not readings.has("rod", "sheet"):
        return Prediction(values, rows)
    if not is_meaningful(readings, matrix):
        raise InputError(
            "A long bar or a thin plate has a reading only where every principal value is positive, and this tensor "
            "has one that is not.",
            hint="Check the values, their unit and which readings are rods or sheets.",
        )
    rows, inverse = rows.copy(), np.linalg.inv(matrix)
    rod, sheet = readings.where("rod"), readings.where("sheet")
    images = readings.first[rod] @ inverse
    rods = 1.0 / np.einsum("ni,ni->n", images, readings.first[rod])
    values[rod] = rods
    rows[rod] = np.square(rods)[:, None] * _outer(images, images)
    normals = readings.second[sheet]
    across = np.einsum("ni,ij,nj->n", normals, matrix, normals)
    sheets = np.sqrt(np.linalg.det(matrix) / across)
    values[sheet] = sheets
    relative = inverse.T.ravel() - _outer(normals, normals) / across[:, None]
    rows[sheet] = sheets[:, None] / 2.0 * relative
    return Prediction(values, rows)


def turn_derivatives(readings: ReadingSet, matrix: FloatArray) -> FloatArray:
    """Derivative of each prediction by the bar's turn (rotation vector, radians), shape (N, 3)."""
    n, m = readings.first, readings.second
    doubled = matrix + matrix.T
    result = np.zeros((len(readings), 3))
    along, across, difference = readings.where("along"), readings.where("across"), readings.where("difference")
    rod, sheet = readings.where("rod"), readings.where("sheet")
    result[along] = np.cross(n[along], n[along] @ doubled)
    result[across] = np.cross(m[across], n[across] @ matrix.T) + np.cross(n[across], m[across] @ matrix)
    result[difference] = np.cross(n[difference], n[difference] @ doubled) - np.cross(
        m[difference], m[difference] @ doubled
    )
    if np.any(rod):
        inverse = np.linalg.inv(matrix)
        images = n[rod] @ inverse
        rods = 1.0 / np.einsum("ni,ni->n", images, n[rod])
        result[rod] = -2.0 * np.square(rods)[:, None] * np.cross(n[rod], images)
    if np.any(sheet):
        normals = m[sheet]
        across_values = np.einsum("ni,ij,nj->n", normals, matrix, normals)
        sheets = np.sqrt(np.linalg.det(matrix) / across_values)
        result[sheet] = -(sheets / across_values)[:, None] * np.cross(normals, normals @ matrix)
    return result


def second_order_factors(readings: ReadingSet, matrix: FloatArray) -> FloatArray:
    """Rows f_i (N, 6) with f_i · f_j = 2 tr(B_i B_j), for ``along`` and ``difference``; zero for the other kinds."""
    result = np.zeros((len(readings), 6))
    along, difference = readings.where("along"), readings.where("difference")
    symmetric = (matrix + matrix.T) / 2.0
    chosen = along | difference
    forms = _curvatures(readings.first[chosen], symmetric)
    forms[difference[chosen]] -= _curvatures(readings.second[difference], symmetric)
    rows, columns = np.triu_indices(3)
    weights = np.where(rows == columns, np.sqrt(2.0), 2.0)
    result[chosen] = forms[:, rows, columns] * weights
    return result


def _curvatures(directions: FloatArray, symmetric: FloatArray) -> FloatArray:
    """B of each direction, shape (N, 3, 3): ωᵀBω is the second-order change of nᵀAn under the turn ω."""
    x, y, z = directions.T
    zero = np.zeros_like(x)
    crossing = np.stack([zero, -z, y, z, zero, -x, -y, x, zero], axis=-1).reshape(-1, 3, 3)
    values = np.einsum("ni,ij,nj->n", directions, symmetric, directions)
    inner = symmetric[None] - values[:, None, None] * np.eye(3)
    curvatures: FloatArray = np.swapaxes(crossing, -1, -2) @ inner @ crossing
    return curvatures
