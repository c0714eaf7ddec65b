"""Every notation for a direction, and whatever else is typed.

What a notation means: International Tables for Crystallography A (2016), section 1.3.2 (rows, planes, four-index
planes, i = −h−k); four-index rows [u v t w]: L. Weber, Z. Kristallogr. 57 (1922) 200 (from memory).
"""

from __future__ import annotations

from fractions import Fraction

import gemmi
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.crystal.direction import Direction, format_indices, parse_direction, read_direction, typeset_indices
from app.errors import InputError
from tests.crystal.reference import CELLS

MINUSES = ("-", "\u2212", "\u2013", "\u2010")


@pytest.mark.parametrize(
    "text",
    [
        "[10-1]",
        "[1 0 -1]",
        "[1,0,-1]",
        "[1, 0, -1]",
        "[1 0 1\u0304]",
        "[1 0 1\u0305]",
        "[101\u0304]",
        " [ 1  0  -1 ] ",
        "[1;0;-1]",
        "[+1 0 -1]",
        "[1.0 0.0 -1.0]",
        "[1\t0\t-1]",
        "[1 0 \u22121]",
        "[10\u22121]",
        "[1 0 \u20131]",
    ],
)
def test_one_row_in_every_spelling(text: str) -> None:
    # The first four stand in the interface's own text.
    direction = parse_direction(text)
    assert (direction.kind, direction.values, direction.four_index) == ("row", (1.0, 0.0, -1.0), False)
    normal = parse_direction(text.replace("[", "(").replace("]", ")"))
    assert (normal.kind, normal.values) == ("normal", (1.0, 0.0, -1.0))


@pytest.mark.parametrize(
    ("text", "values"),
    [
        ("[0.5 -.25 1e-3]", (0.5, -0.25, 1e-3)),
        ("(1/2 -1/3 2)", (0.5, -1 / 3, 2.0)),
        ("[12 -3 4]", (12.0, -3.0, 4.0)),
        ("[1\u03042\u0304 0 1]", (-12.0, 0.0, 1.0)),
        ("(1000000 -999999 1)", (1e6, -999999.0, 1.0)),
        ("[1e6 0 -1]", (1e6, 0.0, -1.0)),
        ("(-2 0 1)", (-2.0, 0.0, 1.0)),
        ("(-201)", (-2.0, 0.0, 1.0)),
        ("(2\u030401)", (-2.0, 0.0, 1.0)),
    ],
)
def test_other_indices(text: str, values: tuple[float, float, float]) -> None:
    assert parse_direction(text).values == pytest.approx(values, rel=1e-15)


@pytest.mark.parametrize(
    ("text", "three"),
    [
        # [u v t w] is U = u − t, V = v − t (Weber); [2 -1 -1 0] is the edge a, [1 1 -2 0] is a + b.
        ("[2 -1 -1 0]", (3, 0, 0)),
        ("[11-20]", (3, 3, 0)),
        ("[0 0 0 1]", (0, 0, 1)),
        ("[1 0 -1 1]", (2, 1, 1)),
        # (h k i l) leaves i out.
        ("(1 0 -1 4)", (1, 0, 4)),
        ("(10-14)", (1, 0, 4)),
        ("(1 1 2\u0304 0)", (1, 1, 0)),
        ("(0001)", (0, 0, 1)),
    ],
)
def test_four_indices(text: str, three: tuple[int, int, int]) -> None:
    direction = parse_direction(text)
    assert direction.four_index
    assert direction.values == three


def test_four_index_rows_are_vectors_of_the_four_axes() -> None:
    # u a1 + v a2 + t a3 + w c with a3 = −a1 − a2 is the definition; no formula of three indices is used here.
    crystal = build_crystal(CELLS["hexagonal"], "6/mmm")
    assert crystal.M is not None
    a1, a2, c = crystal.M.T
    for u, v, w in ((1, 0, 2), (2, -1, 0), (-3, 2, 5)):
        t = -u - v
        vector = u * a1 + v * a2 + t * (-a1 - a2) + w * c
        found = crystal.resolve(parse_direction(f"[{u} {v} {t} {w}]"))
        assert found == pytest.approx(vector / np.linalg.norm(vector), abs=1e-14)


