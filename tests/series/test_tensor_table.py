"""Tables of tensors: read in any order and separator, refused with every fault."""

from __future__ import annotations

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.series.tensor_table import read_tensor_table
from app.tensor.kind import build_kind

MONOCLINIC = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")


def test_values_and_uncertainties_are_read_in_any_order() -> None:
    text = "33;22;Temperature;13;11\n15,9(1);24,6(2);300;1,85(6);13,2(1)\n"
    table = read_tensor_table(text, MONOCLINIC, build_kind())
    (state,) = table.states
    assert (state.t, table.variable) == (300.0, "temperature")
    assert state.tensor.estimate.matrix == pytest.approx(np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]))
    assert state.tensor.free_covariance == pytest.approx(np.diag([0.01, 0.0036, 0.04, 0.01]))


def test_every_fault_is_listed_with_its_place() -> None:
    bad = "t,11,13,22,33\n300,1,2,x,4\n310,1(1),2,3,4\n320,1,2,3\n"
    with pytest.raises(InputError) as refused:
        read_tensor_table(bad, MONOCLINIC, build_kind())
    places = [(entry["line"], entry["column"]) for entry in refused.value.detail["problems"]]
    assert places == [(2, "22"), (4, None)]
    with pytest.raises(InputError, match="some values carry"):
        read_tensor_table("t,11,13,22,33\n310,1(1),2,3,4\n", MONOCLINIC, build_kind())
    with pytest.raises(InputError, match="where the first does not"):
        read_tensor_table("t,11,13,22,33\n300,1,2,3,4\n310,1(1),2(1),3(1),4(1)\n", MONOCLINIC, build_kind())


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("t,11,12,13,22,33\n1,1,1,1,1,1\n", "no free cell"),
        ("t,11,13,22\n1,1,1,1\n", "column 33 is missing"),
        ("11,13,22,33\n1,1,1,1\n", "no column names the variable"),
        ("t,11,11,13,22,33\n1,1,1,1,1,1\n", "there twice"),
        ("t,11,13,22,33\n300(1),1,2,3,4\n", "a number alone"),
        ("t,11,13,22,33\n", "a header and no cells"),
        ("", "empty"),
    ],
)
def test_what_is_no_table_of_this_form_is_refused(text: str, words: str) -> None:
    with pytest.raises(InputError, match=words):
        read_tensor_table(text, MONOCLINIC, build_kind())
