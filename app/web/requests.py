"""What the calls take: the shapes of version 1 of the calculation interface, and nothing but shapes.

A model says which members there are, of which type and how large; whether a group exists, a direction means something
or a matrix is a turn is for the packages below to say. Numbers are finite and never true or false; an unknown key is
an error that names the known ones.
"""

from __future__ import annotations

from typing import Annotated, Literal, Self

from pydantic import Field, StringConstraints, model_validator
from pydantic_core import PydanticCustomError

from app.crystal.frame import DEFAULT_RULE
from app.readings.reading import ReadingKind
from app.tensor.kind import Intrinsic, Parity
from app.web.parts import Direction, Directions, Number, Part, Pose, SixNumbers, Text, ThreeByThree

MAX_READINGS = 200_000
MAX_KEPT_READINGS = 3_000
"""Of a sample: every page shows all of them, which takes seconds for so many."""

MAX_CIF_CHARACTERS = 8 * 1024 * 1024
MAX_FREE_CELLS = 9


# Crystal, tensor, reading ---------------------------------------------------------------------------------------------


class Crystal(Part):
    """A cell, a group and the rule that attaches the crystal frame; the cell is null for a limiting group."""

    cell: SixNumbers | None = Field(None, description="a, b, c in angstrom; alpha, beta, gamma in degrees")
    cell_sigma: SixNumbers | None = Field(None, description="standard deviations of the six")
    group: Text = Field(description="point group, space group or limiting group")
    unique_axis: Literal["a", "b", "c"] | None = Field(
        None, description="for the short monoclinic point-group symbols only; b where it is not given"
    )
    frame: Text = DEFAULT_RULE


class TensorKind(Part):
    """How the tensor transforms, without any values."""

    parity: Parity = "polar"
    intrinsic: Intrinsic = "symmetric"


class TensorForm(TensorKind):
    """A kind of tensor; values may be there and are not looked at."""

    matrix: ThreeByThree | None = Field(None, description="in the crystal frame")
    free: dict[Text, Number] | None = Field(None, description="every free cell by its label", max_length=MAX_FREE_CELLS)
    covariance: list[list[Number]] | None = Field(
        None, description="square, over the free cells in order", max_length=MAX_FREE_CELLS
    )


class Tensor(TensorForm):
    """A tensor by its matrix in the crystal frame or by its free cells."""

    @model_validator(mode="after")
    def _one_way_of_giving(self) -> Self:
        if (self.matrix is None) == (self.free is None):
            raise PydanticCustomError(
                "tensor",
                "must be given by its matrix or by its free cells, one of the two.",
                {"hint": 'Give {"matrix": 3×3} in the crystal frame, or {"free": {"11": …}} with every free cell.'},
            )
        return self


class TensorWithCovariance(Tensor):
    """A tensor whose uncertainty is known."""

    covariance: list[list[Number]] = Field(
        description="square, over the free cells in order", max_length=MAX_FREE_CELLS
    )


class Reading(Part):
    """One measured number."""

    kind: ReadingKind
    direction: Direction | None = None
    second: Direction | None = None
    value: Number
    sigma: Number | None = None
    direction_sigma: Number | None = Field(None, description="degrees")
    bar: Text | None = None
    batch: Text | None = None
    pose: Pose | None = None


Readings = Annotated[list[Reading], Field(max_length=MAX_READINGS)]


# One model per call ---------------------------------------------------------------------------------------------------


class FormRequest(Part):
    """Which cells symmetry allows."""

    crystal: Crystal
    tensor: TensorForm
    pose: Pose | None = None


class StateRequest(Part):
    """The tensor made to obey, in the crystal and in the specimen frame."""

    crystal: Crystal
    tensor: Tensor
    pose: Pose | None = None


class AlongRequest(StateRequest):
    """What the tensor does along many directions."""

    directions: Directions


class SurfaceRequest(StateRequest):
    """A mesh of one of the tensor's surfaces."""

    surface: Literal["quadric", "value", "flux"]
    detail: int = Field(60, ge=8, le=400, description="points per half circle")


class FitRequest(Part):
    """Readings from which the tensor is to be estimated."""

    crystal: Crystal
    tensor: TensorKind
    readings: Readings
    batches: dict[Text, Number] | None = Field(None, description="relative standard deviation of each batch")
    pose: Pose | None = None


class RegionRequest(Part):
    """Which directions can be principal axes."""

    crystal: Crystal
    tensor: TensorWithCovariance
    level: Number = Field(0.95, gt=0, lt=1)
    directions: Directions | None = None


class ConvertRequest(Part):
    """The same tensor in another cell, setting or frame."""

    from_: Crystal = Field(alias="from")
    tensor: Tensor
    to: Crystal
    basis: ThreeByThree | None = Field(None, description="column j is the new axis j in the old basis")


class CifRequest(Part):
    """The text of a CIF, and which of its blocks."""

    text: Annotated[str, StringConstraints(min_length=1, max_length=MAX_CIF_CHARACTERS)]
    block: Text | None = None
