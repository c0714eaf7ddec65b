"""What the call ``expansion`` takes and answers."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from app.series.polynomial import MAX_DEGREE
from app.series.strain import StrainMeasure
from app.web.parts import Number, Part, SixNumbers
from app.web.requests import Crystal
from app.web.responses import Answer, FrameAnswer, Matrix, Principal, Vector

MAX_STATES = 10_000
MAX_PLACES = 2_000


class CellState(Part):
    """A cell at one value of the variable."""

    t: Number = Field(description="temperature, pressure, wavelength or composition, in any one unit")
    cell: SixNumbers = Field(description="a, b, c in angstrom; alpha, beta, gamma in degrees")
    sigma: SixNumbers | None = Field(
        None,
        description="standard deviations of the six, for all states or for none; above zero for every parameter that "
        "the group leaves free, and not looked at for the others",
    )


class ExpansionRequest(Part):
    """Cells of one crystal against a variable, and where its expansion is wanted."""

    crystal: Crystal = Field(
        description="group and frame; the cell may be null or left out, for the states carry cells. A cell that is "
        "given is checked against the group and tells whether a trigonal group is on rhombohedral axes"
    )
    states: Annotated[list[CellState], Field(min_length=1, max_length=MAX_STATES)] = Field(
        description="in any order; the same t may stand there again for a repeated measurement"
    )
    degree: int = Field(
        ge=0,
        le=MAX_DEGREE,
        description="of the polynomial through each independent cell parameter, less than the number of different t",
    )
    at: Annotated[list[Number], Field(max_length=MAX_PLACES)] = Field(description="values of t")
    reference: Number | None = Field(
        None, description="t of the state that strains refer to, the first one there; default the first state's"
    )
    strain: StrainMeasure = Field(
        "stretch",
        description="of the states: the stretch U − 1, which no frame rule enters, or the linear ½(F + Fᵀ) − 1, which "
        "depends on it; F = M M0⁻¹",
    )


class BranchedPrincipal(Principal):
    """Principal values and axes of alpha, and which curve each belongs to."""

    branches: list[int] = Field(
        description="0, 1 or 2 for each axis: the curve that it continues, followed from one t of `at` to the next by "
        "its direction, not by size; numbered in descending order at the lowest t"
    )
    branches_doubtful: bool = Field(
        description="an axis turned by more than 30° since the next lower t of `at`: ask for closer values of t"
    )


class Still(Answer):
    """Directions in which nothing expands."""

    kind: Literal["none", "cone", "planes", "plane", "axis", "everywhere"]
    axis: Vector | None = Field(
        description="unit vector in the crystal frame: of a cone its axis, of two planes the line that they share, of "
        "one plane its normal, else the one axis without expansion"
    )
    toward: list[Vector] = Field(description="principal axes toward which (two planes: from which) the half-angles are")
    half_angles: list[float] = Field(description="degrees")
    sigma: list[float | None] | None = Field(description="of the half-angles, degrees")
    sentence: str = Field(description="the same in words")


class ExpansionAt(Answer):
    """The expansion at one value of the variable."""

    t: float = Field(description="as it was asked for, in the unit of the states")
    alpha: Matrix = Field(
        description="3×3 in the crystal frame as it is attached to the cell at t, per unit of t: the symmetric part of "
        "Ṁ M⁻¹"
    )
    sigma: Matrix | None = Field(description="standard deviations of alpha; null where nothing is known of them")
    principal: BranchedPrincipal
    volume: float = Field(description="volume expansion (1/V) dV/dt, the trace of alpha, per unit of t")
    volume_sigma: float | None = Field(description="standard deviation of volume")
    extrapolated: bool = Field(description="t lies beyond the t of all states")
    cell: Vector = Field(description="the cell of the polynomials at t")
    cell_sigma: Vector | None = Field(description="of the six; 0 for a parameter that symmetry fixes")
    cell_volume: float = Field(description="cubic angstrom")
    still: Still = Field(description="where nᵀαn = 0")


class StateStrain(Answer):
    """One measured state."""

    t: float = Field(description="in the order of the request")
    strain: Matrix = Field(
        description="3×3 in the crystal frame of the reference state's cell, of the cells as measured, made to obey"
    )
    sigma: Matrix | None = Field(description="from sigma of the state and of the reference")
    cell: Vector = Field(description="the measured cell made to obey the group")
    residual: Vector = Field(description="that cell minus the polynomials' at t: angstrom and degrees")


class DegreeTest(Answer):
    """F of the highest power: against the polynomial of the next lower degree."""

    value: float
    extra: int = Field(description="degrees of freedom of the numerator")
    dof: int = Field(description="degrees of freedom of the denominator")
    p_value: float = Field(description="probability of so large an F or a larger one if the lower degree holds")


class FittedParameter(Answer):
    """The polynomial through one independent cell parameter."""

    name: Literal["a", "b", "c", "alpha", "beta", "gamma"]
    coefficients: list[float] = Field(description="of 1, u, u², …; angstrom or degrees")
    sigma: list[float] | None = Field(description="standard deviations of the coefficients")
    chi2: float = Field(description="without sigma the sum of squared residuals")
    dof: int
    p_value: float | None = Field(description="of chi2; null without sigma or at dof 0")
    scale: float | None = Field(description="√(chi2/dof)")
    test: DegreeTest | None = Field(description="null at degree 0, dof 0 or without any scatter")


class ExpansionFit(Answer):
    """The polynomials, in u = (t − centre) / half."""

    centre: float
    half: float
    parameters: list[FittedParameter]
    covariance_from: Literal["sigma", "scatter"] | None = Field(
        description="from the sigma given, or from the scatter about each polynomial; null where there is neither"
    )
    chi2: float | None = Field(description="of all parameters together; null without sigma")
    dof: int
    p_value: float | None


class ExpansionAnswer(Answer):
    """Expansion from cells against a variable."""

    at: list[ExpansionAt]
    states: list[StateStrain]
    strain: StrainMeasure = Field(description="which measure of strain")
    reference: float = Field(description="the t that strains refer to")
    range: Vector = Field(description="lowest and highest t of the states")
    fit: ExpansionFit
    frame: FrameAnswer = Field(description="of the reference state's cell; the same rule holds at every t")
    note: str | None
