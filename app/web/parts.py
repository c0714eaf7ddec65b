"""The small shapes of which requests are made: numbers, directions and poses, and the base of every object.

A direction or a pose may be written in several ways. Each is told by its keys, not tried one after the other, so that
an error speaks of the way that was meant and names the very number that is wrong.
"""

from __future__ import annotations

import math
from functools import cache
from typing import Annotated, Any, Literal

from pydantic import (
    AllowInfNan,
    BaseModel,
    ConfigDict,
    Field,
    PlainValidator,
    Strict,
    StringConstraints,
    TypeAdapter,
    ValidationError,
    model_validator,
)
from pydantic_core import InitErrorDetails, PydanticCustomError

MAX_DIRECTIONS = 200_000

Number = Annotated[float, Strict(), AllowInfNan(False)]
Text = Annotated[str, StringConstraints(min_length=1, max_length=200)]
ThreeNumbers = Annotated[list[Number], Field(min_length=3, max_length=3)]
FourNumbers = Annotated[list[Number], Field(min_length=4, max_length=4)]
SixNumbers = Annotated[list[Number], Field(min_length=6, max_length=6)]
ThreeByThree = Annotated[list[ThreeNumbers], Field(min_length=3, max_length=3)]


def _placed(error: PydanticCustomError | ValidationError, value: Any, *place: int | str) -> ValidationError:
    """The same problems at a place below the value that is being read."""
    if isinstance(error, PydanticCustomError):
        details = [InitErrorDetails(type=error, loc=place, input=value)]
    else:
        details = [
            InitErrorDetails(
                type=PydanticCustomError(entry["type"], "{message}", {**entry.get("ctx", {}), "message": entry["msg"]}),
                loc=(*place, *entry["loc"]),
                input=entry["input"],
            )
            for entry in error.errors(include_url=False)
        ]
    return ValidationError.from_exception_data("request", details)


class Part(BaseModel):
    """An object of a request."""

    model_config = ConfigDict(extra="forbid", strict=True, frozen=True, validate_by_name=False)

    @model_validator(mode="before")
    @classmethod
    def _refuse_unknown_keys(cls, value: Any) -> Any:
        if isinstance(value, dict):
            for key in value:
                if key not in cls.known_keys():
                    hint = f"Known here: {', '.join(cls.known_keys())}."
                    error = PydanticCustomError("unknown_key", "is not a known key here.", {"hint": hint})
                    raise _placed(error, value[key], str(key))
        return value

    @classmethod
    @cache
    def known_keys(cls) -> tuple[str, ...]:
        """The names of the members, as they are written in a request."""
        return tuple(field.alias or name for name, field in cls.model_fields.items())


# Directions -----------------------------------------------------------------------------------------------------------


class CrystalVector(Part):
    """A vector in the crystal frame; its length does not matter."""

    xyz: ThreeNumbers


class SpecimenVector(Part):
    """A vector in the specimen frame of the object's own pose if it has one, else of the call's."""

    specimen: ThreeNumbers


_three_numbers: TypeAdapter[list[float]] = TypeAdapter(ThreeNumbers)


def read_direction(value: Any) -> str | list[float] | SpecimenVector:
    """Check the shape of a direction.

    Returns:
        text in index notation as it came, three numbers in the crystal frame, or a specimen vector.
    """
    if isinstance(value, list):
        # The common case of a long list of vectors, without a call into the model for each.
        if len(value) == 3 and all(type(part) in (float, int) and math.isfinite(part) for part in value):
            return value
        return _three_numbers.validate_python(value)
    if isinstance(value, str):
        if 0 < len(value) <= 200:
            return value
        raise PydanticCustomError("direction", "must be text of 1 to 200 characters, such as [1 0 -1].")
    if isinstance(value, dict) and value.keys() == {"xyz"}:
        return CrystalVector.model_validate(value).xyz
    if isinstance(value, dict) and value.keys() == {"specimen"}:
        return SpecimenVector.model_validate(value)
    if isinstance(value, SpecimenVector):
        return value
    raise PydanticCustomError(
        "direction",
        "is not a direction.",
        {
            "hint": 'Give a row "[1 0 -1]", a plane normal "(1 0 -1)", three numbers [x, y, z] or {"xyz": [x, y, z]} '
            'in the crystal frame, or {"specimen": [x, y, z]}.'
        },
    )


Direction = Annotated[
    str | list[float] | SpecimenVector,
    PlainValidator(read_direction, json_schema_input_type=Text | ThreeNumbers | CrystalVector | SpecimenVector),
]


