"""A planted frame is found again from noisy readings; the frames come from bases laid out by hand in many digits."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import chi2 as chi2_distribution

from app.consequences.frame_candidate import list_relabellings, place_tensor
from app.consequences.frame_question import FrameQuestion, OwnReading, ask_frame
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import read_direction
from app.errors import InputError
from app.tensor.kind import Kind
from tests.series.reference import LETTER_RULES, build_basis, to_numpy

# W1: invented data; the answers were computed apart from this project.
CELL = [12.214, 3.0371, 5.7981, 90, 103.83, 90]
MONOCLINIC = build_crystal(CELL, "2/m")
IN_DEFAULT = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
IN_A_CSTAR = np.array([[12.495467, 0, 1.011876], [0, 24.6, 0], [1.011876, 0, 16.604533]])
RELABELLED = np.array([[15.9, 1.85, 0], [1.85, 13.2, 0], [0, 0, 24.6]])

TRICLINIC_CELL = [5.1, 6.2, 7.3, 81, 97, 104]
TRICLINIC = build_crystal(TRICLINIC_CELL, "-1")
# Invented.
SIX = np.array([[9.1, 1.2, -0.7], [1.2, 6.4, 0.9], [-0.7, 0.9, 7.7]])

FIVE = ("(-201)", "(111)", "[101]", "(2 0 1)", "(0 1 3)")


def read(
    crystal: Crystal,
    matrix: np.ndarray,
    directions: tuple[str, ...],
    sigma: float,
    seed: int,
    kind: str | None = "along",
    truth: str = "along",
) -> list[OwnReading]:
    random = np.random.default_rng(seed)
    readings = []
    for text in directions:
        n = crystal.resolve(read_direction(text))
        exact = n @ matrix @ n if truth == "along" else 1 / (n @ np.linalg.inv(matrix) @ n)
        readings.append(OwnReading(n, exact + sigma * random.normal(), sigma, kind))  # type: ignore[arg-type]
    return readings


def best_rules(found: FrameQuestion) -> set[str]:
    return {naming.rule.text for naming in found.answers[0].namings}


def test_a_planted_frame_is_found_again() -> None:
    # Published in x1 = a, x3 = c*; five readings of one's own with 0.5 % noise, in x3 = c, x2 = b*.
    readings = read(MONOCLINIC, IN_DEFAULT, FIVE, 0.07, seed=1)
    found = ask_frame(MONOCLINIC, IN_A_CSTAR, readings)
    assert "x1=a x3=c*" in best_rules(found)
    assert "x3=c x2=b*" not in best_rules(found)
    assert found.answers[0].matrix == pytest.approx(IN_DEFAULT, abs=5e-6)
    assert found.answers[0].survives and len(found.survivors) == 1 and found.next_cut is None
    assert "One frame is left" in found.sentence
    # Equal answers are one: x2 along b does what x2 along b* does, of the same two others.
    assert {"x1=a x3=c*", "x2=b x3=c*", "x1=a x2=b*"} <= best_rules(found)


@pytest.mark.parametrize("rule", list(LETTER_RULES)[::5])
def test_any_planted_rule_of_a_triclinic_crystal(rule: str) -> None:
    own, other = (to_numpy(build_basis(TRICLINIC_CELL, LETTER_RULES[name])) for name in ("x3=c x2=b*", rule))
    turn = other @ np.linalg.inv(own)
    published = turn @ SIX @ turn.T
    readings = read(TRICLINIC, SIX, ("[100]", "[010]", "[110]", "(1 1 1)", "(1 -1 2)"), 0.02, seed=2)
    found = ask_frame(TRICLINIC, published, readings)
    assert rule in best_rules(found)
    assert found.answers[0].matrix == pytest.approx(SIX, rel=1e-9)
    assert found.answers[0].weight > 0.99


def test_plates_or_long_bars() -> None:
    for truth in ("along", "rod"):
        readings = read(TRICLINIC, SIX, ("[100]", "[010]", "[110]", "(1 1 1)", "(1 -1 2)"), 0.01, 3, None, truth)
        found = ask_frame(TRICLINIC, SIX, readings)
        assert found.answers[0].read_as == truth
        assert "x3=c x2=b*" in best_rules(found)
        assert ("long bars" in found.answers[0].sentence) == (truth == "rod")
        assert found.candidates == 2 * ask_frame(TRICLINIC, SIX, read(TRICLINIC, SIX, FIVE, 0.01, 3)).candidates
    known = read(TRICLINIC, SIX, ("[100]", "[010]", "[110]", "(1 1 1)", "(1 -1 2)"), 0.01, 3, "rod", "rod")
    assert ask_frame(TRICLINIC, SIX, known).answers[0].read_as is None
    assert ask_frame(TRICLINIC, SIX, known).answers[0].matrix == pytest.approx(SIX, rel=1e-12)


def test_a_relabelled_cell() -> None:
    # W1 with (a' b' c') = (c a b), in x3 = c', x2 = b'*.
    printed = [5.7981, 12.214, 3.0371, 90, 90, 103.83]
    readings = read(MONOCLINIC, IN_DEFAULT, FIVE, 0.05, seed=4)
    found = ask_frame(MONOCLINIC, RELABELLED, readings, published_cell=printed)
    assert found.answers[0].matrix == pytest.approx(IN_DEFAULT, abs=1e-9)
    meant = [naming for naming in found.answers[0].namings if naming.rule.text == "x3=c x2=b*"]
    # (a' b' c') = (c a b), or the same turned by the half-turn about b, which the class has.
    bases = [naming.basis.tolist() for naming in meant]
    assert [[0, 1, 0], [0, 0, 1], [1, 0, 0]] in bases
    assert "[001] [100] [010]" in next(naming.sentence for naming in meant if naming.basis[2][0] == 1)
    # The same without the printed cell, where the edges may have been called anything.
    blind = ask_frame(MONOCLINIC, RELABELLED, readings, any_edges=True)
    assert blind.answers[0].matrix == pytest.approx(IN_DEFAULT, abs=1e-9)
    # By the crystal's own cell alone x3 is never along b in a frame of x2 = b*, but x3 = b is among the rules.
    own = ask_frame(MONOCLINIC, RELABELLED, readings)
    assert own.candidates < blind.candidates


def test_relabellings() -> None:
    # By hand: the lattice symmetries of a monoclinic cell without special lengths are 1 and the half-turn.
    plain = build_crystal([5.1, 6.2, 7.3, 90, 103.83, 90], "2/m")
    bases = list_relabellings(plain, None, any_edges=False)
    assert bases.tolist() == [np.eye(3).tolist(), np.diag([-1.0, 1.0, -1.0]).tolist()]
    # W1's cell has one more way within 2 %: a + c is nearly as long as a, for 2 a cos β is nearly −c.
    ways = [basis.tolist() for basis in list_relabellings(MONOCLINIC, None, any_edges=False)]
    assert len(ways) == 4 and [[1, 0, 0], [0, -1, 0], [1, 0, -1]] in ways
    # Of a triclinic one the identity alone; with free names 24 signed permutations of positive determinant.
    assert len(list_relabellings(TRICLINIC, None, any_edges=False)) == 1
    named = list_relabellings(TRICLINIC, None, any_edges=True)
    assert len(named) == 24 and np.array_equal(named[0], np.eye(3))
    assert np.linalg.det(named) == pytest.approx(1.0)


def test_symmetry_rules_frames_out() -> None:
    # In class 2/m x2 must lie along b where 13 is not zero and 12 and 23 are.
    for placement in place_tensor(MONOCLINIC, IN_DEFAULT):
        assert placement.forbidden < 1e-9
        for naming in placement.namings:
            rule = naming.rule
            third = 3 - rule.row_axis - rule.normal_axis
            along_b = {rule.row_axis: rule.row.text == "b", rule.normal_axis: rule.normal.text == "b*"}
            assert along_b.get(1, third == 1 and rule.row.text != "b" and rule.normal.text != "b*")
    # A tensor that breaks the class a little in every frame is not lost.
    broken = IN_DEFAULT + 0.05 * np.array([[0, 1, 0], [1, 0, 0], [0, 0, 0]])
    assert len(place_tensor(MONOCLINIC, broken)) > 0
    # In the cubic system every frame says the same.
    cubic = build_crystal([5, 5, 5, 90, 90, 90], "m-3m")
    assert len(place_tensor(cubic, 3 * np.eye(3))) == 1
    assert len(place_tensor(MONOCLINIC, np.zeros((3, 3)))) == 1


def test_weights_follow_from_chi2() -> None:
    readings = read(MONOCLINIC, IN_DEFAULT, FIVE[:3], 1.0, seed=5)
    found = ask_frame(MONOCLINIC, IN_A_CSTAR, readings)
    residuals = np.array([[reading.value for reading in readings]]) - [answer.predicted for answer in found.answers]
    chi2 = np.sum(residuals**2, axis=1)
    assert [answer.chi2 for answer in found.answers] == pytest.approx(chi2, rel=1e-12)
    weights = np.exp(-chi2 / 2) / np.sum(np.exp(-chi2 / 2))
    assert [answer.weight for answer in found.answers] == pytest.approx(weights, rel=1e-9)
    assert [answer.p_value for answer in found.answers] == pytest.approx(chi2_distribution.sf(chi2, 3), rel=1e-9)
    for answer in found.answers:
        directions = np.array([reading.direction for reading in readings])
        assert answer.predicted == pytest.approx(np.einsum("mi,ij,mj->m", directions, answer.matrix, directions))
    # With a covariance: rᵀV⁻¹r.
    v = np.array([[1.0, 0.6, 0.2], [0.6, 1.5, 0.1], [0.2, 0.1, 0.8]])
    joint = ask_frame(MONOCLINIC, IN_A_CSTAR, readings, covariance=v)
    residual = np.array([reading.value for reading in readings]) - joint.answers[0].predicted
    assert joint.answers[0].chi2 == pytest.approx(residual @ np.linalg.inv(v) @ residual, rel=1e-9)


def test_weights_are_calibrated() -> None:
    # Seeded simulation: a frame drawn at random among the different answers is the truth as often as its weight says.
    placements = place_tensor(MONOCLINIC, IN_A_CSTAR)
    random = np.random.default_rng(6)
    n = MONOCLINIC.resolve(read_direction("(-201)"))
    m = MONOCLINIC.resolve(read_direction("(1 0 1)"))
    claimed, right = 0.0, 0
    trials = 150
    for _ in range(trials):
        truth = placements[random.integers(len(placements))].matrix
        values = [v @ truth @ v + 0.6 * random.normal() for v in (n, m)]
        readings = [OwnReading(v, value, 0.6, "along") for v, value in zip((n, m), values, strict=True)]
        best = ask_frame(MONOCLINIC, IN_A_CSTAR, readings, max_index=1).answers[0]
        claimed += best.weight
        right += bool(np.allclose(best.matrix, truth))
    assert 0.3 * trials < claimed < 0.97 * trials
    assert right == pytest.approx(claimed, abs=3 * np.sqrt(trials) / 2)


def test_the_next_cut_settles_it() -> None:
    # Along b alone nothing is told; the cut that is proposed leaves one answer.
    readings = read(MONOCLINIC, IN_DEFAULT, ("[010]",), 0.1, seed=7)
    found = ask_frame(MONOCLINIC, IN_A_CSTAR, readings)
    assert len(found.survivors) == len(found.answers) > 1
    assert [answer.weight for answer in found.answers] == pytest.approx([1 / len(found.answers)] * len(found.answers))
    cut = found.next_cut
    assert cut is not None and cut.direction in found.sentence
    assert MONOCLINIC.resolve(read_direction(cut.direction)) == pytest.approx(cut.vector)
    for answer, value in zip(found.survivors, cut.predicted, strict=True):
        assert value == pytest.approx(cut.vector @ answer.matrix @ cut.vector, rel=1e-12)
    # By brute force: no other row or normal up to 3 leaves much less overlap.
    weights = np.array([answer.weight for answer in found.survivors])
    grid = [
        MONOCLINIC.resolve(read_direction(f"{left}{h} {k} {l}{right}"))
        for left, right in ("[]", "()")
        for h in range(-3, 4)
        for k in range(-3, 4)
        for l in range(-3, 4)  # noqa: E741
        if (h, k, l) != (0, 0, 0)
    ]

    def overlap(v: np.ndarray) -> float:
        values = np.array([v @ answer.matrix @ v for answer in found.survivors])
        total = apart = 0.0
        for j in range(len(values)):
            for k in range(j):
                share = weights[j] * weights[k]
                total += share
                apart += share * np.exp(-(((values[j] - values[k]) / 0.1) ** 2) / 8)
        return apart / total

    assert cut.overlap == pytest.approx(overlap(cut.vector), rel=1e-9)
    assert cut.overlap <= min(overlap(v) for v in grid) + 1.1e-3
    more = readings + read(MONOCLINIC, IN_DEFAULT, (cut.direction,), 0.1, seed=8)
    settled = ask_frame(MONOCLINIC, IN_A_CSTAR, more)
    assert len(settled.survivors) < len(found.survivors)
    assert settled.answers[0].matrix == pytest.approx(IN_DEFAULT, abs=5e-6)


def test_nothing_fits() -> None:
    readings = read(MONOCLINIC, 3.0 * IN_DEFAULT, FIVE, 0.1, seed=9)
    found = ask_frame(MONOCLINIC, IN_A_CSTAR, readings)
    assert found.survivors == () and found.next_cut is None
    assert "No frame explains" in found.sentence


def test_no_cut_can_tell() -> None:
    # Of an isotropic tensor plates and bars read alike.
    readings = read(MONOCLINIC, 3.0 * np.eye(3), ("(111)",), 0.1, seed=10, kind=None)
    found = ask_frame(MONOCLINIC, 3.0 * np.eye(3), readings)
    assert len(found.survivors) == 2 and found.next_cut is None
    assert "no cut" in found.sentence


def test_huge_and_tiny_values() -> None:
    for factor in (1e-200, 1e150):
        readings = [
            OwnReading(reading.direction, factor * reading.value, factor * reading.sigma, "along")
            for reading in read(MONOCLINIC, IN_DEFAULT, FIVE, 0.07, seed=1)
        ]
        found = ask_frame(MONOCLINIC, factor * IN_A_CSTAR, readings)
        assert "x1=a x3=c*" in best_rules(found)


def test_refusals() -> None:
    good = read(MONOCLINIC, IN_DEFAULT, FIVE, 0.1, seed=1)
    n = good[0].direction

    def field(crystal: Crystal = MONOCLINIC, readings: object = good, **options: object) -> str | None:
        with pytest.raises(InputError) as caught:
            ask_frame(crystal, options.pop("published", IN_DEFAULT), readings, **options)  # type: ignore[arg-type]
        return caught.value.field

    assert field(readings=[]) == "readings"
    assert field(readings=[*good, OwnReading(n, np.nan, 0.1)]) == "readings[5].value"
    assert field(readings=[*good, OwnReading(n, 1.0, 0.0)]) == "readings[5].sigma"
    assert field(readings=[*good, OwnReading(np.zeros(3), 1.0, 0.1)]) == "readings[5].direction"
    assert field(covariance=np.eye(4)) == "covariance"
    assert field(covariance=-np.eye(5)) == "covariance"
    assert field(covariance=np.triu(np.ones((5, 5)))) == "covariance"
    assert field(published=[[1, 2], [3, 4]]) == "matrix"
    assert field(published_cell=[5, 5, 5, 90, 90, 90]) == "published_cell"
    assert field(published_cell=[5, 5, 5, 90, 90, 190]) == "published_cell[5]"
    assert field(crystal=build_crystal(None, "∞m")) == "crystal"
    assert field(max_index=9) == "max_index"
    assert field(sigma=-1.0) == "sigma"
    # A long bar has no reading where the tensor has no inverse.
    flat = [OwnReading(n, 1.0, 0.1, "rod")]
    assert field(published=np.diag([1.0, 0.0, 1.0]), readings=flat) == "readings"
    assert ask_frame(MONOCLINIC, IN_DEFAULT, good, kind=Kind("polar", "general")).answers
