"""Samples as one JSON document: written, and read whatever version it has.

The document holds every field of a sample, those that this version does not know included, so that what goes out and
comes in again is the same. Taking it in is the business of ``importing.py``.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final

from pydantic import ValidationError

from app.errors import InputError
from app.store import Store
from app.store.canonical import content_hash
from app.store.document import SampleDocument
from app.store.exchange_shapes import FORMAT, MOST_REVISIONS, MOST_SAMPLES, VERSION, ExchangeDocument
from app.store.exchange_versions import bring_forward
from app.store.json_text import LARGEST_TEXT, MOST_VALUES, read_json
from app.store.revisions import find_sample
from app.store.shapes import path_of, sentence_of
from app.version import VERSION as PROGRAM_VERSION

STAGES_KEY: Final = "stages"
"""The name under which the laboratory keeps its stages."""

_MOST_FAULTS: Final = 20


@dataclass(frozen=True)
class Incoming:
    """A document that was read.

    Attributes:
        document: in the present version.
        version: the one that it had.
        hashes: of each sample's content as it stands, by which the store knows it.
        history_hashes: of each sample's revisions in their order; empty where it comes without history.
    """

    document: ExchangeDocument
    version: int
    hashes: tuple[str, ...]
    history_hashes: tuple[tuple[str, ...], ...]


def export(store: Store, sample_id: str | None = None, *, history: bool = False) -> dict[str, Any]:
    """Return one sample, or all that are not deleted, as the JSON-like document; all of one moment.

    ``history`` puts every revision into it, undone ones included. The laboratory's stages come with all samples, not
    with one. Raises NotFoundError where there is no such sample, InputError where it would be more than can be read.
    """
    with store.database.reading() as connection:
        if sample_id is None:
            rows = connection.execute("SELECT * FROM sample WHERE deleted IS NULL ORDER BY created, id").fetchall()
            stages = connection.execute("SELECT json FROM laboratory WHERE key = ?", (STAGES_KEY,)).fetchone()
        else:
            rows, stages = [find_sample(connection, sample_id)], None
        _refuse_large(connection, rows, history)
        samples = [_write_sample(connection, row, history) for row in rows]
    return {
        "format": FORMAT,
        "version": VERSION,
        "written": store.database.now(),
        "program": f"Halfturn {PROGRAM_VERSION}",
        "samples": samples,
        "stages": None if stages is None else json.loads(stages["json"]),
    }


def _refuse_large(connection: sqlite3.Connection, rows: list[sqlite3.Row], history: bool) -> None:
    """Refuse to write what could not be taken in again."""
    size = count = 0
    for row in rows:
        found = connection.execute(
            "SELECT count(*), sum(length(CAST(json AS BLOB))) FROM revision WHERE sample_id = ? AND (? OR number = ?)",
            (row["id"], history, row["revision"]),
        ).fetchone()
        count, size = count + found[0], size + found[1] + 500 * found[0]
    if size > LARGEST_TEXT or len(rows) > MOST_SAMPLES or count > MOST_REVISIONS:
        raise InputError(
            f"{len(rows)} samples with {count} revisions, {size / 2**20:.3g} MiB, are too much for one document: "
            f"it has at most {MOST_SAMPLES} samples, {MOST_REVISIONS} revisions and {LARGEST_TEXT // 2**20} MiB.",
            hint="Write samples one by one, or without history; halfturn backup copies everything.",
        )


def _write_sample(connection: sqlite3.Connection, row: sqlite3.Row, history: bool) -> dict[str, Any]:
    lines = connection.execute(
        "SELECT * FROM revision WHERE sample_id = ? AND (? OR number = ?) ORDER BY number",
        (row["id"], history, row["revision"]),
    ).fetchall()
    standing = next(line for line in lines if line["number"] == row["revision"])
    written = {
        "id": row["id"],
        "created": row["created"],
        "changed": row["changed"],
        "archived": row["archived"],
        "revision": row["revision"],
        "hash": standing["hash"],
        "document": json.loads(standing["json"]),
    }
    if history:
        written["history"] = [
            {
                "number": line["number"],
                "parent": line["parent"],
                "hash": line["hash"],
                "created": line["created"],
                "document": json.loads(line["json"]),
            }
            for line in lines
        ]
    return written


def read_exchange(data: str | bytes | Mapping[str, Any], most_values: int = MOST_VALUES) -> Incoming:
    """Return the document held in a text, or in JSON-like data that was read from one; ``most_values`` is how many
    values it may hold.

    Raises InputError with the field of the first fault, and the first faults as ``detail`` [{field, message}].
    """
    content = read_json(data if isinstance(data, str | bytes) else _spell(data), most_values)
    forward, version = bring_forward(content)
    try:
        document = ExchangeDocument.model_validate(forward)
    except ValidationError as error:
        faults = [{"field": path_of(fault), "message": sentence_of(fault)} for fault in error.errors()[:_MOST_FAULTS]]
        raise InputError(
            faults[0]["message"],
            field=faults[0]["field"] or None,
            hint="Nothing was taken in. Correct this field, or write the document anew.",
            detail=faults,
        ) from None
    return Incoming(
        document,
        version,
        tuple(hash_of(sample.document) for sample in document.samples),
        tuple(tuple(hash_of(line.document) for line in sample.history or ()) for sample in document.samples),
    )


def hash_of(document: SampleDocument) -> str:
    """Return the hash by which the store knows a content."""
    return content_hash(document.plain())


def _spell(data: Any) -> str:
    try:
        return json.dumps(data, ensure_ascii=False)
    except (TypeError, ValueError, RecursionError) as error:
        raise InputError(f"This is not JSON-like data: {error}.", hint="Give what was read from a file.") from None
