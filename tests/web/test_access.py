"""Who gets in: names of this machine, other sites, the token beyond loopback, files, and what the log holds."""

from __future__ import annotations

import ast
import html
import logging
import re
import socket
from pathlib import Path

import httpx
import pytest
from fastapi.testclient import TestClient
from starlette.testclient import WebSocketDenialResponse

from app.errors import InputError
from app.web.access import Access, check_token, is_loopback, make_token, name_machine
from app.web.server import create_app
from app.web.serving import bind_host, decide_access, write_address
from tests.processes import ROOT, serving

TOKEN = "an-invented-token_0123456789"
HERE = "http://192.0.2.7:8010"


@pytest.fixture
def guarded() -> TestClient:
    """A server beyond loopback, addressed by a number kept for documentation (RFC 5737)."""
    access = Access(token=TOKEN, beyond=True, names=frozenset({"bench", "bench.local"}), port=8010)
    return TestClient(create_app(access=access), base_url=HERE, raise_server_exceptions=False)


@pytest.mark.parametrize("site", ["cross-site", "same-site", "", "something"])
@pytest.mark.parametrize(
    ("method", "path", "media_type"),
    [
        # What a foreign page can send without being asked first: a form, text, a picture, a script.
        ("POST", "/api/v1/form", "text/plain"),
        ("POST", "/api/samples", "application/x-www-form-urlencoded"),
        ("GET", "/api/properties", None),
        ("GET", "/static/base.css", None),
    ],
)
def test_what_another_site_asks_for_is_refused(
    client: TestClient, site: str, method: str, path: str, media_type: str | None
) -> None:
    headers = {"Sec-Fetch-Site": site, "Sec-Fetch-Mode": "no-cors"} | (
        {"Content-Type": media_type} if media_type else {}
    )
    answer = client.request(method, path, headers=headers, content=b"{}" if media_type else None)
    assert answer.status_code == 403
    assert answer.json()["error"]["field"] == "Sec-Fetch-Site"


def test_a_link_from_elsewhere_opens_a_page_but_sends_no_form(client: TestClient) -> None:
    opened = {"Sec-Fetch-Site": "cross-site", "Sec-Fetch-Mode": "navigate", "Sec-Fetch-Dest": "document"}
    assert client.get("/calls", headers=opened).status_code == 200
    assert client.post("/api/samples", headers=opened, json={}).status_code == 403
    framed = {**opened, "Sec-Fetch-Dest": "iframe"}
    assert client.get("/calls", headers=framed).status_code == 403


def test_own_pages_are_welcome(client: TestClient) -> None:
    for site in ("same-origin", "none"):
        assert client.get("/calls", headers={"Sec-Fetch-Site": site}).status_code == 200


def test_without_the_token_nothing_is_told(guarded: TestClient) -> None:
    for path in ("/", "/calls", "/openapi.json", "/static/base.css", "/api/v1/form", "/nowhere"):
        answer = guarded.get(path)
        assert answer.status_code == 401, path
        assert answer.headers["WWW-Authenticate"] == "Bearer"
        assert TOKEN not in answer.text
    for wrong in (TOKEN[:-1], TOKEN + "x", TOKEN.upper(), "", "é"):
        assert guarded.get("/calls", headers={"Authorization": f"Bearer {wrong}".encode()}).status_code == 401
        assert guarded.get("/calls", params={"token": wrong}).status_code == 401
        assert guarded.get("/calls", headers={"Cookie": f"halfturn-8010={wrong}".encode()}).status_code == 401
    assert guarded.get(f"/calls?token={TOKEN}&token={TOKEN}").status_code == 401


def test_the_token_becomes_a_cookie_and_leaves_the_address(guarded: TestClient) -> None:
    answer = guarded.get(f"/calls?token={TOKEN}&a=1%262")
    assert answer.status_code == 200
    cookie = answer.headers["Set-Cookie"]
    assert cookie.startswith(f"halfturn-8010={TOKEN};")
    assert "HttpOnly" in cookie
    assert "SameSite=strict" in cookie
    assert answer.headers["Cache-Control"] == "no-store"
    assert TOKEN not in answer.text
    (target,) = re.findall(r'content="0;url=([^"]*)"', answer.text)
    assert html.unescape(target) == "/calls?a=1%262"
    assert guarded.get("/calls").status_code == 200, "the client kept the cookie"
    with guarded.websocket_connect("/live", headers={"Host": "192.0.2.7:8010", "Cookie": cookie.split(";")[0]}) as live:
        live.send_text("{}")
        assert live.receive_json()["type"] == "error"


