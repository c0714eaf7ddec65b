"""A crystal as a whole: rotations in the frame, reciprocal axes, what it refuses."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction, read_direction
from app.errors import InputError
from tests.crystal.reference import (
    CELLS,
    SETTING_NAMES,
    SETTINGS,
    Setting,
    as_set,
    build_textbook_basis,
    close_group,
    read_setting,
)

FRAMES = ["x3=c x2=b*", "x1=a x3=c*", "x2=b x1=c*", "x3=[1 1 1] x1=(1 -1 0)", "x1=[3 -1 2] x2=(0 2 1)"]


@pytest.mark.parametrize("frame", FRAMES)
@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_rotations_are_the_operations_in_the_frame(setting: Setting, frame: str) -> None:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=frame)
    assert crystal.M is not None
    rotations = crystal.rotations
    assert rotations @ np.swapaxes(rotations, 1, 2) == pytest.approx(np.broadcast_to(np.eye(3), rotations.shape))
    back = np.linalg.inv(crystal.M) @ rotations @ crystal.M
    assert np.max(np.abs(back - np.rint(back))) < 1e-12
    # The hand-written generators, closed, are the outside.
    assert as_set(back) == as_set(close_group(setting.matrices))


@pytest.mark.parametrize("family", CELLS)
def test_reciprocal_axes_are_dual(family: str) -> None:
    crystal = build_crystal(CELLS[family], "1")
    assert crystal.M is not None
    # a* = b × c / V and so on, by definition.
    a, b, c = crystal.M.T
    volume = float(a @ np.cross(b, c))
    expected = np.array([np.cross(b, c), np.cross(c, a), np.cross(a, b)]).T / volume
    assert crystal.reciprocal == pytest.approx(expected, rel=1e-12, abs=1e-15)
    assert crystal.volume == pytest.approx(volume, rel=1e-12)


@pytest.mark.parametrize("hall_number", [8, 61, 90, 108, 230, 263, 300, 400, 435, 462, 485, 500, 523])
def test_space_groups_of_spglib_as_rotations(hall_number: int) -> None:
    _, _, full, matrices = read_setting(hall_number)
    operations = np.array(sorted(matrices), dtype=np.float64).reshape(-1, 3, 3)
    # A metric that this group leaves unchanged: the average of an arbitrary one over spglib's operations.
    textbook = build_textbook_basis(CELLS["triclinic"])
    metric = np.mean(np.swapaxes(operations, 1, 2) @ (textbook.T @ textbook) @ operations, axis=0)
    edges = np.sqrt(np.diag(metric))
    cosines = metric / np.outer(edges, edges)
    cell = [*edges, *np.rad2deg(np.arccos([cosines[1, 2], cosines[0, 2], cosines[0, 1]]))]
    crystal = build_crystal(cell, full)
    assert crystal.M is not None
    expected = crystal.M @ operations @ np.linalg.inv(crystal.M)
    for matrix in expected:
        assert np.min(np.max(np.abs(crystal.rotations - matrix), axis=(1, 2))) < 1e-9
    assert len(crystal.rotations) == len(operations)


def test_hexagonal_axes_of_any_group_take_four_indices() -> None:
    for group in ("1", "112/m", "6/mmm", "-3m", "3"):
        crystal = build_crystal(CELLS["hexagonal"], group)
        assert crystal.resolve(parse_direction("(0 0 0 1)")) == pytest.approx([0, 0, 1], abs=1e-15)
    # A rounded cell counts by what it was made to obey.
    assert build_crystal([5.1, 5.1001, 7.3, 90.0, 90.0, 120.001], "6").resolve(parse_direction("[11-20]")) is not None
    with pytest.raises(InputError):
        build_crystal([5.1, 5.1001, 7.3, 90.0, 90.0, 120.0], "1").resolve(parse_direction("[11-20]"))


def test_a_limiting_group_takes_vectors_and_no_indices() -> None:
    crystal = build_crystal(None, "∞/m")
    assert crystal.resolve(read_direction([0, 0, 3])) == pytest.approx([0, 0, 1])
    for text in ("[0 0 1]", "(0 0 1)", "(0001)"):
        with pytest.raises(InputError, match="no cell"):
            crystal.resolve(parse_direction(text))
    assert crystal.volume is None and crystal.M is None
    assert "x3 along the infinite axis" in crystal.frame_sentence
    assert "any" in build_crystal(None, "∞∞").frame_sentence


@pytest.mark.parametrize(
    ("arguments", "field"),
    [
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "2/m", "unique_axis": "d"}, "unique_axis"),
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "12/m1", "unique_axis": "b"}, "unique_axis"),
        ({"cell": [5, 6, 7, 90, 100], "group": "2/m"}, "cell"),
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "2/q"}, "group"),
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "2/m", "frame": "x3=c"}, "frame"),
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "2/m", "cell_sigma": [1]}, "cell_sigma"),
        ({"cell": [5, 6, 7, 90, 100, 90], "group": "mmm"}, "cell"),
        ({"cell": None, "group": "mmm"}, "cell"),
        ({"cell": None, "group": "∞", "cell_sigma": [0] * 6}, "cell"),
    ],
)
def test_an_error_says_where(arguments: dict, field: str) -> None:
    given_arguments = dict(arguments)
    with pytest.raises(InputError) as caught:
        build_crystal(given_arguments.pop("cell"), given_arguments.pop("group"), **given_arguments)
    assert caught.value.field == field
    assert caught.value.message


@settings(max_examples=60, deadline=None)
@given(
    st.floats(1e-2, 1e4),
    st.floats(1e-2, 1e4),
    st.floats(1e-2, 1e4),
    st.floats(10.0, 170.0),
    st.sampled_from(FRAMES[:3]),
)
def test_slender_and_oblique_cells_keep_exact_rotations(a: float, b: float, c: float, beta: float, frame: str) -> None:
    # A half-turn about b, by hand: of every vector the part along b stays and the rest is reversed.
    crystal = build_crystal([a, b, c, 90.0, beta, 90.0], "2", frame=frame)
    assert crystal.M is not None
    axis = crystal.M[:, 1] / np.linalg.norm(crystal.M[:, 1])
    assert crystal.rotations[1] == pytest.approx(2.0 * np.outer(axis, axis) - np.eye(3), abs=1e-11)
    assert crystal.operation_names == ["identity", "half-turn about [0 1 0]"]
