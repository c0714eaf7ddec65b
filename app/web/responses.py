"""What the calls answer, for the OpenAPI document: descriptions only.

Answers are not checked against these on the way out; the tests check that the two agree.
"""

from __future__ import annotations

from typing import Any, Literal

from pydantic import BaseModel, ConfigDict, Field

Vector = list[float]
Matrix = list[list[float]]


class Answer(BaseModel):
    """An object of an answer."""

    model_config = ConfigDict(extra="allow", serialize_by_alias=True)


class ErrorBody(Answer):
    """What is wrong, where, and what to do."""

    message: str
    field: str | None = Field(description="a path such as readings[3].sigma")
    hint: str | None
    detail: Any = None


class ErrorAnswer(Answer):
    """The one shape of every error."""

    error: ErrorBody


ERROR_RESPONSES: dict[int | str, dict[str, Any]] = {
    403: {"model": ErrorAnswer, "description": "A foreign Host, Origin or site"},
    413: {"model": ErrorAnswer, "description": "The body is over 8 MiB"},
    422: {"model": ErrorAnswer, "description": "A bad request: what is wrong, where, and what to do"},
}

KEPT_ERROR_RESPONSES: dict[int | str, dict[str, Any]] = {
    **ERROR_RESPONSES,
    404: {"model": ErrorAnswer, "description": "There is no such sample, revision or other kept thing"},
    409: {"model": ErrorAnswer, "description": "The change was made against an old revision"},
    503: {"model": ErrorAnswer, "description": "Kept work cannot be read or written"},
}
"""Of the calls that read or change kept work."""
"""For every router's ``responses``."""


class CellForm(Answer):
    """One cell of the form."""

    state: Literal["free", "zero", "tied"]
    terms: list[float] = Field(description="one coefficient per free cell of the crystal frame")
    because: str


class FormAnswer(Answer):
    """Which cells symmetry allows."""

    count: int
    free: list[str]
    cells: list[list[CellForm]]
    posed_cells: list[list[CellForm]] | None = Field(None, description="with a pose")
    basis: list[Matrix] = Field(description="T = sum of free times basis")
    order: int | None = Field(description="of the point group; null for a limiting group")
    fixed_axes: list[Vector] = Field(description="unit vectors in the crystal frame")
    operations: list[str]


class NearestIndices(Answer):
    """The row and the plane nearest to an axis, indices to 5; how far off in degrees."""

    row: str | None
    row_off: float | None
    plane: str | None
    plane_off: float | None


class Principal(Answer):
    """Principal values, descending, and axes."""

    values: list[float]
    axes: Matrix = Field(description="unit vectors in the crystal frame as rows, right-handed")
    arbitrary: list[bool] = Field(description="true where the axis is not determined")
    shape: Literal["isotropic", "uniaxial", "biaxial"] | None = None
    nearest: list[NearestIndices] | None = None
    sigma: list[float] | None = Field(None, description="with a covariance")
    axis_sigma: list[list[float | None]] | None = Field(
        None, description="degrees; entry i j is of the turn of axis i toward axis j"
    )


class PoseAnswer(Answer):
    """The pose in three ways."""

    matrix: Matrix = Field(description="the specimen axes, in the crystal frame, as rows")
    bunge: Vector = Field(description="degrees")
    quaternion: list[float]


class FrameAnswer(Answer):
    """The crystal frame."""

    M: Matrix | None = Field(description="a, b, c in the crystal frame as columns")
    volume: float | None = Field(description="cubic angstrom")
    sentence: str


class StateAnswer(Answer):
    """The tensor made to obey, in the crystal and in the specimen frame."""

    matrix: Matrix
    posed: Matrix
    sigma_matrix: Matrix | None = None
    sigma_posed: Matrix | None = None
    free: dict[str, float]
    misfit: float = Field(description="norm of what was removed over that of what was given")
    principal: Principal
    antisymmetric: Vector = Field(description="w with T_anti v = w × v")
    quadric: str
    pose: PoseAnswer
    frame: FrameAnswer


class AlongAnswer(Answer):
    """What the tensor does along many directions: lists, one entry per direction."""

    vectors: list[Vector] = Field(description="unit vectors in the crystal frame")
    values: list[float] = Field(description="nAn")
    flux: list[Vector] = Field(description="A n")
    angle: list[float | None] = Field(description="between n and A n, degrees")
    rod: list[float | None] = Field(description="1 / n A⁻¹ n, or null")
    sigma: list[float] | None = Field(None, description="of the values, with a covariance")
    rod_sigma: list[float | None] | None = Field(None, description="with a covariance")


class SurfaceAnswer(Answer):
    """A mesh of one of the tensor's surfaces."""

    vertices: list[Vector] = Field(description="in the specimen frame")
    triangles: list[list[int]]
    value: list[float] = Field(description="per vertex")
    sheet: list[int] = Field(description="+1 or -1 per vertex")
    cut_at: float | None = Field(description="radius")


class FittedReading(Answer):
    """What the fit says of one reading."""

    predicted: float | None
    residual: float | None = Field(description="observed minus predicted")
    standardised: float | None = Field(description="by its own standard deviation; null at leverage 1")
    leverage: float | None
    sigma_used: float | None


class Unseen(Answer):
    """A change of the tensor that no reading would notice."""

    combination: list[float] = Field(description="change of the free cells, unit in Frobenius norm")
    suggest: Any = Field(description="a reading that would see it")


class SymmetryTest(Answer):
    """The claimed symmetry against no symmetry at all."""

    delta_chi2: float
    delta_dof: int
    p_value: float | None
    statistic: Literal["chi2", "F"]


class FitAnswer(Answer):
    """The tensor that the readings give, or what they cannot tell."""

    free: list[str]
    values: list[float] | None
    covariance: Matrix | None
    matrix: Matrix | None
    sigma_matrix: Matrix | None
    chi2: float | None
    dof: int | None
    p_value: float | None
    scale: float | None
    covariance_from: Literal["sigma", "scatter"] | None
    readings: list[FittedReading] | None
    determined: bool
    rank: int
    undetermined: list[Unseen]
    condition: float | None
    principal: Principal | None
    symmetry_test: SymmetryTest | None
    note: str | None = None


class RegionAnswer(Answer):
    """Which directions can be principal axes."""

    chi2: list[float | None] | None = Field(None, description="per given direction")
    bound: float
    bounds: list[float] | None = Field(None, description="per given direction, by rank")
    curves: list[list[Vector]] = Field(description="closed lines of unit vectors")


class AuditEntry(Answer):
    """Where one cell of the converted tensor comes from."""

    cell: str
    from_: dict[str, float] = Field(alias="from")
    value: float


class ConvertCandidate(Answer):
    """One way in which the two cells match."""

    basis: Matrix
    misfit: float = Field(description="of the metrics")
    matrix: Matrix


class ConvertAnswer(Answer):
    """The same tensor in another cell, setting or frame."""

    matrix: Matrix | None = None
    rotation: Matrix | None = None
    audit: list[AuditEntry] | None = None
    misfit: float | None = None
    candidates: list[ConvertCandidate] | None = Field(None, description="without a basis, best first")


class CifAnswer(Answer):
    """The crystal that a CIF describes."""

    crystal: dict[str, Any] | None
    name: str | None
    formula: str | None
    temperature: float | None = Field(description="kelvin")
    blocks: list[str]
    notes: list[str] = Field(description="what was missing or assumed")
