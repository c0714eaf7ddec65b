"""Turning and looking: scipy's Rotation and the meaning of each act, worked out beside the test.

The screen's axes are right, up and toward the viewer. A vector v of the crystal is seen at S v, a vector w of the
specimen at S Cᵀ w, since w = C v.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal, build_crystal
from app.errors import InputError
from app.tensor.estimate import Estimate
from app.tensor.pose import read_pose
from app.tensor.principal import Principal, find_principal
from app.web.turning import (
    CATCH_DEAD,
    CATCH_WITHIN,
    Caught,
    Hold,
    View,
    as_pose,
    build_view,
    catch,
    find_handle,
    keep_pose,
    look,
    names_of,
    put_axis,
    roll_ball,
    spin,
    spin_by_hand,
    turn_by_hand,
)
from tests.crystal.reference import CELLS, build_textbook_basis

FloatArray = npt.NDArray[np.float64]

TRICLINIC = build_crystal(CELLS["triclinic"], "1")
MONOCLINIC = build_crystal(CELLS["monoclinic b"], "2/m")
CUBIC = build_crystal(CELLS["cubic"], "m-3m")
LIMITING = build_crystal(None, "∞m")
X, Y, Z = np.eye(3)

# Invented; its principal axes lie far from every low index of the cells above.
SKEW = np.array([[7.0, 1.3, 0.9], [1.3, 11.0, -2.1], [0.9, -2.1, 4.0]])

turns = st.integers(0, 2**32 - 1).map(lambda seed: Rotation.random(rng=np.random.default_rng(seed)).as_matrix())
drags = st.tuples(st.floats(-3.0, 3.0), st.floats(-3.0, 3.0))
holds = st.sampled_from(("specimen", "crystal"))
axes = st.sampled_from((0, 1, 2))


def principal_of(matrix: FloatArray) -> Principal:
    return find_principal(Estimate(np.asarray(matrix, dtype=np.float64), None, "any"))


NO_AXES = principal_of(np.eye(3))
"""Every direction is a principal axis of the unit tensor, so none draws."""


def turn_about(axis: FloatArray, degrees: float) -> FloatArray:
    return Rotation.from_rotvec(np.deg2rad(degrees) * np.asarray(axis)).as_matrix()


def angle_between(first: FloatArray, second: FloatArray) -> float:
    return float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(first, second)), first @ second)))


def check_rotation(matrix: FloatArray) -> None:
    np.testing.assert_allclose(matrix @ matrix.T, np.eye(3), atol=1e-13)
    assert np.linalg.det(matrix) == pytest.approx(1.0, abs=1e-13)


# Views ----------------------------------------------------------------------------------------------------------------


def test_the_usual_view_is_a_rotation_with_the_held_z_upright() -> None:
    view = build_view("specimen", None)
    check_rotation(view.matrix)
    # z is seen straight up and partly from above, so that a block stands as it would on a table.
    right, up, toward = view.matrix @ Z
    assert abs(right) < 1e-3
    assert up > 0.9
    assert toward > 0.3


def test_a_view_of_an_earlier_answer_is_taken_as_it_is() -> None:
    matrix = turn_about(np.array([0.6, 0.0, 0.8]), 40.0)
    np.testing.assert_allclose(build_view("crystal", matrix.tolist()).matrix, matrix, atol=1e-15)


@pytest.mark.parametrize(
    "matrix",
    [(-np.eye(3)).tolist(), (1.1 * np.eye(3)).tolist(), np.ones((3, 3)).tolist()],
    ids=["left", "long", "flat"],
)
def test_a_view_that_is_no_rotation_is_refused_at_its_field(matrix: Any) -> None:
    with pytest.raises(InputError) as caught:
        build_view("specimen", matrix)
    assert caught.value.field == "view.matrix"


@given(turns, turns)
def test_what_is_held_decides_what_the_view_is_of(pose: FloatArray, matrix: FloatArray) -> None:
    # Holding the specimen the view's rows are written in its frame: a specimen axis w is seen at V w.
    seen_specimen = View("specimen", matrix).screen(pose) @ pose.T
    np.testing.assert_allclose(seen_specimen, matrix, atol=1e-13)
    np.testing.assert_allclose(View("crystal", matrix).screen(pose), matrix, atol=1e-13)


@given(turns, turns, holds, holds)
def test_exchanging_what_is_held_leaves_the_picture(
    pose: FloatArray, matrix: FloatArray, hold: Hold, other: Hold
) -> None:
    view = View(hold, matrix)
    exchanged = view.exchange(other, pose)
    assert exchanged.hold == other
    np.testing.assert_allclose(exchanged.screen(pose), view.screen(pose), atol=1e-13)


# The ball under the hand ----------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("right", "up", "point"), [(np.pi / 2, 0.0, X), (0.0, np.pi / 2, Y), (-np.pi / 2, 0.0, -X), (0.0, -np.pi / 2, -Y)]
)
def test_a_quarter_of_the_ball_carries_its_front_to_the_side(right: float, up: float, point: FloatArray) -> None:
    np.testing.assert_allclose(roll_ball(right, up) @ Z, point, atol=1e-15)


@given(drags)
def test_the_front_of_the_ball_follows_the_hand_along_a_great_circle(drag: tuple[float, float]) -> None:
    right, up = drag
    size = float(np.hypot(right, up))
    front = roll_ball(right, up) @ Z
    # By hand: after an arc of that length the front stands at (sin s · way, cos s).
    way = np.array([right, up]) / size if size else np.zeros(2)
    np.testing.assert_allclose(front, [*(np.sin(size) * way), np.cos(size)], atol=1e-12)
    # What lies across the way on the screen is the axle and does not move.
    axle = np.array([-way[1], way[0], 0.0])
    np.testing.assert_allclose(roll_ball(right, up) @ axle, axle, atol=1e-12)


@given(turns, turns, holds, drags)
def test_looking_rolls_what_is_seen_and_nothing_else(
    pose: FloatArray, matrix: FloatArray, hold: Hold, drag: tuple[float, float]
) -> None:
    view = View(hold, matrix)
    looked = look(view, *drag)
    assert looked.hold == hold
    # Crystal and specimen are seen to turn together.
    np.testing.assert_allclose(looked.screen(pose), roll_ball(*drag) @ view.screen(pose), atol=1e-12)


# Turning --------------------------------------------------------------------------------------------------------------


@settings(max_examples=60)
@given(turns, turns, drags)
def test_holding_the_crystal_the_specimen_follows_the_hand(
    pose: FloatArray, matrix: FloatArray, drag: tuple[float, float]
) -> None:
    view = View("crystal", matrix)
    turned = turn_by_hand(pose, view, *drag)
    check_rotation(turned)
    np.testing.assert_allclose(view.screen(turned), view.screen(pose), atol=1e-15)
    # x, y and z as seen, columns of S Cᵀ, are those of before rolled by the hand.
    np.testing.assert_allclose(
        view.screen(turned) @ turned.T, roll_ball(*drag) @ view.screen(pose) @ pose.T, atol=1e-12
    )


@settings(max_examples=60)
@given(turns, turns, drags)
def test_holding_the_specimen_the_crystal_follows_the_hand(
    pose: FloatArray, matrix: FloatArray, drag: tuple[float, float]
) -> None:
    view = View("specimen", matrix)
    turned = turn_by_hand(pose, view, *drag)
    check_rotation(turned)
    np.testing.assert_allclose(view.screen(turned) @ turned.T, view.screen(pose) @ pose.T, atol=1e-12)
    np.testing.assert_allclose(view.screen(turned), roll_ball(*drag) @ view.screen(pose), atol=1e-12)


@settings(max_examples=60)
@given(turns, turns, drags)
def test_the_two_ways_of_holding_turn_opposite_ways(
    pose: FloatArray, matrix: FloatArray, drag: tuple[float, float]
) -> None:
    # From one picture: the turn of the specimen within the crystal, C'ᵀC, of one is the inverse of the other's.
    specimen = View("specimen", matrix)
    crystal = specimen.exchange("crystal", pose)
    one = turn_by_hand(pose, specimen, *drag).T @ pose
    other = turn_by_hand(pose, crystal, *drag).T @ pose
    np.testing.assert_allclose(one @ other, np.eye(3), atol=1e-12)


@given(turns, turns, holds)
def test_a_hand_that_comes_back_has_turned_nothing(pose: FloatArray, matrix: FloatArray, hold: Hold) -> None:
    # Turns are whole turns since the press: only where the hand is now counts.
    view = View(hold, matrix)
    np.testing.assert_allclose(turn_by_hand(pose, view, 0.0, 0.0), pose, atol=1e-13)
    for axis in range(3):
        np.testing.assert_allclose(spin_by_hand(pose, view, axis, 0.0, 0.0), pose, atol=1e-13)


@given(turns, axes, st.floats(-720.0, 720.0))
def test_a_spin_turns_the_specimen_right_handed_about_its_own_axis(pose: FloatArray, axis: int, degrees: float) -> None:
    turned = spin(pose, axis, degrees)
    check_rotation(turned)
    # The axes are vectors of the crystal: each is turned there about the one that stays.
    expected = Rotation.from_rotvec(np.deg2rad(degrees) * pose[axis]).apply(pose)
    np.testing.assert_allclose(turned, expected, atol=1e-12)


def test_a_quarter_turn_about_z_puts_x_where_y_was() -> None:
    turned = spin(np.eye(3), 2, 90.0)
    np.testing.assert_allclose(turned, [Y, -X, Z], atol=1e-15)


@settings(max_examples=60)
@given(turns, turns, drags, st.integers(0, 2**32 - 1))
def test_the_posed_matrix_is_c_t_ct(pose: FloatArray, matrix: FloatArray, drag: tuple[float, float], seed: int) -> None:
    # What a turn does to the numbers: the value along a specimen axis is that of the turned vector in the crystal.
    tensor = np.random.default_rng(seed).normal(size=(3, 3))
    turned = turn_by_hand(pose, View("crystal", matrix), *drag)
    posed = read_pose({"matrix": as_pose(turned).matrix.tolist()}, TRICLINIC).matrix
    carried = Rotation.from_matrix(turned).as_matrix() @ tensor @ Rotation.from_matrix(turned).inv().as_matrix()
    np.testing.assert_allclose(posed @ tensor @ posed.T, carried, atol=1e-12)
    for axis in range(3):
        assert carried[axis, axis] == pytest.approx(turned[axis] @ tensor @ turned[axis], abs=1e-12)


# Ring handles ---------------------------------------------------------------------------------------------------------


@given(turns, turns, axes, holds)
def test_a_handle_lies_across_its_axis_toward_the_viewer_and_moves_right_handed(
    pose: FloatArray, matrix: FloatArray, axis: int, hold: Hold
) -> None:
    view = View(hold, matrix)
    middle, way = find_handle(pose, view, axis)
    unit = np.eye(3)[axis]
    assert np.linalg.norm(middle) == pytest.approx(1.0)
    assert middle @ unit == pytest.approx(0.0, abs=1e-12)
    # A small right-handed turn about the axis carries the middle along ``way``.
    moved = Rotation.from_rotvec(1e-6 * unit).apply(middle) - middle
    np.testing.assert_allclose(moved / 1e-6, way, atol=1e-5)
    toward = (view.screen(pose) @ pose.T)[2]
    if np.linalg.norm(np.cross(unit, toward)) > 0.1:
        # No other point of the ring is nearer to the viewer.
        angles = np.linspace(0.0, 2.0 * np.pi, 73)
        ring = np.cos(angles)[:, None] * middle + np.sin(angles)[:, None] * way
        assert np.max(ring @ toward) <= middle @ toward + 1e-12


@given(turns, turns, axes, drags)
def test_a_ring_turns_about_its_own_axis_only(
    pose: FloatArray, matrix: FloatArray, axis: int, drag: tuple[float, float]
) -> None:
    turned = spin_by_hand(pose, View("crystal", matrix), axis, *drag)
    check_rotation(turned)
    np.testing.assert_allclose(turned[axis], pose[axis], atol=1e-12)


@settings(max_examples=60)
@given(turns, turns, axes, holds)
def test_the_handle_follows_the_hand(pose: FloatArray, matrix: FloatArray, axis: int, hold: Hold) -> None:
    view = View(hold, matrix)
    middle, way = find_handle(pose, view, axis)
    seen = (view.screen(pose) @ pose.T @ way)[:2]
    if np.linalg.norm(seen) < 0.1:
        return
    drag = 0.01 * seen / np.linalg.norm(seen)
    turned = spin_by_hand(pose, view, axis, *drag)
    # Either the specimen, and so the handle, moves along the hand, or, where it is held, the crystal moves so.
    carried = pose.T @ middle
    if hold == "crystal":
        moved = view.screen(pose) @ (turned.T @ middle - carried)
    else:
        moved = View("specimen", matrix).screen(turned) @ carried - view.screen(pose) @ carried
    assert moved[:2] @ drag > 0
    # Across the handle's way the hand does nothing.
    across = np.array([-drag[1], drag[0]])
    np.testing.assert_allclose(spin_by_hand(pose, view, axis, *across), pose, atol=1e-12)


# The catch ------------------------------------------------------------------------------------------------------------


def normal_of(cell: tuple[float, ...], indices: tuple[int, int, int]) -> FloatArray:
    """Unit normal in the frame a along x, c* along z, from the textbook's basis."""
    normal = np.linalg.inv(build_textbook_basis(cell)).T @ np.array(indices, dtype=np.float64)
    return normal / np.linalg.norm(normal)


