"""A small drawing of the frame rule: the cell seen along the axis that lies on a plane normal."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal

FloatArray = npt.NDArray[np.float64]

_WIDTH, _HEIGHT, _REACH = 212.0, 132.0, 44.0


def draw_frame(crystal: Crystal) -> str | None:
    """An SVG picture, or None for a crystal without a cell.

    The axis on the normal comes toward the reader and the axis on the row points up, so edges at right angles to the
    normal show in true shape.
    """
    if crystal.M is None or crystal.frame is None:
        return None
    toward, up = crystal.frame.normal_axis, crystal.frame.row_axis
    third = 3 - toward - up
    # right × up = toward
    right = np.cross(np.eye(3)[up], np.eye(3)[toward])
    plane = np.array([right, np.eye(3)[up]])
    edges = plane @ crystal.M
    longest = float(np.max(np.linalg.norm(edges, axis=0)))
    edges = edges / longest * _REACH
    flat = [
        letter for letter in range(3) if abs(crystal.M[toward, letter]) < 1e-9 * np.linalg.norm(crystal.M[:, letter])
    ]
    centre = np.array([_WIDTH / 2.0 - 8.0, _HEIGHT / 2.0 + 4.0])

    def place(vector: FloatArray) -> str:
        return f"{centre[0] + vector[0]:.1f} {centre[1] - vector[1]:.1f}"

    parts: list[str] = []
    if len(flat) == 2:
        first, second = (edges[:, letter] for letter in flat)
        parts.append(
            f'<path class="frame-cell" d="M{place(0 * first)}L{place(first)}'
            f'L{place(first + second)}L{place(second)}Z"/>'
        )
    named = "abc"
    for letter in range(3):
        vector = edges[:, letter]
        length = float(np.linalg.norm(vector))
        if length < 6.0:
            continue
        if letter not in flat:
            parts.append(f'<path class="frame-cell" d="M{place(0 * vector)}L{place(vector)}"/>')
        side = np.array([vector[1], -vector[0]]) / length
        if side[0] < 0:
            side = -side
        label = vector * (1.0 if letter not in flat else 0.86) + side * 11.0
        parts.append(_text(centre, label, f'<tspan class="sy">{named[letter]}</tspan>'))
    parts += _draw_axes(centre, right, up, third, toward)
    words = f"The cell seen along x{toward + 1}, which comes toward you; x{up + 1} points up"
    frame = f'<svg class="frame" viewBox="0 0 {_WIDTH:g} {_HEIGHT:g}" role="img" aria-label="{words}">'
    return f"{frame}{''.join(parts)}</svg>"


def _text(centre: FloatArray, at: FloatArray, body: str) -> str:
    return f'<text x="{centre[0] + at[0]:.1f}" y="{centre[1] - at[1] + 5:.1f}" text-anchor="middle">{body}</text>'


def _axis_name(number: int) -> str:
    return f'<tspan class="sy">x</tspan><tspan class="sb" dy="3">{number + 1}</tspan>'


def _draw_axes(centre: FloatArray, right: FloatArray, up: int, third: int, toward: int) -> list[str]:
    parts: list[str] = []
    sense = float(right[third])
    for number, tip in ((up, np.array([0.0, 54.0])), (third, np.array([sense * 74.0, 0.0]))):
        direction = tip / np.linalg.norm(tip)
        across = np.array([-direction[1], direction[0]])
        corners = [tip, tip - 10 * direction + 3.6 * across, tip - 7.8 * direction, tip - 10 * direction - 3.6 * across]
        points = "L".join(f"{centre[0] + p[0]:.1f} {centre[1] - p[1]:.1f}" for p in corners)
        end = centre + np.array([tip[0], -tip[1]]) * 0.9
        parts.append(f'<path class="frame-axis" d="M{centre[0]:.1f} {centre[1]:.1f}L{end[0]:.1f} {end[1]:.1f}"/>')
        parts.append(f'<path class="frame-head" d="M{points}Z"/>')
        shift = np.array([-13.0, -3.0]) if number == up else np.array([sense * 13.0, 0.0])
        parts.append(_text(centre, tip + shift, _axis_name(number)))
    parts.append(f'<circle class="frame-ring" cx="{centre[0]:.1f}" cy="{centre[1]:.1f}" r="5"/>')
    parts.append(f'<circle class="frame-head" cx="{centre[0]:.1f}" cy="{centre[1]:.1f}" r="1.8"/>')
    parts.append(_text(centre, np.array([-sense * 15.0, -16.0]), _axis_name(toward)))
    return parts
