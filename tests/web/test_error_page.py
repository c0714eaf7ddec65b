"""Errors as pages for people, as JSON for programs."""

from __future__ import annotations

from pathlib import Path

import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

HTML = {"accept": "text/html,application/xhtml+xml"}


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path / "data"), base_url="http://127.0.0.1")


@pytest.mark.parametrize("path", ["/nothing", "/samples/0123456789ab/tensor", "/guide/nothing", "/sheets/77"])
def test_a_browser_gets_a_page(client: TestClient, path: str) -> None:
    answer = client.get(path, headers=HTML)
    assert answer.status_code == 404
    assert answer.headers["content-type"].startswith("text/html")
    assert "<h1>" in answer.text
    assert 'href="/samples"' in answer.text
    # What a program gets for the same address says the same.
    told = client.get(path).json()["error"]["message"]
    assert told.split("“")[0][:20] in answer.text


def test_what_was_asked_for_is_shown_as_text(client: TestClient) -> None:
    answer = client.get("/<script>alert(1)</script>", headers=HTML)
    assert answer.status_code == 404
    assert "<script>alert" not in answer.text


@pytest.mark.parametrize("path", ["/api/samples/0123456789ab", "/static/nothing.css", "/api/v1/nothing"])
def test_addresses_of_programs_keep_the_one_shape(client: TestClient, path: str) -> None:
    answer = client.get(path, headers=HTML)
    assert answer.status_code == 404
    assert set(answer.json()["error"]) >= {"message", "field", "hint"}
