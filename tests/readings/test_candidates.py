"""Directions to choose from."""

from __future__ import annotations

from itertools import product
from math import gcd

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.errors import InputError
from app.readings.candidates import (
    HIGHEST_INDEX,
    MAX_CANDIDATES,
    list_candidates,
    resolve_candidates,
    spread_candidates,
)
from app.tensor.pose import IDENTITY
from tests.readings.builders import MONOCLINIC, TRICLINIC, vector


def count_primitive(limit: int) -> int:
    """Triples of whole numbers without common divisor up to a limit, opposites once, counted one by one."""
    span = range(-limit, limit + 1)
    return sum(gcd(gcd(h, k), m) == 1 for h, k, m in product(span, span, span)) // 2


@pytest.mark.parametrize("limit", [1, 2, 3])
def test_rows_and_normals_without_opposites(limit: int) -> None:
    # In a triclinic cell with unrelated parameters no row is along a normal, so each triple stands twice.
    listed = list_candidates(TRICLINIC, limit)
    assert len(listed) == 2 * count_primitive(limit)
    assert {direction.kind for direction in listed.directions} == {"row", "normal"}
    assert max(abs(value) for direction in listed.directions for value in direction.values) == limit
    cosines = np.abs(listed.vectors @ listed.vectors.T) - np.eye(len(listed))
    assert np.max(cosines) < 1 - 1e-9
    for direction, unit in list(zip(listed.directions, listed.vectors, strict=True))[:: 7 if limit > 1 else 1]:
        assert TRICLINIC.resolve(direction) == pytest.approx(unit)


def test_parallel_ones_stand_once_and_the_normal_comes_first() -> None:
    cubic = build_crystal([5, 5, 5, 90, 90, 90], "m-3m")
    listed = list_candidates(cubic, 2)
    assert len(listed) == count_primitive(2)
    assert {direction.kind for direction in listed.directions} == {"normal"}
    # Of indices up to 1 in this monoclinic cell only b and b* are parallel.
    monoclinic = list_candidates(MONOCLINIC, 1)
    named = [(direction.kind, direction.values) for direction in monoclinic.directions]
    assert ("normal", (0.0, 1.0, 0.0)) in named
    assert ("row", (0.0, 1.0, 0.0)) not in named
    assert len(monoclinic) == 2 * count_primitive(1) - 1


def test_a_simple_row_stands_before_a_normal_with_higher_indices() -> None:
    # On hexagonal axes [210] is along n(100): the normal is simpler and is kept, the row is not listed.
    hexagonal = build_crystal([5, 5, 7, 90, 90, 120], "6/mmm")
    named = [(direction.kind, direction.values) for direction in list_candidates(hexagonal, 2).directions]
    assert ("normal", (1.0, 0.0, 0.0)) in named
    assert ("row", (2.0, 1.0, 0.0)) not in named
    # [100] is along n(2 −1 0); here the row is the simpler.
    assert ("row", (1.0, 0.0, 0.0)) in named
    assert ("normal", (2.0, -1.0, 0.0)) not in named


def test_limits() -> None:
    assert len(list_candidates(TRICLINIC, HIGHEST_INDEX)) <= MAX_CANDIDATES
    for wrong in (0, HIGHEST_INDEX + 1):
        with pytest.raises(InputError) as refused:
            list_candidates(TRICLINIC, wrong)
        assert refused.value.field == "max_index"
    with pytest.raises(InputError, match="no cell"):
        list_candidates(build_crystal(None, "∞/mm"), 2)
    with pytest.raises(InputError):
        resolve_candidates(TRICLINIC, [], IDENTITY)
    with pytest.raises(InputError):
        resolve_candidates(TRICLINIC, [vector([1, 0, 0])] * (MAX_CANDIDATES + 1), IDENTITY)
    with pytest.raises(InputError) as refused:
        resolve_candidates(TRICLINIC, [vector([1, 0, 0]), parse_direction("[1 0 -1 0]")], IDENTITY)
    assert refused.value.field == "[1]"


def test_the_sphere_is_covered_evenly() -> None:
    # Every seeded direction, or its opposite, has a point within 1.5 times the side of an equal share of the area.
    spread = spread_candidates(1500)
    rng = np.random.default_rng(2)
    others = rng.normal(size=(2000, 3))
    others /= np.linalg.norm(others, axis=1, keepdims=True)
    nearest = np.arccos(np.minimum(np.max(np.abs(others @ spread.vectors.T), axis=1), 1.0))
    assert np.max(nearest) < 1.5 * np.sqrt(2 * np.pi / 1500)
    assert np.linalg.norm(spread.vectors, axis=1) == pytest.approx(1.0)
