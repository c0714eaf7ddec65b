"""Directions in which nothing expands: where nᵀαn = 0.

They form a cone about the principal axis whose value has the odd sign, with the half-angle atan √(−α_odd/α_j) toward
another axis j (of calcite, J. F. Nye, Physical Properties of Crystals, ch. VI, from memory); where all values have one
sign there are none.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.tensor.conic import find_conics
from app.tensor.estimate import Estimate
from app.tensor.principal import Principal, find_principal
from app.tensor.quadric import sign_values

FloatArray = npt.NDArray[np.float64]
StillKind = Literal["none", "cone", "planes", "plane", "axis", "everywhere"]

CURVE_POINTS: Final = 181


@dataclass(frozen=True)
class StillDirections:
    """The directions of no expansion of one tensor.

    Attributes:
        kind: "cone"; "planes" (two, where one principal value is zero and the others have unlike signs); "plane" (where
            two are zero); "axis" (one zero, the others of like sign); "everywhere"; "none".
        axis: shape (3,). Of a cone its axis; the line that two planes share; the normal of one plane; the one axis
            without expansion. None otherwise.
        toward: shape (m, 3), principal axes toward which the half-angles are measured: two of a cone, one of two
            planes, whose half-angle is between either plane and this axis.
        half_angles: shape (m,), degrees.
        sigma: shape (m,), degrees; None without covariance.
        curves: closed lines of unit vectors.
        sentence: what it is in words.
    """

    kind: StillKind
    axis: FloatArray | None
    toward: FloatArray
    half_angles: FloatArray
    sigma: FloatArray | None
    curves: tuple[FloatArray, ...]
    sentence: str


def find_still_directions(
    estimate: Estimate, principal: Principal | None = None, points: int = CURVE_POINTS
) -> StillDirections:
    """The directions of no expansion of an expansion tensor, in its frame.

    Args:
        estimate: the tensor.
        principal: its principal values and axes, where they are at hand.
        points: on each curve; with 0 there are no curves.
    """
    principal = principal or find_principal(estimate)
    signs = sign_values(principal.values)
    zero = int(np.sum(signs == 0.0))
    if zero == 3:
        return _build("everywhere", None, "There is no expansion along any direction.")
    if zero == 0 and abs(np.sum(signs)) == 3:
        word = "positive" if signs[0] > 0 else "negative"
        return _build("none", None, f"All principal values are {word}: no direction is without expansion.")
    conics = find_conics(principal.values, principal.axes) if points else []
    curves = tuple(conic.thin(points) for conic in conics)
    if zero == 2:
        alone = principal.axes[int(np.argmax(np.abs(signs)))]
        return _build("plane", alone, "No direction in the plane across this axis expands.", curves)
    if zero == 1:
        null = int(np.argmin(np.abs(signs)))
        if np.sum(signs) != 0.0:
            return _build("axis", principal.axes[null], "Along this axis alone there is no expansion.")
        odd, others = int(np.argmin(signs)), [int(np.argmax(signs))]
        sentence = "No direction in either of two planes, which share this axis, expands."
        # In the plane across the shared axis the still directions lie at this angle from the contracting axis.
        angles, sigma = _measure_half_angles(estimate, principal, odd, others)
        shared, from_odd = principal.axes[null], principal.axes[[odd]]
        return StillDirections("planes", shared, from_odd, angles, sigma, curves, sentence)
    odd = int(np.argmin(signs * np.sum(signs)))
    others = [index for index in range(3) if index != odd]
    angles, sigma = _measure_half_angles(estimate, principal, odd, others)
    sentence = (
        f"No direction on a cone about this axis expands; it opens by {angles[0]:.4g}° and {angles[1]:.4g}° toward "
        "the two other axes."
    )
    return StillDirections("cone", principal.axes[odd], principal.axes[others], angles, sigma, curves, sentence)


def _build(
    kind: StillKind, axis: FloatArray | None, sentence: str, curves: tuple[FloatArray, ...] = ()
) -> StillDirections:
    return StillDirections(kind, axis, np.zeros((0, 3)), np.zeros(0), None, curves, sentence)


def _measure_half_angles(
    estimate: Estimate, principal: Principal, odd: int, others: list[int]
) -> tuple[FloatArray, FloatArray | None]:
    own, away = principal.values[odd], principal.values[others]
    ratios = -own / away
    roots = np.sqrt(ratios)
    outers = (principal.axes[:, :, None] * principal.axes[:, None, :]).reshape(3, 9)
    # dθ/dα_odd and dθ/dα_j of θ = atan √(−α_odd/α_j).
    slope = 1.0 / (2.0 * roots * (1.0 + ratios))
    derivative = (-slope / away)[:, None] * outers[odd] + (-slope * ratios / away)[:, None] * outers[others]
    sigma = estimate.propagate(derivative)
    return np.rad2deg(np.arctan(roots)), None if sigma is None else np.rad2deg(sigma)


def find_still_in_plane(matrix: FloatArray, normal: FloatArray) -> FloatArray:
    """Directions without expansion in the plane across a normal, shape (m, 3), m = 0, 1 or 2, up to their sign.

    None too where the whole plane is without expansion. With two, the one along which the value grows by a right-handed
    turn about the normal comes first.
    """
    unit = normal / np.linalg.norm(normal)
    start = np.eye(3)[int(np.argmin(np.abs(unit)))]
    first = np.cross(start, unit) / np.linalg.norm(np.cross(start, unit))
    second = np.cross(unit, first)
    symmetric = (matrix + matrix.T) / 2.0
    mean = (first @ symmetric @ first + second @ symmetric @ second) / 2.0
    cosine = (first @ symmetric @ first - second @ symmetric @ second) / 2.0
    sine = first @ symmetric @ second
    size, amplitude = float(np.max(np.abs(symmetric))), float(np.hypot(cosine, sine))
    # mean + amplitude · cos 2(ψ − ψ0) = 0.
    if amplitude <= 1e-12 * size or abs(mean) > amplitude * (1.0 + 1e-12):
        return np.zeros((0, 3))
    centre = np.arctan2(sine, cosine) / 2.0
    half = np.arccos(np.clip(-mean / amplitude, -1.0, 1.0)) / 2.0
    angles = np.array([centre]) if half == 0.0 else np.array([centre - half, centre + half])
    if half >= np.pi / 2.0:
        angles = np.array([centre + np.pi / 2.0])
    directions: FloatArray = np.cos(angles)[:, None] * first + np.sin(angles)[:, None] * second
    return directions
