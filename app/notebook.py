"""The main job for a notebook or a script: ``import app`` gives these few functions, with typed results.

import app

crystal = app.read_crystal("crystal.cif")
table = app.read_readings("readings.csv")
fit = app.fit_readings(crystal, table.readings, unit=table.unit)
print(app.print_fit(crystal, fit))
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy.typing as npt

from app.crystal.cif import read_cif_file
from app.crystal.crystal import Crystal, build_crystal
from app.errors import InputError
from app.readings.fit import Fit
from app.readings.fit import fit_readings as fit_resolved
from app.readings.reading import Reading
from app.readings.report import print_fit
from app.readings.table import DEFAULT_TEMPERATURE_SPAN, ReadingTable, read_table
from app.tensor.kind import build_kind
from app.tensor.pose import IDENTITY, Pose, read_pose
from app.tensor.tensor import PropertyTensor, build_tensor

__all__ = [
    "define_crystal",
    "define_pose",
    "define_tensor",
    "fit_readings",
    "print_fit",
    "read_crystal",
    "read_readings",
]


def define_crystal(
    cell: npt.ArrayLike | None,
    group: str,
    *,
    unique_axis: str | None = None,
    frame: str | None = None,
    cell_sigma: npt.ArrayLike | None = None,
) -> Crystal:
    """A crystal from its cell (angstrom, degrees), group and frame rule (default ``x3=c x2=b*``).

    Raises:
        app.errors.InputError: what is wrong, where, and what to do.
    """
    return build_crystal(cell, group, unique_axis=unique_axis, frame=frame, cell_sigma=cell_sigma)


def read_crystal(path: str | Path, *, block: str | None = None, frame: str | None = None) -> Crystal:
    """A crystal from a CIF file, in the setting that the file states.

    Args:
        path: the file.
        block: which data block, where the file has several with a cell.
        frame: a frame rule, default ``x3=c x2=b*``.

    Raises:
        app.errors.InputError: no such file, no cell or no group in it, or several blocks and none chosen.
    """
    found = read_cif_file(path, block)
    if block is None and len(found.blocks) > 1:
        raise InputError(
            f"The file has {len(found.blocks)} blocks with a cell: {', '.join(found.blocks)}.",
            field="block",
            hint="Choose one by its name.",
        )
    return build_crystal(
        found.cell, found.group, unique_axis=found.unique_axis, frame=frame, cell_sigma=found.cell_sigma
    )


def read_readings(
    path: str | Path, *, unit: str | None = None, temperature_span: float = DEFAULT_TEMPERATURE_SPAN
) -> ReadingTable:
    """Readings from a table with a header (CSV; comma, semicolon or tab).

    Args:
        path: the file.
        unit: the unit to convert to; default the first row's.
        temperature_span: kelvin; readings further apart are refused, not merged.

    Raises:
        app.errors.InputError: every bad row by line, column and reason, in ``detail``.
    """
    try:
        content = Path(path).read_bytes()
    except OSError as error:
        raise InputError(f"The table {path} cannot be read: {error.strerror}.", field="readings") from None
    return read_table(content, unit=unit, temperature_span=temperature_span)


def define_pose(crystal: Crystal, pose: Mapping[str, Any] | None) -> Pose:
    """A specimen frame in any of the interface's six ways.

    For example ``{"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]}``; None is the crystal frame itself.
    """
    return read_pose(pose, crystal)


def define_tensor(
    crystal: Crystal,
    *,
    parity: str = "polar",
    intrinsic: str = "symmetric",
    matrix: npt.ArrayLike | None = None,
    free: Mapping[str, float] | None = None,
    covariance: npt.ArrayLike | None = None,
    unit: str | None = None,
) -> PropertyTensor:
    """A property tensor of a crystal from a 3 × 3 matrix (crystal frame) or from its free cells by label."""
    return build_tensor(
        crystal, build_kind(parity, intrinsic), matrix=matrix, free=free, covariance=covariance, unit=unit
    )


def fit_readings(
    crystal: Crystal,
    readings: Sequence[Reading],
    *,
    parity: str = "polar",
    intrinsic: str = "symmetric",
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
    unit: str | None = None,
) -> Fit:
    """The allowed tensor that readings give, with covariance, residuals and what they cannot tell.

    Readings that do not determine the tensor are an answer: ``determined`` is False and ``undetermined`` names each
    unseen combination and a reading that would see it.
    """
    return fit_resolved(crystal, build_kind(parity, intrinsic), readings, batches=batches, pose=pose, unit=unit)
