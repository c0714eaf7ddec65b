"""The curve in which a cone Σ l_i n_i² = 0 with three principal axes meets the unit sphere: a spherical conic."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.special import ellipj, ellipkm1

from app.tensor.quadric import sign_values
from app.tensor.sheet_mesh import order_axes

FloatArray = npt.NDArray[np.float64]

_QUARTER_POINTS: Final = 65


@dataclass(frozen=True)
class Conic:
    """A closed curve of unit vectors, an ellipse seen along its axis.

    (w_x cos t, w_y sin t, √(1 − …)) in its own axes, with w_y ≥ w_x; a great circle where both are 1.

    Attributes:
        axes: shape (3, 3), as rows, the cone's axis last.
        widths: w_x, w_y.
        rests: 1 − w_x², 1 − w_y², which subtraction would not give to the last digit.
        angles: shape (k,), t from 0 to a whole turn.
        weights: shape (k,), ∫√κ ds up to those angles: the chord error of a polyline goes as κ ds².
    """

    axes: FloatArray
    widths: FloatArray
    rests: FloatArray
    angles: FloatArray
    weights: FloatArray

    def thin(self, count: int) -> FloatArray:
        """Points (count, 3) whose chords all err about as much; the last one is the first."""
        places = np.linspace(0.0, self.weights[-1], count)
        points = _find_points(self.widths, self.rests, np.interp(places, self.weights, self.angles)) @ self.axes
        points[-1] = points[0]
        return points


def find_conics(values: FloatArray, axes: FloatArray) -> list[Conic]:
    """The closed curves of unit vectors where Σ values_i n_i² = 0.

    Args:
        values: shape (3,); one that is negligible beside the largest counts as zero.
        axes: shape (3, 3), orthonormal, as rows.

    Returns:
        The two curves of a cone, two great circles or one; none where it is two points, nothing or everything.
    """
    signs = sign_values(values)
    if np.sum(signs) < 0:
        values, signs = -values, -signs
    values = np.where(signs == 0, 0.0, values)
    positive, zero = int(np.sum(signs > 0)), int(np.sum(signs == 0))
    if zero == 2:
        return _measure_conics([axes[order_axes(int(np.argmax(values)))]], np.ones(2), np.zeros(2))
    if positive == 1 and zero == 1:
        first, null, last = int(np.argmax(values)), int(np.flatnonzero(signs == 0)[0]), int(np.argmin(values))
        along = np.sqrt(np.array([-values[last], values[first]]) / (values[first] - values[last]))
        frames = []
        for side in (1.0, -1.0):
            inside = along[0] * axes[first] + side * along[1] * axes[last]
            frames.append(np.array([axes[null], inside, np.cross(axes[null], inside)]))
        return _measure_conics(frames, np.ones(2), np.zeros(2))
    if positive != 2 or zero != 0:
        return []
    # The odd value's axis is the cone's; with w² = own/(own + other) the widest is that of the smallest other.
    odd = int(np.argmin(values))
    order = order_axes(odd)
    if values[order[0]] < values[order[1]]:
        order = [order[1], order[0], odd]
    own, others = -values[odd], values[order[:2]]
    widths, rests = np.sqrt(own / (own + others)), others / (own + others)
    up, down = axes[order], axes[order].copy()
    down[2] = -down[2]
    return _measure_conics([up, down], widths, rests)


def _find_points(widths: FloatArray, rests: FloatArray, angles: FloatArray) -> FloatArray:
    cosines, sines = np.cos(angles), np.sin(angles)
    height = np.sqrt(rests[0] * np.square(cosines) + rests[1] * np.square(sines))
    return np.stack([widths[0] * cosines, widths[1] * sines, height], axis=-1)


def _measure_conics(frames: list[FloatArray], widths: FloatArray, rests: FloatArray) -> list[Conic]:
    """Congruent conics in several frames, measured once."""
    # Equal steps of the elliptic integral crowd where two branches nearly meet; one quarter serves by symmetry.
    ratio = 1.0 if rests[0] == 0.0 else float(rests[1] / rests[0])
    steps = np.linspace(0.0, float(ellipkm1(ratio)), _QUARTER_POINTS)
    quarter = ellipj(steps, 1.0 - ratio)[3]
    quarter[-1] = np.pi / 2.0
    half = np.concatenate([quarter, np.pi - quarter[-2::-1]])
    angles = np.maximum.accumulate(np.concatenate([half, np.pi + half[1:]]))
    chords = np.diff(_find_points(widths, rests, angles), axis=0)
    lengths = np.linalg.norm(chords, axis=1)
    unit = chords / np.where(lengths > 0.0, lengths, 1.0)[:, None]
    following = np.roll(unit, -1, axis=0)
    turns = np.arctan2(np.linalg.norm(np.cross(unit, following), axis=1), np.sum(unit * following, axis=1))
    steps = np.sqrt(lengths * (turns + np.roll(turns, 1)) / 2.0)
    weights = np.concatenate([[0.0], np.cumsum(steps)])
    return [Conic(frame, widths, rests, angles, weights) for frame in frames]
