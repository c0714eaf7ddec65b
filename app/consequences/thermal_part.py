"""What an expansion, or any strain, does to a cut part: lengths, thicknesses, angles, and faces that tilt.

A strain ε is the stretch less one, U = 1 + ε, symmetric and free of any turn of the part; of an expansion tensor it is
α (T₂ − T₁). A line along n becomes U n and the normal of a plane U⁻¹ n (J. F. Nye, Physical Properties of Crystals,
ch. VI, from memory, to first order; here exactly). A line that stood square on its plane leaves the plane's normal by
the angle between the two, which vanishes on principal axes alone: every other plate, when its faces are warmed
unequally or it is held flat, shears or warps.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.principal import find_principal

FloatArray = npt.NDArray[np.float64]
LineKind = Literal["rows", "normals"]

_PARALLEL = 1e-12
_OUTSIDE = "The strain shrinks some direction to nothing: a principal value is −1 or less."


@dataclass(frozen=True)
class PartChange:
    """What becomes of a part in m directions n; standard deviations are None without covariance.

    Attributes:
        lengths, length_sigma: shape (m,), relative change of a length along n.
        thicknesses, thickness_sigma: shape (m,), relative change of the distance of two faces of normal n.
        tilts, tilt_sigma: shape (m,), degrees by which the line that stood square on the faces leaves their normal; its
            σ is NaN where it vanishes, for there it has no first order.
    """

    lengths: FloatArray
    length_sigma: FloatArray | None
    thicknesses: FloatArray
    thickness_sigma: FloatArray | None
    tilts: FloatArray
    tilt_sigma: FloatArray | None


@dataclass(frozen=True)
class AngleChange:
    """Angles between m pairs of edges, or of faces' normals, in degrees.

    Attributes:
        before, after: shape (m,), 0 to 180.
        change: shape (m,), after less before.
        sigma: shape (m,), of the change; NaN for parallel lines. None without covariance.
    """

    before: FloatArray
    after: FloatArray
    change: FloatArray
    sigma: FloatArray | None


@dataclass(frozen=True)
class TruePlanes:
    """Planes whose plates stay square, neither shearing nor warping: those across a principal axis.

    Attributes:
        normals: shape (k, 3), the principal axes that are determined: three, one or none.
        belt: shape (3,), an axis every normal across which will do too; None unless two principal values are equal.
        every: whether every plane will do.
        sentence: the same in words.
    """

    normals: FloatArray
    belt: FloatArray | None
    every: bool
    sentence: str


def strain_between(expansion: Estimate, start: float, end: float) -> Estimate:
    """The strain α (end − start) of a mean expansion tensor, covariance included.

    Args:
        expansion: per unit of temperature (1/K, not 10⁻⁶/K), the mean over the interval.
        start, end: temperatures in the same unit.

    Raises:
        InputError: a temperature that is not finite, or a strain that leaves nothing of the part.
    """
    for name, value in (("start", start), ("end", end)):
        if not np.isfinite(value):
            raise InputError("A temperature is a finite number.", field=name)
    span = end - start
    covariance = None if expansion.covariance is None else span**2 * expansion.covariance
    strain = Estimate(span * expansion.matrix, covariance, expansion.frame)
    _require_stretch(strain)
    return strain


def _require_stretch(strain: Estimate) -> None:
    matrix = strain.matrix
    if not np.all(np.isfinite(matrix)) or np.max(np.abs(matrix - matrix.T)) > 1e-9 * np.max(np.abs(matrix)):
        raise InputError("A strain is a symmetric tensor of finite cells.")
    if np.min(np.linalg.eigvalsh(matrix)) <= -1.0:
        raise InputError(
            _OUTSIDE, hint="Check the unit: an expansion is per kelvin here, and 10⁻⁶/K must be multiplied out."
        )


def compute_changes(strain: Estimate, directions: FloatArray) -> PartChange:
    """Length, thickness and tilt along unit vectors (m, 3) in the frame of the strain.

    Raises:
        InputError: a strain that is not symmetric, or that leaves nothing of the part.
    """
    _require_stretch(strain)
    stretch = np.eye(3) + strain.matrix
    inverse = np.linalg.inv(stretch)
    moved = directions @ strain.matrix
    longer = 2.0 * np.sum(directions * moved, axis=-1) + np.sum(moved * moved, axis=-1)
    # √(1 + x) − 1 = x / (1 + √(1 + x)) keeps the digits of a small change.
    lengths = longer / (1.0 + np.sqrt(1.0 + longer))
    shrunk = moved @ inverse
    narrower = -2.0 * np.sum(directions * shrunk, axis=-1) + np.sum(shrunk * shrunk, axis=-1)
    size = np.sqrt(1.0 + narrower)
    thicknesses = -narrower / (size * (1.0 + size))
    lines, normals = directions @ stretch, directions @ inverse
    tilts, _, line_turn, normal_turn = _measure_angles(lines, normals)
    line_units = lines / np.linalg.norm(lines, axis=-1, keepdims=True)
    normal_units = normals / size[..., None]
    # δ|U n| = û·δU n; δ(1/|U⁻¹n|) = (U⁻¹ n̂)·δU U⁻¹n / |U⁻¹n|², n̂ the unit vector along U⁻¹n.
    thickness_rows = _outer(normal_units @ inverse, normals) / np.square(size)[..., None]
    tilt_rows = _outer(line_turn, directions) - _outer(normal_turn @ inverse, normals)
    tilt_sigma = strain.propagate(tilt_rows)
    return PartChange(
        lengths=lengths,
        length_sigma=strain.propagate(_outer(line_units, directions)),
        thicknesses=thicknesses,
        thickness_sigma=strain.propagate(thickness_rows),
        tilts=np.rad2deg(tilts),
        tilt_sigma=None if tilt_sigma is None else np.rad2deg(tilt_sigma),
    )


def compute_angle_changes(strain: Estimate, first: FloatArray, second: FloatArray, kind: LineKind) -> AngleChange:
    """Angles between pairs of directions before and after a strain.

    Args:
        strain: symmetric.
        first, second: unit vectors, shape (m, 3).
        kind: "rows" for lines and edges that are drawn on the part, "normals" for the normals of its faces.

    Raises:
        InputError: a strain that is not symmetric, or that leaves nothing of the part.
    """
    _require_stretch(strain)
    stretch = np.eye(3) + strain.matrix
    inverse = np.linalg.inv(stretch)
    before, _, _, _ = _measure_angles(first, second)
    moved = [vectors @ (stretch if kind == "rows" else inverse) for vectors in (first, second)]
    after, parallel, first_turn, second_turn = _measure_angles(*moved)
    if kind == "rows":
        rows = _outer(first_turn, first) + _outer(second_turn, second)
    else:
        rows = -_outer(first_turn @ inverse, moved[0]) - _outer(second_turn @ inverse, moved[1])
    sigma = strain.propagate(rows)
    return AngleChange(
        before=np.rad2deg(before),
        after=np.rad2deg(after),
        change=np.rad2deg(after - before),
        sigma=None if sigma is None else np.where(parallel, np.nan, np.rad2deg(sigma)),
    )


def _measure_angles(
    first: FloatArray, second: FloatArray
) -> tuple[FloatArray, npt.NDArray[np.bool_], FloatArray, FloatArray]:
    """Angles in radians between vectors (m, 3), where they are parallel, and the angles' derivatives by either."""
    lengths = np.linalg.norm(first, axis=-1, keepdims=True), np.linalg.norm(second, axis=-1, keepdims=True)
    one, two = first / lengths[0], second / lengths[1]
    crossed = np.cross(one, two)
    sines = np.linalg.norm(crossed, axis=-1, keepdims=True)
    angles = np.arctan2(sines[..., 0], np.sum(one * two, axis=-1))
    parallel = sines[..., 0] <= _PARALLEL
    axis = np.where(parallel[..., None], np.nan, crossed / np.where(sines > 0.0, sines, 1.0))
    # The first, turned about the axis toward the second, closes the angle; the second opens it.
    return angles, parallel, -np.cross(axis, one) / lengths[0], np.cross(axis, two) / lengths[1]


