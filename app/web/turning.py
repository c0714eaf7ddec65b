"""The rotation mathematics of turning and looking: poses from drags, keys and names, views, and the gentle catch.

The screen's axes are right, up and toward the viewer. A view is a rotation matrix V with these three as rows, written
in the frame that is held: the specimen's or the crystal's. With the pose C (v_specimen = C v_crystal) the screen of
the crystal frame is S = V C where the specimen is held, else S = V. Turns are whole turns since the press, never
increments, so a lost message loses nothing.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, read_direction
from app.crystal.lattice import list_directions, list_indices
from app.errors import InputError, located
from app.tensor.pose import AXIS_LETTERS, Pose, pose_from_axes, pose_from_matrix
from app.tensor.principal import Principal

FloatArray = npt.NDArray[np.float64]
Hold = Literal["specimen", "crystal"]

CATCH_WITHIN: Final = 2.0
"""Degrees within which a hand-turned axis is drawn to a direction."""
CATCH_DEAD: Final = 0.7
"""Degrees within which it lies on it."""
CATCH_INDEX: Final = 2
_CATCH_KINDS: Final = ("normal", "row")

DEFAULT_VIEW: Final = np.array([[-0.8090, 0.5878, 0.0], [-0.2249, -0.3095, 0.9239], [0.5430, 0.7474, 0.3827]])


@dataclass(frozen=True)
class View:
    """From where one looks.

    Attributes:
        hold: what stays still while the other turns.
        matrix: V, shape (3, 3), proper: right, up and toward the viewer as rows, in the held frame.
    """

    hold: Hold
    matrix: FloatArray

    def screen(self, pose: FloatArray) -> FloatArray:
        """S, shape (3, 3): v_screen = S v_crystal."""
        return self.matrix @ pose if self.hold == "specimen" else self.matrix

    def exchange(self, hold: Hold, pose: FloatArray) -> View:
        """The same picture with the other thing held."""
        screen = self.screen(pose)
        return View(hold, screen @ pose.T if hold == "specimen" else screen)


@dataclass(frozen=True)
class Caught:
    """What a specimen axis lies on by the catch: its letter and a name ("(-2 0 1)" or "p3")."""

    axis: str
    on: str


def build_view(hold: Hold, matrix: Any) -> View:
    """A view as the page sends it back; None is the usual one."""
    if matrix is None:
        return View(hold, _make_proper(DEFAULT_VIEW))
    with located("view"):
        return View(hold, pose_from_matrix(matrix).matrix)


def _make_proper(matrix: FloatArray) -> FloatArray:
    left, _, right = np.linalg.svd(matrix)
    proper: FloatArray = left @ right
    if np.linalg.det(proper) < 0:
        raise InputError("The view is left-handed.", field="view")
    return proper


def roll_ball(right: float, up: float) -> FloatArray:
    """The rotation, in screen axes, that carries the front of a ball of radius 1 so far right and up (radians)."""
    turned: FloatArray = Rotation.from_rotvec([-up, right, 0.0]).as_matrix()
    return turned


def look(view: View, right: float, up: float) -> View:
    """The view after dragging the ground: what is seen follows the hand, no pose changes."""
    return View(view.hold, roll_ball(right, up) @ view.matrix)


def turn_by_hand(pose: FloatArray, view: View, right: float, up: float) -> FloatArray:
    """The pose after dragging the block: what is not held follows the hand.

    Where the crystal is held the specimen's axes on the screen become R S Cᵀ; where the specimen is held the crystal
    becomes R S, which is the opposite turn of the specimen in the crystal.
    """
    turn = roll_ball(right, up)
    screen = view.screen(pose)
    if view.hold == "specimen":
        return pose @ screen.T @ turn @ screen
    return pose @ screen.T @ turn.T @ screen


def spin(pose: FloatArray, axis: int, degrees: float) -> FloatArray:
    """The pose after turning the specimen about one of its own axes, right-handed."""
    turn = Rotation.from_rotvec(np.deg2rad(degrees) * np.eye(3)[axis]).as_matrix()
    turned: FloatArray = turn.T @ pose
    return turned


def find_handle(pose: FloatArray, view: View, axis: int) -> tuple[FloatArray, FloatArray]:
    """The middle of an axis's ring handle and the way it moves in a right-handed turn, both in the specimen frame."""
    toward = (view.screen(pose) @ pose.T)[2]
    unit = np.eye(3)[axis]
    middle = toward - unit * (toward @ unit)
    if np.linalg.norm(middle) < 0.05:
        middle = np.eye(3)[(axis + 1) % 3]
    middle = middle / np.linalg.norm(middle)
    return middle, np.cross(unit, middle)


