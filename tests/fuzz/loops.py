"""Running a coroutine to its end whatever the thread already runs: a browser's driver keeps a loop in its own."""

from __future__ import annotations

import asyncio
from collections.abc import Coroutine
from concurrent.futures import ThreadPoolExecutor
from typing import Any, TypeVar

Result = TypeVar("Result")


def run_apart(coroutine: Coroutine[Any, Any, Result]) -> Result:
    """The coroutine's result, from a loop in a thread of its own."""
    with ThreadPoolExecutor(1) as threads:
        return threads.submit(asyncio.run, coroutine).result()