def test_the_way_in_leads_nowhere_else(guarded: TestClient) -> None:
    answer = guarded.get(f"{HERE}//example.org/%22%3E?token={TOKEN}")
    (target,) = re.findall(r'content="0;url=([^"]*)"', answer.text)
    assert html.unescape(target) == '/example.org/">'
    assert '/">' not in target


def test_a_program_shows_the_token_in_a_header(guarded: TestClient) -> None:
    assert guarded.get("/calls", headers={"Authorization": f"Bearer {TOKEN}"}).status_code == 200
    assert guarded.get("/calls", headers={"Authorization": f"Basic {TOKEN}"}).status_code == 401


def test_odd_cookies_of_others_do_not_hide_ours(guarded: TestClient) -> None:
    odd = f'a={{"x":1,}}; =; ;b="\x01; halfturn-9999=other; halfturn-8010={TOKEN}'
    assert guarded.get("/calls", headers={"Cookie": odd}).status_code == 200


def test_the_live_channel_asks_for_the_token_too(guarded: TestClient) -> None:
    for headers in ({}, {"Cookie": "halfturn-8010=wrong"}):
        with (
            pytest.raises(WebSocketDenialResponse) as refusal,
            guarded.websocket_connect("/live", headers={"Host": "192.0.2.7:8010", **headers}),
        ):
            pass
        assert refusal.value.status_code == 401
    # The address of a socket lets nobody in: a page's own scripts cannot keep it out of logs.
    with (
        pytest.raises(WebSocketDenialResponse),
        guarded.websocket_connect(f"/live?token={TOKEN}", headers={"Host": "192.0.2.7:8010"}),
    ):
        pass


@pytest.mark.parametrize(
    ("host", "welcome"),
    [
        ("192.0.2.7:8010", True), ("[2001:db8::7]:8010", True), ("bench:8010", True),
        ("BENCH.local", True),
        ("localhost:8010", True), ("example.org", False),
        ("bench.example.org", False), ("192.0.2.7.example.org", False),
        ("[example.org]", False), ("192.0.2.7@example.org", False), ("bench:", False), ("", False),
    ],
)  # fmt: skip
def test_a_rebound_name_gets_nothing_beyond_loopback(guarded: TestClient, host: str, welcome: bool) -> None:
    headers = {"Host": host, "Authorization": f"Bearer {TOKEN}"}
    assert guarded.get("/calls", headers=headers).status_code == (200 if welcome else 403)


def test_numbers_of_other_machines_are_refused_on_loopback() -> None:
    assert not Access().welcomes_host("192.0.2.7:8010")
    assert not Access().welcomes_host("127.0.0.2")


@pytest.mark.parametrize("text", ["", "short", "x" * 15, "x" * 201, "with space and more", "ümlaut-umlaut-umlaut"])
def test_a_token_that_is_none(text: str) -> None:
    with pytest.raises(InputError) as refusal:
        check_token(text)
    assert refusal.value.field == "--token"
    assert check_token("x" * 16) == "x" * 16
    assert check_token("x" * 200) == "x" * 200


def test_made_tokens_are_fit_and_never_the_same() -> None:
    made = {make_token() for _ in range(200)}
    assert len(made) == 200
    assert all(check_token(token) == token for token in made)


def test_beyond_loopback_there_is_always_a_token() -> None:
    with bind_host("0.0.0.0", 0) as listener:
        access = decide_access(listener, "0.0.0.0", None)
        assert access.beyond
        assert access.token
        assert write_address(listener, access).endswith(f":{access.port}/?token={access.token}")
    for host in ("127.0.0.1", "localhost"):
        with bind_host(host, 0) as listener:
            assert is_loopback(listener.getsockname()[0])
            assert decide_access(listener, host, None).token is None
            assert decide_access(listener, host, TOKEN).token == TOKEN
    assert socket.gethostname().lower() in name_machine("0.0.0.0")


def test_a_host_that_is_not_of_this_machine_is_told() -> None:
    for host in ("192.0.2.7", "no-such-name.invalid"):
        with pytest.raises(InputError) as refusal:
            bind_host(host, 0)
        assert refusal.value.field == "--host"


def test_the_server_says_what_it_means_to_listen_for_others(tmp_path: Path) -> None:
    with serving(tmp_path / "data", "--host", "0.0.0.0") as server:
        found = re.search(r":([0-9]+)/\?token=([\w-]+)$", server.url)
        assert found, server.url
        port, token = found.groups()
        assert httpx.get(f"http://127.0.0.1:{port}/calls").status_code == 401
        shown = {"Authorization": f"Bearer {token}"}
        assert httpx.get(f"http://127.0.0.1:{port}/calls", headers=shown).status_code == 200
        server.process.terminate()
        told = server.process.communicate(timeout=10)[1]
    assert "Nothing is encrypted" in told
    assert "can be reached from other machines" in told
    assert token not in told


