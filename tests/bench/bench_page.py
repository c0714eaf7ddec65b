"""One turn in the page beside a bare relayout of the same scene's camera, in Chromium."""

from __future__ import annotations

import json
import statistics
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from playwright.sync_api import Page, sync_playwright
from websockets.sync.client import connect

from tests.bench.bench_live import live_address, prepare, turn_message
from tests.bench.conftest import Beside
from tests.bench.server import Client, serve_with_floors
from tests.browser.conftest import FLAGS, sandbox_flags

TURNS = 60

# Both run in the page: the case does what the page does with an answer, the floor only moves the camera to the same
# places. They take turns, one step each per frame, so that both meet the same machine.
MEASURE = """async ({ answers, interleave }) => {
  const [tensor] = [...document.querySelectorAll('script[type="module"]')].filter((s) => /tensor\\.js/.test(s.src));
  const beside = (name) => import(tensor.src.replace(/tensor\\.js.*$/, name));
  const [{ showPose }, { drawOverlay }] = await Promise.all([beside("matrix.js"), beside("overlay.js")]);
  const plot = document.getElementById("plot");
  const [back, front] = [...document.querySelectorAll("svg.draw")];
  const vector = ([x, y, z]) => ({ x, y, z });
  const set = { center: { x: 0, y: 0, z: 0 }, projection: { type: "orthographic" } };
  const place = ({ eye, up }) => ({ "scene.camera": { eye: vector(eye), up: vector(up), ...set } });
  const move = async ({ camera }) => window.Plotly.relayout(plot, place(camera));
  const frame = () => new Promise((done) => requestAnimationFrame(done));
  const turn = async (answer) => {
    const moved = move(answer);
    showPose(answer);
    drawOverlay(back, front, answer.overlay);
    await moved;
  };
  const script = { turn: [], bare: [] }, interval = { turn: [], bare: [] };
  for (const name of interleave) {
    let last = await frame();
    for (const answer of answers) {
      const start = performance.now();
      await (name === "turn" ? turn : move)(answer);
      script[name].push(performance.now() - start);
      const now = await frame();
      interval[name].push(now - last);
      last = now;
    }
  }
  return { script, interval };
}"""


@pytest.fixture(scope="module")
def page(tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[Page, list[Any]]]:
    data: Path = tmp_path_factory.mktemp("bench") / "data"
    with serve_with_floors(data) as (url, _), sync_playwright() as driver:
        with connect(live_address(url, "/live"), max_size=None, compression=None) as socket:
            subject, pose = prepare(url, socket)
            answers = []
            for number in range(TURNS):
                socket.send(turn_message(subject, pose, number))
                answers.append(json.loads(socket.recv()))
        with Client(url) as client:
            sample = client.fetch("/api/samples")[0]["id"]
        browser = driver.chromium.launch(executable_path="/usr/bin/chromium", args=[*FLAGS, *sandbox_flags()])
        page = browser.new_page(viewport={"width": 1440, "height": 900})
        page.goto(f"{url}samples/{sample}/tensor")
        page.wait_for_selector("#plot canvas", state="attached")
        page.wait_for_timeout(1500)
        yield page, answers
        browser.close()


def test_a_turn_in_the_page(beside: Beside, page: tuple[Page, list[Any]]) -> None:
    shown, answers = page
    found = shown.evaluate(MEASURE, {"answers": answers, "interleave": ["bare", "turn"] * 4})
    for what, name in (("script", "script time of one turn"), ("interval", "frame interval while turning")):
        turn, bare = (statistics.median(found[what][kind]) for kind in ("turn", "bare"))
        beside.tell(f"page, {name}", turn / bare, 1.2, f"{turn:.1f} ms", f"{bare:.1f} ms")
