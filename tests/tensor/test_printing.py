"""Printed values with uncertainties.

Expectations are worked by hand from the rule itself (rule of 19: common practice in crystallography); the forms
12.48(8), 23.34(17), 24.6(2) are those in which crystallographic tables print.
"""

from __future__ import annotations

import contextlib
import math
import re
from decimal import Decimal

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from app.errors import InputError
from app.tensor.printing import parse_value, print_superscript, print_value

finite = st.floats(allow_nan=False, allow_infinity=False)
positive = st.floats(min_value=5e-324, allow_nan=False, allow_infinity=False)


@pytest.mark.parametrize(
    ("value", "sigma", "printed"),
    [
        (12.48, 0.08, "12.48(8)"),
        (23.3412, 0.17, "23.34(17)"),
        (24.6, 0.2, "24.6(2)"),
        (1300, 200, "1300(200)"),
        (1234, 170, "1230(170)"),
        (3.2e-6, 4e-7, "3.2(4)×10⁻⁶"),
        (-5.6, 0.2, "−5.6(2)"),
        (15e6, 2e5, "1.50(2)×10⁷"),
        # Either side of the border between two digits and one.
        (1, 0.0194, "1.000(19)"),
        (1, 0.0196, "1.00(2)"),
        (1, 0.01, "1.000(10)"),
        # One digit that rounds up to ten is shown as ten.
        (9.999, 0.0097, "9.999(10)"),
        # The value vanishes in its uncertainty: no sign on a zero.
        (-0.001, 0.1, "0.00(10)"),
        (0, 0.17, "0.00(17)"),
        # Rounding carries the value into the next power of ten.
        (9.96, 0.2, "10.0(2)"),
        (999999, 20, "1.00000(2)×10⁶"),
        # Farther apart than a double holds.
        (100000, 1e-30, "100000 ± 1×10⁻³⁰"),
    ],
)
def test_print_with_sigma(value: float, sigma: float, printed: str) -> None:
    assert print_value(value, sigma) == printed


@pytest.mark.parametrize(
    ("value", "printed"),
    [
        (13.195526, "13.1955"),
        (24.6, "24.6"),
        (0.1 + 0.2, "0.3"),
        (0, "0"),
        (-0.0, "0"),
        (-2.5, "−2.5"),
        (100, "100"),
        (123456, "123456"),
        (1234567, "1.23457×10⁶"),
        (999999.9, "1×10⁶"),
        (0.00012, "0.00012"),
        (-0.000012, "−1.2×10⁻⁵"),
    ],
)
def test_print_without_sigma(value: float, printed: str) -> None:
    assert print_value(value) == printed
    # An exact number prints like one of which nothing is known.
    assert print_value(value, 0.0) == printed


def test_digits_are_chosen() -> None:
    assert print_value(math.pi, digits=3) == "3.14"
    assert print_value(math.pi, digits=12) == "3.14159265359"
    with pytest.raises(InputError, match="1 to 17"):
        print_value(1.0, digits=0)


@pytest.mark.parametrize(
    ("value", "sigma"), [(math.nan, None), (math.inf, 1.0), (1.0, math.nan), (1.0, math.inf), (1.0, -0.1)]
)
def test_print_refuses(value: float, sigma: float | None) -> None:
    with pytest.raises(InputError):
        print_value(value, sigma)


def test_superscript() -> None:
    assert print_superscript(-16) == "⁻¹⁶"


