"""Units: factors from the SI's own definitions of its prefixes, worked by hand."""

from __future__ import annotations

import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor

import numpy as np
import pint
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.catalogue.units import check_unit, convert_unit, find_factor, print_unit
from app.errors import InputError


@pytest.mark.parametrize(
    ("written", "printed"),
    [
        *((text, "W/(m·K)") for text in (
            "W/(m·K)", "W m^-1 K^-1", "W/m/K", "W m-1 K-1", "W·m⁻¹·K⁻¹", "W m−1 K−1", "W/(K m)", "W / (m * K)",
            "W/(m⋅K)", "W*m**-1*K**(-1)", "watt/(meter kelvin)", "W\u00a0m\u207b\u00b9\u2009\u212a\u207b\u00b9",
        )),
        ("mW/(cm K)", "mW/(cm·K)"),
        ("1e-6/K", "10⁻⁶/K"),
        ("10^-6 K^-1", "10⁻⁶/K"),
        ("×10⁻⁶ K⁻¹", "10⁻⁶/K"),
        ("ppm/K", "ppm/K"),
        ("µV/K", "µV/K"),
        ("\u03bcV/K", "µV/K"),
        ("S/m", "S/m"),
        ("Ω·m", "Ω·m"),
        ("\u2126 m", "Ω·m"),
        ("ohm cm", "Ω·cm"),
        ("mm2/s", "mm²/s"),
        ("mm²/s", "mm²/s"),
        ("1", "1"),
        ("dimensionless", "1"),
        ("%", "%"),
        ("2.5 mm", "2.5 mm"),
        ("m/s/s", "m/s²"),
        ("°/mm", "°/mm"),
    ],
)  # fmt: skip
def test_one_printed_form(written: str, printed: str) -> None:
    assert print_unit(written) == printed
    assert print_unit(printed) == printed
    assert find_factor(written, printed) == 1.0


@pytest.mark.parametrize(
    ("value", "source", "target", "expected"),
    [
        (12.3, "mW/(cm K)", "W/(m K)", 1.23),  # 1e-3 W over 1e-2 m
        (2.0, "W/(cm K)", "W/(m K)", 200.0),
        (5.0, "ppm/K", "1/K", 5e-6),
        (5.0, "1e-6/K", "ppm/K", 5.0),
        (3.0, "S/cm", "S/m", 300.0),
        (7.0, "µohm cm", "ohm m", 7e-8),
        (4.0, "mm2/s", "m^2/s", 4e-6),
        (1.5, "µV/K", "V/K", 1.5e-6),
        (2.0, "1/(ohm cm)", "S/m", 200.0),
        (0.2, "%", "1", 0.002),
    ],
)
def test_convert(value: float, source: str, target: str, expected: float) -> None:
    assert convert_unit(value, source, target) == pytest.approx(expected, rel=1e-15)


def test_convert_keeps_the_shape() -> None:
    converted = convert_unit([[1.0, 2.0], [3.0, 4.0]], "mW/(cm K)", "W/(m K)")
    assert isinstance(converted, np.ndarray)
    np.testing.assert_allclose(converted, [[0.1, 0.2], [0.3, 0.4]], rtol=1e-15)
    assert isinstance(convert_unit(1, "1", "1"), float)


@given(st.sampled_from(["W/(m*K)", "mW/(cm*K)", "W/(cm*K)", "kW/(mm*K)", "cal/(cm*s*K)"]), st.floats(1e-6, 1e6))
@settings(deadline=None, max_examples=30)
def test_against_the_library_itself(unit: str, value: float) -> None:
    quantity = pint.get_application_registry().Quantity
    expected = quantity(value, unit).to("W/(m*K)").magnitude
    assert convert_unit(value, unit, "W/(m·K)") == pytest.approx(expected, rel=1e-13)
    assert convert_unit(convert_unit(value, unit, "W/m/K"), "W/m/K", unit) == pytest.approx(value, rel=1e-13)


@pytest.mark.parametrize(
    ("unit", "says"),
    [
        ("1/degC", "Write K"),
        ("W/(m °C)", "Write K"),
        ("℃", "Write K"),
        ("°F", "Write K"),
        ("dB", "linear"),
        ("furlogs/K", "not known"),
        ("emu", "4π"),
        ("", "empty"),
        ("m*", "cannot be read"),
        ("(((", "cannot be read"),
        ("1/0", "cannot be read"),
        ("0 m", "zero"),
        ("1e99*1e99 m", "out of all measure"),
        ("m^99 m^99", "out of all measure"),
        ("1e999", "cannot be read"),
        ("10-6/K", "cannot be read"),
        ("m^(1/2)", "cannot be read"),
        ("K+K", "cannot be read"),
        ("m" * 101, "at most"),
        # Powers that would take for ever to work out.
        ("9**9**9", "power of a power"),
        ("((((9^99)^99)^99)^99)^99", "cannot be read"),
        ("m**999", "cannot be read"),
        ("__import__('os')", "cannot be read"),
    ],
)
def test_refused(unit: str, says: str) -> None:
    with pytest.raises(InputError) as caught:
        print_unit(unit)
    assert says in str(caught.value)
    with pytest.raises(InputError):
        convert_unit(1.0, unit, "W/(m K)")


@pytest.mark.parametrize(
    ("source", "target", "hint"),
    [
        ("W/m K", "W/(m K)", "parentheses"),
        ("µV/C", "V/K", "coulomb"),
        ("S/m", "ohm m", "property"),
    ],
)
def test_unlike_units(source: str, target: str, hint: str) -> None:
    with pytest.raises(InputError, match="different things") as caught:
        convert_unit(1.0, source, target)
    assert hint in str(caught.value.hint)


@pytest.mark.parametrize(("value", "source"), [(float("nan"), "m"), (float("inf"), "m"), (1e300, "Gm")])
def test_not_finite(value: float, source: str) -> None:
    with pytest.raises(InputError, match="finite"):
        convert_unit(value, source, "nm")


def test_unit_of_a_property() -> None:
    check_unit("thermal_conductivity", "mW/(cm K)")
    check_unit("other", "counts per whatever")
    with pytest.raises(InputError) as caught:
        check_unit("thermal_conductivity", "S/m")
    assert caught.value.field == "unit"
    assert "mW/(cm·K)" in str(caught.value.hint)


def test_library_is_imported_when_needed_only() -> None:
    code = (
        "import sys; import app.catalogue.units, app.catalogue.listing; assert 'pint' not in sys.modules;"
        "app.catalogue.listing.list_properties(); assert 'pint' not in sys.modules;"
        "app.catalogue.units.print_unit('m'); assert 'pint' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", code], check=True, timeout=60)


def test_threads_share_one_registry() -> None:
    with ThreadPoolExecutor(8) as pool:
        factors = list(pool.map(lambda n: find_factor(f"{n} mW/(cm K)", "W/(m K)"), range(1, 50)))
    np.testing.assert_allclose(factors, np.arange(1, 50) / 10, rtol=1e-14)


@given(st.text(st.sampled_from("WmKµVΩohcsg0123456789e.*/^()+-−·⁻²³ °%"), max_size=16))
@settings(deadline=None, max_examples=200)
def test_any_text_is_printed_or_refused(text: str) -> None:
    try:
        printed = print_unit(text)
    except InputError:
        return
    assert print_unit(printed) == printed
    assert find_factor(text, printed) == pytest.approx(1.0, rel=1e-11)
