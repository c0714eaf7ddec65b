"""Series of cells: which parameters are independent, what is made to obey, what is refused and where."""

from __future__ import annotations

import re

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.series.cell_parameters import find_independent
from app.series.cell_series import CellState, build_cell_series
from app.tensor.form import build_form
from app.tensor.kind import Kind
from tests.crystal.reference import CELLS, SETTINGS, Setting

# By the definition of the lattice systems (International Tables for Crystallography A, Table 2.1.1.1, from memory).
FREE = {
    "triclinic": ["a", "b", "c", "alpha", "beta", "gamma"],
    "monoclinic a": ["a", "b", "c", "alpha"],
    "monoclinic b": ["a", "b", "c", "beta"],
    "monoclinic c": ["a", "b", "c", "gamma"],
    "orthorhombic": ["a", "b", "c"],
    "tetragonal": ["a", "c"],
    "hexagonal": ["a", "c"],
    "rhombohedral": ["a", "alpha"],
    "cubic": ["a"],
}


@pytest.mark.parametrize("setting", SETTINGS, ids=lambda setting: setting.name)
def test_every_group_leaves_the_parameters_of_its_family(setting: Setting) -> None:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
    independent = find_independent(crystal)
    assert independent.names == FREE[setting.family]
    # A cell and a symmetric tensor have as many independent components as each other (Nye, Table 3, from memory).
    assert len(independent.positions) == build_form(crystal, Kind()).count
    assert independent.expand(independent.reduce(np.array(setting.cell))) == pytest.approx(setting.cell, abs=1e-12)


def test_cells_are_made_to_obey_as_a_crystal_is() -> None:
    # The nearest cell by least squares has the mean of equal edges; a crystal of its own is projected in another way.
    rough = (5.1, 5.1004, 7.3, 90.004, 89.997, 120.003)
    series = build_cell_series([CellState(1.0, rough), CellState(2.0, CELLS["hexagonal"])], "6/m")
    wanted = [(5.1 + 5.1004) / 2, (5.1 + 5.1004) / 2, 7.3, 90, 90, 120]
    assert series.cells[0] == pytest.approx(wanted, abs=1e-9)
    assert series.cells[0] == pytest.approx(build_crystal(rough, "6/m").cell.parameters, abs=1e-6)  # type: ignore[union-attr]


def test_cells_within_three_sigma_are_taken() -> None:
    rough = (5.1, 5.13, 7.3, 90.0, 90.0, 90.0)
    with pytest.raises(InputError) as caught:
        build_cell_series([CellState(1.0, CELLS["tetragonal"]), CellState(2.0, rough)], "4/m")
    assert caught.value.field == "states[1].cell"
    assert caught.value.detail["cell"] == pytest.approx([5.115, 5.115, 7.3, 90, 90, 90])
    assert caught.value.detail["change"] == pytest.approx([0.015, -0.015, 0, 0, 0, 0])
    sigma = (0.006, 0.006, 0.001, 0.0, 0.0, 0.0)
    series = build_cell_series([CellState(1.0, CELLS["tetragonal"], sigma), CellState(2.0, rough, sigma)], "4/m")
    assert series.sigma == pytest.approx(np.array([[0.006, 0.001]] * 2))


def test_the_crystals_cell_may_be_missing_or_decides_the_axes() -> None:
    states = [CellState(t, (5.0 + t, 5.0 + t, 5.0 + t, 74.0, 74.0, 74.0)) for t in (0.0, 0.1)]
    for cell in (None, CELLS["rhombohedral"]):
        series = build_cell_series(states, "-3m", cell=cell)
        assert series.independent.names == ["a", "alpha"]
    with pytest.raises(InputError) as caught:
        build_cell_series(states, "-3m", cell=CELLS["hexagonal"])
    assert caught.value.field == "states[0].cell"
    with pytest.raises(InputError) as caught:
        build_cell_series(states, "-3m", cell=CELLS["triclinic"])
    assert caught.value.field == "crystal.cell"


ORTHORHOMBIC = CELLS["orthorhombic"]
SIGMA = (1e-4, 1e-4, 1e-4, 0.0, 0.0, 0.0)


@pytest.mark.parametrize(
    ("states", "group", "more", "field"),
    [
        ([], "mmm", {}, "states"),
        ([CellState(1.0, ORTHORHOMBIC)], "∞m", {}, "crystal.group"),
        ([CellState(1.0, ORTHORHOMBIC)], "∞m", {"cell": ORTHORHOMBIC}, "crystal.group"),
        ([CellState(1.0, ORTHORHOMBIC)], "mmn", {}, "crystal.group"),
        ([CellState(1.0, ORTHORHOMBIC)], "mmm", {"unique_axis": "b"}, "crystal.unique_axis"),
        ([CellState(1.0, ORTHORHOMBIC)], "mmm", {"frame": "x3=c"}, "crystal.frame"),
        ([CellState(1.0, ORTHORHOMBIC)], "mmm", {"cell_sigma": SIGMA}, "crystal.cell_sigma"),
        ([CellState(1.0, ORTHORHOMBIC)], "4/m", {}, "states[0].cell"),
        ([CellState(1.0, ORTHORHOMBIC)], "mmm", {"reference": 2.0}, "reference"),
        ([CellState(1.0, ORTHORHOMBIC), CellState(2.0, (5, 6, -7, 90, 90, 90))], "mmm", {}, "states[1].cell[2]"),
        ([CellState(1.0, ORTHORHOMBIC), CellState(np.inf, ORTHORHOMBIC)], "mmm", {}, "states[1].t"),
        ([CellState(1.0, ORTHORHOMBIC, SIGMA), CellState(2.0, ORTHORHOMBIC)], "mmm", {}, "states[1].sigma"),
        ([CellState(1.0, ORTHORHOMBIC), CellState(2.0, ORTHORHOMBIC, SIGMA)], "mmm", {}, "states[0].sigma"),
        ([CellState(1.0, ORTHORHOMBIC, (1e-4, -1e-4, 0, 0, 0, 0))], "mmm", {}, "states[0].sigma"),
        ([CellState(1.0, ORTHORHOMBIC, (1e-4, 1e-4, 0, 0, 0, 0))], "mmm", {}, "states[0].sigma[2]"),
        ([CellState(1.0, CELLS["monoclinic b"], SIGMA)], "2/m", {}, "states[0].sigma[4]"),
    ],
)
def test_refusals_name_the_place(states: list[CellState], group: str, more: dict[str, object], field: str) -> None:
    with pytest.raises(InputError) as caught:
        build_cell_series(states, group, **more)  # type: ignore[arg-type]
    assert caught.value.field == field
    assert re.search(r"[a-z].*\.$", caught.value.message)


def test_the_reference_is_the_first_state_at_its_t() -> None:
    states = [CellState(t, (5.0, 6.0, 7.0 + t, 90, 90, 90)) for t in (2.0, 1.0, 3.0, 1.0)]
    assert build_cell_series(states, "mmm").reference == 0
    assert build_cell_series(states, "mmm", reference=1.0).reference == 1
    assert build_cell_series([CellState(20 + 273.15, ORTHORHOMBIC)], "mmm", reference=293.15).reference == 0
    with pytest.raises(InputError, match="no state at t") as caught:
        build_cell_series(states, "mmm", reference=2.4)
    assert "nearest is 2" in str(caught.value.hint)
