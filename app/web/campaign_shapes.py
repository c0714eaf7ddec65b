"""What the call ``campaign`` takes and answers."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator
from pydantic_core import PydanticCustomError

from app.readings.campaign import MAX_ADD
from app.readings.candidates import HIGHEST_INDEX
from app.web.parts import Direction, Number, Part, Pose, SpecimenVector, Text, read_directions
from app.web.requests import MAX_READINGS, Crystal, Reading, TensorForm
from app.web.responses import Answer, Matrix, NearestIndices, Unseen, Vector

MAX_RANKING = 50
MAX_GOAL = 500


class TakenReading(Reading):
    """One reading that is taken, or is sure to be; its value may be absent."""

    value: Number | None = Field(None, description="not looked at: the information hangs on how, not what, was read")  # type: ignore[assignment]


class LowIndices(Part):
    """All rows and plane normals of low index, one per pair of opposites."""

    max_index: int = Field(ge=1, le=HIGHEST_INDEX, description="the largest index")


class CellCriterion(Part):
    """The variance of one cell of the crystal-frame matrix."""

    cell: Text = Field(description='a label like "13" of a cell that is free or tied')


class AxisCriterion(Part):
    """The area of the region of one principal axis."""

    axis: int = Field(ge=1, le=3, description="by its principal value, 1 the largest; the tensor's values are needed")


class Goal(Part):
    """How well one cell must be known."""

    cell: Text = Field(description='a label like "13" of a cell that is free or tied')
    sigma: Number = Field(gt=0, description="the standard deviation to reach, in the unit of the tensor")


def read_candidates(value: Any) -> str | LowIndices | list[str | list[float] | SpecimenVector]:
    """Told by what it is: a word, an object or a list."""
    if value == "sphere":
        return "sphere"
    if isinstance(value, dict):
        return LowIndices.model_validate(value)
    if isinstance(value, list):
        return read_directions(value)
    raise PydanticCustomError(
        "candidates",
        'must be {"max_index": k}, "sphere" or a list of directions.',
        {"hint": 'Give {"max_index": 2} for rows and plane normals of low index.'},
    )


def read_criterion(value: Any) -> str | CellCriterion | AxisCriterion:
    """Told by what it is: a word, or an object by its key."""
    if value in ("D", "A"):
        return str(value)
    if isinstance(value, dict) and len(value) == 1:
        if "cell" in value:
            return CellCriterion.model_validate(value)
        if "axis" in value:
            return AxisCriterion.model_validate(value)
    raise PydanticCustomError(
        "criterion",
        'must be "D", "A", {"cell": "13"} or {"axis": 1}.',
        {"hint": "D and A judge all cells together, the others one cell or one principal axis."},
    )


CandidateChoice = Annotated[
    str | LowIndices | list[str | list[float] | SpecimenVector],
    PlainValidator(read_candidates, json_schema_input_type=LowIndices | Literal["sphere"] | list[Direction]),
]
CriterionChoice = Annotated[
    str | CellCriterion | AxisCriterion,
    PlainValidator(read_criterion, json_schema_input_type=Literal["D", "A"] | CellCriterion | AxisCriterion),
]


class CampaignRequest(Part):
    """What is taken, what could be cut next, and by what to choose."""

    crystal: Crystal
    tensor: TensorForm = Field(
        description="with its values (a first estimate) where the taken readings or the next ones have tilts, rods, "
        "sheets or batches, or where an axis is asked for; a covariance is not looked at"
    )
    taken: Annotated[list[TakenReading], Field(max_length=MAX_READINGS)] = Field(
        [], description="either all carry sigma or none; where none does, each is as good as the next ones"
    )
    batches: dict[Text, Number] | None = Field(None, description="relative standard deviation of each batch")
    pose: Pose | None = Field(None, description="for directions in the specimen frame, taken or candidates")
    add: int = Field(ge=0, le=MAX_ADD, description="how many readings to choose; 0 judges what is taken")
    candidates: CandidateChoice = Field(
        description="directions to choose from, each for a reading along it on a bar of its own"
    )
    criterion: CriterionChoice = Field("D", description="what is to be best after all")
    sigma: Number = Field(description="standard deviation of each next reading, in the unit of the tensor")
    direction_sigma: Number | None = Field(
        None, description="standard deviation of each of the three components of a next bar's random turn, degrees"
    )
    ranking: int = Field(0, ge=0, le=MAX_RANKING, description="how many of the best single candidates to list")
    losses: bool = Field(False, description="whether to tell what the loss of each bar would leave")
    goal: Goal | None = Field(None, description="to be told how many readings reach it")


class RankedCandidate(Answer):
    """One candidate, if it alone were added to what is taken."""

    direction: Any = Field(description="as in chosen")
    vector: Vector = Field(description="unit vector (3) in the crystal frame")
    value: float | None = Field(description="the criterion's value after it; null where undetermined")
    gain: float = Field(
        description="natural logarithm by which the criterion improves: of the determinant for D, of the trace, the "
        "variance or the area for the others; what adds to the rank counts far above all else"
    )
    rank: int = Field(description="number of combinations of cells seen after it")
    sigma_after: list[list[float | None]] = Field(description="3 × 3, as in the answer")


class LostBar(Answer):
    """What is left when one bar breaks, of the taken or of the chosen ones."""

    bar: str | None = Field(description="the bar's name; null where it has none")
    reading: int | None = Field(description="place among the taken readings of a bar without name; null for others")
    chosen: int | None = Field(description="place among the chosen ones; null for taken bars")
    determined: bool
    rank: int
    condition: float | None
    value: float | None = Field(description="the criterion's value without it")
    sigma_after: list[list[float | None]] = Field(description="3 × 3, as in the answer, without it")


class GoalAnswer(Answer):
    """How many readings reach the goal."""

    count: int | None = Field(
        description=f"how many more readings bring the cell's σ to the goal; null where {MAX_GOAL} are not enough or "
        "the cell is never seen"
    )
    chosen: list[Any] = Field(description="directions, each with how many readings: {direction, count}")
    sigma: float | None = Field(description="the cell's standard deviation then")
    sentence: str


class CampaignAnswer(Answer):
    """The next readings, and what the tensor will be known to."""

    chosen: list[Any] = Field(
        description="directions, repeats allowed, each next one helping most after those before it: in index form or "
        "as they were given; unit vectors (3) in the crystal frame for the sphere"
    )
    vectors: list[Vector] = Field(description="the same as unit vectors (3) in the crystal frame")
    nearest: list[NearestIndices] | None = Field(
        description="of every chosen direction on the sphere, the nearest row and plane, indices to 5; null elsewhere"
    )
    value: float | None = Field(
        description="after adding: D the natural logarithm of the determinant of the information matrix, A the trace "
        "of the covariance, both in the orthonormal basis of the allowed tensors; a cell its variance; an axis the "
        "area in square degrees that holds it at 95 % (degrees from end to end, where symmetry leaves it one turn); "
        "null where undetermined"
    )
    value_before: float | None = Field(description="the same before adding")
    steps: list[float | None] = Field(description="the same after the first of the chosen, the first two, …")
    condition: float | None = Field(description="after adding, of the whitened design as in fit; null undetermined")
    condition_before: float | None
    sigma_before: list[list[float | None]] = Field(
        description="3 × 3 standard deviations of the cells of the crystal-frame matrix; null where undetermined, 0 "
        "where symmetry holds the cell at zero"
    )
    sigma_after: list[list[float | None]] = Field(description="the same after adding")
    determined: bool = Field(description="whether every free cell is determined after adding")
    rank: int = Field(description="number of combinations of cells seen after adding")
    free: list[str] = Field(description="labels of the free cells")
    undetermined: list[Unseen] = Field(description="what stays unseen after adding, as in fit")
    matrix: Matrix | None = Field(description="the tensor at which all was judged; null where no values were given")
    ranking: list[RankedCandidate] | None = Field(description="where asked for, best first")
    losses: list[LostBar] | None = Field(description="where asked for")
    goal: GoalAnswer | None = Field(description="where asked for")
    note: str | None = Field(description="sentences that the answer must be read with")
