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
