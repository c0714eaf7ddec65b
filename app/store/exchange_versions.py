"""Older forms of the exchanged document and the steps that bring them forward, one version at a time.

A step knows the form before and the one after and nothing else; it is not changed once it was released.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any, Final

from app.errors import InputError
from app.store.exchange_shapes import FORMAT, VERSION

Data = Mapping[str, Any]


def _wrap_bare_document(data: Data) -> Data:
    """From 0, the bare document of one sample, to 1, a list of such documents that says what it is."""
    return {"format": FORMAT, "version": 1, "samples": [data]}


def _name_documents(data: Data) -> Data:
    """From 1 to 2, where each sample has its document beside identity, times and history."""
    samples = data.get("samples")
    if isinstance(samples, list | tuple):
        samples = [{"document": sample} for sample in samples]
    return {**data, "version": 2, "samples": samples}


STEPS: Final[tuple[Callable[[Data], Data], ...]] = (_wrap_bare_document, _name_documents)
"""The step at place n brings version n to n + 1."""


def find_version(data: Any) -> int:
    """Return the version of a document; 0 for the bare document of a sample, which has none. Raises InputError."""
    if not isinstance(data, Mapping):
        raise InputError("This is no document of samples: it is not a JSON object.", hint="Choose another file.")
    if "format" not in data and "crystal" in data and "name" in data:
        return 0
    if data.get("format") != FORMAT:
        raise InputError(
            "This is no document of samples.",
            field="format",
            hint=f'One begins with {{"format": "{FORMAT}", "version": {VERSION}}}.',
        )
    version = data.get("version")
    if not isinstance(version, int) or isinstance(version, bool) or version < 1:
        raise InputError(
            "The version of the document is a whole number from 1.", field="version", hint="Take the file anew."
        )
    if version > VERSION:
        raise InputError(
            f"The document has version {version}; this program reads versions up to {VERSION}.",
            field="version",
            hint="Take it in with the program that wrote it, or update this one.",
        )
    return version


def bring_forward(data: Any) -> tuple[Data, int]:
    """Return a document in the present version, and the version that it had. Raises InputError."""
    version = found = find_version(data)
    while version < VERSION:
        data = STEPS[version](data)
        version += 1
    return data, found
