"""Kinds: two words, and what they do."""

from __future__ import annotations

import numpy as np
import pytest

from app.errors import InputError
from app.tensor.kind import CELLS, LABELS, TRANSPOSE, Kind, build_kind


def test_defaults_are_polar_and_symmetric() -> None:
    assert build_kind() == build_kind(None, None) == Kind("polar", "symmetric")


@pytest.mark.parametrize("parity", ["polar", "axial"])
@pytest.mark.parametrize("intrinsic", ["symmetric", "general", "antisymmetric"])
def test_every_pair_of_words(parity: str, intrinsic: str) -> None:
    kind = build_kind(parity, intrinsic)
    assert (kind.parity, kind.intrinsic) == (parity, intrinsic)
    matrix = np.random.default_rng(1).normal(size=(3, 3))
    projected = (kind.intrinsic_projector @ matrix.ravel()).reshape(3, 3)
    # By definition: half the sum, all of it, or half the difference of a matrix and its transpose.
    expected = {
        "symmetric": (matrix + matrix.T) / 2,
        "general": matrix,
        "antisymmetric": (matrix - matrix.T) / 2,
    }[intrinsic]
    assert projected == pytest.approx(expected, abs=1e-15)
    rotations = np.array([np.eye(3), -np.eye(3), np.diag([1.0, 1, -1]), np.diag([1.0, -1, -1])])
    expected_signs = [1, 1, 1, 1] if parity == "polar" else [1, -1, -1, 1]
    assert kind.signs(rotations).tolist() == expected_signs


@pytest.mark.parametrize(
    ("words", "field"), [(("Polar", None), "parity"), ((None, "skew"), "intrinsic"), (("x", "y"), "parity")]
)
def test_other_words_are_refused(words: tuple[str | None, str | None], field: str) -> None:
    with pytest.raises(InputError) as caught:
        build_kind(*words)
    assert caught.value.field == field


def test_the_order_of_the_cells() -> None:
    assert LABELS == ("11", "12", "13", "21", "22", "23", "31", "32", "33")
    for position, (row, column) in enumerate(CELLS):
        assert CELLS[TRANSPOSE[position]] == (column, row)
