"""What tests of every package may use."""

from __future__ import annotations

from collections.abc import Iterator

import pytest

from tests.processes import Served, serving


@pytest.fixture(scope="session")
def served(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Served]:
    """One server for all tests that only ask."""
    with serving(tmp_path_factory.mktemp("served") / "data") as server:
        yield server
