"""What belongs to the laboratory and not to one sample, such as its stages: JSON values by name."""

from __future__ import annotations

import json
from typing import Any

from app.errors import InputError
from app.store.canonical import canonical_json
from app.store.database import Database


class Laboratory:
    """Values by name, shared by all samples; the last one put stands."""

    def __init__(self, database: Database) -> None:
        self._database = database

    def get(self, key: str, default: Any = None) -> Any:
        """Return the JSON-like value kept under ``key``, else ``default``."""
        with self._database.reading() as connection:
            row = connection.execute("SELECT json FROM laboratory WHERE key = ?", (key,)).fetchone()
        return default if row is None else json.loads(row["json"])

    def put(self, key: str, value: Any) -> None:
        """Keep a JSON-like ``value`` under ``key``; InputError where it is not JSON or the name is empty."""
        if not key.strip():
            raise InputError("A value of the laboratory needs a name.", field="key", hint="Give one, like stages.")
        text = canonical_json(value).decode("utf-8")
        with self._database.writing() as connection:
            connection.execute(
                "INSERT INTO laboratory (key, json, changed) VALUES (?, ?, ?) "
                "ON CONFLICT (key) DO UPDATE SET json = excluded.json, changed = excluded.changed",
                (key, text, self._database.now()),
            )
