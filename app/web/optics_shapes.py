"""What the call ``optics`` takes and answers."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from app.consequences.plate import DEFAULT_PART
from app.web.parts import Direction, Number
from app.web.requests import StateRequest
from app.web.responses import Answer, FrameAnswer, Vector

LONGEST_WAVE = 1e12
THICKEST = 1e6

Wavelength = Annotated[Number, Field(gt=0, le=LONGEST_WAVE)]


class OpticsRequest(StateRequest):
    """A transparent crystal, a wave normal, and the plate across it.

    The tensor is the relative permittivity at the wavelength of the light: polar, symmetric and positive definite.
    """

    direction: Direction = Field(description="the wave normal, not the ray; a plate's normal points outward along it")
    thickness: Annotated[Number, Field(gt=0, le=THICKEST)] | None = Field(None, description="of the plate, mm")
    wavelength: Wavelength | None = Field(None, description="of the light in vacuum, nm")
    tolerance: Wavelength | None = Field(
        None,
        description="change of the retardation that a tilt may make, nm; default the wavelength times "
        f"{DEFAULT_PART:g} (common practice)",
    )
    edge: Direction | None = Field(None, description="from whose projection on the plate the azimuth counts")


class PrincipalIndices(Answer):
    """The indices along the principal axes of the permittivity."""

    values: Vector = Field(description="three indices, descending (γ, β, α)")
    axes: list[Vector | None] = Field(
        description="unit vectors in the crystal frame, one per value; null for an axis that is not determined"
    )
    shape: Literal["isotropic", "uniaxial", "biaxial"]


class TiltAnswer(Answer):
    """What a tilt does to the retardation."""

    slope: float = Field(description="largest first-order change, nm per degree; 0 where the first order vanishes")
    toward: Vector | None = Field(
        description="unit vector in the crystal frame, across the normal, toward which the tilt raises the retardation "
        "most; null where no side is the one"
    )
    largest: float | None = Field(
        description="largest tilt, degrees, that toward no side changes the retardation by more than the tolerance; 90 "
        "where none does; null without a tolerance"
    )


class Tilts(Answer):
    """How exactly the plate must be cut, and set in the beam."""

    tolerance: float | None = Field(description="nm, as given or by default")
    cut: TiltAnswer = Field(description="faces cut off their plane, the light still square to them")
    beam: TiltAnswer = Field(description="a plate cut as planned, turned in a beam that comes from air")


class OpticsAnswer(Answer):
    """The two waves of a wave normal, and the plate between them."""

    normal: Vector = Field(description="the wave normal, unit vector in the crystal frame")
    indices: Vector = Field(description="two indices of refraction: slow (larger) first, then fast")
    vibrations: list[Vector | None] = Field(
        description="two unit vectors of D in the crystal frame, across the normal, in the order of the indices and up "
        "to their sense; null where every direction across the normal will do"
    )
    arbitrary: bool = Field(description="whether every direction across the normal will do for D")
    rays: list[Vector | None] = Field(
        description="unit vectors along the flow of energy, in that order; null along an optic axis of a biaxial "
        "crystal, where the rays fill a cone"
    )
    walk_off: list[float | None] = Field(description="degrees between ray and wave normal; null where the ray is")
    birefringence: float = Field(description="slow index less fast index")
    retardation: float | None = Field(description="slow path less fast path, nm; null without a thickness")
    waves: float | None = Field(description="the retardation in wavelengths; null without thickness or wavelength")
    axes: list[Vector] = Field(
        description="optic axes, unit vectors in the crystal frame: two when biaxial, one when uniaxial, none when "
        "isotropic"
    )
    two_v: float | None = Field(description="acute angle between two optic axes, degrees; null unless biaxial")
    sign: Literal["+", "-"] | None = Field(
        description="optic sign; null when isotropic and where the angle of the optic axes is 90°"
    )
    cone: float | None = Field(
        description="opening of the cone of rays along an optic axis, in the plane of the axes: the largest walk-off "
        "there, degrees; null unless biaxial"
    )
    principal: PrincipalIndices
    quarter_wave: float | None = Field(
        description="least thickness of a quarter-wave plate, mm; null without a wavelength or birefringence"
    )
    half_wave: float | None = Field(description="least thickness of a half-wave plate, mm; null there too")
    tilt: Tilts | None = Field(description="what a tilt of the plate does; null without a thickness")
    azimuth: float | None = Field(
        description="from the projected edge to the slow vibration, degrees over −90 up to 90, right-handed about the "
        "wave normal; null without an edge or a slow vibration"
    )
    sigma: list[float | None] | None = Field(
        None,
        description="standard deviations of the two indices, with a covariance; null along an optic axis of a biaxial "
        "crystal, where they have no first order",
    )
    birefringence_sigma: float | None = None
    retardation_sigma: float | None = Field(None, description="nm")
    vibration_sigma: float | None = Field(None, description="turn of both vibrations about the normal, degrees")
    walk_off_sigma: list[float | None] | None = Field(
        None, description="degrees; null where there is no first order, as where the walk-off vanishes"
    )
    two_v_sigma: float | None = Field(None, description="degrees")
    misfit: float = Field(description="what was removed to make the tensor obey, as in `state`")
    frame: FrameAnswer
    note: str | None
