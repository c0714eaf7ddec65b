"""The charts of the Series page: principal expansions, the drift of the free axes, residuals of the cell."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction, typeset_indices
from app.crystal.lattice import find_nearest
from app.series.branches import follow_branches
from app.series.cell_series import CellSeries
from app.series.expansion import CellFit, ExpansionCurve
from app.series.moving_directions import measure_drift
from app.web.charts import STROKES, Curve, Points, draw_chart

FloatArray = npt.NDArray[np.float64]

SCALE: Final = 1e6
"""Expansion is printed in 10⁻⁶ per unit of the variable."""

CELL_SYMBOLS: Final = ("a", "b", "c", "α", "β", "γ")


@dataclass(frozen=True)
class ShownSeries:
    """A fitted series, how it is kept, and the words for its variable."""

    kept: dict[str, Any]
    series: CellSeries
    fit: CellFit
    symbol: str
    unit: str

    @property
    def per(self) -> str:
        """The printed unit of expansion."""
        return f"10⁻⁶/{self.unit}" if self.unit else "10⁻⁶ per unit"

    def say(self, t: float) -> str:
        """A value of the variable with its unit."""
        return f"{t:.6g} {self.unit}".strip().replace("-", "−")

    @property
    def axis_name(self) -> str:
        """For a chart."""
        return f"{self.symbol}, {self.unit}" if self.unit else self.symbol


def draw_series(shown: ShownSeries, curve: ExpansionCurve, t: float) -> list[dict[str, str]]:
    """Every chart with its title and note, ``t`` marked in them; ``curve`` runs a little beyond what was measured."""
    measured = (shown.series.variable.lowest, shown.series.variable.highest)
    followed = follow_branches(curve.alpha)
    covariance = curve.covariance
    spread = None
    if covariance is not None:
        outer = np.einsum("tka,tkb->tkab", followed.axes, followed.axes).reshape(len(curve.t), 3, 9)
        spread = SCALE * np.sqrt(np.maximum(np.einsum("tka,tab,tkb->tk", outer, covariance, outer), 0.0))
    values = [
        Curve(
            curve.t,
            SCALE * followed.values[:, k],
            f"p{k + 1}",
            STROKES[k],
            None if spread is None else spread[:, k],
        )
        for k in range(3)
    ]
    charts = [
        {
            "title": "Principal expansions, each followed by its direction",
            "note": "The band is two standard deviations to either side; hatched ground was not measured.",
            "svg": draw_chart(
                values,
                x_name=shown.axis_name,
                y_name=shown.per,
                title="Principal expansions",
                measured=measured,
                marked=t,
            ),
        }
    ]
    charts += _draw_drifts(shown, curve, t, measured)
    residuals = shown.fit.residuals
    sigma = shown.series.sigma
    for place, position in enumerate(shown.series.independent.positions):
        name = CELL_SYMBOLS[position]
        unit = "10⁻⁴ Å" if position < 3 else "10⁻³ °"
        factor = 1e4 if position < 3 else 1e3
        charts.append(
            {
                "title": f"Residuals of {name}",
                "note": "Measured less fitted.",
                "svg": draw_chart(
                    [Curve(np.array(measured), np.zeros(2))],
                    [
                        Points(
                            shown.series.t,
                            factor * residuals[:, position],
                            None if sigma is None else factor * sigma[:, place],
                        )
                    ],
                    x_name=shown.axis_name,
                    y_name=unit,
                    title=f"Residuals of {name}",
                    height=150.0,
                ),
            }
        )
    return charts


def _draw_drifts(
    shown: ShownSeries, curve: ExpansionCurve, t: float, measured: tuple[float, float]
) -> list[dict[str, str]]:
    """How each axis that symmetry does not hold turns against the row and the normal nearest to it in the middle."""
    followed = follow_branches(curve.alpha)
    crystal = shown.series.crystal
    middle = len(curve.t) // 2
    charts = []
    for branch in range(3):
        near = [name_line(crystal, followed.axes[middle, branch], kind) for kind in ("row", "normal")]
        row, normal = (measure_drift(curve, followed, branch, read_direction(text)) for text in near)
        if np.nanmax(row.degrees) - np.nanmin(row.degrees) < 1e-6:
            continue
        title = f"Drift of p{branch + 1}"
        charts.append(
            {
                "title": title,
                "note": f"Solid, with its band: from {typeset_indices(near[0])}; dashed: from "
                f"{typeset_indices(near[1])}. Frames turn with the cell, so a drift is told against named directions.",
                "svg": draw_chart(
                    [
                        Curve(curve.t, row.degrees, "row", "solid", row.sigma),
                        Curve(curve.t, normal.degrees, "normal", "dash"),
                    ],
                    x_name=shown.axis_name,
                    y_name="degrees",
                    title=title,
                    measured=measured,
                    marked=t,
                    floor=0.0,
                ),
            }
        )
    return charts


def name_line(crystal: Crystal, axis: FloatArray, kind: Literal["row", "normal"]) -> str:
    """The nearest low-index row or normal of a line, in the sense whose first index is positive."""
    text = find_nearest(crystal, axis, kind).text
    leading = next((sign for sign in text[1:].split() if sign.strip(")]") not in ("0", "")), "")
    return find_nearest(crystal, -axis, kind).text if leading.startswith("-") else text
