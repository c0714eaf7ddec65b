"""Cells against temperature from CIFs; the texts are invented."""

from __future__ import annotations

import pytest

from app.errors import InputError
from app.series.cell_series import build_cell_series
from app.series.cif_series import read_cif_series

TEXT = """data_{name}
_cell_length_a {a}
_cell_length_b 6.41{sigma}
_cell_length_c 7.27{sigma}
_cell_angle_alpha 90
_cell_angle_beta 107.4{sigma}
_cell_angle_gamma 90
_space_group_name_H-M_alt '{group}'
{temperature}
"""


def write(a: str, kelvin: str | None, *, sigma: str = "(1)", group: str = "P 1 21/c 1", name: str = "invented") -> str:
    temperature = "" if kelvin is None else f"_diffrn_ambient_temperature {kelvin}"
    return TEXT.format(a=a, name=name, sigma=sigma, group=group, temperature=temperature)


def test_cells_and_temperatures() -> None:
    found = read_cif_series([write("9.83(2)", "293(2)"), write("9.79(1)", "100")])
    assert [state.t for state in found.states] == [293.0, 100.0]
    assert found.states[1].cell == (9.79, 6.41, 7.27, 90.0, 107.4, 90.0)
    assert found.states[0].sigma == pytest.approx((0.02, 0.01, 0.01, 0, 0.1, 0))
    series = build_cell_series(found.states, found.group, unique_axis=found.unique_axis, frame=found.frame)
    assert series.independent.names == ["a", "b", "c", "beta"]
    assert any(note.startswith("CIF 2: ") for note in found.notes)


def test_uncertainties_of_some_are_left_out_of_all() -> None:
    found = read_cif_series([write("9.83(2)", "293"), write("9.79", "100")])
    assert [state.sigma for state in found.states] == [None, None]
    assert "1 of 2 CIFs" in found.notes[-1]


@pytest.mark.parametrize(
    ("texts", "field"),
    [
        ([], "cifs"),
        ([write("9.83", "293"), write("9.79", None)], "cifs[1]"),
        ([write("9.83", "293"), write("9.79", "100", group="P 1 2/m 1")], "cifs[1]"),
        (["nothing"], "cifs[0].text"),
    ],
)
def test_refusals(texts: list[str], field: str) -> None:
    with pytest.raises(InputError) as caught:
        read_cif_series(texts)
    assert caught.value.field == field
