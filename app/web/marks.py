"""The marks that turn with the crystal, once per scene: lines engraved on the surface, axes, targets, numbered lines.

All points of a scene's marks stand in one array, so that a picture projects them, and looks which of them are hidden,
in one go. World lengths in the crystal frame.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final, Literal
from weakref import WeakKeyDictionary

import numpy as np
import numpy.typing as npt

from app.web.scene import CURVE_POINTS, Scene, Subject

FloatArray = npt.NDArray[np.float64]

AXIS_POINTS: Final = 48
SPINE: Final = 0.13
"""How far a principal axis stands out of the surface."""
LONGEST_EDGE: Final = 0.9
"""World length of the longest cell edge."""

LINE_LIFT: Final = 1.012
TARGET_LIFT: Final = 1.015
"""So much outside the surface a mark on it is taken to be when it is asked whether the surface hides it."""


@dataclass(frozen=True)
class Tip:
    """What stands at the outer end of an axis where it is seen.

    Attributes:
        mark: class of the mark.
        form: its form.
        size: in drawing units.
        letter: class of the letter beside it; empty where there is none.
        runs: the letter.
        away: of the letter from the mark, drawing units.
        remark: text beside it instead of a letter.
    """

    mark: str
    form: Literal["ring", "diamond"]
    size: float
    letter: str = ""
    runs: tuple[tuple[str, str], ...] = ()
    away: float = 0.0
    remark: str = ""


@dataclass(frozen=True, eq=False)
class MarkLine:
    """A line of the crystal.

    Attributes:
        name: its class.
        points: shape (n, 3).
        lift: how much outside the points it is taken to be, see ``LINE_LIFT``.
        there: shape (n,), where there is a surface to carry it.
        tip: of an axis, which also shows where it is hidden; None for a line on the surface.
    """

    name: str
    points: FloatArray
    lift: float
    there: npt.NDArray[np.bool_]
    tip: Tip | None


@dataclass(frozen=True, eq=False)
class NumberedLine:
    """A heavy line of equal value: its text and the rows from ``first`` to before ``last`` of the numbered points."""

    text: str
    first: int
    last: int


@dataclass(frozen=True, eq=False)
class Marks:
    """The marks of a scene.

    Attributes:
        lines: in the order in which they are drawn.
        firsts: where each line begins in ``points``; between two there is one row that belongs to none.
        points: shape (n, 3), all lines, then the targets.
        tested: shape (n, 3), where each point is taken to be when it is asked whether it is hidden.
        there: shape (n,), as of the lines; False between them.
        dotted: shape (n,), which belong to axes.
        targets: how many rows at the end are single points that answer a question.
        numbered: the heavy lines.
        numbered_points, numbered_radii: shapes (k, 3) and (k,), their points and how far out they are.
    """

    lines: tuple[MarkLine, ...]
    firsts: tuple[int, ...]
    points: FloatArray
    tested: FloatArray
    there: npt.NDArray[np.bool_]
    dotted: npt.NDArray[np.bool_]
    targets: int
    numbered: tuple[NumberedLine, ...]
    numbered_points: FloatArray
    numbered_radii: FloatArray


_KEPT: Final[WeakKeyDictionary[Scene, Marks]] = WeakKeyDictionary()


def find_marks(subject: Subject, scene: Scene) -> Marks:
    """The marks of a subject's scene, kept as long as the scene is."""
    marks = _KEPT.get(scene)
    if marks is None:
        marks = _KEPT[scene] = build_marks(subject, scene)
    return marks


def build_marks(subject: Subject, scene: Scene) -> Marks:
    """The marks of a subject's scene."""
    lines = [
        *_list_mirrors(subject, scene),
        *_list_regions(subject, scene),
        *_list_edges(subject, scene),
        *_list_principal(subject, scene),
        *_list_answers(subject, scene),
    ]
    targets = _list_targets(subject, scene)
    # One row more than its points for each line: the gap after it.
    ends = np.cumsum([len(line.points) + 1 for line in lines], dtype=np.int64).tolist()
    firsts = [0, *ends][: len(lines)]
    count = (ends[-1] if ends else 0) + len(targets)
    points, tested = np.zeros((count, 3)), np.zeros((count, 3))
    there, dotted = np.zeros(count, dtype=bool), np.zeros(count, dtype=bool)
    for first, line in zip(firsts, lines, strict=True):
        rows = slice(first, first + len(line.points))
        points[rows], tested[rows] = line.points, line.points * line.lift
        there[rows], dotted[rows] = line.there, line.tip is not None
    rows = slice(count - len(targets), count)
    points[rows], tested[rows], there[rows] = targets, targets * TARGET_LIFT, True
    numbered, numbered_points = _list_numbered(scene)
    radii = np.linalg.norm(numbered_points, axis=1)
    return Marks(
        tuple(lines),
        tuple(firsts),
        points,
        tested,
        there,
        dotted,
        len(targets),
        numbered,
        numbered_points,
        radii,
    )


