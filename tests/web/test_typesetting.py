"""Symbols within sentences; the pages' scripts are held to the same cases by tests/script/typeset.test.js."""

from __future__ import annotations

import json
import re
from html import escape, unescape
from pathlib import Path
from typing import Any

import pytest

from app.web.typesetting import speak_indices, typeset

CASES = json.loads((Path(__file__).parent.parent / "script" / "typeset-cases.json").read_text("utf-8"))
TAGS = {"plain": "{}", "symbol": "<i>{}</i>", "sub": "<sub>{}</sub>"}


def set_run(text: str, role: str) -> str:
    if role != "indices":
        return TAGS[role].format(escape(text))
    # A bar over each negative index; the sign itself stays for whoever copies.
    bars = re.sub(r"−(\d)", r'<span class="over"><span class="minus">−</span>\1</span>', text)
    return f'<span class="indices" role="img" aria-label="{speak_indices(text)}">{bars}</span>'


@pytest.mark.parametrize("case", CASES, ids=[case["text"] for case in CASES])
def test_symbols_are_set_as_the_scripts_set_them(case: Any) -> None:
    assert str(typeset(case["text"])) == "".join(set_run(text, role) for text, role in case["runs"])


def test_what_is_no_symbol_is_escaped() -> None:
    assert str(typeset("<b>x1</b> & p2")) == "&lt;b&gt;<i>x</i><sub>1</sub>&lt;/b&gt; &amp; <i>p</i><sub>2</sub>"


@pytest.mark.parametrize("case", CASES, ids=[case["text"] for case in CASES])
def test_the_text_stays_as_it_is_copied(case: Any) -> None:
    assert unescape(re.sub(r"<[^>]*>", "", str(typeset(case["text"])))) == case["text"]


def test_a_screen_reader_hears_the_minus() -> None:
    assert speak_indices("(−201)") == "plane minus 2 0 1"
    assert speak_indices("[1−12]") == "row 1 minus 1 2"
    assert speak_indices("(−1 0 12)") == "plane minus 1 0 12"