# Files ----------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "path",
    [
        "/static/../pyproject.toml", "/static/%2e%2e/pyproject.toml", "/static/..%2fpyproject.toml",
        "/static/%2e%2e%2fapp%2fversion.py", "/static/..%5cpyproject.toml", "/static/....//pyproject.toml",
        "/static//etc/passwd", "/static/%2fetc%2fpasswd", "/static/C:%5cWindows%5cwin.ini", "/static/CON",
        "/static/base.css%00.txt", "/static/NUL.css", "/static/base.css::$DATA",
        "/static/0123456789ab/../../app/cli.py",
        "/static/0123456789ab/%2e%2e/%2e%2e/pyproject.toml", "/static/" + "a/" * 2000, "/static/" + "x" * 5000,
        "/static/", "/static/.", "/static/%ff%fe", "/guide/..%2f..%2fbase", "/guide/%2e%2e",
    ],
)  # fmt: skip
def test_no_address_reaches_a_file_that_is_not_served(client: TestClient, path: str) -> None:
    answer = client.get(path)
    assert answer.status_code in (400, 404), answer.text
    assert "error" in answer.json()


def test_a_link_out_of_the_folder_is_not_followed(tmp_path: Path) -> None:
    from fastapi import FastAPI

    from app.web.static_files import RevalidatedFiles

    (tmp_path / "secret.txt").write_text("secret")
    inside = tmp_path / "static"
    inside.mkdir()
    (inside / "link.txt").symlink_to(tmp_path / "secret.txt")
    (inside / "plain.txt").write_text("plain")
    app = FastAPI()
    app.mount("/static", RevalidatedFiles(directory=inside))
    client = TestClient(app)
    assert client.get("/static/plain.txt").text == "plain"
    assert client.get("/static/link.txt").status_code == 404


@pytest.mark.parametrize("name", ["..%2f..%2fsamples", "CON", "%00", "a" * 3000, "%2e%2e"])
def test_no_id_of_a_sample_reaches_the_file_system(tmp_path: Path, name: str) -> None:
    app = create_app(tmp_path / "data")
    with TestClient(app, base_url="http://127.0.0.1", raise_server_exceptions=False) as client:
        for path in (f"/api/samples/{name}", f"/api/samples/{name}/out/cell.cif", f"/samples/{name}/tensor"):
            assert client.get(path).status_code in (404, 422), path
    kept = {path.name.split(".")[0] for path in (tmp_path / "data").rglob("*")}
    assert len(kept) <= 1, "nothing but the store's own file"


# The log --------------------------------------------------------------------------------------------------------------


def test_the_log_holds_no_data_of_the_sample(
    client: TestClient, caplog: pytest.LogCaptureFixture, capfd: pytest.CaptureFixture[str]
) -> None:
    secret = "Geheimer-Kristall-4711"
    with caplog.at_level(logging.DEBUG):
        client.post("/api/v1/form", json={"crystal": {"cell": [1, 1, 1, 90, 90, 90], "group": secret}, "tensor": {}})
        client.post("/api/v1/form", json={secret: secret})
        client.post("/api/v1/form", content=f'{{"{secret}'.encode())
        client.get(f"/{secret}")
        client.get(f"/probe/raise/input?name={secret}")
        client.get(f"/probe/raise/bad-detail?name={secret}")
        answer = client.post(f"/probe/fail/{secret}", json={"text": secret})
        assert answer.status_code == 500
        with client.websocket_connect("/live", headers={"Host": "127.0.0.1"}) as live:
            live.send_text(f'{{"type": "{secret}"}}')
            live.receive_text()
    # The client of the test logs the addresses that it asks for; the server does not.
    told = "\n".join(
        logging.Formatter().format(record)
        for record in caplog.records
        if not record.name.startswith(("httpx", "httpcore"))
    )
    captured = capfd.readouterr()
    assert "unexpected error" in told, "the failure itself is logged"
    assert "probe_fail" in told, "and where it happened"
    assert secret not in told + captured.out + captured.err


def test_nothing_in_the_package_opens_a_connection_of_its_own() -> None:
    # The usual ways out, by the package that is imported; what the pages ask for is watched in a browser.
    ways = {"urllib.request", "requests", "httpx", "aiohttp", "http.client", "ftplib", "smtplib", "urllib3"}
    for path in (ROOT / "app").rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            if isinstance(node, ast.Import):
                assert not ways & {alias.name for alias in node.names}, path
            elif isinstance(node, ast.ImportFrom) and node.level == 0:
                assert node.module not in ways, path
                assert node.module != "urllib" or all(alias.name != "request" for alias in node.names), path
