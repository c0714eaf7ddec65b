"""How much the server takes: one home for what concerns requests as such, and a list of every limit of a call.

What a single list or text of a call may hold stands in the shape of that call, from which ``/openapi.json`` and the API
page are made; what a calculation can bear stands with the calculation.
"""

from __future__ import annotations

from typing import Final

MAX_BODY_BYTES: Final = 8 * 1024 * 1024
"""The largest request body, in bytes."""

MAX_MESSAGE_BYTES: Final = 64 * 1024
"""The largest message on the live channel that is read, in bytes; a whole turn takes about one kilobyte."""

LARGEST_FRAME_BYTES: Final = 1024 * 1024
"""A message on the live channel beyond this ends the connection before it is held in memory, in bytes."""

DEEPEST_BODY: Final = 64
"""Levels of objects and lists within each other in a body or a message; no call needs more than ten."""

LONGEST_NUMBER: Final = 308
"""Digits of a whole number; a longer one is beyond every float and is refused as not finite."""

LONGEST_HEADERS_BYTES: Final = 64 * 1024
"""Request line and headers together, in bytes; beyond it the connection is closed with 400."""

MOST_CONNECTIONS: Final = 200
"""Connections and running requests at once; further ones are answered with 503."""
