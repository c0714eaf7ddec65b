"""What a stereogram shows of a crystal, a tensor, a pose and readings: marks and traces, ready to be drawn."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, typeset_indices
from app.crystal.lattice import compute_directions, list_indices
from app.tensor.pose import AXIS_LETTERS
from app.tensor.principal import Principal
from app.tensor.surface_lines import choose_levels, value_lines, zero_cone
from app.web.stereogram import Mark, Trace

FloatArray = npt.NDArray[np.float64]

LINE_POINTS: Final = 1200
SHOWN_LEVELS: Final = 12


def list_poles(
    crystal: Crystal, max_index: int = 1, kinds: Sequence[Literal["normal", "row"]] = ("normal",)
) -> list[Mark]:
    """Normals and rows up to an index, as lines; a click puts z there. None without a cell."""
    if crystal.M is None:
        return []
    indices = list_indices(max_index)
    marks = []
    for kind in kinds:
        for row, vector in zip(indices.tolist(), compute_directions(crystal, kind, indices), strict=True):
            text = format_indices(kind, row)
            other = typeset_indices(format_indices(kind, [-index for index in row]))
            marks.append(Mark(vector, kind, typeset_indices(text), line=True, put=text, opposite=other))
    return marks


def list_principal(principal: Principal) -> list[Mark]:
    """The principal axes that are determined, as lines."""
    return [
        Mark(principal.axes[number], "principal", f"p{number + 1}", line=True)
        for number in range(3)
        if not principal.arbitrary[number]
    ]


def list_specimen(pose: FloatArray) -> list[Mark]:
    """The specimen axes with their signs. ``pose`` has them as rows, in the crystal frame."""
    return [Mark(axis, "specimen", letter) for letter, axis in zip(AXIS_LETTERS, pose, strict=True)]


def list_directions(vectors: Iterable[FloatArray], kind: str, names: Iterable[str]) -> list[Mark]:
    """Directions of readings, as lines: ``kind`` "taken" or "proposed"."""
    return [Mark(np.asarray(vector), kind, name, line=True) for vector, name in zip(vectors, names, strict=True)]


def trace_levels(matrix: FloatArray) -> list[Trace]:
    """Lines of equal value nᵀAn on the sphere, heavy ones apart, and the cone of zero value."""
    values = np.linalg.eigvalsh((matrix + matrix.T) / 2.0)
    if values[2] - values[0] <= 1e-9 * float(np.max(np.abs(values))):
        return []
    levels = choose_levels(float(values[0]), float(values[2]), SHOWN_LEVELS)
    heavy = {round(float(value), 12) for value, is_heavy in zip(levels.values, levels.heavy, strict=True) if is_heavy}
    traces = []
    for line in value_lines(matrix, "value", levels.values, points=LINE_POINTS):
        points = line.points / np.linalg.norm(line.points, axis=1)[:, None]
        # The radius of a line of negative value is its size: the direction is the point's own all the same.
        kind = "level heavy" if line.level is not None and round(line.level, 12) in heavy else "level"
        kind += " minus" if line.level is not None and line.level < 0 else ""
        traces.append(Trace(points, kind, "" if line.level is None else f"{line.level:.6g}"))
    return traces + [Trace(curve, "zero", "0") for curve in zero_cone(matrix)]


def trace_regions(regions: Sequence[tuple[str, FloatArray]]) -> list[Trace]:
    """The regions in which the principal axes can lie."""
    return [Trace(curve, "region") for _, curve in regions]
