"""The stereogram of a set of readings: what was measured, the axes that follow and the directions that would help."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import HalfturnError
from app.readings.fit import Fit
from app.readings.reading import Reading
from app.tensor.pose import Pose, resolve_direction
from app.tensor.region import find_region
from app.tensor.tensor import build_tensor
from app.web.stereogram import Mark, Picture, Trace, draw_stereogram
from app.web.stereogram_view import list_directions, list_poles, list_principal, trace_levels, trace_regions

FloatArray = npt.NDArray[np.float64]

BLIND_POINTS: Final = 240


def draw_readings(crystal: Crystal, fit: Fit, readings: Sequence[Reading], pose: Pose) -> str:
    """Readings taken; of a determined tensor its values, axes and their regions, else what would settle it."""
    taken = list_taken(crystal, readings, pose)
    marks: list[Mark] = list_poles(crystal)
    marks = [Mark(mark.vector, mark.kind, mark.name, line=True) for mark in marks]
    traces: list[Trace] = []
    title = f"Stereogram with {len(taken)} directions of readings"
    if fit.estimate is not None and fit.principal is not None:
        traces += trace_levels(fit.estimate.matrix)
        traces += trace_regions(_find_regions(crystal, fit))
        marks = list_principal(fit.principal) + marks
        title += ", the principal axes and the regions in which they can lie"
    else:
        suggested = [entry.suggestion.direction for entry in fit.undetermined]
        vectors = [resolve_direction(crystal, direction, pose) for direction in suggested if direction is not None]
        marks = list_directions(vectors, "proposed", ["would settle it"] * len(vectors)) + marks
        traces += [trace for entry in fit.undetermined for trace in _trace_blind(entry.matrix)]
        title += ", and the directions that would settle what they cannot tell"
    return draw_stereogram(crystal, Picture([*marks, *taken], traces), title=title)


def list_taken(crystal: Crystal, readings: Sequence[Reading], pose: Pose) -> list[Mark]:
    """A mark for every line along which, or in a plane with which, something was read."""
    vectors: list[FloatArray] = []
    for reading in readings:
        for direction in (reading.direction, reading.second):
            if direction is None:
                continue
            vector = resolve_direction(crystal, direction, reading.pose or pose)
            if all(abs(float(vector @ other)) < 1.0 - 1e-9 for other in vectors):
                vectors.append(vector)
    return list_directions(vectors, "taken", [""] * len(vectors))


def _find_regions(crystal: Crystal, fit: Fit) -> list[tuple[str, FloatArray]]:
    if fit.free_covariance is None or fit.free is None or not np.any(fit.free_covariance):
        return []
    try:
        tensor = build_tensor(
            crystal,
            fit.form.kind,
            free=dict(zip(fit.form.labels, fit.free.tolist(), strict=True)),
            covariance=fit.free_covariance,
        )
        region = find_region(crystal, tensor)
    except HalfturnError:
        return []
    return [(kind, curve) for kind, curve in zip(region.kinds, region.curves, strict=True) if len(curve) > 1]


def _trace_blind(unseen: FloatArray) -> list[Trace]:
    """Where a reading along the direction would not see the combination either: the zero cone of its change."""
    return [Trace(trace.points, "zero") for trace in trace_levels(unseen) if trace.kind == "zero"]
