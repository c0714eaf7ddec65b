"""Planes and rows near an answer: sets of equivalents by groups written down by hand, distances by brute force."""

from __future__ import annotations

from itertools import product
from math import gcd

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.crystal.direction import parse_direction
from app.cutting.level import EVERYWHERE, NOWHERE
from app.cutting.nearby import list_nearby
from app.cutting.seek import Condition, seek
from app.tensor.kind import Kind
from app.tensor.tensor import build_tensor
from tests.crystal.reference import SETTINGS, Setting, close_group

RANDOM = np.random.default_rng(24)

Triple = tuple[int, int, int]


def draw_tensor(crystal, parity: str) -> np.ndarray:  # type: ignore[no-untyped-def]
    matrix = RANDOM.normal(size=(3, 3))
    return build_tensor(crystal, Kind(parity), matrix=matrix + matrix.T).estimate.matrix  # type: ignore[arg-type]


def read(text: str) -> Triple:
    first, second, third = parse_direction(text).values
    return int(first), int(second), int(third)


def list_all(limit: int) -> list[Triple]:
    return [t for t in product(range(-limit, limit + 1), repeat=3) if gcd(*map(abs, t)) == 1]


def list_orbits(setting: Setting, kind: str, limit: int, proper: bool) -> list[set[Triple]]:
    """Sets of equivalent indices, ± among them, of all triples up to a limit."""
    operations = [w for w in close_group(setting.matrices) if not proper or np.linalg.det(w) > 0]
    if kind == "normal":
        operations = [np.linalg.inv(w).T for w in operations]
    left = set(list_all(limit))
    orbits = []
    while left:
        start = min(left)
        images = [np.rint(w @ np.array(start)).astype(int) for w in operations]
        orbit = {(int(i), int(j), int(k)) for image in images for i, j, k in (image, -image)}
        orbits.append(orbit)
        left -= orbit
    return orbits


@pytest.mark.parametrize("setting", SETTINGS, ids=lambda setting: setting.name)
@pytest.mark.parametrize("kind", ["row", "normal"])
def test_one_of_each_set_of_equivalents(setting: Setting, kind: str) -> None:
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
    for parity in ("polar", "axial"):
        tensor = draw_tensor(crystal, parity)
        # An axial tensor changes its sign under improper operations; where it vanishes nothing tells them apart.
        proper = parity == "axial" and bool(np.any(np.abs(tensor) > 1e-9))
        orbits = list_orbits(setting, kind, 2, proper)
        found = list_nearby(crystal, EVERYWHERE, [Condition(tensor, 0.0)], kind, 90, 2)  # type: ignore[arg-type]
        listed = [read(entry.text) for entry in found]
        assert len(listed) == len(orbits)
        for orbit in orbits:
            assert sum(triple in orbit for triple in listed) == 1
        assert all(entry.off == 0 for entry in found)


def test_two_conditions_keep_what_both_keep() -> None:
    # In -42m a polar tensor is kept by all, an axial one by the proper operations alone.
    crystal = build_crystal([5.1, 5.1, 7.3, 90, 90, 90], "-42m")
    polar, axial = Condition(np.diag([2.0, 2.0, 3.0]), 2.5), Condition(np.diag([1.0, -1.0, 0]), 0.0)

    def texts(*conditions: Condition) -> set[str]:
        return {entry.text for entry in list_nearby(crystal, EVERYWHERE, conditions, "normal", 90, 1)}

    assert texts(polar) == {"(1 0 0)", "(0 0 1)", "(1 1 0)", "(1 0 1)", "(1 1 1)"}
    # (100) and (010) show values of unlike sign, and so do (101) and (011); the half-turn about a joins (110), (1-10).
    assert texts(axial) == texts(polar) | {"(0 1 0)", "(0 1 1)"}
    assert texts(polar, axial) == texts(axial)


def test_distances_values_and_order_by_brute_force() -> None:
    # A cone sampled 400,000 times in closed form, all indices up to 3, and what is within 4°.
    crystal = build_crystal([5.1, 6.2, 7.3, 81, 97, 104], "-1")
    for _ in range(4):
        tensor = draw_tensor(crystal, "polar")
        values, axes = np.linalg.eigh(tensor)
        target = float(RANDOM.uniform(values[0], values[1]))
        found = seek([Condition(tensor, target)])
        d = values - target
        turns = np.linspace(0, 2 * np.pi, 400_001)
        cone = np.stack(
            [np.ones_like(turns) / np.sqrt(-d[0]), np.cos(turns) / np.sqrt(d[1]), np.sin(turns) / np.sqrt(d[2])], axis=1
        )
        cone = cone / np.linalg.norm(cone, axis=1, keepdims=True) @ axes.T
        for kind, brackets in (("row", "[]"), ("normal", "()")):
            near = list_nearby(crystal, found.locus, found.conditions, kind, 4.0, 3)  # type: ignore[arg-type]
            listed = {read(entry.text): entry for entry in near}
            assert [entry.off for entry in near] == sorted(entry.off for entry in near)
            expected = 0
            for triple in list_all(3):
                text = f"{brackets[0]}{triple[0]} {triple[1]} {triple[2]}{brackets[1]}"
                vector = crystal.resolve(parse_direction(text))
                nearest = cone[np.argmax(np.abs(cone @ vector))]
                off = np.rad2deg(np.arctan2(np.linalg.norm(np.cross(nearest, vector)), abs(nearest @ vector)))
                if triple in listed:
                    assert listed[triple].off == pytest.approx(off, abs=1e-3)
                    assert listed[triple].off <= off + 1e-9
                    assert listed[triple].values == pytest.approx([vector @ tensor @ vector])
                expected += off < 4.0
            assert len(listed) * 2 == expected


