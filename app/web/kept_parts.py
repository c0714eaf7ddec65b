"""The parts that a document keeps, with what they leave open filled in."""

from __future__ import annotations

from typing import Any, Final

from app.store.canonical import plain
from app.store.document import SampleDocument
from app.web.cut_target import DEFAULT_TARGET
from app.web.part_view import KERF, STOCK

NEW_PART: Final = {
    "name": "Part 1",
    "shape": "plate",
    "size": [5.0, 5.0, 0.5],
    "target": DEFAULT_TARGET,
    "edge": "[1 0 0]",
    "tolerance": {"half_angle": 0.5},
    "kerf": KERF,
    "stock": STOCK,
    "wedge": 0.0,
    "either_sense": True,
    "equivalents": False,
    "achieved": None,
}


def list_parts(document: SampleDocument) -> list[dict[str, Any]]:
    """The kept parts with what they leave open filled in."""
    return [{**NEW_PART, **plain(part)} for part in document.parts]


def current_part(document: SampleDocument) -> dict[str, Any] | None:
    """The part that is looked at: the one chosen, else the last; None where there is none."""
    parts = list_parts(document)
    chosen = document.looking.get("part")
    found = next((part for part in parts if part["id"] == chosen), None)
    return found or (parts[-1] if parts else None)
