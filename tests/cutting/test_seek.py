"""Directions that answer: by substitution, against searches over the whole sphere, and cases made to degenerate."""

from __future__ import annotations

import numpy as np
import pytest

from app.cutting.seek import Condition, Sought, seek
from app.errors import InputError
from tests.cutting.reference import measure, search_common, search_extreme

RANDOM = np.random.default_rng(22)
EYE = np.eye(3)

# Worked number: invented data; the answer was computed apart from this project.
MONOCLINIC = np.array([[31.0, 0, 6.0], [0, 8.5, 0], [6.0, 0, -12.4]])


def draw(spread: float = 1.0) -> np.ndarray:
    matrix = RANDOM.normal(size=(3, 3)) * spread
    return np.asarray((matrix + matrix.T) / 2)


def draw_unit() -> np.ndarray:
    vector = RANDOM.normal(size=3)
    return np.asarray(vector / np.linalg.norm(vector))


def ask(*pairs: tuple[np.ndarray, object]) -> Sought:
    return seek([Condition(np.asarray(matrix, dtype=float), target) for matrix, target in pairs])  # type: ignore[arg-type]


def same_lines(found: np.ndarray, wanted: np.ndarray, tolerance: float = 1e-7) -> bool:
    if len(found) != len(wanted):
        return False
    if len(found) == 0:
        return True
    across = np.linalg.norm(np.cross(found[:, None], wanted), axis=-1)
    return bool(np.all(np.min(across, axis=1) < tolerance) and np.all(np.min(across, axis=0) < tolerance))


# One condition --------------------------------------------------------------------------------------------------------


def test_one_number() -> None:
    found = ask((MONOCLINIC, 0))
    assert len(found.curves) == 2
    assert found.points == pytest.approx(np.concatenate(found.curves))
    assert measure(MONOCLINIC, found.points) == pytest.approx(np.zeros(len(found.points)), abs=1e-12)
    assert found.fraction_below == pytest.approx(0.243750, abs=5.1e-7)
    assert found.ranges[0] == pytest.approx((-13.214218, 31.814218), abs=5.1e-7)
    assert "cone" in found.sentence
    # In (010) the zeros lie at ψ −40.529010 and +25.073011 from +x3 toward +x1: worked, and on the curves.
    for psi in np.deg2rad([-40.529010, 25.073011]):
        direction = np.array([np.sin(psi), 0, np.cos(psi)])
        assert found.locus.tracks[0].find_distances(direction[None])[0] < 1e-6


def test_one_extreme_is_a_line_with_its_opposite() -> None:
    for target, column in (("min", 0), ("max", 2)):
        matrix = draw()
        found = ask((matrix, target))
        axis = np.linalg.eigh(matrix)[1][:, column]
        assert found.points == pytest.approx(np.array([1, -1])[:, None] * found.locus.lines)
        assert abs(found.points[0] @ axis) == pytest.approx(1)
        assert found.values[0, 0] == pytest.approx(np.linalg.eigvalsh(matrix)[column])
        assert found.slopes[0, 0] == pytest.approx(0, abs=1e-12)
        assert found.fraction_below is None
        assert found.curves == ()


def test_no_direction() -> None:
    above = ask((MONOCLINIC, 40))
    assert above.locus.is_empty
    assert len(above.points) == 0
    assert "-13.2142" in above.sentence and "31.8142" in above.sentence
    assert "5 along every one" in ask((5 * EYE, 6)).sentence


def test_every_direction() -> None:
    found = ask((5 * EYE, 5))
    assert found.locus.everywhere
    assert found.sentence == "Every direction has the value 5."


# Two numbers ----------------------------------------------------------------------------------------------------------


def test_two_numbers_against_a_search_over_the_sphere() -> None:
    counts = set()
    for _ in range(25):
        first, second = draw(), draw()
        targets = [float(measure(matrix, draw_unit()[None])[0]) for matrix in (first, second)]
        found = ask((first, targets[0]), (second, targets[1]))
        assert same_lines(found.locus.lines, search_common(first - targets[0] * EYE, second - targets[1] * EYE))
        for matrix, target in zip((first, second), targets, strict=True):
            assert measure(matrix, found.points) == pytest.approx(np.full(len(found.points), target), abs=1e-12)
        assert len(found.points) == 2 * len(found.locus.lines)
        assert found.locus.is_empty == ("No direction has both values" in found.sentence)
        counts.add(len(found.locus.lines))
        other = ask((second, targets[1]), (first, targets[0]))
        assert same_lines(found.locus.lines, other.locus.lines)
    assert counts == {0, 2, 4}


