"""The guide: every page is there, every example in it runs and gives what it says, every link leads somewhere."""

from __future__ import annotations

import contextlib
import io
import json
import re
from dataclasses import dataclass, field
from decimal import Decimal
from html.parser import HTMLParser
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.cli import build_parser
from app.web.guide import draw_rules
from app.web.guide_pages import PAGES
from app.web.server import create_app


@dataclass
class Example:
    """A marked element: its attributes and its text."""

    attributes: dict[str, str]
    text: str = ""


@dataclass
class Reader(HTMLParser):
    """Collects elements with a data attribute, links, headings."""

    examples: list[Example] = field(default_factory=list)
    links: list[str] = field(default_factory=list)
    headings: int = 0

    def __post_init__(self) -> None:
        super().__init__(convert_charrefs=True)
        self._open: Example | None = None

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        attributes = {name: value or "" for name, value in attrs}
        if tag == "a":
            self.links.append(attributes.get("href", ""))
        self.headings += tag == "h1"
        if tag in ("pre", "output"):
            self._open = Example(attributes)
            self.examples.append(self._open)

    def handle_endtag(self, tag: str) -> None:
        if tag in ("pre", "output"):
            self._open = None

    def handle_data(self, data: str) -> None:
        if self._open is not None:
            self._open.text += data


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> TestClient:
    return TestClient(create_app(tmp_path_factory.mktemp("guide") / "data"), base_url="http://127.0.0.1")


def read(client: TestClient, slug: str) -> Reader:
    answer = client.get(f"/guide/{slug}" if slug else "/guide")
    assert answer.status_code == 200
    reader = Reader()
    reader.feed(answer.text)
    return reader


def pages_of_the_demonstration(client: TestClient) -> tuple[str, dict[str, str]]:
    sample = client.get("/api/samples").json()[0]["id"]
    texts = {}
    for page in ("tensor", "readings", "cut", "series", "sheet"):
        text = re.sub(r"<[^>]+>", "", client.get(f"/samples/{sample}/{page}").text)
        texts[page] = re.sub(r"\s+", " ", text)
    return sample, texts


def agree(found: Any, wanted: Any, place: str) -> None:
    """What the guide prints is part of the answer, to the digits that it prints (numbers come as Decimal)."""
    if isinstance(wanted, dict):
        for key, value in wanted.items():
            agree(found[key], value, f"{place}.{key}")
    elif isinstance(wanted, list):
        assert len(found) >= len(wanted), place
        for number, value in enumerate(wanted):
            agree(found[number], value, f"{place}[{number}]")
    elif isinstance(wanted, Decimal):
        half = 0.5 * 10.0 ** int(wanted.as_tuple().exponent)
        assert found == pytest.approx(float(wanted), abs=half), place
    elif isinstance(wanted, int) and not isinstance(wanted, bool):
        assert found == pytest.approx(wanted, abs=1e-9), place
    else:
        assert found == wanted, place


SLUGS = [page.slug for page in PAGES]


@pytest.mark.parametrize("slug", ["", *SLUGS])
def test_a_page_has_one_heading_and_only_links_that_lead_somewhere(client: TestClient, slug: str) -> None:
    reader = read(client, slug)
    assert reader.headings == 1
    for link in reader.links:
        if link.startswith("/"):
            assert client.get(link).status_code == 200, link


@pytest.mark.parametrize("slug", SLUGS)
def test_every_example_gives_what_the_guide_says(client: TestClient, slug: str) -> None:
    examples = read(client, slug).examples
    for number, example in enumerate(examples):
        if "data-call" in example.attributes:
            answer = client.post(f"/api/v1/{example.attributes['data-call']}", json=json.loads(example.text))
            assert answer.status_code == 200, answer.text
            assert "data-answer" in examples[number + 1].attributes
            wanted = json.loads(examples[number + 1].text, parse_float=Decimal)
            agree(answer.json(), wanted, example.attributes["data-call"])
        elif "data-python" in example.attributes:
            printed = io.StringIO()
            with contextlib.redirect_stdout(printed):
                exec(compile(example.text, slug, "exec"), {})
            assert printed.getvalue().strip() == examples[number + 1].text.strip()
        elif "data-shell" in example.attributes:
            command = example.text.split()
            assert command[0] == "halfturn"
            options = build_parser().parse_args(command[1:])
            assert callable(options.run)
        else:
            assert {"data-answer", "data-printed", "data-page", "data-next"} & set(example.attributes), example


def test_the_walk_says_what_the_pages_show(client: TestClient) -> None:
    sample, texts = pages_of_the_demonstration(client)
    examples = read(client, "walk").examples
    told = [example for example in examples if "data-page" in example.attributes]
    assert told
    for example in told:
        assert example.text in texts[example.attributes["data-page"]], example.text
    asked = {"add": 3, "sigma": 0.12, "criterion": "D", "max_index": 2}
    chosen = client.post(f"/api/samples/{sample}/readings/next-cuts", json=asked).json()["chosen"]
    assert [example.attributes["data-next"] for example in examples if "data-next" in example.attributes] == chosen


def test_there_is_a_drawing_of_every_rule(client: TestClient) -> None:
    drawn = draw_rules()
    assert len({rule["text"] for rule in drawn}) == 36
    assert len({rule["drawing"] for rule in drawn}) == 36
    assert client.get("/guide/crystal").text.count('<svg class="frame"') == 36


def test_there_is_no_other_page(client: TestClient) -> None:
    assert client.get("/guide/nothing").status_code == 404


def test_every_panel_leads_to_its_page(client: TestClient) -> None:
    sample = client.get("/api/samples").json()[0]["id"]
    reached = set()
    for page in ("tensor", "readings", "cut", "series"):
        text = client.get(f"/samples/{sample}/{page}").text
        questions = re.findall(r'<p class="asks">(.*?)</p>', text, flags=re.S)
        assert len(questions) > 1
        for question in questions:
            found = re.findall(r'href="/guide/([a-z-]+)"', question)
            assert len(found) == 1, question
            reached.update(found)
    assert reached >= {"tensor", "picture", "readings", "closer", "next-cuts", "bars", "consequences", "orientation"}
