"""Frame rules: all 36 with letters, the general one, and the published conventions."""

from __future__ import annotations

import gemmi
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.cell import build_cell
from app.crystal.crystal import build_crystal
from app.crystal.frame import DEFAULT_RULE, FrameRule, compute_basis, list_letter_rules, parse_frame_rule
from app.errors import InputError
from tests.crystal.reference import CELLS, build_textbook_basis

LETTERS = "abc"
RULES = [
    f"x{i + 1}={direct} x{j + 1}={reciprocal}*"
    for i in range(3)
    for j in range(3)
    if i != j
    for direct in LETTERS
    for reciprocal in LETTERS
    if direct != reciprocal
]


def check_basis(basis: np.ndarray, metric: np.ndarray) -> None:
    """Right-handed, and of the given metric: then the axes that it refers to are orthonormal."""
    assert basis.T @ basis == pytest.approx(metric, rel=1e-12, abs=1e-12 * np.max(metric))
    assert np.linalg.det(basis) > 0


def test_there_are_36_rules() -> None:
    assert len(RULES) == 36
    assert {rule.text for rule in list_letter_rules()} == set(RULES)


@pytest.mark.parametrize("rule", RULES)
def test_letter_rules_put_the_axes_where_they_say(rule: str) -> None:
    # The metric comes from the textbook basis, the axes are looked for in M and its inverse transposed.
    row_axis, row, normal_axis, normal = int(rule[1]) - 1, rule[3], int(rule[6]) - 1, rule[8]
    for family, cell in CELLS.items():
        textbook = build_textbook_basis(cell)
        metric = textbook.T @ textbook
        basis = compute_basis(build_cell(cell).metric, parse_frame_rule(rule))
        check_basis(basis, metric)
        edge = basis[:, LETTERS.index(row)]
        assert edge / np.linalg.norm(edge) == pytest.approx(np.eye(3)[row_axis], abs=1e-13), family
        reciprocal = np.linalg.inv(basis).T[:, LETTERS.index(normal)]
        assert reciprocal / np.linalg.norm(reciprocal) == pytest.approx(np.eye(3)[normal_axis], abs=1e-13), family
        # The order of the two parts is free.
        swapped = " ".join(reversed(rule.split()))
        assert parse_frame_rule(swapped) == parse_frame_rule(rule)


@pytest.mark.parametrize("family", CELLS)
def test_the_rule_of_structural_biology_is_gemmis(family: str) -> None:
    # The usual rule of structural biology, `x1=a x3=c*`; gemmi's orthogonalisation matrix is the outside.
    crystal = build_crystal(CELLS[family], "1", frame="x1=a x3=c*")
    cell = gemmi.UnitCell(*CELLS[family])
    assert pytest.approx(np.array(cell.orth.mat.tolist()), abs=1e-12) == crystal.M
    assert pytest.approx(build_textbook_basis(CELLS[family]), abs=1e-12) == crystal.M
    assert pytest.approx(np.array(cell.frac.mat.tolist()), abs=1e-12) == crystal.reciprocal.T
    assert crystal.volume == pytest.approx(cell.volume, rel=1e-12)


@pytest.mark.parametrize(
    ("family", "group", "rule"),
    [
        # IRE 1949 / IEEE 176-1987 (from memory), rewritten as two axes each.
        ("triclinic", "-1", "x3=c x2=b*"),
        ("monoclinic b", "2/m", "x2=b x1=a*"),
        ("monoclinic b", "2/m", "x3=c x1=a*"),
        ("orthorhombic", "mmm", "x1=a x2=b*"),
        ("orthorhombic", "mmm", "x3=c x1=a*"),
        ("tetragonal", "4/mmm", "x1=a x3=c*"),
        ("hexagonal", "-3m", "x1=a x3=c*"),
        ("hexagonal", "6/mmm", "x1=a x3=c*"),
        ("cubic", "m-3m", "x1=a x2=b*"),
    ],
)
def test_the_default_is_the_standards_rule(family: str, group: str, rule: str) -> None:
    default = build_crystal(CELLS[family], group)
    assert pytest.approx(build_crystal(CELLS[family], group, frame=rule).M, abs=1e-12) == default.M
    assert parse_frame_rule(None) == parse_frame_rule(DEFAULT_RULE)


@pytest.mark.parametrize(
    ("family", "rule"),
    [
        ("cubic", "x3=[1 1 1] x1=(1 -1 0)"),
        ("rhombohedral", "x3=[1 1 1] x1=(1 -1 0)"),
        ("hexagonal", "x1=[1 0 0] x3=(0 0 1)"),
        ("hexagonal", "x1=[2 -1 -1 0] x3=(0 0 0 1)"),
        ("hexagonal", "x2=(1 0 -1 0) x3=[0001]"),
        ("monoclinic b", "x2=[0 1 0] x3=(-2 0 1)"),
        ("triclinic", "x2=[1 2 -1] x1=(3 -1 1)"),
        ("triclinic", "x1=(1000000 -1 0),x3=[1 1000000 7]"),
        ("triclinic", "x3=[0.5 0.25 -1] x2=(1 2 1)"),
        ("triclinic", "x1 = [1 0 -1] ; x2 = (1 3 1)"),
    ],
)
def test_general_rules(family: str, rule: str) -> None:
    parsed = parse_frame_rule(rule)
    crystal = build_crystal(CELLS[family], "1", frame=rule)
    assert crystal.M is not None
    textbook = build_textbook_basis(CELLS[family])
    check_basis(crystal.M, textbook.T @ textbook)
    row = crystal.M @ np.array(parsed.row.values)
    normal = np.linalg.inv(crystal.M).T @ np.array(parsed.normal.values)
    assert row / np.linalg.norm(row) == pytest.approx(np.eye(3)[parsed.row_axis], abs=1e-12)
    assert normal / np.linalg.norm(normal) == pytest.approx(np.eye(3)[parsed.normal_axis], abs=1e-12)
    # The one spelling reads back as the same rule.
    again = build_crystal(CELLS[family], "1", frame=parsed.text)
    assert pytest.approx(crystal.M, abs=1e-14) == again.M


