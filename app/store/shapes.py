"""Shapes that kept documents are made of: numbers, names, directions, poses, and the base of every record."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from typing import Annotated, Any, NoReturn

from pydantic import (
    AfterValidator,
    BaseModel,
    ConfigDict,
    Field,
    SerializerFunctionWrapHandler,
    WithJsonSchema,
    model_serializer,
)
from pydantic_core import ErrorDetails, PydanticCustomError

from app.errors import InputError, join_field
from app.store.canonical import FrozenDict, freeze, plain

_ROOM_ABOVE = 8
"""Levels that the records themselves take, so that a free-form value inside one never makes a document too deep."""

_A_DIRECTION = (
    'A direction is text such as [1 0 -1] or (1 0 0), three numbers, {"xyz": three numbers} or '
    '{"specimen": three numbers}.'
)
_A_POSE = (
    "A pose is one of {matrix}, {exact, toward}, {axis, angle}, {quaternion}, {bunge} or {from, tilt, toward} "
    "with or without x."
)


def fail(message: str, at: str = "") -> NoReturn:
    """Refuse a value inside a validator; ``at`` is the field below the one that is being checked."""
    raise PydanticCustomError("refused", "{sentence}", {"sentence": message, "at": at})


def _kept_value(value: Any) -> Any:
    try:
        return freeze(value, depth=_ROOM_ABOVE)
    except InputError as error:
        fail(error.message)


def _numbers(value: Any, count: int) -> bool:
    return (
        isinstance(value, list | tuple)
        and len(value) == count
        and all(isinstance(item, int | float) and not isinstance(item, bool) for item in value)
    )


def _is_direction(value: Any) -> bool:
    if isinstance(value, str):
        return bool(value.strip())
    if isinstance(value, Mapping):
        return [name in value for name in ("xyz", "specimen")].count(True) == 1 and _numbers(
            value.get("xyz", value.get("specimen")), 3
        )
    return _numbers(value, 3)


def _is_axis_and_direction(value: Any) -> bool:
    if not isinstance(value, list | tuple) or len(value) != 2:
        return False
    return value[0] in ("x", "y", "z") and _is_direction(value[1])


def _is_angle(value: Any) -> bool:
    return _numbers([value], 1)


def _is_matrix(value: Any) -> bool:
    return isinstance(value, list | tuple) and len(value) == 3 and all(_numbers(row, 3) for row in value)


_POSES: dict[str, dict[str, Callable[[Any], bool]]] = {
    "matrix": {"matrix": _is_matrix},
    "exact": {"exact": _is_axis_and_direction, "toward": _is_axis_and_direction},
    "axis": {"axis": _is_direction, "angle": _is_angle},
    "quaternion": {"quaternion": lambda value: _numbers(value, 4)},
    "bunge": {"bunge": lambda value: _numbers(value, 3)},
    "from": {"from": _is_direction, "tilt": _is_angle, "toward": _is_direction},
}
"""By the field that tells one form of a pose from the others, the fields that the form needs."""


def _check_direction(value: Any) -> Any:
    if not _is_direction(value):
        fail(_A_DIRECTION)
    return _kept_value(value)


def _check_pose(value: Any) -> Any:
    if not isinstance(value, Mapping):
        fail(_A_POSE)
    forms = [name for name in _POSES if name in value]
    if len(forms) != 1:
        fail(_A_POSE)
    for name, fits in _POSES[forms[0]].items():
        if name not in value or not fits(value[name]):
            fail(_A_POSE, name)
    if forms == ["exact"] and value["exact"][0] == value["toward"][0]:
        fail("Two different axes of the specimen are needed.", "toward")
    if forms == ["from"] and value.get("x") is not None and not _is_direction(value["x"]):
        fail(_A_DIRECTION, "x")
    return _kept_value(value)


def _check_object(value: Any) -> Any:
    if not isinstance(value, Mapping):
        fail("An object with named values is needed here.")
    return _kept_value(value)


def _check_free(value: dict[str, float]) -> FrozenDict:
    for label in value:
        if not re.fullmatch("[1-3][1-3]", label):
            fail("A cell is named by its row and column, like 11 or 13.", label)
    return FrozenDict(value)


_THREE_SCHEMA: dict[str, Any] = {"type": "array", "items": {"type": "number"}, "minItems": 3, "maxItems": 3}
_DIRECTION_SCHEMA: dict[str, Any] = {
    "description": _A_DIRECTION,
    "anyOf": [
        {"type": "string", "pattern": r"\S"},
        _THREE_SCHEMA,
        {"type": "object", "properties": {"xyz": _THREE_SCHEMA}, "required": ["xyz"]},
        {"type": "object", "properties": {"specimen": _THREE_SCHEMA}, "required": ["specimen"]},
    ],
}
_POSE_SCHEMA: dict[str, Any] = {
    "description": _A_POSE,
    "type": "object",
    "oneOf": [{"required": [name]} for name in _POSES],
}

Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[Number, Field(gt=0)]
Text = Annotated[str, Field(strict=True), AfterValidator(_kept_value)]
Name = Annotated[str, Field(strict=True, min_length=1, max_length=500, pattern=r"\S"), AfterValidator(_kept_value)]
Three = tuple[Number, Number, Number]
Six = tuple[Number, Number, Number, Number, Number, Number]
Matrix = tuple[tuple[Number, ...], ...]
NumberMap = Annotated[dict[Name, Number], AfterValidator(FrozenDict)]
Free = Annotated[dict[str, Number], AfterValidator(_check_free)]
Direction = Annotated[Any, AfterValidator(_check_direction), WithJsonSchema(_DIRECTION_SCHEMA)]
Pose = Annotated[Any, AfterValidator(_check_pose), WithJsonSchema(_POSE_SCHEMA)]
Json = Annotated[Any, AfterValidator(_kept_value)]
JsonObject = Annotated[Any, AfterValidator(_check_object), WithJsonSchema({"type": "object"})]

IDENTITY = freeze({"matrix": [[1, 0, 0], [0, 1, 0], [0, 0, 1]]})
"""The pose in which the specimen frame is the crystal frame."""


class Record(BaseModel):
    """Base of the parts of a document: frozen, deep down; unknown fields are kept as they are."""

    model_config = ConfigDict(frozen=True, extra="allow")
    __pydantic_extra__: dict[str, Json] = Field(init=False)

    @model_serializer(mode="wrap")
    def _leave_out_absent(self, handler: SerializerFunctionWrapHandler) -> dict[str, Any]:
        data: dict[str, Any] = handler(self)
        optional = [name for name, field in type(self).model_fields.items() if field.default is None]
        return {name: value for name, value in data.items() if value is not None or name not in optional}

    def plain(self) -> dict[str, Any]:
        """Return the record as plain JSON-like data, new at each call, optional fields without a value left out."""
        data: dict[str, Any] = plain(self.model_dump(mode="json"))
        return data


_SENTENCES = {
    "missing": "This is missing.",
    "extra_forbidden": "This field is not known.",
    "float_type": "A number is needed here.",
    "finite_number": "The number here must be finite.",
    "int_type": "A whole number is needed here.",
    "bool_type": "True or false is needed here.",
    "less_than_equal": "The number here must be at most {le:g}.",
    "greater_than": "The number here must be more than {gt:g}.",
    "greater_than_equal": "The number here must be at least {ge:g}.",
    "string_type": "Text is needed here.",
    "string_unicode": "The text here is not valid Unicode.",
    "string_too_short": "This must not be empty.",
    "string_too_long": "This is longer than {max_length} characters.",
    "string_pattern_mismatch": "This must not be empty.",
    "tuple_type": "A list is needed here.",
    "too_long": "This list has more than {max_length} entries.",
    "too_short": "This list has fewer than {min_length} entries.",
    "dict_type": "An object with named values is needed here.",
    "model_type": "An object with named values is needed here.",
    "model_attributes_type": "An object with named values is needed here.",
    "literal_error": "One of {expected} is needed here.",
}


def sentence_of(fault: ErrorDetails) -> str:
    """Return a plain sentence for one fault that the model found."""
    context: dict[str, Any] = dict(fault.get("ctx") or {})
    if fault["type"] in _SENTENCES:
        return _SENTENCES[fault["type"]].format(**context)
    return fault["msg"] if fault["msg"].endswith(".") else f"{fault['msg']}."


def path_of(fault: ErrorDetails) -> str:
    """Return where one fault is, as a path like ``properties[0].tensor.free.13``."""
    path = ""
    for step in fault["loc"]:
        if step != "[key]":
            path = join_field(path, f"[{step}]" if isinstance(step, int) else str(step))
    return join_field(path, str((fault.get("ctx") or {}).get("at", "")))
