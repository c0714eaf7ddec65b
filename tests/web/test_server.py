"""The plain page, the static files and the OpenAPI document."""

from __future__ import annotations

import re
from html.parser import HTMLParser
from pathlib import Path

import plotly.offline
import pytest
from fastapi.testclient import TestClient

from app.version import VERSION
from app.web import static_files
from app.web.resources import plotly_script
from app.web.server import create_app


class Addresses(HTMLParser):
    """Collects what a page refers to, and what stands inline."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[str] = []
        self.inline: list[str] = []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.found += [value or "" for name, value in attrs if name in ("href", "src", "action")]
        names = {name for name, _ in attrs}
        if (tag == "script" and "src" not in names) or tag == "style" or any(name.startswith("on") for name in names):
            self.inline.append(tag)


def test_the_plain_page_needs_nothing_from_outside(tmp_path: Path) -> None:
    client = TestClient(create_app(tmp_path), base_url="http://127.0.0.1")
    answer = client.get("/calls")
    assert answer.headers["Content-Type"].startswith("text/html")
    page = Addresses()
    page.feed(answer.text)
    assert page.inline == []
    assert "/openapi.json" in page.found
    for address in page.found:
        if address.startswith("#"):
            continue
        assert address.startswith("/"), address
        assert not address.startswith("//"), address
        assert client.get(address).status_code == 200, address


def test_the_plain_page_lists_the_calls(client: TestClient) -> None:
    text = client.get("/calls").text
    for path in client.get("/openapi.json").json()["paths"]:
        assert path in text


def test_head_is_answered(client: TestClient) -> None:
    for path in ("/calls", "/static/base.css", "/static/plotly.min.js"):
        answer = client.head(path)
        assert answer.status_code == 200
        assert answer.content == b""


def test_the_style_refers_to_nothing_outside(client: TestClient) -> None:
    style = client.get("/static/base.css").text
    assert "prefers-color-scheme: dark" in style
    assert not re.search(r"url\(|@import|https?:", style)


def test_the_plotting_script_is_the_installed_one(client: TestClient) -> None:
    # plotly's own function is the outside reference for which file is the script.
    answer = client.get("/static/plotly.min.js")
    assert answer.text == plotly.offline.get_plotlyjs()
    assert plotly_script().is_file()
    assert answer.headers["Content-Type"].startswith("text/javascript")


def test_static_files_are_asked_about_again_and_not_sent_again(client: TestClient) -> None:
    for path in ("/static/base.css", "/static/plotly.min.js"):
        first = client.get(path)
        assert first.headers["Cache-Control"] == "no-cache"
    again = client.get("/static/base.css", headers={"If-None-Match": client.get("/static/base.css").headers["ETag"]})
    assert again.status_code == 304
    assert again.content == b""


def test_the_plotting_script_may_be_kept_under_its_version(client: TestClient) -> None:
    version = plotly.__version__
    assert "immutable" in client.get(f"/static/plotly.min.js?v={version}").headers["Cache-Control"]
    assert client.get("/static/plotly.min.js?v=0.0.0").headers["Cache-Control"] == "no-cache"


@pytest.mark.parametrize("path", ["/docs", "/redoc", "/docs/oauth2-redirect"])
def test_no_page_that_loads_from_outside(client: TestClient, path: str) -> None:
    assert client.get(path).status_code == 404


def test_the_openapi_document_describes_itself_and_the_errors(client: TestClient) -> None:
    document = client.get("/openapi.json").json()
    assert document["info"]["title"] == "Halfturn"
    assert document["info"]["version"] == VERSION
    assert document["info"]["description"]
    assert "HTTPValidationError" not in document.get("components", {}).get("schemas", {})
    for path, methods in document["paths"].items():
        for operation in methods.values():
            assert operation["summary"], path
            assert operation["responses"]["422"]["content"]["application/json"]["schema"]["$ref"].endswith(
                "ErrorAnswer"
            )


def test_pages_name_static_files_by_their_content(client: TestClient) -> None:
    page = Addresses()
    page.feed(client.get("/calls").text)
    files = [address for address in page.found if address.startswith("/static/")]
    assert files
    for address in files:
        folder, name = re.fullmatch(r"/static/([0-9a-f]{12})/(.+)", address).groups()  # type: ignore[union-attr]
        kept = client.get(address)
        assert "immutable" in kept.headers["Cache-Control"]
        plain = client.get(f"/static/{name}")
        assert plain.content == kept.content
        # Under the address of another content it is the same file, but nobody may keep it.
        other = client.get(f"/static/{folder[::-1]}/{name}" if folder != folder[::-1] else f"/static/{'0' * 12}/{name}")
        assert other.content == kept.content
        assert other.headers["Cache-Control"] == "no-cache"


def test_the_fingerprint_is_of_every_static_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "inner").mkdir()
    (tmp_path / "inner" / "a.js").write_text("one")
    monkeypatch.setattr(static_files, "static_folder", lambda: tmp_path)

    def take() -> str:
        static_files.fingerprint.cache_clear()
        return static_files.fingerprint()

    try:
        first = take()
        assert take() == first
        (tmp_path / "inner" / "a.js").write_text("two")
        second = take()
        (tmp_path / "inner" / "a.js").rename(tmp_path / "inner" / "b.js")
        assert len({first, second, take()}) == 3
    finally:
        static_files.fingerprint.cache_clear()