def row_of(cell: tuple[float, ...], indices: tuple[int, int, int]) -> FloatArray:
    row = build_textbook_basis(cell) @ np.array(indices, dtype=np.float64)
    return row / np.linalg.norm(row)


TEXTBOOK = build_crystal(CELLS["triclinic"], "1", frame="x1=a x3=c*")


def place_z(direction: FloatArray, off: float, around: float = 30.0) -> FloatArray:
    """A pose whose z is so many degrees from a direction."""
    across = np.cross(direction, [0.36, 0.48, 0.8])
    across = Rotation.from_rotvec(np.deg2rad(around) * direction).apply(across / np.linalg.norm(across))
    z = Rotation.from_rotvec(np.deg2rad(off) * across).apply(direction)
    x = np.cross(z, [0.8, 0.36, 0.48])
    x /= np.linalg.norm(x)
    return np.array([x, np.cross(z, x), z])


TARGETS: dict[str, FloatArray] = {
    "(1 0 0)": normal_of(CELLS["triclinic"], (1, 0, 0)),
    "(-1 0 1)": normal_of(CELLS["triclinic"], (-1, 0, 1)),
    "(1 -2 0)": normal_of(CELLS["triclinic"], (1, -2, 0)),
    "[0 0 1]": row_of(CELLS["triclinic"], (0, 0, 1)),
    "[1 1 0]": row_of(CELLS["triclinic"], (1, 1, 0)),
    "[-1 -1 -2]": row_of(CELLS["triclinic"], (-1, -1, -2)),
}


