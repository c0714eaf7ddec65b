"""The panel of sections: the polar curve of a tensor's value in a plane, with the Mohr circle of that plane beside it.

Angles go counterclockwise in both pictures: the transverse part is drawn downward, so that the point of the circle
turns the same way as the direction, by twice the angle.
"""

from __future__ import annotations

import math
from html import escape
from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, typeset_indices
from app.crystal.lattice import compute_directions, list_indices
from app.tensor.printing import MINUS, print_value
from app.tensor.section import Section
from app.tensor.sentence import print_angle
from app.web.label_places import place_labels

FloatArray = npt.NDArray[np.float64]

SIZE: Final = 340.0
RADIUS: Final = 112.0
STEPS: Final = 361
HIGHEST_ROW: Final = 3
MOST_ROWS: Final = 6
IN_PLANE: Final = 1e-4
"""Radians within which a row lies in a plane."""
FAR: Final = 3.0
"""A circle so many radii from the origin is drawn without it, so that it can be seen."""


def list_rows(crystal: Crystal, section: Section) -> list[tuple[str, FloatArray]]:
    """Rows of low index that lie in the plane, the simplest first: index form and unit vector (3,)."""
    if crystal.M is None:
        return []
    indices = list_indices(HIGHEST_ROW)
    vectors = compute_directions(crystal, "row", indices)
    inside = np.flatnonzero(np.abs(vectors @ section.normal) <= IN_PLANE)[:MOST_ROWS]
    return [(format_indices("row", indices[row].tolist()), vectors[row]) for row in inside.tolist()]


def describe_section(
    crystal: Crystal, section: Section, unit: str, names: tuple[str, str], angle: float
) -> dict[str, Any]:
    """What the panel shows.

    Args:
        crystal, section: what is cut.
        unit: printed.
        names: of the normal and of the direction from which angles count.
        angle: of the point, radians.
    """
    rows = list_rows(crystal, section)
    sigma = section.sigma
    point = _describe_point(section, angle)
    return {
        "normal": names[0],
        "zero": names[1],
        "unit": unit,
        "polar": draw_polar(section, rows, names[1], angle),
        "mohr": draw_circle(section, angle),
        "even": section.even,
        "largest": print_value(section.largest, sigma.largest if sigma else None),
        "smallest": print_value(section.smallest, sigma.smallest if sigma else None),
        "largest_at": _print_turn(section.turn, sigma.turn if sigma else None),
        "smallest_at": _print_turn(section.turn + math.pi / 2.0, sigma.turn if sigma else None),
        "mean": print_value(section.mean, sigma.mean if sigma else None),
        "radius": print_value(section.radius, sigma.radius if sigma else None),
        "shift": None if _is_nothing(section) else print_value(section.shift, sigma.shift if sigma else None),
        "zeros": [_print_turn(turn, None) for turn in section.find_zeros()],
        "rows": [
            {"name": typeset_indices(name), "at": _print_turn(_angle_of(section, vector), None), "value": value}
            for name, vector in rows
            for value in [_print_at(section, _angle_of(section, vector))]
        ],
        "point": point,
    }


def _angle_of(section: Section, vector: FloatArray) -> float:
    return section.measure_angle(vector) or 0.0


def _is_nothing(section: Section) -> bool:
    """Whether the tensor has no antisymmetric part to speak of."""
    matrix = section.estimate.matrix
    return bool(np.max(np.abs(matrix - matrix.T)) <= 1e-12 * (float(np.max(np.abs(matrix))) or 1.0))


def _print_at(section: Section, angle: float) -> str:
    sigma = section.value_sigma(angle)
    return print_value(float(section.values(angle)), None if sigma is None else float(sigma))


def _print_turn(angle: float, sigma: float | None) -> str:
    """An angle of a line, from 0° to below 180°, with its uncertainty."""
    degrees = math.degrees(angle) % 180.0
    if degrees > 179.95:
        degrees = 0.0
    if sigma is None or not 0.0 < sigma < math.radians(60.0):
        return print_angle(degrees)
    return f"{print_value(degrees, math.degrees(sigma))}°"


def _describe_point(section: Section, angle: float) -> dict[str, Any]:
    sigma = section.transverse_sigma(angle)
    transverse = float(section.transverse(angle))
    degrees = math.degrees(angle)
    return {
        "angle": degrees,
        "angle_text": f"{degrees:.1f}°".replace("-", MINUS),
        "doubled_text": f"{2.0 * degrees:.1f}°".replace("-", MINUS),
        "value": _print_at(section, angle),
        "transverse": print_value(transverse, None if sigma is None else float(sigma)),
        "direction": section.directions(angle).tolist(),
    }


