"""Files to be saved: under a name that is cleaned, as attachments, with a type that is never guessed."""

from __future__ import annotations

import re
import unicodedata
from typing import Final
from urllib.parse import quote

from fastapi import Response

LONGEST_NAME: Final = 80
SEPARATORS: Final = frozenset('/\\:*?"<>|%')
UNPRINTED: Final = frozenset(("Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"))
"""Categories of Unicode whose signs do not print or turn the order of others round."""


class FileAnswer(Response):
    """A file to be saved, under a name made of the sample's and what it is."""

    def __init__(self, content: str | bytes, media_type: str, sample: str, what: str, **headers: str) -> None:
        name = f"{sample} {what}"
        encoded = content.encode("utf-8", "replace") if isinstance(content, str) else content
        super().__init__(encoded, headers={"Content-Disposition": write_disposition(name), **headers})
        # Set apart, so that no charset is put after types that have none.
        self.headers["Content-Type"] = media_type


def write_disposition(name: str) -> str:
    """The header that says a file is to be saved, with its name in ASCII and in full (RFC 6266, RFC 5987)."""
    cleaned = clean_name(name)
    ascii_name = unicodedata.normalize("NFKD", cleaned).encode("ascii", "ignore").decode("ascii")
    ascii_name = re.sub(r"[^A-Za-z0-9 ._()+-]", "", ascii_name).strip(" .") or "file"
    return f"attachment; filename=\"{ascii_name}\"; filename*=UTF-8''{quote(cleaned, safe='')}"


def clean_name(name: str) -> str:
    """A file's name without what any file system reads as something else, and never a path.

    Separators, wildcards, quotes and signs that do not print become blanks; names begin and end with a letter or the
    like, and are at most ``LONGEST_NAME`` long before their ending.
    """
    stem, dot, ending = name.rpartition(".")
    if not dot:
        stem, ending = name, ""
    kept = "".join(
        " "
        if sign in '/\\:*?"<>|%' or unicodedata.category(sign) in ("Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp")
        else sign
        for sign in stem
    )
    # What the file is stands last, so that a long name of a sample is what is shortened.
    words = " ".join(kept.split())
    if len(words) > LONGEST_NAME:
        head, _, tail = words.rpartition(" ")
        words = f"{head[: max(1, LONGEST_NAME - 1 - len(tail))].rstrip()} {tail[: LONGEST_NAME - 2]}"
    words = words.strip(" .-_~") or "file"
    return f"{words}.{ending}" if dot else words