@pytest.mark.parametrize("name", TARGETS)
def test_z_lies_on_a_low_direction_within_the_dead_zone_and_is_called_by_it(name: str) -> None:
    pose = place_z(TARGETS[name], 0.6 * CATCH_DEAD)
    caught, on = catch(TEXTBOOK, NO_AXES, pose)
    assert on == Caught("z", name)
    check_rotation(caught)
    np.testing.assert_allclose(caught[2], TARGETS[name], atol=1e-12)
    # Shortest turn: x moves by no more than z does.
    assert angle_between(caught[0], pose[0]) <= 0.6 * CATCH_DEAD + 1e-9


@pytest.mark.parametrize("name", TARGETS)
def test_z_is_drawn_more_the_nearer_it_comes_and_not_at_all_beyond_two_degrees(name: str) -> None:
    left = []
    for off in (0.71, 1.0, 1.4, 1.8, 1.999):
        pose = place_z(TARGETS[name], off)
        drawn, on = catch(TEXTBOOK, NO_AXES, pose)
        assert on is None
        check_rotation(drawn)
        # Along the great circle toward the direction, and never past it.
        assert angle_between(drawn[2], pose[2]) + angle_between(drawn[2], TARGETS[name]) == pytest.approx(off, abs=1e-6)
        left.append(angle_between(drawn[2], TARGETS[name]))
    assert left == sorted(left)
    assert left[0] < 0.05
    # At the rim nothing jumps.
    assert left[-1] == pytest.approx(1.999, abs=0.002)
    beyond = place_z(TARGETS[name], CATCH_WITHIN + 0.01)
    kept, on = catch(TEXTBOOK, NO_AXES, beyond)
    assert on is None
    assert kept is beyond


