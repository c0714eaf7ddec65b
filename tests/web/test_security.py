"""Who may ask, how much may be sent, and what a browser may do with the answer."""

from __future__ import annotations

import http.client
import json
import socket
from collections.abc import Iterator
from urllib.parse import urlsplit

import pytest
from fastapi.testclient import TestClient
from starlette.testclient import WebSocketDenialResponse
from starlette.websockets import WebSocketDisconnect

from app.web.security import MAX_BODY_BYTES
from tests.processes import Served

CIF = "/probe/cif"


@pytest.mark.parametrize("host", ["127.0.0.1", "127.0.0.1:8010", "localhost", "LOCALHOST:99", "[::1]", "[::1]:8010"])
def test_loopback_hosts_are_welcome(client: TestClient, host: str) -> None:
    assert client.get("/calls", headers={"Host": host}).status_code == 200
    assert client.get("/calls", headers={"Host": host, "Origin": f"http://{host}"}).status_code == 200


@pytest.mark.parametrize(
    "host",
    [
        "example.org",
        "testserver",
        "127.0.0.1.example.org",
        "localhost.example.org:8010",
        "localhost.",
        "127.0.0.2",
        "0.0.0.0",
        "127.0.0.1:8010@example.org",
        "127.0.0.1:",
        "::1",
        "",
    ],
)
def test_foreign_hosts_are_refused(client: TestClient, host: str) -> None:
    answer = client.get("/openapi.json", headers={"Host": host})
    assert answer.status_code == 403
    assert answer.json()["error"]["field"] == "Host"
    assert answer.json()["error"]["hint"]


@pytest.mark.parametrize(
    "origin",
    [
        "http://example.org",
        "null",
        "https://127.0.0.1:8010",
        "http://127.0.0.1:8011",
        "http://127.0.0.1",
        "http://localhost:8010",
        "http://127.0.0.1:8010/",
        "",
    ],
)
def test_foreign_origins_are_refused(client: TestClient, origin: str) -> None:
    answer = client.post(CIF, json={"text": "data_"}, headers={"Host": "127.0.0.1:8010", "Origin": origin})
    assert answer.status_code == 403
    assert answer.json()["error"]["field"] == "Origin"


def test_a_socket_is_held_to_the_same(client: TestClient) -> None:
    with client.websocket_connect(
        "/probe/live", headers={"Host": "127.0.0.1:1", "Origin": "http://127.0.0.1:1"}
    ) as live:
        live.send_text("turn")
        assert live.receive_text() == "turn"
    for headers in (
        {"Host": "127.0.0.1:1", "Origin": "http://example.org"},
        {"Host": "example.org"},
    ):
        with (
            pytest.raises(WebSocketDenialResponse) as refusal,
            client.websocket_connect("/probe/live", headers=headers),
        ):
            pass
        assert refusal.value.status_code == 403
        assert refusal.value.json()["error"]["message"]


def test_an_unknown_socket_is_refused(client: TestClient) -> None:
    with pytest.raises(WebSocketDisconnect), client.websocket_connect("/nowhere", headers={"Host": "127.0.0.1"}):
        pass


def test_the_largest_body_passes_and_one_byte_more_does_not(client: TestClient) -> None:
    frame = len(b'{"text":""}')
    fits = b'{"text":"' + b"x" * (MAX_BODY_BYTES - frame) + b'"}'
    assert len(fits) == MAX_BODY_BYTES
    assert client.post(CIF, content=fits).json() == {"characters": MAX_BODY_BYTES - frame}
    answer = client.post(CIF, content=fits + b" ")
    assert answer.status_code == 413
    assert "8 MiB" in answer.json()["error"]["message"]


def test_a_body_without_a_stated_length_is_counted(client: TestClient) -> None:
    def pieces(count: int) -> Iterator[bytes]:
        yield b'{"text":"'
        for _ in range(count):
            yield b"x" * 2**20
        yield b'"}'

    assert client.post(CIF, content=pieces(7)).json() == {"characters": 7 * 2**20}
    assert client.post(CIF, content=pieces(8)).status_code == 413


def test_too_large_a_body_over_a_real_connection(served: Served) -> None:
    address = urlsplit(served.url)
    # Stated: refused before it is sent.
    connection = http.client.HTTPConnection(address.hostname or "", address.port, timeout=10)
    connection.putrequest("POST", "/api/v1/form")
    connection.putheader("Content-Length", str(9 * 2**20))
    connection.endheaders()
    answer = connection.getresponse()
    assert answer.status == 413
    assert json.loads(answer.read())["error"]["message"]
    connection.close()


def test_no_host_at_all_is_refused(served: Served) -> None:
    address = urlsplit(served.url)
    with socket.create_connection((address.hostname or "", address.port or 0), timeout=10) as connection:
        connection.sendall(b"GET / HTTP/1.0\r\n\r\n")
        status_line = connection.recv(4096).split(b"\r\n")[0]
    assert b" 403 " in status_line


@pytest.mark.parametrize(
    ("method", "path", "status"),
    [
        ("GET", "/calls", 200),
        ("GET", "/static/base.css", 200),
        ("GET", "/static/plotly.min.js", 200),
        ("GET", "/openapi.json", 200),
        ("GET", "/nowhere", 404),
        ("GET", "/probe/cif", 405),
        ("POST", "/probe/cif", 422),
        ("GET", "/probe/raise/bug", 500),
    ],
)
def test_every_answer_restrains_the_browser(client: TestClient, method: str, path: str, status: int) -> None:
    answer = client.request(method, path)
    assert answer.status_code == status
    policy = dict(part.split(" ", 1) for part in answer.headers["Content-Security-Policy"].split("; "))
    assert policy["script-src"] == "'self'"
    assert policy["default-src"] == "'self'"
    assert policy["frame-ancestors"] == "'none'"
    assert answer.headers["X-Content-Type-Options"] == "nosniff"
    assert answer.headers["Referrer-Policy"] == "same-origin"
    assert "Cache-Control" in answer.headers


def test_refusals_restrain_the_browser_too(client: TestClient) -> None:
    for answer in (
        client.get("/", headers={"Host": "example.org"}),
        client.post(CIF, content=b"x" * (MAX_BODY_BYTES + 1)),
    ):
        assert answer.status_code in (403, 413)
        assert "Content-Security-Policy" in answer.headers
