"""Any text whatever is read, or refused with an InputError, within a second; what is printed is read back the same."""

from __future__ import annotations

import string
import time
from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from app.crystal.cell_locks import list_cell_locks
from app.crystal.cif import read_cif
from app.crystal.cif_writing import write_cif
from app.crystal.crystal import build_crystal
from app.crystal.direction import Direction, format_indices, parse_direction
from app.crystal.frame import list_letter_rules, parse_frame_rule
from app.crystal.group import find_group
from app.errors import InputError
from app.readings.reading import Reading
from app.readings.table import read_table, write_table
from app.readings.table_cells import read_direction_cell, write_direction_cell
from app.series.series_table import read_cell_table
from app.series.tensor_table import read_tensor_table
from app.tensor.kind import Kind
from app.tensor.printing import parse_value, print_value
from tests.fuzz import seeds
from tests.fuzz.mutations import FRAMES, GROUPS, mutate_long_text

LONGEST = 1.0
MONOCLINIC = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
quick = settings(max_examples=150, deadline=None, derandomize=True, suppress_health_check=list(HealthCheck))

# Text that looks like the thing, so that it comes further than the first character.
index_text = st.text(alphabet="[](){}<>0123456789 -+./,;eE̅̄−–²½٣１∞abc", max_size=30)
group_text = st.text(alphabet="PRICFABabcnd1234560-/mM:H ∞inf_̄", max_size=16)
frame_text = st.text(alphabet="x123=abc* []()-01 ,;e", max_size=40)


def reads(read: Callable[..., Any], *given_text: Any) -> Any:
    """What is read, or None where it is refused."""
    begun = time.process_time()
    try:
        return read(*given_text)
    except InputError as error:
        if not error.message.strip():
            pytest.fail("refused without a word")
        return None
    finally:
        assert time.process_time() - begun < LONGEST


@quick
@given(st.one_of(index_text, st.text(max_size=300)))
@example("[1/0 0 1]")
@example("[² 0 1]")
@example("[1 0 1̄]")
@example("(1e-320 1 0)")
@example("[1e308/1e-308 1 0]")
@example("[1e308 1e308 -2e308 1]")
@example("[1/1" + "0" * 400 + " 0 1]")
def test_any_text_is_a_direction_or_refused(text: str) -> None:
    direction = reads(parse_direction, text)
    reads(read_direction_cell, text)
    if direction is not None:
        assert np.all(np.isfinite(direction.values))
        assert any(direction.values)
        assert direction.kind == ("row" if text.strip()[0] == "[" else "normal")


@quick
@given(
    st.lists(st.one_of(st.integers(-1000, 1000), st.floats(-1e8, 1e8, allow_subnormal=False)), min_size=3, max_size=3),
    st.sampled_from(["row", "normal"]),
)
def test_printed_indices_are_read_back_the_same(indices: list[float], kind: Any) -> None:
    if not any(indices):
        return
    back = parse_direction(format_indices(kind, indices))
    assert back.kind == kind
    assert back.values == tuple(float(index) for index in indices)


@quick
@given(
    st.lists(st.floats(-1e6, 1e6, allow_subnormal=False), min_size=3, max_size=3),
    st.sampled_from(["vector", "specimen", "row", "normal"]),
)
def test_a_written_cell_of_the_table_is_read_back_the_same(values: list[float], kind: Any) -> None:
    if not any(values):
        return
    direction = Direction(kind, (values[0], values[1], values[2]))
    back = read_direction_cell(write_direction_cell(direction))
    assert (back.kind, back.values) == (kind, direction.values)


@quick
@given(
    st.one_of(group_text, st.text(max_size=80), st.sampled_from(GROUPS)),
    st.sampled_from([None, "a", "b", "c", "d"]),
    st.booleans(),
)
def test_any_text_is_a_group_or_refused(text: str, unique_axis: str | None, rhombohedral: bool) -> None:
    group = reads(find_group, text, unique_axis, rhombohedral)
    if group is not None:
        assert group.operations.shape[1:] == (3, 3)
        # Its own symbol names the same group again.
        again = find_group(group.symbol, group.unique_axis, rhombohedral)
        assert np.array_equal(again.operations, group.operations)


@quick
@given(st.one_of(frame_text, st.text(max_size=420), st.sampled_from(FRAMES)))
def test_any_text_is_a_frame_rule_or_refused(text: str) -> None:
    rule = reads(parse_frame_rule, text)
    if rule is not None:
        assert parse_frame_rule(rule.text).text == rule.text


def test_every_letter_rule_is_read_back_the_same() -> None:
    rules = list_letter_rules()
    assert len({rule.text for rule in rules}) == 36
    for rule in rules:
        assert parse_frame_rule(rule.text) == rule


@quick
@given(st.one_of(st.text(max_size=200), st.text(alphabet="0123456789.,()+-eE×·10−± ²³⁰", max_size=25)))
@example("1(2)e400")
@example("9" * 400)
@example("1e-400(5)")
@example("0.1(" + "9" * 300 + ")")
def test_any_text_is_a_value_or_refused(text: str) -> None:
    for comma in (False, True):
        found = reads(lambda given_text, comma=comma: parse_value(given_text, decimal_comma=comma), text)
        if found is not None:
            assert np.isfinite(found[0])
            assert found[1] is None or (np.isfinite(found[1]) and found[1] >= 0)