def test_of_two_directions_nearby_the_nearer_draws() -> None:
    # In the triclinic cell used here (1 1 0) and [1 1 0] part by some degrees; z between them goes to the nearer.
    normal, row = normal_of(CELLS["triclinic"], (1, 1, 0)), row_of(CELLS["triclinic"], (1, 1, 0))
    apart = angle_between(normal, row)
    assert apart > 2 * CATCH_DEAD
    pose = place_z(row, 0.3)
    assert catch(TEXTBOOK, NO_AXES, pose)[1] == Caught("z", "[1 1 0]")


def test_indices_above_two_do_not_draw() -> None:
    # The nearest direction up to index 2 is more than two degrees from (2 3 1), by the textbook's basis.
    target = normal_of(CELLS["triclinic"], (2, 3, 1))
    span = [(h, k, m) for h in range(-2, 3) for k in range(-2, 3) for m in range(-2, 3) if (h, k, m) != (0, 0, 0)]
    near = [
        angle_between(target, make(CELLS["triclinic"], indices)) for make in (normal_of, row_of) for indices in span
    ]
    assert min(near) > CATCH_WITHIN
    assert catch(TEXTBOOK, NO_AXES, place_z(target, 0.1))[1] is None


@pytest.mark.parametrize("number", [0, 1, 2])
@pytest.mark.parametrize("sense", [1.0, -1.0])
def test_principal_axes_draw_and_are_called_by_the_way_z_points(number: int, sense: float) -> None:
    principal = principal_of(SKEW)
    # numpy's own eigenvectors, largest value first.
    axis = np.linalg.eigh(SKEW)[1].T[::-1][number]
    axis = axis if axis @ principal.axes[number] > 0 else -axis
    caught, on = catch(LIMITING, principal, place_z(sense * axis, 0.5))
    assert on == Caught("z", f"p{number + 1}" if sense > 0 else f"−p{number + 1}")
    np.testing.assert_allclose(caught[2], sense * axis, atol=1e-9)


