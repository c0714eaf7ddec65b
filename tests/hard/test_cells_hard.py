"""Nearly flat cells, tiny and huge edges, angles near 0 and 180: M, volume and directions to the digits of the angles.

A cell is as well known as its doubles: near a limit δ of its angles (degrees) one last bit of an angle moves the volume
by some 1e-14/δ of itself, and nothing more may be lost.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from mpmath import mpf, sqrt

from app.crystal.crystal import build_crystal
from tests.hard import reference as exact
from tests.hard.conftest import Ask

# Six parameters, and δ: how far the angles are from a limit beyond which there is no cell, degrees.
CELLS: list[tuple[list[float], float]] = [
    ([5, 6, 7, 60, 60, 119.9], 0.1),
    ([5, 6, 7, 60, 60, 119.999], 1e-3),
    ([5, 6, 7, 60, 60, 119.99999], 1e-5),
    ([5, 6, 7, 120, 120, 119.999], 1e-3),
    ([5, 6, 7, 80.3, 50.0001, 130.3], 1e-4),
    ([5, 6, 7, 60.5, 50, 110.4999], 1e-4),
    ([5, 6, 7, 0.001, 90, 90], 1e-3),
    ([5, 6, 7, 90, 3e-5, 90], 3e-5),
    ([5, 6, 7, 90, 179.999, 90], 1e-3),
    ([5, 6, 7, 1, 1, 1.999], 1e-3),
    ([1e-3, 1e6, 1, 80, 95, 100], 60),
    ([1e6, 1e6, 1e6, 60, 60, 119.99], 1e-2),
    ([1e-3, 1e-3, 1e-3, 95.1, 100, 164.8], 0.1),
]
DIRECTIONS = [(1, 0, 0), (0, 1, 0), (0, 0, 1), (1, 1, 1), (1000000, 1, 0), (-999999, 1000000, 7), (1, -1, 1000000)]


def allowed(limit: float) -> float:
    """Relative error that one last bit of each angle would make, and a little for some dozens of operations."""
    return 40 * exact.EPS * (1 + 180 / limit)


@pytest.mark.parametrize(("cell", "limit"), CELLS)
def test_basis_and_volume_of_nearly_flat_cells(cell: list[float], limit: float, ask: Ask) -> None:
    wanted = exact.basis(cell)
    volume = wanted[0, 0] * wanted[1, 1] * wanted[2, 2]
    crystal = build_crystal(cell, "-1")
    assert crystal.cell is not None and crystal.M is not None
    assert abs(mpf(crystal.cell.volume) / volume - 1) < allowed(limit)
    for column in range(3):
        size = float(sqrt(exact.dot(wanted[:, column], wanted[:, column])))
        assert exact.difference(crystal.M[:, column], list(wanted[:, column])) < allowed(limit) * size
    answer = ask("state", {"crystal": {"cell": cell, "group": "-1"}, "tensor": {"matrix": np.eye(3).tolist()}})
    assert abs(mpf(answer["frame"]["volume"]) / volume - 1) < allowed(limit)
    assert answer["frame"]["M"] == crystal.M.tolist()


@pytest.mark.parametrize(("cell", "limit"), CELLS)
def test_rows_and_normals_in_nearly_flat_cells(cell: list[float], limit: float, ask: Ask) -> None:
    columns = exact.basis(cell)
    matrix = [[13.2, -0.4, 1.85], [-0.4, 24.6, 0.3], [1.85, 0.3, 15.9]]
    texts = [f"[{u} {v} {w}]" for u, v, w in DIRECTIONS] + [f"({u} {v} {w})" for u, v, w in DIRECTIONS]
    wanted = [exact.row(columns, d) for d in DIRECTIONS] + [exact.normal(columns, d) for d in DIRECTIONS]
    body = {"crystal": {"cell": cell, "group": "-1"}, "tensor": {"matrix": matrix}, "directions": texts}
    answer = ask("along", body)
    tensor = exact.exact(matrix)
    # A normal is a difference of long edges in a long thin cell: as ill-conditioned as the edges' lengths are unlike.
    for text, vector, found, value in zip(texts, wanted, answer["vectors"], answer["values"], strict=True):
        assert exact.difference(found, list(vector)) < 3 * allowed(limit), text
        assert exact.difference(value, exact.value(tensor, vector)) < 100 * allowed(limit), text


@pytest.mark.parametrize(
    "angles",
    [
        [60, 60, 120],
        [60, 60, 120.0001],
        [120, 120, 120],
        [120, 120, 120.0001],
        [0, 90, 90],
        [90, 180, 90],
        [10, 30, 50],
        [1e-9, 90, 90],
        [90, 90, 180 - 1e-9],
        [60, 60, 120 - 1e-13],
        [-60, 60, 60],
    ],
)
def test_what_is_no_cell_is_refused_with_the_reason(angles: list[float], ask: Ask) -> None:
    body: dict[str, Any] = {
        "crystal": {"cell": [5, 6, 7, *angles], "group": "-1"},
        "tensor": {"matrix": np.eye(3).tolist()},
    }
    error = ask("state", body, refused=True)
    assert error["field"].startswith("crystal.cell")
    assert error["hint"]


def test_angles_that_are_exact_stay_exact(ask: Ask) -> None:
    # Zeros that symmetry makes are zeros, not rounding: 90 and 120 degrees have cosines that doubles hold.
    crystal = {"cell": [1e-3, 1e-3, 1e6, 90, 90, 120], "group": "6/mmm"}
    answer = ask("state", {"crystal": crystal, "tensor": {"free": {"11": 1, "33": 2}}})
    M = np.array(answer["frame"]["M"])
    assert np.count_nonzero(M) == 4
    assert answer["matrix"] == [[1, 0, 0], [0, 1, 0], [0, 0, 2]]
