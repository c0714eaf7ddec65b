"""Published forms, counts, principal axes and interfacial angles: values.toml has each with its source."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import parse_direction
from app.tensor.estimate import Estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.pose import read_pose
from app.tensor.principal import find_principal
from app.tensor.values import compute_values
from tests.crystal.reference import SETTINGS

VALUES = tomllib.loads((Path(__file__).parent / "values.toml").read_text(encoding="utf-8"))
LIMITING = ("∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m")
# Other settings of a class have as many components as it: turned, a tensor keeps its number of them.
CLASSES = {
    **dict.fromkeys(("211", "121", "112"), "2"),
    **dict.fromkeys(("m11", "1m1", "11m"), "m"),
    **dict.fromkeys(("2/m11", "12/m1", "112/m"), "2/m"),
    **dict.fromkeys(("2mm", "m2m"), "mm2"),
    **dict.fromkeys(("321", "312"), "32"),
    **dict.fromkeys(("3m1", "31m"), "3m"),
    **dict.fromkeys(("-3m1", "-31m"), "-3m"),
    "-4m2": "-42m",
    "-62m": "-6m2",
}


def list_crystals() -> list[tuple[str, Crystal]]:
    """Every group in every setting with the class whose count the tables print."""
    crystals = [
        (
            CLASSES.get(setting.symbol, setting.symbol),
            build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis),
        )
        for setting in SETTINGS
    ]
    return crystals + [(symbol, build_crystal(None, symbol)) for symbol in LIMITING]


CRYSTALS = list_crystals()


@pytest.mark.parametrize("table", VALUES["counts"], ids=lambda table: f"{table['parity']} {table['intrinsic']}")
def test_counts_of_all_groups_in_all_settings(table: dict[str, Any]) -> None:
    printed = {group: int(count) for count, groups in table["groups"].items() for group in groups}
    assert len(printed) == 32 + 7
    for name, crystal in CRYSTALS:
        form = build_form(crystal, Kind(table["parity"], table["intrinsic"]))
        assert form.count == printed[name], (crystal.group, table["source"])
        assert len(form.labels) == form.count


def test_a_gyration_tensor_has_15_classes() -> None:
    (table,) = (item for item in VALUES["counts"] if item["parity"] == "axial")
    some = [group for count, groups in table["groups"].items() if count != "0" for group in groups]
    assert len([group for group in some if "∞" not in group]) == 15


@pytest.mark.parametrize("printed", VALUES["forms"], ids=lambda entry: f"{entry['group']} {entry.get('parity', '')}")
def test_forms_as_they_are_printed(printed: dict[str, Any]) -> None:
    group, axis = printed["group"], printed.get("unique_axis")
    if group in LIMITING:
        crystal = build_crystal(None, group)
    else:
        setting = next(item for item in SETTINGS if item.symbol == group and item.unique_axis == axis)
        crystal = build_crystal(setting.cell, group, unique_axis=axis)
    form = build_form(crystal, Kind(printed.get("parity", "polar"), printed.get("intrinsic", "symmetric")))
    words = [word for row in printed["rows"] for word in row.split()]
    letters = sorted({word.strip("-") for word in words} - {"0"})
    assert form.count == len(letters)
    values = dict(zip(letters, (2.3, -0.7, 1.1, 4.2), strict=False))
    cells = [-values[word[1:]] if word.startswith("-") else values.get(word, 0.0) for word in words]
    # Free are the first of each letter in row order.
    first = [words.index(letter) for letter in letters]
    assert list(form.free) == sorted(first)
    found = form.expand(np.array([cells[position] for position in form.free]))
    assert found.ravel() == pytest.approx(cells, abs=1e-14), printed["source"]


def test_nyes_conductivity() -> None:
    example = VALUES["conductivity"]
    principal = find_principal(Estimate(np.array(example["matrix"]), None, "frame"))
    assert principal.values == pytest.approx(example["values"], abs=1e-12)
    for found, axis in zip(principal.axes, example["axes"], strict=True):
        assert abs(found @ np.array(axis)) == pytest.approx(1.0, abs=1e-14)
    assert principal.shape == "biaxial"
    # Mohr's circle in the plane of x2 and x3: centre and radius.
    matrix = np.array(example["matrix"])
    triclinic = build_crystal([5, 6, 7, 81, 97, 104], "1")
    for angle in (0.0, 17.0, 30.0, 75.0, 120.0):
        pose = read_pose({"axis": [1, 0, 0], "angle": angle}, triclinic).matrix
        posed = pose @ matrix @ pose.T
        assert (posed[1, 1] + posed[2, 2]) / 2 == pytest.approx(example["centre"])
        assert np.hypot((posed[1, 1] - posed[2, 2]) / 2, posed[1, 2]) == pytest.approx(example["radius"])


def in_degrees(angle: list[int]) -> float:
    return angle[0] + angle[1] / 60.0


@pytest.mark.parametrize("printed", VALUES["angles"], ids=lambda entry: entry["name"])
def test_interfacial_angles(printed: dict[str, Any]) -> None:
    for frame in ("x3=c x2=b*", "x1=a x3=c*"):
        crystal = build_crystal(printed["cell"], printed["group"], frame=frame)
        first = crystal.resolve(parse_direction(printed["first"]))
        second = crystal.resolve(parse_direction(printed["second"]))
        angle = np.rad2deg(np.arccos(first @ second))
        assert angle == pytest.approx(in_degrees(printed["angle"]), abs=printed["tolerance"] / 60), printed["source"]


def test_the_c_axes_of_a_calcite_twin() -> None:
    twin = VALUES["twin"]
    crystal = build_crystal(twin["cell"], "-3m")
    normal = crystal.resolve(parse_direction(twin["plane"]))
    c = crystal.resolve(parse_direction("[001]"))
    mirrored = c - 2 * normal * (c @ normal)
    angle = np.rad2deg(np.arccos(abs(c @ mirrored)))
    assert angle == pytest.approx(in_degrees(twin["angle"]), abs=twin["tolerance"] / 60)


def test_where_calcite_does_not_expand() -> None:
    printed = VALUES["expansion"]
    crystal = build_crystal(VALUES["twin"]["cell"], "-3m")
    form = build_form(crystal, Kind())
    matrix = form.expand(np.array([printed["across"], printed["along"]]))
    for azimuth in (0.0, 0.7, 2.9):
        for off, sign in ((0.05, -1), (-0.05, 1)):
            polar = np.deg2rad(printed["angle"] + off)
            direction = np.array([np.sin(polar) * np.cos(azimuth), np.sin(polar) * np.sin(azimuth), np.cos(polar)])
            assert np.sign(compute_values(matrix, direction)) == sign