def test_an_axis_of_equal_values_does_not_draw() -> None:
    # Uniaxial about x3: p1 is the axis, any direction across it is as good as another.
    principal = principal_of(np.diag([2.0, 2.0, 5.0]))
    assert catch(LIMITING, principal, place_z(Z, 0.4))[1] == Caught("z", "p1")
    assert catch(LIMITING, principal, place_z(X, 0.4))[1] is None
    assert catch(LIMITING, NO_AXES, place_z(Z, 0.4))[1] is None


@settings(max_examples=80, deadline=None)
@given(turns)
def test_the_catch_moves_no_axis_by_more_than_two_degrees(pose: FloatArray) -> None:
    principal = principal_of(SKEW)
    for about in (None, 0, 1, 2):
        caught, on = catch(MONOCLINIC, principal, pose, about)
        check_rotation(caught)
        turn = Rotation.from_matrix(caught.T @ pose).magnitude()
        assert np.rad2deg(turn) <= CATCH_WITHIN + 1e-6
        if about is not None:
            # A ring's own axis stays where it is.
            np.testing.assert_allclose(caught[about], pose[about], atol=1e-12)
            assert on is None or on.axis != "xyz"[about]


@settings(max_examples=40, deadline=None)
@given(turns)
def test_what_is_caught_stays_caught(pose: FloatArray) -> None:
    caught, on = catch(CUBIC, NO_AXES, pose)
    if on is None:
        return
    again, still = catch(CUBIC, NO_AXES, caught)
    assert still == on
    np.testing.assert_allclose(again, caught, atol=1e-9)


