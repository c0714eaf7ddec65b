"""A part in numbers and drawings: its frame, the order of its cuts, what is lost to the saw, what it will read."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.readings.rocking import judge_piece
from app.tensor.estimate import Estimate
from app.tensor.pose import Pose
from app.tensor.printing import print_value
from app.tensor.sentence import place_direction
from app.tensor.values import compute_rod_values, compute_values

FloatArray = npt.NDArray[np.float64]
Shape = Literal["plate", "wafer", "bar", "cube", "prism"]

SHAPES: Final = {
    "plate": "Plate, z across its faces",
    "wafer": "Wafer, z across its faces",
    "bar": "Bar, z along its length",
    "cube": "Cube",
    "prism": "Prism, z along its length",
}
KERF: Final = 0.3
STOCK: Final = 0.05
"""Millimetres lost to a diamond blade, and left on each face for polishing; common practice, no source."""


@dataclass(frozen=True)
class Cut:
    """One cut: which face, its normal, what lies in it, where the blade goes."""

    number: int
    face: str
    normal: FloatArray
    edge: FloatArray
    kept: str
    distance: float


def list_cuts(shape: str, size: tuple[float, float, float], pose: FloatArray, kerf: float, stock: float) -> list[Cut]:
    """The cuts in their order; each is made on the piece that the one before left.

    Args:
        shape, size: of the finished part, mm along x, y, z.
        pose: the part's axes as rows, crystal frame.
        kerf: width of the cut, mm.
        stock: left on every face for polishing, mm.
    """
    order = {"plate": "zxy", "wafer": "zxy", "bar": "xyz", "cube": "zxy", "prism": "xyz"}[shape]
    cuts: list[Cut] = []
    for letter in order:
        axis = "xyz".index(letter)
        across = pose[(axis + 1) % 3] if letter == "x" else pose[0]
        for sign, first in ((1, True), (-1, False)):
            cuts.append(
                Cut(
                    number=len(cuts) + 1,
                    face=f"{'+' if sign > 0 else '−'}{letter}",
                    normal=sign * pose[axis],
                    edge=across,
                    kept=f"{'−' if sign > 0 else '+'}{letter} side",
                    # From the first face to the blade's near side of the opposite one.
                    distance=0.0 if first else float(size[axis]) + 2 * stock,
                )
            )
    return cuts


def measure_raw(size: tuple[float, float, float], kerf: float, stock: float) -> list[float]:
    """What a part takes out of the boule along x, y, z, in mm: itself, two polishing stocks and a kerf on each side."""
    return [float(edge) + 2 * stock + 2 * kerf for edge in size]


def judge_shape(size: tuple[float, float, float]) -> str:
    """Whether a part of this size reads as a rod along its length, as a plate across its thickness, or as neither."""
    wide, narrow, long = max(size[0], size[1]), min(size[0], size[1]), size[2]
    return judge_piece(long, wide, narrow)[1] if long >= wide else judge_piece(wide, narrow, long)[1]


def describe_part(
    crystal: Crystal, estimate: Estimate, other: str | None, part: Mapping[str, Any], pose: Pose
) -> dict[str, Any]:
    """Everything that the page says of a part beside its drawing."""
    size = (float(part["size"][0]), float(part["size"][1]), float(part["size"][2]))
    posed = estimate.turn(pose.matrix, "part frame")
    cuts = list_cuts(str(part["shape"]), size, pose.matrix, float(part["kerf"]), float(part["stock"]))
    return {
        "size": [f"{edge:g}" for edge in size],
        "raw": [f"{edge:.2f}" for edge in measure_raw(size, float(part["kerf"]), float(part["stock"]))],
        "judged": judge_shape(size),
        "cuts": [
            {
                "number": cut.number,
                "face": cut.face,
                "normal": place_direction(crystal, cut.normal).text.removeprefix("on "),
                "edge": place_direction(crystal, cut.edge).text.removeprefix("on "),
                "kept": cut.kept,
                "distance": "" if cut.distance == 0 else f"{cut.distance:.2f} mm",
            }
            for cut in cuts
        ],
        "reads": _list_reads(estimate, other, pose.matrix),
        "posed": posed,
    }


def _list_reads(estimate: Estimate, other: str | None, pose: FloatArray) -> list[dict[str, str]]:
    """The value along each axis of the part, and as a rod or plate where that differs."""
    values, sigmas = compute_values(estimate.matrix, pose), estimate.value_sigma(pose)
    rods, rod_sigmas = compute_rod_values(estimate.matrix, pose), estimate.rod_sigma(pose)
    rows = []
    for axis, letter in enumerate("xyz"):
        row = {
            "axis": letter,
            "value": print_value(float(values[axis]), None if sigmas is None else float(sigmas[axis])),
            "other": "",
        }
        if other is not None and np.isfinite(rods[axis]):
            sigma = None if rod_sigmas is None or not np.isfinite(rod_sigmas[axis]) else float(rod_sigmas[axis])
            row["other"] = print_value(float(rods[axis]), sigma)
        rows.append(row)
    return rows