def _engrave(scene: Scene, directions: FloatArray, name: str) -> MarkLine:
    """A line of directions, shape (n, 3), on the surface."""
    points = directions * scene.radius(directions)[:, None]
    return MarkLine(name, np.nan_to_num(points), LINE_LIFT, ~np.isnan(points[:, 0]), None)


def _list_mirrors(subject: Subject, scene: Scene) -> Iterator[MarkLine]:
    angles = np.linspace(0.0, 2.0 * np.pi, CURVE_POINTS)
    for normal in subject.mirrors:
        across = np.linalg.svd(normal[None, :])[2][1:]
        yield _engrave(scene, np.cos(angles)[:, None] * across[0] + np.sin(angles)[:, None] * across[1], "mirror")


def _list_regions(subject: Subject, scene: Scene) -> Iterator[MarkLine]:
    for kind, curve in subject.regions:
        yield _engrave(scene, curve, "region" if kind == "line" else "region area")


def _list_answers(subject: Subject, scene: Scene) -> Iterator[MarkLine]:
    """Lines along which a search is answered."""
    for curve in () if subject.answer is None else subject.answer.curves:
        yield _engrave(scene, curve, "answer")


def _stand_out(name: str, end: FloatArray, tip: Tip) -> MarkLine:
    """A straight line from the middle to a point, shape (3,)."""
    points = np.linspace(0.0, 1.0, AXIS_POINTS)[:, None] * end
    return MarkLine(name, points, 1.0, np.ones(AXIS_POINTS, dtype=bool), tip)


def _list_edges(subject: Subject, scene: Scene) -> Iterator[MarkLine]:
    """The edges of the cell, to scale, but lengthened where they would not leave the surface."""
    basis = subject.crystal.M
    if basis is None:
        return
    longest = float(np.max(np.linalg.norm(basis, axis=0)))
    for letter, edge in zip("abc", basis.T, strict=True):
        end = edge / longest * LONGEST_EDGE
        end = end * max(1.0, scene.reach * 1.06 / float(np.linalg.norm(end)))
        yield _stand_out("crystal", end, Tip("ring", "ring", 5.2, "crystal-letter", ((letter, "symbol"),), 14))


def _list_principal(subject: Subject, scene: Scene) -> Iterator[MarkLine]:
    principal = subject.principal
    # The remark belongs to the ellipsoid: an open sheet has no longest axis.
    closed = scene.kind == "quadric" and bool(np.all(principal.values > 0))
    longest = int(np.argmin(principal.values)) if closed else -1
    for number in range(3):
        if principal.arbitrary[number]:
            continue
        locked = " locked" if subject.fixed[number] else ""
        axis = principal.axes[number]
        radius = float(scene.radius(axis))
        reach = (scene.reach if not np.isfinite(radius) else radius) + SPINE
        runs = (("p", "symbol"), (str(number + 1), "sub"))
        head = Tip(f"diamond{locked}", "diamond", 6, f"principal-letter{locked}", runs, 16)
        tail = Tip(f"diamond open{locked}", "diamond", 5, remark="long is small" if number == longest else "")
        yield _stand_out(f"principal{locked}", axis * reach, head)
        yield _stand_out(f"principal{locked}", -axis * reach, tail)


def _list_targets(subject: Subject, scene: Scene) -> FloatArray:
    """Where a further reading would see what the readings in use do not, and single directions that answer a search.

    Points on both sides, shape (m, 3).
    """
    found = [] if subject.answer is None else list(subject.answer.directions)
    points = []
    for direction in [*subject.settling.directions, *found]:
        radius = float(scene.radius(direction))
        point = direction * (radius if np.isfinite(radius) else scene.reach)
        points += [point, -point]
    return np.array(points).reshape(-1, 3)


def _list_numbered(scene: Scene) -> tuple[tuple[NumberedLine, ...], FloatArray]:
    """The heavy lines and all their points, shape (k, 3)."""
    numbered: list[NumberedLine] = []
    points = [np.zeros((0, 3))]
    first = 0
    for line, heavy in zip(scene.lines, scene.heavy, strict=True):
        if heavy and line.level is not None:
            last = first + len(line.points)
            numbered.append(NumberedLine(f"{line.level:.6g}".replace("-", "−"), first, last))
            points.append(line.points * scene.factor)
            first = last
    return tuple(numbered), np.concatenate(points)
