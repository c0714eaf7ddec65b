"""Symbols within sentences; the pages' scripts are held to the same cases by tests/script/typeset.test.js."""

from __future__ import annotations

import json
from html import escape
from pathlib import Path
from typing import Any

import pytest

from app.web.typesetting import typeset

CASES = json.loads((Path(__file__).parent.parent / "script" / "typeset-cases.json").read_text("utf-8"))
TAGS = {"plain": "{}", "symbol": "<i>{}</i>", "sub": "<sub>{}</sub>"}


@pytest.mark.parametrize("case", CASES, ids=[case["text"] for case in CASES])
def test_symbols_are_set_as_the_scripts_set_them(case: Any) -> None:
    assert str(typeset(case["text"])) == "".join(TAGS[role].format(escape(text)) for text, role in case["runs"])


def test_what_is_no_symbol_is_escaped() -> None:
    assert str(typeset("<b>x1</b> & p2")) == "&lt;b&gt;<i>x</i><sub>1</sub>&lt;/b&gt; &amp; <i>p</i><sub>2</sub>"
