"""The variable that the picture of the front page can follow: the series of the property, or of the cell."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from app.crystal.crystal import Crystal
from app.errors import HalfturnError
from app.series.expansion import CellFit, compute_expansion
from app.series.tensor_series import TensorFit, evaluate_tensors
from app.store.document import KeptProperty, SampleDocument
from app.tensor.form import build_form
from app.tensor.tensor import PropertyTensor, build_tensor
from app.web.kept import kind_of
from app.web.series_charts import SCALE
from app.web.series_view import BEYOND, fit_kept_series, kept_series
from app.web.tensor_series_view import find_range, fit_tensor_series, is_empty

EXPANSION_UNIT = "1e-6/K"


@dataclass(frozen=True)
class Followed:
    """A series that gives the property at any value of its variable.

    Attributes:
        low, high: range of the slider, a little beyond what was measured.
        measured: first and last measured value.
        symbol, unit: of the variable.
        fit: of tensors, or of cells, where the property is their expansion.
    """

    low: float
    high: float
    measured: tuple[float, float]
    symbol: str
    unit: str
    fit: TensorFit | CellFit

    def take(self, crystal: Crystal, shown: KeptProperty, at: float) -> PropertyTensor:
        """The tensor at a value, with its covariance, in the unit of the property."""
        labels = build_form(crystal, kind_of(shown)).labels
        if isinstance(self.fit, CellFit):
            estimate = compute_expansion(self.fit, [at]).estimates[0]
            places = [3 * (int(label[0]) - 1) + int(label[1]) - 1 for label in labels]
            values = SCALE * estimate.matrix.ravel()[places]
            covariance = None
            if estimate.covariance is not None:
                covariance = SCALE**2 * estimate.covariance[np.ix_(places, places)]
        else:
            curve = evaluate_tensors(self.fit, [at])
            values = curve.free[0]
            covariance = None if curve.free_covariance is None else curve.free_covariance[0]
        free = dict(zip(labels, values.tolist(), strict=True))
        return build_tensor(crystal, kind_of(shown), free=free, covariance=covariance)

    def describe(self, at: float | None) -> dict[str, Any]:
        """For the page."""
        beyond = at is not None and not self.measured[0] <= at <= self.measured[1]
        place = sum(self.measured) / 2 if at is None else at
        return {
            "low": self.low,
            "high": self.high,
            "step": (self.high - self.low) / 200 or 1.0,
            "at": at,
            "place": place,
            "symbol": self.symbol,
            "text": f"{place:.4g} {self.unit}".strip().replace("-", "−"),
            "beyond": "beyond what was measured" if beyond else "",
        }


def find_followed(document: SampleDocument, crystal: Crystal, shown: KeptProperty) -> Followed | None:
    """The series of a property; None where there is none, or where it cannot be fitted (the Series page says why)."""
    try:
        if not is_empty(document, shown):
            series = fit_tensor_series(document, crystal, shown)
            low, high = find_range(series.fit)
            measured = (series.fit.variable.lowest, series.fit.variable.highest)
            return Followed(low, high, measured, series.symbol, series.unit, series.fit)
        if (
            shown.kind == "thermal_expansion"
            and shown.unit == EXPANSION_UNIT
            and kept_series(document)["table"].strip()
        ):
            cells, fit, variable = fit_kept_series(document, crystal)
            if variable != "temperature":
                return None
            measured = (cells.variable.lowest, cells.variable.highest)
            room = BEYOND * (measured[1] - measured[0])
            return Followed(measured[0] - room, measured[1] + room, measured, "T", "K", fit)
    except HalfturnError:
        return None
    return None
