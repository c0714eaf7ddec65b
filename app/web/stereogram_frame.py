"""How the stereogram of the front page lies: what is in the middle, which way is up, and what a hand in it means.

The disc is either held with the crystal or with the specimen. A drag carries the direction under the hand along the
great circle to where the hand goes: where the crystal is held the specimen's axes follow, else the crystal does.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Final, Literal

import numpy as np
import numpy.typing as npt
from pydantic import Field

from app.crystal.crystal import Crystal
from app.crystal.direction import read_direction, typeset_indices
from app.errors import located
from app.tensor.pose import AXIS_LETTERS
from app.web.changes import Typed
from app.web.parts import Number, Part
from app.web.stereogram import DEFAULT_SCREEN, Projection, unproject

FloatArray = npt.NDArray[np.float64]
Place = Annotated[list[Number], Field(min_length=2, max_length=2)]

CRYSTAL_CENTRE: Final = "x3"
CLOSE: Final = 1e-3
"""Sine of the angle below which a direction counts as along x3, which then cannot say where up is."""


class FramePart(Part):
    """How the disc lies and by which projection."""

    projection: Projection = Field("angle", description="equal-angle (r = tan θ/2) or equal-area (r = √2 sin θ/2)")
    centre: Typed = Field(
        CRYSTAL_CENTRE,
        description="what points at the reader: x3; z, x or y of the specimen; or a direction (h k l), [u v w]",
    )


class DiscTurn(FramePart):
    """A drag in the disc since the press: places right and up, the rim at 1."""

    start: Place
    end: Place
    far: bool = Field(False, description="whether the hand is on the far hemisphere, seen through from the near side")


@dataclass(frozen=True)
class Frame:
    """How the disc lies.

    Attributes:
        screen: shape (3, 3), right, up and toward the reader as rows, in the crystal frame.
        held: what stays still while the other turns.
        middle: printed name of what is in the middle.
        up, right: printed names of what is up and to the right.
    """

    screen: FloatArray
    held: Literal["crystal", "specimen"]
    middle: str
    up: str
    right: str


def find_frame(crystal: Crystal, pose: FloatArray, centre: str) -> Frame:
    """How the disc lies with something in its middle.

    Args:
        crystal: frame and indices.
        pose: C, shape (3, 3).
        centre: "x3", a letter of the specimen, or a direction as typed.

    Raises:
        InputError: at ``centre``, a direction that cannot be read.
    """
    text = centre.strip() or CRYSTAL_CENTRE
    if text in ("x3", "x₃"):
        return Frame(DEFAULT_SCREEN, "crystal", "x3", "−x1", "x2")
    if text in AXIS_LETTERS:
        toward = AXIS_LETTERS.index(text)
        right, up = (toward + 1) % 3, (toward + 2) % 3
        return Frame(pose[[right, up, toward]], "specimen", text, AXIS_LETTERS[up], AXIS_LETTERS[right])
    with located("centre"):
        vector = crystal.resolve(read_direction(text))
    flat = np.array([0.0, 0.0, 1.0]) - vector[2] * vector
    name = typeset_indices(text)
    if np.linalg.norm(flat) < CLOSE:
        first = np.array([-1.0, 0.0, 0.0]) + vector[0] * vector
        first /= np.linalg.norm(first)
        return Frame(np.array([np.cross(first, vector), first, vector]), "crystal", name, "−x1", "what is across both")
    flat /= np.linalg.norm(flat)
    return Frame(np.array([np.cross(flat, vector), flat, vector]), "crystal", name, "x3", "what is across both")


def find_place(frame: Frame, projection: Projection, place: list[float], far: bool) -> FloatArray:
    """The direction, unit vector (3,) in the crystal frame, at a place of the disc."""
    # So large a number would run over when it is squared, and is beyond the rim all the same.
    shown = unproject(np.clip(np.array(place, dtype=np.float64), -1e6, 1e6), projection)
    if far:
        shown = shown * np.array([1.0, 1.0, -1.0])
    direction: FloatArray = frame.screen.T @ shown
    return direction


def turn_on_disc(crystal: Crystal, pose: FloatArray, turn: DiscTurn) -> FloatArray:
    """The pose, shape (3, 3), after a drag in the disc; ``pose`` is the one at the press."""
    frame = find_frame(crystal, pose, turn.centre)
    start, end = (find_place(frame, turn.projection, place, turn.far) for place in (turn.start, turn.end))
    rotation = carry(start, end)
    # Crystal held: every specimen axis a goes to R a. Specimen held: the crystal turns by R, the specimen in it by Rᵀ.
    turned: FloatArray = pose @ (rotation.T if frame.held == "crystal" else rotation)
    return turned


def carry(start: FloatArray, end: FloatArray) -> FloatArray:
    """The shortest rotation, shape (3, 3), that carries one unit vector to another.

    Rodrigues' formula; of opposite vectors, which have no shortest one, a half-turn about a direction across them.
    """
    cosine = float(start @ end)
    if cosine < -1.0 + 1e-12:
        across = np.cross(start, np.eye(3)[int(np.argmin(np.abs(start)))])
        across /= np.linalg.norm(across)
        half: FloatArray = 2.0 * np.outer(across, across) - np.eye(3)
        return half
    x, y, z = np.cross(start, end)
    skew = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    rotation: FloatArray = np.eye(3) + skew + skew @ skew / (1.0 + cosine)
    return rotation
