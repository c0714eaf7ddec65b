"""What the pages say: one sentence for every panel, terms with a source, signs as the trade prints them.

The rules of print, common practice: a true minus sign (U+2212) before a number; a degree sign close to its number; a
space that does not break (U+00A0, U+2009 or U+202F) or none between a number and × or ±'s own number.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest
from fastapi.testclient import TestClient

from app.web.resources import templates_folder
from app.web.server import create_app
from app.web.terms import TERMS, link_term

PAGES = ("tensor", "readings", "cut", "series", "sheet")
# What is typed, read by programs or set in a fixed face stays as it is typed.
LEFT_OUT = {"script", "style", "textarea", "code", "select", "option", "title"}
# The grid shows its rows as they were typed; the table of calls shows paths.
LEFT_OUT_IDS = {"grid"}


class Texts(HTMLParser):
    """The texts of a page that a reader sees, and its headings with what follows them."""

    def __init__(self) -> None:
        super().__init__()
        self.texts: list[str] = []
        self.panels: list[dict[str, Any]] = []
        self._path: list[tuple[str, bool]] = []
        self._heading: list[str] | None = None
        self._sentence: list[str] | None = None

    @property
    def left_out(self) -> bool:
        return any(flag for _, flag in self._path)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        given = dict(attrs)
        if tag in ("input", "br", "meta", "link", "path", "rect", "circle", "img"):
            return
        self._path.append((tag, tag in LEFT_OUT or given.get("id") in LEFT_OUT_IDS))
        if tag in ("h2", "summary") and not self.left_out:
            self._heading = []
        if tag == "p" and ("asks" in (given.get("class") or "") or "note" in (given.get("class") or "")):
            self._sentence = []

    def handle_endtag(self, tag: str) -> None:
        if any(name == tag for name, _ in self._path):
            while self._path.pop()[0] != tag:
                pass
        if tag in ("h2", "summary") and self._heading is not None:
            self.panels.append({"heading": " ".join("".join(self._heading).split()), "sentence": ""})
            self._heading = None
        if tag == "p" and self._sentence is not None:
            sentence = " ".join("".join(self._sentence).split())
            if self.panels and not self.panels[-1]["sentence"]:
                self.panels[-1]["sentence"] = sentence
            self._sentence = None

    def handle_data(self, data: str) -> None:
        if not self.left_out and data.strip():
            self.texts.append(data)
        if self._heading is not None:
            self._heading.append(data)
        if self._sentence is not None:
            self._sentence.append(data)


def read(text: str) -> Texts:
    reader = Texts()
    reader.feed(text)
    return reader


@pytest.fixture(scope="module")
def client(tmp_path_factory: pytest.TempPathFactory) -> Iterator[TestClient]:
    with TestClient(create_app(tmp_path_factory.mktemp("words")), base_url="http://127.0.0.1") as client:
        client.get("/")
        for sample in client.get("/api/samples").json():
            # A part to cut, a series of cells and one of tensors, so that the panels of results are there; invented.
            shown = client.get(f"/api/samples/{sample['id']}").json()
            client.post(f"/api/samples/{sample['id']}/cut", json={"parent": shown["revision"], "make": True})
        yield client


@pytest.fixture(scope="module")
def pages(client: TestClient) -> dict[str, str]:
    found = {}
    for sample in client.get("/api/samples").json():
        for page in PAGES:
            answer = client.get(f"/samples/{sample['id']}/{page}")
            assert answer.status_code == 200
            found[f"{sample['name']}, {page}"] = answer.text
    for page in ("/samples", "/glossary"):
        found[page] = client.get(page).text
    return found


def test_no_hyphen_stands_for_a_minus(pages: dict[str, str]) -> None:
    wrong = [
        (page, text.strip())
        for page, content in pages.items()
        for text in read(content).texts
        if re.search(r"(?<![\w./:-])-\d", text) and not re.search(r"\d{4}-\d\d-\d\d", text)
    ]
    assert wrong == []


def test_degrees_times_and_powers_are_set_close(pages: dict[str, str]) -> None:
    wrong = [
        (page, text.strip())
        for page, content in pages.items()
        for text in read(content).texts
        # "90 °" and "3 x 10-6" or "3*10^-6" are wrong; "90°", "20 °C" and "3×10⁻⁶" are right.
        if re.search(r"\d\s+°(?!C)|\d\s*[x*]\s*10\b|10\^|\+/-|±\s+\d", text)
    ]
    assert wrong == []


def test_a_unit_does_not_part_from_its_number(pages: dict[str, str]) -> None:
    sentence = re.search(r'id="sentence">(.*?)</h1>', pages["Demonstration crystal, tensor"], re.DOTALL)
    assert sentence is not None
    assert "\u00a0W/(m·K)" in sentence[1]


# What is printed on the sheet itself, and the list of those that are frozen.
PLAIN = re.compile(r"Frozen sheets|Before work")


def test_every_panel_says_what_it_answers(pages: dict[str, str]) -> None:
    silent = {
        (page.split(", ")[-1], panel["heading"])
        for page, content in pages.items()
        if page not in ("/samples", "/glossary")
        for panel in read(content.split('id="keys-dialog"')[0].split('id="main"')[1]).panels
        if not panel["sentence"].removesuffix("Guide").rstrip().endswith((".", "?"))
        and not PLAIN.search(panel["heading"])
    }
    assert silent == set()


def test_every_term_has_one_line_and_a_source() -> None:
    assert len(TERMS) >= 30
    assert len({entry.key for entry in TERMS}) == len(TERMS)
    for entry in TERMS:
        assert entry.line.endswith("."), entry.key
        assert entry.line.count(". ") == 0, entry.key
        assert len(entry.line) < 125, entry.key
        assert entry.source, entry.key


def test_the_templates_name_only_terms_that_there_are_and_use_most_of_them() -> None:
    used = {
        key
        for template in Path(templates_folder()).rglob("*.html")
        for key in re.findall(r'term\("([\w-]+)"', template.read_text("utf-8"))
    }
    known = {entry.key for entry in TERMS}
    assert used <= known
    assert len(used) >= 20


def test_a_term_is_a_link_to_its_line(client: TestClient, pages: dict[str, str]) -> None:
    assert str(link_term("quadric", "<q>")) == (
        '<a class="term" href="/glossary#quadric" data-term="quadric">&lt;q&gt;</a>'
    )
    answered = client.get("/api/terms").json()
    for entry in TERMS:
        assert f'id="{entry.key}"' in pages["/glossary"]
        assert answered[entry.key] == {"name": entry.name, "line": entry.line, "source": entry.source}


def test_negative_indices_are_barred_where_they_are_read(pages: dict[str, str]) -> None:
    for page, content in pages.items():
        plain = list(read(re.sub(r"<svg.*?</svg>", "", content, flags=re.DOTALL)).texts)
        # The sign of a barred index stands in a text of its own, so no whole form is left.
        assert not [text for text in plain if re.search(r"[\[(](?=[^\])]*−)(?:−?\d){3}[\])]", text)], page


@pytest.mark.parametrize("page", ["tensor", "cut", "series"])
def test_a_page_with_nothing_in_it_says_what_will_stand_there(client: TestClient, page: str) -> None:
    made = client.post("/api/samples", json={"name": "Empty"}).json()["id"]
    assert 'class="nothing"' in client.get(f"/samples/{made}/{page}").text
