"""Finding samples by words: in name, tags, notes, group and the names of properties."""

from __future__ import annotations

import unicodedata

from app.errors import InputError
from app.store.document import SampleDocument

LONGEST_SEARCH = 500
"""Characters of a text that is searched for."""


def split_words(text: str) -> tuple[str, ...]:
    """Return the words of ``text`` in the form in which they are compared. Raises InputError where it is too long."""
    if len(text) > LONGEST_SEARCH:
        raise InputError(
            f"The text to search for has {len(text)} characters; at most {LONGEST_SEARCH} are taken.",
            field="text",
            hint="A few words of the name, the tags or the notes will do.",
        )
    return tuple(fold(text).split())


def fold(text: str) -> str:
    """Return ``text`` without the difference of capitals, and with signs that are one thing written in one way."""
    return unicodedata.normalize("NFKC", unicodedata.normalize("NFKC", text).casefold())


def matches(document: SampleDocument, words: tuple[str, ...]) -> bool:
    """Tell whether every word stands somewhere in what the document says of its sample; always true without words.

    Looked through are name, tags, notes, the group's symbol, and names and kinds of the properties.
    """
    if not words:
        return True
    parts = [document.name, *document.tags, document.notes, document.crystal.group]
    for item in document.properties:
        parts += [item.name, item.kind.replace("_", " ")]
    # A word is found within one part: a line break keeps the end of one and the beginning of the next apart.
    whole = fold("\n".join(parts))
    return all(word in whole for word in words)
