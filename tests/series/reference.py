"""An outside for the tests of series: the crystal frame and the expansion tensor in many digits, by mpmath.

M is laid out by hand (a along x, b in the plane of x and y), its axes are turned to the frame rule by cross products,
and α = sym(Ṁ M⁻¹) comes from numerical differences of M(t) itself at 40 digits. Nothing comes from the code under test.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import mpmath as mp
import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]
CellFunction = Callable[[Any], Sequence[Any]]

# Row and normal of a rule, with the axes (from 0) on which they lie.
Rule = tuple[int, tuple[float, ...], int, tuple[float, ...]]

UNIT = {"a": (1.0, 0.0, 0.0), "b": (0.0, 1.0, 0.0), "c": (0.0, 0.0, 1.0)}
LETTER_RULES: dict[str, Rule] = {
    f"x{i + 1}={direct} x{j + 1}={reciprocal}*": (i, UNIT[direct], j, UNIT[reciprocal])
    for i in range(3)
    for j in range(3)
    if i != j
    for direct in "abc"
    for reciprocal in "abc"
    if direct != reciprocal
}
GENERAL_RULES: dict[str, Rule] = {
    "x3=[1 1 1] x1=(1 -1 0)": (2, (1, 1, 1), 0, (1, -1, 0)),
    "x2=[1 0 -1] x1=(1 2 1)": (1, (1, 0, -1), 0, (1, 2, 1)),
}
DEFAULT: Rule = LETTER_RULES["x3=c x2=b*"]


def build_basis(cell: Sequence[Any], rule: Rule = DEFAULT) -> Any:
    """M as an mpmath matrix."""
    a, b, c, alpha, beta, gamma = (mp.mpf(value) for value in cell)
    alpha, beta, gamma = (angle * mp.pi / 180 for angle in (alpha, beta, gamma))
    first = mp.matrix([a, 0, 0])
    second = mp.matrix([b * mp.cos(gamma), b * mp.sin(gamma), 0])
    across = (mp.cos(alpha) - mp.cos(beta) * mp.cos(gamma)) / mp.sin(gamma)
    third = c * mp.matrix([mp.cos(beta), across, mp.sqrt(mp.sin(beta) ** 2 - across**2)])
    row_axis, row, normal_axis, normal = rule
    along = first * row[0] + second * row[1] + third * row[2]
    reciprocal = [_cross(second, third), _cross(third, first), _cross(first, second)]
    out = reciprocal[0] * normal[0] + reciprocal[1] * normal[1] + reciprocal[2] * normal[2]
    axes: dict[int, Any] = {row_axis: along / mp.norm(along), normal_axis: out / mp.norm(out)}
    last = 3 - row_axis - normal_axis
    axes[last] = _cross(axes[(last + 1) % 3], axes[(last + 2) % 3])
    basis = mp.matrix(3, 3)
    for column, vector in enumerate((first, second, third)):
        for line in range(3):
            basis[line, column] = sum(axes[line][k] * vector[k] for k in range(3))
    return basis


def _cross(one: Any, two: Any) -> Any:
    return mp.matrix(
        [
            one[1] * two[2] - one[2] * two[1],
            one[2] * two[0] - one[0] * two[2],
            one[0] * two[1] - one[1] * two[0],
        ]
    )


def differentiate_basis(cell: CellFunction, t: float, rule: Rule = DEFAULT) -> FloatArray:
    """Α at t."""
    with mp.workdps(40):
        step = mp.mpf(10) ** -12 * max(1, abs(mp.mpf(t)))
        later, earlier = build_basis(cell(mp.mpf(t) + step), rule), build_basis(cell(mp.mpf(t) - step), rule)
        rate = (later - earlier) / (2 * step) * build_basis(cell(mp.mpf(t)), rule) ** -1
        return to_numpy((rate + rate.T) / 2)


def to_numpy(matrix: Any) -> FloatArray:
    """The same in double precision."""
    return np.array([[float(matrix[i, j]) for j in range(3)] for i in range(3)])


def build_polynomial_cell(coefficients: Sequence[Sequence[float]]) -> CellFunction:
    """A cell whose six parameters are polynomials in t/1000: rows of coefficients, lowest power first."""

    def cell(t: Any) -> list[Any]:
        scaled = t / 1000
        return [sum(value * scaled**power for power, value in enumerate(row)) for row in coefficients]

    return cell
