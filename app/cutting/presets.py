"""Stages in plain trade words, to start from, and questions that confirm the sense of every dial.

Laboratory axes here: X along the beam away from the source, Z up, Y to the left of the beam, right-handed. Travels are
common practice, without source.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.cutting.stage import Axis

FloatArray = npt.NDArray[np.float64]

UP: Final = np.array([0.0, 0.0, 1.0])

PRESETS: Final[tuple[dict[str, Any], ...]] = (
    {
        "name": "Turn and two arcs",
        "axes": [
            {"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180, "zero": 0, "sense": 1, "step": 0.1},
            {"name": "lower arc", "axis": [1, 0, 0], "low": -30, "high": 30, "zero": 0, "sense": 1, "step": 0.1},
            {"name": "upper arc", "axis": [0, 1, 0], "low": -25, "high": 25, "zero": 0, "sense": 1, "step": 0.1},
        ],
        "sight": [-1, 0, 0],
        "blade": [-1, 0, 0],
    },
    {
        "name": "One arc",
        "axes": [{"name": "arc", "axis": [0, 1, 0], "low": -30, "high": 30, "zero": 0, "sense": 1, "step": 0.1}],
        "sight": [-1, 0, 0],
        "blade": [-1, 0, 0],
    },
    {
        "name": "Three circles",
        "axes": [
            {"name": "outer circle", "axis": [0, 0, 1], "low": -180, "high": 180, "zero": 0, "sense": 1, "step": 0.01},
            {"name": "middle circle", "axis": [0, 1, 0], "low": -95, "high": 95, "zero": 0, "sense": 1, "step": 0.01},
            {"name": "inner circle", "axis": [0, 0, 1], "low": -180, "high": 180, "zero": 0, "sense": 1, "step": 0.01},
        ],
        "sight": [-1, 0, 0],
        "blade": [-1, 0, 0],
    },
)

_WORDS: Final = (
    (np.array([1.0, 0.0, 0.0]), "along the beam, away from the source"),
    (np.array([-1.0, 0.0, 0.0]), "against the beam, toward the source"),
    (np.array([0.0, 1.0, 0.0]), "to the left of the beam"),
    (np.array([0.0, -1.0, 0.0]), "to the right of the beam"),
    (np.array([0.0, 0.0, 1.0]), "up"),
    (np.array([0.0, 0.0, -1.0]), "down"),
)


def ask_dry_run(axis: Axis, degrees: float = 10.0) -> str:
    """A question whose answer is yes if the sense of a dial is right.

    It tells where the top of the head goes, or for an axis that stands upright which way the head turns from above.
    """
    set_to = f"Set the {axis.name or 'axis'} to {axis.zero + degrees:+g}"
    along = float(axis.vector @ UP)
    if abs(along) > 0.9:
        way = "against the clock" if along * axis.sense > 0 else "with the clock"
        return f"{set_to}: does the head turn {way}, seen from above?"
    moves = axis.sense * np.cross(axis.vector, UP)
    return f"{set_to}: does the top of the head move {name_lab(moves)}?"


def name_lab(vector: FloatArray) -> str:
    """A laboratory direction in words: the nearest of the six."""
    return max(_WORDS, key=lambda entry: float(entry[0] @ vector))[1]
