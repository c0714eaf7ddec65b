"""The sheet that the workshop and a colleague get in hand: a draft that follows the sample, and frozen copies of it.

A frozen sheet keeps what was printed, with a number and the hash of what it was made from; when that changes in the
sample, the sheet is shown as superseded, never altered.
"""

from __future__ import annotations

from typing import Any, Final

from fastapi import APIRouter, Request, Response
from fastapi.responses import RedirectResponse

from app.crystal.crystal import Crystal
from app.crystal.direction import typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import ConflictError, HalfturnError, InputError
from app.store.canonical import content_hash
from app.store.document import current_property, readings_of
from app.store.revisions import Kept
from app.store.sheets import Sheet, hash_inputs
from app.tensor.pose import AXIS_LETTERS
from app.tensor.sentence import print_angle
from app.web.kept import crystal_of, pose_of
from app.web.pages import render_page, templates
from app.web.samples import store_of
from app.web.tensor_page import build_content

router = APIRouter(include_in_schema=False)

CAUTIONS: Final = (
    "Local rules and licensed practice come before anything on this sheet.",
    "X-rays: work only on an enclosed or interlocked set by trained persons; check the shutter before reaching in.",
    "Saw and polisher: guards on, eye protection, hands clear of the blade; secure the boule before it turns.",
    "Dust, slurry and coolant: cut wet or under extraction, no food nearby, collect the waste as the material demands.",
    "Toxic, hygroscopic, brittle or cleaving material: read its safety data first; cleavage can throw splinters.",
)
"""The usual cautions; common practice, no source."""

HASH_SHOWN: Final = 16


def build_sheet(kept: Kept) -> dict[str, Any]:
    """Everything that a sheet prints, as plain data.

    Raises:
        InputError: the sample has no property, or its crystal or tensor cannot be computed.
    """
    document = kept.document
    shown = current_property(document)
    if shown is None:
        raise InputError("This sample has no property to print a sheet of.", hint="Add one on its Tensor page.")
    content = build_content(document)
    if content["subject"] is None:
        raise InputError(content["problem"]["message"], hint=content["problem"]["hint"])
    crystal = crystal_of(document.crystal)
    subject, first = content["subject"], content["first"]
    try:
        matrix = pose_of(crystal, document.pose).matrix
    except HalfturnError as error:
        error.hint = error.hint or "Put the specimen on a direction again, on the Tensor page."
        raise
    return {
        "sample": document.name,
        "revision": kept.revision,
        "saved": kept.time,
        "property": shown.name,
        "unit": subject["unit"],
        "source": shown.source,
        "conditions": _print_conditions(shown.conditions.plain() if shown.conditions else {}),
        "cell": _print_cell(crystal),
        "group": crystal.group.symbol + (f", unique {crystal.group.unique_axis}" if crystal.group.unique_axis else ""),
        "frame": subject["frame"],
        "sentence": first["sentence"]["text"],
        "cells": subject["cells"],
        "posed": first["cells"],
        "where": first["where"],
        "pose": _describe_pose(crystal, matrix),
        "set_aside": [
            {"reading": _name_reading(entry.plain()), "reason": entry.set_aside}
            for entry in readings_of(document, shown.id)
            if entry.set_aside is not None
        ],
        "bunge": [f"{angle:.2f}".replace("-", "−") for angle in first["pose"]["bunge"]],
        "axes": [_describe_axis(crystal, letter, axis) for letter, axis in zip(AXIS_LETTERS, matrix, strict=True)],
        "along": first["along"],
        "principal": subject["principal"],
        "shape": subject["shape"],
        "quadric": subject["quadric"],
        "part": [f"{float(edge):g}" for edge in document.part],
        "overlay": first["overlay"],
        "cautions": list(CAUTIONS),
        "inputs": hash_inputs(document, shown.id),
    }


def _print_cell(crystal: Crystal) -> str | None:
    if crystal.cell is None:
        return None
    numbers = [f"{value:.6g}" for value in crystal.cell.parameters]
    return f"{' '.join(numbers[:3])} Å, {' '.join(numbers[3:])}°"


def _print_conditions(conditions: dict[str, Any]) -> str:
    """Temperature first, then whatever text was noted."""
    parts = [f"{conditions['temperature']:g} K"] if conditions.get("temperature") is not None else []
    parts += [
        str(value) for key, value in conditions.items() if key != "temperature" and isinstance(value, str) and value
    ]
    return ", ".join(parts)


