"""A crystal: cell, point group and frame rule, checked against each other.

Everything later works in the crystal frame x1 x2 x3 of this object. Basis vectors are the columns of M.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property, lru_cache
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.cell import (
    METRIC_TOLERANCE,
    PARAMETER_NAMES,
    SIGMA_TOLERANCE,
    Cell,
    build_cell,
    find_obeying_cell,
    measure_metric_change,
)
from app.crystal.direction import Direction
from app.crystal.frame import DEFAULT_RULE, FrameRule, compute_basis, parse_frame_rule
from app.crystal.group import PointGroup, find_group
from app.crystal.operation import Operation, describe_operation, list_limiting_names
from app.errors import InputError

FloatArray = npt.NDArray[np.float64]

LIMITING_SENTENCE: Final = "x3 along the infinite axis, x1 and x2 anywhere across it, x1 = x2 × x3"
ISOTROPIC_SENTENCE: Final = "x1 x2 x3 any right-handed orthonormal set"


@dataclass(frozen=True)
class Crystal:
    """A crystal whose cell obeys its group.

    Attributes:
        group: the point group in its orientation.
        cell: the cell made to obey the group; None for a limiting group.
        given_cell: the cell as it was given; None for a limiting group.
        frame: the frame rule; None for a limiting group.
        M: shape (3, 3), a b c in the crystal frame as columns, angstrom; None for a limiting group.
        rotations: shape (n, 3, 3), the operations as orthogonal matrices in the crystal frame (active).
    """

    group: PointGroup
    cell: Cell | None
    given_cell: Cell | None
    frame: FrameRule | None
    M: FloatArray | None
    rotations: FloatArray

    @property
    def frame_sentence(self) -> str:
        """Where x1 x2 x3 lie, as a sentence for print."""
        if self.frame is not None:
            return self.frame.sentence
        return ISOTROPIC_SENTENCE if self.group.symbol.startswith("∞∞") else LIMITING_SENTENCE

    @cached_property
    def operations(self) -> tuple[Operation, ...]:
        """Every operation with its name, identity first."""
        return tuple(describe_operation(matrix, self.M) for matrix in self.rotations)

    @property
    def operation_names(self) -> list[str]:
        """Readable names of all operations; for a limiting group, of its kinds of operation."""
        if self.group.limiting:
            return list_limiting_names(self.group.symbol)
        return [operation.name for operation in self.operations]

    @property
    def volume(self) -> float | None:
        """Volume of the obeying cell in cubic angstrom."""
        return None if self.cell is None else self.cell.volume

    @cached_property
    def reciprocal(self) -> FloatArray:
        """a*, b*, c* in the crystal frame as columns, shape (3, 3), inverse angstrom (without 2π)."""
        inverse = np.asarray(np.linalg.inv(self.require_basis()), dtype=np.float64)
        inverse.setflags(write=False)
        return inverse.T

    def require_basis(self) -> FloatArray:
        """M, refused where the crystal has no cell."""
        if self.M is None:
            raise InputError(
                f"The limiting group {self.group.symbol} has no cell, so it takes no indices.",
                hint="Give the direction as a vector in the crystal frame, like [0, 0, 1].",
            )
        return self.M

    def resolve(self, direction: Direction) -> FloatArray:
        """Unit vector of a direction in the crystal frame, shape (3,).

        Raises:
            InputError: indices for a crystal without a cell, four indices off hexagonal axes, or a direction in
                the specimen frame (which needs a pose).
        """
        values = np.asarray(direction.values, dtype=np.float64)
        if direction.kind == "specimen":
            raise InputError("A direction in the specimen frame needs a pose, and there is none here.")
        if direction.kind == "row":
            vector = self.require_basis() @ (values / np.max(np.abs(values)))
        elif direction.kind == "normal":
            vector = self.reciprocal @ (values / np.max(np.abs(values)))
        else:
            vector = values / np.max(np.abs(values))
        if direction.four_index:
            self.require_hexagonal(direction.text or "")
        unit: FloatArray = vector / np.linalg.norm(vector)
        return unit

    def require_hexagonal(self, shown: str) -> None:
        """Refuse a four-index form where the axes are not hexagonal."""
        if self.cell is None or not self.cell.is_hexagonal:
            raise InputError(
                f"“{shown}” has four indices, which need hexagonal axes (a = b, alpha = beta = 90°, gamma = 120°).",
                hint="Give three indices.",
            )


def build_crystal(
    cell: npt.ArrayLike | None,
    group: str,
    *,
    unique_axis: str | None = None,
    frame: str | None = None,
    cell_sigma: npt.ArrayLike | None = None,
) -> Crystal:
    """Check cell, group and frame rule against each other and attach the crystal frame.

    Args:
        cell: a, b, c in angstrom, alpha, beta, gamma in degrees; None for a limiting group.
        group: point group, space group or limiting group; see ``app.crystal.group.find_group``.
        unique_axis: for the short monoclinic point-group symbols, default b.
        frame: a frame rule, default ``x3=c x2=b*``.
        cell_sigma: six standard deviations of the cell.

    Raises:
        InputError: with the field that is wrong. A cell that the group does not leave unchanged is refused with the
            nearest obeying cell and the change of each parameter in ``detail``.
    """
    if _are_plain(cell) and _are_plain(cell_sigma):
        # A session asks about few crystals many times.
        return _build_kept(
            None if cell is None else tuple(cell),  # type: ignore[arg-type]
            group,
            unique_axis,
            frame,
            None if cell_sigma is None else tuple(cell_sigma),  # type: ignore[arg-type]
        )
    return _build(cell, group, unique_axis, frame, cell_sigma)


def _are_plain(numbers: npt.ArrayLike | None) -> bool:
    """Whether these are plain numbers, which alone may serve as a key: True is 1 there, and arrays cannot be one."""
    return numbers is None or (
        isinstance(numbers, list | tuple) and all(type(number) in (float, int) for number in numbers)
    )


@lru_cache(maxsize=128)
def _build_kept(
    cell: tuple[float, ...] | None,
    group: str,
    unique_axis: str | None,
    frame: str | None,
    cell_sigma: tuple[float, ...] | None,
) -> Crystal:
    return _build(cell, group, unique_axis, frame, cell_sigma)


def _build(
    cell: npt.ArrayLike | None,
    group: str,
    unique_axis: str | None,
    frame: str | None,
    cell_sigma: npt.ArrayLike | None,
) -> Crystal:
    given = None if cell is None else build_cell(cell, cell_sigma)
    point_group = find_group(group, unique_axis, rhombohedral_cell=given is not None and _is_rhombohedral(given))
    if point_group.limiting:
        if given is not None or cell_sigma is not None:
            raise InputError(
                f"The limiting group {point_group.symbol} has no cell.", field="cell", hint="Give null as the cell."
            )
        if frame is not None and frame.strip() != DEFAULT_RULE:
            raise InputError(
                f"The limiting group {point_group.symbol} has no cell for a frame rule to refer to.",
                field="frame",
                hint="Leave the frame out: x3 lies along the infinite axis.",
            )
        return Crystal(point_group, None, None, None, None, point_group.operations)
    if given is None:
        raise InputError(
            f"The group {point_group.symbol} needs a cell.",
            field="cell",
            hint="Give a, b, c in angstrom and alpha, beta, gamma in degrees; only limiting groups have none.",
        )
    obeying = _make_obey(given, point_group)
    rule = parse_frame_rule(frame)
    basis = compute_basis(obeying.metric, rule, obeying.flat_basis)
    basis.setflags(write=False)
    rotations = _compute_rotations(basis, point_group.operations)
    crystal = Crystal(point_group, obeying, given, rule, basis, rotations)
    if rule.uses_four_indices:
        try:
            crystal.require_hexagonal(rule.text)
        except InputError as error:
            error.field = "frame"
            raise
    return crystal


def _is_rhombohedral(cell: Cell) -> bool:
    """A = b = c and alpha = beta = gamma ≠ 90, as far as a threefold axis along [1 1 1] may change the metric."""
    threefold = np.array([[[0.0, 0.0, 1.0], [1.0, 0.0, 0.0], [0.0, 1.0, 0.0]]])
    parameters = cell.parameters
    if abs(float(np.mean(parameters[3:])) - 90.0) <= 1e-3:
        return False
    if measure_metric_change(cell.metric, threefold) <= METRIC_TOLERANCE * (1.0 + 1e-9):
        return True
    if cell.sigma is None:
        return False
    means = np.repeat([parameters[:3].mean(), parameters[3:].mean()], 3)
    return bool(np.all(np.abs(parameters - means) <= SIGMA_TOLERANCE * cell.sigma))


def _make_obey(given: Cell, group: PointGroup) -> Cell:
    change = measure_metric_change(given.metric, group.operations)
    nearest = find_obeying_cell(given, group.operations) if change > 1e-15 else given.parameters
    moves = nearest - given.parameters
    within_metric = change <= METRIC_TOLERANCE * (1.0 + 1e-9)
    within_sigma = given.sigma is not None and bool(
        np.all(np.abs(moves) <= SIGMA_TOLERANCE * given.sigma * (1.0 + 1e-9) + 1e-10)
    )
    if within_metric or within_sigma:
        return Cell(nearest, given.sigma)
    named = [
        f"{name} {value:.6g}"
        for name, value, move in zip(PARAMETER_NAMES, nearest, moves, strict=True)
        if abs(move) > 1e-6
    ]
    raise InputError(
        f"The group {group.symbol} does not leave this cell unchanged; the nearest cell that it leaves unchanged has "
        f"{', '.join(named)}.",
        field="cell",
        hint="Correct the cell, the group or its setting (unique axis, hexagonal or rhombohedral axes), or give "
        "cell_sigma if the difference is within three standard deviations.",
        detail={"cell": [float(value) for value in nearest], "change": [float(value) for value in moves]},
    )


def _compute_rotations(basis: FloatArray, operations: FloatArray) -> FloatArray:
    matrices = basis @ operations @ np.linalg.inv(basis)
    # The nearest orthogonal matrix removes what rounding of an oblique basis leaves.
    left, _, right = np.linalg.svd(matrices)
    rotations: FloatArray = left @ right
    rotations = np.where(np.abs(rotations) < 1e-15, 0.0, rotations)
    rotations.setflags(write=False)
    return rotations
