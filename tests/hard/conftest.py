"""One application for all hard cases, and how it is asked."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

Ask = Callable[..., Any]


@pytest.fixture(scope="session")
def client() -> TestClient:
    return TestClient(create_app(), base_url="http://127.0.0.1")


@pytest.fixture
def ask(client: TestClient) -> Ask:
    """Ask a call of version 1: its answer, or with ``refused`` its error, which must say what and what to do."""

    def send(route: str, body: dict[str, Any], refused: bool = False) -> Any:
        answer = client.post(f"/api/v1/{route}", json=body)
        assert answer.status_code == (422 if refused else 200), answer.text[:500]
        return answer.json()["error"] if refused else answer.json()

    return send
