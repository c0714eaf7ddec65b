"""Rows and planes of low index, and the ones nearest to a direction."""

from __future__ import annotations

from itertools import product
from math import gcd

import gemmi
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.crystal.lattice import compute_directions, find_nearest, list_indices
from tests.crystal.reference import CELLS


@pytest.mark.parametrize("limit", [1, 2, 3, 5])
def test_the_list_has_one_of_every_pair(limit: int) -> None:
    listed = [tuple(int(value) for value in triple) for triple in list_indices(limit)]
    expected = {triple for triple in product(range(-limit, limit + 1), repeat=3) if gcd(*map(abs, triple)) == 1}
    assert len(listed) * 2 == len(expected)
    assert set(listed) | {tuple(-value for value in triple) for triple in listed} == expected
    sizes = [sum(value * value for value in triple) for triple in listed]
    assert sizes == sorted(sizes)


@pytest.mark.parametrize("family", CELLS)
def test_directions_against_gemmi(family: str) -> None:
    crystal = build_crystal(CELLS[family], "1", frame="x1=a x3=c*")
    cell = gemmi.UnitCell(*CELLS[family])
    indices = list_indices(3)
    rows = indices @ np.array(cell.orth.mat.tolist()).T
    normals = indices @ np.array(cell.frac.mat.tolist())
    for kind, vectors in (("row", rows), ("normal", normals)):
        expected = vectors / np.linalg.norm(vectors, axis=1, keepdims=True)
        assert compute_directions(crystal, kind, indices) == pytest.approx(expected, abs=1e-13)  # type: ignore[arg-type]


@settings(max_examples=60, deadline=None)
@given(
    st.sampled_from(list(CELLS)),
    st.sampled_from(["row", "normal"]),
    st.tuples(*[st.floats(-1, 1)] * 3).filter(lambda vector: np.linalg.norm(vector) > 1e-3),
)
def test_nothing_is_nearer_than_the_nearest(family: str, kind: str, vector: tuple[float, float, float]) -> None:
    # By brute force over all indices up to 3, each index form read by the parser.
    crystal = build_crystal(CELLS[family], "1")
    unit = np.array(vector) / np.linalg.norm(vector)
    found = find_nearest(crystal, unit, kind, 3)  # type: ignore[arg-type]
    named = crystal.resolve(parse_direction(found.text))
    angle = np.rad2deg(np.arctan2(np.linalg.norm(np.cross(named, unit)), named @ unit))
    assert found.off == pytest.approx(angle, abs=1e-9)
    brackets = "[]" if kind == "row" else "()"
    for indices in product(range(-3, 4), repeat=3):
        if any(indices):
            text = f"{brackets[0]}{indices[0]} {indices[1]} {indices[2]}{brackets[1]}"
            other = crystal.resolve(parse_direction(text))
            assert np.rad2deg(np.arctan2(np.linalg.norm(np.cross(other, unit)), other @ unit)) >= found.off - 2e-7


@pytest.mark.parametrize("kind", ["row", "normal"])
def test_a_low_index_direction_finds_itself_with_its_sense(kind: str) -> None:
    crystal = build_crystal(CELLS["triclinic"], "1")
    for triple in list_indices(3):
        for sense in (1, -1):
            vector = sense * compute_directions(crystal, kind, triple)  # type: ignore[arg-type]
            found = find_nearest(crystal, vector, kind)  # type: ignore[arg-type]
            assert parse_direction(found.text).values == tuple(float(sense * value) for value in triple)
            assert found.off == pytest.approx(0.0, abs=1e-6)
