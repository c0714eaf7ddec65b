"""The catalogue: kinds of tensor from memory (textbooks of crystal physics); plate and bar from invented numbers."""

from __future__ import annotations

import re

import numpy as np
import pytest

from app.catalogue.listing import find_property, list_properties
from app.catalogue.units import check_unit, compose_unit, find_factor, print_unit
from app.errors import InputError
from app.readings.reading import READING_KINDS

KEYS = [
    "thermal_conductivity", "thermal_resistivity", "electrical_conductivity", "electrical_resistivity", "diffusivity",
    "permittivity", "impermeability", "thermal_expansion", "magnetic_susceptibility", "thermopower", "peltier",
    "gyration", "stress", "strain", "other",
]  # fmt: skip


def test_all_are_there_once() -> None:
    assert [entry.key for entry in list_properties()] == KEYS


def test_kinds_of_tensor() -> None:
    # From memory: thermoelectric tensors have no symmetry of their own, gyration is the one axial tensor here.
    assert {entry.key for entry in list_properties() if entry.intrinsic == "general"} == {"thermopower", "peltier"}
    assert {entry.key for entry in list_properties() if entry.parity == "axial"} == {"gyration"}
    assert {entry.key for entry in list_properties() if entry.is_field} == {"stress", "strain"}
    assert [entry.key for entry in list_properties() if entry.own_unit] == ["other"]


def test_inverse_partners_are_mutual_and_their_units_cancel() -> None:
    for entry in list_properties():
        if entry.inverse is None:
            continue
        partner = find_property(entry.inverse)
        assert partner.inverse == entry.key
        assert find_factor(f"({entry.unit.text})*({partner.unit.text})", "1") == 1.0
        assert entry.sign_limit.rule == partner.sign_limit.rule


def test_positive_definite_ones() -> None:
    # From memory: transport and static permittivity by thermodynamics; expansion and susceptibility take any sign.
    positive = {entry.key for entry in list_properties() if entry.sign_limit.rule == "positive definite"}
    assert positive == set(KEYS[:7])
    assert all((entry.sign_limit.when == "static") == (entry.symbol in "εB") for entry in list_properties()[:7])


def test_plate_and_bar() -> None:
    # Invented data (6.2 across c, 10.7 along c, cut at 45°); the answers 8.45 and 7.850888 were computed apart from
    # this project.
    conductivity = np.diag([6.2, 6.2, 10.7])
    normal = np.array([1, 0, 1]) / np.sqrt(2)

    def measure(kind: str | None, tensor: np.ndarray) -> float:
        assert kind in {"along", "rod"}
        if kind == "along":
            return float(normal @ tensor @ normal)
        return float(1 / (normal @ np.linalg.inv(tensor) @ normal))

    resistivity = np.linalg.inv(conductivity)
    for flowing, resisting in (
        ("thermal_conductivity", "thermal_resistivity"),
        ("electrical_conductivity", "electrical_resistivity"),
        ("permittivity", "impermeability"),
    ):
        first, second = find_property(flowing), find_property(resisting)
        assert measure(first.plate, conductivity) == pytest.approx(8.45, abs=5e-7)
        assert measure(second.plate, resistivity) == pytest.approx(1 / 8.45, abs=1e-8)
        if flowing != "permittivity":
            assert measure(first.long_bar, conductivity) == pytest.approx(7.850888, abs=5e-7)
            assert measure(second.long_bar, resistivity) == pytest.approx(1 / 7.850888, abs=1e-8)


def test_reading_kinds_exist_and_need_symmetric_tensors() -> None:
    for entry in list_properties():
        for kind in (entry.plate, entry.long_bar, entry.four_corner):
            assert kind is None or kind in READING_KINDS
            assert kind in {None, "along"} or entry.intrinsic == "symmetric"
        if entry.four_corner == "sheet":
            assert entry.long_bar == "rod", "sheet is defined of a conductivity-like tensor"
        if entry.is_field:
            assert (entry.plate, entry.long_bar, entry.four_corner) == (None, None, None)


def test_units_are_readable_and_printed_as_the_printer_prints() -> None:
    for entry in list_properties():
        assert entry.own_unit or entry.units[0] == entry.unit
        for unit in (entry.unit, *entry.units):
            assert compose_unit(unit.text) == compose_unit(unit.printed) == unit.printed
            assert print_unit(unit.text) == print_unit(unit.printed) == unit.printed
            check_unit(entry.key, unit.text)
        assert len({unit.printed for unit in entry.units}) == len(entry.units)


def test_sentences() -> None:
    for entry in list_properties():
        assert entry.sign_limit.sentence.endswith(".")
        assert entry.sign_limit.source in {"common practice", "from memory"}
        assert entry.note == "" or entry.note.endswith((".", "conductivity κ. Peltier: Π = T Sᵀ."))
        assert re.fullmatch("[a-z_]+", entry.key)


@pytest.mark.parametrize("key", ["thermal_conductivity", "Thermal Conductivity", " thermal-conductivity "])
def test_find(key: str) -> None:
    assert find_property(key).key == "thermal_conductivity"


@pytest.mark.parametrize(
    ("key", "near"),
    [("thermal_conductivty", "thermal_conductivity"), ("expansion", "thermal_expansion"), ("zzz", "Known: thermal_")],
)
def test_find_suggests(key: str, near: str) -> None:
    with pytest.raises(InputError) as caught:
        find_property(key)
    assert caught.value.field == "property"
    assert near in str(caught.value.hint)
