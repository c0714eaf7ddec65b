"""Point groups in the orientation that their symbol states, and the seven limiting groups.

Operations come from gemmi's tables of space groups (a point-group symbol is looked up as the space group P of that
symbol) as integer matrices W in the basis a b c: (u v w) goes to W (u v w). Which axes a symbol means:
International Tables for Crystallography A (2016), section 2.1.3.4.

The limiting (Curie) groups have an axis of infinite order along x3 and no cell. For a tensor of rank two any axis of
order above two acts as the infinite one does (Hermann's theorem), so a seven-fold axis stands in for it and the
rotations of the cube for all rotations; the stand-ins are exact, and only the names of the operations differ.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import lru_cache
from itertools import accumulate
from typing import Final, Literal

import gemmi
import numpy as np
import numpy.typing as npt

from app.errors import InputError

FloatArray = npt.NDArray[np.float64]
UniqueAxis = Literal["a", "b", "c"]

SHORT_MONOCLINIC: Final = ("2", "m", "2/m")

# fmt: off
POINT_GROUP_SYMBOLS: Final = (
    "1", "-1", "2", "m", "2/m", "211", "121", "112", "m11", "1m1", "11m", "2/m11", "12/m1", "112/m",
    "222", "mm2", "m2m", "2mm", "mmm", "4", "-4", "4/m", "422", "4mm", "-42m", "-4m2", "4/mmm",
    "3", "-3", "32", "321", "312", "3m", "3m1", "31m", "-3m", "-3m1", "-31m",
    "6", "-6", "6/m", "622", "6mm", "-6m2", "-62m", "6/mmm", "23", "m-3", "432", "-43m", "m-3m",
)
# fmt: on
"""Every oriented point-group symbol that is read; the short monoclinic ones take a unique axis."""

LIMITING_SYMBOLS: Final = ("∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m")

_LATTICE_LETTERS: Final = "PABCIFR"
_ELEMENT: Final = re.compile(r"-?\d(?:/m)?|m")
_RHOMBOHEDRAL: Final = {"3": "R 3", "-3": "R -3", "32": "R 3 2", "3m": "R 3 m", "-3m": "R -3 m"}


@dataclass(frozen=True)
class PointGroup:
    """A point group in one orientation.

    Attributes:
        symbol: its symbol as it is written back: what was given, spelled in the one way.
        unique_axis: for a short monoclinic symbol, else None.
        operations: shape (n, 3, 3). W in the basis a b c; for a limiting group, orthogonal matrices in the crystal
            frame.
        limiting: whether it is one of the seven limiting groups.
        order: number of operations, None for a limiting group.
    """

    symbol: str
    unique_axis: UniqueAxis | None
    operations: FloatArray
    limiting: bool
    order: int | None

    @property
    def is_triclinic(self) -> bool:
        """Whether the group is 1 or −1."""
        return not self.limiting and bool(
            np.all(np.abs(self.operations) == np.eye(3))
            and len(self.operations) <= 2
            and np.all(np.abs(np.trace(self.operations, axis1=1, axis2=2)) == 3.0)
        )


def find_group(symbol: str, unique_axis: str | None = None, rhombohedral_cell: bool = False) -> PointGroup:
    """The point group that a symbol names, in the setting that it states.

    Args:
        symbol: an oriented Hermann-Mauguin point-group symbol, a space-group symbol (its point group is taken), or
            a limiting group (∞m or infm).
        unique_axis: a, b or c, only for the short monoclinic point-group symbols 2, m, 2/m; None means b.
        rhombohedral_cell: whether the cell has a = b = c and alpha = beta = gamma ≠ 90; a trigonal symbol that
            does not state its axes is then on rhombohedral axes.

    Raises:
        InputError: an unknown or ambiguous symbol, or a unique axis where the symbol takes none.
    """
    if len(symbol) > 60:
        raise InputError("A group symbol has at most 60 characters.", field="group")
    spelled = _spell(symbol)
    limiting = re.sub("inf(?:inity)?", "∞", spelled, flags=re.IGNORECASE).replace(" ", "")
    compact = spelled.replace(" ", "")
    short = compact in SHORT_MONOCLINIC
    if unique_axis is not None and unique_axis not in ("a", "b", "c"):
        raise InputError(f"The unique axis cannot be “{unique_axis}”.", field="unique_axis", hint="It is a, b or c.")
    if unique_axis is not None and not short:
        raise InputError(
            f"The symbol “{symbol}” states its own axes and takes no unique axis.",
            field="unique_axis",
            hint="Leave unique_axis out; only the short symbols 2, m and 2/m take one.",
        )
    if limiting in LIMITING_SYMBOLS:
        return PointGroup(limiting, None, _limiting_operations(limiting), True, None)
    if compact in POINT_GROUP_SYMBOLS:
        axis: UniqueAxis | None = (unique_axis or "b") if short else None  # type: ignore[assignment]
        operations = _point_operations(compact, axis, rhombohedral_cell)
        return PointGroup(compact, axis, operations, False, len(operations))
    if spelled[:1].upper() in _LATTICE_LETTERS and len(spelled) > 1:
        space_group = _find_space_group(spelled, symbol, rhombohedral_cell)
        operations = collect_operations(space_group.operations())
        return PointGroup(space_group.xhm(), None, operations, False, len(operations))
    raise InputError(
        f"“{symbol}” is not a group symbol that can be read.",
        field="group",
        hint="Give a point group such as 2/m, mmm, -42m, -3m or m-3m, a space group such as P 1 21/c 1, or a "
        "limiting group such as ∞m.",
    )


def _spell(symbol: str) -> str:
    plain = symbol.strip().replace("\u2212", "-").replace("\u2013", "-")
    # An overbar is typed after its digit; the plain spelling puts a minus before it.
    plain = re.sub("(\\d)[\u0304\u0305]", r"-\1", plain)
    return re.sub(r"\s+", " ", plain)


def _point_operations(symbol: str, unique_axis: str | None, rhombohedral_cell: bool) -> FloatArray:
    if unique_axis is not None:
        name = {"a": f"P {symbol} 1 1", "b": f"P 1 {symbol} 1", "c": f"P 1 1 {symbol}"}[unique_axis]
        return _table_operations(name)
    trigonal = {"321": "32", "3m1": "3m", "-3m1": "-3m"}.get(symbol, symbol)
    if rhombohedral_cell and trigonal in _RHOMBOHEDRAL:
        return _table_operations(f"{_RHOMBOHEDRAL[trigonal]}:R")
    if rhombohedral_cell and symbol in ("312", "31m", "-31m"):
        raise InputError(
            f"The group {symbol} has its second kind of axis across the edges of a hexagonal cell; a rhombohedral "
            "cell has none such.",
            field="group",
            hint=f"On rhombohedral axes the group is {trigonal.replace('1', '')}; or give the hexagonal cell.",
        )
    full = {"32": "3 2 1", "3m": "3 m 1", "-3m": "-3 m 1"}.get(symbol) or " ".join(_ELEMENT.findall(symbol))
    return _table_operations(f"P {full}")


@lru_cache(maxsize=256)
def _table_operations(name: str) -> FloatArray:
    space_group = gemmi.find_spacegroup_by_name(name)
    if space_group is None:  # pragma: no cover - every name here is one of the tables'
        raise LookupError(name)
    return collect_operations(space_group.operations())


def collect_operations(operations: gemmi.GroupOps) -> FloatArray:
    """The distinct matrices W of a space group's operations, shape (n, 3, 3), identity first."""
    matrices = {tuple(np.ravel(operation.rot) // operation.DEN) for operation in operations.sym_ops}
    ordered = sorted(matrices, key=lambda entries: (entries != (1, 0, 0, 0, 1, 0, 0, 0, 1), [-e for e in entries]))
    array = np.array(ordered, dtype=np.float64).reshape(-1, 3, 3)
    array.setflags(write=False)
    return array


def _find_space_group(spelled: str, shown: str, rhombohedral_cell: bool) -> gemmi.SpaceGroup:
    letter, rest = spelled[0].upper(), re.sub(r"\s*/\s*", "/", spelled[1:].strip())
    body, colon, extension = rest.partition(":")
    words = body.split()
    if len(words) == 1 and re.fullmatch(r"(?:2[1]?)?(?:/?[mabcden])?", words[0]) and words[0]:
        # A short monoclinic symbol means unique axis b and nothing else: P 21/b, say, is left to its full form.
        found = _look_up(f"{letter} 1 {words[0]} 1")
        if found is None:
            other = f"{letter} 1 1 {words[0]}"
            raise InputError(
                f"The short symbol “{shown}” is not one with unique axis b.",
                field="group",
                hint=f"Write its setting in full, like {other if _look_up(other) else 'P 1 21/c 1'}.",
            )
        return found
    suffix = ""
    if colon:
        suffix = f":{extension.strip().upper()}"
    elif letter == "R":
        suffix = f":{'R' if rhombohedral_cell else 'H'}"
    for parts in (words, shorten_symbol(words)):
        found = _look_up(f"{letter} {' '.join(parts)}{suffix}")
        if found is not None and found.xhm()[0] == letter and _is_divided_alike(parts, found):
            return found
    raise InputError(
        f"“{shown}” is not a space-group symbol in the tables.",
        field="group",
        hint="Separate its parts by spaces and write the setting in full, like P 1 21/c 1, R -3 c:H or I 41/a:2; "
        "or give the point group.",
    )


def _look_up(name: str) -> gemmi.SpaceGroup | None:
    # The tables take text that has a UTF-8 form, and their symbols are plain letters.
    return gemmi.find_spacegroup_by_name(name) if name.isascii() else None


def shorten_symbol(words: list[str]) -> list[str]:
    """The short form of a full symbol: 21/n 21/m 21/a is n m a, 4/m 2/m 2/m is 4/m m m, 4/m -3 2/m is m -3 m."""
    if words.count("1") == 2:
        # In a monoclinic symbol the 2/ is no longer form of the same: F 1 2/d 1 is not F 1 d 1.
        return words
    axes = r"\d+/" if "-3" in words[1:] else "21?/"
    return [re.sub(f"^{axes}(?=[a-z]$)", "", word) for word in words]


def _is_divided_alike(words: list[str], found: gemmi.SpaceGroup) -> bool:
    """Whether no part of the found symbol spans two of the words: the tables would read P 3 2 as P 32."""
    parts = found.hm.split()[1:]
    return "".join(words) != "".join(parts) or set(accumulate(map(len, words))) <= set(accumulate(map(len, parts)))


def _limiting_operations(symbol: str) -> FloatArray:
    angle = 2.0 * np.pi / 7.0
    turn = np.array([[np.cos(angle), -np.sin(angle), 0.0], [np.sin(angle), np.cos(angle), 0.0], [0.0, 0.0, 1.0]])
    if symbol in ("∞∞", "∞∞m"):
        # The tables give W in the basis of a cubic cell, which is orthonormal up to its scale: W is orthogonal.
        return _table_operations("P 4 3 2" if symbol == "∞∞" else "P m -3 m")
    further = {
        "∞": [],
        "∞m": [np.diag([-1.0, 1.0, 1.0])],
        "∞2": [np.diag([1.0, -1.0, -1.0])],
        "∞/m": [np.diag([1.0, 1.0, -1.0])],
        "∞/mm": [np.diag([1.0, 1.0, -1.0]), np.diag([-1.0, 1.0, 1.0])],
    }[symbol]
    operations = _close_group([turn, *further])
    operations.setflags(write=False)
    return operations


def _close_group(generators: list[FloatArray]) -> FloatArray:
    members: list[FloatArray] = [np.eye(3)]
    pending = [np.eye(3)]
    while pending:
        current = pending.pop()
        for generator in generators:
            product = generator @ current
            if not any(np.allclose(product, member, atol=1e-9) for member in members):
                members.append(product)
                pending.append(product)
    return np.array(members)
