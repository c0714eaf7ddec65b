"""The pages in Firefox, driven by its own WebDriver BiDi over a socket (https://w3c.github.io/webdriver-bidi/).

Where Firefox is missing this skips and says so. Without a graphics processor it has no WebGL: the surface is then told
to be missing, and everything else must work all the same.
"""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import time
from collections.abc import Iterator
from typing import Any

import httpx
import pytest
from websockets.sync.client import ClientConnection, connect

from tests.processes import Served

SHIFT_LEFT, LEFT, ESCAPE, ENTER = "\ue008", "\ue012", "\ue00c", "\ue007"


class Firefox:
    """One tab of a Firefox without a window."""

    def __init__(self, socket: ClientConnection) -> None:
        self._socket, self._count = socket, 0
        self.faults: list[str] = []
        self.call("session.new", capabilities={})
        self.call("session.subscribe", events=["log.entryAdded"])
        self.tab = self.call("browsingContext.create", type="tab")["context"]
        self.call("browsingContext.setViewport", context=self.tab, viewport={"width": 1440, "height": 900})

    def call(self, method: str, **params: Any) -> Any:
        self._count += 1
        self._socket.send(json.dumps({"id": self._count, "method": method, "params": params}))
        while True:
            told = json.loads(self._socket.recv(timeout=60))
            if told.get("method") == "log.entryAdded" and told["params"]["level"] == "error":
                self.faults.append(str(told["params"].get("text")))
            if told.get("id") == self._count:
                assert told["type"] == "success", told
                return told["result"]

    def ask(self, expression: str) -> Any:
        told = self.call("script.evaluate", expression=expression, target={"context": self.tab}, awaitPromise=True)
        assert told["type"] == "success", told
        return told["result"].get("value")

    def wait(self, expression: str) -> None:
        end = time.monotonic() + 15
        while not self.ask(expression):
            assert time.monotonic() < end, expression
            time.sleep(0.1)

    def open(self, url: str) -> None:
        self.call("browsingContext.navigate", context=self.tab, url=url, wait="complete")

    def press(self, *keys: str, held: str | None = None) -> None:
        around = ([{"type": "keyDown", "value": held}], [{"type": "keyUp", "value": held}]) if held else ([], [])
        strokes = [{"type": kind, "value": key} for key in keys for kind in ("keyDown", "keyUp")]
        acts = [{"type": "key", "id": "keys", "actions": [*around[0], *strokes, *around[1]]}]
        self.call("input.performActions", context=self.tab, actions=acts)

    def drag(self, kind: str, start: tuple[float, float], right: int, down: int) -> None:
        x, y = round(start[0]), round(start[1])
        moves = [
            {"type": "pointerMove", "x": x, "y": y},
            {"type": "pointerDown", "button": 0},
            {"type": "pointerMove", "x": x + right, "y": y + down, "duration": 250},
            {"type": "pointerUp", "button": 0},
        ]
        hand = {"type": "pointer", "id": kind, "parameters": {"pointerType": kind}, "actions": moves}
        self.call("input.performActions", context=self.tab, actions=[hand])


@pytest.fixture(scope="module")
def firefox(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Firefox]:
    found = shutil.which("firefox-esr") or shutil.which("firefox")
    if found is None:
        pytest.skip("Firefox is not installed, so nothing was tested in it")
    profile = tmp_path_factory.mktemp("profile")
    command = [found, "--headless", "--no-remote", "--profile", str(profile), "--remote-debugging-port", "0"]
    environment = {**os.environ, "HOME": str(profile), "MOZ_HEADLESS": "1"}
    process = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True, env=environment)
    try:
        assert process.stderr is not None
        line = next((line for line in process.stderr if "WebDriver BiDi listening" in line), None)
        if line is None:
            pytest.skip("Firefox did not start")
        with connect(f"{line.split()[-1]}/session", max_size=None) as socket:
            yield Firefox(socket)
    finally:
        process.terminate()
        process.communicate(timeout=20)


@pytest.fixture
def sample(served: Served) -> str:
    listed = httpx.get(f"{served.url}api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == "Demonstration crystal")
    return str(httpx.post(f"{served.url}api/samples", json={"from": source}).json()["id"])


def test_every_page_opens_without_a_fault_and_fits(firefox: Firefox, served: Served, sample: str) -> None:
    firefox.faults.clear()
    for name in ("tensor", "readings", "cut", "series", "sheet"):
        firefox.open(f"{served.url}samples/{sample}/{name}")
        assert firefox.ask("document.documentElement.scrollWidth <= innerWidth"), name
        assert firefox.ask("Boolean(document.querySelector('h1, h2').textContent.trim())"), name
    # Without a graphics processor WebGL says so itself.
    assert [fault for fault in firefox.faults if "WebGL" not in fault] == []


def test_keys_mouse_and_finger_turn_and_look(firefox: Firefox, served: Served, sample: str) -> None:
    firefox.open(f"{served.url}samples/{sample}/tensor")
    firefox.wait("document.querySelector('svg.front path.outline') !== null")
    time.sleep(0.5)
    matrix, drawing = (
        "document.querySelector('#specimen-matrix').innerText",
        "document.querySelector('svg.front').innerHTML",
    )

    def changes(what: str, act: Any) -> bool:
        before = firefox.ask(what)
        act()
        time.sleep(0.7)
        return bool(firefox.ask(what) != before)

    firefox.ask("document.getElementById('figure').focus()")
    assert changes(matrix, lambda: firefox.press(LEFT))
    assert not changes(matrix, lambda: firefox.press(LEFT, held=SHIFT_LEFT))
    assert changes(drawing, lambda: firefox.press(LEFT, held=SHIFT_LEFT))
    box = json.loads(firefox.ask("JSON.stringify(document.querySelector('.stage').getBoundingClientRect())"))
    ground = (box["x"] + 10, box["y"] + box["height"] - 40)
    middle = (box["x"] + box["width"] / 2, box["y"] + box["height"] / 2)
    for kind in ("mouse", "touch"):
        assert not changes(matrix, lambda kind=kind: firefox.drag(kind, ground, 50, -20))
        assert changes(drawing, lambda kind=kind: firefox.drag(kind, ground, 50, -20))
        assert changes(matrix, lambda kind=kind: firefox.drag(kind, middle, 40, 15))


def test_lists_terms_views_and_bars(firefox: Firefox, served: Served, sample: str) -> None:
    firefox.open(f"{served.url}samples/{sample}/tensor")
    firefox.wait("document.querySelector('svg.front path.outline') !== null")
    firefox.press("?")
    firefox.wait("document.getElementById('keys-dialog').open")
    firefox.press(ESCAPE)
    firefox.wait("!document.getElementById('keys-dialog').open")
    firefox.ask("document.querySelector('main a.term').focus()")
    firefox.press(ENTER)
    firefox.wait("document.querySelector('#term-note:popover-open')?.textContent.includes('Source')")
    firefox.press(ESCAPE)
    firefox.wait("document.activeElement.className === 'term'")
    firefox.ask("document.querySelector('[data-matrix-view=dots]').click()")
    firefox.wait("document.querySelectorAll('#crystal-matrix circle.heavy').length === 5")
    copied = firefox.ask(
        "(() => { const all = getSelection(); all.selectAllChildren(document.querySelector('#sentence .l1'));"
        " return all.toString(); })()"
    )
    assert "n(−201)" in copied
    firefox.press("w")
    firefox.wait("document.querySelector('main.showing') !== null")
    firefox.press("w")
    firefox.wait("document.querySelector('main.showing') === null")