def test_a_direction_made_to_answer_is_found() -> None:
    for _ in range(200):
        first, second, wanted = draw(10.0), draw(0.01), draw_unit()
        found = ask((first, wanted @ first @ wanted), (second, wanted @ second @ wanted))
        assert np.min(np.linalg.norm(np.cross(found.locus.lines, wanted), axis=1)) < 1e-6
        assert len(found.locus.lines) in (2, 4)


def test_nearly_flat_cones() -> None:
    # A value close to the middle one: the cone nearly parts into planes, with narrow bends where they nearly meet.
    for gap in (1e-3, -1e-5, 1e-7, -1e-8):
        for _ in range(10):
            first, second = draw(), draw()
            values, axes = np.linalg.eigh(first)
            target = values[1] + gap
            # A wanted direction on a bend itself, where the cone comes nearest to the middle axis.
            others = values - target
            odd = 2 if gap > 0 else 0
            tilt = np.arctan(np.sqrt(-others[1] / others[odd]))
            wanted = np.cos(tilt) * axes[:, 1] + np.sin(tilt) * axes[:, odd]
            assert wanted @ first @ wanted == pytest.approx(target, abs=1e-14)
            found = ask((first, target), (second, wanted @ second @ wanted))
            assert np.min(np.linalg.norm(np.cross(found.locus.lines, wanted), axis=1)) < 1e-6
            assert np.max(np.abs(found.values[:, 0] - target)) < 1e-12


def test_cones_that_touch() -> None:
    # The second tensor is made so that its gradient along a direction is that of the first.
    for _ in range(100):
        touched = draw_unit()
        first, second = draw(), draw()
        across = EYE - np.outer(touched, touched)
        lacking = across @ (RANDOM.normal() * first - second) @ touched
        second = second + np.outer(lacking, touched) + np.outer(touched, lacking)
        found = ask((first, touched @ first @ touched), (second, touched @ second @ touched))
        assert len(found.locus.lines) in (1, 3)
        assert np.min(np.linalg.norm(np.cross(found.locus.lines, touched), axis=1)) < 1e-7
        assert np.max(np.abs(found.values - [touched @ first @ touched, touched @ second @ touched])) < 1e-12


def test_cones_that_touch_to_higher_order() -> None:
    # B − s = β (A − t) + p ⊗ q with p the tangent plane at a line: q through the line meets the cone there three
    # times, q = p four times.
    for _ in range(40):
        touched, first = draw_unit(), draw()
        form = first - (touched @ first @ touched) * EYE
        plane = form @ touched
        for factor, order in ((np.cross(touched, draw_unit()), 3), (plane, 4)):
            product = np.outer(plane, factor)
            second = 0.7 * form + product + product.T + 2.5 * EYE
            found = ask((first, touched @ first @ touched), (second, 2.5))
            assert len(found.locus.lines) == (2 if order == 3 else 1)
            # What is within 1e-12 of the value is within 1e-3 of a direction that is touched to the fourth order.
            assert np.min(np.linalg.norm(np.cross(found.locus.lines, touched), axis=1)) < (1e-5 if order == 3 else 5e-3)
            assert np.max(np.abs(found.values[:, 1] - 2.5)) < 1e-11


def test_the_same_cone_twice() -> None:
    for _ in range(20):
        first, wanted = draw(), draw_unit()
        second = -3.0 * first + 7.0 * EYE
        found = ask((first, wanted @ first @ wanted), (second, wanted @ second @ wanted))
        assert len(found.curves) == 2
        assert len(found.locus.lines) == 0
        assert measure(second, found.points) == pytest.approx(
            np.full(len(found.points), wanted @ second @ wanted), abs=1e-12
        )


