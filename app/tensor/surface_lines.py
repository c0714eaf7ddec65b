"""Lines on the surfaces of a tensor: where the value is zero, lines of equal value, the outline seen from a direction.

Where the value is v, nᵀ(A − v·1)n = 0: a cone with the principal axes of A, which meets the unit sphere in a
spherical conic. On all three surfaces the radius follows from the value alone, so a line of equal value is that conic
at one distance from the centre. The outline of the quadric xᵀA x = ±1 seen along d is where d touches it, dᵀA x = 0,
a plane section.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.conic import Conic, find_conics
from app.tensor.matrix import read_matrix
from app.tensor.quadric import ZERO_TOLERANCE
from app.tensor.sheet_mesh import spread_circular, spread_hyperbolic
from app.tensor.surface import SurfaceKind, find_cut, find_scaled_principal

FloatArray = npt.NDArray[np.float64]

FEWEST_POINTS: Final = 9
"""A closed line has at least so many points, the last one on the first."""


@dataclass(frozen=True)
class SurfaceLine:
    """A polyline on a surface.

    Attributes:
        points: shape (m, 3), in the frame of the matrix; a closed line ends on its first point.
        sheet: +1 or −1, the sheet on which it lies.
        level: the value along it; None of an outline, where it changes.
    """

    points: FloatArray
    sheet: int
    level: float | None


@dataclass(frozen=True)
class Levels:
    """Values for lines of equal value.

    Attributes:
        values: shape (n,), ascending, whole multiples of the step.
        heavy: shape (n,), which of them are drawn heavy and numbered.
        step: between neighbours; 0 where there are none.
        heavy_step: between heavy ones; 0 where there are none.
    """

    values: FloatArray
    heavy: npt.NDArray[np.bool_]
    step: float
    heavy_step: float


def zero_cone(matrix: npt.ArrayLike, points: int = 181) -> list[FloatArray]:
    """The directions in which the value nᵀAn is zero, as closed curves on the unit sphere.

    Args:
        matrix: shape (3, 3), in any frame; its symmetric part counts.
        points: on each curve, the last one on the first; 9 or more.

    Returns:
        Arrays (points, 3): the two curves of a cone; where a principal value is zero and the others differ in sign,
        the great circles of two planes; where two are zero, one great circle. Where one is zero and the others have
        one sign, the two ends of its axis, arrays (1, 3). Nothing where the value is nowhere zero, or everywhere.

    Raises:
        InputError: the matrix is not three rows of three finite numbers, or too few points.
    """
    _check_points(points)
    principal = find_scaled_principal(read_matrix(matrix))
    values = principal.values
    signs = np.sign(values)
    if np.sum(signs == 0) == 1 and abs(np.sum(signs)) == 2:
        axis = principal.axes[signs == 0]
        return [axis, -axis]
    return [conic.thin(points) for conic in find_conics(values, principal.axes)]


def value_lines(
    matrix: npt.ArrayLike, surface: SurfaceKind, levels: npt.ArrayLike, points: int = 1500, lift: float = 0.0
) -> list[SurfaceLine]:
    """Lines of equal value on a surface, with points where they bend.

    Args:
        matrix: shape (3, 3), in any frame.
        surface: "quadric" or "value" (levels of nᵀAn) or "flux" (levels of |A n|).
        levels: shape (k,). Levels that the surface does not reach, that lie beyond a quadric's cut, or that are zero
            (where a quadric is infinite and the others are a point) give no line. ±1/cut_at² is the rim of a sheet.
        points: how many to spend on all lines together; each gets 9 or more.
        lift: the lines lie this fraction of their radius outside the surface, so that a mesh does not hide them.

    Raises:
        InputError: a bad matrix, surface or level, or too few points for so many lines.
    """
    cells = read_matrix(matrix)
    wanted = np.array(levels, dtype=np.float64).reshape(-1)
    if not np.all(np.isfinite(wanted)):
        raise InputError("A level is a finite number.", field="levels")
    if surface not in ("quadric", "value", "flux"):
        raise InputError(f"There is no surface “{surface}”.", field="surface", hint="Take quadric, value or flux.")
    if surface == "flux":
        scale = float(np.max(np.abs(cells))) or 1.0
        _, sizes, axes = np.linalg.svd(cells / scale)
        values, conditions, cut = np.square(sizes), np.square(np.maximum(wanted / scale, 0.0)), None
    else:
        principal = find_scaled_principal(cells)
        scale, values, axes = principal.scale, principal.values, principal.axes
        conditions = wanted / scale
        cut = find_cut(values) if surface == "quadric" else None
    lines: list[tuple[float, float, Conic]] = []
    spread = ZERO_TOLERANCE * float(np.max(np.abs(values)))
    for level, condition in zip(wanted, conditions, strict=True):
        beyond = cut is not None and abs(condition) * cut**2 < 1.0 - ZERO_TOLERANCE
        if condition == 0.0 or beyond or values[0] - values[2] <= spread or not values[2] <= condition <= values[0]:
            continue
        radius = abs(level) if surface != "quadric" else 1.0 / np.sqrt(abs(condition)) / np.sqrt(scale)
        lines += [(float(level), float(radius), conic) for conic in find_conics(values - condition, axes)]
    weights = np.array([conic.weights[-1] * np.sqrt(radius) for _, radius, conic in lines])
    counts = _share_points(points, weights)
    return [
        SurfaceLine(conic.thin(count) * (radius * (1.0 + lift)), 1 if level > 0 else -1, level)
        for count, (level, radius, conic) in zip(counts, lines, strict=True)
    ]


def outline(matrix: npt.ArrayLike, sight: npt.ArrayLike, points: int = 181) -> list[SurfaceLine]:
    """The outline of the quadric's sheets under parallel projection: the plane section dᵀA x = 0.

    The rims where open sheets are cut are not part of it (they are lines of equal value). Where d is along a principal
    axis of value zero it touches a cylinder everywhere, and the section across d, which projects onto the same line,
    stands for all others.

    Args:
        matrix: shape (3, 3), in any frame; its symmetric part counts.
        sight: shape (3,), the line of sight d in that frame, of any length but zero.
        points: on each polyline; 9 or more.

    Returns:
        Closed ellipses and open branches that end at the distance ``cut_at``; nothing where d touches no sheet that
        is drawn.

    Raises:
        InputError: a bad matrix or line of sight, or too few points.
    """
    _check_points(points)
    principal = find_scaled_principal(read_matrix(matrix))
    direction = np.array(sight, dtype=np.float64)
    if direction.shape != (3,) or not np.all(np.isfinite(direction)) or not np.any(direction):
        raise InputError("The line of sight is three finite numbers, not all zero.", field="sight")
    if not np.any(principal.values):
        return []
    direction = principal.axes @ (direction / np.max(np.abs(direction)))
    normal = principal.values * direction
    if np.max(np.abs(normal)) <= ZERO_TOLERANCE:
        normal = direction
    plane = np.linalg.svd(normal[None, :])[2][1:]
    ascending, vectors = np.linalg.eigh((plane * principal.values) @ plane.T)
    section = (vectors.T @ plane)[::-1] @ principal.axes
    cut = find_cut(principal.values)
    lines = []
    for sheet in (1, -1):
        values, axes = (ascending[::-1], section) if sheet == 1 else (-ascending, section[::-1])
        curves = _trace_section(values, cut, points)
        lines += [SurfaceLine(curve @ axes / np.sqrt(principal.scale), sheet, None) for curve in curves]
    return lines


def choose_levels(low: float, high: float, most: int = 30) -> Levels:
    """Round values between two, at most ``most`` of them: multiples of 1, 2 or 5 times a power of ten.

    Heavy are the multiples of the round step that is four or five times as long.

    Args:
        low, high: the range, in any unit; its ends are left out, since there a line is a point.

    Raises:
        InputError: a bound that is not finite, or no room for a level.
    """
    if not (np.isfinite(low) and np.isfinite(high)):
        raise InputError("Levels are chosen between two finite numbers.", field="low")
    if most < 1:
        raise InputError("At least one level is asked for.", field="most")
    width = high / 2.0 - low / 2.0
    # Below this the range is rounding, and no multiple of a step can be told from its neighbour.
    if width <= 1e-12 * max(abs(low), abs(high)) or width < 1e-290:
        return Levels(np.zeros(0), np.zeros(0, dtype=bool), 0.0, 0.0)
    exponent = int(np.floor(np.log10(width / most)))
    for power, digit in ((exponent + more, digit) for more in range(4) for digit in (1, 2, 5)):
        numbers = np.arange(np.floor(_divide(low, digit, power)) + 1.0, np.ceil(_divide(high, digit, power)))
        if len(numbers) <= most:
            break
    every = 4 if digit == 5 else 5
    values = np.asarray(_multiply(numbers * digit, power) + 0.0)
    # Division may have rounded past a bound that is itself a multiple.
    inside = (values > low) & (values < high)
    return Levels(
        values[inside],
        np.mod(numbers, every)[inside] == 0.0,
        float(_multiply(np.float64(digit), power)),
        float(_multiply(np.float64(digit * every), power)),
    )


def _multiply(numbers: FloatArray | np.float64, power: int) -> FloatArray | np.float64:
    # Powers of ten with a positive exponent are exact, so 3 × 10⁻¹ comes out as 0.3.
    return numbers * 10.0**power if power >= 0 else numbers / 10.0**-power


def _divide(number: float, digit: int, power: int) -> float:
    return float(_multiply(np.float64(number), -power)) / digit


def _check_points(points: int) -> None:
    if points < FEWEST_POINTS:
        raise InputError(f"A line takes {FEWEST_POINTS} or more points.", field="points")


def _share_points(points: int, weights: FloatArray) -> list[int]:
    """So many points for each line, in proportion to its weight above the fewest."""
    if len(weights) == 0:
        return []
    spare = points - FEWEST_POINTS * len(weights)
    if spare < 0:
        raise InputError(
            f"{points} points are too few for {len(weights)} lines.",
            field="points",
            hint=f"Take {FEWEST_POINTS * len(weights)} or more, or fewer levels.",
        )
    # The addend keeps equal lines equal when a share is a whole number but for rounding.
    shares = np.floor(spare * weights / np.sum(weights) + 1e-9)
    return [FEWEST_POINTS + int(share) for share in shares]


def _trace_section(values: FloatArray, cut: float | None, points: int) -> list[FloatArray]:
    """The conic values_0 x² + values_1 y² = 1, values_0 ≥ values_1, as far as the cut: polylines (points, 2)."""
    if values[0] <= 0.0 or (cut is not None and values[0] * cut**2 <= 1.0):
        return []
    if values[1] > 0.0 and (cut is None or values[1] * cut**2 >= 1.0):
        angles = np.linspace(0.0, 2.0 * np.pi, points)
        ellipse = np.stack([np.cos(angles), np.sin(angles)], axis=-1) / np.sqrt(values)
        ellipse[-1] = ellipse[0]
        return [ellipse]
    assert cut is not None
    nearest = 1.0 / values[0]
    reach = float(np.sqrt((cut**2 - nearest) / (1.0 - nearest * values[1])))
    spread = spread_circular if values[1] > 0.0 else spread_hyperbolic
    across = reach * spread(np.linspace(-1.0, 1.0, points), reach * float(np.sqrt(abs(values[1]))))
    branch = np.stack([np.sqrt(nearest * np.maximum(1.0 - values[1] * np.square(across), 0.0)), across], axis=-1)
    return [branch, -branch]
