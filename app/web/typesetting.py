"""Symbols within plain sentences, set as the trade prints them: x₁ and p₂ with subscripts, axes in italics."""

from __future__ import annotations

import re
from typing import Any, Final

from markupsafe import Markup, escape

SYMBOLS: Final = re.compile(
    r"(?<![\w(\[])(?:(?P<numbered>[xp])(?P<number>[1-3])(?!\w)"
    r"|(?P<axis>[xyz])(?![\w)\]])"
    r"|(?:(?<=along )|(?<=unique )|(?<=across ))(?P<letter>[abc])(?P<star>\*?)(?![\w)\]]))"
)
"""What is a symbol: the axes x1 to x3 and p1 to p3, x, y and z alone, and a cell's axis after a word that names one.

The pages' scripts have the same rule in ``static/typeset.js``; a test holds the two together.
"""


def typeset(text: Any) -> Markup:
    """A sentence as HTML with its symbols set; everything else is escaped."""
    given = str(text)
    parts: list[str] = []
    at = 0
    for found in SYMBOLS.finditer(given):
        parts.append(str(escape(given[at : found.start()])))
        if found["numbered"]:
            parts.append(f"<i>{found['numbered']}</i><sub>{found['number']}</sub>")
        else:
            parts.append(f"<i>{found['axis'] or found['letter']}</i>{found['star'] or ''}")
        at = found.end()
    parts.append(str(escape(given[at:])))
    return Markup("".join(parts))


INDEX_FORM: Final = re.compile(r"[\[(][^\])]*[\])]")


def set_overbars(text: str) -> str:
    """A sentence as HTML in which negative whole indices within brackets have an overbar in place of the minus sign.

    Indices of one digit stand close, as in print; larger ones stay apart.
    """
    parts: list[str] = []
    at = 0
    for found in INDEX_FORM.finditer(text):
        parts.append(str(typeset(text[at : found.start()])))
        parts.append(_set_indices(found[0]))
        at = found.end()
    parts.append(str(typeset(text[at:])))
    return "".join(parts)


def _set_indices(form: str) -> str:
    inner = form[1:-1]
    words = inner.split() if " " in inner.strip() else re.findall(r"[-−]?\d", inner)
    if not words or not all(re.fullmatch(r"[-−]?\d+", word) for word in words):
        return str(escape(form))
    bars = [
        f'<span class="bar-over">{escape(word[1:])}</span>' if word[0] in "-−" else str(escape(word)) for word in words
    ]
    gap = "" if all(len(word.lstrip("-−")) == 1 for word in words) else " "
    return f"{escape(form[0])}{gap.join(bars)}{escape(form[-1])}"
