"""What the calls ``align`` and ``stage`` take and answer."""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator
from pydantic_core import PydanticCustomError

from app.web.parts import CrystalVector, Direction, Number, Part, Text, ThreeByThree, ThreeNumbers
from app.web.requests import Crystal
from app.web.responses import Answer, Matrix, Vector

MAX_SIGHTINGS = 100
LARGEST_ANGLE = 1e6


def _read_vector(value: Any) -> list[float]:
    """Three finite numbers, alone or as xyz."""
    if isinstance(value, dict) and set(value) == {"xyz"}:
        value = value["xyz"]
    good = isinstance(value, list) and len(value) == 3
    if not good or not all(isinstance(part, int | float) and not isinstance(part, bool) for part in value):
        raise PydanticCustomError(
            "lab_vector", "must be three numbers.", {"hint": "Give x, y, z in the laboratory, like [0, 0, 1]."}
        )
    if not all(math.isfinite(part) for part in value):
        raise PydanticCustomError("lab_vector", "must be finite numbers.", {"hint": "Give finite numbers."})
    if not any(value):
        raise PydanticCustomError(
            "lab_vector", "must not be the zero vector.", {"hint": "Its length does not matter, its direction does."}
        )
    return [float(part) for part in value]


LabVector = Annotated[
    list[float],
    PlainValidator(_read_vector, json_schema_input_type=ThreeNumbers | CrystalVector),
]
Angle = Annotated[Number, Field(ge=-LARGEST_ANGLE, le=LARGEST_ANGLE)]


class StageAxis(Part):
    """One axis of the stage."""

    name: Text = Field("", description="as it stands on the stage; optional", min_length=0)
    axis: LabVector = Field(description="its direction in the laboratory with every axis at zero")
    low: Angle = Field(-180.0, description="lower end of the dial's travel, degrees")
    high: Angle = Field(180.0, description="upper end of the dial's travel, degrees")
    zero: Angle = Field(0.0, description="dial reading at which the axis is at zero, degrees")
    sense: Literal[1, -1] = Field(
        1, description="1 where a growing reading turns right-handed about the axis, -1 where it turns the other way"
    )


Axes = Annotated[list[StageAxis], Field(min_length=1, max_length=3, description="from base to head")]


class Sighting(Part):
    """A crystal direction and where it was seen: ``seen``, or ``angles`` with ``toward``."""

    direction: Direction = Field(description="a row, a plane's normal or a vector in the crystal frame")
    seen: LabVector | None = Field(None, description="where it is in the laboratory with every stage axis at zero")
    angles: list[Angle] | None = Field(
        None, max_length=3, description="dial readings, one per axis, that brought it to ``toward``"
    )
    toward: LabVector | None = Field(None, description="where these readings brought it, laboratory frame")
    weight: Number | None = Field(None, description="above zero; default 1")


class AlignRequest(Part):
    """Directions that were brought to known places."""

    crystal: Crystal
    axes: Axes | None = Field(None, description="needed where a sighting is given by angles")
    sightings: list[Sighting] = Field(max_length=MAX_SIGHTINGS)


class AmbiguousAnswer(Answer):
    """Another assignment of equivalent directions that fits as well."""

    assignment: list[Any] = Field(description="the direction taken for each sighting")
    rms: float = Field(description="of its fit, degrees")
    equivalent: bool = Field(description="whether one proper operation of the group leads to it")


class AlignAnswer(Answer):
    """How the crystal sits on the stage."""

    matrix: Matrix = Field(description="U, proper: v_lab = U v_crystal with the stage at zero")
    residuals: list[float] = Field(description="degrees, one per sighting")
    rms: float = Field(description="weighted root mean square of the residuals, degrees")
    measured: list[float] = Field(description="angle of each pair of sightings as seen, degrees: 01, 02, 12, …")
    computed: list[float] = Field(description="the same angles from the cell")
    pairs: list[list[int]] = Field(description="which sightings each angle is between")
    hand: Literal["right", "mirror fits better", "cannot tell"]
    ambiguous: list[AmbiguousAnswer] = Field(description="other assignments that fit as well within 0.05°, best first")
    notes: list[str] = Field(description="what to keep in mind, in sentences")


class LevelPart(Part):
    """With three axes: a second direction, brought as near as can be to a second laboratory direction."""

    direction: Direction
    toward: LabVector


class StageRequest(Part):
    """A target, and where the stage shall bring it."""

    crystal: Crystal
    U: ThreeByThree = Field(description="v_lab = U v_crystal with the stage at zero; proper, orthonormal to 1e-6")
    axes: Axes
    target: Direction = Field(description="a row, a plane's normal or a vector in the crystal frame")
    toward: LabVector = Field(description="where it is wanted, laboratory frame")
    either_sense: bool = Field(False, description="whether the opposite of the target will do")
    equivalents: bool = Field(False, description="whether a direction that the point group makes equal will do")
    level: LevelPart | None = None


class SolutionAnswer(Answer):
    """Settings that bring the target to where it is wanted."""

    angles: list[float] = Field(description="dial readings, one per axis, degrees")
    direction: Any = Field(description="the equivalent that was used")
    sense: Literal[1, -1] = Field(description="-1 where its opposite was brought there")
    travel: float = Field(description="Σ |dial − zero|, degrees")
    sensitivity: list[float] = Field(description="degrees of tilt of the target per degree of each axis")
    level_off: float | None = Field(None, description="how far the level direction is from where it is wanted, degrees")


class ClosestAnswer(Answer):
    """The nearest that the stage comes."""

    angles: list[float] = Field(description="dial readings, one per axis, degrees")
    off: float = Field(description="angle that stays, degrees")
    direction: Any = Field(description="the equivalent that comes nearest")
    sense: Literal[1, -1]


class StageAnswer(Answer):
    """All solutions within travel, least travel first."""

    solutions: list[SolutionAnswer]
    closest: ClosestAnswer | None = Field(description="where no solution is within travel; else null")
    axes_in_lab: list[Vector] | None = Field(description="where the axes lie at the first solution's settings")
    notes: list[str]
