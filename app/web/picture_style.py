"""The style of a picture that leaves the pages: the rules of the pages' own style sheets, with their colours put in.

A picture on its own has no style sheet beside it, and many readers of SVG know no custom properties. The rules are
taken from ``static/`` as they stand there, so that a picture looks as it does on its page.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import lru_cache
from typing import Final, Literal

from app.web.resources import static_folder

Theme = Literal["light", "dark", "print"]
THEMES: Final[tuple[Theme, ...]] = ("light", "dark", "print")

SCENE_SHEET: Final = "tensor.css"
STEREOGRAM_SHEET: Final = "stereogram.css"

_COMMENT: Final = re.compile(r"/\*.*?\*/", re.DOTALL)
_RULE: Final = re.compile(r"([^{}]+)\{([^{}]*)\}")
_TOKEN: Final = re.compile(r"--([a-z-]+)\s*:\s*([^;}]+)")
_USE: Final = re.compile(r"var\(--([a-z-]+)\)")

_ON_PAPER: Final = {
    "paper": "#ffffff",
    "sheet": "#ffffff",
    "ink": "#000000",
    "ink-second": "#333333",
    "rule": "#555555",
    "hairline": "#999999",
    "locked": "#000000",
    "change": "#000000",
}
"""Black on white, as the pages print."""


@lru_cache(maxsize=8)
def read_tokens(theme: Theme) -> Mapping[str, str]:
    """Colours and typefaces by name, from the base style sheet."""
    text = _COMMENT.sub("", (static_folder() / "base.css").read_text(encoding="utf-8"))
    light, _, rest = text.partition("@media (prefers-color-scheme: dark)")
    tokens = dict(_TOKEN.findall(light.partition("}")[0]))
    if theme == "dark":
        tokens |= dict(_TOKEN.findall(rest.partition("}")[0]))
    elif theme == "print":
        tokens |= _ON_PAPER
    return {name: value.strip() for name, value in tokens.items()}


@lru_cache(maxsize=16)
def write_style(sheet: str, theme: Theme | None, scope: str) -> str:
    """The rules of a picture's marks, valid below the class ``scope``.

    Args:
        sheet: "tensor.css" or "stereogram.css".
        theme: whose colours are put in; None leaves the custom properties for a page that defines them.
        scope: class of the picture's root.
    """
    text = _COMMENT.sub("", (static_folder() / sheet).read_text(encoding="utf-8"))
    rules = []
    for selectors, body in _RULE.findall(_drop_media(text)):
        chosen = [_scope(selector.strip(), scope) for selector in selectors.split(",")]
        kept = [selector for selector in chosen if selector]
        if kept:
            rules.append(f"{','.join(kept)}{{{body.strip()}}}")
    rules.append(f".{scope} .sy{{font-family:var(--serif);font-style:italic}}")
    whole = "\n".join(rules)
    if theme is None:
        return whole
    tokens = read_tokens(theme)
    return _USE.sub(lambda found: tokens.get(found[1], "none"), whole)


def _drop_media(text: str) -> str:
    """The text without its conditional blocks, which speak of windows."""
    kept, place = [], 0
    for found in re.finditer(r"@media[^{]*\{", text):
        if found.start() < place:
            continue
        kept.append(text[place : found.start()])
        depth, place = 1, found.end()
        while depth and place < len(text):
            depth += {"{": 1, "}": -1}.get(text[place], 0)
            place += 1
    return "".join([*kept, text[place:]])


def _scope(selector: str, scope: str) -> str:
    """The selector below the scope, or nothing where it is about no mark of a picture or about a press or a hold."""
    if any(word in selector for word in (":", "hold", "hand", "[")):
        return ""
    if selector.startswith(".draw "):
        return f".{scope} {selector.removeprefix('.draw ')}"
    if selector.startswith("path."):
        return f".{scope} {selector}"
    if selector == ".stereogram":
        return ""
    if selector.startswith(".stereogram "):
        return f".{scope} {selector.removeprefix('.stereogram ')}"
    return f".{scope} {selector}" if selector.startswith(".stereo-") else ""
