"""The one home of where templates and static files live.

In a checkout, and in an editable install, they are the top-level folders beside the package; a wheel carries them
inside the package. The plotting script is served from the installed plotly package, never copied.
"""

from __future__ import annotations

from functools import cache
from importlib.metadata import version
from importlib.util import find_spec
from pathlib import Path

_PACKAGE = Path(__file__).resolve().parent.parent


@cache
def _folder(name: str) -> Path:
    for candidate in (_PACKAGE / name, _PACKAGE.parent / name):
        if candidate.is_dir():
            return candidate
    raise FileNotFoundError(f"the installation is incomplete: there is no folder {name!r} in or beside {_PACKAGE}")


def templates_folder() -> Path:
    """The folder of the page templates."""
    return _folder("templates")


def static_folder() -> Path:
    """The folder of what is served under /static."""
    return _folder("static")


@cache
def plotly_script() -> Path:
    """The plotting script inside the installed plotly package, found without importing that package."""
    spec = find_spec("plotly")
    if spec is None or not spec.submodule_search_locations:
        raise FileNotFoundError("the package plotly is not installed")
    return Path(spec.submodule_search_locations[0]) / "package_data" / "plotly.min.js"


@cache
def plotly_version() -> str:
    """The version of the installed plotly package; it stands in the script's address, which may then be cached."""
    return version("plotly")
