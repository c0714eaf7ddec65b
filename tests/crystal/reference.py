"""An outside for the tests of symmetry: point groups written down by hand, exact forms by sympy, cells to try.

The generators were written from the meaning of the symbols in International Tables for Crystallography A (2016),
section 2.1.3.4 and Table 3.2.3.2 (from memory), as coordinate triplets in the basis a b c, and are checked against
spglib's database in test_group.py. Nothing here comes from the code under test.
"""

from __future__ import annotations

import re
import warnings
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

import numpy as np
import numpy.typing as npt
import spglib
import sympy
from sympy.polys.matrices import DomainMatrix

FloatArray = npt.NDArray[np.float64]

# Invented cells, one for each family; each has no symmetry beyond that of its family.
CELLS: dict[str, tuple[float, ...]] = {
    "triclinic": (5.1, 6.2, 7.3, 81.0, 97.0, 104.0),
    "monoclinic a": (5.1, 6.2, 7.3, 103.83, 90.0, 90.0),
    "monoclinic b": (5.1, 6.2, 7.3, 90.0, 103.83, 90.0),
    "monoclinic c": (5.1, 6.2, 7.3, 90.0, 90.0, 103.83),
    "orthorhombic": (5.1, 6.2, 7.3, 90.0, 90.0, 90.0),
    "tetragonal": (5.1, 5.1, 7.3, 90.0, 90.0, 90.0),
    "hexagonal": (5.1, 5.1, 7.3, 90.0, 90.0, 120.0),
    "rhombohedral": (5.1, 5.1, 5.1, 74.0, 74.0, 74.0),
    "cubic": (5.1, 5.1, 5.1, 90.0, 90.0, 90.0),
}


@dataclass(frozen=True)
class Setting:
    """A point-group symbol in one orientation: its family, what generates it, its order."""

    symbol: str
    family: str
    generators: tuple[str, ...]
    order: int
    unique_axis: str | None = None

    @property
    def name(self) -> str:
        suffix = f" unique {self.unique_axis}" if self.unique_axis else ""
        return f"{self.symbol}{suffix}{' rhombohedral' if self.family == 'rhombohedral' else ''}"

    @property
    def cell(self) -> tuple[float, ...]:
        return CELLS[self.family]

    @property
    def matrices(self) -> list[FloatArray]:
        return [read_triplet(generator) for generator in self.generators]


def _monoclinic(axis: str, turn: str, mirror: str, two: str, m: str, both: str) -> list[Setting]:
    family = f"monoclinic {axis}"
    return [
        Setting(two, family, (turn,), 2),
        Setting(m, family, (mirror,), 2),
        Setting(both, family, (turn, mirror), 4),
        Setting("2", family, (turn,), 2, axis),
        Setting("m", family, (mirror,), 2, axis),
        Setting("2/m", family, (turn, mirror), 4, axis),
    ]


_FOUR, _MINUS_FOUR = "-y,x,z", "y,-x,-z"
_THREE, _SIX, _CUBE = "-y,x-y,z", "x-y,x,z", "z,x,y"
_INVERSION = "-x,-y,-z"
_TWO_X, _TWO_Y = "x,-y,-z", "-x,y,-z"
_M_X, _M_Y, _M_Z = "-x,y,z", "x,-y,z", "x,y,-z"
# Of hexagonal axes: two-fold axes along [1 0 0] and [1 -1 0], mirrors across them.
_TWO_A, _TWO_A_MINUS_B = "x-y,-y,-z", "-y,-x,-z"
_M_A, _M_A_MINUS_B = "-x+y,y,z", "y,x,z"

