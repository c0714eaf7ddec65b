"""The JSON document in which samples go out and come in: its shapes, its version, and its published schema."""

from __future__ import annotations

import re
from datetime import datetime
from typing import Annotated, Any, Final, Literal

from pydantic import AfterValidator, BeforeValidator, Field, StrictInt, model_validator

from app.store.document import SCHEMA_VERSION, SampleDocument
from app.store.shapes import Json, JsonObject, Record, Text, fail

FORMAT: Final = "halfturn"
VERSION: Final = 2
"""Of the form of the document; each older one is brought forward when it is read (``exchange_versions.py``)."""

MOST_SAMPLES: Final = 2_000
MOST_REVISIONS: Final = 50_000
MOST_STAGES: Final = 40

_TIME: Final = "%Y-%m-%dT%H:%M:%S.%fZ"


def _check_time(text: str) -> str:
    try:
        right = datetime.strptime(text, _TIME).strftime(_TIME) == text
    except ValueError:
        right = False
    if not right:
        fail("A time is UTC to the microsecond, like 2031-05-04T12:00:00.000000Z.")
    return text


def _check_identifier(text: str) -> str:
    if not re.fullmatch(_IDENTIFIER, text):
        fail("An identifier has 1 to 64 letters of ASCII, digits, - and _.")
    return text


def _check_hash(text: str) -> str:
    if not re.fullmatch(_HASH, text):
        fail("A hash has 64 digits from 0 to f.")
    return text


def _check_version(value: Any) -> Any:
    """Refuse a sample document of a later version before its fields are looked at."""
    version = value.get("schema_version", 1) if isinstance(value, dict) else 1
    if isinstance(version, int) and not isinstance(version, bool) and not 1 <= version <= SCHEMA_VERSION:
        fail(f"This program reads sample documents of version 1 to {SCHEMA_VERSION}.", "schema_version")
    return value


_IDENTIFIER: Final = "[0-9A-Za-z_-]{1,64}"
_HASH: Final = "[0-9a-f]{64}"

Time = Annotated[
    str,
    Field(strict=True, max_length=27, json_schema_extra={"format": "date-time"}),
    AfterValidator(_check_time),
]
Identifier = Annotated[
    str,
    Field(strict=True, max_length=64, json_schema_extra={"pattern": f"^{_IDENTIFIER}$"}),
    AfterValidator(_check_identifier),
]
Hash = Annotated[
    str,
    Field(strict=True, max_length=64, json_schema_extra={"pattern": f"^{_HASH}$"}),
    AfterValidator(_check_hash),
]
RevisionNumber = Annotated[StrictInt, Field(ge=1, le=2**53 - 1)]
Content = Annotated[SampleDocument, BeforeValidator(_check_version)]


class ExchangedRevision(Record):
    """One revision of a sample's history."""

    number: RevisionNumber = Field(description="counts up within the sample")
    parent: RevisionNumber | None = Field(None, description="the revision it was made from; none for the first")
    hash: Hash | None = Field(None, description="SHA-256 of the document as canonical JSON")
    created: Time
    document: Content


class ExchangedSample(Record):
    """One sample as it stands, with or without its history."""

    id: Identifier | None = Field(None, description="by which a sample that is kept already is recognised")
    created: Time | None = None
    changed: Time | None = None
    archived: Time | None = Field(None, description="since when the sample is out of the usual list")
    revision: RevisionNumber | None = Field(None, description="number of the revision that stands")
    hash: Hash | None = Field(None, description="SHA-256 of the document as canonical JSON")
    document: Content
    history: Annotated[tuple[ExchangedRevision, ...], Field(min_length=1, max_length=MOST_REVISIONS)] | None = Field(
        None, description="all revisions in the order of their numbers, the one that stands among them"
    )

    @model_validator(mode="after")
    def _check(self) -> ExchangedSample:
        if self.history is None:
            return self
        numbers: set[int] = set()
        for index, line in enumerate(self.history):
            if index and line.number <= self.history[index - 1].number:
                fail("The revisions stand in the order of their numbers, each once.", f"history[{index}].number")
            if line.parent is not None and line.parent not in numbers:
                fail(f"There is no earlier revision {line.parent}.", f"history[{index}].parent")
            numbers.add(line.number)
        if self.revision not in numbers:
            fail("The history does not hold the revision that stands.", "revision")
        standing = next(line for line in self.history if line.number == self.revision)
        if standing.document != self.document:
            fail("The document is not that of the revision that stands.", "document")
        return self


class ExchangedStage(Record):
    """A stage of the laboratory on which crystals are set; see the calls of stages for its members."""

    id: Text
    name: Text
    axes: Annotated[tuple[JsonObject, ...], Field(min_length=1, max_length=3)] = Field(
        description="axes of rotation from base to head: name, axis, low, high, zero, sense, step"
    )
    sight: Json = Field(description="direction of the X-ray bench to which a normal is brought, laboratory frame")
    blade: Json = Field(description="normal of the blade, laboratory frame")
    transfer: tuple[JsonObject, ...] = Field((), max_length=200, description="cuts that calibrate the saw")


class ExchangeDocument(Record):
    """Samples of Halfturn, to be carried elsewhere and taken in again. Fields that are not known are passed over,
    save within a sample's document, where they are kept."""

    format: Literal["halfturn"]
    version: StrictInt = Field(ge=1, description=f"of this form; {VERSION} is written, older ones are read")
    written: Time | None = Field(None, description="when this was written")
    program: Text | None = Field(None, description="what wrote it")
    samples: tuple[ExchangedSample, ...] = Field(max_length=MOST_SAMPLES)
    stages: Annotated[tuple[ExchangedStage, ...], Field(max_length=MOST_STAGES)] | None = Field(
        None, description="the laboratory's stages; none where it has only those that everyone starts with"
    )

    @model_validator(mode="after")
    def _check(self) -> ExchangeDocument:
        ids: set[str] = set()
        revisions = 0
        for index, sample in enumerate(self.samples):
            if sample.id is not None and sample.id in ids:
                fail(f"The sample {sample.id} stands here twice.", f"samples[{index}].id")
            ids.add(sample.id or "")
            revisions += len(sample.history or ())
        if revisions > MOST_REVISIONS:
            fail(f"The samples have {revisions} revisions together; at most {MOST_REVISIONS} are read.", "samples")
        return self


def write_schema() -> dict[str, Any]:
    """Return the JSON Schema (draft 2020-12) of the document, new at each call."""
    schema = ExchangeDocument.model_json_schema(mode="validation")
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **schema,
        "title": f"Samples of Halfturn, version {VERSION}",
    }
