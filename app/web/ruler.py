"""The ruler below the picture: all values that the tensor has along directions, and where the three axes stand."""

from __future__ import annotations

from functools import lru_cache
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.tensor.surface_lines import choose_levels
from app.web.scene import Subject

FloatArray = npt.NDArray[np.float64]

MARGIN: Final = 0.04
"""How far the scale goes on beyond the smallest and the largest value, as a part of what is between them."""
MOST_TICKS: Final = 30


def render_ruler(subject: Subject, values: FloatArray) -> dict[str, Any]:
    """A scale from the smallest to the largest value, with ticks; places are parts of its length.

    Args:
        subject: whose principal values are the ends.
        values: shape (3,), along the specimen axes.
    """
    principal: list[float] = subject.principal.values.tolist()
    spread = principal[0] - principal[2]
    if spread <= 1e-9 * max(map(abs, principal)):
        spread = max(abs(principal[0]), 1e-300)
    low, high = principal[2] - MARGIN * spread, principal[0] + MARGIN * spread
    return {
        "ticks": list(_list_ticks(low, high)),
        "principal": [
            {"at": _place(value, low, high), "name": str(number + 1), "locked": subject.fixed[number]}
            for number, value in enumerate(principal)
        ],
        "axes": [{"at": _place(value, low, high), "name": "xyz"[axis]} for axis, value in enumerate(values.tolist())],
    }


def _place(value: float, low: float, high: float) -> float:
    return round((value - low) / (high - low), 4)


@lru_cache(maxsize=64)
def _list_ticks(low: float, high: float) -> tuple[dict[str, Any], ...]:
    levels = choose_levels(low, high, MOST_TICKS)
    return tuple(
        {"at": _place(value, low, high), "text": f"{value:.6g}".replace("-", "−") if heavy else ""}
        for value, heavy in zip(levels.values.tolist(), levels.heavy.tolist(), strict=True)
    )
