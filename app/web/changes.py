"""What an edit of a kept sample may change: shapes only, each change under its own key."""

from __future__ import annotations

from typing import Annotated, Any, Self

from pydantic import Field, StringConstraints, model_validator
from pydantic_core import PydanticCustomError

from app.tensor.kind import Intrinsic, Parity
from app.web.parts import Number, Part, Pose, Text, ThreeByThree
from app.web.requests import MAX_FREE_CELLS, MAX_KEPT_READINGS, Crystal

LongText = Annotated[str, StringConstraints(max_length=20_000)]
Typed = Annotated[str, StringConstraints(max_length=200)]


class TensorChange(Part):
    """A tensor to take in place of the one that stands, in the crystal frame."""

    matrix: ThreeByThree | None = None
    free: dict[Text, Number] | None = Field(None, max_length=MAX_FREE_CELLS)
    covariance: list[list[Number]] | None = Field(None, max_length=MAX_FREE_CELLS)
    source: LongText | None = None
    unit: Text | None = Field(
        None, description="of the values; where it is another than the property's, it is converted"
    )


class PropertyChange(Part):
    """A property to look at (id), or what is to be changed of one."""

    id: Text | None = None
    kind: Text | None = Field(None, description="a key of the catalogue")
    unit: Text | None = None
    name: Text | None = None
    symbol: Typed | None = None
    parity: Parity | None = Field(None, description="of the kind other only")
    intrinsic: Intrinsic | None = Field(None, description="of the kind other only")
    temperature: Number | None = None
    remove: bool = Field(False, description="take the property with this id, and its readings, out of the sample")


class Change(Part):
    """One change. Exactly one key; batches may stand beside readings."""

    crystal: Crystal | None = None
    free: dict[Text, Number | Typed] | None = Field(None, max_length=MAX_FREE_CELLS)
    tensor: TensorChange | None = None
    property: PropertyChange | None = None
    pose: Pose | None = None
    poses: dict[Text, Pose | None] | None = None
    part: list[Number] | None = Field(None, min_length=3, max_length=3, description="mm along x, y and z")
    readings: list[dict[str, Any]] | None = Field(None, max_length=MAX_KEPT_READINGS)
    batches: dict[Text, Number] | None = None
    name: Typed | None = None
    notes: LongText | None = None
    looking: dict[str, Any] | None = Field(None, description="what the pages show; joined with what stands")

    @model_validator(mode="after")
    def _one_change(self) -> Self:
        if len(self.list_given()) != 1 and set(self.list_given()) != {"readings", "batches"}:
            raise PydanticCustomError(
                "change",
                "must have exactly one key.",
                {"hint": f"Give one of {', '.join(self.known_keys())}; batches may stand beside readings."},
            )
        return self

    def list_given(self) -> list[str]:
        """The keys that were given with a value."""
        return [name for name in self.known_keys() if getattr(self, name) is not None]


class EditRequest(Part):
    """A change, and the revision that it was made from."""

    parent: Annotated[int, Field(ge=1)]
    change: Change


class StepRequest(Part):
    """The revision that the caller takes for the newest."""

    parent: Annotated[int, Field(ge=1)] | None = None


class NewSampleRequest(Part):
    """A new sample: a copy of the one named in ``from``, else an empty one."""

    name: Typed | None = None
    from_: Text | None = Field(None, alias="from")


class MarkRequest(Part):
    """Where a sample stands in the list."""

    archived: bool | None = None
    deleted: bool | None = None