@pytest.mark.parametrize(
    ("text", "value", "sigma"),
    [
        ("15.92(9)", 15.92, 0.09),
        ("-5.6 ± 0.2", -5.6, 0.2),
        ("−5.6 ± 0.2", -5.6, 0.2),
        ("5.6 +/- 0.2", 5.6, 0.2),
        ("12.4(1.2)", 12.4, 1.2),
        ("1300(200)", 1300.0, 200.0),
        ("3.2(4)×10⁻⁶", 3.2e-6, 4e-7),
        ("3.2(4)e-6", 3.2e-6, 4e-7),
        ("3.2(4) x 10^-6", 3.2e-6, 4e-7),
        ("(3.2 ± 0.4)e-6", 3.2e-6, 4e-7),
        ("3.2e-6 ± 4e-7", 3.2e-6, 4e-7),
        ("  +7 ", 7.0, None),
        (".5", 0.5, None),
        ("1.2e-6", 1.2e-6, None),
        ("24.6(0)", 24.6, 0.0),
    ],
)
def test_parse(text: str, value: float, sigma: float | None) -> None:
    assert parse_value(text) == (value, sigma)


def test_decimal_comma_only_when_told() -> None:
    assert parse_value("15,92(9)", decimal_comma=True) == (15.92, 0.09)
    with pytest.raises(InputError, match="comma"):
        parse_value("15,92(9)")
    with pytest.raises(InputError, match="decimal point"):
        parse_value("1.234,5", decimal_comma=True)


@pytest.mark.parametrize(
    "text",
    [
        "", "nan", "inf", "-inf", "1e400", "1e-400", "1.2e-6(3)", "1(2", "1_000", "0x10", "1 000", "1(−2)", "--5", "٣",
        "1(2)(3)", "1 ± ", "1,5", "1" * 101, "1(1)e400", "12.3()",
    ],
)  # fmt: skip
def test_parse_refuses(text: str) -> None:
    with pytest.raises(InputError):
        parse_value(text)


def test_parentheses_after_the_power_say_what_to_write() -> None:
    with pytest.raises(InputError) as caught:
        parse_value("1.2e-6(3)")
    assert caught.value.hint is not None
    assert "1.2(3)e-6" in caught.value.hint


@given(finite, positive)
@example(1.7976931348623157e308, 1e300)
@example(5e-324, 5e-324)
@example(9.995, 0.00995)
def test_round_trip_with_sigma(value: float, sigma: float) -> None:
    if max(abs(value), sigma) > 1e307 or sigma < 1e-322:
        # Rounding may leave the range of doubles at either end, where the reader refuses.
        with contextlib.suppress(InputError):
            parse_value(print_value(value, sigma))
        return
    value_back, sigma_back = parse_value(print_value(value, sigma))
    assert sigma_back is not None
    # One digit from 2 on is at most a quarter off (2.5 to 2), two digits from 10 on a twentieth; value likewise.
    assert sigma_back == pytest.approx(sigma, rel=0.25, abs=5e-324)
    assert abs(Decimal(value_back) - Decimal(value)) <= Decimal(sigma) * Decimal("0.2501") + Decimal("5e-324") + (
        abs(Decimal(value)) * Decimal("2.3e-16")
    )
    if "±" not in print_value(value, sigma):
        assert print_value(value_back, sigma_back) == print_value(value, sigma)


@given(finite, positive)
def test_uncertainty_has_one_digit_or_ten_to_nineteen(value: float, sigma: float) -> None:
    printed = print_value(value, sigma)
    if "±" in printed:
        return
    found = re.search(r"\((\d+)\)", printed)
    assert found is not None
    digits = found[1].rstrip("0") or "0"
    assert len(digits) == 1 or 10 <= int(found[1][:2]) <= 19


@given(finite)
def test_round_trip_of_every_digit(value: float) -> None:
    # Seventeen significant digits tell every double from every other (IEEE 754).
    assert parse_value(print_value(value, digits=17)) == (value, None)


@given(st.text(max_size=30))
def test_parse_never_fails_otherwise(text: str) -> None:
    for decimal_comma in (False, True):
        try:
            value, sigma = parse_value(text, decimal_comma=decimal_comma)
        except InputError:
            continue
        assert math.isfinite(value)
        assert sigma is None or (math.isfinite(sigma) and sigma >= 0)