SETTINGS: list[Setting] = [
    Setting("1", "triclinic", (), 1),
    Setting("-1", "triclinic", (_INVERSION,), 2),
    *_monoclinic("a", _TWO_X, _M_X, "211", "m11", "2/m11"),
    *_monoclinic("b", _TWO_Y, _M_Y, "121", "1m1", "12/m1"),
    *_monoclinic("c", "-x,-y,z", _M_Z, "112", "11m", "112/m"),
    Setting("222", "orthorhombic", (_TWO_X, _TWO_Y), 4),
    Setting("mm2", "orthorhombic", (_M_X, _M_Y), 4),
    Setting("m2m", "orthorhombic", (_M_X, _M_Z), 4),
    Setting("2mm", "orthorhombic", (_M_Y, _M_Z), 4),
    Setting("mmm", "orthorhombic", (_M_X, _M_Y, _M_Z), 8),
    Setting("4", "tetragonal", (_FOUR,), 4),
    Setting("-4", "tetragonal", (_MINUS_FOUR,), 4),
    Setting("4/m", "tetragonal", (_FOUR, _M_Z), 8),
    Setting("422", "tetragonal", (_FOUR, _TWO_X), 8),
    Setting("4mm", "tetragonal", (_FOUR, _M_X), 8),
    Setting("-42m", "tetragonal", (_MINUS_FOUR, _TWO_X), 8),
    Setting("-4m2", "tetragonal", (_MINUS_FOUR, _M_X), 8),
    Setting("4/mmm", "tetragonal", (_FOUR, _M_Z, _M_X), 16),
    Setting("3", "hexagonal", (_THREE,), 3),
    Setting("-3", "hexagonal", (_THREE, _INVERSION), 6),
    Setting("32", "hexagonal", (_THREE, _TWO_A), 6),
    Setting("321", "hexagonal", (_THREE, _TWO_A), 6),
    Setting("312", "hexagonal", (_THREE, _TWO_A_MINUS_B), 6),
    Setting("3m", "hexagonal", (_THREE, _M_A), 6),
    Setting("3m1", "hexagonal", (_THREE, _M_A), 6),
    Setting("31m", "hexagonal", (_THREE, _M_A_MINUS_B), 6),
    Setting("-3m", "hexagonal", (_THREE, _INVERSION, _M_A), 12),
    Setting("-3m1", "hexagonal", (_THREE, _INVERSION, _M_A), 12),
    Setting("-31m", "hexagonal", (_THREE, _INVERSION, _M_A_MINUS_B), 12),
    Setting("3", "rhombohedral", (_CUBE,), 3),
    Setting("-3", "rhombohedral", (_CUBE, _INVERSION), 6),
    Setting("32", "rhombohedral", (_CUBE, _TWO_A_MINUS_B), 6),
    Setting("3m", "rhombohedral", (_CUBE, _M_A_MINUS_B), 6),
    Setting("-3m", "rhombohedral", (_CUBE, _INVERSION, _M_A_MINUS_B), 12),
    Setting("6", "hexagonal", (_SIX,), 6),
    Setting("-6", "hexagonal", (_THREE, _M_Z), 6),
    Setting("6/m", "hexagonal", (_SIX, _M_Z), 12),
    Setting("622", "hexagonal", (_SIX, _TWO_A), 12),
    Setting("6mm", "hexagonal", (_SIX, _M_A), 12),
    Setting("-6m2", "hexagonal", (_THREE, _M_Z, _M_A), 12),
    Setting("-62m", "hexagonal", (_THREE, _M_Z, _TWO_A), 12),
    Setting("6/mmm", "hexagonal", (_SIX, _M_Z, _M_A), 24),
    Setting("23", "cubic", (_CUBE, _TWO_X), 12),
    Setting("m-3", "cubic", (_CUBE, _TWO_X, _INVERSION), 24),
    Setting("432", "cubic", (_CUBE, _FOUR), 24),
    Setting("-43m", "cubic", (_CUBE, _MINUS_FOUR), 24),
    Setting("m-3m", "cubic", (_CUBE, _FOUR, _INVERSION), 48),
]

SETTING_NAMES = [setting.name for setting in SETTINGS]


def read_triplet(text: str) -> FloatArray:
    """ "-y,x-y,z" as the matrix W that takes (x y z) there."""
    matrix = np.zeros((3, 3))
    for row, part in enumerate(text.split(",")):
        for sign, letter in re.findall(r"([+-]?)([xyz])", part):
            matrix[row, "xyz".index(letter)] += -1.0 if sign == "-" else 1.0
    return matrix


def close_group(generators: list[FloatArray]) -> list[FloatArray]:
    """Every product of the generators, by multiplying until nothing new comes."""
    members = [np.eye(3)]
    for member in members:
        for generator in generators:
            product = generator @ member
            if not any(np.allclose(product, known, atol=1e-9) for known in members):
                members.append(product)
    return members


def as_set(matrices: Any) -> set[tuple[int, ...]]:
    """Whole-number matrices as a set that does not care for order."""
    return {tuple(int(value) for value in np.rint(matrix).ravel()) for matrix in matrices}


HALL_NUMBERS = range(1, 531)


@lru_cache(maxsize=530)
def read_setting(hall_number: int) -> tuple[int, str, str, frozenset[tuple[int, ...]]]:
    """Number of the space group, its short and full symbol and its matrices W, from spglib's database."""
    with warnings.catch_warnings():
        # Newer versions warn in every call of a way of theirs to report errors.
        warnings.simplefilter("ignore", DeprecationWarning)
        entry = spglib.get_spacegroup_type(hall_number)
        operations = spglib.get_symmetry_from_database(hall_number)
    axes = f":{entry.choice}" if entry.choice in ("H", "R") else ""
    return (
        entry.number,
        entry.international_short.replace("_", ""),
        entry.international_full.replace("_", "") + axes,
        frozenset(as_set(operations["rotations"])),
    )


def build_textbook_basis(cell: tuple[float, ...]) -> FloatArray:
    """a b c as columns with a along x and c* along z: the formula in every textbook (here from memory)."""
    a, b, c = cell[:3]
    cos_alpha, cos_beta, cos_gamma = np.cos(np.deg2rad(cell[3:]))
    sin_gamma = np.sin(np.deg2rad(cell[5]))
    volume = np.sqrt(1 - cos_alpha**2 - cos_beta**2 - cos_gamma**2 + 2 * cos_alpha * cos_beta * cos_gamma)
    return np.array(
        [
            [a, b * cos_gamma, c * cos_beta],
            [0.0, b * sin_gamma, c * (cos_alpha - cos_beta * cos_gamma) / sin_gamma],
            [0.0, 0.0, c * volume / sin_gamma],
        ]
    )


