"""Tables to carry elsewhere: every tensor of a sample with its uncertainties, and the readings of a property.

CSV after RFC 4180 with CR LF, decimal points and full precision. Texts that a spreadsheet would take for a formula
are guarded as in the table of readings. A tensor table has one number per row, so that a reader of tables needs no
layout of ours to take it up.
"""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Iterator, Sequence
from dataclasses import replace
from typing import Any, Final

import numpy as np

from app.crystal.crystal import Crystal
from app.crystal.direction import Direction
from app.errors import HalfturnError
from app.readings.reading import Reading
from app.readings.table import write_table
from app.readings.table_cells import TEXT_LIMIT, write_text_cell
from app.store.document import KeptProperty, KeptReading, SampleDocument, readings_of
from app.tensor.estimate import Estimate
from app.tensor.kind import LABELS
from app.tensor.pose import AXIS_LETTERS, Pose, resolve_direction
from app.web.kept import crystal_for, crystal_of, entry_of, pose_of, tensor_of
from app.web.kept_readings import take_all

TENSOR_COLUMNS: Final = (
    "property",
    "unit",
    "frame",
    "axes",
    "conditions",
    "source",
    "group",
    "quantity",
    "cell",
    "with",
    "value",
    "sigma",
)
"""``quantity`` is "cell" (nine per frame), "free" or "covariance" (of the free cells ``cell`` and ``with``)."""


def write_tensors(document: SampleDocument) -> str:
    """All properties of a sample, one number per row under ``TENSOR_COLUMNS``.

    Nine cells in the crystal frame, nine in the specimen frame, then the free cells of the crystal frame and their
    covariance; ``axes`` says for every row which axes its cell refers to. A property that cannot be computed has one
    row with the quantity "problem" and the reason under ``axes``.

    Raises:
        InputError: the crystal or the pose cannot be read.
    """
    crystal = crystal_of(document.crystal)
    pose = pose_of(crystal, document.pose)
    out = io.StringIO(newline="")
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow(TENSOR_COLUMNS)
    for kept in document.properties:
        about = [guard_text(kept.name), guard_text(kept.unit)]
        rest = [guard_text(print_conditions(kept)), guard_text(kept.source), guard_text(crystal.group.symbol)]
        try:
            rows = list(_list_rows(crystal_for(crystal, document.crystal, entry_of(kept)), kept, pose))
        except HalfturnError as error:
            writer.writerow([*about, "", guard_text(error.message), *rest, "problem", "", "", "", ""])
            continue
        for frame, axes, quantity, *numbers in rows:
            writer.writerow([*about, frame, guard_text(axes), *rest, quantity, *numbers])
    return out.getvalue()


def _list_rows(crystal: Crystal, kept: KeptProperty, pose: Pose) -> Iterator[tuple[str, ...]]:
    """Frame, axes, quantity, cell, with, value, sigma."""
    tensor = tensor_of(crystal, kept)
    sentence = crystal.frame_sentence
    yield from _list_cells(tensor.estimate, "crystal", sentence, LABELS)
    axes = describe_axes(pose)
    letters = [f"{row}{column}" for row in AXIS_LETTERS for column in AXIS_LETTERS]
    yield from _list_cells(tensor.estimate.turn(pose.matrix, "specimen frame"), "specimen", axes, letters)
    labels, covariance = tensor.form.labels, tensor.free_covariance
    for place, label in enumerate(labels):
        spread = "" if covariance is None else _print(math.sqrt(max(float(covariance[place, place]), 0.0)))
        yield "crystal", sentence, "free", label, "", _print(float(tensor.free[place])), spread
    if covariance is not None:
        for place, label in enumerate(labels):
            for other, second in enumerate(labels):
                yield "crystal", sentence, "covariance", label, second, _print(float(covariance[place, other])), ""


def _list_cells(estimate: Estimate, frame: str, axes: str, labels: Sequence[str]) -> Iterator[tuple[str, ...]]:
    sigmas = estimate.sigma_matrix
    for place, label in enumerate(labels):
        spread = "" if sigmas is None else _print(float(sigmas.flat[place]))
        yield frame, axes, "cell", label, "", _print(float(estimate.matrix.flat[place])), spread


def _print(number: float) -> str:
    return repr(number + 0.0)


def describe_axes(pose: Pose) -> str:
    """The specimen axes in the crystal frame, to six digits."""
    rows = [", ".join(f"{float(part) + 0.0:.6g}" for part in np.round(axis, 9)) for axis in pose.matrix]
    named = "; ".join(f"{letter} = ({row})" for letter, row in zip(AXIS_LETTERS, rows, strict=True))
    return f"{named} in x1 x2 x3 of the crystal frame"


def print_conditions(kept: KeptProperty) -> str:
    """Temperature first, then whatever text was noted, each with its name."""
    noted: dict[str, Any] = kept.conditions.plain()
    parts = [f"{noted['temperature']:g} K"] if noted.get("temperature") is not None else []
    parts += [f"{key}: {value}" for key, value in noted.items() if key != "temperature" and isinstance(value, str)]
    return ", ".join(parts)


def guard_text(text: str) -> str:
    """A text as one cell: on one line, without signs that no text file has, guarded against spreadsheet formulas."""
    plain = re.sub(r"[\s\x00-\x1f\x7f-\x9f\ud800-\udfff]+", " ", text).strip()[:TEXT_LIMIT].strip()
    return write_text_cell(plain or None, "text")


def write_readings_in_use(document: SampleDocument, kept: KeptProperty) -> str:
    """The readings of a property that are in use, as the table of readings that ``read_table`` takes back as it was.

    Readings that are set aside follow as comments with their reasons. A reading with a pose of its own has its
    directions written in the crystal frame, since a table has no place for a pose; they mean the same.

    Raises:
        InputError: a direction that cannot be read, or a text that a table cannot keep, at ``readings[i]``.
    """
    crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry_of(kept))
    entries = readings_of(document, kept.id)
    readings = [_drop_pose(crystal, reading) for reading in take_all(crystal, entries)]
    unit = kept.unit.strip() or None
    used = [reading for reading, entry in zip(readings, entries, strict=True) if entry.set_aside is None]
    table = write_table(used, unit)
    aside = [pair for pair in zip(readings, entries, strict=True) if pair[1].set_aside is not None]
    return table + "".join(_write_aside(reading, entry, unit) for reading, entry in aside)


def _drop_pose(crystal: Crystal, reading: Reading) -> Reading:
    if reading.pose is None:
        return reading
    first, second = (
        _in_crystal_frame(crystal, direction, reading.pose) for direction in (reading.direction, reading.second)
    )
    return replace(reading, pose=None, direction=first, second=second)


def _in_crystal_frame(crystal: Crystal, direction: Direction | None, pose: Pose) -> Direction | None:
    if direction is None or direction.kind != "specimen":
        return direction
    x, y, z = resolve_direction(crystal, direction, pose).tolist()
    return Direction("vector", (x, y, z))


def _write_aside(reading: Reading, entry: KeptReading, unit: str | None) -> str:
    """A comment: the reason and the row as it would stand."""
    reason = guard_text(entry.set_aside or "") or "no reason given"
    row = " ".join(write_table([reading], unit).split("\r\n", 1)[1].split())
    return f"# set aside ({reason}): {row}\r\n"