@pytest.mark.parametrize(("about", "axis"), [(0, 1), (0, 2), (1, 0), (1, 2), (2, 0), (2, 1)])
@pytest.mark.parametrize("sense", [1.0, -1.0])
def test_a_ring_draws_the_other_axes_about_its_own(about: int, axis: int, sense: float) -> None:
    # Cube edges: the ring's axis on x_about exactly, the others 0.5° away by a turn about it.
    pose = spin(np.eye(3), about, 0.5 * sense)
    caught, on = catch(CUBIC, NO_AXES, pose, about)
    assert on is not None
    assert on.axis != "xyz"[about]
    np.testing.assert_allclose(caught, np.eye(3), atol=1e-12)
    # Farther out it is drawn back part of the way, about that axis and toward the edge.
    far = spin(np.eye(3), about, 1.5 * sense)
    drawn, on = catch(CUBIC, NO_AXES, far, about)
    assert on is None
    left = angle_between(drawn[axis], np.eye(3)[axis])
    assert 0.0 < left < 1.5
    assert np.cross(np.eye(3)[axis], drawn[axis]) @ np.eye(3)[about] * sense > 0


def test_a_ring_leaves_alone_what_is_not_in_its_plane() -> None:
    # About [1 2 3]/√14 of a cube nothing of index up to 2 lies across except (1 1 -1), (2 -1 0) and the like: with x
    # 20° from the nearest of these, nothing draws.
    z = np.array([1.0, 2.0, 3.0]) / np.sqrt(14.0)
    start = np.array([1.0, 1.0, -1.0]) / np.sqrt(3.0)
    assert z @ start == pytest.approx(0.0)
    base = np.array([start, np.cross(z, start), z])
    inside = [
        vector / np.linalg.norm(vector)
        for vector in np.array(np.meshgrid(*[range(-2, 3)] * 3)).reshape(3, -1).T.astype(float)
        if np.any(vector) and abs(vector @ z) < 1e-9
    ]
    # Where the two other axes are farthest from all of them.
    trials = [spin(base, 2, degrees) for degrees in range(90)]
    far = max(trials, key=lambda pose: min(angle_between(pose[k], v) for k in (0, 1) for v in inside))
    assert min(angle_between(far[k], v) for k in (0, 1) for v in inside) > CATCH_WITHIN
    kept, on = catch(CUBIC, NO_AXES, far, 2)
    assert on is None
    np.testing.assert_allclose(kept, far, atol=1e-15)


# Putting an axis somewhere, and keeping poses -------------------------------------------------------------------------


@pytest.mark.parametrize("axis", ["x", "y", "z"])
@pytest.mark.parametrize("on", ["(-2 0 1)", "[1 1 -1]", "[0 0 1]"])
@given(pose=turns)
@settings(max_examples=20, deadline=None)
def test_an_axis_is_put_on_a_direction_and_the_next_one_stays_near(axis: str, on: str, pose: FloatArray) -> None:
    given_pose = put_axis(MONOCLINIC, pose, axis, on, None)
    placed = read_pose(given_pose, MONOCLINIC).matrix
    number = "xyz".index(axis)
    # The same direction from the textbook's basis, turned into the frame x3=c x2=b*.
    basis = build_textbook_basis(CELLS["monoclinic b"])
    indices = [float(part) for part in on[1:-1].split()]
    vector = basis @ indices if on[0] == "[" else np.linalg.inv(basis).T @ indices
    c, b_star = basis[:, 2], np.linalg.inv(basis)[1]
    rows = np.array([np.cross(b_star, c), b_star, c])
    goal = (rows / np.linalg.norm(rows, axis=1)[:, None]) @ (vector / np.linalg.norm(vector))
    np.testing.assert_allclose(placed[number], goal, atol=1e-12)
    # As near as it can be: the part of the old axis across the goal.
    near = "xyz".index(given_pose["toward"][0])
    assert near == (number + 1) % 3 or np.linalg.norm(np.cross(goal, pose[(number + 1) % 3])) <= 0.02
    across = pose[near] - goal * (goal @ pose[near])
    np.testing.assert_allclose(placed[near], across / np.linalg.norm(across), atol=1e-9)


