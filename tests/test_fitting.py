"""The command ``halfturn fit`` and its exit statuses."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from app import cli
from tests.examples import EXAMPLES

CIF = EXAMPLES / "invented_monoclinic.cif"
READINGS = EXAMPLES / "readings.csv"
CRYSTAL = ["--cell", "9.83 6.41 7.27 90 107.4 90", "--group", "2/m"]
# The tensor from which the invented readings were drawn, in the order 11, 13, 22, 33.
TRUE = np.array([13.20, 1.85, 24.6, 15.90])


def run(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    status = cli.main(["fit", *arguments])
    out, err = capsys.readouterr()
    return status, out, err


def test_a_cif_and_a_table_become_a_tensor(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, "--cif", str(CIF), "--readings", str(READINGS), "--property", "thermal_conductivity")
    assert status == 0
    assert "x3 along c, x2 along b*, x1 = x2 × x3" in out
    assert "Tensor in the crystal frame, W/(m·K)" in out
    assert "Symmetry: the readings do not contradict P 1 21/n 1" in out
    assert "they cannot confirm it" in out
    assert "χ² = " in out


def test_json_is_the_answer_of_the_call_and_near_the_truth(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, "--cif", str(CIF), "--readings", str(READINGS), "--json")
    assert status == 0
    answer = json.loads(out)
    assert answer["free"] == ["11", "13", "22", "33"]
    deviation = np.array(answer["values"]) - TRUE
    # χ² of the four cells against the tensor that the readings were drawn from: 18.5 is its 99.9 % point.
    assert deviation @ np.linalg.solve(np.array(answer["covariance"]), deviation) < 18.5
    assert answer["unit"] == "W/(m·K)"


def test_cell_and_group_and_a_pose(capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, *CRYSTAL, "--readings", str(READINGS), "--pose", "z=(-2 0 1) x=[0 1 0]")
    assert status == 0
    assert "Tensor in the specimen frame" in out
    as_json = json.dumps({"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]})
    _, same, _ = run(capsys, *CRYSTAL, "--readings", str(READINGS), "--pose", as_json)
    assert same == out


def test_readings_that_do_not_determine_end_with_status_1(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    table = tmp_path / "few.csv"
    table.write_text("kind,direction,value\nalong,[100],13\nalong,[010],24\nalong,[001],15\n")
    status, _, err = run(capsys, *CRYSTAL, "--readings", str(table))
    assert status == 1
    assert "do not determine the tensor" in err
    # By hand: 33 is seen along c; along a, at β from c, 11 sin²β + 2·13 sinβ cosβ is, so 11 = −2·13/tan β is not.
    assert "the change of 11 by +0.405 with 13 by +0.646; a reading along" in err


BAD: dict[str, tuple[list[str], str]] = {
    "no crystal": (["--readings", str(READINGS)], "--group"),
    "both": (["--cif", str(CIF), "--group", "2/m", "--readings", str(READINGS)], "--cif"),
    "no such file": ([*CRYSTAL, "--readings", "nowhere.csv"], "nowhere.csv"),
    "a wrong cell": (["--cell", "1 2 3", "--group", "1", "--readings", str(READINGS)], "cell"),
    "a wrong pose": ([*CRYSTAL, "--readings", str(READINGS), "--pose", "z=up"], "--pose"),
    "a wrong batch": ([*CRYSTAL, "--readings", str(READINGS), "--batch", "one"], "--batch"),
    "another property's unit": ([*CRYSTAL, "--readings", str(READINGS), "--property", "permittivity"], "W/(m·K)"),
    "a field": ([*CRYSTAL, "--readings", str(READINGS), "--property", "stress"], "--property"),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_input_ends_with_status_2_and_a_sentence(capsys: pytest.CaptureFixture[str], name: str) -> None:
    arguments, shown = BAD[name]
    status, out, err = run(capsys, *arguments)
    assert status == 2
    assert out == ""
    assert err.startswith("halfturn: ")
    assert shown in err


def test_bad_rows_are_told_all_at_once(capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    table = tmp_path / "bad.csv"
    table.write_text("kind,direction,value\nalong,[100],x\nalong,{010},24\n")
    status, _, err = run(capsys, *CRYSTAL, "--readings", str(table))
    assert status == 2
    assert "line 2, value" in err
    assert "line 3, direction" in err
