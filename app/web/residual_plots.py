"""Standardised residuals against the predicted value and against the angle from an axis.

A trend with the value speaks for a wrong scale or an offset; one with the angle for a wrong model or frame.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.readings.fit import Fit
from app.readings.reading import Reading
from app.tensor.pose import Pose, resolve_direction
from app.web.charts import Curve, Points, draw_chart

FloatArray = npt.NDArray[np.float64]

HEIGHT: Final = 190.0
FEWEST: Final = 3


def plot_residuals(crystal: Crystal, fit: Fit, readings: Sequence[Reading], pose: Pose) -> list[str]:
    """SVG charts; none where nothing is left to judge by."""
    if fit.readings is None or fit.principal is None or not fit.dof:
        return []
    standardised = np.where(np.isfinite(fit.readings.standardised), fit.readings.standardised, np.nan)
    if int(np.sum(np.isfinite(standardised))) < FEWEST:
        return []
    charts = [_plot(fit.readings.predicted, standardised, "predicted value")]
    axis = fit.principal.axes[0]
    angles = _measure_angles(crystal, readings, axis, pose)
    if int(np.sum(np.isfinite(angles) & np.isfinite(standardised))) >= FEWEST:
        charts.append(_plot(angles, standardised, "angle from p1, °"))
    return charts


def _measure_angles(crystal: Crystal, readings: Sequence[Reading], axis: FloatArray, pose: Pose) -> FloatArray:
    """Degrees, 0 to 90, from a line of the axis; NaN for readings without a direction of their own."""
    angles = np.full(len(readings), np.nan)
    for place, reading in enumerate(readings):
        direction = reading.direction or reading.second
        if direction is not None:
            vector = resolve_direction(crystal, direction, reading.pose or pose)
            across = float(np.linalg.norm(np.cross(vector, axis)))
            angles[place] = np.rad2deg(np.arctan2(across, abs(float(vector @ axis))))
    return angles


def _plot(x: FloatArray, standardised: FloatArray, name: str) -> str:
    known = np.isfinite(x) & np.isfinite(standardised)
    ends = np.array([np.min(x[known]), np.max(x[known])])
    lines = [Curve(ends, np.full(2, float(level)), "", "solid" if level == 0 else "dash") for level in (-2, 0, 2)]
    return draw_chart(
        lines,
        [Points(x[known], standardised[known])],
        x_name=name,
        y_name="residual / σ",
        title=f"Standardised residuals against the {name}",
        height=HEIGHT,
    )
