"""Bodies are read strictly: a sentence with the place for whatever is wrong."""

from __future__ import annotations

import json
import time
from typing import Any

import pytest
from fastapi import FastAPI
from fastapi.routing import APIRoute
from fastapi.testclient import TestClient
from hypothesis import given
from hypothesis import strategies as st

from app.errors import InputError
from app.web.bodies import StrictRoute, parse_object


def refusal(body: bytes) -> InputError:
    with pytest.raises(InputError) as caught:
        parse_object(body)
    return caught.value


def test_what_is_not_json_is_told_by_line_and_column() -> None:
    error = refusal(b'{\n  "crystal": {},\n  "tensor": }\n')
    assert "line 3, column 13" in error.message
    assert error.detail == {"line": 3, "column": 13}


@pytest.mark.parametrize(
    ("body", "words"),
    [
        (b"", "missing"),
        (b" \n", "missing"),
        (b"[1, 2]", "must be a JSON object"),
        (b'"text"', "must be a JSON object"),
        (b"null", "must be a JSON object"),
        (b"\xff\xfe{}", "not UTF-8 text: byte 1 "),
        (b'{"a": "\xe9"}', "not UTF-8"),
        (b"a=1&b=2", "not valid JSON at line 1, column 1"),
        (b"{'a': 1}", "not valid JSON"),
        (b'{"a": 1,}', "not valid JSON"),
        (b'{"a": 01}', "not valid JSON"),
        (b'{"a": "\n"}', "not valid JSON"),
    ],
)
def test_other_bodies_that_cannot_be_read(body: bytes, words: str) -> None:
    assert words in refusal(body).message


@pytest.mark.parametrize(
    "literal",
    ["NaN", "Infinity", "-Infinity", "1e999", "-1E+400", "1" + "0" * 400, "-" + "9" * 5000, "9" * 250 + "e99"],
)
def test_numbers_that_are_not_finite_are_refused_at_their_field(literal: str) -> None:
    body = f'{{"a": [1, 2], "readings": [{{"value": 1}}, {{"value": 2, "more": [0, {literal}]}}]}}'
    error = refusal(body.encode())
    assert error.field == "readings[1].more[1]"
    assert "finite" in error.message


@pytest.mark.parametrize("literal", ["1e-999", "1e308", "1e+010", "123456789012345678901234567890", "9" * 250])
def test_finite_numbers_are_taken(literal: str) -> None:
    assert parse_object(f'{{"a": {literal}}}'.encode())["a"] == pytest.approx(float(literal))


def test_suspicious_words_in_text_are_innocent() -> None:
    body = {"note": "NaN, Infinity and 1e999", "key 1e999": [1.5]}
    assert parse_object(json.dumps(body).encode()) == body


def test_a_doubled_key_is_refused_at_its_field() -> None:
    error = refusal(b'{"a": [{"sigma": 1, "value": 2, "sigma": 3}]}')
    assert error.field == "a[0].sigma"
    assert "twice" in error.message
    assert refusal(b'{"a": 1, "a": 1}').field == "a"


@pytest.mark.parametrize("body", [b'{"a": "x\\ud800"}', b'{"a": {"\\udfff": 1}}', b'{"\\uD800\\uD800": 1}'])
def test_half_a_surrogate_pair_is_refused(body: bytes) -> None:
    assert "surrogate" in refusal(body).message


def test_a_whole_surrogate_pair_is_a_character() -> None:
    assert parse_object(b'{"a": "\\ud83d\\ude00"}') == {"a": "\N{GRINNING FACE}"}


def test_a_byte_order_mark_is_passed_over() -> None:
    assert parse_object(b'\xef\xbb\xbf{"a": 1}') == {"a": 1}


json_values = st.recursive(
    st.none()
    | st.booleans()
    | st.integers(-(2**70), 2**70)
    | st.floats(allow_nan=False, allow_infinity=False)
    | st.text(),
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(st.text(), inner, max_size=4),
    max_leaves=12,
)


@given(st.dictionaries(st.text(), json_values, max_size=4), st.booleans())
def test_whatever_is_json_comes_through_unchanged(content: dict[str, Any], ascii_only: bool) -> None:
    assert parse_object(json.dumps(content, ensure_ascii=ascii_only).encode()) == content


@pytest.mark.parametrize("opening", ["[", '{"a":', '[1,{"b":'])
def test_deep_nesting_is_no_more_than_a_bad_request(client: TestClient, opening: str) -> None:
    for depth in (600, 3_000, 200_000):
        answer = client.post("/probe/form", content=('{"crystal":' + opening * depth).encode())
        assert answer.status_code == 422, depth
        answer = client.post("/probe/along", content=('{"directions":[' + "[" * depth + "]" * depth + "]}").encode())
        assert answer.status_code == 422, depth


@pytest.mark.parametrize("media_type", [None, "text/plain", "application/x-www-form-urlencoded", "application/json"])
def test_the_stated_media_type_does_not_matter(client: TestClient, media_type: str | None) -> None:
    headers = {"Content-Type": media_type} if media_type else {}
    assert client.post("/probe/cif", content=b'{"text": "data_x"}', headers=headers).json() == {"characters": 6}
    assert client.post("/probe/cif", content=b"text=data_x", headers=headers).status_code == 422


def test_every_route_with_a_body_reads_it_strictly(probed_app: FastAPI) -> None:
    assert "/probe/form" in {route.path for route in all_routes(probed_app.routes)}, "the search finds what is there"
    for route in all_routes(probed_app.routes):
        assert route.body_field is None or isinstance(route, StrictRoute), route.path


def all_routes(routes: Any) -> list[APIRoute]:
    found = []
    for route in routes:
        if isinstance(route, APIRoute):
            found.append(route)
        inner = getattr(route, "original_router", None) or getattr(route, "router", None)
        if inner is not None:
            found += all_routes(inner.routes)
    return found


def test_a_large_body_is_read_quickly() -> None:
    body = json.dumps({"directions": [[0.123456789, -1.5, float(index)] for index in range(20_000)]}).encode()
    start = time.perf_counter()
    parse_object(body)
    # Some 10 ms on two slow cores; the bound only has to catch a walk in Python through every number.
    assert time.perf_counter() - start < 0.25
