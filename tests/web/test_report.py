"""The report as a document: what it says, that hostile texts stay texts, and that it can ask for nothing."""

from __future__ import annotations

import base64
import hashlib
import json
import re
from html.parser import HTMLParser
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

HOSTILE = '</script><script>alert(1)</script>"><img src=x onerror=alert(1)>'
STYLED = "</style><svg onload=alert(1)>{{ 7 * 7 }}"


class Outline(HTMLParser):
    """Tags with their attributes, and the texts of scripts and of everything else."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.scripts: list[str] = []
        self.words: list[str] = []
        self.inside = ""
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag in ("script", "style"):
            self.inside = tag
            if tag == "script":
                self.scripts.append("")

    def handle_endtag(self, tag: str) -> None:
        if tag == self.inside:
            self.inside = ""

    def handle_data(self, data: str) -> None:
        if self.inside == "script":
            self.scripts[-1] += data
        elif not self.inside:
            self.words.append(data)

    @property
    def text(self) -> str:
        return re.sub(r"\s+", " ", "".join(self.words))


@pytest.fixture(scope="module")
def kept(tmp_path_factory: pytest.TempPathFactory) -> TestClient:
    client = TestClient(create_app(tmp_path_factory.mktemp("report")), base_url="http://127.0.0.1")
    client.get("/")
    return client


def copy(client: TestClient, name: str = "Demonstration crystal") -> Any:
    listed = client.get("/api/samples").json()
    source = next(entry["id"] for entry in listed if entry["name"] == name)
    return client.post("/api/samples", json={"from": source, "name": "Copy"}).json()


def report(client: TestClient, sample: Any, **query: Any) -> str:
    answer = client.get(f"/api/samples/{sample['id']}/out/report.html", params=query)
    assert answer.status_code == 200, answer.text
    return answer.text


def edit(client: TestClient, sample: Any, change: dict[str, Any]) -> Any:
    answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
    assert answer.status_code == 200, answer.text
    return answer.json()


def test_it_says_what_the_pages_say(kept: TestClient) -> None:
    outline = Outline(report(kept, copy(kept), scene="no"))
    for wanted in (
        "Along z, 1.3° off n(−201): 12.48(8) W/(m·K)",
        "9.83 6.41 7.27 Å, 90 107.4 90°",
        "2/m, unique b",
        "x3 along c, x2 along b*, x1 = x2 × x3",
        "13.20(8)",
        "17.88(8)",
        "the half-turn about x2 turns 12 into −12",
        "tied, 31 = 13",
        "Principal axes, biaxial; quadric: ellipsoid",
        "24.6(2)",
        "14 readings give 4 cells",
        "residual/σ",
        "No part has been planned.",
        "No sheet of this sample has been frozen.",
    ):
        assert wanted in outline.text, wanted
    names = [attributes.get("class") for tag, attributes in outline.tags if tag == "svg"]
    assert names == ["picture", "stereogram"]


def test_it_names_its_sheets_parts_and_other_properties(kept: TestClient) -> None:
    sample = copy(kept)
    frozen = kept.post(f"/samples/{sample['id']}/sheets?revision={sample['revision']}", follow_redirects=False)
    number = frozen.headers["location"].rpartition("/")[2]
    first = sample["document"]["properties"][0]["id"]
    sample = edit(kept, sample, {"property": {"kind": "thermal_expansion"}})
    outline = Outline(report(kept, sample, scene="no", property=first))
    assert "Thermal expansion" in outline.text
    table = outline.text.partition("Frozen sheets")[2].replace(" ", "")
    assert f"{number}Thermalconductivity1" in table
    assert "asthesamplestands" in table or "superseded" in table


def test_hostile_texts_stay_texts(kept: TestClient) -> None:
    sample = copy(kept)
    sample = kept.post(f"/api/samples/{sample['id']}/rename", json={"name": HOSTILE}).json()
    sample = edit(kept, sample, {"notes": f"{HOSTILE} {STYLED}"})
    text = (
        'kind,direction,value,sigma,bar,note\r\nalong,(1 0 0),13.2,0.1,"<img src=x onerror=alert(1)>","</script>"\r\n'
    )
    body = {"parent": sample["revision"], "text": text}
    assert kept.post(f"/api/samples/{sample['id']}/readings/table", json=body).status_code == 200
    outline = Outline(report(kept, sample))
    tags = [tag for tag, _ in outline.tags]
    assert "img" not in tags
    # The data and the two scripts, no more.
    assert tags.count("script") == 3
    assert tags.count("style") == 1
    assert not [key for _, attributes in outline.tags for key in attributes if key.startswith("on")]
    assert HOSTILE in outline.text
    assert "{{ 7 * 7 }}" in outline.text


def test_the_policy_lets_run_the_two_scripts_by_their_hashes_and_asks_for_nothing(kept: TestClient) -> None:
    text = report(kept, copy(kept))
    outline = Outline(text)
    policy = next(a["content"] for t, a in outline.tags if a.get("http-equiv") == "Content-Security-Policy") or ""
    assert "default-src 'none'" in policy
    assert "unsafe-eval" not in policy
    script_part = next(part for part in policy.split(";") if "script-src" in part)
    assert "unsafe-inline" not in script_part
    _, *running = outline.scripts
    for script in running:
        digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
        assert f"'sha256-{digest}'" in script_part
    assert len(running) == script_part.count("sha256-") == 2
    # Nothing that a browser would fetch.
    fetching = [(tag, a) for tag, a in outline.tags if a.get("src") or (tag == "link") or a.get("href")]
    assert fetching == []
    assert "@import" not in text[:60000]
    assert text.index("<meta charset") < 1024


def test_the_scene_is_the_surface_in_the_specimen_frame(kept: TestClient) -> None:
    sample = copy(kept)
    data = json.loads(Outline(report(kept, sample)).scripts[0])
    (body,) = data["bodies"]
    points = np.reshape(body["vertices"], (-1, 3))
    posed = np.array(sample["derived"]["state"]["posed"])
    # On the quadric of the posed tensor, to one scale.
    forms = np.einsum("ni,ij,nj->n", points, posed, points)
    assert np.ptp(forms) < 4e-3 * forms.mean()
    assert max(body["triangles"]) == len(points) - 1
    names = {axis["name"] for axis in data["axes"]}
    assert names == {"x", "y", "z", "a", "b", "c", "p1", "p2", "p3"}
    edges = np.array(data["block"], dtype=float).reshape(-1, 3, 3)[:, :2]
    lengths = np.sort(np.linalg.norm(np.diff(edges, axis=1)[:, 0], axis=1)).reshape(3, 4)
    block = np.sort(sample["document"]["part"])
    np.testing.assert_allclose(lengths / lengths[0, 0], np.repeat(block / block[0], 4).reshape(3, 4), rtol=1e-3)


def test_without_the_scene_it_is_small_and_has_no_script(kept: TestClient) -> None:
    text = report(kept, copy(kept), scene="no")
    assert len(text) < 300_000
    assert Outline(text).scripts == []
    assert "script-src &#39;none&#39;" in text or "script-src 'none'" in text


def test_readings_that_determine_nothing_are_told(kept: TestClient) -> None:
    sample = copy(kept)
    body = {"parent": sample["revision"], "text": "kind,direction,value\r\nalong,(1 0 0),13.2\r\n"}
    assert kept.post(f"/api/samples/{sample['id']}/readings/table", json=body).status_code == 200
    assert "not determine the tensor" in Outline(report(kept, sample, scene="no")).text