def spin_by_hand(pose: FloatArray, view: View, axis: int, right: float, up: float) -> FloatArray:
    """The pose after dragging a ring handle; where the specimen is held, the crystal follows the hand."""
    _, way = find_handle(pose, view, axis)
    shown = (view.screen(pose) @ pose.T @ way)[:2]
    size = float(np.linalg.norm(shown))
    amount = float(np.array([right, up]) @ shown) / size if size > 1e-9 else right
    sense = -1.0 if view.hold == "specimen" else 1.0
    return spin(pose, axis, sense * float(np.rad2deg(amount)) * 2.0)


def catch(
    crystal: Crystal, principal: Principal, pose: FloatArray, about: int | None = None
) -> tuple[FloatArray, Caught | None]:
    """Draw a hand-turned pose gently to low-index normals, rows and principal axes within two degrees.

    Args:
        crystal, principal: where the directions come from.
        pose: C as the hand has it.
        about: None draws z by the shortest turn; an axis number draws the two others by a turn about that axis only.

    Returns:
        The pose, and what lies exactly on what.
    """
    lines = _list_lines(crystal, principal)
    # Both senses of every line, so that what is caught is called by the sense in which the axis points.
    vectors = np.concatenate([lines, -lines])
    if about is None:
        target = _find_target(pose[2], vectors)
        if target is None:
            return pose, None
        index, goal, off = target
        pulled = _pull(off)
        across = np.cross(pose[2], goal)
        size = float(np.linalg.norm(across))
        if size < 1e-12:
            return pose, Caught("z", _name_line(principal, index, len(lines)))
        turn = Rotation.from_rotvec(np.deg2rad(off - pulled) * across / size).as_matrix()
        caught = pose @ turn.T
        if pulled > 0.0:
            return caught, None
        caught = pose_from_axes(2, goal, 0, caught[0]).matrix
        return caught, Caught("z", _name_line(principal, index, len(lines)))
    near = _find_turn(pose, about, vectors)
    if near is None:
        return pose, None
    index, axis, angle = near
    pulled = _pull(abs(angle))
    turned = spin(pose, about, float(np.sign(angle)) * (abs(angle) - pulled))
    if pulled > 0.0:
        return turned, None
    return turned, Caught(AXIS_LETTERS[axis], _name_line(principal, index, len(lines)))


def _pull(off: float) -> float:
    """How far off it is left: nothing within the dead zone, then more and more, and all of it at the rim."""
    return max(0.0, (off - CATCH_DEAD) * CATCH_WITHIN / (CATCH_WITHIN - CATCH_DEAD))


def _find_target(vector: FloatArray, vectors: FloatArray) -> tuple[int, FloatArray, float] | None:
    """The nearest of unit vectors (n, 3) within reach: its number, itself and how many degrees off it is."""
    cosines = vectors @ vector
    # A little more than is within reach is kept by the cosine, which has no digits left at small angles.
    near = np.flatnonzero(cosines >= np.cos(np.deg2rad(CATCH_WITHIN)) - 1e-9)
    if len(near) == 0:
        return None
    across = np.linalg.norm(np.cross(vectors[near], vector), axis=1)
    angles = np.rad2deg(np.arctan2(across, cosines[near]))
    best = int(np.argmin(angles))
    if angles[best] > CATCH_WITHIN:
        return None
    return int(near[best]), vectors[near[best]], float(angles[best])


