"""The table of printed values beside what the tool gets: for the tests, and generated into the guide.

``python -m tests.published.table`` writes it anew.
"""

from __future__ import annotations

import math
import re
import tomllib
from dataclasses import dataclass
from html import escape
from pathlib import Path

from tests.published.computed import compute

FOLDER = Path(__file__).resolve().parent
GENERATED = FOLDER.parent.parent / "templates" / "guide" / "published_rows.html"
HALF = 0.5


@dataclass(frozen=True)
class Check:
    """One printed value.

    Attributes:
        name: id.
        what: in words.
        printed: as it stands in print.
        value: the same as a number; degrees of an angle in degrees and minutes.
        unit, source, conditions: as in the file.
        known: "read", "memory" or "derived".
        step: one unit of the last printed digit.
        slack: how many of these units the tool may be off, half a one unless a reason is given.
        digits: significant digits that count, where the rest cannot be had; None for all.
        why: that reason.
    """

    name: str
    what: str
    printed: str
    value: float
    unit: str
    source: str
    conditions: str
    known: str
    step: float
    slack: float
    digits: int | None
    why: str

    @property
    def tolerance(self) -> float:
        """How far off the tool may be."""
        if self.digits is not None:
            return HALF * 10.0 ** (math.floor(math.log10(abs(self.value))) + 1 - self.digits)
        return self.slack * self.step * (1.0 + 1e-9)


def read_checks() -> list[Check]:
    """All checks of the file, in its order."""
    entries = tomllib.loads((FOLDER / "checks.toml").read_text(encoding="utf-8"))["check"]
    checks = []
    for entry in entries:
        value, step = read_printed(entry["printed"])
        checks.append(
            Check(
                entry["id"],
                entry["what"],
                entry["printed"],
                value,
                entry["unit"],
                entry["source"],
                entry.get("conditions", ""),
                entry["known"],
                step,
                entry.get("slack", HALF),
                entry.get("digits"),
                entry.get("why", ""),
            )
        )
    return checks


def read_printed(text: str) -> tuple[float, float]:
    """A printed number, and one unit of its last digit; of an angle like 74°55′ both in degrees."""
    plain = text.replace("−", "-")
    angle = re.fullmatch(r"(\d+)°(\d+)′", plain)
    if angle:
        return int(angle[1]) + int(angle[2]) / 60.0, 1.0 / 60.0
    decimals = len(plain.partition(".")[2])
    return float(plain), 10.0**-decimals


def print_computed(check: Check, value: float) -> str:
    """The tool's value with one digit more than was printed."""
    if "′" in check.printed:
        minutes = round(value * 600.0) / 10.0
        return f"{int(minutes // 60)}°{minutes % 60:04.1f}′"
    if check.digits is not None:
        return f"{value:.{check.digits + 1}g}".replace("-", "−")
    decimals = len(check.printed.partition(".")[2])
    if decimals == 0 and check.step == 1.0 and abs(value - round(value)) < 1e-9:
        return f"{round(value)}".replace("-", "−")
    return f"{value:.{min(decimals + 1, 15)}f}".replace("-", "−")


def write_rows() -> str:
    """The rows of the table as HTML."""
    rows = []
    for check in read_checks():
        unit = f" {escape(check.unit)}" if check.unit and "′" not in check.printed and check.unit != "°" else ""
        degree = "°" if check.unit == "°" and "′" not in check.printed else ""
        conditions = f", {escape(check.conditions)}" if check.conditions else ""
        slack = f" ({check.digits} digits: {escape(check.why)})" if check.digits else ""
        if check.slack != HALF:
            slack = f" ({check.slack:g} units of the last digit: {escape(check.why)})"
        rows.append(
            f'<tr><td>{escape(check.what)}{conditions}</td><td class="num">{escape(check.printed)}{degree}{unit}</td>'
            f'<td class="num">{print_computed(check, compute(check.name))}{degree}</td>'
            f"<td>{escape(check.source)} ({_KNOWN[check.known]}){slack}</td></tr>\n"
        )
    return "".join(rows)


_KNOWN = {"read": "read", "memory": "from memory", "derived": "derived apart from this program"}


if __name__ == "__main__":
    GENERATED.parent.mkdir(parents=True, exist_ok=True)
    GENERATED.write_text(write_rows(), encoding="utf-8")
