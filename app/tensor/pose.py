"""Where the specimen stands in the crystal: the six ways to say it, and back to matrix, Bunge angles and quaternion.

C has the specimen axes x y z, written in the crystal frame, as its rows: v_specimen = C v_crystal, and a tensor goes
over as C T Cᵀ (passive: the crystal stays, the axes of description change). An axis with an angle, and a quaternion,
turn the crystal frame's axes by the right-hand rule onto x y z, so C is the transpose of that turn.
Bunge angles: H.-J. Bunge, Texture Analysis in Materials Science (1982), section 2.1.2:
v_crystal = g v_specimen, g = Z(φ2) X(Φ) Z(φ1) with passive matrices, so C = gᵀ.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any, Final

import numpy as np
import numpy.typing as npt
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, read_direction
from app.errors import InputError, located
from app.tensor.matrix import read_matrix

FloatArray = npt.NDArray[np.float64]

AXIS_LETTERS: Final = ("x", "y", "z")
MATRIX_TOLERANCE: Final = 1e-6
QUATERNION_TOLERANCE: Final = 1e-3
PARALLEL_LIMIT: Final = 1e-9
"""Sine of the angle below which two directions count as parallel."""

LARGEST_NUMBER: Final = 1e9
"""An angle in degrees beyond this is a mistake."""

GIMBAL_LIMIT: Final = 1e-12
"""Sine of half the angle between z and ±x3 below which phi1 and phi2 turn about one axis."""

_SHAPES: Final = (
    '{"matrix": C}, {"exact": ["z", direction], "toward": ["x", direction]}, {"axis": direction, "angle": degrees}, '
    '{"quaternion": [w, x, y, z]}, {"bunge": [phi1, PHI, phi2]} or '
    '{"from": direction, "tilt": degrees, "toward": direction, "x": direction}'
)


@dataclass(frozen=True)
class Pose:
    """A specimen frame.

    Attributes:
        matrix: C, shape (3, 3), proper and orthonormal, specimen axes in the crystal frame as rows.
    """

    matrix: FloatArray

    @property
    def bunge(self) -> list[float]:
        """phi1 and phi2 from 0 to below 360, PHI in 0 to 180 degrees; where PHI is 0 or 180, phi2 is 0."""
        # C = Z(φ1) X(Φ) Z(φ2) as active turns has the quaternion cos ½Φ (cos ½(φ1+φ2), sin ½(φ1+φ2)) in w and z,
        # sin ½Φ (cos ½(φ1−φ2), sin ½(φ1−φ2)) in x and y: near Φ = 0 the sum keeps its digits, near 180 the difference.
        x, y, z, w = self._turn
        tilt = 2.0 * float(np.arctan2(np.hypot(x, y), np.hypot(w, z)))
        half_sum, half_difference = float(np.arctan2(z, w)), float(np.arctan2(y, x))
        if np.hypot(x, y) < GIMBAL_LIMIT:
            first, second, tilt = 2.0 * half_sum, 0.0, 0.0
        elif np.hypot(w, z) < GIMBAL_LIMIT:
            first, second, tilt = 2.0 * half_difference, 0.0, np.pi
        else:
            first, second = half_sum + half_difference, half_sum - half_difference
        return [_wrap(first), float(np.rad2deg(tilt)), _wrap(second)]

    @property
    def quaternion(self) -> list[float]:
        """W x y z with w not negative, of the turn that takes x1 x2 x3 onto x y z."""
        x, y, z, w = self._turn
        # C itself, as an active turn, takes x y z onto x1 x2 x3: the other way round.
        sign = -1.0 if w < 0 or (w == 0 and next(value for value in (x, y, z) if value) > 0) else 1.0
        return [float(sign * value) + 0.0 for value in (w, -x, -y, -z)]

    @cached_property
    def _turn(self) -> FloatArray:
        """C as a quaternion x y z w."""
        turn: FloatArray = Rotation.from_matrix(self.matrix).as_quat()
        return turn


def turn_tensors(tensors: FloatArray, pose: FloatArray) -> FloatArray:
    """Tensors (..., 3, 3) of the crystal frame in the specimen frame C, shape (3, 3): C T Cᵀ, for many at once.

    The nine cells of each in row order go over as one row by (C ⊗ C)ᵀ, which is one matrix product for all of them.
    """
    rows = tensors.reshape(-1, 9)
    turned: FloatArray = (rows @ np.ascontiguousarray(np.kron(pose, pose).T)).reshape(tensors.shape)
    return turned


def _wrap(angle: float) -> float:
    """Radians as degrees from 0 to below 360; rounding below 0 counts as 0."""
    degrees = float(np.rad2deg(angle)) % 360.0
    return 0.0 if degrees >= 360.0 - 1e-12 else degrees


IDENTITY: Final = Pose(np.eye(3))


def read_pose(given: Any, crystal: Crystal) -> Pose:
    """A Pose from what a caller gives: one of the six shapes of the interface, or None for the identity.

    Raises:
        InputError: an unknown or mixed shape, a wrong number, or directions that do not determine the pose.
    """
    if given is None:
        return IDENTITY
    if isinstance(given, Pose):
        return given
    if not isinstance(given, Mapping):
        raise InputError("A pose is an object.", hint=f"Give {_SHAPES}.")
    keys = {key for key, value in given.items() if value is not None}
    if keys == {"matrix"}:
        return pose_from_matrix(given["matrix"])
    if keys == {"exact", "toward"}:
        exact, exact_direction = _read_assignment(given["exact"], "exact", crystal)
        near, near_direction = _read_assignment(given["toward"], "toward", crystal)
        return pose_from_axes(exact, exact_direction, near, near_direction)
    if keys == {"axis", "angle"}:
        axis = _resolve(given["axis"], "axis", crystal)
        return pose_from_axis_angle(axis, _read_number(given["angle"], "angle"))
    if keys == {"quaternion"}:
        return pose_from_quaternion(_read_numbers(given["quaternion"], 4, "quaternion"))
    if keys == {"bunge"}:
        return pose_from_bunge(_read_numbers(given["bunge"], 3, "bunge"))
    if keys in ({"from", "tilt", "toward"}, {"from", "tilt", "toward", "x"}):
        start = _resolve(given["from"], "from", crystal)
        toward = _resolve(given["toward"], "toward", crystal)
        near_x = _resolve(given["x"], "x", crystal) if "x" in keys else None
        return pose_from_tilt(start, _read_number(given["tilt"], "tilt"), toward, near_x)
    raise InputError(
        f"A pose cannot be read from the keys {', '.join(sorted(map(str, keys))) or 'of an empty object'}.",
        hint=f"Give exactly one of {_SHAPES}.",
    )


def pose_from_matrix(matrix: npt.ArrayLike) -> Pose:
    """From C itself, orthonormal and proper to 1e-6, then made exact (the nearest rotation)."""
    rows = read_matrix(matrix)
    if np.max(np.abs(rows)) > 2.0 or np.max(np.abs(rows @ rows.T - np.eye(3))) > MATRIX_TOLERANCE:
        raise InputError(
            "The rows of the pose's matrix are not orthonormal to 1e-6.",
            field="matrix",
            hint="Give the specimen axes x, y, z as rows of unit length at right angles, with enough digits.",
        )
    if np.linalg.det(rows) < 0:
        raise InputError(
            "The pose's matrix is left-handed: its determinant is −1.",
            field="matrix",
            hint="Reverse one axis; a specimen frame is right-handed.",
        )
    left, _, right = np.linalg.svd(rows)
    return Pose(left @ right)


def pose_from_axes(exact: int, exact_direction: FloatArray, near: int, near_direction: FloatArray) -> Pose:
    """Specimen axis number ``exact`` along one unit vector, axis ``near`` as near to the other as it can be."""
    if exact == near:
        raise InputError(
            f"The axis {AXIS_LETTERS[exact]} is put in two places.", field="toward", hint="Name two different axes."
        )
    across = _find_across(exact_direction, near_direction)
    if across is None:
        raise InputError(
            f"The directions for {AXIS_LETTERS[exact]} and {AXIS_LETTERS[near]} are parallel, so the turn about "
            f"{AXIS_LETTERS[exact]} is open.",
            field="toward",
            hint="Give a second direction that is not parallel to the first.",
        )
    rows = np.zeros((3, 3))
    rows[exact] = exact_direction
    rows[near] = across
    third = 3 - exact - near
    rows[third] = np.cross(rows[(third + 1) % 3], rows[(third + 2) % 3])
    return Pose(rows)


def _find_across(axis: FloatArray, direction: FloatArray) -> FloatArray | None:
    """The unit vector across ``axis`` nearest to ``direction``; None where the two are parallel."""
    across = direction - axis * (axis @ direction)
    size = np.linalg.norm(across)
    if size < PARALLEL_LIMIT:
        return None
    across = across / size
    # Of nearly parallel directions the difference has lost digits: taken away once more, it is square to the axis.
    across = across - axis * (axis @ across)
    unit: FloatArray = across / np.linalg.norm(across)
    return unit


def pose_from_axis_angle(axis: FloatArray, angle: float) -> Pose:
    """The crystal frame's axes turned about a unit vector by ``angle`` degrees, right-handed, become x y z."""
    turned: FloatArray = Rotation.from_rotvec(np.deg2rad(angle) * axis).as_matrix().T
    return Pose(turned)