def read_directions(value: Any) -> list[str | list[float] | SpecimenVector]:
    """Check a list of directions, as ``read_direction`` does for one, naming the place of the first that is wrong."""
    if not isinstance(value, list):
        raise PydanticCustomError("list_type", "must be a list of directions.")
    if len(value) > MAX_DIRECTIONS:
        raise PydanticCustomError("too_long", "", {"max_length": MAX_DIRECTIONS, "actual_length": len(value)})
    read = []
    for index, item in enumerate(value):
        try:
            read.append(read_direction(item))
        except (PydanticCustomError, ValidationError) as error:
            raise _placed(error, item, index) from None
    return read


Directions = Annotated[
    list[str | list[float] | SpecimenVector],
    PlainValidator(
        read_directions,
        json_schema_input_type=Annotated[
            list[Text | ThreeNumbers | CrystalVector | SpecimenVector], Field(max_length=MAX_DIRECTIONS)
        ],
    ),
]


# Poses ----------------------------------------------------------------------------------------------------------------

SpecimenAxis = Literal["x", "y", "z"]


def _read_axis_and_direction(value: Any) -> tuple[str, str | list[float] | SpecimenVector]:
    if not isinstance(value, list) or len(value) != 2 or value[0] not in ("x", "y", "z"):
        raise PydanticCustomError(
            "axis_and_direction",
            "must be a specimen axis and a direction.",
            {"hint": 'Write ["z", "[1 0 -1]"]: the axis is "x", "y" or "z".'},
        )
    try:
        return value[0], read_direction(value[1])
    except (PydanticCustomError, ValidationError) as error:
        raise _placed(error, value[1], 1) from None


AxisAndDirection = Annotated[
    tuple[str, str | list[float] | SpecimenVector],
    PlainValidator(
        _read_axis_and_direction,
        json_schema_input_type=tuple[SpecimenAxis, Text | ThreeNumbers | CrystalVector | SpecimenVector],
    ),
]


class MatrixPose(Part):
    """The specimen axes, written in the crystal frame, as rows."""

    matrix: ThreeByThree


class ExactPose(Part):
    """One specimen axis exactly along a direction, a second as near to another as it can be."""

    exact: AxisAndDirection
    toward: AxisAndDirection


class AxisAnglePose(Part):
    """The crystal frame's axes turned about a direction by an angle in degrees; the turned axes are x y z."""

    axis: Direction
    angle: Number


class QuaternionPose(Part):
    """The same kind of turn as a quaternion, the scalar part first."""

    quaternion: FourNumbers


class BungePose(Part):
    """Bunge's three angles in degrees."""

    bunge: ThreeNumbers


class TiltPose(Part):
    """z is a direction tilted by degrees toward another; x as near as can be to a third, else to the second."""

    from_: Direction = Field(alias="from")
    tilt: Number
    toward: Direction
    x: Direction | None = None


AnyPose = MatrixPose | ExactPose | AxisAnglePose | QuaternionPose | BungePose | TiltPose

_POSE_SHAPES: tuple[tuple[type[AnyPose], frozenset[str], frozenset[str]], ...] = (
    (MatrixPose, frozenset({"matrix"}), frozenset()),
    (ExactPose, frozenset({"exact", "toward"}), frozenset()),
    (AxisAnglePose, frozenset({"axis", "angle"}), frozenset()),
    (QuaternionPose, frozenset({"quaternion"}), frozenset()),
    (BungePose, frozenset({"bunge"}), frozenset()),
    (TiltPose, frozenset({"from", "tilt", "toward"}), frozenset({"x"})),
)
_POSE_HINT = (
    'Give exactly one of {"matrix"}, {"exact", "toward"}, {"axis", "angle"}, {"quaternion"}, {"bunge"}, '
    '{"from", "tilt", "toward"} (there with or without "x").'
)


def read_pose(value: Any) -> AnyPose:
    """Read a pose in the one of its six shapes that its keys name; a mixture of two is refused."""
    if isinstance(value, Part):
        return value  # type: ignore[return-value]
    if not isinstance(value, dict):
        raise PydanticCustomError("pose", "is not a pose.", {"hint": _POSE_HINT})
    for model, needed, optional in _POSE_SHAPES:
        if needed <= value.keys() <= needed | optional:
            return model.model_validate(value)
    raise PydanticCustomError("pose", "is not one of the six shapes of a pose.", {"hint": _POSE_HINT})


Pose = Annotated[AnyPose, PlainValidator(read_pose, json_schema_input_type=AnyPose)]
