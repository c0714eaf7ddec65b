"""The picture of the front page, and the stereogram, as SVG that stands alone: at a chosen size, in a chosen theme.

True vectors: the lines on the surface are the scene's own, what the surface hides of them is left out, and they are
heavier where the surface turns away from the light. A title, the sentence of the specimen axis, the frames, the unit
and the key stand in the picture, so that it still says what it shows when it has been passed on.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass, replace
from html import escape
from itertools import pairwise
from typing import Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.pose import Pose
from app.tensor.surface import SurfaceKind, build_surface
from app.web.picture_style import SCENE_SHEET, STEREOGRAM_SHEET, Theme, read_tokens, write_style
from app.web.posed import describe_pose
from app.web.scene import Scene, Subject
from app.web.stereogram import Mark, Picture, draw_stereogram
from app.web.stereogram_view import list_poles, list_principal, list_specimen, trace_levels, trace_regions
from app.web.strokes import print_places, split_runs, to_drawing, write_segments
from app.web.turning import View, build_view

FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]
LengthUnit = Literal["mm", "px"]
Sight = Literal["usual", "x", "y", "z"]

BOUNDS: Final[dict[LengthUnit, tuple[float, float]]] = {"mm": (20.0, 1200.0), "px": (100.0, 8000.0)}
BOX: Final = (-34.0, 6.0, 694.0, 716.0)
"""Left, top, right and bottom of what is shown of the drawing of ``app.web.strokes``."""
STEREOGRAM_WIDTH: Final = 244.0
FILL_DETAIL: Final = 20
LIGHT: Final = np.array([-0.48, 0.62, 0.62])
"""From where the light comes, in screen axes: upper left, before the picture."""
WEIGHTS: Final = 4
LETTER: Final = 0.47
"""Width of a letter over its size, on the average of the typefaces that may stand in."""
MOST_LINES: Final = 4

KEY: Final = "Solid with arrow: specimen axes. Chain with ring: cell edges. Thin with diamond: principal axes."
STEREOGRAM_KEY: Final = (
    "Equal-angle projection, x3 toward you and x2 to the right; full: near side, open: far side. Dot: plane normal. "
    "Diamond: principal axis. Crossed: specimen axis. Symmetry elements in the symbols of International Tables for "
    "Crystallography."
)
RADII: Final[dict[SurfaceKind, str]] = {
    "quadric": "Quadric: the radius is 1/√|value|, long is small",
    "value": "Value surface: the radius is the size of the value, long is large",
    "flux": "Flux surface: the radius is the size of the effect, long is large",
}


@dataclass(frozen=True)
class Words:
    """What stands around a picture.

    Attributes:
        title: the sample.
        under: property, unit and conditions.
        below: further lines, in smaller letters.
    """

    title: str
    under: str
    below: Sequence[str]


def check_size(width: float, unit: LengthUnit) -> str:
    """The width as SVG writes it. Raises InputError, field "width", out of bounds."""
    lowest, highest = BOUNDS[unit]
    if not (math.isfinite(width) and lowest <= width <= highest):
        raise InputError(
            f"A picture {width:g} {unit} wide cannot be made.",
            field="width",
            hint=f"Give a width from {lowest:g} to {highest:g} {unit}.",
        )
    return f"{width:g}{unit}"


def look_along(sight: Sight) -> View:
    """The usual view, or one with a specimen axis toward the reader and another up."""
    if sight == "usual":
        return build_view("specimen", None)
    x, y, z = np.eye(3)
    right, up, toward = {"x": (y, z, x), "y": (-x, z, y), "z": (x, y, z)}[sight]
    return View("specimen", np.array([right, up, toward]))


def draw_picture(
    subject: Subject,
    kind: SurfaceKind,
    pose: Pose,
    kept: dict[str, Any],
    view: View,
    words: Words,
    *,
    width: float,
    unit: LengthUnit,
    theme: Theme,
) -> str:
    """The front page's picture as an SVG document.

    Args:
        subject, kind, pose, kept, view: what is shown, see ``app.web.posed.describe_pose``.
        words: title and what stands under it; frames, lines and key are added.
        width, unit: of the whole picture.
        theme: whose colours.

    Raises:
        InputError: field "width", out of bounds.
    """
    size = check_size(width, unit)
    described = describe_pose(subject, kind, pose, kept, view)
    step = _describe_step(subject, kind)
    below = [
        described["sentence"]["text"],
        f"Crystal frame: {subject.crystal.frame_sentence}. Specimen frame: {described['where']}.",
        f"{RADII[kind]}.{step} {KEY}",
        *words.below,
    ]
    body = draw_scene(subject, kind, pose, view, described["overlay"])
    style = write_style(SCENE_SHEET, theme, "picture") + write_surface_style(theme, "picture")
    return _frame(body, style, replace(words, below=below), theme, size, unit, width, BOX)


def _describe_step(subject: Subject, kind: SurfaceKind) -> str:
    levels = subject.scene(kind).levels
    if not len(levels.values):
        return ""
    unit = f" {subject.unit}" if subject.unit else ""
    return f" Lines of equal value every {levels.step:.6g}{unit}, heavy every {levels.heavy_step:.6g}."


def draw_scene(subject: Subject, kind: SurfaceKind, pose: Pose, view: View, overlay: dict[str, Any]) -> str:
    """Block, surface with its lines, axes and letters as elements of SVG, in the order in which they cover."""
    scene = subject.scene(kind)
    screen = view.screen(pose.matrix)
    shapes = _drop_handles([entry for entry in overlay["shapes"] if entry["d"]])
    parts = [_write_shape(entry) for entry in shapes if entry["layer"] == "back"]
    parts += draw_surface(scene, screen)
    parts += [_write_shape(entry) for entry in shapes if entry["layer"] == "front"]
    parts += [_write_text(entry) for entry in overlay["texts"]]
    return "\n".join(part for part in parts if part)


def _drop_handles(shapes: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """What is no handle for the pointer, nor the halo of one."""
    handles = {entry["d"] for entry in shapes if entry.get("hold") or re.search("hand|hold", entry["class"])}
    return [entry for entry in shapes if entry["d"] not in handles]


def _write_shape(entry: dict[str, Any]) -> str:
    return f'<path class="{escape(entry["class"], quote=True)}" d="{entry["d"]}"/>'


def _write_text(entry: dict[str, Any]) -> str:
    place = f'x="{entry["x"]}" y="{entry["y"]}"'
    if "rotate" in entry:
        place = f'transform="translate({entry["x"]} {entry["y"]}) rotate({entry["rotate"]})" dy="4.5"'
    marks = {"symbol": ' class="sy"', "sub": ' font-size="11" dy="4"'}
    runs = "".join(f"<tspan{marks.get(role, '')}>{clean_text(text)}</tspan>" for text, role in entry["runs"])
    return f'<text class="{escape(entry["class"], quote=True)}" text-anchor="{entry["anchor"]}" {place}>{runs}</text>'


def write_surface_style(theme: Theme | None, scope: str) -> str:
    """The rules of what the plotting script draws on the pages."""
    ink, sheet = ("var(--ink)", "var(--sheet)") if theme is None else (read_tokens(theme)[k] for k in ("ink", "sheet"))
    rules = [
        f".{scope} path.body{{fill:{sheet};stroke:{sheet};stroke-width:0.7;stroke-linejoin:round}}",
        f".{scope} path.lines.minus{{stroke-dasharray:5 3}}",
        f".{scope} path.rim{{stroke:{ink};stroke-width:1.1}}",
        f".{scope} path.points{{stroke:{ink};stroke-width:1.7;stroke-linecap:round}}",
    ]
    for weight in range(WEIGHTS):
        shade = (weight + 0.5) / WEIGHTS
        rules.append(f".{scope} path.light{weight}{{stroke:{ink};stroke-width:{0.45 + 0.75 * shade:.2f}}}")
        rules.append(f".{scope} path.heavy{weight}{{stroke:{ink};stroke-width:{0.9 + 1.9 * shade:.2f}}}")
    return "\n" + "\n".join(rules)


def draw_surface(scene: Scene, screen: FloatArray) -> list[str]:
    """The surface and its lines as elements of SVG; ``screen`` has its axes as rows, in the crystal frame."""
    if len(scene.surface.vertices) == 0:
        return []
    parts = [f'<path class="body" d="{_fill(scene, screen)}"/>']
    rim = _trace_cut(scene)
    if len(rim):
        seen = ~scene.find_hidden(rim.mean(axis=1) * 1.01, screen[2])
        parts.append(f'<path class="rim" d="{write_segments((rim @ screen.T)[seen])}"/>')
    negative = scene.surface.vertices[scene.surface.sheets == -1] * scene.factor
    if len(negative):
        dots = negative[:: max(1, len(negative) // 700)] * 1.004
        seen = ~scene.find_hidden(dots * 1.006, screen[2])
        places = to_drawing(dots[seen] @ screen.T)
        parts.append(f'<path class="points" d="{"".join(f"M{x:.1f} {y:.1f}h0" for x, y in places.tolist())}"/>')
    return parts + _draw_lines(scene, screen)


def _fill(scene: Scene, screen: FloatArray) -> str:
    """All that the surface covers on the screen: its triangles, all turned the same way round, as one path."""
    coarse = build_surface(scene.matrix, scene.kind, FILL_DETAIL)
    points = np.round(to_drawing(coarse.vertices * scene.factor @ screen.T), 1)
    corners = points[coarse.triangles]
    sides = corners[:, 1:] - corners[:, :1]
    areas = sides[:, 0, 0] * sides[:, 1, 1] - sides[:, 0, 1] * sides[:, 1, 0]
    corners[areas < 0] = corners[areas < 0][:, ::-1]
    # A closed surface is covered by the half that faces the reader.
    kept = np.abs(areas) > 0.05 if scene.cut is not None else areas < -0.05
    flat = corners[kept].reshape(-1, 6).tolist()
    return "".join(f"M{a:g} {b:g}L{c:g} {d:g} {e:g} {f:g}Z" for a, b, c, d, e, f in flat)


def _trace_cut(scene: Scene) -> FloatArray:
    """The edges at which an open surface was cut, shape (n, 2, 3), world lengths."""
    if scene.cut is None:
        return np.zeros((0, 2, 3))
    triangles = scene.surface.triangles
    edges = np.sort(np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]]), axis=1)
    found, counts = np.unique(edges, axis=0, return_counts=True)
    rims: FloatArray = scene.surface.vertices[found[counts == 1]] * scene.factor
    return rims


def _draw_lines(scene: Scene, screen: FloatArray) -> list[str]:
    """Lines of equal value where they are seen, by weight and sheet."""
    if not scene.lines:
        return []
    points = [line.points * scene.factor for line in scene.lines]
    # They lie a little outside the surface as they are, so that it does not hide its own.
    seen = ~scene.find_hidden(np.concatenate(points), screen[2])
    paths: dict[str, list[str]] = {}
    start = 0
    for line, heavy, world in zip(scene.lines, scene.heavy, points, strict=True):
        flags = seen[start : start + len(world)]
        start += len(world)
        shades = np.clip((_shade(scene, world, line.sheet, screen) * WEIGHTS).astype(int), 0, WEIGHTS - 1)
        texts = print_places(world @ screen.T)
        for first, last in split_runs(flags):
            # One stretch for every weight; each goes on to where the next begins.
            breaks = [first, *(first + 1 + np.flatnonzero(np.diff(shades[first:last]))).tolist(), last]
            for begin, end in pairwise(breaks):
                name = f"lines {'heavy' if heavy else 'light'}{shades[begin]}{'' if line.sheet == 1 else ' minus'}"
                stop = min(end + 1, last)
                if stop - begin > 1:
                    paths.setdefault(name, []).append("M" + "".join(texts[2 * begin : 2 * stop])[1:])
    return [f'<path class="{name}" d="{"".join(paths[name])}"/>' for name in sorted(paths, reverse=True)]


def _shade(scene: Scene, points: FloatArray, sheet: int, screen: FloatArray) -> FloatArray:
    """How far the surface turns away from the light at points of it, 0 to 1, shape (n,)."""
    normals = points
    if scene.kind == "quadric":
        normals = sheet * points @ ((scene.matrix + scene.matrix.T) / 2.0)
    lengths = np.linalg.norm(normals, axis=1)
    lit = (normals @ screen.T) @ (LIGHT / np.linalg.norm(LIGHT)) / np.where(lengths > 0, lengths, 1.0)
    shade: FloatArray = np.clip(0.5 - 0.5 * lit, 0.0, 1.0)
    return shade


def draw_stereogram_picture(
    subject: Subject, pose: Pose, words: Words, *, width: float, unit: LengthUnit, theme: Theme
) -> str:
    """The stereogram of a subject as an SVG document: symmetry, poles, principal and specimen axes, equal values.

    Raises:
        InputError: field "width", out of bounds.
    """
    size = check_size(width, unit)
    drawn = draw_poles(subject, pose)
    body = drawn.partition(">")[2].rpartition("</svg>")[0]
    below = [
        f"Crystal frame: {subject.crystal.frame_sentence}.",
        STEREOGRAM_KEY,
        *words.below,
    ]
    style = write_style(STEREOGRAM_SHEET, theme, "picture")
    box = (-122.0, -116.0, -122.0 + STEREOGRAM_WIDTH, 116.0)
    return _frame(body, style, replace(words, below=below), theme, size, unit, width, box)


def draw_poles(subject: Subject, pose: Pose) -> str:
    """The stereogram of a subject as an element of SVG that nothing can press."""
    poles: list[Mark] = [replace(mark, put="") for mark in list_poles(subject.crystal)]
    marks = [*list_principal(subject.principal), *list_specimen(pose.matrix), *poles]
    traces = trace_levels(subject.tensor.estimate.matrix) + trace_regions(subject.regions)
    title = "Stereogram with the principal axes, the specimen axes and the planes of low index"
    return draw_stereogram(subject.crystal, Picture(marks, traces), title=title)


def _frame(
    body: str,
    style: str,
    words: Words,
    theme: Theme,
    size: str,
    unit: LengthUnit,
    width: float,
    box: tuple[float, float, float, float],
) -> str:
    """The document: title above the drawing, further lines below it."""
    left, top, right, bottom = box
    across = right - left
    letter = across / 46.0
    heads = _wrap(words.title, across, letter * 1.25)[:2]
    unders = _wrap(words.under, across, letter * 0.95)[:2]
    smalls = [line for text in words.below for line in _wrap(text, across, letter * 0.74)[:MOST_LINES]]
    upper = letter * (1.0 + 1.55 * len(heads) + 1.3 * len(unders) + 0.6)
    lower = letter * (0.9 + 1.02 * len(smalls) + 0.6)
    height = bottom - top + upper + lower
    tokens = read_tokens(theme)
    margin = letter * 0.9
    lines, y = [], top - upper + letter * 0.9
    for count, (texts, factor, step, name) in enumerate(
        ((heads, 1.25, 1.55, "title"), (unders, 0.95, 1.3, "under"), (smalls, 0.74, 1.02, "small"))
    ):
        if count == 2:
            y = bottom + letter * 0.6
        for text in texts:
            y += letter * step
            lines.append(
                f'<text class="caption {name}" x="{left + margin:.1f}" y="{y:.1f}" '
                f'style="font-size:{letter * factor:.2f}px">{clean_text(text)}</text>'
            )
    own = (
        f"\n.picture text.caption{{fill:{tokens['ink']};stroke:none;font-family:{tokens['sans']}}}"
        f"\n.picture text.title{{font-family:{tokens['serif']}}}"
        f"\n.picture text.small{{fill:{tokens['ink-second']}}}"
    )
    drawn_height = width * height / across
    title = clean_text(f"{words.title}: {words.under}")
    return (
        '<?xml version="1.0" encoding="UTF-8"?>\n'
        f'<svg xmlns="http://www.w3.org/2000/svg" class="picture" width="{size}" height="{drawn_height:.6g}{unit}" '
        f'viewBox="{left:g} {top - upper:.2f} {across:g} {height:.2f}" role="img">\n<title>{title}</title>\n'
        f"<desc>{clean_text(' '.join(words.below))}</desc>\n<style>{style}{own}</style>\n"
        f'<rect x="{left:g}" y="{top - upper:.2f}" width="{across:g}" height="{height:.2f}" '
        f'fill="{tokens["paper"]}"/>\n'
        f"{body}\n{''.join(lines)}\n</svg>\n"
    )


def _wrap(text: str, across: float, size: float) -> list[str]:
    """Lines that fit, broken at blanks; a word that is longer than a line is cut."""
    room = max(8, int((across - 2.0 * size) / (size * LETTER)))
    lines: list[str] = []
    for word in text.split():
        while len(word) > room:
            lines.append(word[:room])
            word = word[room:]
        if lines and len(lines[-1]) + 1 + len(word) <= room:
            lines[-1] += f" {word}"
        else:
            lines.append(word)
    return [line for line in lines if line]


def clean_text(text: str) -> str:
    """A text as content of an element: escaped, without the signs that XML 1.0 does not allow."""
    plain = re.sub("[\x00-\x08\x0b\x0c\x0e-\x1f\x7f\ud800-\udfff\ufffe\uffff]", "", text)
    return escape(plain, quote=True)
