"""Where a direction is, and what the tensor does along it, as a sentence for print.

A place is named by the direction that the user put there; else by the simplest row or plane normal within two degrees
(the smallest sum of squared indices; a normal before a row at equality); else by its angles to x1, x2 and x3.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, parse_direction, typeset_indices
from app.crystal.lattice import list_directions, list_indices
from app.tensor.estimate import Estimate
from app.tensor.principal import Principal
from app.tensor.printing import print_value
from app.tensor.values import compute_rod_values, compute_values

FloatArray = npt.NDArray[np.float64]
Role = Literal["plain", "symbol", "sub", "value", "sigma", "unit"]
Kind = Literal["row", "normal"]
Run = tuple[str, Role]
Other = Literal["rod", "plate", None]

NEAR: Final = 2.0
"""Degrees within which a direction is called by a row or normal."""

HIGHEST_INDEX: Final = 5
ON: Final = 0.005
"""Degrees that print as nothing."""


@dataclass(frozen=True)
class Place:
    """Where a direction is.

    Attributes:
        indices: the row or normal that names it, in index form; None where angles do.
        off: degrees from that; 0 where there is none.
        angles: degrees to x1, x2 and x3.
    """

    indices: str | None
    off: float
    angles: tuple[float, float, float]

    @property
    def text(self) -> str:
        """Like ``1.3° off n(−201)``, ``on [103]``, or three angles."""
        if self.indices is None:
            return ", ".join(f"{print_angle(angle)} from x{axis + 1}" for axis, angle in enumerate(self.angles))
        shown = typeset_indices(self.indices)
        return f"on {shown}" if self.off < ON else f"{print_angle(self.off)} off {shown}"


def print_angle(degrees: float) -> str:
    """An angle with one decimal, two where it is small."""
    return f"{degrees:.2f}°" if ON <= degrees < 0.095 else f"{degrees:.1f}°"


def measure_angle(first: FloatArray, second: FloatArray) -> float:
    """Degrees between two vectors, to the last digit also when small."""
    return float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(first, second)), first @ second)))


def place_direction(crystal: Crystal, vector: FloatArray, named: str | None = None) -> Place:
    """Name a unit vector of the crystal frame, shape (3,).

    Args:
        crystal: whose rows and normals are looked at; without a cell only angles are left.
        vector: the direction.
        named: the index form of the direction that the user put there; it is used however far away it is.
    """
    first, second, third = (float(np.rad2deg(np.arccos(np.clip(part, -1.0, 1.0)))) for part in vector)
    angles = (first, second, third)
    if named is not None:
        direction = parse_direction(named)
        if direction.kind in ("row", "normal"):
            kind: Kind = "row" if direction.kind == "row" else "normal"
            off = measure_angle(crystal.resolve(direction), vector)
            return Place(format_indices(kind, direction.values), off, angles)
    near = find_simplest(crystal, vector)
    return Place(None, 0.0, angles) if near is None else Place(near[0], near[1], angles)


def find_simplest(crystal: Crystal, vector: FloatArray, within: float = NEAR) -> tuple[str, float] | None:
    """The simplest row or normal within so many degrees of a unit vector: its index form and the angle; or None."""
    if crystal.M is None:
        return None
    indices = list_indices(HIGHEST_INDEX)
    # A little more than asked for is kept by the cosine, which has no digits left at small angles.
    least = np.cos(np.deg2rad(within)) - 1e-9
    best: tuple[int, int, float, str] | None = None
    kinds: tuple[Kind, ...] = ("normal", "row")
    for rank, kind in enumerate(kinds):
        directions = list_directions(crystal, kind, HIGHEST_INDEX)
        cosines = directions @ vector
        for number in np.flatnonzero(np.abs(cosines) >= least).tolist():
            cosine = float(cosines[number])
            off = float(np.rad2deg(np.arctan2(np.linalg.norm(directions[number] - cosine * vector), abs(cosine))))
            triple = indices[number].tolist()
            size = sum(index * index for index in triple)
            if off <= within + 1e-9 and (best is None or (size, rank, off) < best[:3]):
                best = (size, rank, off, format_indices(kind, [-index if cosine < 0 else index for index in triple]))
    return None if best is None else (best[3], best[2])


@dataclass(frozen=True)
class Along:
    """What the tensor does along a direction, as it is printed.

    Attributes:
        value: nᵀTn.
        other: 1/(nᵀT⁻¹n); None where that has no value, or is not asked for.
    """

    value: str
    other: str | None


def print_along(estimate: Estimate, directions: FloatArray, other: Other = "rod") -> list[Along]:
    """What a tensor does along unit vectors, shape (n, 3), all in the same frame; see ``write_sentence``."""
    values = _print_each(compute_values(estimate.matrix, directions), estimate.value_sigma(directions))
    if other is None:
        return [Along(value, None) for value in values]
    rods = compute_rod_values(estimate.matrix, directions)
    finite = np.isfinite(rods)
    others = _print_each(np.where(finite, rods, 0.0), estimate.rod_sigma(directions))
    return [
        Along(value, rod if exists else None)
        for value, rod, exists in zip(values, others, finite.tolist(), strict=True)
    ]


def _print_each(values: FloatArray, sigmas: FloatArray | None) -> list[str]:
    """Numbers, shape (n,), with their standard deviations where these are finite."""
    if sigmas is None:
        return [print_value(value) for value in values.tolist()]
    return [
        print_value(value, sigma if math.isfinite(sigma) else None)
        for value, sigma in zip(values.tolist(), sigmas.tolist(), strict=True)
    ]


def write_sentence(
    axis: str,
    place: Place,
    vector: FloatArray,
    estimate: Estimate,
    principal: Principal,
    unit: str,
    other: Other = "rod",
    along: Along | None = None,
) -> tuple[list[Run], list[Run]]:
    """The answer to the question, as two lines of runs.

    Args:
        axis: the specimen axis's letter.
        place: where it is.
        vector: the axis in the crystal frame, shape (3,).
        estimate: the tensor in the crystal frame.
        principal: its principal axes.
        unit: printed after the value; empty where there is none.
        other: whether a long bar ("rod") or a wide plate ("plate") would read 1/(nᵀA⁻¹n) instead; None where neither.
        along: what ``print_along`` gives of the axis, where it is known already.
    """
    if along is None:
        (along,) = print_along(estimate, vector[None], other)
    number, spread = split_spread(along.value)
    lead: list[Run] = [("Along ", "plain"), (axis, "symbol"), (", ", "plain")]
    lead += [*_mark_symbols(place.text), (": ", "plain"), (number, "value")]
    if spread:
        lead.append((spread, "sigma"))
    if unit:
        lead.append((f"\u00a0{unit}", "unit"))
    lead.append((".", "plain"))
    second = _describe_nearest(principal, vector)
    if along.other is not None:
        body = "a long bar" if other == "rod" else "a wide plate"
        second.append((f"; {body} would read {along.other}", "plain"))
    second.append((".", "plain"))
    return lead, second


def join_runs(*lines: list[Run]) -> str:
    """The lines as plain text."""
    return " ".join("".join(text for text, _ in line) for line in lines).replace("\u00a0", " ")


def split_spread(printed: str) -> tuple[str, str]:
    """``12.48(8)`` as ``12.48`` and ``(8)``; what follows the parentheses stays with the second part."""
    head, bracket, tail = printed.partition("(")
    return head, bracket + tail


def _mark_symbols(text: str) -> list[Run]:
    runs: list[Run] = []
    for index, part in enumerate(text.split("from x")):
        if index == 0:
            runs.append((part, "plain"))
        else:
            runs += [("x", "symbol"), (part[0], "sub"), (part[1:], "plain")]
        if index < text.count("from x"):
            runs[-1] = (runs[-1][0] + "from ", "plain")
    return runs


def _describe_nearest(principal: Principal, vector: FloatArray) -> list[Run]:
    """The nearest principal axis, with the truth about those that are not determined."""
    arbitrary = principal.arbitrary
    if all(arbitrary):
        return [("The three principal values cannot be told apart: every direction is a principal axis", "plain")]
    cosines = principal.axes @ vector
    across = np.linalg.norm(principal.axes - cosines[:, None] * vector, axis=1)
    angles: list[float] = np.rad2deg(np.arctan2(across, np.abs(cosines))).tolist()
    alone = [index for index in range(3) if not arbitrary[index]]
    nearest = min(alone, key=lambda index: angles[index])
    if len(alone) == 1 and 90.0 - angles[nearest] < angles[nearest]:
        away = 90.0 - angles[nearest]
        where = "In" if away < ON else f"{print_angle(away)} from"
        first, second = (str(index + 1) for index in range(3) if index != nearest)
        return [
            (f"{where} the plane of equal values ", "plain"),
            ("p", "symbol"), (first, "sub"), (" = ", "plain"), ("p", "symbol"), (second, "sub"),
            (", where any direction is a principal axis", "plain"),
        ]  # fmt: skip
    symbol: list[Run] = [("p", "symbol"), (str(nearest + 1), "sub")]
    if angles[nearest] < ON:
        return [("On principal axis ", "plain"), *symbol]
    return [("Nearest principal axis ", "plain"), *symbol, (f", {print_angle(angles[nearest])} away", "plain")]
