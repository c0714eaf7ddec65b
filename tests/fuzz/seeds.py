"""One good body or more for every route that takes one; what mutations start from.

All data are invented. "$revision" stands for the newest revision of the sample that is asked, "$sample" for its id.
"""

# Tables of values read best in long lines.
# ruff: noqa: E501

from __future__ import annotations

from typing import Any, Final

from tests.examples import EXAMPLES

MONOCLINIC: Final = {
    "cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90],
    "group": "2/m",
    "unique_axis": "b",
    "frame": "x3=c x2=b*",
}
TRIGONAL: Final = {"cell": [4.99, 4.99, 17.061, 90, 90, 120], "group": "-3m"}
TRICLINIC: Final = {"cell": [8.141, 12.79, 7.157, 94.225, 116.597, 87.772], "group": "-1", "frame": "x1=a x3=c*"}
LIMITING: Final = {"cell": None, "group": "∞m"}
TETRAGONAL: Final = {"cell": [5.2, 5.2, 9.1, 90, 90, 90], "group": "4"}

CONDUCTIVITY: Final = {"matrix": [[13.2, 0, 1.85], [0, 24.6, 0], [1.85, 0, 15.9]]}
WITH_COVARIANCE: Final = {
    "free": {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9},
    "covariance": [[0.0064, 0, 0, 0.001], [0, 0.0036, 0, 0], [0, 0, 0.04, 0], [0.001, 0, 0, 0.0081]],
}
FULL: Final = {"matrix": [[4.1, 0.3, -0.7], [0.3, 2.2, 0.5], [-0.7, 0.5, 3.6]]}
GENERAL: Final = {
    "parity": "polar",
    "intrinsic": "general",
    "matrix": [[118.2, -6.9, 1.1], [9.3, 121.6, -0.8], [0.4, 0.9, 85.3]],
}
GYRATION: Final = {"parity": "axial", "matrix": [[2.1, 1.5, 0], [1.5, -1.9, 0], [0, 0, 0.1]]}
UNIAXIAL: Final = {"free": {"11": -5.6, "33": 24.9}}
PERMITTIVITY: Final = {"matrix": [[2.329156, 0, 0.013466], [0, 2.318311, 0], [0.013466, 0, 2.322441]]}
TILTED: Final = {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[1 1 0]", "x": "[1 -1 2]"}
TURNED: Final = {"axis": [1, 2, 3], "angle": 33.3}
STAGE: Final = [
    {"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180, "zero": 0, "sense": 1},
    {"name": "arc", "axis": [1, 0, 0], "low": -30, "high": 30, "zero": 0, "sense": -1},
    {"name": "upper arc", "axis": {"xyz": [0, 1, 0]}, "low": -25, "high": 25},
]
READINGS: Final = [
    {"kind": "along", "direction": "(1 0 0)", "value": 13.1, "sigma": 0.1, "direction_sigma": 0.7, "bar": "B1"},
    {"kind": "along", "direction": "(1 0 0)", "value": 13.0, "sigma": 0.1, "direction_sigma": 0.7, "bar": "B1"},
    {"kind": "rod", "direction": "[0 1 0]", "value": 24.6, "sigma": 0.2, "bar": "B2", "batch": "f"},
    {"kind": "rod", "direction": "[0 0 1]", "value": 15.6, "sigma": 0.1, "batch": "f"},
    {"kind": "sheet", "second": "(0 0 1)", "value": 18.1, "sigma": 0.1},
    {
        "kind": "difference",
        "direction": "(0 0 1)",
        "second": "[1 0 1]",
        "value": 1.4,
        "sigma": 0.1,
        "pose": {"quaternion": [1, 0, 0, 0]},
    },
    {"kind": "along", "direction": {"specimen": [0, 0, 1]}, "value": 12.3, "sigma": 0.1, "pose": TILTED},
    {"kind": "mean", "value": 17.9, "sigma": 0.4},
    {"kind": "across", "direction": "[1 0 0]", "second": [0, 0, 1], "value": 1.2, "sigma": 0.3},
]
LINEAR: Final = [{"kind": "along", "direction": direction, "value": value} for direction, value in
                 (("[1 0 0]", 4.0), ("[0 1 0]", 2.1), ("[0 0 1]", 3.4), ("[1 1 0]", 3.2), ("(0 1 1)", 3.5), ("[1 0 1]", 3.3), ("(1 1 1)", 3.1))]  # fmt: skip
CIF: Final = (EXAMPLES / "invented_monoclinic.cif").read_text(encoding="utf-8")
TABLE: Final = (EXAMPLES / "readings.csv").read_text(encoding="utf-8")
CELLS: Final = "temperature,a,b,c,beta\n" + "".join(
    f"{t},{9.83 + 1e-4 * (t - 295):.5f}(20),{6.41 + 5e-5 * (t - 295):.5f}(10),{7.27 + 1e-5 * (t - 295):.5f}(20),{107.4 - 1e-4 * (t - 295):.4f}(20)\n"
    for t in range(95, 500, 100)
)
TENSORS: Final = "temperature,11,13,22,33\n" + "".join(
    f"{t},{13.2 - 0.01 * (t - 295):.3f}(20),{1.85:.3f}(20),{24.6 - 0.02 * (t - 295):.3f}(20),{15.9:.3f}(20)\n"
    for t in range(95, 500, 100)
)
ROWS: Final = [
    {"cells": {"kind": "along", "direction": "(1 0 0)", "value": "13.19", "sigma": "0.12", "bar": "B1", "direction_sigma": "0.7"}},
    {"cells": {"kind": "rod", "direction": "[0 1 0]", "value": "24.62", "sigma": "0.2", "temperature": "295"}},
    {"cells": {"kind": "rod", "direction": "[0 0 1]", "value": "15.61", "sigma": "0.12", "unit": "W/(m·K)"}},
    {"cells": {"kind": "along", "direction": "(0 0 1)", "value": "16.74(12)"}, "set_aside": "chipped", "pose": TURNED},
]  # fmt: skip
DOCUMENT: Final = {
    "format": "halfturn",
    "version": 2,
    "samples": [
        {"document": {"name": "Invented", "tags": ["a"], "crystal": MONOCLINIC, "readings": [], "later": [1, {"b": None}]}},
        {"id": "0a1b2c3d4e5f", "revision": 4, "document": {"name": "Second", "crystal": {"cell": None, "group": "∞m"}},
         "history": [{"number": 4, "created": "2031-05-04T12:00:00.000000Z", "document": {"name": "Second", "crystal": {"cell": None, "group": "∞m"}}}]},
    ],
    "stages": [{"id": "bench", "name": "Bench", "axes": STAGE, "sight": [0, 0, 1], "blade": [1, 0, 0]}],
}  # fmt: skip


def _edit(**change: Any) -> dict[str, Any]:
    return {"parent": "$revision", "change": change}


def _seen(direction: str, seen: list[float], **more: Any) -> dict[str, Any]:
    return {"direction": direction, "seen": seen, **more}


_STATE: Final = {"crystal": MONOCLINIC, "tensor": WITH_COVARIANCE, "pose": TILTED}
_SPOTS: Final = [[12.1, 3.3], [-8.2, 14.0], [4.4, -17.5], [-15.0, -6.1]]

SEEDS: Final[dict[str, list[Any]]] = {
    "POST /api/v1/form": [
        {"crystal": MONOCLINIC, "tensor": {}, "pose": TURNED},
        {"crystal": TETRAGONAL, "tensor": {"intrinsic": "general"}},
        {"crystal": LIMITING, "tensor": {"parity": "axial", "intrinsic": "antisymmetric"}},
        {"crystal": {"cell": [5, 5, 5, 90, 90, 90], "group": "m-3m"}, "tensor": {"parity": "axial"}, "pose": TURNED},
    ],
    "POST /api/v1/state": [
        _STATE,
        {"crystal": TRIGONAL, "tensor": UNIAXIAL},
        {"crystal": TETRAGONAL, "tensor": GENERAL, "pose": {"bunge": [10, 20, 30]}},
        {"crystal": {**TETRAGONAL, "group": "-4"}, "tensor": GYRATION},
        {"crystal": LIMITING, "tensor": {"matrix": [[2, 0, 0], [0, 2, 0], [0, 0, -1]]}},
        {"crystal": TRICLINIC, "tensor": FULL},
    ],
    "POST /api/v1/along": [
        {**_STATE, "directions": ["[1 0 0]", "(-2 0 1)", [1, 2, 3], {"specimen": [0, 0, 1]}, {"xyz": [0, 1, 1]}]},
        {"crystal": TRIGONAL, "tensor": UNIAXIAL, "directions": ["(1 0 -1 4)", "[-4 4 0 1]"]},
    ],
    "POST /api/v1/surface": [
        {"crystal": TRIGONAL, "tensor": UNIAXIAL, "surface": "quadric", "detail": 12},
        {**_STATE, "surface": "value", "detail": 10},
        {"crystal": TETRAGONAL, "tensor": GENERAL, "surface": "flux", "detail": 8},
        {"crystal": TRICLINIC, "tensor": {"matrix": [[1, 0, 0.2], [0, -2, 0], [0.2, 0, -0.5]]}, "surface": "quadric", "detail": 16},
    ],
    "POST /api/v1/fit": [
        {"crystal": MONOCLINIC, "tensor": {}, "readings": READINGS, "batches": {"f": 0.01}, "pose": TILTED},
        {"crystal": TRICLINIC, "tensor": {"intrinsic": "symmetric"}, "readings": LINEAR},
        {"crystal": TETRAGONAL, "tensor": {"intrinsic": "general"}, "readings": [
            {"kind": "along", "direction": "[1 0 0]", "value": 119.0}, {"kind": "along", "direction": "[0 0 1]", "value": 85.0},
            {"kind": "across", "direction": "[1 0 0]", "second": "[0 1 0]", "value": 8.0}]},
    ],
    "POST /api/v1/region": [
        {"crystal": MONOCLINIC, "tensor": WITH_COVARIANCE, "level": 0.9, "directions": ["[0 1 0]", [1, 0, 0.3]]},
        {"crystal": TRICLINIC, "tensor": {**FULL, "covariance": [[0.01 if i == j else 0.001 for i in range(6)] for j in range(6)]}},
        {"crystal": TRIGONAL, "tensor": {**UNIAXIAL, "covariance": [[0.01, 0], [0, 0.04]]}, "directions": ["(1 0 4)"]},
    ],
    "POST /api/v1/convert": [
        {"from": MONOCLINIC, "tensor": CONDUCTIVITY, "to": {**MONOCLINIC, "frame": "x1=a x3=c*"}},
        {"from": MONOCLINIC, "tensor": CONDUCTIVITY, "basis": [[0, 1, 0], [0, 0, 1], [1, 0, 0]],
         "to": {"cell": [5.7981, 12.214, 3.0371, 90, 90, 103.83], "group": "2/m", "unique_axis": "c"}},
    ],
    "POST /api/v1/cif": [{"text": CIF}, {"text": CIF, "block": "invented_monoclinic"}],
    "POST /api/v1/expansion": [
        {"crystal": {**MONOCLINIC, "cell": None}, "degree": 1, "at": [300, 350.5, 900], "states": [
            {"t": t, "cell": [12.214 + 1e-4 * t, 3.0371 + 2e-5 * t, 5.7981, 90, 103.83 - 1e-4 * t, 90], "sigma": [1e-3, 1e-3, 1e-3, 0, 0.01, 0]}
            for t in (300, 400, 500)]},
        {"crystal": TRICLINIC, "degree": 2, "at": [26], "reference": 26, "strain": "linear", "states": [
            {"t": t, "cell": [8.141 + 1e-4 * t, 12.79, 7.157, 94.225 - 1e-3 * t, 116.597, 87.772]} for t in (26, 500, 900, 1127)]},
    ],
    "POST /api/v1/optics": [
        {"crystal": MONOCLINIC, "tensor": PERMITTIVITY, "direction": "(1 2 1)", "thickness": 0.5, "wavelength": 589.3, "edge": "[0 1 0]", "tolerance": 10},
        {"crystal": TRIGONAL, "tensor": {"free": {"11": 2.75, "33": 2.21}, "covariance": [[1e-6, 0], [0, 1e-6]]}, "direction": [1, 0, 1], "pose": TURNED},
    ],
    "POST /api/v1/seek": [
        {"crystal": TRIGONAL, "conditions": [{"tensor": UNIAXIAL, "target": 0}], "within": 2, "max_index": 3},
        {"crystal": MONOCLINIC, "conditions": [{"tensor": CONDUCTIVITY, "target": 17}, {"tensor": PERMITTIVITY, "target": "max"}]},
        {"crystal": TRICLINIC, "conditions": [{"tensor": FULL, "target": 3.1}, {"tensor": {"free": {"11": 1, "12": 0.1, "13": 0, "22": 3, "23": 0, "33": 2}}, "target": 2.2}]},
        {"crystal": LIMITING, "conditions": [{"tensor": {"free": {"11": 1, "33": 2}}, "target": "min"}]},
    ],
    "POST /api/v1/miscut": [
        {**_STATE, "direction": "(-2 0 1)", "half_angle": 1},
        {"crystal": TRIGONAL, "tensor": UNIAXIAL, "direction": "[0 0 1]", "tolerance": 0.1},
    ],
    "POST /api/v1/align": [
        {"crystal": TRICLINIC, "sightings": [_seen("(0 0 1)", [0, 0, 1]), _seen("(1 0 0)", [1, 0.1, 0.05], weight=2), _seen("[0 1 0]", [0, 1, 0])]},
        {"crystal": MONOCLINIC, "axes": STAGE, "sightings": [
            {"direction": "(0 0 1)", "angles": [10, 5, -3], "toward": [1, 0, 0]}, {"direction": "(0 1 0)", "angles": [95, 2, 1], "toward": [1, 0, 0], "weight": 0.5}]},
        {"crystal": {"cell": [5, 5, 5, 90, 90, 90], "group": "m-3m"}, "sightings": [_seen("(1 0 0)", [0, 0, 1]), _seen("(0 1 0)", [0, 1, 0])]},
    ],
    "POST /api/v1/stage": [
        {"crystal": MONOCLINIC, "U": [[1, 0, 0], [0, 1, 0], [0, 0, 1]], "axes": STAGE, "target": "(1 1 4)", "toward": [0, 0, 1], "equivalents": True, "either_sense": True},
        {"crystal": TRICLINIC, "U": [[0, 1, 0], [0, 0, 1], [1, 0, 0]], "axes": STAGE[:2], "target": [0, 0.1, 1], "toward": [0, 0, 1]},
        {"crystal": TRICLINIC, "U": [[1, 0, 0], [0, 1, 0], [0, 0, 1]], "axes": STAGE, "target": "(0 0 1)", "toward": {"xyz": [0, 0, 1]},
         "level": {"direction": "[1 0 0]", "toward": [1, 0, 0]}},
    ],
    "POST /api/v1/campaign": [
        {"crystal": MONOCLINIC, "tensor": CONDUCTIVITY, "taken": READINGS[:4], "batches": {"f": 0.01}, "add": 2, "candidates": {"max_index": 1},
         "criterion": "D", "sigma": 0.1, "direction_sigma": 0.5, "ranking": 3, "losses": True, "goal": {"cell": "13", "sigma": 0.08}},
        {"crystal": TRIGONAL, "tensor": {}, "add": 3, "candidates": "sphere", "criterion": "A", "sigma": 1},
        {"crystal": TRICLINIC, "tensor": FULL, "add": 6, "candidates": ["[1 0 0]", "[0 1 0]", "[0 0 1]", "[1 1 0]", "(0 1 1)", "[1 0 1]", "(1 1 1)"],
         "criterion": {"axis": 1}, "sigma": 0.1},
    ],
    "POST /api/samples": [{"name": "Boule 3"}, {"from": "$sample"}, {}],
    "POST /api/samples/{sample_id}/edit": [
        _edit(crystal={"cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "group": "2/m", "frame": "x1=a x3=c*"}),
        _edit(crystal=TRICLINIC), _edit(crystal=LIMITING), _edit(free={"11": 13.3}), _edit(free={"22": "24.1(2)"}),
        _edit(tensor={"matrix": FULL["matrix"], "source": "invented"}), _edit(tensor={**WITH_COVARIANCE, "unit": "W/(m·K)"}),
        _edit(property={"kind": "permittivity"}), _edit(property={"kind": "thermopower", "unit": "uV/K"}), _edit(property={"id": "conductivity", "temperature": 300}),
        _edit(property={"id": "conductivity", "unit": "mW/(cm·K)"}), _edit(property={"kind": "gyration"}), _edit(property={"kind": "other", "parity": "axial", "intrinsic": "general"}),
        _edit(pose=TURNED), _edit(pose=TILTED), _edit(poses={"up": TURNED}), _edit(part=[3, 4, 5]),
        _edit(readings=READINGS, batches={"f": 0.01}), _edit(batches={"f": 0.02}), _edit(name="Boule 4"), _edit(notes="A note."), _edit(looking={"surface": "value"}),
    ],
    "POST /api/samples/{sample_id}/undo": [{"parent": "$revision"}, {}],
    "POST /api/samples/{sample_id}/redo": [{"parent": "$revision"}],
    "POST /api/samples/{sample_id}/rename": [{"name": "Another name"}],
    "POST /api/samples/{sample_id}/mark": [{"archived": True}, {"archived": False, "deleted": False}],
    "POST /api/import/plan": [{"document": DOCUMENT}, {"text": TABLE, "crystal": MONOCLINIC, "property": "thermal_conductivity"}],
    "POST /api/import": [
        {"document": DOCUMENT, "choices": [{"do": "skip"}, None], "stages": "keep"},
        {"text": CIF, "name": "From a CIF", "choices": [{"do": "add"}]},
    ],
    "POST /api/samples/{sample_id}/readings": [{"parent": "$revision", "rows": ROWS, "batches": {"f": "0.01"}}],
    "POST /api/samples/{sample_id}/readings/table": [{"parent": "$revision", "text": TABLE}],
    "POST /api/samples/{sample_id}/readings/closer": [None],
    "POST /api/samples/{sample_id}/readings/next-cuts": [
        {"add": 2, "max_index": 1, "criterion": "D", "sigma": 0.1, "direction_sigma": 0.5}, {"add": 1, "listed": "[1 0 0], (0 1 1)", "criterion": "13", "sigma": 0.1, "goal": 0.05},
        {"add": 1, "max_index": None, "criterion": "p3", "sigma": 0.1},
    ],
    "POST /api/samples/{sample_id}/readings/isolate": [{"cell": "13", "max_index": 1, "sigma": 0.1}],
    "POST /api/samples/{sample_id}/readings/cube": [{"max_index": 1}],
    "POST /api/samples/{sample_id}/readings/true-normal": [
        {"nominal": "(0 0 1)", "toward": "[1 0 0]", "azimuths": [0, 90, 180, 270], "angles": [10.1, 10.3, 9.9, 9.7], "sigma": 0.02}
    ],
    "POST /api/samples/{sample_id}/readings/piece": [{"length": 10, "width": 2, "thickness": 1}],
    "POST /api/samples/{sample_id}/readings/twin": [{"about": "[1 0 0]", "angle": 180}, {"about": "(0 0 1)", "angle": 60}],
    "POST /api/samples/{sample_id}/frame-question": [
        {"matrix": CONDUCTIVITY["matrix"]}, {"matrix": FULL["matrix"], "cell": [9.83, 6.41, 7.27, 90, 107.4, 90], "any_edges": True, "unsure": False},
    ],
    "POST /api/samples/{sample_id}/consequences": [
        {}, {"direction": "(1 0 1)", "edge": "[0 1 0]", "thickness": 0.5, "wavelength": 589.3, "start": 293, "end": 393, "substrate": 2.6},
    ],
    "POST /api/samples/{sample_id}/cut": [
        {"parent": "$revision", "make": True}, {"parent": "$revision", "choose": "part1"}, {"parent": "$revision", "remove": "part1"},
        {"parent": "$revision", "change": {"name": "B4", "shape": "plate", "size": [10, 10, 1], "target": {"by": "direction", "direction": "(-2 0 1)"}, "edge": "[0 1 0]",
                                           "tolerance": {"half_angle": 1}, "kerf": 0.3, "stock": 0.1, "wedge": 0.1, "either_sense": True, "equivalents": True}},
        {"parent": "$revision", "change": {"target": {"by": "offcut", "from": "(0 0 1)", "tilt": 4, "toward": "[1 0 0]"}, "tolerance": {"value": 0.1}}},
        {"parent": "$revision", "change": {"target": {"by": "principal", "axis": 1}, "edge": "[1 0 0]", "achieved": {"tilt": 0.4, "toward": "[1 0 0]", "sigma": 0.1}}},
        {"parent": "$revision", "change": {"target": {"by": "vector", "xyz": [1, 2, 3], "name": "found"}}},
        {"parent": "$revision", "give_readings": True}, {"parent": "$revision", "calibrate": True}, {"parent": "$revision", "wishes": {"conductivity": "largest"}},
        {"parent": "$revision", "stage": "preset1"},
        {"parent": "$revision", "sightings": [{"direction": "(0 0 1)", "angles": [10, 5, -3], "weight": 1}, {"direction": "(1 0 0)", "angles": [95, 2, 1], "note": "weak"}]},
    ],
    "POST /api/samples/{sample_id}/stereogram": [
        {}, {"projection": "area", "discs": "two", "centre": "z", "layers": ["normals", "rows", "taken", "proposed", "answer"], "max_index": 2, "place": [0.3, -0.2], "far": True},
        {"centre": "(1 0 0)", "cursor": [1, 2, 3], "steps": [3, -10], "pose": TURNED, "at": 320},
    ],
    "POST /api/samples/{sample_id}/section": [
        {}, {"normal": "(0 1 0)", "zero": "[1 0 0]", "angle": 30.5}, {"normal": "x", "toward": [1, 2, 3], "pose": TURNED, "at": 320},
    ],
    "POST /api/samples/{sample_id}/cut/spots": [{"spots": _SPOTS, "distance": 30, "side": "back", "angles": [0, 0, 0], "tolerance": 1, "max_index": 2}],
    "POST /api/samples/{sample_id}/cut/seek": [
        {"conditions": [{"property": "conductivity", "target": 17}]}, {"conditions": [{"property": "conductivity", "target": "max"}]},
    ],
    "POST /api/stages": [
        {"stages": [{"id": "preset3", "name": "Three circles", "axes": [{"name": name, "axis": axis, "low": -180, "high": 180, "step": 0.1} for name, axis in
                 (("outer", [0, 0, 1]), ("middle", [0, 1, 0]), ("inner", [0, 0, 1]))], "sight": [-1, 0, 0], "blade": [-1, 0, 0],
                     "transfer": [{"wanted": [1, 0, 0], "achieved": [1, 0.01, 0]}, {"wanted": [0, 1, 0], "achieved": [0, 1, 0.01]}]}]},
    ],
    "POST /api/samples/{sample_id}/series": [
        {"parent": "$revision", "change": {"table": CELLS, "degree": 1, "faces": [["(1 0 0)", "(0 0 1)"]]}, "at": 320}, {"parent": "$revision", "change": {"strain": "linear", "reference": 295}},
    ],
    "POST /api/samples/{sample_id}/series/cifs": [{"parent": "$revision", "texts": [CIF, CIF.replace("9.830(2)", "9.840(2)").replace("295(1)", "395(1)")]}],
    "POST /api/samples/{sample_id}/series/use": [{"parent": "$revision", "at": 320}],
    "POST /api/samples/{sample_id}/tensor-series": [{"parent": "$revision", "change": {"source": "table", "table": TENSORS, "degree": 1}, "at": 320}, {"parent": "$revision", "change": {"source": "readings", "degree": 0}}],
    "POST /api/samples/{sample_id}/tensor-series/use": [{"parent": "$revision", "at": 320}],
    # Forms of plain pages; what they take stands in the address, or is a form.
    "POST /samples/{sample_id}/readings": [{"table": TABLE, "batches": "f = 0.01"}],
    "POST /samples/{sample_id}/readings/use": [None],
    "POST /samples/{sample_id}/sheets": [None],
    "POST /samples/{sample_id}/cut/sheets": [None],
}  # fmt: skip

LIVE_SEEDS: Final[list[dict[str, Any]]] = [
    {"type": "tensor", "sample": "$sample", "revision": "$revision"},
    {"type": "tensor", "sample": "$sample", "at": 320},
    {"type": "surface", "hash": "$hash", "surface": "value"},
    {"type": "surface", "hash": "$hash", "surface": "quadric"},
    {"type": "turn", "hash": "$hash", "seq": 1, "pose": TILTED, "view": {"hold": "specimen", "matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]]}, "turn": {"drag": [0.4, -0.2]}, "catch": True},
    {"type": "turn", "hash": "$hash", "seq": 2, "pose": TURNED, "turn": {"drag": [0.1, 0.2], "ring": "x"}, "look": [0.1, 0.2], "hold": "crystal", "surface": "flux"},
    {"type": "turn", "hash": "$hash", "seq": 3, "pose": {"quaternion": [1, 0, 0, 0]}, "turn": {"steps": [5, 0, 90]}, "surface": "value", "way": 0.5},
    {"type": "turn", "hash": "$hash", "seq": 4, "pose": {"bunge": [1, 2, 3]}, "put": {"axis": "z", "on": "(-2 0 1)", "toward": ["x", "[0 1 0]"]}},
]  # fmt: skip
"""Messages of the live channel; "$hash" stands for the fingerprint of the sample's tensor."""