def test_distances_to_lines() -> None:
    crystal = build_crystal([12.214, 3.0371, 5.7981, 90, 103.83, 90], "2/m")
    tensor = np.array([[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]])
    found = seek([Condition(tensor, "max")])
    rows = list_nearby(crystal, found.locus, found.conditions, "row")
    assert rows[0].text == "[0 1 0]"
    assert rows[0].off == pytest.approx(0, abs=1e-9)
    assert rows[0].values == pytest.approx([24.6])
    found = seek([Condition(tensor, "min")])
    # By hand: the principal angle in (010), and the angles of rows with it.
    psi = np.rad2deg(np.arctan2(2 * 1.85, 15.9 - 13.2)) / 2 - 90
    for entry in list_nearby(crystal, found.locus, found.conditions, "normal", 10, 4):
        vector = crystal.resolve(parse_direction(entry.text))
        if abs(vector[1]) < 1e-12:
            angle = abs(np.rad2deg(np.arctan2(vector[0], vector[2])) - psi) % 180
            assert entry.off == pytest.approx(min(angle, 180 - angle), abs=1e-9)


def test_distances_to_two_planes_and_to_a_plane() -> None:
    crystal = build_crystal([5.1, 6.2, 7.3, 90, 90, 90], "mmm")
    # By hand: x² = z², two planes at 45°; the distance of n is |asin (x ∓ z)/√2|.
    found = seek([Condition(np.diag([1.0, 0.0, -1.0]), 0.0)])
    for entry in list_nearby(crystal, found.locus, found.conditions, "row", 90, 3):
        x, _, z = crystal.resolve(parse_direction(entry.text))
        wanted = np.rad2deg(np.arcsin(np.abs(np.array([x - z, x + z]) / np.sqrt(2))))
        assert entry.off == pytest.approx(np.min(wanted), abs=1e-9)
    found = seek([Condition(np.diag([1.0, 1.0, -1.0]), "max")])
    for entry in list_nearby(crystal, found.locus, found.conditions, "row", 90, 3):
        assert entry.off == pytest.approx(np.rad2deg(np.arcsin(abs(crystal.resolve(parse_direction(entry.text))[2]))))


def test_calcite_like_rows_and_planes() -> None:
    # Worked number (W2): invented data; the answer was computed apart from this project: 64.628017 from c, and n(012)
    # 63.133678 with 0.628803, so 1.494339 apart; [-441] at 63.733862 with 0.373205, so 0.894155 apart.
    crystal = build_crystal([4.990, 4.990, 17.061, 90, 90, 120], "-3m")
    found = seek([Condition(np.diag([-5.6, -5.6, 24.9]), 0.0)])
    planes = list_nearby(crystal, found.locus, found.conditions, "normal")
    entry = next(entry for entry in planes if entry.text in ("(0 1 2)", "(1 0 -2)"))
    assert entry.off == pytest.approx(1.494339, abs=1e-6)
    assert entry.values == pytest.approx([0.628803], abs=5.1e-7)
    rows = list_nearby(crystal, found.locus, found.conditions, "row", 1.0, 4)
    # No operation of -3m brings [-441] to [4-41], which has the same value all the same.
    assert {entry.text for entry in rows} == {"[-4 4 1]", "[4 -4 1]"}
    for entry in rows:
        assert entry.off == pytest.approx(0.894155, abs=1e-6)
        assert entry.values == pytest.approx([0.373205], abs=5.1e-7)


def test_no_cell_or_no_answer() -> None:
    conditions = [Condition(np.diag([1.0, 1.0, 2.0]), 1.5)]
    assert list_nearby(build_crystal(None, "∞/mm"), EVERYWHERE, conditions, "row", 90) == []
    cubic = build_crystal([4, 4, 4, 90, 90, 90], "m-3m")
    assert list_nearby(cubic, NOWHERE, conditions, "row", 90) == []


def test_simple_indices_lead_among_equally_near_ones() -> None:
    cubic = build_crystal([4, 4, 4, 90, 90, 90], "m-3m")
    found = list_nearby(cubic, EVERYWHERE, [Condition(3 * np.eye(3), 3.0)], "row", 0, 2)
    assert [entry.text for entry in found] == ["[1 0 0]", "[1 1 0]", "[1 1 1]", "[2 1 0]", "[2 1 1]", "[2 2 1]"]
