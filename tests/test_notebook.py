"""``import app`` from a notebook."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest

import app
from app.errors import InputError
from tests.examples import EXAMPLES


def test_the_main_job_in_a_few_lines() -> None:
    crystal = app.read_crystal(EXAMPLES / "invented_monoclinic.cif")
    table = app.read_readings(EXAMPLES / "readings.csv")
    fit = app.fit_readings(crystal, table.readings, unit=table.unit)
    assert fit.determined
    assert fit.estimate is not None
    assert fit.estimate.unit == "W/(m·K)"
    pose = app.define_pose(crystal, {"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]})
    turned = fit.estimate.turn(pose.matrix, "x y z")
    assert np.trace(turned.matrix) == pytest.approx(np.trace(fit.estimate.matrix))
    assert "Principal values" in app.print_fit(crystal, fit, readings=table.readings, pose=pose)
    tensor = app.define_tensor(crystal, free={"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9})
    assert tensor.estimate.matrix[2, 0] == 1.85


def test_several_blocks_are_not_chosen_in_silence(tmp_path) -> None:
    block = (
        "data_{0}\n_cell_length_a 5\n_cell_length_b 5\n_cell_length_c 7\n_cell_angle_alpha 90\n_cell_angle_beta 90\n"
        "_cell_angle_gamma 90\n_space_group_name_H-M_alt 'P 4'\n"
    )
    path = tmp_path / "two.cif"
    path.write_text(block.format("one") + block.format("two"))
    with pytest.raises(InputError, match="one, two"):
        app.read_crystal(path)
    assert app.read_crystal(path, block="two").group.symbol == "P 4"


def test_unknown_names_are_attribute_errors() -> None:
    with pytest.raises(AttributeError, match="no attribute 'fits'"):
        app.fits  # noqa: B018


def test_importing_the_package_alone_loads_nothing_heavy() -> None:
    code = "import app, sys; print(sorted({'numpy', 'scipy', 'fastapi', 'pint', 'gemmi'} & set(sys.modules)))"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    assert found.stdout.strip() == "[]"
