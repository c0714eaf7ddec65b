"""The stereogram as SVG: poles, symmetry elements, lines of equal value, regions, specimen axes, readings.

Both hemispheres in one circle: what points toward the viewer is drawn full, what points away is projected from the
other side and drawn open or dashed. Equal-angle keeps circles circles (r = tan θ/2), equal-area keeps areas
(r = √2 sin θ/2), both with the rim at 1 (International Tables for Crystallography, vol. A, chapter on point groups,
for the first; Lambert's projection for the second). Symmetry elements have the graphic symbols of International Tables.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from html import escape
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.web.label_places import Box
from app.web.stereogram_names import bar_name, place_name
from app.web.symmetry_marks import draw_elements

FloatArray = npt.NDArray[np.float64]
Projection = Literal["angle", "area"]
Side = Literal["both", "near", "far"]

RADIUS: Final = 100.0
NAMED_GAP: Final = 11.0
ABOVE: Final = ("region", "answer")

DEFAULT_SCREEN: Final = np.array([[0.0, 1.0, 0.0], [-1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
"""x3 toward the viewer, x2 to the right, x1 down the page."""


@dataclass(frozen=True)
class Mark:
    """A direction with its sign.

    Attributes:
        vector: unit vector in the crystal frame.
        kind: class of the mark, such as "normal", "row", "principal", "specimen", "taken", "proposed".
        name: printed beside it; empty prints nothing.
        line: whether the opposite direction is meant as well; then only the near end is drawn.
        opposite: the name of the other end, printed where that one is drawn and names are signed.
        put: a direction as the user would type it; a click on the mark puts z there.
    """

    vector: FloatArray
    kind: str
    name: str = ""
    line: bool = False
    put: str = ""
    opposite: str = ""


@dataclass(frozen=True)
class Trace:
    """A curve of unit vectors (n, 3), with the class of its line."""

    points: FloatArray
    kind: str
    name: str = ""


@dataclass(frozen=True)
class Picture:
    """What a stereogram shows beside the symmetry elements."""

    marks: Sequence[Mark] = field(default_factory=tuple)
    traces: Sequence[Trace] = field(default_factory=tuple)


def project(vectors: FloatArray, projection: Projection = "angle") -> FloatArray:
    """Places in the circle of radius 1 of unit vectors (..., 3) in screen axes (right, up, toward), shape (..., 2).

    Those that point away from the viewer are projected from the other pole, so that they fall within the circle too.
    """
    toward = np.abs(vectors[..., 2:])
    if projection == "angle":
        # tan θ/2 = sin θ / (1 + cos θ)
        flat: FloatArray = vectors[..., :2] / (1.0 + toward)
    else:
        # √2 sin θ/2 = √(1 − cos θ), and the flat part has the length sin θ = √((1 − cos θ)(1 + cos θ)).
        flat = vectors[..., :2] / np.sqrt(1.0 + toward)
    return flat


def unproject(places: FloatArray, projection: Projection = "angle") -> FloatArray:
    """Unit vectors (..., 3) in screen axes of places (..., 2), on the near side; the inverse of ``project``.

    Places beyond the rim count as the point of the rim in the same direction.
    """
    sizes = np.linalg.norm(places, axis=-1, keepdims=True)
    flat = places / np.maximum(sizes, 1.0)
    square = np.sum(flat**2, axis=-1, keepdims=True)
    # With r = tan θ/2: cos θ = (1 − r²)/(1 + r²); with r = √2 sin θ/2: cos θ = 1 − r².
    toward = np.maximum((1.0 - square) / (1.0 + square) if projection == "angle" else 1.0 - square, 0.0)
    stretched = flat * (1.0 + toward) if projection == "angle" else flat * np.sqrt(1.0 + toward)
    vectors: FloatArray = np.concatenate([stretched, toward], axis=-1)
    vectors /= np.linalg.norm(vectors, axis=-1, keepdims=True)
    return vectors


def draw_stereogram(
    crystal: Crystal,
    picture: Picture,
    *,
    screen: FloatArray = DEFAULT_SCREEN,
    projection: Projection = "angle",
    elements: bool = True,
    title: str = "Stereogram",
    side: Side = "both",
    numbered: bool = False,
) -> str:
    """The drawing.

    Args:
        crystal: whose symmetry elements are drawn.
        picture: marks and traces.
        screen: shape (3, 3), right, up and toward the viewer as rows, in the crystal frame.
        projection: "angle" or "area".
        elements: whether symmetry elements are drawn.
        title: what a reader who does not see it is told.
        side: "both" in one circle; "near" or "far" is that hemisphere alone, the far one seen through from the near
            side, so that right and up are the same in both.
        numbered: whether names are moved to free places and lines of heavy levels carry their values.
    """
    if side == "far":
        # Looked at from behind but drawn seen through: only the way toward the viewer changes its sign.
        screen = screen * np.array([[1.0], [1.0], [-1.0]])
    names = _Names(screen, projection, side != "both", numbered)
    parts = [f'<circle class="stereo-rim" r="{RADIUS:g}"/>', '<path class="stereo-cross" d="M-4 0H4M0-4V4"/>']
    # What is answered lies above the symmetry elements, the ground of equal values below them.
    for trace in picture.traces:
        if trace.kind not in ABOVE:
            parts += _draw_trace(trace, names)
    if elements:
        parts += draw_elements(crystal, screen, lambda vectors: project(vectors, projection), RADIUS)
    for trace in picture.traces:
        if trace.kind in ABOVE:
            parts += _draw_trace(trace, names)
    if numbered:
        names.boxes += [box for mark in picture.marks for box in _find_mark_box(mark, names)]
    # What can be pressed may not stand within a picture.
    role = "group" if any(mark.put for mark in picture.marks) else "img"
    for mark in picture.marks:
        parts += _draw_mark(mark, names)
    if numbered:
        for trace in picture.traces:
            parts += _draw_level(trace, names)
    told = "" if side == "both" else f' data-side="{side}"'
    return (
        f'<svg class="stereogram" viewBox="-122 -116 244 232" role="{role}" aria-label="{escape(title, quote=True)}"'
        f"{told}>{''.join(parts)}</svg>"
    )


@dataclass
class _Names:
    """How one circle is drawn, and where its names are so far."""

    screen: FloatArray
    projection: Projection
    one_side: bool
    numbered: bool
    taken: list[tuple[float, float]] = field(default_factory=list)
    boxes: list[Box] = field(default_factory=list)


def _draw_trace(trace: Trace, names: _Names) -> list[str]:
    """Full where it is near, dashed where it is far; it is cut where it passes the rim."""
    shown = np.asarray(trace.points) @ names.screen.T
    if len(shown) < 2:
        return []
    shown = _cut_at_rim(shown)
    places = RADIUS * project(shown, names.projection)
    # Of a step that ends on the rim the other end tells the side.
    middle = shown[:-1, 2] + shown[1:, 2]
    paths: dict[bool, list[str]] = {True: [], False: []}
    last = {True: -2, False: -2}
    for start in range(len(shown) - 1):
        side = bool(middle[start] >= -1e-12)
        (x, y), (u, v) = places[start], places[start + 1]
        joined = last[side] == start - 1
        paths[side].append(f"L{u:.1f} {-v:.1f}" if joined else f"M{x:.1f} {-y:.1f}L{u:.1f} {-v:.1f}")
        last[side] = start
    return [
        f'<path class="stereo-{trace.kind}{"" if side else " far"}" d="{"".join(runs)}"/>'
        for side, runs in paths.items()
        if runs and (side or not names.one_side)
    ]


def _cut_at_rim(shown: FloatArray) -> FloatArray:
    """The polyline with a point on the rim wherever it passes from one side to the other."""
    heights = shown[:, 2]
    passing = np.flatnonzero(heights[:-1] * heights[1:] < 0)
    part = heights[passing] / (heights[passing] - heights[passing + 1])
    between = shown[passing] + part[:, None] * (shown[passing + 1] - shown[passing])
    between[:, 2] = 0.0
    between /= np.linalg.norm(between, axis=1)[:, None]
    cut: FloatArray = np.insert(shown, passing + 1, between, axis=0)
    return cut


def name_end(mark: Mark, screen: FloatArray) -> str:
    """The name of the end of a mark that is drawn: of a line the one nearer to the viewer."""
    return mark.opposite if mark.opposite and mark.line and (screen @ mark.vector)[2] < -1e-9 else mark.name


def _place_mark(mark: Mark, names: _Names) -> tuple[float, float, bool] | None:
    """Right and down of a mark's place and whether it is far; None where it is on the side that is not drawn."""
    shown = names.screen @ mark.vector
    if mark.line and shown[2] < -1e-9:
        shown = -shown
    far = bool(shown[2] < -1e-9)
    if far and names.one_side:
        return None
    x, y = RADIUS * project(shown, names.projection)
    return float(x), float(-y), far


