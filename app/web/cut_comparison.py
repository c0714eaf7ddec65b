"""Every property of a sample along every candidate cut, and which cuts no other beats in all of them."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.cutting.miscut import compute_slopes
from app.errors import HalfturnError
from app.store.document import KeptProperty, SampleDocument
from app.tensor.principal import Principal
from app.tensor.values import compute_values
from app.web.cut_target import Target
from app.web.kept import crystal_for, entry_of, print_own_unit, tensor_of
from app.web.stereogram_view import list_poles, list_principal

FloatArray = npt.NDArray[np.float64]

WISHES: Final = ("largest", "smallest", "steady")
"""What is wanted of a property: its value large or small, or little changed by a miscut."""


def compare_cuts(
    crystal: Crystal, document: SampleDocument, principal: Principal, target: Target
) -> dict[str, Any] | None:
    """Values and their changes per degree, per candidate and property; None without a property that can be computed.

    Candidates are the target, the principal axes, and the planes and rows of lowest index. A cut is beaten where
    another is better in one property's wish and not worse in any.
    """
    estimates = []
    for kept in document.properties:
        try:
            tensor = tensor_of(crystal_for(crystal, document.crystal, entry_of(kept)), kept)
        except HalfturnError:
            continue
        estimates.append((kept, tensor.estimate.matrix))
    if not estimates:
        return None
    names, cuts, vectors = _list_candidates(crystal, principal, target)
    wishes = [_read_wish(document, kept) for kept, _ in estimates]
    values = np.stack([compute_values(matrix, vectors) for _, matrix in estimates], axis=1)
    slopes = np.stack([compute_slopes(matrix, vectors) for _, matrix in estimates], axis=1)
    costs = np.stack([_price(wish, values[:, k], slopes[:, k]) for k, wish in enumerate(wishes)], axis=1)
    unbeaten = find_unbeaten(costs)
    order = np.lexsort((np.arange(len(names)), ~unbeaten))
    return {
        "properties": [
            {"id": kept.id, "name": kept.name, "unit": _print_unit(kept), "wish": wish}
            for (kept, _), wish in zip(estimates, wishes, strict=True)
        ],
        "wishes": list(WISHES),
        "rows": [
            {
                "name": names[place],
                "cut": cuts[place],
                "unbeaten": bool(unbeaten[place]),
                "values": [_print(float(value)) for value in values[place]],
                "slopes": [_print(float(slope)) for slope in slopes[place]],
            }
            for place in order.tolist()
        ],
    }


def find_unbeaten(costs: FloatArray) -> npt.NDArray[np.bool_]:
    """Which rows (n, k) no other row is at least as good as in every column and better in one; lower is better."""
    slack = 1e-9 * np.maximum(np.max(np.abs(costs), axis=0), 1e-300)
    not_worse = np.all(costs[:, None] <= costs[None, :] + slack, axis=-1)
    better = np.any(costs[:, None] < costs[None, :] - slack, axis=-1)
    unbeaten: npt.NDArray[np.bool_] = ~np.any(not_worse & better, axis=0)
    return unbeaten


def _list_candidates(crystal: Crystal, principal: Principal, target: Target) -> tuple[list[str], list[str], FloatArray]:
    marks = list_poles(crystal, 1, ("normal", "row"))
    axes = list_principal(principal)
    names = [target.name, *(mark.name for mark in axes), *(typeset_indices(mark.put) for mark in marks)]
    cuts = ["", *("" for _ in axes), *(mark.put for mark in marks)]
    vectors = np.array([target.vector, *(mark.vector for mark in axes), *(mark.vector for mark in marks)])
    return names, cuts, vectors


def _read_wish(document: SampleDocument, kept: KeptProperty) -> str:
    wishes = document.looking.get("wishes")
    wish = wishes.get(kept.id) if hasattr(wishes, "get") else None
    return wish if wish in WISHES else "largest"


def _price(wish: str, values: FloatArray, slopes: FloatArray) -> FloatArray:
    return -values if wish == "largest" else values if wish == "smallest" else slopes


def _print_unit(kept: KeptProperty) -> str:
    unit = print_own_unit(kept.unit)
    return "" if unit == "1" else unit


def _print(value: float) -> str:
    return f"{0.0 if abs(value) < 1e-12 else value:.4g}".replace("-", "−")