def test_where_the_next_axis_lies_on_the_direction_the_one_after_stays_near() -> None:
    # z is put where x stands: x must leave, so y stays.
    given_pose = put_axis(CUBIC, np.eye(3), "z", "[1 0 0]", None)
    placed = read_pose(given_pose, CUBIC).matrix
    np.testing.assert_allclose(placed[2], X, atol=1e-15)
    np.testing.assert_allclose(placed[1], Y, atol=1e-15)


def test_a_second_direction_is_kept_by_its_name() -> None:
    assert put_axis(CUBIC, np.eye(3), "z", "(1 1 1)", ("x", "[1 -1 0]")) == {
        "exact": ["z", "(1 1 1)"],
        "toward": ["x", "[1 -1 0]"],
    }


@pytest.mark.parametrize(
    ("on", "toward", "field"),
    [("nonsense", None, "on"), ("[0 0 0]", None, "on"), ("[1 0 0]", ("x", "{100}"), "toward")],
)
def test_a_direction_that_cannot_be_read_is_refused_at_its_field(on: str, toward: Any, field: str) -> None:
    with pytest.raises(InputError) as caught:
        put_axis(CUBIC, np.eye(3), "z", on, toward)
    assert caught.value.field == field


def test_indices_without_a_cell_are_refused() -> None:
    with pytest.raises(InputError) as caught:
        put_axis(LIMITING, np.eye(3), "z", "[0 0 1]", None)
    assert caught.value.field == "on"


@pytest.mark.parametrize("crystal", [TRICLINIC, MONOCLINIC, CUBIC], ids=["triclinic", "monoclinic", "cubic"])
@settings(max_examples=40, deadline=None)
@given(seed=st.integers(0, 2**32 - 1))
def test_a_caught_z_is_kept_by_name_where_it_stands(crystal: Crystal, seed: int) -> None:
    random = np.random.default_rng(seed)
    indices = random.integers(-2, 3, size=3)
    if not np.any(indices):
        return
    goal = crystal.require_basis() @ indices
    pose = place_z(goal / np.linalg.norm(goal), float(random.uniform(0.0, 0.6)), float(random.uniform(0, 360)))
    matrix, caught = catch(crystal, NO_AXES, pose)
    assert caught is not None
    kept = keep_pose(as_pose(matrix).matrix, caught)
    assert names_of(kept) == {"z": caught.on}
    np.testing.assert_allclose(read_pose(kept, crystal).matrix, matrix, atol=1e-9)


def test_a_pose_that_was_not_caught_on_indices_is_kept_as_a_matrix() -> None:
    pose = turn_about(np.array([0.6, 0.8, 0.0]), 33.0)
    assert keep_pose(pose, None) == {"matrix": pose.tolist()}
    assert keep_pose(pose, Caught("z", "p2")) == {"matrix": pose.tolist()}
    assert keep_pose(pose, Caught("z", "−p2")) == {"matrix": pose.tolist()}


@pytest.mark.parametrize(
    ("kept", "names"),
    [
        ({"exact": ["y", "[1 0 0]"], "toward": ["z", "[0 0 1]"]}, {"y": "[1 0 0]"}),
        ({"exact": ["y", [1, 0, 0]], "toward": ["z", "[0 0 1]"]}, {}),
        ({"from": "(0 0 1)", "tilt": 4, "toward": "[1 1 0]"}, {"z": "(0 0 1)"}),
        ({"from": [0, 0, 1], "tilt": 4, "toward": "[1 1 0]"}, {}),
        ({"axis": "[0 0 1]", "angle": 30}, {}),
        ({"matrix": np.eye(3).tolist()}, {}),
    ],
)
def test_a_kept_pose_names_the_axes_that_it_puts_on_indices(kept: dict[str, Any], names: dict[str, str]) -> None:
    assert names_of(kept) == names


def test_rounding_is_taken_out_of_a_pose() -> None:
    noisy = turn_about(np.array([0.0, 0.6, 0.8]), 71.0) + 1e-9 * np.arange(9).reshape(3, 3)
    check_rotation(as_pose(noisy).matrix)
    np.testing.assert_allclose(as_pose(noisy).matrix, noisy, atol=1e-8)