def _find_turn(pose: FloatArray, about: int, vectors: FloatArray) -> tuple[int, int, float] | None:
    """The shortest turn within reach about one axis that puts another on one of unit vectors (n, 3) across the first.

    The vector's number, the axis that comes to lie on it and the degrees, right-handed about the first.
    """
    along = vectors @ pose[about]
    near = np.flatnonzero(np.abs(along) < np.sin(np.deg2rad(0.5)))
    flat = vectors[near] - np.outer(along[near], pose[about])
    best: tuple[int, int, float] | None = None
    for axis in ((about + 1) % 3, (about + 2) % 3):
        angles = np.rad2deg(np.arctan2(flat @ np.cross(pose[about], pose[axis]), flat @ pose[axis]))
        for place in np.flatnonzero(np.abs(angles) <= CATCH_WITHIN).tolist():
            angle = float(angles[place])
            if best is None or abs(angle) < abs(best[2]):
                best = (int(near[place]), axis, angle)
    return best


def _list_lines(crystal: Crystal, principal: Principal) -> FloatArray:
    """Unit vectors, one of each line that draws: principal axes that there are, then normals, then rows."""
    parts = [principal.axes[[index for index in range(3) if not principal.arbitrary[index]]]]
    if crystal.M is not None:
        parts += [list_directions(crystal, kind, CATCH_INDEX) for kind in _CATCH_KINDS]
    return np.concatenate(parts)


def _name_line(principal: Principal, index: int, count: int) -> str:
    """The name of an entry of ``_list_lines``, of which there are ``count``; from there on, of the reversed ones."""
    sense, index = (1, index) if index < count else (-1, index - count)
    axes = [f"p{number + 1}" for number in range(3) if not principal.arbitrary[number]]
    if index < len(axes):
        return axes[index] if sense > 0 else f"−{axes[index]}"
    indices = list_indices(CATCH_INDEX)
    kind, number = divmod(index - len(axes), len(indices))
    return format_indices(_CATCH_KINDS[kind], (sense * indices[number]).tolist())


def put_axis(crystal: Crystal, pose: FloatArray, axis: str, on: str, toward: tuple[str, str] | None) -> dict[str, Any]:
    """The pose, as it is kept, that puts a specimen axis on a direction.

    Without a second direction the next axis stays as near to where it is as it can.
    """
    number = AXIS_LETTERS.index(axis)
    with located("on"):
        goal = crystal.resolve(read_direction(on))
    if toward is not None:
        with located("toward"):
            crystal.resolve(read_direction(toward[1]))
        return {"exact": [axis, on], "toward": [toward[0], toward[1]]}
    for near in ((number + 1) % 3, (number + 2) % 3):
        if np.linalg.norm(np.cross(goal, pose[near])) > 0.02:
            return {"exact": [axis, on], "toward": [AXIS_LETTERS[near], pose[near].tolist()]}
    raise InputError("The turn about that direction is open.", field="toward", hint="Give a second direction.")


def keep_pose(pose: FloatArray, caught: Caught | None) -> dict[str, Any]:
    """A pose as it is kept: with the name of what it was caught on, so that it is called by that again."""
    if caught is not None and caught.on[0] in "[(":
        axis = AXIS_LETTERS.index(caught.axis)
        on = caught.on
        near = (axis + 1) % 3
        return {"exact": [caught.axis, on], "toward": [AXIS_LETTERS[near], pose[near].tolist()]}
    return {"matrix": pose.tolist()}


def names_of(pose: dict[str, Any]) -> dict[str, str]:
    """Which specimen axes a kept pose names by an index form."""
    if "exact" in pose and isinstance(pose["exact"][1], str):
        return {pose["exact"][0]: pose["exact"][1]}
    if isinstance(pose.get("from"), str):
        return {"z": pose["from"]}
    return {}


def as_pose(matrix: FloatArray) -> Pose:
    """A pose of a matrix that is orthonormal but for rounding, made exact."""
    left, _, right = np.linalg.svd(matrix)
    return Pose(left @ right)
