"""Showing a tensor to others: a part of the turn from the crystal frame to the specimen frame, and links to a state.

A link is the address of the front page with what is shown in its query: ``revision``, ``property``, ``pose`` (as it is
kept, JSON), ``hold``, ``view`` (nine numbers), ``surface`` and ``at`` (a value of the series). What is wrong in a link
is left out with a sentence that says so; the page opens all the same.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any, Final, TypeVar

import numpy as np
import numpy.typing as npt
from scipy.spatial.transform import Rotation

from app.errors import HalfturnError, InputError, NotFoundError
from app.store.document import current_property
from app.store.revisions import Kept
from app.store.samples import Samples
from app.tensor.pose import read_pose
from app.tensor.surface import SurfaceKind
from app.web.bodies import parse_object
from app.web.kept import crystal_for, crystal_of, entry_of
from app.web.turning import Hold, View, build_view

FloatArray = npt.NDArray[np.float64]
Read = TypeVar("Read")

LONGEST_PART: Final = 2000
SURFACES: Final[tuple[SurfaceKind, ...]] = ("quadric", "value", "flux")
HOLDS: Final[tuple[Hold, ...]] = ("specimen", "crystal")


def turn_part(pose: FloatArray, fraction: float) -> FloatArray:
    """The frame on the way from the crystal frame to a specimen frame, by one steady turn about one axis.

    Args:
        pose: C, shape (3, 3), specimen axes in the crystal frame as rows.
        fraction: 0 is the crystal frame (the identity), 1 the specimen frame.

    Returns:
        Shape (3, 3), proper. It is the shortest way: the rotation vector of C times the fraction. A turn by 180°
        has two shortest ways, of which one is taken.
    """
    turn = Rotation.from_matrix(pose)
    part: FloatArray = Rotation.from_rotvec(fraction * turn.as_rotvec()).as_matrix()
    return part


@dataclass(frozen=True)
class Link:
    """What a link shows.

    Attributes:
        kept: the revision that it names, or the newest.
        pose: the pose as it is kept; None is that of the revision.
        view: from where one looks.
        surface: None is what the revision looks at.
        at: value of the variable of the series; None is the tensor as kept.
        notices: sentences about what was left out of the link.
    """

    kept: Kept
    pose: dict[str, Any] | None
    view: View
    surface: SurfaceKind | None
    at: float | None
    notices: tuple[str, ...]


def read_link(given: Mapping[str, str], samples: Samples, sample_id: str) -> Link:
    """What an address of the front page asks for. Raises NotFoundError only where there is no such sample."""
    newest = samples.get(sample_id)
    notices: list[str] = []

    def take(name: str, read: Callable[[str], Read], instead: Read, shown: str) -> Read:
        text = given.get(name)
        if text is None:
            return instead
        try:
            if len(text) > LONGEST_PART:
                raise InputError(f"it has more than {LONGEST_PART} characters")
            return read(text)
        except (HalfturnError, ValueError, OverflowError) as error:
            reason = error.message if isinstance(error, HalfturnError) else "it cannot be read"
            notices.append(f"The link's {name} was left out ({reason.rstrip('.')}): {shown}.")
            return instead

    kept = take("revision", lambda text: _find_revision(samples, sample_id, text), newest, "the newest is shown")
    take("property", lambda text: _check_property(kept, text), None, "the property of the revision is shown")
    pose = take("pose", lambda text: _read_kept_pose(kept, text), None, "the kept pose is shown")
    hold = take("hold", lambda text: _choose(text, HOLDS), HOLDS[0], "the specimen is held")
    usual = build_view(hold, None)
    view = take("view", lambda text: build_view(hold, _read_nine(text)), usual, "the usual view is shown")
    surface = take("surface", lambda text: _choose(text, SURFACES), None, "the usual surface is shown")
    at = take("at", _read_finite, None, "the tensor as kept is shown")
    return Link(kept, pose, view, surface, at, tuple(notices))


def _find_revision(samples: Samples, sample_id: str, text: str) -> Kept:
    if not text.isascii() or not text.isdigit() or len(text) > 9:
        raise InputError("it is no whole number")
    try:
        return samples.get(sample_id, int(text))
    except NotFoundError:
        raise InputError(f"the sample has no revision {int(text)}") from None


def _check_property(kept: Kept, text: str) -> None:
    shown = current_property(kept.document)
    if shown is None or shown.id == text:
        return
    if any(entry.id == text for entry in kept.document.properties):
        raise InputError(f"revision {kept.revision} looks at {shown.name}")
    raise InputError("the sample has no such property")


def _read_kept_pose(kept: Kept, text: str) -> dict[str, Any]:
    shown = current_property(kept.document)
    crystal = crystal_of(kept.document.crystal)
    if shown is not None:
        crystal = crystal_for(crystal, kept.document.crystal, entry_of(shown))
    pose = parse_object(text.encode())
    read_pose(pose, crystal)
    return pose


def _choose(text: str, known: tuple[Read, ...]) -> Read:
    for entry in known:
        if entry == text:
            return entry
    raise InputError(f"it is one of {', '.join(str(entry) for entry in known)}")


def _read_nine(text: str) -> list[list[float]]:
    numbers = [_read_finite(part) for part in text.split(",")]
    if len(numbers) != 9:
        raise InputError("it is nine numbers with commas between them")
    return [numbers[0:3], numbers[3:6], numbers[6:9]]


def _read_finite(text: str) -> float:
    number = float(text)
    if not math.isfinite(number):
        raise InputError("a number in it is not finite")
    return number
