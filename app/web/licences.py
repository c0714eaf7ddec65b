"""The packages that the tool runs on, with their licences, as their own installed metadata state them."""

from __future__ import annotations

import re
from dataclasses import dataclass
from functools import cache
from importlib.metadata import Distribution, PackageNotFoundError, distribution
from typing import Final

_NAME = re.compile(r"[A-Za-z0-9._-]+")
_LONGEST: Final = 80

DIRECT: Final = (
    "contourpy", "fastapi", "gemmi", "jinja2", "numpy", "pint", "plotly", "pydantic", "scipy", "starlette", "trimesh",
    "uvicorn", "websockets",
)  # fmt: skip
"""What the tool itself asks for; a test holds it against pyproject.toml."""


@dataclass(frozen=True)
class Licence:
    """One package: its name, installed version and stated licence."""

    package: str
    version: str
    licence: str


@cache
def list_licences() -> tuple[Licence, ...]:
    """Every package that the tool runs on, also those that its own packages need, by name."""
    found: dict[str, Licence] = {}
    waiting = list(DIRECT)
    while waiting:
        name = waiting.pop()
        key = _normalise(name)
        if key in found:
            continue
        try:
            package = distribution(name)
        except PackageNotFoundError:
            # Needed on another platform only.
            continue
        found[key] = Licence(package.metadata["Name"], package.version, state_licence(package))
        for need in package.requires or []:
            wanted = _NAME.match(need)
            if wanted is not None and "extra ==" not in need:
                waiting.append(wanted[0])
    return tuple(found[key] for key in sorted(found))


def state_licence(package: Distribution) -> str:
    """The licence as the package states it: its expression, else its classifiers, else the first line of its text."""
    stated = package.metadata
    for expression in stated.get_all("License-Expression") or []:
        return str(expression)
    classified = [
        line.rpartition(" :: ")[2] for line in stated.get_all("Classifier") or [] if line.startswith("License ::")
    ]
    if classified:
        return ", ".join(classified)
    lines = "\n".join(map(str, stated.get_all("License") or [])).strip().splitlines()
    return lines[0].strip()[:_LONGEST] if lines else "not stated"


def _normalise(name: str) -> str:
    return re.sub(r"[-_.]+", "-", name).lower()
