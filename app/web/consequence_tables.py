"""Tables of printed text for the panel of consequences."""

from __future__ import annotations

from typing import Any

import numpy as np

from app.tensor.printing import print_value


def build_table(title: str, rows: list[list[str]], note: str = "", head: list[str] | None = None) -> dict[str, Any]:
    """A table {title, note, head, rows}, as the template takes it."""
    return {"title": title, "note": note, "head": head or [], "rows": rows}


def print_with(value: float, sigma: float | None) -> str:
    """A value with its σ, where that is one; else as it is."""
    return print_value(value, None if sigma is None or not np.isfinite(sigma) or sigma <= 0 else sigma)


def print_degrees(angle: float, sigma: float | None) -> str:
    """An angle in degrees with its σ."""
    return f"{print_with(angle, sigma)}°"
