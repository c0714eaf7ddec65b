"""One measured number: what was measured along which direction of which bar, and how well."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final, Literal

from app.crystal.direction import Direction
from app.tensor.pose import Pose

ReadingKind = Literal["along", "across", "difference", "mean", "rod", "sheet"]
READING_KINDS: Final[tuple[ReadingKind, ...]] = ("along", "across", "difference", "mean", "rod", "sheet")

NEEDS_DIRECTION: Final = frozenset({"along", "across", "difference", "rod"})
NEEDS_SECOND: Final = frozenset({"across", "difference", "sheet"})


@dataclass(frozen=True)
class Reading:
    """A reading as it stands in a table or a call.

    Attributes:
        kind: ``along`` nᵀAn, ``across`` mᵀAn, ``difference`` nᵀAn − mᵀAm, ``mean`` trace(A)/3, ``rod`` 1/(nᵀA⁻¹n),
            ``sheet`` √(det A/(mᵀAm)).
        value: the number, in the unit of the set; None in a plan, where it is not measured yet.
        direction: n, the cause; None for ``mean`` and ``sheet``.
        second: m, the effect of ``across``, the other direction of ``difference``, the plate's normal of ``sheet``.
        sigma: standard deviation of the value, same unit.
        direction_sigma: standard deviation of each of the three components of the bar's random turn, degrees.
        bar: readings of one bar share its turn; None is a bar of its own.
        batch: readings of one batch share a relative calibration error.
        pose: the specimen frame of this reading's own, for directions given in it.
        temperature: kelvin, where it was noted.
        note: free text.
    """

    kind: ReadingKind
    value: float | None
    direction: Direction | None = None
    second: Direction | None = None
    sigma: float | None = None
    direction_sigma: float | None = None
    bar: str | None = None
    batch: str | None = None
    pose: Pose | None = None
    temperature: float | None = None
    note: str | None = None
