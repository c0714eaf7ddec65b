"""Printed sheets, frozen as they were handed out, and whether the sample has moved on since."""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

from app.errors import NotFoundError
from app.store.canonical import canonical_json, content_hash, plain
from app.store.database import Database
from app.store.document import SampleDocument, find_property, readings_of
from app.store.revisions import find_document

PART_KEY: Final = "part_id"
"""The key of a sheet's content that names the part which it is for; a sheet of the tensor has none."""


@dataclass(frozen=True)
class Sheet:
    """One printed sheet. ``number`` runs through the laboratory; ``content`` is plain data, as it was printed.

    ``superseded`` tells that what the sheet was made from is no longer what the sample holds, or that its property
    is gone.
    """

    number: int
    sample_id: str
    revision: int
    property_id: str
    inputs_hash: str
    content: dict[str, Any]
    created: str
    superseded: bool


def hash_inputs(document: SampleDocument, property_id: str, part_id: str | None = None) -> str:
    """Return the hash of what a sheet of this property is made from: crystal, property, its readings with the batch
    uncertainties, pose and block; of a sheet for a part that part and the sightings in place of the block. Raises
    InputError where the property is missing."""
    inputs: dict[str, Any] = {
        "crystal": document.crystal.plain(),
        "property": find_property(document, property_id).plain(),
        "readings": [reading.plain() for reading in readings_of(document, property_id)],
        "batches": document.batches,
        "pose": document.pose,
    }
    if part_id is None:
        inputs["part"] = document.part
    else:
        inputs["part"] = next((part for part in map(plain, document.parts) if part.get("id") == part_id), None)
        inputs["sightings"] = document.sightings
    return content_hash(inputs)


class Sheets:
    """The printed sheets in a database. All methods may be called from any thread, and raise StoreError."""

    def __init__(self, database: Database) -> None:
        self._database = database

    def freeze(self, sample_id: str, revision: int, property_id: str, content: Mapping[str, Any]) -> Sheet:
        """Keep ``content``, JSON-like, as the next sheet, made from one revision of a sample.

        Raises NotFoundError where there is no such revision, InputError where it lacks the property or the content
        is not JSON.
        """
        text = canonical_json(content).decode("utf-8")
        with self._database.writing() as connection:
            document = find_document(connection, sample_id, revision)
            last = connection.execute("SELECT max(number) FROM sheet").fetchone()[0]
            number = int(last or 0) + 1
            inputs_hash = hash_inputs(document, property_id, content.get(PART_KEY))
            connection.execute(
                "INSERT INTO sheet (number, sample_id, revision, property_id, inputs_hash, json, created) "
                "VALUES (?, ?, ?, ?, ?, ?, ?)",
                (number, sample_id, revision, property_id, inputs_hash, text, self._database.now()),
            )
            return _sheets(connection, "WHERE number = ?", (number,))[0]

    def get(self, number: int) -> Sheet:
        """Return one sheet by its number. Raises NotFoundError."""
        with self._database.reading() as connection:
            found = _sheets(connection, "WHERE number = ?", (number,))
        if not found:
            raise NotFoundError(f"There is no sheet {number}.", hint="Choose one from the list of sheets.")
        return found[0]

    def list(self, sample_id: str | None = None) -> tuple[Sheet, ...]:
        """Return all sheets, or those of one sample, newest first."""
        with self._database.reading() as connection:
            if sample_id is None:
                return _sheets(connection, "", ())
            return _sheets(connection, "WHERE sample_id = ?", (sample_id,))


def _sheets(connection: sqlite3.Connection, where: str, values: tuple[Any, ...]) -> tuple[Sheet, ...]:
    rows = connection.execute(f"SELECT * FROM sheet {where} ORDER BY number DESC", values).fetchall()
    present = {row["sample_id"]: find_document(connection, row["sample_id"]) for row in rows}
    return tuple(
        Sheet(
            number=row["number"],
            sample_id=row["sample_id"],
            revision=row["revision"],
            property_id=row["property_id"],
            inputs_hash=row["inputs_hash"],
            content=json.loads(row["json"]),
            created=row["created"],
            superseded=_is_superseded(connection, row, present[row["sample_id"]]),
        )
        for row in rows
    )


def _is_superseded(connection: sqlite3.Connection, row: sqlite3.Row, present: SampleDocument) -> bool:
    part_id = json.loads(row["json"]).get(PART_KEY)
    now = _hash_or_none(present, row["property_id"], part_id)
    if now is None or now == row["inputs_hash"]:
        return now is None
    # A later version of this program may write a field that the sheet's hash did not know. Then both sides read
    # alike: what the sheet was made from is itself still there, as its revision.
    then = find_document(connection, row["sample_id"], row["revision"])
    return now != _hash_or_none(then, row["property_id"], part_id)


def _hash_or_none(document: SampleDocument, property_id: str, part_id: str | None) -> str | None:
    if all(item.id != property_id for item in document.properties):
        return None
    return hash_inputs(document, property_id, part_id)