def test_the_sentence_says_where_the_axes_lie() -> None:
    # The design's sentence for the default rule, and one with indices.
    assert parse_frame_rule("x3=c x2=b*").sentence == "x3 along c, x2 along b*, x1 = x2 × x3"
    sentence = parse_frame_rule("x1=(1 -1 0) x3=[1 1 1]").sentence
    assert sentence == "x3 along [111], x1 along n(1−10), x2 = x3 × x1"


@pytest.mark.parametrize(
    "rule",
    [
        "",
        " ",
        "x3=c",
        "x3=c x2=b",
        "x3=c* x2=b*",
        "x3=c x3=b*",
        "x3=c x2=c*",
        "x3=[1 1 1] x1=(1 0 0)",
        "x3=[1 1 1] x1=(1 -1 0.001)",
        "x3=[1 0 0 1] x1=(0 1 0)",
        "x3=[0 0 0] x1=(1 0 0)",
        "x4=c x2=b*",
        "x3=d x2=b*",
        "x3=c x2=b* x1=a",
        "x3=c and x2=b*",
        "x3=c x2=b**",
        "c b*",
        "x3=[1 1 1 x1=(1 -1 0)",
        "x3=c x2=b*" + " " * 500 + "x",
        "x3=[0 0 1] x2=[0 1 0]",
    ],
)
def test_what_is_no_rule_is_refused(rule: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_frame_rule(rule)
    assert (caught.value.field or "").startswith("frame")
    assert caught.value.hint


def test_four_indices_in_a_rule_need_hexagonal_axes() -> None:
    with pytest.raises(InputError) as caught:
        build_crystal(CELLS["orthorhombic"], "mmm", frame="x1=[2 -1 -1 0] x3=(0001)")
    assert caught.value.field == "frame"


index = st.integers(-6, 6)
edge = st.floats(2.0, 40.0)
angle = st.floats(50.0, 110.0)


@settings(max_examples=60, deadline=None)
@given(
    st.tuples(index, index, index).filter(any),
    st.tuples(index, index, index).filter(any),
    st.permutations([1, 2, 3]),
    st.tuples(edge, edge, edge, angle, angle, angle),
)
def test_any_row_and_any_normal_across_it(
    row: tuple[int, int, int],
    other: tuple[int, int, int],
    axes: list[int],
    cell: tuple[float, float, float, float, float, float],
) -> None:
    normal = np.cross(row, other)
    # Angles that close with room to spare; what nearly flat cells do is looked at in test_cell.py.
    if not np.any(normal) or max(cell[3:]) > sum(cell[3:]) / 2 - 10 or sum(cell[3:]) > 330:
        return
    textbook = build_textbook_basis(cell)
    rule = parse_frame_rule(f"x{axes[0]}=[{row[0]} {row[1]} {row[2]}] x{axes[1]}=({normal[0]} {normal[1]} {normal[2]})")
    basis = compute_basis(build_cell(cell).metric, rule)
    check_basis(basis, textbook.T @ textbook)
    along = basis @ np.array(row)
    across = np.linalg.inv(basis).T @ normal
    assert along / np.linalg.norm(along) == pytest.approx(np.eye(3)[axes[0] - 1], abs=1e-11)
    assert across / np.linalg.norm(across) == pytest.approx(np.eye(3)[axes[1] - 1], abs=1e-11)


@settings(max_examples=200, deadline=None)
@given(
    st.one_of(
        st.text(max_size=30),
        st.text(alphabet="x123=abc*[]() -01,;", max_size=30),
        st.lists(st.sampled_from(["x1=", "x2=", "x3=", "a", "b*", "c", "[1 1 1]", "(1 -1 0)", " ", "(1", "*"])).map(
            "".join
        ),
    )
)
def test_no_text_does_anything_but_state_a_rule_or_be_refused(text: str) -> None:
    try:
        rule = parse_frame_rule(text)
    except InputError:
        return
    assert isinstance(rule, FrameRule)
    check_basis(compute_basis(build_cell(CELLS["triclinic"]).metric, rule), build_cell(CELLS["triclinic"]).metric)


@pytest.mark.parametrize("rule", RULES)
def test_batches_are_done_as_one_by_one(rule: str) -> None:
    metrics = np.array([build_cell(cell).metric for cell in CELLS.values()])
    together = compute_basis(metrics, parse_frame_rule(rule))
    for metric, basis in zip(metrics, together, strict=True):
        assert compute_basis(metric, parse_frame_rule(rule)) == pytest.approx(basis, abs=1e-13)