@lru_cache(maxsize=128)
def _exact_rotations(setting: Setting) -> tuple[list[sympy.Matrix], tuple[int, int, int]]:
    """The generators in the frame `x3=c x2=b*`, exact; rhombohedral ones in `x3=[1 1 1] x1=(1 -1 0)`.

    To stay among fractions one axis of the frame is stretched by √3: the second answer has the squares of the
    stretches, so that component i of the frame is √(square i) times component i here.
    """
    matrices = [sympy.Matrix(matrix.astype(int).tolist()) for matrix in setting.matrices]
    half = sympy.Rational(1, 2)
    if setting.family == "hexagonal":
        # b* lies across a and c, so a is along x1: a = (1, 0, 0), b = (-1/2, √3/2, 0).
        basis, squares = sympy.Matrix([[1, -half, 0], [0, half, 0], [0, 0, 1]]), (1, 3, 1)
    elif setting.family == "rhombohedral":
        # a, b, c at 120° about the three-fold axis x3, (√3/2, 1/2, 2), (-√3/2, 1/2, 2), (0, -1, 2); the normal
        # (1 -1 0) is a* − b*, here along a − b, and is x1.
        basis, squares = sympy.Matrix([[half, -half, 0], [half, half, -1], [2, 2, 2]]), (3, 1, 1)
    else:
        # Every other generator permutes and flips edges of equal length along x1 x2 x3, or, where one angle is
        # oblique, turns or mirrors about the edge at right angles to the others: in the rule `x3=c x2=b*` that edge
        # is along x1 if it is a, x2 if it is b, x3 if it is c.
        return matrices, (1, 1, 1)
    return [basis * matrix * basis.inv() for matrix in matrices], squares


@lru_cache(maxsize=512)
def find_exact_form(name: str, parity: str, intrinsic: str) -> tuple[tuple[int, ...], FloatArray]:
    """Free cells (0 to 8) and basis (k, 3, 3), from the exact null space of the stacked constraints.

    R T Rᵀ = ±T for every generator (minus for improper ones of an axial tensor) and T = ±Tᵀ. The reduced row echelon
    form of the solutions has its pivots at the first independent cells in row order.
    """
    rotations, squares = _exact_rotations(SETTINGS[SETTING_NAMES.index(name)])
    rows = []
    for rotation in rotations:
        sign = rotation.det() if parity == "axial" else 1
        rows.append(sign * sympy.kronecker_product(rotation, rotation) - sympy.eye(9))
    if intrinsic != "general":
        transpose = sympy.Matrix(9, 9, lambda i, j: int(j == 3 * (i % 3) + i // 3))
        rows.append(transpose - (1 if intrinsic == "symmetric" else -1) * sympy.eye(9))
    if not rows:
        return tuple(range(9)), np.eye(9).reshape(9, 3, 3)
    solutions = DomainMatrix.from_Matrix(sympy.Matrix.vstack(*rows)).convert_to(sympy.QQ).nullspace()
    reduced, pivots = solutions.rref()
    entries = reduced.to_Matrix().tolist()[: len(pivots)]
    basis = np.array([[float(entry) for entry in row] for row in entries], dtype=np.float64).reshape(-1, 9)
    stretch = np.sqrt(np.outer(squares, squares).astype(np.float64)).ravel()
    free = tuple(int(pivot) for pivot in pivots)
    return free, (basis * stretch / stretch[list(free)][:, None]).reshape(-1, 3, 3)


def find_numeric_space(rotations: Any, parity: str, intrinsic: str) -> FloatArray:
    """Projector (9, 9) on the allowed tensors, from the singular vectors of the stacked constraints."""
    rows = []
    for rotation in rotations:
        sign = np.sign(np.linalg.det(rotation)) if parity == "axial" else 1.0
        rows.append(sign * np.kron(rotation, rotation) - np.eye(9))
    transpose = np.eye(9).reshape(3, 3, 9).transpose(1, 0, 2).reshape(9, 9)
    if intrinsic != "general":
        rows.append(transpose - (1.0 if intrinsic == "symmetric" else -1.0) * np.eye(9))
    if not rows:
        return np.eye(9)
    _, sizes, vectors = np.linalg.svd(np.vstack(rows), full_matrices=False)
    space = vectors[sizes < 1e-9]
    return space.T @ space


def find_first_independent(space: FloatArray) -> tuple[int, ...]:
    """Positions of the first cells in row order that are independent, by numpy's rank of ever more rows."""
    chosen: list[int] = []
    for position in range(9):
        if np.linalg.matrix_rank(space[[*chosen, position]], tol=1e-8) > len(chosen):
            chosen.append(position)
    return tuple(chosen)
