from __future__ import annotations

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.crystal.direction import Direction, parse_direction
from app.errors import InputError
from app.readings.fit import fit_readings
from app.readings.report import describe_direction, describe_symmetry_test, print_fit
from app.tensor.kind import Kind
from tests.readings.builders import MONOCLINIC, MONOCLINIC_MATRIX, TETRAGONAL, TRICLINIC, along, mixed_readings


def test_a_direction_says_what_it_is() -> None:
    assert describe_direction(parse_direction("(-2 0 1)")) == "n(−201)"
    assert describe_direction(parse_direction("[10 0 -1]")) == "[10 0 −1]"
    assert describe_direction(Direction("vector", (0.0, -0.5, 1.0))) == "(0, −0.5, 1) in the crystal frame"
    assert describe_direction(Direction("specimen", (0.0, 0.0, 1.0))) == "(0, 0, 1) in the specimen frame"


def test_the_report_has_the_frame_before_the_numbers() -> None:
    readings = mixed_readings(np.random.default_rng(31), MONOCLINIC_MATRIX, 14, ["along"], 0.05, sigma=0.05)
    fit = fit_readings(MONOCLINIC, Kind(), readings, unit="W/(m·K)")
    report = print_fit(MONOCLINIC, fit, readings=readings)
    assert report.index("x3 along c") < report.index("Tensor in the crystal frame, W/(m·K)")
    assert report.count("\n  along") == 14
    with pytest.raises(InputError, match="not those that were fitted"):
        print_fit(MONOCLINIC, fit, readings=readings[:3])


def test_an_undetermined_axis_is_not_printed_as_a_vector() -> None:
    readings = [along("[100]", 6.2, sigma=0.1), along("[001]", 10.7, sigma=0.1), along("[101]", 7.9, sigma=0.1)]
    fit = fit_readings(TETRAGONAL, Kind(), readings)
    report = print_fit(TETRAGONAL, fit)
    assert report.count("any direction in the plane across the third axis") == 2


def test_the_symmetry_sentence_never_confirms() -> None:
    rng = np.random.default_rng(32)
    fair = mixed_readings(rng, MONOCLINIC_MATRIX, 30, ["along"], 0.05, sigma=0.05)
    broken = MONOCLINIC_MATRIX + np.array([[0, 2.0, 0], [2.0, 0, 0], [0, 0, 0]])
    unfair = mixed_readings(rng, broken, 30, ["along"], 0.05, sigma=0.05)
    sentences = [
        describe_symmetry_test(MONOCLINIC, fit_readings(MONOCLINIC, Kind(), readings)) for readings in (fair, unfair)
    ]
    assert "do not contradict 2/m" in sentences[0]
    assert "cannot confirm" in sentences[0]
    assert "contradict 2/m as it is oriented here" in sentences[1]
    assert "do not" not in sentences[1]
    free = fit_readings(TRICLINIC, Kind(), fair)
    assert "restricts nothing" in describe_symmetry_test(TRICLINIC, free)
    orthorhombic = build_crystal([5, 6, 7, 90, 90, 90], "mmm")
    blind = [along(text, 1.0, sigma=0.1) for text in ("[100]", "[010]", "[001]", "[001]")]
    told = describe_symmetry_test(orthorhombic, fit_readings(orthorhombic, Kind(), blind))
    assert "cannot tell" in told
