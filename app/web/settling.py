"""What would settle the tensor: directions in which one more reading sees what the readings in use do not tell."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import HalfturnError
from app.readings.report import describe_suggestion
from app.store.document import KeptProperty, SampleDocument, readings_of
from app.tensor.pose import resolve_direction
from app.web.kept import pose_of
from app.web.kept_readings import fit_document

FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Settling:
    """Directions, shape (m, 3), unit vectors in the crystal frame, and a sentence; none and None where all is told."""

    directions: FloatArray
    sentence: str | None


NOTHING = Settling(np.zeros((0, 3)), None)


def fingerprint_readings(document: SampleDocument, shown: KeptProperty) -> list[Any]:
    """What the answer depends on beside crystal and property, for a hash."""
    used = [entry.plain() for entry in readings_of(document, shown.id) if entry.set_aside is None]
    # The pose only where a reading leans on it, so that turning the specimen does not make another subject.
    leans = any(
        entry.get("pose") is None and "specimen" in str([entry.get("direction"), entry.get("second")]) for entry in used
    )
    return [used, document.pose.plain() if leans else None, dict(document.batches)] if used else []


def find_settling(crystal: Crystal, document: SampleDocument, shown: KeptProperty) -> Settling:
    """The suggestions of the fit, where the readings in use do not determine the tensor."""
    if all(entry.set_aside is not None for entry in readings_of(document, shown.id)):
        return NOTHING
    try:
        fit, _ = fit_document(crystal, document, shown)
    except HalfturnError:
        # The Readings page says what is wrong with them.
        return NOTHING
    if fit.estimate is not None or not fit.undetermined:
        return NOTHING
    pose = pose_of(crystal, document.pose)
    directions = [
        resolve_direction(crystal, entry.suggestion.direction, pose)
        for entry in fit.undetermined
        if entry.suggestion.direction is not None
    ]
    told = " and ".join(describe_suggestion(entry) for entry in fit.undetermined)
    return Settling(
        np.array(directions).reshape(-1, 3),
        f"The readings do not tell the whole tensor. Targets on the surface: {told} would settle it.",
    )
