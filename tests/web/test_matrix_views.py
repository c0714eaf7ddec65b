"""The other views of nine cells, against the printed forms.

Forms of symmetric tensors of rank two: J. F. Nye, Physical Properties of Crystals (1957), table 3; of tensors that are
not symmetric by themselves: International Tables for Crystallography D (2006), table 1.1.4.6 (both from memory).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from app.crystal.crystal import build_crystal
from app.tensor.form import build_form
from app.tensor.kind import build_kind
from app.tensor.lock import explain_cells
from app.tensor.pose import pose_from_bunge
from app.web.matrix_views import speak, view_cell

CELLS = {
    "-1": [5.0, 6.0, 7.0, 80.0, 95.0, 100.0],
    "2/m": [9.8, 6.4, 7.3, 90.0, 107.0, 90.0],
    "4": [5.0, 5.0, 7.0, 90.0, 90.0, 90.0],
    "4/mmm": [5.0, 5.0, 7.0, 90.0, 90.0, 90.0],
    "m-3m": [5.0, 5.0, 5.0, 90.0, 90.0, 90.0],
}


def look(group: str, intrinsic: str = "symmetric", pose: Any = None) -> list[dict[str, Any]]:
    crystal = build_crystal(CELLS[group], group)
    form = build_form(crystal, build_kind("polar", intrinsic))
    locks = explain_cells(crystal, form, pose)
    letters = "123" if pose is None else "xyz"
    labels = [row + column for row in letters for column in letters]
    return [view_cell(label, lock, 1.5, None, form.free) for label, lock in zip(labels, locks, strict=True)]


def write(cells: list[dict[str, Any]]) -> list[str]:
    return ["".join(text for text, _ in cell["formula"]) for cell in cells]


@pytest.mark.parametrize(
    ("group", "intrinsic", "printed"),
    [
        ("-1", "symmetric", "a11 a12 a13 a12 a22 a23 a13 a23 a33"),
        ("2/m", "symmetric", "a11 0 a13 0 a22 0 a13 0 a33"),
        ("4/mmm", "symmetric", "a11 0 0 0 a11 0 0 0 a33"),
        ("m-3m", "symmetric", "a11 0 0 0 a11 0 0 0 a11"),
        ("4", "general", "a11 a12 0 −a12 a11 0 0 0 a33"),
    ],
)
def test_the_formula_form_is_the_printed_one(group: str, intrinsic: str, printed: str) -> None:
    assert write(look(group, intrinsic)) == printed.split()


@pytest.mark.parametrize(
    ("group", "intrinsic", "dots", "joined"),
    [
        # h heavy, o open, . small; the partner of each joined dot by its label.
        ("2/m", "symmetric", "h.h.h.h.h", {"31": "13"}),
        ("4/mmm", "symmetric", "h...h...h", {"22": "11"}),
        ("m-3m", "symmetric", "h...h...h", {"22": "11", "33": "11"}),
        ("4", "general", "hh.oh...h", {"21": "12", "22": "11"}),
    ],
)
def test_the_dot_diagram_has_the_usual_key(group: str, intrinsic: str, dots: str, joined: dict[str, str]) -> None:
    cells = look(group, intrinsic)
    signs = {"zero": ".", "heavy": "h", "open": "o", "ringed": "r"}
    labels = [row + column for row in "123" for column in "123"]
    assert "".join(signs[cell["dot"]] for cell in cells) == dots
    assert {label: c["joined"] for label, c in zip(labels, cells, strict=True) if c["joined"]} == joined


def test_a_locked_cell_is_told_with_its_reason() -> None:
    cells = look("2/m")
    assert cells[1]["spoken"] == "row 1 column 2, zero, locked by the half-turn about x2"
    assert cells[6]["spoken"] == "row 3 column 1, 1.5, equal to 13, locked because the tensor is symmetric by itself"
    assert cells[0]["spoken"] == "row 1 column 1, 1.5, free"


GROUPS = "1 -1 2 m 2/m 222 mm2 mmm 4 -4 4/m 422 4mm -42m 4/mmm 23 m-3 432 -43m m-3m "
GROUPS += "3 -3 32 3m -3m 6 -6 6/m 622 6mm -6m2 6/mmm"


@pytest.mark.parametrize("group", GROUPS.split())
def test_every_name_ends_with_what_locks_it(group: str) -> None:
    cubic = [5.0, 5.0, 5.0, 90.0, 90.0, 90.0]
    hexagonal = [5.0, 5.0, 7.0, 90.0, 90.0, 120.0]
    crystal = build_crystal(hexagonal if group.lstrip("-")[0] in "36" else cubic, group)
    pose = pose_from_bunge(np.array([10.0, 20.0, 30.0])).matrix
    for intrinsic in ("symmetric", "general"):
        form = build_form(crystal, build_kind("polar", intrinsic))
        for frame in (None, pose):
            letters = "123" if frame is None else "xyz"
            labels = [row + column for row in letters for column in letters]
            for label, lock in zip(labels, explain_cells(crystal, form, frame), strict=True):
                spoken = view_cell(label, lock, -1.5, None, form.free)["spoken"]
                assert "−" not in spoken
                assert " turns " not in spoken
                assert "other value" not in spoken
                assert ("locked" in spoken) == (lock.state != "free")


def test_a_posed_cell_is_the_sum_that_the_turn_makes_of_it() -> None:
    # By hand: about x3 by φ, T'11 = cos²φ T11 + sin²φ T22 + 2 sinφ cosφ T12 (Nye, chapter II); φ = 30°.
    turn = np.deg2rad(30.0)
    pose = np.array([[np.cos(turn), np.sin(turn), 0.0], [-np.sin(turn), np.cos(turn), 0.0], [0.0, 0.0, 1.0]])
    cells = look("-1", pose=pose)
    assert cells[0]["sum"] == "xx = 0.75·11 + 0.866·12 + 0.25·22"
    assert cells[8]["sum"] == "zz = 33"


def test_a_minus_is_said() -> None:
    assert speak("turns 12 into −12, −0.4(1)") == "turns 12 into minus 12, minus 0.4(1)"