def _path(points: FloatArray) -> str:
    return "M" + "L".join(f"{x:.1f} {y:.1f}" for x, y in points.tolist())


def _stroke(name: str, path: str) -> str:
    return f'<path class="{name}" d="{path}"/>'


def _label(text: str, x: float, y: float, anchor: str = "middle", name: str = "tip-place") -> dict[str, Any]:
    return {"class": name, "x": round(x, 1), "y": round(y, 1), "runs": [[text, "plain"]], "anchor": anchor}


def _write_labels(labels: list[dict[str, Any]]) -> str:
    return "".join(
        f'<text x="{label["x"]:.1f}" y="{label["y"]:.1f}" text-anchor="{label["anchor"]}">'
        f"{escape(label['runs'][0][0])}</text>"
        for label in place_labels(labels, SIZE, SIZE)
    )


def _wrap(name: str, words: str, parts: list[str], labels: list[dict[str, Any]]) -> str:
    return (
        f'<svg class="section-drawing {name}" viewBox="0 0 {SIZE:g} {SIZE:g}" role="img" aria-label="{escape(words)}">'
        f"{''.join(parts)}{_write_labels(labels)}</svg>"
    )


def draw_polar(section: Section, rows: list[tuple[str, FloatArray]], zero: str, angle: float) -> str:
    """The polar curve as SVG: radius |value|, full where the value is positive and dashed where it is negative."""
    middle = SIZE / 2.0
    largest = max(abs(section.largest), abs(section.smallest))
    scale = RADIUS / largest if largest > 0 else 0.0
    angles = np.linspace(0.0, 2.0 * np.pi, STEPS)
    values = section.values(angles)
    radii = np.abs(values) * scale
    curve = np.stack([middle + radii * np.cos(angles), middle - radii * np.sin(angles)], axis=-1)
    parts = [f'<circle class="section-ring" cx="{middle:g}" cy="{middle:g}" r="{RADIUS:g}"/>']
    for quarter in range(4):
        x, y = float(round(math.cos(quarter * math.pi / 2))), -float(round(math.sin(quarter * math.pi / 2)))
        parts.append(_stroke("section-tick", f"M{middle + x * (RADIUS - 4):g} {middle + y * (RADIUS - 4):g}"
                             f"L{middle + x * (RADIUS + 4):g} {middle + y * (RADIUS + 4):g}"))  # fmt: skip
    labels = [_label(zero, middle + RADIUS + 8, middle - 7, "start", "tip"), _label("90°", middle, 42)]
    for name, vector in rows:
        turn = _angle_of(section, vector)
        ends = [(middle + sign * RADIUS * math.cos(turn), middle - sign * RADIUS * math.sin(turn)) for sign in (-1, 1)]
        parts.append(_stroke("section-row", f"M{ends[0][0]:.1f} {ends[0][1]:.1f}L{ends[1][0]:.1f} {ends[1][1]:.1f}"))
        x, y = ends[1]
        parts.append(f'<circle class="section-row-end" cx="{x:.1f}" cy="{y:.1f}" r="3.6"/>')
        if typeset_indices(name) != zero:
            side = "start" if x > middle + 20 else ("end" if x < middle - 20 else "middle")
            out = 12.0 / RADIUS
            labels.append(
                _label(
                    typeset_indices(name), x + out * (x - middle), y + out * (y - middle) + 5, side, "crystal-letter"
                )
            )
    signs = np.sign(np.round(values / (largest or 1.0), 12))
    for sign, kind in ((1.0, "section-curve"), (-1.0, "section-curve minus")):
        shown = signs == sign
        edges = np.flatnonzero(np.diff(np.concatenate([[False], shown, [False]]).astype(int))).tolist()
        path = "".join(
            _path(curve[max(first - 1, 0) : last + 1]) for first, last in zip(edges[::2], edges[1::2], strict=True)
        )
        if path:
            parts.append(_stroke(kind, path))
    if not section.even:
        for turn, value in ((section.turn, section.largest), (section.turn + math.pi / 2, section.smallest)):
            for sense in (1.0, -1.0):
                reach = abs(value) * scale
                x, y = middle + sense * reach * math.cos(turn), middle - sense * reach * math.sin(turn)
                parts.append(_stroke("section-extreme", f"M{x:.1f} {y - 5:.1f}l5 5l-5 5l-5 -5Z"))
    parts += _draw_pointer(section, angle, middle, scale)
    words = (
        f"Polar curve in the plane: largest {print_value(section.largest)}, smallest {print_value(section.smallest)}; "
        f"at the point {_print_at(section, angle)}"
    )
    return _wrap("polar", words, parts, labels)


