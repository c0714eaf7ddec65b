"""The same quantities in fifty digits, by formulas of their own: nothing here is taken from the package under test.

Inputs are the doubles that the package is given, so what is compared is its arithmetic, not the rounding of the input.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from mpmath import acos, cos, fsum, matrix, mp, mpf, pi, radians, sin, sqrt

mp.dps = 50
EPS = 2.0**-52


def exact(rows: Any) -> matrix:
    """A matrix of exactly these doubles."""
    return matrix([[mpf(float(value)) for value in row] for row in rows])


def vector(values: Sequence[Any]) -> matrix:
    """A column."""
    return matrix([mpf(value) if isinstance(value, mpf) else mpf(float(value)) for value in values])


def dot(first: matrix, second: matrix) -> Any:
    """Inner product."""
    return fsum(first[k] * second[k] for k in range(len(first)))


def unit(values: Any) -> matrix:
    """A vector of length one."""
    column = vector(list(values))
    return column / sqrt(dot(column, column))


def cross(first: matrix, second: matrix) -> matrix:
    """Vector product."""
    return matrix(
        [first[(k + 1) % 3] * second[(k + 2) % 3] - first[(k + 2) % 3] * second[(k + 1) % 3] for k in range(3)]
    )


def basis(cell: Sequence[float]) -> matrix:
    """a, b, c as columns with x3 along c and x2 along b* (x1 = x2 × x3), from edges and angles by Gram-Schmidt."""
    a, b, c = (mpf(float(edge)) for edge in cell[:3])
    alpha, beta, gamma = (radians(mpf(float(angle))) for angle in cell[3:])
    # c along x3; a in the plane of x1 and x3, because x2 is across a and c.
    along = b * cos(alpha)
    first = b * (cos(gamma) - cos(alpha) * cos(beta)) / sin(beta)
    second = sqrt(b * b - along * along - first * first)
    return matrix([[a * sin(beta), first, 0], [0, second, 0], [a * cos(beta), along, c]])


def row(columns: matrix, indices: Sequence[Any]) -> matrix:
    """The unit vector along u a + v b + w c."""
    return unit(list(columns * vector(indices)))


def normal(columns: matrix, indices: Sequence[Any]) -> matrix:
    """The unit vector along h a* + k b* + l c*: b × c and so on over the volume."""
    a, b, c = (columns[:, k] for k in range(3))
    h, k, m = (mpf(float(index)) for index in indices)
    return unit(list(h * cross(b, c) + k * cross(c, a) + m * cross(a, b)))


def value(tensor: matrix, direction: matrix) -> Any:
    """nᵀAn."""
    return dot(direction, tensor * direction)


def rod(tensor: matrix, direction: matrix) -> Any:
    """1 / nᵀA⁻¹n."""
    return 1 / value(tensor**-1, direction)


def angle_between(first: matrix, second: matrix) -> Any:
    """Degrees, exact also near 0 and 180: twice the angle of the half chord."""
    one, two = unit(list(first)), unit(list(second))
    chord, sum_ = one - two, one + two
    return 2 * mp.atan2(sqrt(dot(chord, chord)), sqrt(dot(sum_, sum_))) * 180 / pi


def principal(tensor: matrix) -> tuple[list[Any], list[matrix]]:
    """Principal values, descending, and axes of the symmetric part, by Jacobi's rotations."""
    values, axes = mp.eigsy((tensor + tensor.T) / 2)
    order = sorted(range(3), key=lambda k: -values[k])
    return [values[k] for k in order], [axes[:, k] for k in order]


def attitude(directions: Sequence[matrix], seen: Sequence[matrix], weights: Sequence[float]) -> matrix:
    """The rotation of least weighted squares, by the quaternion that is the top eigenvector of Davenport's matrix.

    P. Davenport's method as in Schaub and Junkins, Analytical Mechanics of Space Systems, ch. 3 (from memory).
    """
    total = matrix(3, 3)
    for direction, place, weight in zip(directions, seen, weights, strict=True):
        total += mpf(float(weight)) * (place * direction.T)
    trace = total[0, 0] + total[1, 1] + total[2, 2]
    z = matrix([total[2, 1] - total[1, 2], total[0, 2] - total[2, 0], total[1, 0] - total[0, 1]])
    four = matrix(4, 4)
    four[0, 0] = trace
    for i in range(3):
        four[0, i + 1] = four[i + 1, 0] = z[i]
        for j in range(3):
            four[i + 1, j + 1] = total[i, j] + total[j, i] - (trace if i == j else 0)
    values, vectors = mp.eigsy(four)
    best = max(range(4), key=lambda k: values[k])
    w, x, y, s = (vectors[k, best] for k in range(4))
    return matrix(
        [
            [w * w + x * x - y * y - s * s, 2 * (x * y - w * s), 2 * (x * s + w * y)],
            [2 * (x * y + w * s), w * w - x * x + y * y - s * s, 2 * (y * s - w * x)],
            [2 * (x * s - w * y), 2 * (y * s + w * x), w * w - x * x - y * y + s * s],
        ]
    )


def least_squares(design: matrix, observed: matrix, sigma: Sequence[float]) -> tuple[matrix, matrix]:
    """Free values and their covariance for independent readings, by normal equations, which fifty digits allow."""
    weights = [1 / mpf(float(deviation)) ** 2 for deviation in sigma]
    scaled = matrix(design.rows, design.cols)
    for i in range(design.rows):
        for j in range(design.cols):
            scaled[i, j] = design[i, j] * weights[i]
    covariance = (scaled.T * design) ** -1
    return covariance * (scaled.T * observed), covariance


def full_row(direction: matrix) -> list[Any]:
    """Derivatives of nᵀAn by the six cells 11 12 13 22 23 33."""
    x, y, z = direction
    return [x * x, 2 * x * y, 2 * x * z, y * y, 2 * y * z, z * z]


def difference(found: Any, wanted: Any) -> float:
    """Largest difference of two lists, matrices or numbers, as a float."""
    if hasattr(wanted, "rows"):
        flat_wanted = [wanted[i, j] for i in range(wanted.rows) for j in range(wanted.cols)]
        flat_found = [x for line in found for x in (line if hasattr(line, "__len__") else [line])]
    elif isinstance(wanted, list):
        flat_wanted, flat_found = wanted, list(found)
    else:
        flat_wanted, flat_found = [wanted], [found]
    return max(float(abs(mpf(float(one)) - other)) for one, other in zip(flat_found, flat_wanted, strict=True))


def arc(cosine: Any) -> Any:
    """acos in degrees."""
    return acos(cosine) * 180 / pi
