"""A short seeded run of schemathesis; the long one is part of ``python -m tests.fuzz.run``."""

from __future__ import annotations

import pytest

schemathesis = pytest.importorskip("schemathesis")

from app.web.server import create_app  # noqa: E402
from tests.fuzz.openapi import check_schema, list_operations  # noqa: E402

SEED = 20261201


def test_answers_are_as_the_document_describes_them() -> None:
    count = len(list_operations(create_app()))
    assert count > 30
    summary = check_schema(2 * count, SEED)
    assert summary.calls >= count
    assert not summary.faults, "\n".join(f"{route}: {fault}\n  {call}" for route, fault, call in summary.faults[:10])