def _find_mark_box(mark: Mark, names: _Names) -> list[Box]:
    place = _place_mark(mark, names)
    if place is None:
        return []
    size = MARK_SIZES.get(mark.kind, 3.2)
    return [(place[0] - size, place[1] - size, place[0] + size, place[1] + size)]


def _draw_mark(mark: Mark, names: _Names) -> list[str]:
    place = _place_mark(mark, names)
    if place is None:
        return []
    x, y, far = place
    shape = SHAPES.get(mark.kind, SHAPES["normal"])
    put = f' data-put="{escape(mark.put, quote=True)}" tabindex="0" role="button"' if mark.put else ""
    label = f' aria-label="{escape(f"put z on {mark.name or mark.put}", quote=True)}"' if mark.put else ""
    parts = [
        (
            f'<path class="stereo-mark {mark.kind}{" far" if far else ""}" transform="translate({x:.1f} {y:.1f})" '
            f'd="{shape}"{put}{label}/>'
        )
    ]
    if mark.name:
        signed = replace(mark, name=name_end(mark, names.screen)) if names.numbered else mark
        parts += _draw_name(signed, x, y, names)
    return parts


def _draw_name(mark: Mark, x: float, y: float, names: _Names) -> list[str]:
    """The name outward of the mark; where there is no room for it, it is left out."""
    size = float(np.hypot(x, y))
    way = np.array([x, y]) / size if size > 8 else np.array([0.7, -0.7])
    anchor = "middle" if abs(way[0]) < 0.5 else ("start" if way[0] > 0 else "end")
    place = (x + NAMED_GAP * float(way[0]), y + NAMED_GAP * float(way[1]))
    if names.numbered:
        away = MARK_SIZES.get(mark.kind, 3.2) + 1.6
        printed = mark.name.replace("\u2212", "") if mark.kind in ("normal", "row") else mark.name
        found = place_name(printed, NAME_SIZES.get(mark.kind, 7.0), (x, y), away, names.boxes)
        if found is None:
            return []
        place, anchor = found, "start"
    else:
        if any(abs(place[0] - u) < 5.2 * len(mark.name) and abs(place[1] - v) < 8.5 for u, v in names.taken):
            return []
        names.taken.append(place)
        place = (place[0], place[1] + 3)
    return [
        (
            f'<text class="stereo-name {mark.kind}" x="{place[0]:.1f}" y="{place[1]:.1f}" text-anchor="{anchor}">'
            f"{bar_name(mark.name) if names.numbered and mark.kind in ('normal', 'row') else _set_name(mark)}</text>"
        )
    ]


