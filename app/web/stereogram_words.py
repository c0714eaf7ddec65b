"""What the stereogram says beside its drawing: how it lies, and a list of what is marked for who does not see it."""

from __future__ import annotations

from typing import Any, Final, Literal

import numpy as np

from app.tensor.sentence import print_angle
from app.web.scene import Subject
from app.web.stereogram import Mark, Picture, Projection, name_end
from app.web.stereogram_frame import Frame
from app.web.symmetry_marks import find_axes, find_mirrors

PROJECTIONS: Final = {
    "angle": "Equal-angle projection (Wulff): angles between lines are true.",
    "area": "Equal-area projection (Lambert, Schmidt): parts of the sphere have their true share of the disc.",
}
ONE: Final = "Full marks point to the reader; open marks and dashed lines point away and are seen through the sphere."
TWO: Final = (
    "Left the near hemisphere; right the far one, seen through from the near side, so that right is right in both."
)
KINDS: Final = {
    "specimen": "Specimen axes",
    "principal": "Principal axes",
    "target": "Sought directions",
    "taken": "Readings taken",
    "proposed": "Readings proposed",
    "normal": "Poles of planes",
    "row": "Rows",
}
WHOLE: Final = {
    "∞": "x3 is an axis of any turn.",
    "∞m": "x3 is an axis of any turn, and every plane through it is a mirror.",
    "∞2": "x3 is an axis of any turn, and every direction across it one of half-turns (dotted circle).",
    "∞/m": "x3 is an axis of any turn, and the plane across it a mirror.",
    "∞/mm": "x3 is an axis of any turn; the plane across it and every plane through it are mirrors, and every "
    "direction across it is one of half-turns (dotted circle).",
    "∞∞": "Every direction is an axis of any turn; none is drawn.",
    "∞∞m": "Every direction is an axis of any turn and every plane a mirror; none is drawn.",
}


def describe_disc(frame: Frame, projection: Projection, discs: Literal["one", "two"]) -> str:
    """Projection, hemispheres, middle and the ways of the page, in sentences."""
    way = f"{frame.middle} points at the reader, {frame.up} is up"
    if frame.right.startswith("what"):
        way = f"{frame.middle} points at the reader, {frame.up} is up as far as it can be"
    else:
        way += f", {frame.right} to the right"
    held = "The crystal is held." if frame.held == "crystal" else "The specimen is held and the crystal turns in it."
    return f"{PROJECTIONS[projection]} {way}. {ONE if discs == 'one' else TWO} {held}"


def list_marked(subject: Subject, picture: Picture, frame: Frame, elements: bool) -> list[dict[str, Any]]:
    """Headings with the marks below them, each with where it is: degrees from the middle, and clock hour from up."""
    groups: dict[str, list[str]] = {}
    for mark in picture.marks:
        groups.setdefault(KINDS.get(mark.kind, mark.kind), []).append(_locate(mark, frame))
    if elements:
        groups["Symmetry elements"] = _list_elements(subject, frame)
    names = sorted({trace.name for trace in picture.traces if "level" in trace.kind or trace.kind == "zero"}, key=float)
    if names:
        groups["Lines of equal value"] = [name.replace("-", "−") + _unit(subject) for name in names]
    regions = [trace for trace in picture.traces if trace.kind == "region"]
    if regions:
        groups["Regions of the axes"] = [f"{len(regions)} closed lines, each holds 95 % of what the readings allow"]
    return [{"heading": heading, "entries": entries} for heading, entries in groups.items()]


def _unit(subject: Subject) -> str:
    return f" {subject.unit}" if subject.unit else ""


def _locate(mark: Mark, frame: Frame) -> str:
    shown = frame.screen @ mark.vector
    if mark.line and shown[2] < -1e-9:
        shown = -shown
    tilt = float(np.rad2deg(np.arctan2(np.hypot(shown[0], shown[1]), shown[2])))
    where = "in the middle" if tilt < 0.05 else f"{print_angle(tilt)} from the middle{_hour(shown[0], shown[1])}"
    name = name_end(mark, frame.screen)
    return f"{name}: {where}" if name else where


def _hour(right: float, up: float) -> str:
    if np.hypot(right, up) < 1e-6:
        return ""
    hour = round(float(np.rad2deg(np.arctan2(right, up))) / 30.0) % 12
    return f", toward {hour or 12} o'clock"


def _list_elements(subject: Subject, frame: Frame) -> list[str]:
    crystal = subject.crystal
    if crystal.group.limiting:
        return [WHOLE[crystal.group.symbol]]
    entries = []
    for axis, proper, inverse in find_axes(crystal):
        name = (
            f"axis of order {proper}" if proper > 1 and proper >= inverse else f"rotoinversion axis of order {inverse}"
        )
        entries.append(f"{name}: {_locate(Mark(axis, 'axis', line=True), frame)}")
    entries += [
        f"mirror, its normal {_locate(Mark(normal, 'axis', line=True), frame)}" for normal in find_mirrors(crystal)
    ]
    if any(operation.improper and operation.turn == 1 for operation in crystal.operations):
        entries.append("inversion")
    return entries or ["none"]
