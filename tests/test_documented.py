"""Nothing that a user can set, send or get is left without a word about it."""

from __future__ import annotations

import argparse
import html
import re
from collections.abc import Iterator
from typing import Any

import pytest
from fastapi import FastAPI
from fastapi.testclient import TestClient

from app.cli import build_parser
from app.web.api_examples import EXAMPLES
from app.web.meanings import MEANINGS
from app.web.server import create_app
from tests.processes import ROOT

README = (ROOT / "README.md").read_text("utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text("utf-8")


@pytest.fixture(scope="module")
def app() -> FastAPI:
    return create_app()


@pytest.fixture(scope="module")
def client(app: FastAPI) -> Iterator[TestClient]:
    with TestClient(app, base_url="http://127.0.0.1", raise_server_exceptions=False) as client:
        yield client


@pytest.fixture(scope="module")
def page(client: TestClient) -> str:
    answer = client.get("/api")
    assert answer.status_code == 200
    return answer.text


def members(document: dict[str, Any]) -> Iterator[tuple[str, str, dict[str, Any]]]:
    for shape, schema in document["components"]["schemas"].items():
        for member, content in schema.get("properties", {}).items():
            yield shape, member, content


def test_every_call_stands_on_the_page(app: FastAPI, page: str) -> None:
    for path, operations in app.openapi()["paths"].items():
        for method, operation in operations.items():
            assert f"<code>{method.upper()} {html.escape(path)}</code>" in page, path
            assert operation["summary"], path
            assert html.escape(operation["summary"], quote=False) in html.unescape(page).replace("&", "&amp;"), path


def test_every_member_has_its_meaning(app: FastAPI, page: str) -> None:
    document = app.openapi()
    dumb = [f"{shape}.{member}" for shape, member, content in members(document) if not content.get("description")]
    assert not dumb, "say in the shape, or in app/web/meanings.py, what they are, with shape and unit"
    assert not [shape for shape, schema in document["components"]["schemas"].items() if not schema.get("description")]
    for shape, member, _ in members(document):
        assert f'id="{shape}"' in page
        assert f"<code>{member}</code>" in page


def test_every_parameter_has_its_meaning(app: FastAPI) -> None:
    for path, operations in app.openapi()["paths"].items():
        for operation in operations.values():
            for parameter in operation.get("parameters", []):
                told = parameter.get("description") or parameter["schema"].get("description")
                assert told, f"{path}: {parameter['name']}"


def test_no_meaning_is_left_of_what_is_gone(app: FastAPI) -> None:
    there = {member for _, member, _ in members(app.openapi())}
    there |= {f"{shape.rpartition('__')[2]}.{member}" for shape, member, _ in members(app.openapi())}
    assert not MEANINGS.keys() - there


def test_every_link_of_the_page_has_its_place(page: str) -> None:
    places = set(re.findall(r'id="([^"]+)"', page))
    assert not {link for link in re.findall(r'href="#([^"]+)"', page) if link not in places}


@pytest.mark.parametrize("call", EXAMPLES)
def test_every_example_runs_and_stands_on_the_page(client: TestClient, page: str, call: str) -> None:
    method, path = call.split(" ")
    answer = client.request(method, path, json=EXAMPLES[call])
    assert answer.status_code == 200, answer.text
    assert f"curl -s http://127.0.0.1{path} --json " in html.unescape(page)


def test_every_call_that_stores_nothing_has_an_example(app: FastAPI) -> None:
    stateless = {f"POST {path}" for path in app.openapi()["paths"] if path.startswith("/api/v1/")}
    assert stateless == EXAMPLES.keys()


def options(parser: argparse.ArgumentParser) -> Iterator[str]:
    for action in parser._actions:
        if isinstance(action, argparse._SubParsersAction):
            for name, inner in action.choices.items():
                yield name
                yield from options(inner)
        else:
            assert action.help, action.option_strings or action.dest
            yield from (option for option in action.option_strings if option.startswith("--"))


def test_every_option_is_in_the_readme() -> None:
    parser = build_parser()
    missing = {option for option in options(parser) if not re.search(rf"{option}(?![\w-])", README)}
    assert not missing


def test_every_setting_of_the_environment_is_told() -> None:
    found: set[str] = set()
    for folder in ("app", "tests", ".ci"):
        for path in (ROOT / folder).rglob("*"):
            if path.is_file() and path.suffix in (".py", ""):
                found |= set(re.findall(r"HALFTURN_[A-Z_]+", path.read_text("utf-8")))
    found -= {"HALFTURN_"}
    assert "HALFTURN_TOKEN" in found, "the search finds what is there"
    assert not {name for name in found if name not in README and name not in DEVELOPERS}


def test_the_page_asks_for_nothing_elsewhere(page: str) -> None:
    assert not re.findall(r'(?:src|href)="(?:https?:)?//[^"]*"', page)
    assert "<script>" not in page
