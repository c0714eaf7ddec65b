"""Taking in a document of samples, with a choice for each: all of it in one step, or nothing.

``add`` keeps a new sample, with its history where it has one and under its own id where that is free. ``both`` does
the same beside the sample that is kept, under another id and a name that tells them apart. ``replace`` keeps the
document as the next revision of the kept sample, whose own revisions all stay. ``skip`` does nothing.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Literal

from app.errors import ConflictError, InputError, located
from app.store import Store
from app.store.canonical import canonical_json, content_hash
from app.store.document import SampleDocument, change_document
from app.store.exchange import STAGES_KEY, Incoming, read_exchange
from app.store.exchange_shapes import MOST_STAGES, ExchangedSample
from app.store.import_plan import Doing, ImportPlan, PlannedSample, compare
from app.store.revisions import add_revision, add_sample, find_sample, save_revision

StagesDoing = Literal["keep", "replace", "both"]

_PLAN_AGAIN = "Look at the plan again: it shows what is kept now. Nothing was taken in."


@dataclass(frozen=True)
class Choice:
    """What to do with one sample.

    ``replace`` needs ``onto``, the id of the kept sample, and ``parent``, the revision of it that the plan showed.
    """

    do: Doing
    onto: str | None = None
    parent: int | None = None


@dataclass(frozen=True)
class Imported:
    """What was done with one sample, and what is kept of it now; both None where it was passed over."""

    place: int
    done: Doing
    sample_id: str | None
    revision: int | None


def import_samples(
    store: Store,
    data: str | bytes | Mapping[str, Any] | Incoming,
    choices: Mapping[int, Choice] | None = None,
    *,
    stages: StagesDoing | None = None,
) -> tuple[Imported, ...]:
    """Take in a document: ``choices`` by place in it, each one that the plan offers.

    Without a choice a new sample is added and one that is kept with the same content is passed over. The laboratory's
    stages are taken where it has none of its own; else they are kept as they are, unless ``stages`` says otherwise.

    Raises InputError where a sample differs from what is kept and nothing was chosen for it, or something that its
    plan does not offer; ConflictError where what is kept has changed since the plan. Then nothing is taken in.
    """
    incoming = data if isinstance(data, Incoming) else read_exchange(data)
    chosen = choices or {}
    with store.database.writing() as connection:
        plan = compare(connection, incoming)
        _check_places(chosen, plan)
        now = store.database.now()
        taken = []
        for planned in plan.samples:
            with located(f"choices[{planned.place}]"):
                choice = _decide(planned, chosen.get(planned.place))
                sample = incoming.document.samples[planned.place]
                taken.append(_take(connection, store, planned, sample, choice, now))
        _take_stages(connection, incoming, plan, stages, now)
    return tuple(taken)


def _check_places(chosen: Mapping[int, Choice], plan: ImportPlan) -> None:
    for place in chosen:
        if not 0 <= place < len(plan.samples):
            raise InputError(
                f"There is no sample at the place {place}; the document has {len(plan.samples)}.",
                field=f"choices[{place}]",
                hint="Places count from 0.",
            )


def _decide(planned: PlannedSample, choice: Choice | None) -> Choice:
    """The choice for one sample, checked against what stands now."""
    if choice is None:
        if planned.suggested is None:
            raise InputError(
                f"“{planned.name}” is kept already and differs from what comes in.",
                hint="Choose: keep both, replace it as a new revision, or skip this one.",
            )
        return Choice(planned.suggested)
    kept = planned.kept
    if choice.do == "add" and planned.state != "new":
        raise ConflictError(f"“{planned.name}” is not new: it is kept already.", hint=_PLAN_AGAIN)
    if choice.do == "replace" and planned.state == "same":
        raise ConflictError(f"“{planned.name}” is kept already just as it comes in.", hint=_PLAN_AGAIN)
    if choice.do == "replace" and kept is not None:
        if choice.onto is None or choice.parent is None:
            raise InputError(
                "To replace a kept sample, its id and the revision that was looked at are needed.",
                field="onto" if choice.onto is None else "parent",
                hint="The plan names both, under kept.",
            )
        if (choice.onto, choice.parent) != (kept.sample_id, kept.revision):
            raise ConflictError(
                f"“{planned.name}” has changed since the plan was made: revision {kept.revision} of "
                f"{kept.sample_id} stands now.",
                hint=_PLAN_AGAIN,
                detail={"newest_revision": kept.revision, "parent": choice.parent, "sample": kept.sample_id},
            )
    if choice.do not in planned.choices:
        raise InputError(
            f"“{planned.name}” cannot be taken in by {choice.do}.",
            field="do",
            hint=f"One of {', '.join(planned.choices)} is possible.",
        )
    return choice


def _take(
    connection: sqlite3.Connection,
    store: Store,
    planned: PlannedSample,
    sample: ExchangedSample,
    choice: Choice,
    now: str,
) -> Imported:
    if choice.do == "skip":
        return Imported(planned.place, "skip", None, None)
    if choice.do == "replace" and planned.kept is not None:
        sample_id = planned.kept.sample_id
        # One that was deleted comes back with it.
        connection.execute("UPDATE sample SET deleted = NULL WHERE id = ?", (sample_id,))
        row = find_sample(connection, sample_id)
        kept = save_revision(connection, row, sample.document, planned.kept.revision, now)
        return Imported(planned.place, "replace", sample_id, kept.revision)
    sample_id = _find_free_id(connection, store, sample.id)
    if sample.history is None or sample.revision is None:
        add_sample(connection, sample_id, sample.document, now)
        archived = now if sample.archived is not None else None
        connection.execute("UPDATE sample SET archived = ? WHERE id = ?", (archived, sample_id))
    else:
        _add_history(connection, sample_id, sample, now)
    if choice.do == "both":
        renamed = change_document(sample.document, {"name": _name_apart(sample.document)})
        row = find_sample(connection, sample_id)
        save_revision(connection, row, renamed, row["revision"], now)
    return Imported(planned.place, choice.do, sample_id, find_sample(connection, sample_id)["revision"])


def _add_history(connection: sqlite3.Connection, sample_id: str, sample: ExchangedSample, now: str) -> None:
    lines = sample.history or ()
    connection.execute(
        "INSERT INTO sample (id, revision, created, changed, archived) VALUES (?, ?, ?, ?, ?)",
        (sample_id, sample.revision, sample.created or lines[0].created, sample.changed or now, sample.archived),
    )
    for line in lines:
        add_revision(connection, sample_id, line.number, line.parent, line.document, line.created)


def _find_free_id(connection: sqlite3.Connection, store: Store, wanted: str | None) -> str:
    while wanted is None or connection.execute("SELECT 1 FROM sample WHERE id = ?", (wanted,)).fetchone():
        wanted = store.samples.identify()
    return wanted


def _name_apart(document: SampleDocument) -> str:
    ending = " (taken in)"
    # A name has at most 500 characters.
    return document.name[: 500 - len(ending)] + ending


def _take_stages(
    connection: sqlite3.Connection, incoming: Incoming, plan: ImportPlan, doing: StagesDoing | None, now: str
) -> None:
    if plan.stages in ("none", "same") or doing == "keep" or (doing is None and plan.stages == "differs"):
        return
    stages = [stage.plain() for stage in incoming.document.stages or ()]
    if plan.stages == "differs" and doing == "both":
        row = connection.execute("SELECT json FROM laboratory WHERE key = ?", (STAGES_KEY,)).fetchone()
        stages = _join_stages(json.loads(row["json"]), stages)
    text = canonical_json(stages).decode("utf-8")
    connection.execute(
        "INSERT INTO laboratory (key, json, changed) VALUES (?, ?, ?) "
        "ON CONFLICT (key) DO UPDATE SET json = excluded.json, changed = excluded.changed",
        (STAGES_KEY, text, now),
    )


def _join_stages(kept: list[dict[str, Any]], coming: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """The kept stages, and behind them those that come and are not among them, under ids that are free."""
    known = {content_hash(stage) for stage in kept}
    joined = list(kept)
    ids = {stage["id"] for stage in kept}
    for stage in coming:
        if content_hash(stage) in known:
            continue
        number, new_id = 2, stage["id"]
        while new_id in ids:
            new_id, number = f"{stage['id']}-{number}", number + 1
        ids.add(new_id)
        joined.append({**stage, "id": new_id})
    if len(joined) > MOST_STAGES:
        raise InputError(
            f"A laboratory has at most {MOST_STAGES} stages; these would be {len(joined)}.",
            field="stages",
            hint="Keep those that are there, or replace them.",
        )
    return joined
