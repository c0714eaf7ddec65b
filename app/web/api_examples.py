"""One example for every call that stores nothing; a test sends each of them. All data are invented."""

from __future__ import annotations

from typing import Any, Final

_CRYSTAL: Final = {"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m", "frame": "x3=c x2=b*"}
_TENSOR: Final = {"free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}}
_INDICES: Final = {"matrix": [[2.31, 0, 0.02], [0, 2.4, 0], [0.02, 0, 2.53]]}
_STATE: Final = {
    "crystal": _CRYSTAL,
    "tensor": _TENSOR,
    "pose": {"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]},
}
_STAGE: Final = [
    {"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180},
    {"name": "arc", "axis": [1, 0, 0], "low": -90, "high": 90},
]

EXAMPLES: Final[dict[str, dict[str, Any]]] = {
    "POST /api/v1/form": {"crystal": _CRYSTAL, "tensor": {"parity": "polar", "intrinsic": "symmetric"}},
    "POST /api/v1/state": _STATE,
    "POST /api/v1/along": {"crystal": _CRYSTAL, "tensor": _TENSOR, "directions": ["[1 0 0]", "(-2 0 1)", [1, 2, 3]]},
    "POST /api/v1/surface": {"crystal": _CRYSTAL, "tensor": _TENSOR, "surface": "value", "detail": 8},
    "POST /api/v1/convert": {"from": _CRYSTAL, "tensor": _TENSOR, "to": {**_CRYSTAL, "frame": "x1=a x3=c*"}},
    "POST /api/v1/region": {
        "crystal": _CRYSTAL,
        "tensor": {
            **_TENSOR,
            "covariance": [[0.0064, 0, 0, 0.001], [0, 0.0036, 0, 0], [0, 0, 0.04, 0], [0.001, 0, 0, 0.0081]],
        },
        "level": 0.95,
    },
    "POST /api/v1/fit": {
        "crystal": _CRYSTAL,
        "tensor": {"intrinsic": "symmetric"},
        "readings": [
            {"kind": "along", "direction": "(1 0 0)", "value": 13.1, "sigma": 0.1},
            {"kind": "rod", "direction": "[0 1 0]", "value": 24.6, "sigma": 0.2, "bar": "B2"},
            {"kind": "along", "direction": "[0 0 1]", "value": 15.9, "sigma": 0.1},
            {"kind": "along", "direction": "[1 0 1]", "value": 17.0, "sigma": 0.1},
        ],
    },
    "POST /api/v1/cif": {
        "text": "data_invented\n_cell_length_a 9.83(2)\n_cell_length_b 6.41(1)\n_cell_length_c 7.27(1)\n"
        "_cell_angle_alpha 90\n_cell_angle_beta 107.4(1)\n_cell_angle_gamma 90\n"
        "_space_group_name_H-M_alt 'P 1 21/c 1'\n"
    },
    "POST /api/v1/expansion": {
        "crystal": {**_CRYSTAL, "cell": None},
        "degree": 1,
        "at": [300],
        "states": [
            {"t": 300, "cell": [9.830, 6.410, 7.270, 90, 107.40, 90]},
            {"t": 400, "cell": [9.841, 6.412, 7.271, 90, 107.38, 90]},
            {"t": 500, "cell": [9.852, 6.414, 7.273, 90, 107.37, 90]},
        ],
    },
    "POST /api/v1/optics": {
        "crystal": _CRYSTAL,
        "tensor": _INDICES,
        "direction": "(1 2 1)",
        "thickness": 0.5,
        "wavelength": 589.3,
    },
    "POST /api/v1/seek": {"crystal": _CRYSTAL, "conditions": [{"tensor": _TENSOR, "target": 17}], "within": 2},
    "POST /api/v1/miscut": {**_STATE, "direction": "(-2 0 1)", "half_angle": 1},
    "POST /api/v1/align": {
        "crystal": _CRYSTAL,
        "sightings": [
            {"direction": "(0 0 1)", "seen": [0, 0, 1]},
            {"direction": "[0 1 0]", "seen": [0.01, 1, 0]},
        ],
    },
    "POST /api/v1/stage": {
        "crystal": _CRYSTAL,
        "U": [[1, 0, 0], [0, 1, 0], [0, 0, 1]],
        "axes": _STAGE,
        "target": "(1 1 4)",
        "toward": [0, 0, 1],
    },
    "POST /api/v1/campaign": {
        "crystal": _CRYSTAL,
        "tensor": _TENSOR,
        "add": 4,
        "candidates": {"max_index": 1},
        "criterion": "D",
        "sigma": 0.1,
    },
}
