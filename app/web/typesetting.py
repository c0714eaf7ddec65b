"""Symbols within plain sentences, set as the trade prints them: x₁ and p₂ with subscripts, axes in italics, a bar over
a negative index.

The bar takes the place of the minus sign for the eye alone: the sign stays in the text, for whoever copies it, and a
screen reader is given the words. Only the true minus sign counts, so that what is to be typed stays as it is typed.
"""

from __future__ import annotations

import re
from typing import Any, Final

from markupsafe import Markup, escape

INDICES: Final = (
    r"(?P<indices>(?<![\d.])(?:\((?=[^)]*−)(?:(?:−?\d){3,4}|−?\d\d?(?: −?\d\d?){2,3})\)"
    r"|\[(?=[^\]]*−)(?:(?:−?\d){3,4}|−?\d\d?(?: −?\d\d?){2,3})\]))"
)
"""Three or four whole indices in round or square brackets, at least one of them negative."""

SYMBOLS: Final = re.compile(
    INDICES + r"|(?<![\w(\[])(?:(?P<numbered>[xp])(?P<number>[1-3])(?!\w)"
    r"|(?P<axis>[xyz])(?![\w)\]])"
    r"|(?:(?<=along )|(?<=unique )|(?<=across ))(?P<letter>[abc])(?P<star>\*?)(?![\w)\]]))"
)
"""What is a symbol: negative indices, the axes x1 to x3 and p1 to p3, x, y and z alone, and a cell's axis after a word.

The pages' scripts have the same rule in ``static/typeset.js``; a test holds the two together.
"""


def typeset(text: Any) -> Markup:
    """A sentence as HTML with its symbols set; everything else is escaped."""
    given = str(text)
    parts: list[str] = []
    at = 0
    for found in SYMBOLS.finditer(given):
        parts.append(str(escape(given[at : found.start()])))
        if found["indices"]:
            parts.append(_bar_indices(found[0]))
        elif found["numbered"]:
            parts.append(f"<i>{found['numbered']}</i><sub>{found['number']}</sub>")
        else:
            parts.append(f"<i>{found['axis'] or found['letter']}</i>{found['star'] or ''}")
        at = found.end()
    parts.append(str(escape(given[at:])))
    return Markup("".join(parts))


def speak_indices(form: str) -> str:
    """What a screen reader says of an index form: "plane minus 2 0 1" or "row 1 minus 1 0"."""
    words = re.findall(r"−?\d+" if " " in form else r"−?\d", form)
    said = " ".join(word.replace("−", "minus ") for word in words)
    return f"{'plane' if form[0] == '(' else 'row'} {said}"


def _bar_indices(form: str) -> str:
    negative = r"−(\d+)" if " " in form else r"−(\d)"
    bars = re.sub(negative, r'<span class="over"><span class="minus">−</span>\1</span>', form)
    return f'<span class="indices" role="img" aria-label="{speak_indices(form)}">{bars}</span>'


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
