"""What taking in a document of samples would meet: which of them are new, kept already, or differ from what is kept.

A sample is recognised by its id, else by its content (the hash), else by a name that exactly one kept sample has.
Nothing is changed here; ``importing.py`` carries out what was chosen.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Final, Literal

from app.store import Store
from app.store.canonical import content_hash
from app.store.exchange import STAGES_KEY, Incoming, read_exchange
from app.store.exchange_shapes import ExchangeDocument, ExchangedSample
from app.store.shapes import Record

State = Literal["new", "same", "differs"]
Doing = Literal["add", "both", "replace", "skip"]
StagesState = Literal["none", "new", "same", "differs"]

_CHOICES: Final[dict[State, tuple[Doing, ...]]] = {
    "new": ("add", "skip"),
    "same": ("skip", "both"),
    "differs": ("both", "replace", "skip"),
}
_MOST_NAMED: Final = 20


@dataclass(frozen=True)
class Match:
    """What is kept already in the place of a sample that comes in; ``time`` is that of its last change."""

    sample_id: str
    name: str
    revision: int
    hash: str
    time: str
    archived: bool
    deleted: bool


@dataclass(frozen=True)
class PlannedSample:
    """What is known of one sample of a document before it is taken in.

    Attributes:
        place: its place in the document, from 0.
        revisions: how many revisions come with it; 1 where it has no history.
        state: ``new``; ``same`` where a kept sample has the very same content; ``differs``.
        matched_by: what it was recognised by: its id, its content (the hash), or a name that one kept sample has.
        relation: ``newer`` where the kept content is an earlier revision of what comes in, ``older`` where what comes
            in is an earlier revision of what is kept; None where neither is known.
        kept: what it was recognised as; None where it is new.
        choices: what can be done with it.
        suggested: what is done where nothing is chosen; None where one has to choose.
    """

    place: int
    name: str
    group: str
    revisions: int
    hash: str
    state: State
    matched_by: Literal["id", "content", "name"] | None
    relation: Literal["newer", "older"] | None
    kept: Match | None
    choices: tuple[Doing, ...]
    suggested: Doing | None


@dataclass(frozen=True)
class ImportPlan:
    """What taking in a document would meet. ``version`` is the one it was written in; ``notices`` are sentences."""

    version: int
    written: str | None
    samples: tuple[PlannedSample, ...]
    stages: StagesState
    notices: tuple[str, ...]


def plan_import(store: Store, data: str | bytes | Mapping[str, Any] | Incoming) -> ImportPlan:
    """Return what taking in a document would meet; nothing is changed. Raises InputError as ``read_exchange`` does."""
    incoming = data if isinstance(data, Incoming) else read_exchange(data)
    with store.database.reading() as connection:
        return compare(connection, incoming)


def compare(connection: sqlite3.Connection, incoming: Incoming) -> ImportPlan:
    """Return the plan as of one moment, on a connection."""
    document = incoming.document
    kept = _Kept(connection)
    return ImportPlan(
        version=incoming.version,
        written=document.written,
        samples=tuple(_plan_sample(kept, incoming, place) for place in range(len(document.samples))),
        stages=_compare_stages(connection, document),
        notices=tuple(_list_notices(incoming)),
    )


class _Kept:
    """What is kept, by id, by content and by name."""

    def __init__(self, connection: sqlite3.Connection) -> None:
        self.connection = connection
        self.by_id: dict[str, Match] = {}
        self.by_hash: dict[str, Match] = {}
        self.by_name: dict[str, list[Match]] = {}
        rows = connection.execute(
            "SELECT s.*, r.hash, r.json FROM sample s "
            "JOIN revision r ON r.sample_id = s.id AND r.number = s.revision ORDER BY s.changed"
        )
        for row in rows:
            deleted = row["deleted"] is not None
            archived = row["archived"] is not None
            name = json.loads(row["json"])["name"]
            match = Match(row["id"], name, row["revision"], row["hash"], row["changed"], archived, deleted)
            self.by_id[match.sample_id] = match
            if not deleted:
                self.by_hash[match.hash] = match
                self.by_name.setdefault(match.name, []).append(match)

    def holds_revision(self, sample_id: str, digest: str) -> bool:
        """Whether a content is a revision of a kept sample."""
        found = self.connection.execute(
            "SELECT 1 FROM revision WHERE sample_id = ? AND hash = ? LIMIT 1", (sample_id, digest)
        )
        return found.fetchone() is not None


def _plan_sample(kept: _Kept, incoming: Incoming, place: int) -> PlannedSample:
    sample, digest = incoming.document.samples[place], incoming.hashes[place]
    match, matched_by = _find_match(kept, sample, digest)
    state: State = "new" if match is None else "same" if match.hash == digest and not match.deleted else "differs"
    relation: Literal["newer", "older"] | None = None
    if match is not None and state == "differs":
        if match.hash in incoming.history_hashes[place]:
            relation = "newer"
        elif kept.holds_revision(match.sample_id, digest):
            relation = "older"
    return PlannedSample(
        place=place,
        name=sample.document.name,
        group=sample.document.crystal.group,
        revisions=len(sample.history or (None,)),
        hash=digest,
        state=state,
        matched_by=matched_by,
        relation=relation,
        kept=match,
        choices=_CHOICES[state],
        suggested=None if state == "differs" else _CHOICES[state][0],
    )


def _find_match(
    kept: _Kept, sample: ExchangedSample, digest: str
) -> tuple[Match | None, Literal["id", "content", "name"] | None]:
    by_id = kept.by_id.get(sample.id or "")
    if by_id is not None and not by_id.deleted:
        return by_id, "id"
    if digest in kept.by_hash:
        return kept.by_hash[digest], "content"
    if by_id is not None:
        return by_id, "id"
    named = kept.by_name.get(sample.document.name, [])
    return (named[0], "name") if len(named) == 1 else (None, None)


def _compare_stages(connection: sqlite3.Connection, document: ExchangeDocument) -> StagesState:
    if not document.stages:
        return "none"
    row = connection.execute("SELECT json FROM laboratory WHERE key = ?", (STAGES_KEY,)).fetchone()
    if row is None:
        return "new"
    # A stage that was kept before saws were calibrated has no list of such cuts.
    kept = [{"transfer": [], **stage} for stage in json.loads(row["json"])]
    same = content_hash([stage.plain() for stage in document.stages]) == content_hash(kept)
    return "same" if same else "differs"


def _list_notices(incoming: Incoming) -> Iterator[str]:
    document = incoming.document
    changed = [
        sample.document.name
        for sample, digest, digests in zip(document.samples, incoming.hashes, incoming.history_hashes, strict=True)
        if sample.hash not in (None, digest)
        or any(line.hash not in (None, found) for line, found in zip(sample.history or (), digests, strict=True))
    ]
    if changed:
        yield (
            f"Changed after it was written, by its hash: {_name_some(changed)}. It is taken in as it stands in the "
            "document."
        )
    unknown = sorted(_list_unknown(document))
    if unknown:
        yield f"Passed over, because this version does not know it: {_name_some(unknown)}."


def _list_unknown(document: ExchangeDocument) -> set[str]:
    found: set[str] = set()
    parts: list[tuple[str, Record]] = [("", document)]
    parts += [("samples[].", sample) for sample in document.samples]
    parts += [("samples[].history[].", line) for sample in document.samples for line in sample.history or ()]
    for where, part in parts:
        found |= {f"{where}{name}" for name in part.model_extra or {}}
    return found


def _name_some(names: list[str]) -> str:
    more = len(names) - _MOST_NAMED
    return ", ".join(names[:_MOST_NAMED]) + (f" and {more} more" if more > 0 else "")
