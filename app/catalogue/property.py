"""What a property is: the shape of one entry of the catalogue. Data only, no consequences."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from app.tensor.kind import Intrinsic, Parity

SpecimenReading = Literal["along", "rod", "sheet"]
Source = Literal["common practice", "from memory"]


@dataclass(frozen=True)
class Unit:
    """A unit: ``text`` as it is typed and read, ``printed`` as sentences and tables show it."""

    text: str
    printed: str


@dataclass(frozen=True)
class SignLimit:
    """What is known of the sign of the principal values.

    Attributes:
        rule: "positive definite" (every principal value of the symmetric part is above zero), or "none".
        when: the condition under which it holds; None is always.
        sentence: the limit and its reason, for a reader.
        source: where it comes from.
    """

    rule: Literal["positive definite", "none"]
    sentence: str
    source: Source
    when: str | None = None


@dataclass(frozen=True)
class Property:
    """One physical property that a tensor of second rank describes.

    Attributes:
        key: name in documents and calls.
        name: name in sentences.
        symbol: one letter.
        unit: the SI unit; of ``own_unit`` only a stand-in.
        units: units that people use, the SI unit first.
        parity: "axial" where the tensor takes the sign of det R under an operation R, else "polar".
        intrinsic: symmetry of the tensor by itself, without any crystal.
        sign_limit: what is known of its sign.
        inverse: key of the property whose tensor is the inverse of this one; None where there is none here.
        is_field: a field (stress, strain) that is put on the crystal, not a property of it: symmetry locks nothing.
        own_unit: the unit is free text of the user's own.
        plate: the reading kind of a plate whose faces are far wider than their distance, measured through it along
            its normal; None where no kind applies.
        long_bar: the reading kind of a long thin bar measured along its length; None where no kind applies.
        four_corner: the reading kind of a thin plate measured by contacts at its edge; None where no kind applies.
        note: a sentence about convention or conditions; empty where there is nothing to say.
    """

    key: str
    name: str
    symbol: str
    unit: Unit
    units: tuple[Unit, ...]
    parity: Parity
    intrinsic: Intrinsic
    sign_limit: SignLimit
    inverse: str | None = None
    is_field: bool = False
    own_unit: bool = False
    plate: SpecimenReading | None = None
    long_bar: SpecimenReading | None = None
    four_corner: SpecimenReading | None = None
    note: str = ""