@pytest.mark.parametrize("text", ["[1 0 0 1]", "(1 0 1 4)", "[1 1 2 0]", "(1 1 -2.001 0)"])
def test_four_indices_that_do_not_add_up(text: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_direction(text)
    assert "third of four" in caught.value.message


@pytest.mark.parametrize("family", [family for family in CELLS if family != "hexagonal"])
def test_four_indices_only_on_hexagonal_axes(family: str) -> None:
    crystal = build_crystal(CELLS[family], "1")
    with pytest.raises(InputError, match="hexagonal"):
        crystal.resolve(parse_direction("(1 0 -1 4)"))


@pytest.mark.parametrize(
    "text",
    [
        "",
        " ",
        "1 0 0",
        "[]",
        "()",
        "[ ]",
        "[1 0 0",
        "1 0 0]",
        "[1 0 0)",
        "(1 0 0]",
        "{1 0 0}",
        "<1 0 0>",
        "⟨1 0 0⟩",
        "[0 0 0]",
        "(0000)",
        "[1 0]",
        "[10]",
        "[1 2 3 4 5]",
        "[12 13 14 15 16]",
        "[a b c]",
        "[1 0 0][0 1 0]",
        "[1..0 0 1]",
        "[1 0 1/0]",
        "[1 0 1/0.0]",
        "[--1 0 0]",
        "[-1\u0304 0 0]",
        "[1-\u0304 0 0]",
        "[1e400 0 0]",
        "[1e10 0 0]",
        "[1 0 nan]",
        "[inf 0 1]",
        "[1 0 0]" + " " * 300 + "x",
        "[1,5 0 0 0 1]",
        "[½ 0 1]",
        "[1² 0 1]",
        "[0x1 0 0]",
        "[1_0 0 1]",
        "[12 3]",
        "[1.5-20]",
    ],
)
def test_what_is_no_direction_is_refused(text: str) -> None:
    with pytest.raises(InputError) as caught:
        parse_direction(text)
    assert caught.value.message and caught.value.hint


@pytest.mark.parametrize(
    ("given_value", "values"),
    [
        ([1, 2, 3], (1, 2, 3)),
        ((0.0, -1e-30, 0.0), (0, -1e-30, 0)),
        (np.array([1e300, 0, 1e300]), (1e300, 0, 1e300)),
        ({"xyz": [0, 0, 5]}, (0, 0, 5)),
    ],
)
def test_vectors(given_value: object, values: tuple[float, float, float]) -> None:
    direction = read_direction(given_value)
    assert (direction.kind, direction.values) == ("vector", values)
    crystal = build_crystal(CELLS["triclinic"], "1")
    assert np.linalg.norm(crystal.resolve(direction)) == pytest.approx(1.0, abs=1e-15)


def test_specimen_directions_are_told_apart() -> None:
    direction = read_direction({"specimen": [1, 0, 0]})
    assert direction.kind == "specimen"
    with pytest.raises(InputError, match="pose"):
        build_crystal(CELLS["triclinic"], "1").resolve(direction)


@pytest.mark.parametrize(
    "given_value",
    [
        None,
        5,
        True,
        [1, 2],
        [1, 2, 3, 4],
        [1, 2, "3"],
        [True, False, True],
        [0, 0, 0],
        [0.0, -0.0, 0.0],
        [float("nan"), 0, 1],
        [float("inf"), 0, 1],
        [10**400, 0, 1],
        [1j, 0, 1],
        {},
        {"xyz": [0, 0, 0]},
        {"xyz": [1, 0, 0], "specimen": [1, 0, 0]},
        {"specimen": "[1 0 0]"},
        {"row": [1, 0, 0]},
        b"[1 0 0]",
        [[1, 0, 0]],
    ],
)
def test_what_is_no_vector_is_refused(given_value: object) -> None:
    with pytest.raises(InputError):
        read_direction(given_value)


@pytest.mark.parametrize("family", CELLS)
def test_rows_and_normals_agree_with_gemmi(family: str) -> None:
    # gemmi's orthogonalisation has x1 along a and x3 along c*, the rule `x1=a x3=c*`.
    cell = gemmi.UnitCell(*CELLS[family])
    crystal = build_crystal(CELLS[family], "1", frame="x1=a x3=c*")
    for indices in ((1, 0, 0), (1, 0, 4), (-2, 0, 1), (3, -1, 2), (1, 1, 1), (1_000_000, -999_999, 1)):
        row = np.array(cell.orth.mat.tolist()) @ np.array(indices)
        normal = np.array(cell.frac.mat.tolist()).T @ np.array(indices)
        for vector, text in ((row, format_indices("row", indices)), (normal, format_indices("normal", indices))):
            assert crystal.resolve(parse_direction(text)) == pytest.approx(vector / np.linalg.norm(vector), abs=1e-12)


def test_huge_indices_lose_nothing() -> None:
    # Exact arithmetic: in a cubic cell [1000000 1 0] lies atan(1e-6) from a.
    crystal = build_crystal(CELLS["cubic"], "m-3m")
    a = crystal.resolve(parse_direction("[1 0 0]"))
    near = crystal.resolve(parse_direction("[1000000 1 0]"))
    assert np.linalg.norm(np.cross(a, near)) == pytest.approx(1e-6, rel=1e-9)


whole = st.integers(-999, 999)


@given(st.sampled_from(["row", "normal"]), st.tuples(whole, whole, whole).filter(any), st.sampled_from(MINUSES))
def test_whole_indices_come_back(kind: str, indices: tuple[int, int, int], minus: str) -> None:
    text = format_indices(kind, indices)  # type: ignore[arg-type]
    direction = parse_direction(text.replace("-", minus))
    assert (direction.kind, direction.values) == (kind, indices)
    assert read_direction(direction) is direction


@given(st.tuples(*[st.floats(-1e6, 1e6).filter(lambda value: value == 0 or abs(value) > 1e-90)] * 3).filter(any))
def test_other_indices_come_back(indices: tuple[float, float, float]) -> None:
    assert parse_direction(format_indices("row", indices)).values == indices


digit = st.integers(0, 9)


@given(st.lists(st.tuples(digit, st.sampled_from(["", "-", "bar"])), min_size=3, max_size=3))
def test_run_together_digits_are_one_index_each(parts: list[tuple[int, str]]) -> None:
    if not any(value for value, _ in parts):
        return
    text = "".join(f"{value}\u0304" if sign == "bar" else f"{sign}{value}" for value, sign in parts)
    expected = tuple(float(-value if sign else value) for value, sign in parts)
    assert parse_direction(f"[{text}]").values == expected


@given(st.tuples(*[st.fractions(-9, 9, max_denominator=12)] * 3).filter(any))
def test_fractions(indices: tuple[Fraction, Fraction, Fraction]) -> None:
    text = " ".join(f"{index.numerator}/{index.denominator}" for index in indices)
    assert parse_direction(f"({text})").values == pytest.approx([float(index) for index in indices], rel=1e-15)


@settings(max_examples=400, deadline=None)
@given(
    st.one_of(
        st.text(max_size=20),
        st.text(alphabet="[](){}<>0123456789+-−.,;eE/\u0304\u0305 \t٣²½na", max_size=24),
        st.text(alphabet="0123456789+-.,eE/\u0304 ", max_size=20).map(lambda inner: f"[{inner}]"),
    )
)
def test_no_text_does_anything_but_name_a_direction_or_be_refused(text: str) -> None:
    try:
        direction = parse_direction(text)
    except InputError:
        return
    assert direction.kind in ("row", "normal")
    assert len(direction.values) == 3
    assert all(np.isfinite(direction.values)) and any(direction.values)


json_like = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=6),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.sampled_from(["xyz", "specimen", "x"]), inner),
    max_leaves=5,
)


@settings(max_examples=200, deadline=None)
@given(json_like)
def test_no_value_does_anything_but_name_a_direction_or_be_refused(value: object) -> None:
    try:
        direction = read_direction(value)
    except InputError:
        return
    assert isinstance(direction, Direction)
    assert all(np.isfinite(direction.values)) and any(direction.values)


@pytest.mark.parametrize(
    ("text", "printed"),
    [
        ("(-2 0 1)", "n(−201)"),
        ("[-2 0 1]", "[−201]"),
        ("[10 0 -1]", "[10 0 −1]"),
    ],
)
def test_typeset_indices(text: str, printed: str) -> None:
    # The manner of the drawing of the front page: n(−201) for a normal, [−201] for a row.
    assert typeset_indices(text) == printed
