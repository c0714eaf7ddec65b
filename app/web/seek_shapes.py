"""What the calls ``seek`` and ``miscut`` take and answer."""

from __future__ import annotations

import math
from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator
from pydantic_core import PydanticCustomError

from app.web.parts import Direction, Number, Part
from app.web.requests import Crystal, StateRequest, Tensor
from app.web.responses import Answer, Vector

MAX_INDEX = 10


def read_target(value: Any) -> float | str:
    """A finite number, or one of two words."""
    if value == "max" or value == "min":
        return str(value)
    if type(value) in (int, float):
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if math.isfinite(number):
            return number
    raise PydanticCustomError(
        "target",
        'must be a finite number, "max" or "min".',
        {"hint": "A number is a value of nᵀAn in the unit of the tensor."},
    )


Target = Annotated[
    float | Literal["max", "min"],
    PlainValidator(read_target, json_schema_input_type=Number | Literal["max", "min"]),
]


class SeekCondition(Part):
    """What is wanted of one tensor of the crystal."""

    tensor: Tensor = Field(description="its symmetric part counts; two conditions may be of tensors of unlike kind")
    target: Target = Field(description="a value of nᵀAn, or its largest or smallest")


class SeekRequest(Part):
    """Directions wanted of one crystal, by one condition or by two at once."""

    crystal: Crystal
    conditions: Annotated[list[SeekCondition], Field(min_length=1, max_length=2)] = Field(
        description="two numbers: the directions of both; a number and an extreme: the extreme among the directions "
        "that meet the number; two extremes: the directions that are the extreme of both"
    )
    within: Number = Field(2.0, ge=0, le=90, description="degrees: planes and rows up to so far from the answer")
    max_index: int = Field(3, ge=1, le=MAX_INDEX, description="the largest index of these planes and rows")


class NearIndices(Answer):
    """A plane or row of low index near the answer."""

    direction: str = Field(description="(h k l) or [u v w]; of equivalents the simplest")
    off: float = Field(description="angle to the nearest direction of the answer, degrees")
    values: list[float] = Field(description="nᵀAn of every condition's tensor along it")


class IsolatedDirection(Answer):
    """One direction of the answer that stands alone, and so does its opposite."""

    vector: Vector = Field(description="unit vector (3) in the crystal frame")
    values: list[float] = Field(description="nᵀAn of every condition's tensor")
    slopes: list[float] = Field(description="largest first-order change of each value per degree of miscut")
    sigma: list[float | None] = Field(description="standard deviation of each value; null without covariance")


class ValueCone(Answer):
    """The cone on which a tensor has one value, or the two planes into which it parts."""

    axis: Vector = Field(description="unit vector (3) in the crystal frame")
    toward: list[Vector] = Field(description="two unit vectors (3), the principal axes across it")
    half_angles: list[float] = Field(description="from the axis toward these, degrees")


class SeekAnswer(Answer):
    """The directions that meet all conditions; all vectors are in the crystal frame."""

    curves: list[list[Vector]] = Field(
        description="closed curves of unit vectors (m × 3), the first point again at the end; the opposite of every "
        "curve is among them, or it is a great circle and its own opposite"
    )
    points: list[Vector] = Field(
        description="unit vectors (n × 3): all vertices of the curves, curve after curve, and the isolated directions, "
        "each followed by its opposite"
    )
    isolated: list[IsolatedDirection] = Field(description="the isolated directions, one of each pair of opposites")
    everywhere: bool = Field(description="every direction answers; there are then no curves or points")
    none: str | None = Field(description="a sentence, where no direction answers")
    sentence: str = Field(description="the answer in words")
    planes: list[NearIndices] = Field(
        description="plane normals within so many degrees of the answer, one per set of equivalents by the operations "
        "that keep every condition's value, nearest first; empty for a limiting group"
    )
    rows: list[NearIndices] = Field(description="the same of rows")
    fraction_below: float | None = Field(
        description="part of the sphere where nᵀAn is below a single numeric target; null for other conditions"
    )
    ranges: list[Vector] = Field(description="lowest and highest value of each condition's tensor over all directions")
    cone: ValueCone | None = Field(description="of a single numeric target; null where there is no cone")


class MiscutRequest(StateRequest):
    """A direction meant, and either the miscut to fear or the change of the value to allow."""

    direction: Direction = Field(description="the direction meant; one in the specimen frame by the call's pose")
    half_angle: Number | None = Field(
        None, ge=0, le=90, description="of the cap about the direction, degrees; give this or tolerance"
    )
    tolerance: Number | None = Field(
        None, ge=0, description="how far the value may be from nominal either way, in the unit of the tensor"
    )


class MiscutAnswer(Answer):
    """The value along the direction meant and its extremes over the cap."""

    nominal: float = Field(description="nᵀAn along the direction, in the unit of the tensor")
    lowest: float = Field(description="the exact smallest nᵀAn over the cap")
    highest: float = Field(description="the exact largest nᵀAn over the cap")
    slope: float = Field(description="largest first-order change of the value per degree of tilt, not negative")
    half_angle: float = Field(
        description="of the cap, degrees: as given, or the largest that keeps the whole cap within ± tolerance; 90 "
        "where all directions are"
    )
    direction: Vector = Field(description="the direction as a unit vector (3) in the crystal frame")
    lowest_at: Vector = Field(description="where the lowest is taken: unit vector (3) in the crystal frame")
    highest_at: Vector = Field(description="where the highest is taken: unit vector (3) in the crystal frame")
    steepest: Vector | None = Field(
        description="unit vector (3) across the direction toward which the value grows fastest; null where slope is 0"
    )
    sigma: float | None = Field(None, description="standard deviation of nominal, with a covariance")
