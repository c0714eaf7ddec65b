"""Directions that the point group makes equal, as vectors and in index form."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, format_indices

FloatArray = npt.NDArray[np.float64]

SAME: Final = 1e-9


@dataclass(frozen=True)
class Equivalent:
    """One of a set of equivalent directions.

    Attributes:
        vector: unit vector, crystal frame.
        form: its index form where the direction has one, else the vector as a list.
    """

    vector: FloatArray
    form: Any


def list_equivalents(crystal: Crystal, direction: Direction, *, only_itself: bool = False) -> list[Equivalent]:
    """The direction and all that the operations of the point group (proper and improper) bring it to.

    A plane's normal goes over as a vector: an inversion turns n(hkl) into n(−h −k −l), the same set of planes from the
    other side. The direction itself is first, in the form in which it was typed. Of a limiting group only itself.
    """
    start = crystal.resolve(direction)
    found = [Equivalent(start, _own_form(direction, start))]
    if only_itself or crystal.group.limiting:
        return found
    vectors = crystal.rotations @ start
    for vector in vectors:
        if all(float(np.max(np.abs(vector - other.vector))) > SAME for other in found):
            found.append(Equivalent(vector, _find_form(crystal, direction, vector)))
    return found


def _own_form(direction: Direction, vector: FloatArray) -> Any:
    if direction.kind == "row" or direction.kind == "normal":
        return direction.text or format_indices(direction.kind, direction.values)
    return vector.tolist()


def _find_form(crystal: Crystal, direction: Direction, vector: FloatArray) -> Any:
    """Indices of the turned direction: as large as those that it came from."""
    if direction.kind not in ("row", "normal") or crystal.M is None:
        return vector.tolist()
    values = np.asarray(direction.values, dtype=np.float64)
    kind: Literal["row", "normal"] = "row" if direction.kind == "row" else "normal"
    own = crystal.M @ values if kind == "row" else crystal.reciprocal @ values
    scaled = vector * float(np.linalg.norm(own))
    indices = np.linalg.solve(crystal.M, scaled) if kind == "row" else crystal.M.T @ scaled
    rounded = np.rint(indices)
    close = float(np.max(np.abs(indices - rounded))) < 1e-6 * max(1.0, float(np.max(np.abs(indices))))
    return format_indices(kind, (rounded + 0.0 if close else np.round(indices, 9) + 0.0).tolist())