def test_planes_that_share_one() -> None:
    # By hand: x (x + 2y) = 0 and x (y − 3z) = 0 have the plane x = 0 and the line x + 2y = y − 3z = 0 in common.
    first = np.array([[1.0, 1, 0], [1, 0, 0], [0, 0, 0]])
    second = np.array([[0, 0.5, -1.5], [0.5, 0, 0], [-1.5, 0, 0]])
    found = ask((first, 0), (second, 0))
    (track,) = found.locus.tracks
    assert np.abs(track.normal) == pytest.approx([1, 0, 0])
    line = np.array([-6.0, 3, 1]) / np.sqrt(46)
    assert same_lines(found.locus.lines, line[None])
    assert len(found.points) == len(found.curves[0]) + 2
    assert "one plane and along one line" in found.sentence


def test_planes_and_lines_against_a_cone() -> None:
    # By hand: x² + y² = z² and x² = z² leave y = 0.
    found = ask((np.diag([1.0, 1.0, -1.0]), 0), (np.diag([1.0, 0, -1.0]), 0))
    half = np.sqrt(0.5)
    assert same_lines(found.locus.lines, np.array([[half, 0, half], [half, 0, -half]]))
    # The axis of the largest value, met and missed.
    second = np.diag([4.0, 5.0, 6.0])
    assert same_lines(ask((np.diag([1.0, 2, 3]), 3), (second, 6)).locus.lines, np.array([[0, 0, 1.0]]))
    assert ask((np.diag([1.0, 2, 3]), 3), (second, 5)).locus.is_empty
    # Everywhere is no condition.
    for pair in (((5 * EYE, 5), (second, 6)), ((second, 6), (5 * EYE, 5))):
        assert same_lines(ask(*pair).locus.lines, np.array([[0, 0, 1.0]]))
    assert ask((5 * EYE, 5), (EYE, 1)).locus.everywhere
    assert "second condition cannot be met" in ask((5 * EYE, 5), (EYE, 2)).sentence


# A number and an extreme ----------------------------------------------------------------------------------------------


def test_the_extreme_among_the_directions_of_a_value_against_an_optimiser() -> None:
    for trial in range(40):
        first, second = draw(), draw()
        target = float(measure(first, draw_unit()[None])[0])
        sign = 1 if trial % 2 else -1
        found = ask((first, target), (second, "max" if sign == 1 else "min"))
        assert len(found.locus.lines) == 1
        assert found.values[0, 0] == pytest.approx(target, abs=1e-13)
        wanted = search_extreme(first - target * EYE, second, sign)
        assert found.values[0, 1] == pytest.approx(wanted, abs=1e-7)
        other = ask((second, "max" if sign == 1 else "min"), (first, target))
        assert same_lines(other.locus.lines, found.locus.lines)


def test_the_extreme_is_stationary_along_the_cone() -> None:
    # A n lies in the plane of n and the cone's normal B n: Lagrange's condition.
    for _ in range(50):
        first, second = draw(), draw()
        target = float(measure(first, draw_unit()[None])[0])
        for line in ask((first, target), (second, "max")).locus.lines:
            triple = np.stack([line, (first - target * EYE) @ line, second @ line])
            assert abs(np.linalg.det(triple)) < 1e-12


def test_the_extreme_where_symmetry_makes_several() -> None:
    # By hand: on the cone 45° about c, x² = ½ cos² φ; x² − y² is largest at ±x, four-fold xy at φ = 45° and 225°.
    cone = np.diag([1.0, 1.0, -1.0])
    half = np.sqrt(0.5)
    found = ask((cone, 0), (np.diag([1.0, -1.0, 0]), "max"))
    assert same_lines(found.locus.lines, np.array([[half, 0, half], [half, 0, -half]]))
    assert len(found.points) == 4
    # Constant along the cone: the whole of it; along no cone in particular: all directions of the value.
    for second in (np.diag([2.0, 2.0, 9.0]), 4 * EYE):
        whole = ask((cone, 0), (second, "min"))
        assert len(whole.curves) == 2
        assert whole.locus.lines.shape == (0, 3)
    # Of two planes the one on which it is larger everywhere: yz = 0 parts into y = 0 and z = 0; x² + y² is 1 on z = 0.
    plane = ask((np.array([[0, 0, 0], [0, 0, 1.0], [0, 1.0, 0]]), 0), (np.diag([1.0, 1.0, 0]), "max"))
    (track,) = plane.locus.tracks
    assert np.abs(track.normal) == pytest.approx([0, 0, 1])
    # No condition at all leaves the extreme itself; an axis is its own extreme.
    assert same_lines(ask((5 * EYE, 5), (np.diag([1.0, 2, 3]), "max")).locus.lines, np.array([[0, 0, 1.0]]))
    assert same_lines(ask((np.diag([1.0, 2, 3]), 1), (second, "max")).locus.lines, np.array([[1.0, 0, 0]]))
    assert "first condition cannot be met" in ask((np.diag([1.0, 2, 3]), 9), (second, "max")).sentence


