"""What a published tensor without stated axes may have meant: every frame rule × relabelling of the cell's edges.

A relabelling (a' b' c') = (a b c) P names the same lattice by other edges; the frame rule then attaches x1 x2 x3 to
these. Q takes components in the crystal's own frame to components in that one, so the tensor that was meant is Qᵀ T Q
in the crystal's own frame. Candidates that come to the same tensor there are one answer.
"""

from __future__ import annotations

import itertools
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import format_indices, typeset_indices
from app.crystal.frame import DEFAULT_RULE, FrameRule, compute_basis, list_letter_rules
from app.errors import InputError
from app.tensor.conversion import MATCH_LIMIT, list_candidates
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.matrix import read_matrix
from app.tensor.tensor import build_tensor

FloatArray = npt.NDArray[np.float64]

FORBIDDEN_LIMIT: Final = 1e-3
"""Part of the tensor (Frobenius) that the crystal's symmetry may forbid in a frame, beyond that in the best one."""

EQUAL_LIMIT: Final = 1e-9
"""Two tensors closer than this part of their size are the same answer."""


@dataclass(frozen=True)
class Naming:
    """One way to have meant the axes.

    Attributes:
        rule: the frame rule.
        basis: P, shape (3, 3), column j the edge that was called a, b or c, in the crystal's own a, b, c.
        sentence: both in words.
    """

    rule: FrameRule
    basis: FloatArray
    sentence: str


@dataclass(frozen=True)
class Placement:
    """A tensor that may have been meant, in the crystal's own frame, and every naming that leads to it.

    Attributes:
        matrix: shape (3, 3), in the crystal's own frame.
        namings: at least one, the plainest first.
        forbidden: part of the tensor (Frobenius) that the crystal's symmetry forbids there.
    """

    matrix: FloatArray
    namings: tuple[Naming, ...]
    forbidden: float


def list_relabellings(crystal: Crystal, published_cell: npt.ArrayLike | None, *, any_edges: bool) -> FloatArray:
    """Bases P of −1, 0, 1, shape (n, 3, 3), by which the published cell may name the crystal's lattice.

    Args:
        crystal: with a cell.
        published_cell: a, b, c in angstrom and alpha, beta, gamma in degrees, as printed beside the tensor; None where
            it is the crystal's own.
        any_edges: whether the edges may also have been called a, b, c in any order and sense, whatever the cell.

    Raises:
        InputError: a published cell that no basis of −1, 0, 1 matches within 2 %.
    """
    if crystal.M is None or crystal.cell is None:
        raise InputError(
            f"The limiting group {crystal.group.symbol} has no cell, so there are no frame rules to choose from.",
            field="crystal",
            hint="Its x3 lies along the infinite axis.",
        )
    try:
        named = build_crystal(crystal.cell.parameters if published_cell is None else published_cell, "1")
    except InputError as error:
        error.field = "published_cell" + (error.field or "").removeprefix("cell")
        raise
    # How the two cells match does not depend on the tensor that is carried along.
    anything = build_tensor(named, Kind(), matrix=np.eye(3))
    matching = np.array([entry.basis for entry in list_candidates(crystal, anything, named)]).reshape(-1, 3, 3)
    if len(matching) == 0:
        raise InputError(
            f"The published cell is none of this lattice by any basis of −1, 0, 1 (within {100.0 * MATCH_LIMIT:g} %).",
            field="published_cell",
            hint="Give the cell that stands beside the tensor, or leave it out where it is the crystal's own.",
        )
    if any_edges:
        signed = [
            np.diag(signs)[:, list(order)]
            for order in itertools.permutations(range(3))
            for signs in itertools.product((1.0, -1.0), repeat=3)
        ]
        proper = np.array([matrix for matrix in signed if np.linalg.det(matrix) > 0.0])
        matching = np.unique(np.concatenate([matching, proper]), axis=0)
    order = sorted(range(len(matching)), key=lambda row: _rank(matching[row]))
    chosen: FloatArray = matching[order] + 0.0
    return chosen


