"""Readings between a kept document and the fit: read from it, written into it, shown as a table."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction, read_direction
from app.errors import located
from app.readings.fit import Fit, fit_readings
from app.readings.reading import Reading
from app.readings.table import ReadingTable, write_table
from app.store.canonical import plain
from app.store.document import KeptProperty, KeptReading, SampleDocument, readings_of
from app.tensor.pose import read_pose
from app.web.kept import kind_of, pose_of, print_own_unit
from app.web.rendering import render_direction


def take_readings(crystal: Crystal, kept: Sequence[KeptReading]) -> list[Reading]:
    """The readings that are in use, for a fit; those that are set aside are left out.

    Raises:
        InputError: a direction or pose that cannot be read, at ``readings[i]``.
    """
    return [reading for reading, entry in zip(take_all(crystal, kept), kept, strict=True) if entry.set_aside is None]


def take_all(crystal: Crystal, kept: Sequence[KeptReading]) -> list[Reading]:
    """All the readings, those set aside included. Raises InputError as ``take_readings`` does."""
    return [_take_reading(crystal, entry, f"readings[{index}]") for index, entry in enumerate(kept)]


def fit_document(crystal: Crystal, document: SampleDocument, shown: KeptProperty) -> tuple[Fit, list[Reading]]:
    """The fit of a property's readings that are in use, and these. Raises InputError as ``fit_readings`` does."""
    readings = take_readings(crystal, readings_of(document, shown.id))
    fit = fit_readings(
        crystal,
        kind_of(shown),
        readings,
        batches=dict(document.batches),
        pose=pose_of(crystal, document.pose),
        unit=print_own_unit(shown.unit),
    )
    return fit, readings


def _take_reading(crystal: Crystal, kept: KeptReading, field: str) -> Reading:
    with located(field):
        return Reading(
            kind=kept.kind,
            value=kept.value,
            direction=_take_direction(kept.direction, "direction"),
            second=_take_direction(kept.second, "second"),
            sigma=kept.sigma,
            direction_sigma=kept.direction_sigma,
            bar=kept.bar,
            batch=kept.batch,
            pose=None if kept.pose is None else read_pose(plain(kept.pose), crystal),
            temperature=kept.temperature,
            note=kept.note or None,
        )


def _take_direction(given: Any, field: str) -> Direction | None:
    if given is None:
        return None
    with located(field):
        return read_direction(plain(given))


def keep_table(table: ReadingTable, property_id: str, unit: str) -> list[dict[str, Any]]:
    """The rows of a table as a document keeps them."""
    return [_keep_reading(reading, property_id, unit) for reading in table.readings]


def _keep_reading(reading: Reading, property_id: str, unit: str) -> dict[str, Any]:
    given = {
        "property": property_id,
        "kind": reading.kind,
        "direction": None if reading.direction is None else _spell(reading.direction),
        "second": None if reading.second is None else _spell(reading.second),
        "value": reading.value,
        "sigma": reading.sigma,
        "direction_sigma": reading.direction_sigma,
        "bar": reading.bar,
        "batch": reading.batch,
        "unit": unit,
        "temperature": reading.temperature,
        "note": reading.note,
    }
    return {key: value for key, value in given.items() if value is not None}


def _spell(direction: Direction) -> Any:
    return direction.text if direction.text and direction.kind in ("row", "normal") else render_direction(direction)


def write_readings(crystal: Crystal, kept: Sequence[KeptReading], unit: str) -> str:
    """The readings in use as a table to edit."""
    return write_table(take_readings(crystal, kept), unit)
