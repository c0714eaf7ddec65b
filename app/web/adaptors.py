"""From the shapes of a request to the objects of the packages below: no physics, only the handing over.

Every error that leaves here has the path of the member that is wrong, as the request spells it.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import Direction, read_direction
from app.errors import located
from app.readings.reading import Reading
from app.tensor.kind import Kind, build_kind
from app.tensor.pose import IDENTITY, Pose, read_pose, resolve_directions
from app.tensor.tensor import PropertyTensor, build_tensor
from app.web import parts, requests

FloatArray = npt.NDArray[np.float64]


def adapt_crystal(given: requests.Crystal, field: str = "crystal") -> Crystal:
    """The crystal of a request."""
    with located(field):
        return build_crystal(
            given.cell, given.group, unique_axis=given.unique_axis, frame=given.frame, cell_sigma=given.cell_sigma
        )


def adapt_kind(given: requests.TensorKind) -> Kind:
    """Parity and inner symmetry of a request's tensor."""
    with located("tensor"):
        return build_kind(given.parity, given.intrinsic)


def adapt_tensor(crystal: Crystal, given: requests.Tensor) -> PropertyTensor:
    """The tensor of a request, made to obey the crystal."""
    kind = adapt_kind(given)
    with located("tensor"):
        return build_tensor(crystal, kind, matrix=given.matrix, free=given.free, covariance=given.covariance)


def adapt_pose(crystal: Crystal, given: parts.AnyPose | None, field: str = "pose") -> Pose:
    """The pose of a request; the identity where there is none."""
    if given is None:
        return IDENTITY
    with located(field):
        return read_pose(given.model_dump(by_alias=True, exclude_none=True), crystal)


def adapt_directions(crystal: Crystal, given: Sequence[Any], pose: Pose, field: str = "directions") -> FloatArray:
    """Unit vectors (m, 3) in the crystal frame."""
    with located(field):
        return resolve_directions(crystal, [_plain_direction(item) for item in given], pose)


def _plain_direction(given: Any) -> Any:
    return {"specimen": given.specimen} if isinstance(given, parts.SpecimenVector) else given


def adapt_readings(crystal: Crystal, given: Sequence[requests.Reading]) -> list[Reading]:
    """The readings of a request, each with its own pose where it has one."""
    return [_adapt_reading(crystal, reading, f"readings[{index}]") for index, reading in enumerate(given)]


def _adapt_reading(crystal: Crystal, given: requests.Reading, field: str) -> Reading:
    with located(field):
        return Reading(
            kind=given.kind,
            value=given.value,
            direction=_adapt_direction(given.direction, "direction"),
            second=_adapt_direction(given.second, "second"),
            sigma=given.sigma,
            direction_sigma=given.direction_sigma,
            bar=given.bar,
            batch=given.batch,
            pose=None if given.pose is None else adapt_pose(crystal, given.pose),
        )


def _adapt_direction(given: Any, field: str) -> Direction | None:
    if given is None:
        return None
    with located(field):
        return read_direction(_plain_direction(given))