def _draw_pointer(section: Section, angle: float, middle: float, scale: float) -> list[str]:
    reach = abs(float(section.values(angle))) * scale
    x, y = math.cos(angle), -math.sin(angle)
    arc = np.linspace(0.0, angle, 41)
    sweep = np.stack([middle + 26.0 * np.cos(arc), middle - 26.0 * np.sin(arc)], axis=-1)
    return [
        _stroke("section-point-line", f"M{middle:g} {middle:g}L{middle + RADIUS * x:.1f} {middle + RADIUS * y:.1f}"),
        _stroke("section-angle", _path(sweep)),
        f'<circle class="section-point" cx="{middle + reach * x:.1f}" cy="{middle + reach * y:.1f}" r="5"/>',
    ]


def draw_circle(section: Section, angle: float) -> str:
    """The Mohr circle as SVG: value to the right, transverse part downward, to one scale."""
    middle = SIZE / 2.0
    radius = section.radius
    # The picture holds the circle, and the origin too where it is not far away.
    low, high, left, right = (section.shift - radius, section.shift + radius, section.smallest, section.largest)
    near = math.hypot(section.mean, section.shift) <= FAR * radius
    if near or radius == 0.0:
        low, high, left, right = min(low, 0.0), max(high, 0.0), min(left, 0.0), max(right, 0.0)
    span = max(high - low, right - left)
    scale = 236.0 / span if span > 0 else 1.0
    # From halves, so that no sum of two large numbers runs over.
    centre_value, centre_shift = left / 2.0 + right / 2.0, low / 2.0 + high / 2.0

    def place(value: float, transverse: float) -> tuple[float, float]:
        return middle + (value - centre_value) * scale, middle + (transverse - centre_shift) * scale

    (x, y), reach = place(section.mean, section.shift), radius * scale
    base = place(0.0, 0.0)[1]
    labels: list[dict[str, Any]] = []
    parts: list[str] = []
    if 8.0 < base < SIZE - 8.0:
        parts.append(_stroke("section-axis", f"M14 {base:.1f}L{SIZE - 14:g} {base:.1f}"))
    if near or radius == 0.0:
        origin = place(0.0, 0.0)[0]
        parts.append(_stroke("section-axis", f"M{origin:.1f} 14L{origin:.1f} {SIZE - 14:g}"))
        labels.append(_label("0", origin - 6, base + 16, "end", "tip"))
    parts.append(f'<circle class="section-circle" cx="{x:.1f}" cy="{y:.1f}" r="{reach:.1f}"/>')
    parts.append(_stroke("section-cross", f"M{x - 5:.1f} {y:.1f}h10M{x:.1f} {y - 5:.1f}v10"))
    if section.radius > 0.0:
        parts.append(_stroke("section-cross", f"M{x - reach:.1f} {y:.1f}H{x + reach:.1f}"))
        for value, side in ((section.largest, 1.0), (section.smallest, -1.0)):
            end = x + side * reach
            parts.append(_stroke("section-extreme", f"M{end:.1f} {y - 5:.1f}l5 5l-5 5l-5 -5Z"))
            anchor = "end" if side > 0 else "start"
            labels.append(_label(print_value(value, digits=4), end - 9 * side, y + 19, anchor, "crystal-letter"))
        start, now = 2.0 * (0.0 - section.turn), 2.0 * (angle - section.turn)
        for turn, kind in ((start, "section-zero-line"), (now, "section-point-line")):
            parts.append(_stroke(kind, f"M{x:.1f} {y:.1f}L{x + reach * math.cos(turn):.1f} "
                                 f"{y - reach * math.sin(turn):.1f}"))  # fmt: skip
        arc = np.linspace(start, now, 61)
        size = min(26.0, 0.4 * reach)
        parts.append(_stroke("section-angle", _path(np.stack([x + size * np.cos(arc), y - size * np.sin(arc)], -1))))
        half = (start + now) / 2.0
        labels.append(
            _label(
                "2φ", x + (size + 12) * math.cos(half), y - (size + 12) * math.sin(half) + 5, name="principal-letter"
            )
        )
    labels.append(_label(print_value(section.mean, digits=4), x, y - 9, name="crystal-letter"))
    point = place(float(section.values(angle)), float(section.transverse(angle)))
    parts.append(f'<circle class="section-point" cx="{point[0]:.1f}" cy="{point[1]:.1f}" r="5"/>')
    labels.append(_label("value →", SIZE - 14, 18, "end", "crystal-letter"))
    labels.append(_label("transverse ↓", 12, SIZE - 12, "start", "crystal-letter"))
    words = (
        f"Mohr circle: centre {print_value(section.mean)}, {print_value(section.shift)}, "
        f"radius {print_value(section.radius)}"
    )
    return _wrap("mohr", words, parts, labels)
