"""The list of keys: it names every key that a script handles, and no other; the browser's tests press each of them."""

from __future__ import annotations

import re
from pathlib import Path

from app.web.keys import EVERY, KEYS, SAMPLE_PAGES, list_keys
from app.web.resources import static_folder

# A key in a handler: event.key === "Home", a table of keys, or key === "t" after a lower case.
LITERAL = re.compile(r'\bkey(?:\.key)?(?:\.toLowerCase\(\))?\s*(?:===|!==)\s*"([^"]+)"')
TABLE = re.compile(r"\{([^{}]*)\}\[\s*event\.key|\(\{([^{}]*Arrow[^{}]*)\}\)")


def handled_keys() -> dict[str, set[str]]:
    """Every key by the scripts that handle it."""
    found: dict[str, set[str]] = {}
    for script in sorted(Path(static_folder()).glob("*.js")):
        text = script.read_text("utf-8")
        names = set(LITERAL.findall(text))
        for inner in (part for match in TABLE.findall(text) for part in match if part):
            names |= {name.strip().strip('"') for name in re.findall(r'(\w+|"[^"]+")\s*:', inner)}
        for name in names:
            found.setdefault(name, set()).add(script.name)
    return found


def test_every_key_that_a_script_handles_is_listed() -> None:
    listed = {key.lower() for entry in KEYS for key in entry.keys}
    missing = {name: scripts for name, scripts in handled_keys().items() if name.lower() not in listed}
    assert missing == {}, "list these in app/web/keys.py, and press them in tests/browser/test_hands_and_words.py"


def test_every_listed_key_is_handled_by_some_script() -> None:
    handled = {name.lower() for name in handled_keys()}
    assert {"q", "home", "t", "arrowleft", ","} <= handled
    assert {key.lower() for entry in KEYS for key in entry.keys} <= handled


def test_names_are_told_apart_and_every_page_has_a_list() -> None:
    assert len({entry.name for entry in KEYS}) == len(KEYS)
    for page in ("tensor", "readings", "cut", "series", "sheet", "samples", "glossary"):
        headings = [heading for heading, _ in list_keys(page, page not in ("samples", "glossary"))]
        assert headings[-1] == "On every page"
    shown = [entry.name for _, entries in list_keys("samples", False) for entry in entries]
    assert shown == [entry.name for entry in KEYS if entry.page == EVERY]
    assert all(
        entry.name in [e.name for _, es in list_keys("cut", True) for e in es]
        for entry in KEYS
        if entry.page == SAMPLE_PAGES
    )


def test_letters_that_act_anywhere_do_one_thing_each() -> None:
    for page in ("tensor", "readings", "cut", "series", "sheet"):
        letters = [key for entry in KEYS if entry.letter and entry.page in (page, EVERY) for key in entry.keys]
        assert len(letters) == len(set(letters))
