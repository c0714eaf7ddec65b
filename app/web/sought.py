"""The tensors that a search for a direction may be over: properties, and how they change with temperature."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.cutting.seek import Condition, Sought, seek
from app.errors import HalfturnError, InputError, located
from app.store.document import KeptProperty, SampleDocument, find_property
from app.web.kept import crystal_for, entry_of, print_own_unit, tensor_of

FloatArray = npt.NDArray[np.float64]

RATE: str = "rate:"


@dataclass(frozen=True)
class SoughtTensor:
    """A tensor to search over, in the crystal frame."""

    key: str
    name: str
    unit: str
    matrix: FloatArray


def list_sought(document: SampleDocument) -> list[dict[str, str]]:
    """Keys and names of all: every property, and the change by temperature of every two of one kind and unit."""
    found = [{"id": entry.id, "name": entry.name} for entry in document.properties]
    for first, second in combinations(document.properties, 2):
        low, high = sorted((first, second), key=lambda entry: _temperature(entry) or 0.0)
        if first.kind == second.kind and first.unit == second.unit and _has_span(low, high):
            name = f"change of {low.name} per kelvin, {_temperature(low):g} to {_temperature(high):g} K"
            found.append({"id": f"{RATE}{low.id}:{high.id}", "name": name})
    return found


def find_sought(crystal: Crystal, document: SampleDocument, key: str) -> SoughtTensor:
    """The tensor of a key. Raises InputError where there is none."""
    if not key.startswith(RATE):
        kept = find_property(document, key)
        return SoughtTensor(key, kept.name, _print_unit(kept), _matrix(crystal, document, kept))
    parts = key.removeprefix(RATE).split(":")
    if len(parts) != 2:
        raise InputError("A change by temperature names two properties.", hint="Choose one of the list.")
    low, high = (find_property(document, part) for part in parts)
    if not _has_span(low, high):
        raise InputError("The two properties have no different temperatures.", hint="Note the temperature of each.")
    span = (_temperature(high) or 0.0) - (_temperature(low) or 0.0)
    change = (_matrix(crystal, document, high) - _matrix(crystal, document, low)) / span
    unit = _print_unit(low)
    return SoughtTensor(key, f"change of {low.name} per kelvin", f"{unit}/K" if unit else "1/K", change)


def take_conditions(
    crystal: Crystal, document: SampleDocument, wanted: Sequence[Mapping[str, Any]]
) -> tuple[Sought, list[dict[str, str]]]:
    """The answer to one or two {property, target}, and name and unit of each property.

    Raises:
        InputError: at ``conditions[i].property`` or as ``seek`` does.
    """
    conditions, named = [], []
    for number, condition in enumerate(wanted):
        with located(f"conditions[{number}].property"):
            found = find_sought(crystal, document, str(condition["property"]))
        conditions.append(Condition(found.matrix, condition["target"]))
        named.append({"name": found.name, "unit": found.unit})
    return seek(conditions), named


@dataclass(frozen=True)
class Answer:
    """A search that is shown in the scene: lines of directions, single ones (m, 3), and its sentence."""

    curves: tuple[FloatArray, ...]
    directions: FloatArray
    sentence: str


def find_answer(crystal: Crystal, document: SampleDocument) -> Answer | None:
    """The answer to the search that the sample keeps for its scene; None where there is none any more."""
    wanted = document.plain()["looking"].get("sought")
    if not wanted:
        return None
    try:
        sought, _ = take_conditions(crystal, document, wanted)
    except (HalfturnError, KeyError, TypeError):
        # The property was taken out, or what is kept is of another version.
        return None
    return Answer(sought.curves, np.array(sought.locus.lines).reshape(-1, 3), sought.sentence)


def fingerprint_answer(document: SampleDocument) -> Any:
    """What the answer depends on beside the crystal, for a hash."""
    plain = document.plain()
    wanted = plain["looking"].get("sought")
    return [wanted, plain["properties"]] if wanted else None


def _matrix(crystal: Crystal, document: SampleDocument, kept: KeptProperty) -> FloatArray:
    return tensor_of(crystal_for(crystal, document.crystal, entry_of(kept)), kept).estimate.matrix


def _temperature(kept: KeptProperty) -> float | None:
    return None if kept.conditions is None else kept.conditions.temperature


def _has_span(low: KeptProperty, high: KeptProperty) -> bool:
    first, second = _temperature(low), _temperature(high)
    return first is not None and second is not None and abs(second - first) > 1e-9


def _print_unit(kept: KeptProperty) -> str:
    unit = print_own_unit(kept.unit)
    return "" if unit == "1" else unit
