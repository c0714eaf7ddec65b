"""Line charts as SVG text: ink lines told apart by stroke and by a name at their end, bands of uncertainty, points."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from html import escape
from typing import Final

import numpy as np
import numpy.typing as npt

FloatArray = npt.NDArray[np.float64]

WIDTH: Final = 560.0
HEIGHT: Final = 236.0
LEFT, RIGHT, TOP, BOTTOM = 62.0, 56.0, 12.0, 40.0
STROKES: Final = ("solid", "dash", "chain")
NAME_GAP: Final = 15.0


@dataclass(frozen=True)
class Curve:
    """One curve.

    Attributes:
        x, y: shape (n,); NaN in y breaks the line.
        name: printed at its end, as runs are ("p1" gets its subscript).
        stroke: "solid", "dash" or "chain".
        spread: shape (n,), one standard deviation, drawn as a band of twice it to either side; None draws none.
    """

    x: FloatArray
    y: FloatArray
    name: str = ""
    stroke: str = "solid"
    spread: FloatArray | None = None


@dataclass(frozen=True)
class Points:
    """Measured points with bars of one standard deviation."""

    x: FloatArray
    y: FloatArray
    spread: FloatArray | None = None


@dataclass(frozen=True)
class _Frame:
    low: FloatArray
    high: FloatArray
    height: float

    def across(self, x: npt.ArrayLike) -> FloatArray:
        part = (np.asarray(x, dtype=np.float64) - self.low[0]) / (self.high[0] - self.low[0])
        return np.asarray(LEFT + part * (WIDTH - LEFT - RIGHT))

    def up(self, y: npt.ArrayLike) -> FloatArray:
        part = (np.asarray(y, dtype=np.float64) - self.low[1]) / (self.high[1] - self.low[1])
        places: FloatArray = self.height - BOTTOM - part * (self.height - TOP - BOTTOM)
        return places


def list_ticks(low: float, high: float, most: int = 7) -> FloatArray:
    """Round values between two bounds, at most so many: steps of 1, 2 or 5 times a power of ten."""
    span = high - low
    raw = span / max(1, most - 1)
    power = float(10.0 ** np.floor(np.log10(raw)))
    step = next(power * factor for factor in (1.0, 2.0, 5.0, 10.0) if power * factor >= raw * (1 - 1e-9))
    first, last = np.ceil(low / step - 1e-9), np.floor(high / step + 1e-9)
    ticks: FloatArray = np.arange(first, last + 1) * step + 0.0
    return ticks


def draw_chart(
    curves: Sequence[Curve],
    points: Sequence[Points] = (),
    *,
    x_name: str,
    y_name: str,
    title: str,
    measured: tuple[float, float] | None = None,
    marked: float | None = None,
    height: float = HEIGHT,
    floor: float | None = None,
) -> str:
    """A chart.

    Args:
        curves, points: what is drawn.
        x_name, y_name: printed beside the axes, with units.
        title: what a reader who does not see it is told.
        measured: the range of x that was measured; beyond it the ground is hatched.
        marked: a value of x with a line of its own.
        height: of the drawing.
        floor: nothing is drawn below this y, for quantities that cannot be there.

    Returns:
        An SVG element as text; it takes its colours from the page.
    """
    frame = _fit_frame(curves, points, measured, marked, height)
    if floor is not None:
        frame = replace(frame, low=np.maximum(frame.low, [-np.inf, floor]))
    parts = _draw_beyond(frame, measured)
    parts += _draw_axes(frame, x_name, y_name)
    for curve in curves:
        parts += _draw_curve(frame, curve)
    for group in points:
        parts += _draw_points(frame, group)
    if marked is not None:
        at = float(frame.across(marked))
        parts.append(f'<path class="chart-mark" d="M{at:.1f} {TOP}V{height - BOTTOM:.1f}"/>')
    parts += _draw_names(frame, curves)
    return (
        f'<svg class="chart" viewBox="0 0 {WIDTH:g} {height:g}" role="img" aria-label="{escape(title, quote=True)}">'
        f"{''.join(parts)}</svg>"
    )


def _fit_frame(
    curves: Sequence[Curve],
    points: Sequence[Points],
    measured: tuple[float, float] | None,
    marked: float | None,
    height: float,
) -> _Frame:
    xs = [curve.x for curve in curves] + [group.x for group in points]
    xs += [np.asarray(measured)] if measured else []
    xs += [np.array([marked])] if marked is not None else []
    ys = [curve.y + sign * 2 * _spread(curve.spread, curve.y) for curve in curves for sign in (-1, 1)]
    ys += [group.y + sign * _spread(group.spread, group.y) for group in points for sign in (-1, 1)]
    low, high = np.array([_find_bounds(xs), _find_bounds(ys)]).T
    size = np.maximum(np.abs(low), np.abs(high))
    flat = high - low <= 1e-12 * np.maximum(size, 1e-300)
    room = np.where(flat, np.where(size > 0, 0.05 * size, 1.0), 0.05 * (high - low))
    room[0] = room[0] if flat[0] else 0.0
    return _Frame(low - room, high + room, height)


def _spread(spread: FloatArray | None, like: FloatArray) -> FloatArray:
    return np.zeros_like(like) if spread is None else np.nan_to_num(spread)


def _find_bounds(parts: Sequence[FloatArray]) -> tuple[float, float]:
    together = np.concatenate([np.ravel(part) for part in parts]) if parts else np.zeros(1)
    known = together[np.isfinite(together)]
    return (float(np.min(known)), float(np.max(known))) if len(known) else (0.0, 0.0)


def _draw_beyond(frame: _Frame, measured: tuple[float, float] | None) -> list[str]:
    if measured is None:
        return []
    parts = []
    for start, end in ((frame.low[0], measured[0]), (measured[1], frame.high[0])):
        left, right = float(frame.across(start)), float(frame.across(end))
        if right - left < 1.0:
            continue
        top, bottom = TOP, frame.height - BOTTOM
        lines = [
            f"M{max(left, x):.1f} {bottom - max(0.0, left - x):.1f}"
            f"L{min(right, x + bottom - top):.1f} {bottom - min(right - x, bottom - top):.1f}"
            for x in np.arange(left - (bottom - top), right, 9.0)
            if max(left, x) < min(right, x + bottom - top)
        ]
        parts.append(f'<path class="chart-beyond" d="{"".join(lines)}"/>')
    return parts


def _draw_axes(frame: _Frame, x_name: str, y_name: str) -> list[str]:
    bottom = frame.height - BOTTOM
    parts = [f'<path class="chart-frame" d="M{LEFT} {TOP}V{bottom:.1f}H{WIDTH - RIGHT}"/>']
    for value in list_ticks(float(frame.low[0]), float(frame.high[0])):
        at = float(frame.across(value))
        parts.append(f'<path class="chart-frame" d="M{at:.1f} {bottom:.1f}v5"/>')
        parts.append(f'<text x="{at:.1f}" y="{bottom + 18:.1f}" text-anchor="middle">{_print(value)}</text>')
    for value in list_ticks(float(frame.low[1]), float(frame.high[1])):
        at = float(frame.up(value))
        rule = "chart-zero" if abs(value) < 1e-12 * max(1e-300, float(np.max(np.abs(frame.high)))) else "chart-rule"
        parts.append(f'<path class="{rule}" d="M{LEFT} {at:.1f}H{WIDTH - RIGHT}"/>')
        parts.append(f'<text x="{LEFT - 7:.1f}" y="{at + 4:.1f}" text-anchor="end">{_print(value)}</text>')
    middle = (LEFT + WIDTH - RIGHT) / 2
    parts.append(
        f'<text class="chart-name" x="{middle:.1f}" y="{frame.height - 4:.1f}" text-anchor="middle">'
        f"{escape(x_name)}</text>"
    )
    parts.append(
        f'<text class="chart-name" transform="translate(13 {(TOP + bottom) / 2:.1f}) rotate(-90)" '
        f'text-anchor="middle">{escape(y_name)}</text>'
    )
    return parts


def _print(value: float) -> str:
    text = f"{value:.6g}"
    return "0" if text == "-0" else text.replace("-", "−")


def _path(frame: _Frame, x: FloatArray, y: FloatArray) -> str:
    steps, pen_down = [], False
    for across, up in zip(frame.across(x).tolist(), frame.up(y).tolist(), strict=True):
        if not np.isfinite(up):
            pen_down = False
            continue
        steps.append(f"{'L' if pen_down else 'M'}{across:.1f} {up:.1f}")
        pen_down = True
    return "".join(steps)


def _draw_curve(frame: _Frame, curve: Curve) -> list[str]:
    parts = []
    if curve.spread is not None and np.any(np.isfinite(curve.spread)):
        wide = 2 * np.nan_to_num(curve.spread)
        known = np.isfinite(curve.y)
        around = np.concatenate([curve.x[known], curve.x[known][::-1]])
        edge = np.concatenate([(curve.y + wide)[known], (curve.y - wide)[known][::-1]])
        edge = np.maximum(edge, frame.low[1])
        if len(around):
            parts.append(f'<path class="chart-band" d="{_path(frame, around, edge)}Z"/>')
    parts.append(f'<path class="chart-curve {curve.stroke}" d="{_path(frame, curve.x, curve.y)}"/>')
    return parts


def _draw_points(frame: _Frame, group: Points) -> list[str]:
    bars, rings = [], []
    spread = _spread(group.spread, group.y)
    places = zip(frame.across(group.x), frame.up(group.y), frame.up(group.y - spread), strict=True)
    for x, y, low in places:
        if not np.isfinite(y):
            continue
        reach = float(low - y)
        if reach > 3:
            bars.append(f"M{x:.1f} {y - reach:.1f}V{y + reach:.1f}")
        rings.append(f'<circle cx="{x:.1f}" cy="{y:.1f}" r="3.2"/>')
    return [f'<path class="chart-bar" d="{"".join(bars)}"/><g class="chart-points">{"".join(rings)}</g>']


def _draw_names(frame: _Frame, curves: Sequence[Curve]) -> list[str]:
    """Names at the ends of the curves, moved apart where they would overlap."""
    ends = []
    for curve in curves:
        known = np.flatnonzero(np.isfinite(curve.y))
        if curve.name and len(known):
            ends.append((float(frame.up(curve.y[known[-1]])), curve.name))
    ends.sort()
    parts, last = [], -np.inf
    for at, name in ends:
        place = max(at, last + NAME_GAP)
        last = place
        head, tail = escape(name[:1]), escape(name[1:])
        runs = f'<tspan class="sy">{head}</tspan>' + (f'<tspan font-size="10" dy="3">{tail}</tspan>' if tail else "")
        if len(name) > 2:
            runs = escape(name)
        parts.append(f'<text class="chart-end" x="{WIDTH - RIGHT + 7:.1f}" y="{place + 4:.1f}">{runs}</text>')
    return parts
