"""How far a plate between two waves may be tilted: in its cutting, and in the beam.

Cut: the faces are cut off their plane and the light still meets them squarely, so the wave normal moves in the crystal
and the retardation is thickness · birefringence there. Beam: the plate is as planned and turned in a beam in air; both
waves keep the beam's component q = sin(tilt) along the face (Snell's law), so the retardation is
thickness · (κ_slow − κ_fast), κ the component of each wave vector along the plate's normal, in units of 2π/λ, with
κ² + q² = n². To first order n changes by n³ (nᵀB d) d·δ as the normal n turns by δ.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt

from app.consequences.indicatrix import Indicatrix, find_waves

FloatArray = npt.NDArray[np.float64]
Change = Callable[[FloatArray, FloatArray], FloatArray]
TiltKind = Literal["cut", "beam"]

RIGHT: Final = 90.0
_GRAZING: Final = 89.999
_AZIMUTHS: Final = 48
_SLICE: Final = 20
_CUTS: Final = 20
_ROUNDS: Final = 4
_NEWTON_STEPS: Final = 15


@dataclass(frozen=True)
class TiltTolerance:
    """What a tilt does to the optical path between the two waves.

    Attributes:
        kind: "cut" or "beam".
        slope: largest first-order change of slow path less fast path per degree of tilt, in units of the thickness; 0
            where the first order vanishes.
        toward: shape (3,), unit vector across the normal toward which the tilt raises it most; None where the first
            order vanishes or is the same toward every side.
        largest: the tilt in degrees that in no direction changes it by more than the tolerance, 90 where no tilt does;
            None where no tolerance is known.
    """

    kind: TiltKind
    slope: float
    toward: FloatArray | None
    largest: float | None


def find_tilt_tolerance(
    indicatrix: Indicatrix, normal: FloatArray, kind: TiltKind, tolerance: float | None = None
) -> TiltTolerance:
    """What a tilt of a plate with this unit normal (3,) does.

    Args:
        indicatrix: of the crystal.
        normal: of the plate, in the crystal frame; the light goes along it where nothing is tilted.
        kind: "cut" or "beam".
        tolerance: allowed change of slow path less fast path, in units of the thickness.
    """
    slope, toward = _find_slope(indicatrix, normal, kind)
    largest = None
    if tolerance is not None:
        change = _change_of_cut(indicatrix, normal) if kind == "cut" else _change_of_beam(indicatrix, normal)
        largest = _find_largest(change, tolerance, RIGHT if kind == "cut" else _GRAZING)
    return TiltTolerance(kind, slope, toward, largest)


def _find_slope(indicatrix: Indicatrix, normal: FloatArray, kind: TiltKind) -> tuple[float, FloatArray | None]:
    waves = find_waves(indicatrix, normal)
    # A tilt δ of the beam outside turns the wave normal by δ/n inside.
    power = 3 if kind == "cut" else 2
    factors = waves.indices**power
    per_degree = np.pi / 180.0
    if waves.conical:
        crossed = np.linalg.norm(np.cross(indicatrix.optic_axes, normal), axis=1)
        return float(factors[0] / 2.0 * indicatrix.spread * np.max(crossed) * per_degree), None
    gradient = (factors * waves.tilts * np.array([1.0, -1.0])) @ waves.vibrations
    size = float(np.linalg.norm(gradient))
    if size <= 1e-13 * float(np.max(factors)) * indicatrix.spread or size == 0.0:
        return 0.0, None
    return size * per_degree, gradient / size


def _span(normal: FloatArray) -> FloatArray:
    """Two unit vectors (2, 3) across the normal, with it a right-handed set."""
    start = np.eye(3)[int(np.argmin(np.abs(normal)))]
    first = np.cross(start, normal)
    first = first / np.linalg.norm(first)
    return np.array([first, np.cross(normal, first)])


def _change_of_cut(indicatrix: Indicatrix, normal: FloatArray) -> Change:
    plane = _span(normal)
    nominal = float(find_waves(indicatrix, normal).birefringence)

    def change(tilts: FloatArray, azimuths: FloatArray) -> FloatArray:
        angles = np.deg2rad(tilts)[..., None]
        toward = np.cos(azimuths)[..., None] * plane[0] + np.sin(azimuths)[..., None] * plane[1]
        return find_waves(indicatrix, np.cos(angles) * normal + np.sin(angles) * toward).birefringence - nominal

    return change


def _change_of_beam(indicatrix: Indicatrix, normal: FloatArray) -> Change:
    plane = _span(normal)
    at_rest = find_waves(indicatrix, normal)

    def change(tilts: FloatArray, azimuths: FloatArray) -> FloatArray:
        size = np.sin(np.deg2rad(tilts))
        toward = np.cos(azimuths)[..., None] * plane[0] + np.sin(azimuths)[..., None] * plane[1]
        along_face = size[..., None] * toward
        parts = [
            solve_normal_part(indicatrix, normal, along_face, wave, np.full(size.shape, at_rest.indices[wave]))
            for wave in (0, 1)
        ]
        return parts[0] - parts[1] - float(at_rest.birefringence)

    return change


def solve_normal_part(
    indicatrix: Indicatrix, normal: FloatArray, along_face: FloatArray, wave: int, start: FloatArray
) -> FloatArray:
    """Component κ along a face's normal of the wave vector whose component along the face is given.

    Args:
        indicatrix: of the crystal.
        normal: shape (3,), of the face.
        along_face: shape (..., 3), across the normal, in units of 2π/λ.
        wave: 0 for the slow one, 1 for the fast one.
        start: shape (...), an index near that of the wave.

    Returns:
        shape (...), by Newton's rule; NaN where the wave is totally reflected or no root is reached.
    """
    squared = np.sum(np.square(along_face), axis=-1)
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        part = np.sqrt(np.maximum(np.square(start) - squared, 1e-6 * np.square(start)))
        for _ in range(_NEWTON_STEPS):
            vector = along_face + part[..., None] * normal
            length = np.linalg.norm(vector, axis=-1)
            waves = find_waves(indicatrix, vector / length[..., None])
            index, vibration = waves.indices[..., wave], waves.vibrations[..., wave, :]
            misfit = np.square(length) - np.square(index)
            rise = index**4 * waves.tilts[..., wave] * (vibration @ normal) / length
            if np.all(np.abs(misfit) <= 1e-14 * np.square(index)):
                break
            slope = 2.0 * part - 2.0 * rise
            # Never past the face: a step is at most half of the way there.
            part = np.maximum(part - misfit / np.where(slope > 0.0, slope, 2.0 * part), part / 2.0)
        reached = np.abs(misfit) <= 1e-10 * np.square(index)
    return np.where(reached, part, np.nan)


def _find_largest(change: Change, tolerance: float, limit: float) -> float:
    """The smallest, over all azimuths, of the tilts at which the change first passes the tolerance."""
    grid = np.concatenate([np.geomspace(1e-7, 0.5, 41), np.linspace(0.5, limit, 120)[1:]])
    azimuths = np.linspace(0.0, 2.0 * np.pi, _AZIMUTHS, endpoint=False)
    step = 2.0 * np.pi / _AZIMUTHS
    least = np.inf
    for _ in range(_ROUNDS):
        first = _find_first(change, tolerance, grid, azimuths)
        best = int(np.argmin(first))
        least = min(least, float(first[best]))
        if not np.isfinite(least):
            return RIGHT
        azimuths = azimuths[best] + np.linspace(-step, step, 21)
        step /= 10.0
        # From now on only a little less than the least so far can be new.
        grid = least * np.concatenate([np.geomspace(0.01, 0.9, 5), np.linspace(0.92, 1.0, 5)])
    return least


def _find_first(change: Change, tolerance: float, grid: FloatArray, azimuths: FloatArray) -> FloatArray:
    """For every azimuth the tilt at which the change first passes the tolerance, where that is among the earliest.

    The tilts are gone through in slices, and the slice in which some azimuth passes is the last, for only the smallest
    tilt matters; the other azimuths have an infinite one.
    """
    for start in range(0, len(grid), _SLICE):
        tilts, around = np.meshgrid(grid[start : start + _SLICE], azimuths)
        # Where a wave has ceased to exist the comparison fails too.
        beyond = ~(np.abs(change(tilts, around)) <= tolerance)
        if np.any(beyond):
            break
    index = start + np.argmax(beyond, axis=1)
    found = np.any(beyond, axis=1)
    low, high = np.where(index > 0, grid[index - 1], 0.0), grid[index]
    rows = np.arange(len(azimuths))
    for _ in range(_CUTS):
        if np.all(high - low <= 1e-11 * high):
            break
        # Eight tilts at once: fewer and larger calls.
        steps = np.linspace(low, high, 10, axis=1)
        passed = ~(np.abs(change(steps[:, 1:9], azimuths[:, None])) <= tolerance)
        index = np.where(np.any(passed, axis=1), np.argmax(passed, axis=1), 8)
        low, high = steps[rows, index], steps[rows, index + 1]
    return np.where(found, high, np.inf)
