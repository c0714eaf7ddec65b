"""Tables of cells against a variable: what is read, and where every fault is."""

from __future__ import annotations

import pytest

from app.crystal.cell_locks import list_cell_locks
from app.crystal.crystal import build_crystal
from app.errors import InputError
from app.series.series_table import read_cell_table
from tests.crystal.reference import CELLS


def test_a_plain_table() -> None:
    table = read_cell_table(
        "# invented\nt,a,b,c,alpha,beta,gamma\n\n80,5.10,6.2,7.3,90,103.8,90\n300, 5.11 ,6.21,7.31,90,103.9,90\n"
    )
    assert [state.t for state in table.states] == [80.0, 300.0]
    assert table.states[1].cell == (5.11, 6.21, 7.31, 90.0, 103.9, 90.0)
    assert table.states[0].sigma is None
    assert table.line_numbers == (4, 5)
    assert table.variable == "t"


@pytest.mark.parametrize(
    "text",
    [
        "Temperature;γ;a;b;c;α;β\n80;90;5,1003(2);6,2001(4);7,3002(2);90;103,85(1)\n",
        "Temperature\tgamma\ta\tb\tc\talpha\tbeta\r\n80\t90\t5.1003(2)\t6.2001(4)\t7.3002(2)\t90\t103.85 ± 0.01",
        'temperature,gamma,a,b,c,alpha,beta\n80,90,5.1003(2),"6.2001(4)",7.3002(2),90,103.85(1)\n',
        "\ufeffwavelength,gamma,a,a_sigma,b,c,alpha,beta,beta_sigma\r80,90,5.1003,2e-4,6.2001(4),7.3002(2),90,103.85,0.01",
    ],
)
def test_separators_commas_and_uncertainties(text: str) -> None:
    table = read_cell_table(text)
    assert table.variable == ("wavelength" if "wave" in text else "temperature")
    assert table.states[0].cell == (5.1003, 6.2001, 7.3002, 90.0, 103.85, 90.0)
    assert table.states[0].sigma == pytest.approx((2e-4, 4e-4, 2e-4, 0, 0.01, 0))


@pytest.mark.parametrize(
    ("family", "group", "text", "cell"),
    [
        ("tetragonal", "4/m", "t,c,a\n1,7.3,5.1\n", (5.1, 5.1, 7.3, 90, 90, 90)),
        ("hexagonal", "6", "t,a,c\n1,5.1,7.3\n", (5.1, 5.1, 7.3, 90, 90, 120)),
        ("rhombohedral", "-3m", "t,a,alpha\n1,5.1,74.2\n", (5.1, 5.1, 5.1, 74.2, 74.2, 74.2)),
        ("cubic", "m-3m", "t,a\n1,5.1\n", (5.1,) * 3 + (90,) * 3),
        ("monoclinic b", "2/m", "t,a,b,c,beta\n1,5.1,6.2,7.3,104\n", (5.1, 6.2, 7.3, 90, 104, 90)),
    ],
)
def test_columns_that_symmetry_holds_may_be_missing(family: str, group: str, text: str, cell: tuple[float]) -> None:
    assert read_cell_table(text, list_cell_locks(build_crystal(CELLS[family], group))).states[0].cell == cell
    with pytest.raises(InputError, match="is missing"):
        read_cell_table(text)


def test_a_missing_free_column_is_refused_whatever_the_group() -> None:
    with pytest.raises(InputError) as caught:
        read_cell_table("t,a\n1,5.1\n", list_cell_locks(build_crystal(CELLS["hexagonal"], "6")))
    assert caught.value.detail["problems"] == [{"line": 1, "column": "c", "reason": "the column c is missing."}]


def test_every_fault_has_its_line_and_column() -> None:
    text = (
        "t,a,b,c,alpha,beta,gamma\n"
        "80,5.1,6.2,7.3,90,103.8,90\n"
        "90,5.1,x,7.3,90,,90\n"
        "100,5.1,6.2,7.3,90,103.8\n"
        "110(1),5.1,6.2,7.3,90,103.8,90\n"
    )
    with pytest.raises(InputError) as caught:
        read_cell_table(text)
    found = [(problem["line"], problem["column"]) for problem in caught.value.detail["problems"]]
    assert found == [(3, "b"), (3, "beta"), (4, None), (5, "t")]
    assert caught.value.detail["count"] == 4
    assert "4 problems, the first in line 3, b" in caught.value.message


@pytest.mark.parametrize(
    ("text", "line", "column"),
    [
        ("a,b,c,alpha,beta,gamma\n1,1,1,90,90,90\n", 1, None),
        ("t,pressure,a,b,c,alpha,beta,gamma\n1,1,1,1,1,90,90,90\n", 1, None),
        ("t,a,b,c,alpha,beta,gama\n1,1,1,1,90,90,90\n", 1, "gama"),
        ("t,a,a,b,c,alpha,beta,gamma\n1,1,1,1,1,90,90,90\n", 1, "a"),
        ("t,α,alpha,a,b,c,beta,gamma\n1,90,90,1,1,1,90,90\n", 1, "alpha"),
        ("t,a,b,c,alpha,beta,gamma\n1,1,1,1,90,90,\n", 2, "gamma"),
        ("t,a,b,c,alpha,beta,gamma\n1,1,1,1,90,90,90,7\n", 2, None),
        ("t,a,b,c,alpha,beta,gamma\n1,1,1,1,90,90,nan\n", 2, "gamma"),
        ("t,a,b,c,alpha,beta,gamma,a_sigma\n1,1,1,1,90,90,90,-1\n", 2, "a_sigma"),
        ("t,a,b,c,alpha,beta,gamma,a_sigma\n1,1.0(1),1,1,90,90,90,0.1\n", 2, "a_sigma"),
        ("t,a_sigma,a,b,c,alpha,beta,gamma\n1,0.1,1.0(1),1,1,90,90,90\n", 2, "a"),
        ("t,a_sigma,a,b,c,alpha,beta,gamma\n1,0.1(1),1.0,1,1,90,90,90\n", 2, "a_sigma"),
        ('t,a,b,c,alpha,beta,gamma\n1,"1,1,1,90,90,90\n', 2, None),
    ],
)
def test_faults(text: str, line: int, column: str | None) -> None:
    with pytest.raises(InputError) as caught:
        read_cell_table(text)
    first = caught.value.detail["problems"][0]
    assert (first["line"], first["column"]) == (line, column)


@pytest.mark.parametrize(
    "text", ["", "\n# only a comment\n", "t,a,b,c,alpha,beta,gamma\n", "t\x00,a\n", "x" * 5_000_000]
)
def test_what_is_no_table(text: str) -> None:
    with pytest.raises(InputError):
        read_cell_table(text)