@quick
@given(st.floats(-1e25, 1e25, allow_subnormal=False), st.floats(1e-6, 1e6))
def test_a_printed_value_is_read_back_within_its_last_digit(value: float, ratio: float) -> None:
    sigma = max(abs(value), 1e-20) * ratio
    back, spread = parse_value(print_value(value, sigma))
    # An uncertainty is printed to one digit from 2 on, so half a unit of it is a quarter at the most.
    assert spread == pytest.approx(sigma, rel=0.2501)
    assert abs(back - value) <= 0.2501 * sigma + 1e-15 * abs(value)


@quick
@given(st.one_of(st.text(max_size=400), st.binary(max_size=200)))
@example(b"\xff\xfe")
@example("kind,value\n" + '"' * 101)
@example("kind,direction,value,sigma\nalong,[1 0 0],1e308,1e308\n")
def test_any_text_is_a_table_of_readings_or_refused(text: str | bytes) -> None:
    reads(read_table, text)


@quick
@given(st.one_of(st.text(max_size=400), st.binary(max_size=200)))
def test_any_text_is_a_cif_or_refused(text: str | bytes) -> None:
    reads(read_cif, text)


@pytest.mark.parametrize("seed", range(4))
def test_spoilt_files_are_read_or_refused(seed: int) -> None:
    import random

    source = random.Random(seed)
    locks = list_cell_locks(MONOCLINIC)
    for _ in range(60):
        reads(read_cif, mutate_long_text(seeds.CIF, source))
        reads(read_table, mutate_long_text(seeds.TABLE, source))
        reads(lambda text: read_cell_table(text, locks), mutate_long_text(seeds.CELLS, source))
        reads(lambda text: read_tensor_table(text, MONOCLINIC, Kind()), mutate_long_text(seeds.TENSORS, source))


HOSTILE = {
    "deep quotes": seeds.CIF + "\n" + "'" * 200_000,
    "open text field": seeds.CIF + "\n;" + "x" * 500_000,
    "a very long number": seeds.CIF.replace("9.830(2)", "9." + "8" * 100_000),
    "a huge standard uncertainty": seeds.CIF.replace("9.830(2)", "9.830(" + "9" * 500 + ")"),
    "many operations": seeds.CIF + "".join(f"{n} x+{n}/7,y,z\n" for n in range(20_000)),
    "an operation that overflows": seeds.CIF.replace("-x+1/2,y+1/2,-z+1/2", "99999999999999999999x,y,z"),
    "many blocks": "".join(f"data_{n}\n_cell_length_a 1\n" for n in range(20_000)),
    "one name again and again": "data_x\n" + "_cell_length_a 5\n" * 20_000,
    "a loop without end": seeds.CIF + "loop_\n" + "".join(f"_x{n}\n" for n in range(20_000)),
    "a limiting symbol": seeds.CIF.replace("'P 1 21/n 1'", "'∞'"),
    "a cell that is none": seeds.CIF.replace("107.40(2)", "1e-300"),
    "utf-16": seeds.CIF.encode("utf-16"),
    "nul": "data_x\x00\n" + seeds.CIF,
}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_cifs_are_read_or_refused(name: str) -> None:
    reads(read_cif, HOSTILE[name])


words = st.text(alphabet=string.ascii_letters + string.digits + " ,;\"'#=+-@µ·é\\", max_size=12)
cells = st.builds(
    Reading,
    kind=st.just("along"),
    value=st.floats(-1e30, 1e30, allow_subnormal=False),
    direction=st.lists(st.integers(-9, 9), min_size=3, max_size=3)
    .filter(any)
    .map(lambda hkl: parse_direction(format_indices("normal", hkl))),
    sigma=st.floats(1e-30, 1e30, allow_subnormal=False),
    direction_sigma=st.none() | st.floats(0, 30, allow_subnormal=False),
    bar=words.map(str.strip).map(lambda text: text or None),
    temperature=st.none() | st.floats(1, 2000, allow_subnormal=False),
    note=words.map(str.strip).map(lambda text: text or None),
)


@quick
@given(st.lists(cells, min_size=1, max_size=4))
def test_a_written_table_is_read_back_the_same(readings: list[Reading]) -> None:
    try:
        text = write_table(readings, "W/(m·K)")
    except InputError:
        return
    assert list(read_table(text, temperature_span=1e9).readings) == readings


@quick
@given(
    st.lists(st.floats(1.5, 40), min_size=3, max_size=3),
    st.lists(st.floats(80, 110), min_size=3, max_size=3),
    st.lists(st.floats(1e-4, 0.05), min_size=6, max_size=6),
)
def test_a_written_cif_is_read_back_within_its_printed_digits(
    edges: list[float], angles: list[float], sigma: list[float]
) -> None:
    crystal = build_crystal([*edges, *angles], "-1", cell_sigma=sigma)
    assert crystal.cell is not None
    back = read_cif(write_cif(crystal, name="Invented"))
    assert back.group.replace(" ", "") in ("P-1", "-1")
    assert np.all(np.abs(np.array(back.cell) - crystal.cell.parameters) <= 0.06 * np.array(sigma))
    assert back.cell_sigma == pytest.approx(sigma, rel=0.06)
