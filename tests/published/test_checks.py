"""Every printed value of checks.toml, to the digits that were printed."""

from __future__ import annotations

import pytest

from tests.published.computed import compute
from tests.published.table import GENERATED, Check, read_checks, read_printed, write_rows

CHECKS = read_checks()


@pytest.mark.parametrize("check", CHECKS, ids=lambda check: check.name)
def test_printed_value(check: Check) -> None:
    assert compute(check.name) == pytest.approx(check.value, abs=check.tolerance, rel=0.0), check.source


def test_every_check_is_told_once_and_with_its_source() -> None:
    assert len({check.name for check in CHECKS}) == len(CHECKS)
    for check in CHECKS:
        assert check.known in ("read", "memory", "derived"), check.name
        assert check.source, check.name
        # A wider tolerance than print allows has its reason.
        assert (check.slack == 0.5 and check.digits is None) == (check.why == ""), check.name


@pytest.mark.parametrize(
    ("text", "value", "step"),
    [("64.67", 64.67, 0.01), ("−0.0079140", -0.007914, 1e-7), ("74°55′", 74 + 55 / 60, 1 / 60)],
)
def test_the_tolerance_follows_from_the_digits(text: str, value: float, step: float) -> None:
    assert read_printed(text) == pytest.approx((value, step))


def test_the_guide_has_the_table_as_it_is() -> None:
    assert GENERATED.read_text(encoding="utf-8") == write_rows(), "write it anew: python -m tests.published.table"
