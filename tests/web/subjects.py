"""Invented subjects for the tests of what the front page draws and says."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal, build_crystal
from app.tensor.kind import Kind
from app.tensor.principal import find_principal
from app.tensor.tensor import build_tensor
from app.web.scene import Subject
from app.web.turning import View
from tests.crystal.reference import CELLS

FloatArray = npt.NDArray[np.float64]

TRICLINIC = build_crystal(CELLS["triclinic"], "1")
MONOCLINIC = build_crystal(CELLS["monoclinic b"], "2/m")

# One of each pattern of signs, none along an axis.
ELLIPSOID = np.array([[13.2, 0.7, 1.85], [0.7, 24.6, -0.4], [1.85, -0.4, 15.9]])
ONE_SHEET = np.array([[6.0, 1.0, 0.5], [1.0, 3.0, 0.2], [0.5, 0.2, -4.0]])
TWO_SHEETS = np.array([[6.0, 1.0, 0.5], [1.0, -3.0, 0.2], [0.5, 0.2, -4.0]])
IMAGINARY = -ELLIPSOID
PATTERNS = {"ellipsoid": ELLIPSOID, "one sheet": ONE_SHEET, "two sheets": TWO_SHEETS, "imaginary": IMAGINARY}


def make_subject(matrix: Any, crystal: Crystal = TRICLINIC, kind: Kind | None = None, **more: Any) -> Subject:
    """A subject of a matrix in the crystal frame, or of free cells by label.

    ``more`` are a covariance and members of the subject.
    """
    given: dict[str, Any] = {"free": matrix} if isinstance(matrix, dict) else {"matrix": np.asarray(matrix)}
    tensor = build_tensor(crystal, kind or Kind(), covariance=more.pop("covariance", None), **given)
    fields = {"key": "invented", "unit": "W/(m·K)", "other": None, "part": (5.0, 5.0, 6.0), **more}
    return Subject(crystal=crystal, tensor=tensor, principal=find_principal(tensor.estimate), **fields)


def random_rotation(seed: int) -> FloatArray:
    """A proper rotation drawn by numpy alone: the orthogonal factor of a normal matrix."""
    factor = np.linalg.qr(np.random.default_rng(seed).normal(size=(3, 3)))[0]
    rotation: FloatArray = factor * np.sign(np.linalg.det(factor))
    return rotation


def random_view(seed: int) -> View:
    """The crystal held, seen from somewhere."""
    return View("crystal", random_rotation(seed))