def _rank(basis: FloatArray) -> tuple[float, int, float, list[float]]:
    # The plainest first: the edges as they are, then the fewest steps from that.
    return (
        float(np.sum(np.abs(basis - np.eye(3)))),
        int(np.sum(basis < 0)),
        -float(np.trace(basis)),
        basis.ravel().tolist(),
    )


def place_tensor(
    crystal: Crystal,
    published: npt.ArrayLike,
    kind: Kind | None = None,
    *,
    published_cell: npt.ArrayLike | None = None,
    any_edges: bool = False,
) -> tuple[Placement, ...]:
    """Every tensor that may have been meant, in the crystal's own frame.

    Args:
        crystal: with a cell.
        published: shape (3, 3), in a frame that is not stated.
        kind: default polar and symmetric.
        published_cell, any_edges: see ``list_relabellings``.

    Returns:
        the different answers, in the order of their plainest naming (edges as they are first, then rules by how
        many letters stand at their own axis, the default rule before all). Frames in which the crystal's symmetry
        forbids more of the tensor than in the best one are left out.

    Raises:
        InputError: a limiting group, which has no cell, a matrix or a published cell that is none.
    """
    given = read_matrix(published)
    scale = float(np.max(np.abs(given))) or 1.0
    cells = given / scale
    bases = list_relabellings(crystal, published_cell, any_edges=any_edges)
    own = crystal.require_basis()
    metrics = np.swapaxes(bases, -1, -2) @ (own.T @ own) @ bases
    rules = sorted(list_letter_rules(), key=_rank_rule)
    rotations = np.array([_find_rotations(own @ bases, compute_basis(metrics, rule)) for rule in rules])
    matrices = np.swapaxes(rotations, -1, -2) @ cells @ rotations
    size = float(np.linalg.norm(cells)) or 1.0
    form = build_form(crystal, kind or Kind())
    forbidden = np.linalg.norm(matrices - form.project(matrices), axis=(-2, -1)) / size
    allowed = forbidden <= np.min(forbidden) + FORBIDDEN_LIMIT
    found: list[FloatArray] = []
    parts: list[float] = []
    namings: list[list[Naming]] = []
    # Edges as they are first, so that the plainest naming leads.
    for column, basis in enumerate(bases):
        for row in np.flatnonzero(allowed[:, column]):
            matrix = matrices[row, column]
            apart = np.linalg.norm(np.array(found).reshape(-1, 9) - matrix.ravel(), axis=1)
            same = np.flatnonzero(apart <= EQUAL_LIMIT * size)
            if len(same) == 0:
                found.append(matrix)
                parts.append(float(forbidden[row, column]))
                namings.append([])
            number = int(same[0]) if len(same) else len(found) - 1
            namings[number].append(Naming(rules[row], basis, _describe(rules[row], basis)))
    return tuple(
        Placement(scale * matrix, tuple(names), part) for matrix, names, part in zip(found, namings, parts, strict=True)
    )


def _rank_rule(rule: FrameRule) -> tuple[bool, int]:
    moved = (rule.row.text != "abc"[rule.row_axis]) + (rule.normal.text != f"{'abc'[rule.normal_axis]}*")
    return rule.text != DEFAULT_RULE, moved


def _find_rotations(old_axes: FloatArray, new_axes: FloatArray) -> FloatArray:
    """The proper rotations nearest to M_rule (M P)⁻¹, shape (..., 3, 3)."""
    left, _, right = np.linalg.svd(new_axes @ np.linalg.inv(old_axes))
    rotations: FloatArray = left @ right
    return np.where(np.abs(rotations) < 1e-15, 0.0, rotations)


def _describe(rule: FrameRule, basis: FloatArray) -> str:
    if np.array_equal(basis, np.eye(3)):
        return rule.sentence
    named = [typeset_indices(format_indices("row", column)) for column in basis.T]
    return f"{rule.sentence}, of the cell whose edges a b c are {named[0]} {named[1]} {named[2]} here"
