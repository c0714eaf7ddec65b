"""Names of files that are saved: never a path, ASCII beside the full form."""

from __future__ import annotations

from email.message import Message
from urllib.parse import unquote

import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.web.file_answers import clean_name, write_disposition


@pytest.mark.parametrize(
    ("given_name", "wanted"),
    [
        ("Demonstration crystal cell.cif", "Demonstration crystal cell.cif"),
        ("../../etc/passwd cell.cif", "etc passwd cell.cif"),
        ("a\\b:c*d cell.cif", "a b c d cell.cif"),
        ("\u202egpj.exe cell.cif", "gpj.exe cell.cif"),
        ("name\r\nSet-Cookie x cell.cif", "name Set-Cookie x cell.cif"),
        ("... .cif", "file.cif"),
        ("Kristall Ä κ cell.cif", "Kristall Ä κ cell.cif"),
    ],
)
def test_a_name_is_cleaned(given_name: str, wanted: str) -> None:
    assert clean_name(given_name) == wanted


@given(st.text(max_size=300))
def test_no_name_is_a_path_or_breaks_its_header(text: str) -> None:
    header = write_disposition(f"{text} picture.svg")
    header.encode("ascii")
    assert "\r" not in header
    assert "\n" not in header
    # Read by the standard library's reader of such headers.
    message = Message()
    message["Content-Disposition"] = header
    assert message.get_content_disposition() == "attachment"
    full = unquote(header.rpartition("''")[2])
    plain = header.partition('filename="')[2].partition('"')[0]
    for name in (full, plain):
        assert not set(name) & set('/\\:*?"<>|%\0')
        assert not name.startswith(".")
        assert name.endswith(".svg")
        assert len(name) <= 90