# Two extremes ---------------------------------------------------------------------------------------------------------


def test_two_extremes_have_a_direction_in_common_or_none() -> None:
    axes = np.linalg.qr(RANDOM.normal(size=(3, 3)))[0]
    first, second = axes @ np.diag([1.0, 2, 3]) @ axes.T, axes @ np.diag([9.0, 8, 4]) @ axes.T
    assert same_lines(ask((first, "max"), (second, "min")).locus.lines, axes[:, 2][None])
    none = ask((first, "max"), (second, "max"))
    assert none.locus.is_empty
    assert "90° apart" in none.sentence
    # A plane and an axis in it, two planes, the same plane.
    flat = axes @ np.diag([1.0, 5, 5]) @ axes.T
    assert same_lines(ask((flat, "max"), (first, "max")).locus.lines, axes[:, 2][None])
    other = axes @ np.diag([5.0, 5, 1]) @ axes.T
    assert same_lines(ask((flat, "max"), (other, "max")).locus.lines, axes[:, 1][None])
    assert len(ask((flat, "max"), (-flat, "min")).locus.tracks) == 1
    tilted = ask((flat, "max"), (first, "min"))
    assert tilted.locus.is_empty and "90° apart" in tilted.sentence
    assert same_lines(ask((3 * EYE, "max"), (first, "min")).locus.lines, axes[:, 0][None])


# Scale and refusals ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("one", "two"), [(1e-30, 1e30), (1e30, 1e30), (1e-300, 1e-30), (1e290, 1e-290)])
def test_scale_does_not_matter(one: float, two: float) -> None:
    first, second, wanted = draw(), draw(), draw_unit()
    pair = (first, wanted @ first @ wanted), (second, wanted @ second @ wanted)
    scaled = ask((first * one, pair[0][1] * one), (second * two, pair[1][1] * two))
    assert same_lines(scaled.locus.lines, ask(*pair).locus.lines)
    assert scaled.values[:, 1] == pytest.approx(np.full(len(scaled.values), pair[1][1] * two))
    extreme = ask((first * one, pair[0][1] * one), (second * two, "max"))
    assert same_lines(extreme.locus.lines, ask(pair[0], (second, "max")).locus.lines)


def test_slopes_are_those_of_a_small_tilt() -> None:
    first, second, wanted = draw(), draw(), draw_unit()
    found = ask((first, wanted @ first @ wanted), (second, wanted @ second @ wanted))
    for line, slopes in zip(found.locus.lines, found.slopes, strict=True):
        for matrix, slope in zip((first, second), slopes, strict=True):
            toward = (EYE - np.outer(line, line)) @ matrix @ line
            toward /= np.linalg.norm(toward)
            tilt = np.deg2rad(0.01)
            ahead, behind = (np.cos(tilt) * line + side * np.sin(tilt) * toward for side in (1, -1))
            assert slope == pytest.approx((ahead @ matrix @ ahead - behind @ matrix @ behind) / 0.02, rel=1e-6)


def test_refusals() -> None:
    for conditions in ([], [Condition(EYE, 1.0)] * 3):
        with pytest.raises(InputError) as caught:
            seek(conditions)
        assert caught.value.field == "conditions"
    for target in (np.nan, np.inf, "largest"):
        with pytest.raises(InputError) as caught:
            ask((EYE, 1), (EYE, target))
        assert caught.value.field == "conditions[1].target"