def _draw_level(trace: Trace, names: _Names) -> list[str]:
    """The value of a heavy line, on it, where there is room."""
    if not trace.name or not ("heavy" in trace.kind or trace.kind == "zero"):
        return []
    shown = np.asarray(trace.points) @ names.screen.T
    shown = shown[shown[:, 2] > 0.02]
    places = RADIUS * project(shown, names.projection)
    for x, y in places[:: max(1, len(places) // 12)]:
        found = place_name(trace.name, NAME_SIZES["level"], (float(x), float(-y)), 0.0, names.boxes)
        if found is not None:
            text = escape(trace.name.replace("-", "\u2212"))
            return [f'<text class="stereo-name level" x="{found[0]:.1f}" y="{found[1]:.1f}">{text}</text>']
    return []


def _set_name(mark: Mark) -> str:
    if mark.kind == "principal" and len(mark.name) == 2:
        return f'{escape(mark.name[0])}<tspan font-size="6.5" dy="2">{escape(mark.name[1])}</tspan>'
    return escape(mark.name)


MARK_SIZES: Final = {"principal": 4.8, "specimen": 5.0, "proposed": 7.2, "target": 5.4, "cursor": 8.0}
"""Half the width of the larger marks."""

NAME_SIZES: Final = {"specimen": 10.0, "principal": 10.0, "proposed": 8.5, "target": 8.5, "level": 6.5}
"""Of the names as the front page sets them (static/stereogram-panel.css); 7 where not listed."""

SHAPES: Final = {
    "normal": "M-2.6 0a2.6 2.6 0 1 0 5.2 0a2.6 2.6 0 1 0-5.2 0Z",
    "row": "M-2.8 2.4L0-3L2.8 2.4Z",
    "principal": "M0-4.4L4.4 0L0 4.4L-4.4 0Z",
    "specimen": "M-4.6 0H4.6M0-4.6V4.6M-3.2-3.2L3.2 3.2M-3.2 3.2L3.2-3.2",
    "taken": "M-3 0a3 3 0 1 0 6 0a3 3 0 1 0-6 0Z",
    "proposed": "M-4 0a4 4 0 1 0 8 0a4 4 0 1 0-8 0ZM-7 0H-4M4 0H7M0-7V-4M0 4V7",
    "cursor": "M-5 0a5 5 0 1 0 10 0a5 5 0 1 0-10 0ZM-8 0H-5M5 0H8M0-8V-5M0 5V8",
    "target": "M-5 0a5 5 0 1 0 10 0a5 5 0 1 0-10 0ZM-1.5 0a1.5 1.5 0 1 0 3 0a1.5 1.5 0 1 0-3 0Z",
}
"""The mark of each role, about its place; roles are told apart by shape, not by colour alone."""
