"""The sample document: what is kept of one sample, as a frozen model and as plain JSON-like data.

The model checks structure only: which fields there are, how many numbers each has, that names within the document
agree. Whether a cell obeys its group, whether a direction can be read and what a tensor's free cells are is the
business of the packages that calculate. Fields that this version does not know are kept as they are, so that a
document of a later minor change passes through unharmed.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Literal

from pydantic import Field, StrictInt, ValidationError, model_validator

from app.errors import InputError
from app.store.canonical import freeze
from app.store.shapes import (
    IDENTITY,
    Direction,
    Free,
    Json,
    JsonObject,
    Matrix,
    Name,
    Number,
    NumberMap,
    Pose,
    Positive,
    Record,
    Six,
    Text,
    fail,
    path_of,
    sentence_of,
)

SCHEMA_VERSION = 1
DEFAULT_PART = (5.0, 5.0, 5.0)

_NEEDS: dict[str, tuple[str, ...]] = {
    "along": ("direction",),
    "across": ("direction", "second"),
    "difference": ("direction", "second"),
    "mean": (),
    "rod": ("direction",),
    "sheet": ("second",),
}


class KeptCrystal(Record):
    """Cell (angstrom, degrees; null for a limiting group), point or space group, and the frame rule."""

    cell: Six | None
    cell_sigma: Six | None = None
    group: Name
    unique_axis: Literal["a", "b", "c"] | None = None
    frame: Name = "x3=c x2=b*"

    @model_validator(mode="after")
    def _check(self) -> KeptCrystal:
        if self.cell is not None:
            for index, number in enumerate(self.cell):
                if number <= 0:
                    fail("A length or an angle of a cell is more than zero.", f"cell[{index}]")
        if self.cell_sigma is not None and min(self.cell_sigma) < 0:
            fail("A standard deviation is not negative.", "cell_sigma")
        return self


class KeptTensor(Record):
    """Values of the free cells in the crystal frame, with their covariance in row order of the cells."""

    parity: Literal["polar", "axial"] = "polar"
    intrinsic: Literal["symmetric", "general", "antisymmetric"] = "symmetric"
    free: Free
    covariance: Matrix | None = None

    @model_validator(mode="after")
    def _check(self) -> KeptTensor:
        if self.covariance is not None:
            size = len(self.free)
            if len(self.covariance) != size or any(len(row) != size for row in self.covariance):
                fail(f"The covariance of {size} free cells has {size} rows of {size} numbers.", "covariance")
            if any(self.covariance[index][index] < 0 for index in range(size)):
                fail("The diagonal of a covariance is not negative.", "covariance")
        return self


class Conditions(Record):
    """Circumstances of a property: temperature in kelvin, and any further text by name."""

    temperature: Number | None = None


class KeptProperty(Record):
    """One property of the sample. ``kind`` is a key of the catalogue, or ``other``."""

    id: Name
    name: Name
    kind: Name
    symbol: Text | None = None
    unit: Text
    tensor: KeptTensor
    source: Text = ""
    conditions: Conditions = Conditions()


class KeptReading(Record):
    """One measured number of the property with the id ``property``; ``set_aside`` gives the reason, if it is not used.

    Temperature in kelvin, ``direction_sigma`` in degrees, ``value`` and ``sigma`` in ``unit``.
    """

    property: Name
    kind: Literal["along", "across", "difference", "mean", "rod", "sheet"]
    direction: Direction | None = None
    second: Direction | None = None
    value: Number
    sigma: Positive | None = None
    direction_sigma: Number | None = Field(default=None, ge=0)
    bar: Name | None = None
    batch: Name | None = None
    pose: Pose | None = None
    unit: Text | None = None
    temperature: Number | None = None
    note: Text = ""
    set_aside: Text | None = None

    @model_validator(mode="after")
    def _check(self) -> KeptReading:
        for name in _NEEDS[self.kind]:
            if getattr(self, name) is None:
                fail(f"A reading of the kind {self.kind} needs this direction.", name)
        return self


class NamedPose(Record):
    """A pose to come back to."""

    name: Name
    pose: Pose


class SampleDocument(Record):
    """Everything kept of one sample. ``part`` is the block that will be cut, in mm along x, y and z."""

    schema_version: StrictInt = SCHEMA_VERSION
    name: Name
    notes: Text = ""
    tags: tuple[Name, ...] = ()
    crystal: KeptCrystal
    properties: tuple[KeptProperty, ...] = ()
    readings: tuple[KeptReading, ...] = ()
    batches: NumberMap = Field(default_factory=lambda: freeze({}), validate_default=True)
    pose: Pose = Field(default_factory=lambda: IDENTITY)
    poses: tuple[NamedPose, ...] = ()
    part: tuple[Positive, Positive, Positive] = DEFAULT_PART
    sightings: tuple[Json, ...] = ()
    parts: tuple[Json, ...] = ()
    series: tuple[Json, ...] = ()
    looking: JsonObject = Field(default_factory=lambda: freeze({}))

    @model_validator(mode="after")
    def _check(self) -> SampleDocument:
        _refuse_repeats([item.id for item in self.properties], "properties", "id")
        known = {item.id for item in self.properties}
        _refuse_repeats([item.name for item in self.poses], "poses", "name")
        for index, reading in enumerate(self.readings):
            if reading.property not in known:
                fail(f"There is no property with the id {reading.property}.", f"readings[{index}].property")
        for name, sigma in self.batches.items():
            if sigma < 0:
                fail("The relative standard deviation of a batch is not negative.", f"batches.{name}")
        return self


def _refuse_repeats(names: list[str], field: str, key: str) -> None:
    seen: set[str] = set()
    for index, name in enumerate(names):
        if name in seen:
            fail(f"The {key} {name} stands here twice.", f"{field}[{index}].{key}")
        seen.add(name)


def read_document(data: Any) -> SampleDocument:
    """Return the document held in JSON-like ``data``.

    Raises InputError with the field of the first fault, and all faults as ``detail`` [{field, message}].
    """
    if isinstance(data, SampleDocument):
        return data
    if not isinstance(data, Mapping):
        raise InputError("A sample document is a JSON object.", hint="Give an object with a name and a crystal.")
    version = data.get("schema_version", SCHEMA_VERSION)
    if not isinstance(version, int) or isinstance(version, bool) or version < 1:
        raise InputError(
            "The version of the document is a whole number from 1.",
            field="schema_version",
            hint=f"Write {SCHEMA_VERSION}, or leave it out.",
        )
    if version > SCHEMA_VERSION:
        raise InputError(
            f"The document has version {version}; this program reads versions up to {SCHEMA_VERSION}.",
            field="schema_version",
            hint="Open it with the program that wrote it, or update this one.",
        )
    try:
        return SampleDocument.model_validate(data)
    except ValidationError as error:
        faults = [{"field": path_of(fault), "message": sentence_of(fault)} for fault in error.errors()]
        raise InputError(
            faults[0]["message"],
            field=faults[0]["field"] or None,
            hint="Correct this field and save again; the rest stays as it is.",
            detail=faults,
        ) from None


def write_document(document: SampleDocument) -> dict[str, Any]:
    """Return the document as plain JSON-like data, new at each call; optional fields without a value are left out."""
    return document.plain()


def change_document(document: SampleDocument, changes: Mapping[str, Any]) -> SampleDocument:
    """Return a new, checked document in which each top-level field of ``changes`` has its new value."""
    new = {name: value.plain() if isinstance(value, Record) else value for name, value in changes.items()}
    return read_document({**document.plain(), **new})


def find_property(document: SampleDocument, property_id: str) -> KeptProperty:
    """Return the property with this id; InputError where there is none."""
    for item in document.properties:
        if item.id == property_id:
            return item
    known = ", ".join(item.id for item in document.properties) or "none"
    raise InputError(
        f"The sample has no property with the id {property_id}.",
        field="property",
        hint=f"Choose one that it has ({known}), or add this one first.",
    )


def current_property(document: SampleDocument) -> KeptProperty | None:
    """Return the property looked at (``looking.property``), else the first, else None."""
    wanted = document.looking.get("property")
    chosen = [item for item in document.properties if item.id == wanted]
    return (chosen or list(document.properties) or [None])[0]  # type: ignore[list-item]


def readings_of(document: SampleDocument, property_id: str) -> tuple[KeptReading, ...]:
    """Return the readings of one property in their order, those set aside included."""
    return tuple(reading for reading in document.readings if reading.property == property_id)