def pose_from_quaternion(quaternion: FloatArray) -> Pose:
    """The turn of ``pose_from_axis_angle`` as w x y z, of norm 1 to 1e-3."""
    size = float(np.linalg.norm(quaternion))
    if abs(size - 1.0) > QUATERNION_TOLERANCE:
        raise InputError(
            f"The quaternion has norm {size:.6g}, not 1.",
            field="quaternion",
            hint="Give w, x, y, z with w² + x² + y² + z² = 1, to 0.001.",
        )
    turned: FloatArray = Rotation.from_quat(quaternion, scalar_first=True).as_matrix().T
    return Pose(turned)


def pose_from_bunge(angles: FloatArray) -> Pose:
    """phi1, PHI, phi2 in degrees, as in the texture literature: C = gᵀ."""
    # Turning the axes by phi1 about z, PHI about the new x and phi2 about the new z takes x y z onto x1 x2 x3, so
    # the columns of this active turn are the crystal axes in the specimen frame, which is C.
    turned: FloatArray = Rotation.from_euler("ZXZ", angles, degrees=True).as_matrix()
    return Pose(turned)


def pose_from_tilt(start: FloatArray, tilt: float, toward: FloatArray, near_x: FloatArray | None = None) -> Pose:
    """Z is ``start`` tilted by ``tilt`` degrees toward ``toward``; x is near ``near_x``, else near ``toward``."""
    across = _find_across(start, toward)
    if across is None:
        raise InputError(
            "The direction to tilt toward is parallel to the one to tilt from.",
            field="toward",
            hint="Give a direction at an angle to the first.",
        )
    angle = np.deg2rad(tilt)
    z = np.cos(angle) * start + np.sin(angle) * across
    wanted = toward if near_x is None else near_x
    try:
        return pose_from_axes(2, z / np.linalg.norm(z), 0, wanted)
    except InputError:
        raise InputError(
            "The direction for x is parallel to z, so the turn about z is open.",
            field="x",
            hint="Give as x a direction that is not parallel to z.",
        ) from None


