"""Halfturn: crystal symmetry and second-rank property tensors at work.

From a notebook, ``import app`` gives the functions of ``app.notebook``; they are loaded when first used, so that
importing a part of the package does not import all of it.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from app.notebook import (
        define_crystal,
        define_pose,
        define_tensor,
        fit_readings,
        print_fit,
        read_crystal,
        read_readings,
    )

__all__ = [
    "define_crystal",
    "define_pose",
    "define_tensor",
    "fit_readings",
    "print_fit",
    "read_crystal",
    "read_readings",
]


def __getattr__(name: str) -> Any:
    if name not in __all__:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    from app import notebook

    return getattr(notebook, name)
