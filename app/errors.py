"""One tree of errors for the whole tool: what is wrong, where, and what to do.

Every error carries attributes, not prose alone, so that the command line, a notebook and an HTTP answer can each
show it in their own way. This module imports nothing of the project.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any


class HalfturnError(Exception):
    """Base of every error that the tool raises on purpose.

    Attributes:
        message: one sentence that says what is wrong.
        field: where, as a path into what was given, like ``readings[3].sigma``; None where it concerns the whole.
        hint: what to do about it; None where the message says it all.
        detail: further facts as JSON-like data; None where there are none.
    """

    def __init__(
        self,
        message: str,
        *,
        field: str | None = None,
        hint: str | None = None,
        detail: Any = None,
    ) -> None:
        super().__init__(message)
        self.message = message
        self.field = field
        self.hint = hint
        self.detail = detail

    def __str__(self) -> str:
        where = f"{self.field}: " if self.field else ""
        what_to_do = f" {self.hint}" if self.hint else ""
        return f"{where}{self.message}{what_to_do}"


class InputError(HalfturnError):
    """What was given is wrong, inconsistent or ambiguous; the giver can mend it."""


class UndeterminedError(HalfturnError):
    """What was given is sound but does not determine the answer; ``detail`` says what would settle it."""


class StoreError(HalfturnError):
    """Kept work cannot be read or written; nothing that was acknowledged is lost."""


class NotFoundError(StoreError):
    """There is no such sample, revision or sheet."""


class ConflictError(StoreError):
    """The change was made against a revision that is no longer the newest."""


def join_field(outer: str, inner: str | None) -> str:
    """Join two parts of a field path: ``readings[3]`` and ``sigma`` give ``readings[3].sigma``."""
    if not inner:
        return outer
    if not outer:
        return inner
    return f"{outer}{inner}" if inner.startswith("[") else f"{outer}.{inner}"


@contextmanager
def located(field: str) -> Iterator[None]:
    """Put ``field`` before the field path of any HalfturnError that leaves the block."""
    try:
        yield
    except HalfturnError as error:
        error.field = join_field(field, error.field)
        raise