def _read_assignment(given: Any, field: str, crystal: Crystal) -> tuple[int, FloatArray]:
    if not isinstance(given, list | tuple) or len(given) != 2 or given[0] not in AXIS_LETTERS:
        raise InputError(
            f"“{field}” is a pair: a specimen axis x, y or z, and the direction it is put on.",
            field=field,
            hint='For example ["z", "(-2 0 1)"].',
        )
    return AXIS_LETTERS.index(given[0]), _resolve(given[1], f"{field}[1]", crystal)


def _resolve(given: Any, field: str, crystal: Crystal) -> FloatArray:
    with located(field):
        return crystal.resolve(read_direction(given))


def _read_number(given: Any, field: str) -> float:
    if isinstance(given, bool) or not isinstance(given, int | float | np.integer | np.floating):
        raise InputError(f"“{field}” is a finite number.", field=field)
    try:
        number = float(given)
    except OverflowError:
        number = np.inf
    if not abs(number) <= LARGEST_NUMBER:
        raise InputError(f"“{field}” is a finite number of at most {LARGEST_NUMBER:g}.", field=field)
    return number


def _read_numbers(given: Any, count: int, field: str) -> FloatArray:
    if not isinstance(given, list | tuple | np.ndarray) or len(given) != count:
        raise InputError(f"“{field}” is a list of {count} numbers.", field=field)
    return np.array([_read_number(value, f"{field}[{index}]") for index, value in enumerate(given)])


def resolve_direction(crystal: Crystal, given: Any, pose: Pose) -> FloatArray:
    """Unit vector in the crystal frame, shape (3,), of any direction; specimen-frame ones by ``pose``."""
    direction = read_direction(given)
    if direction.kind != "specimen":
        return crystal.resolve(direction)
    values = np.asarray(direction.values)
    vector = pose.matrix.T @ (values / np.max(np.abs(values)))
    unit: FloatArray = vector / np.linalg.norm(vector)
    return unit


def resolve_directions(crystal: Crystal, given: Sequence[Any], pose: Pose) -> FloatArray:
    """Unit vectors in the crystal frame, shape (m, 3), of a list of directions; an error names the wrong one."""
    rows: list[Sequence[float]] = []
    bases: dict[str, FloatArray] = {}
    places: dict[str, list[int]] = {"vector": []}
    for index, item in enumerate(given):
        # Three numbers are what there may be very many of; all else is read one by one.
        if type(item) is list:
            rows.append(item)
            continue
        with located(f"[{index}]"):
            direction = read_direction(item)
            if direction.four_index:
                crystal.require_hexagonal(direction.text or "")
            if direction.kind not in places:
                places[direction.kind] = []
                bases[direction.kind] = _find_basis(crystal, direction, pose)
        places[direction.kind].append(index)
        rows.append(direction.values)
    vectors = np.array(rows, dtype=np.float64).reshape(-1, 3)
    sizes = np.max(np.abs(vectors), axis=1, keepdims=True)
    if not np.all(sizes > 0):
        raise InputError("A direction cannot be the zero vector.", field=f"[{int(np.argmin(sizes > 0))}]")
    vectors /= sizes
    for kind, basis in bases.items():
        vectors[places[kind]] = vectors[places[kind]] @ basis.T
    units: FloatArray = vectors / np.linalg.norm(vectors, axis=1, keepdims=True)
    return units


def _find_basis(crystal: Crystal, direction: Direction, pose: Pose) -> FloatArray:
    """What the numbers of a kind of direction multiply, as columns in the crystal frame."""
    if direction.kind == "specimen":
        return pose.matrix.T
    return crystal.require_basis() if direction.kind == "row" else crystal.reciprocal
