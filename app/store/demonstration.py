"""Two invented samples that a newcomer finds in an empty store.

Nothing here was measured. The readings were drawn once from a seeded simulation, with a tilt per bar and noise per
reading, and are kept as rounded numbers.
"""

from __future__ import annotations

from typing import Any

from app.store.document import SampleDocument, read_document
from app.store.revisions import Kept
from app.store.samples import Samples

CONDUCTING = "conductivity"
EXPANDING = "expansion"

_CONDUCTIVITY_READINGS = (
    # kind, direction, value, sigma, bar, note
    ("along", "(1 0 0)", 13.19, 0.12, "B1", "plate, 2 mm"),
    ("along", "(1 0 0)", 13.04, 0.12, "B1", "same plate, mounted again"),
    ("rod", "[0 1 0]", 24.62, 0.2, "B2", ""),
    ("rod", "[0 1 0]", 24.43, 0.2, "B2", "same bar, new contacts"),
    ("rod", "[0 0 1]", 15.61, 0.12, "B3", ""),
    ("along", "(0 0 1)", 16.74, 0.12, "B4", "plate, 2 mm"),
    ("along", "(-2 0 1)", 12.32, 0.12, "B5", "plate, 3 mm"),
    ("along", "(-2 0 1)", 12.4, 0.12, "B5", "same plate, mounted again"),
    ("rod", "[1 0 1]", 15.06, 0.12, "B6", ""),
    ("rod", "[-1 0 1]", 12.34, 0.12, "B7", ""),
    ("along", "(1 1 0)", 20.51, 0.18, "B8", "plate, 2 mm"),
    ("rod", "[0 1 1]", 18.85, 0.18, "B9", ""),
    ("along", "(0 2 1)", 23.52, 0.18, "B10", "plate, 2 mm"),
    ("along", "(-1 1 1)", 19.24, 0.18, "B11", "plate, 2 mm; one edge chipped"),
)

_EXPANSION_READINGS = (
    ("along", "[1 0 0]", 24.04, 0.4, "R1", ""),
    ("along", "[0 1 0]", 6.67, 0.4, "R2", ""),
    ("along", "[0 0 1]", -9.34, 0.4, "R3", "shortens on heating"),
    ("along", "[0 0 1]", -9.21, 0.4, "R3", "same rod, second run"),
    ("along", "[1 1 0]", 12.68, 0.4, "R4", ""),
    ("along", "(0 1 1)", -5.68, 0.4, "R5", ""),
    ("along", "(1 0 1)", 5.93, 0.4, "R6", ""),
    ("along", "(1 0 1)", 4.95, 0.4, "R6", "same rod, second run"),
)


def _readings(
    rows: tuple[tuple[str, str, float, float, str, str], ...], property_id: str, unit: str, direction_sigma: float
) -> list[dict[str, Any]]:
    return [
        {
            "property": property_id,
            "kind": kind,
            "direction": direction,
            "value": value,
            "sigma": sigma,
            "direction_sigma": direction_sigma,
            "bar": bar,
            "unit": unit,
            "temperature": 295,
            "note": note,
        }
        for kind, direction, value, sigma, bar, note in rows
    ]


def _diagonal(sigmas: tuple[float, ...]) -> list[list[float]]:
    return [[sigma**2 if row == column else 0 for column in range(len(sigmas))] for row, sigma in enumerate(sigmas)]


def demonstration_documents() -> tuple[SampleDocument, ...]:
    """Return the documents of the two invented samples: a conductor of heat, and one that shortens on heating."""
    conductor = {
        "name": "Demonstration crystal",
        "notes": "Invented. A small block carries heat away from a flat face: cut on which plane, and how well known?",
        "tags": ["demonstration"],
        "crystal": {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m", "unique_axis": "b"},
        "properties": [
            {
                "id": CONDUCTING,
                "name": "Thermal conductivity",
                "kind": "thermal_conductivity",
                "symbol": "κ",
                "unit": "W/(m·K)",
                "tensor": {
                    "free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9},
                    "covariance": _diagonal((0.08, 0.06, 0.2, 0.09)),
                },
                "source": "Invented demonstration data",
                "conditions": {"temperature": 295},
            }
        ],
        "readings": _readings(_CONDUCTIVITY_READINGS, CONDUCTING, "W/(m·K)", 0.7),
        "pose": {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]", "x": "[1 -1 2]"},
        "part": [4, 4, 5],
        "looking": {"property": CONDUCTING, "surface": "quadric"},
    }
    shrinker = {
        "name": "Second demonstration crystal",
        "notes": "Invented. It lengthens along a and b, shortens along c, and keeps its length on a cone between.",
        "tags": ["demonstration"],
        "crystal": {"cell": [6.12, 9.47, 5.38, 90, 90, 90], "group": "mmm"},
        "properties": [
            {
                "id": EXPANDING,
                "name": "Thermal expansion",
                "kind": "thermal_expansion",
                "symbol": "α",
                "unit": "1e-6/K",
                "tensor": {
                    "free": {"11": 23.4, "22": 7.1, "33": -9.6},
                    "covariance": _diagonal((0.3, 0.3, 0.3)),
                },
                "source": "Invented demonstration data",
                "conditions": {"temperature": 295},
            }
        ],
        "readings": _readings(_EXPANSION_READINGS, EXPANDING, "1e-6/K", 1.0),
        "pose": {"exact": ["z", "(0 1 1)"], "toward": ["x", "[1 0 0]"]},
        "part": [5, 5, 6],
        "looking": {"property": EXPANDING, "surface": "quadric"},
    }
    return read_document(conductor), read_document(shrinker)


def seed(samples: Samples) -> tuple[Kept, ...]:
    """Keep the invented samples in a store that never held a sample; elsewhere do nothing and return nothing.

    The one to land on is the newest, so that it heads the list.
    """
    first, second = demonstration_documents()
    return samples.create_if_empty((second, first))