def find_true_planes(strain: Estimate) -> TruePlanes:
    """The planes whose plates stay square under an expansion or a strain.

    Equal principal values are equal by symmetry, or as far as the covariance can tell.
    """
    principal = find_principal(strain)
    alike = find_principal(Estimate(strain.matrix, None, strain.frame)).shape == principal.shape
    if principal.shape == "isotropic":
        sentence = _say("it expands alike in every direction, so every plate stays square and flat.", alike=alike)
        return TruePlanes(np.zeros((0, 3)), None, True, sentence)
    determined = np.array([not arbitrary for arbitrary in principal.arbitrary])
    normals = principal.axes[determined]
    if principal.shape == "uniaxial":
        sentence = _say(
            "plates stay square whose normal is this axis, or any direction across it; every other plate shears or "
            "warps.",
            alike=alike,
        )
        return TruePlanes(normals, normals[0], False, sentence)
    sentence = "Plates stay square whose normal is one of these three axes; every other plate shears or warps."
    return TruePlanes(normals, None, False, sentence)


def _say(text: str, *, alike: bool) -> str:
    return text[0].upper() + text[1:] if alike else f"As far as the uncertainty can tell, {text}"


def _outer(first: FloatArray, second: FloatArray) -> FloatArray:
    product = first[..., :, None] * second[..., None, :]
    return product.reshape(*product.shape[:-2], 9)
