"""What the tool rests on: few packages, bounded on both sides, with their licences told."""

from __future__ import annotations

import ast
import re
import sys
import tomllib
from importlib.metadata import packages_distributions

import pytest
from packaging.requirements import Requirement
from packaging.version import Version

from app.web.licences import DIRECT, list_licences
from tests.processes import ROOT

PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text("utf-8"))["project"]
NEEDED = [Requirement(text) for text in PROJECT["dependencies"]]


def imported() -> set[str]:
    """The packages from outside that the code of the tool imports, by the name of their distribution."""
    names: set[str] = set()
    for path in (ROOT / "app").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            if isinstance(node, ast.Import):
                names |= {alias.name.partition(".")[0] for alias in node.names}
            elif isinstance(node, ast.ImportFrom) and node.module and node.level == 0:
                names.add(node.module.partition(".")[0])
    homes = packages_distributions()
    outside = names - set(sys.stdlib_module_names) - {"app", "__future__"}
    return {re.sub(r"[-_.]+", "-", home).lower() for name in outside for home in homes[name]}


def test_every_package_that_is_imported_is_asked_for() -> None:
    # The rest comes with one that is asked for, and with that alone.
    carried = {"pydantic-core": "pydantic", "markupsafe": "jinja2", "anyio": "starlette"}
    needed = {need.name for need in NEEDED}
    for name in imported():
        assert name in needed or carried.get(name) in needed, name


@pytest.mark.parametrize("need", NEEDED, ids=lambda need: need.name)
def test_every_need_is_bounded_and_met(need: Requirement) -> None:
    bounds = {clause.operator: Version(clause.version) for clause in need.specifier}
    assert bounds.keys() == {">=", "<"}, "the lowest and the next untested major are both stated"
    installed = {entry.package.lower(): entry.version for entry in list_licences()}
    assert need.specifier.contains(installed[need.name.lower()])


def test_every_package_tells_its_licence() -> None:
    listed = list_licences()
    assert set(DIRECT) == {need.name for need in NEEDED}
    assert {name.lower() for name in DIRECT} <= {entry.package.lower() for entry in listed}
    assert not [entry for entry in listed if entry.licence == "not stated"]


def test_no_licence_binds_the_work_of_its_users() -> None:
    # MPL 2.0 (gemmi) binds changes to its own files only; the stronger ones are not among what is shipped beside.
    strong = re.compile(r"\bA?GPL|Affero|GNU General", re.IGNORECASE)
    assert not [entry for entry in list_licences() if strong.search(entry.licence)]


def test_the_lowest_versions_are_those_of_the_project() -> None:
    # The build installs these in an environment of their own and runs a part of the tests there.
    listed = (ROOT / ".ci" / "lowest.txt").read_text("utf-8").split()
    lowest = {
        f"{need.name}=={clause.version}" for need in NEEDED for clause in need.specifier if clause.operator == ">="
    }
    assert set(listed) == {pin + ".*" if pin.count(".") < 2 else pin for pin in lowest}
