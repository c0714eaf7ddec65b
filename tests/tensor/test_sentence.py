"""The first sentence: where a direction is, and what the tensor does there."""

from __future__ import annotations

import itertools
from math import gcd

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.tensor.kind import Kind
from app.tensor.principal import find_principal
from app.tensor.sentence import find_simplest, join_runs, place_direction, write_sentence
from app.tensor.tensor import build_tensor

MONOCLINIC = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")


def search_plainly(vector: np.ndarray) -> tuple[int, str] | None:
    """The smallest sum of squares within 2°, normals before rows at equality: every triple up to 5, one by one."""
    assert MONOCLINIC.M is not None
    best: tuple[int, str] | None = None
    for kind, basis in (("(", np.linalg.inv(MONOCLINIC.M).T), ("[", MONOCLINIC.M)):
        for triple in itertools.product(range(-5, 6), repeat=3):
            if gcd(*triple) != 1:
                continue
            direction = basis @ triple
            cosine = abs(direction @ vector) / np.linalg.norm(direction)
            size = sum(index * index for index in triple)
            if cosine >= np.cos(np.deg2rad(2.0)) and (best is None or size < best[0]):
                best = (size, kind)
    return best


@pytest.mark.parametrize("seed", range(40))
def test_the_simplest_name_within_two_degrees(seed: int) -> None:
    rng = np.random.default_rng(seed)
    vector = rng.normal(size=3)
    if seed % 2:
        row = MONOCLINIC.resolve(parse_direction(f"[{rng.integers(1, 3)} {rng.integers(-2, 3)} {rng.integers(-2, 3)}]"))
        vector = row + 0.02 * rng.normal(size=3)
    vector = vector / np.linalg.norm(vector)
    found, expected = find_simplest(MONOCLINIC, vector), search_plainly(vector)
    assert (found is None) == (expected is None)
    if found is not None and expected is not None:
        indices = parse_direction(found[0]).values
        assert (sum(index * index for index in indices), found[0][0]) == expected
        assert found[1] <= 2.0 + 1e-6


def test_a_normal_comes_before_a_row_at_equality() -> None:
    # Along b, [010] and (010) coincide in a monoclinic crystal with b unique.
    assert find_simplest(MONOCLINIC, np.array([0.0, 1.0, 0.0])) == ("(0 1 0)", pytest.approx(0, abs=1e-6))


def test_the_direction_that_the_user_put_there_is_named_however_far() -> None:
    place = place_direction(MONOCLINIC, np.array([0.0, 1.0, 0.0]), "[1 0 0]")
    assert place.text == "90.0° off [100]"


def test_angles_where_nothing_simple_is_near() -> None:
    vector = np.array([0.32, 0.51, 0.798])
    vector = vector / np.linalg.norm(vector)
    place = place_direction(build_crystal(None, "∞m"), vector)
    first, second, third = np.rad2deg(np.arccos(vector))
    assert place.text == f"{first:.1f}° from x1, {second:.1f}° from x2, {third:.1f}° from x3"


def test_the_sentence_of_the_demonstration_sample() -> None:
    # The numbers of the drawing of the front page, which were computed apart from this project.
    free = {"11": 13.20, "13": 1.85, "22": 24.6, "33": 15.90}
    covariance = np.diag(np.array([0.08, 0.06, 0.2, 0.09]) ** 2)
    tensor = build_tensor(MONOCLINIC, Kind(), free=free, covariance=covariance)
    start = MONOCLINIC.resolve(parse_direction("(-2 0 1)"))
    toward = MONOCLINIC.resolve(parse_direction("[1 1 0]"))
    across = toward - start * (start @ toward)
    tilt = np.deg2rad(1.3)
    vector = np.cos(tilt) * start + np.sin(tilt) * across / np.linalg.norm(across)
    place = place_direction(MONOCLINIC, vector, "(-2 0 1)")
    lines = write_sentence("z", place, vector, tensor.estimate, find_principal(tensor.estimate), "W/(m·K)")
    assert join_runs(*lines) == (
        "Along z, 1.3° off n(−201): 12.48(8) W/(m·K). "
        "Nearest principal axis p3, 12.7° away; a long bar would read 12.42(8)."
    )