def _describe_pose(crystal: Crystal, matrix: Any) -> str:
    """The pose in words: z by the nearest plane's normal, x by the nearest row, each with how far off it is."""
    if crystal.M is None:
        return ", ".join(
            f"{letter} along {_print_vector(axis)}" for letter, axis in zip("zx", matrix[::-2], strict=True)
        )
    normal, row = find_nearest(crystal, matrix[2], "normal"), find_nearest(crystal, matrix[0], "row")
    return (
        f"z on {typeset_indices(normal.text)}, off by {print_angle(normal.off)}; "
        f"x toward {typeset_indices(row.text)}, off by {print_angle(row.off)}; y = z × x"
    )


def _name_reading(reading: dict[str, Any]) -> str:
    where = reading.get("direction")
    parts = [reading["kind"], where if isinstance(where, str) else "", reading.get("bar") or ""]
    return " ".join(part for part in parts if part)


def _print_vector(vector: Any) -> str:
    return f"({', '.join(f'{round(float(part), 4) + 0.0:.4f}' for part in vector)})".replace("-", "−")


def _describe_axis(crystal: Crystal, letter: str, axis: Any) -> dict[str, str]:
    if crystal.M is None:
        return {"axis": letter, "normal": f"{_print_vector(axis)} in x1 x2 x3", "row": ""}
    normal, row = find_nearest(crystal, axis, "normal"), find_nearest(crystal, axis, "row")
    return {
        "axis": letter,
        "normal": f"{typeset_indices(normal.text)}, off by {print_angle(normal.off)}",
        "row": f"{typeset_indices(row.text)}, off by {print_angle(row.off)}",
    }


@router.get("/samples/{sample_id}/sheet")
def sheet_page(sample_id: str, request: Request) -> Response:
    """The draft of a sample's sheet, and its frozen sheets."""
    store = store_of(request)
    kept = store.samples.get(sample_id)
    try:
        draft, problem = build_sheet(kept), None
    except HalfturnError as error:
        draft, problem = None, {"message": error.message, "hint": error.hint}
    frozen = [_summarise(sheet) for sheet in store.sheets.list(sample_id)]
    return render_page(
        request, "sheet.html", sample_id, "sheet", draft=draft, problem=problem, frozen=frozen, hash_shown=HASH_SHOWN
    )


@router.post("/samples/{sample_id}/sheets")
def freeze_sheet(sample_id: str, revision: int, request: Request) -> Response:
    """Freeze the sheet of the revision that the reader saw, and show it.

    Raises:
        ConflictError: the sample has moved on since; the reader sees the new draft first.
    """
    store = store_of(request)
    kept = store.samples.get(sample_id)
    if kept.revision != revision:
        raise ConflictError(
            f"The sample stands at revision {kept.revision} now, and this sheet shows revision {revision}.",
            hint="Open the Sheet page again, look at the draft, and freeze that.",
            detail={"newest": kept.revision},
        )
    shown = current_property(kept.document)
    if shown is None:
        raise InputError("This sample has no property to print a sheet of.", hint="Add one on its Tensor page.")
    content = build_sheet(kept)
    # What was printed is kept as it was set, so that no later version of this program prints it otherwise.
    content["printed"] = str(vars(templates.get_template("sheet_body.html").module)["printed"](content))
    sheet = store.sheets.freeze(sample_id, revision, shown.id, content)
    return RedirectResponse(f"/sheets/{sheet.number}", status_code=303)


@router.get("/sheets/{number}")
def frozen_sheet_page(number: int, request: Request) -> Response:
    """One frozen sheet as it was printed."""
    sheet = store_of(request).sheets.get(number)
    return templates.TemplateResponse(
        request,
        "frozen_sheet.html",
        {"sheet": sheet.content, "frozen": _summarise(sheet), "page": "sheets", "hash_shown": HASH_SHOWN},
    )


def _summarise(sheet: Sheet) -> dict[str, Any]:
    return {
        "number": sheet.number,
        "sample_id": sheet.sample_id,
        "revision": sheet.revision,
        "created": sheet.created[:16].replace("T", " "),
        "superseded": sheet.superseded,
        "hash": sheet.inputs_hash[:HASH_SHOWN],
        "content_hash": content_hash(sheet.content)[:HASH_SHOWN],
        "property": sheet.content.get("property", ""),
    }
