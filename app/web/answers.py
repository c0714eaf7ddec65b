"""How an answer is written: JSON in which every number is finite, or none at all.

Unlike the framework's own answers, nothing is converted in silence: a NaN or an infinity is refused with the place
where it stands, because a reader must be able to trust that null means "does not exist".
"""

from __future__ import annotations

import json
import math
from typing import Any

import numpy as np
from starlette.responses import JSONResponse

from app.errors import InputError


class JsonAnswer(JSONResponse):
    """A JSON answer; numpy arrays and scalars are written as lists and numbers.

    Raises:
        InputError: a number in the content is not finite; the field is its path in the answer.
    """

    def render(self, content: Any) -> bytes:
        """Write the content as UTF-8 JSON without spaces."""
        try:
            text = json.dumps(content, allow_nan=False, ensure_ascii=False, separators=(",", ":"), default=_plain)
        except ValueError:
            where = _where_not_finite(content, "")
            raise InputError(
                "The answer would not be finite" + (f" ({where})." if where else "."),
                hint="Look for values that are extremely large or small, or a tensor that cannot be inverted.",
            ) from None
        # A lone half of a surrogate pair, quoted from what was given, has no UTF-8 form.
        return text.encode("utf-8", "replace")


def _plain(value: Any) -> Any:
    """Turn a numpy array or scalar into lists and numbers."""
    if isinstance(value, np.ndarray | np.generic):
        return value.tolist()
    raise TypeError(f"{type(value).__name__} cannot be written as JSON")


def _where_not_finite(value: Any, path: str) -> str | None:
    """Find the first number that is not finite: its path, or None."""
    if isinstance(value, np.ndarray | np.generic):
        value = value.tolist()
    if isinstance(value, float):
        return None if math.isfinite(value) else path
    if isinstance(value, dict):
        inner = ((f"{path}.{key}" if path else str(key), item) for key, item in value.items())
    elif isinstance(value, list | tuple):
        inner = ((f"{path}[{index}]", item) for index, item in enumerate(value))
    else:
        return None
    return next((found for place, item in inner if (found := _where_not_finite(item, place)) is not None), None)
