"""Asking the application within the process, and judging what comes back.

Plain ASGI rather than a client library: nothing between the call and the answer raises, corrects or waits.
"""

from __future__ import annotations

import asyncio
import json
import math
import re
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Final

from app.web.error_answers import UNEXPECTED

LONGEST_CALL: Final = 5.0
"""Seconds that a call may take; one that takes longer is asked once more before it counts."""

LONGEST_WAIT: Final = 30.0
"""Below it, what counts is the processor's time, for the machine is shared; a call that waits so long hangs."""

_HEADERS: Final = [(b"host", b"127.0.0.1:8010"), (b"accept", b"*/*")]
# numpy and Python write these words; what was sent spells them otherwise.
_NOT_A_NUMBER: Final = re.compile(r"(?<![\w.])-?(?:nan|inf)(?![\w])")


@dataclass(frozen=True)
class Call:
    """One call as it is sent."""

    method: str
    path: str
    query: str = ""
    body: bytes = b""
    content_type: str = "application/json"
    route: str = ""

    def describe(self) -> str:
        """In one line, as one would repeat it."""
        query = f"?{self.query}" if self.query else ""
        return f"{self.method} {self.path}{query} {self.body[:3000]!r}"


@dataclass
class Reply:
    """What came back."""

    status: int = 0
    headers: dict[str, str] = field(default_factory=dict)
    body: bytes = b""
    seconds: float = 0.0
    raised: BaseException | None = None


async def ask(app: Any, call: Call) -> Reply:
    """Send one call."""
    reply = Reply()
    sent = False

    async def receive() -> dict[str, Any]:
        nonlocal sent
        if sent:
            await asyncio.sleep(3600)
        sent = True
        return {"type": "http.request", "body": call.body, "more_body": False}

    async def send(message: dict[str, Any]) -> None:
        if message["type"] == "http.response.start":
            reply.status = message["status"]
            reply.headers = {
                name.decode("latin-1").lower(): value.decode("latin-1") for name, value in message["headers"]
            }
        elif message["type"] == "http.response.body":
            reply.body += message.get("body", b"")

    scope = {
        "type": "http",
        "asgi": {"version": "3.0"},
        "http_version": "1.1",
        "method": call.method,
        "scheme": "http",
        "path": call.path,
        "raw_path": call.path.encode("utf-8", "replace"),
        "query_string": call.query.encode("ascii", "replace"),
        "root_path": "",
        "headers": [
            *_HEADERS,
            (b"content-type", call.content_type.encode()),
            (b"content-length", str(len(call.body)).encode()),
        ],
        "client": ("127.0.0.1", 50000),
        "server": ("127.0.0.1", 8010),
        "state": {},
    }
    begun, busy = time.perf_counter(), time.process_time()
    try:
        await app(scope, receive, send)
    except Exception as error:
        reply.raised = error
    reply.seconds = measure(begun, busy)
    return reply


def measure(begun: float, busy: float) -> float:
    """Seconds since a moment by the clock, or of the processor where those are fewer and the wait is not long."""
    waited, worked = time.perf_counter() - begun, time.process_time() - busy
    return waited if waited > LONGEST_WAIT else min(waited, worked)


def judge(reply: Reply) -> str | None:
    """What is wrong with a reply, in a sentence; None where nothing is."""
    if reply.raised is not None:
        return f"raised {type(reply.raised).__name__}: {str(reply.raised)[:200]}"
    if reply.status == 0 or reply.status >= 500:
        return f"status {reply.status}"
    kind = reply.headers.get("content-type", "")
    content: Any = None
    if kind.startswith("application/json"):
        try:
            content = read_strictly(reply.body)
        except ValueError as error:
            return f"not strict JSON: {error}"
    if reply.status >= 400:
        if kind.startswith("text/html"):
            return None
        return judge_error(content)
    if kind.startswith(("text/", "image/svg", "application/json")):
        try:
            text = reply.body.decode("utf-8")
        except UnicodeDecodeError as error:
            return f"not UTF-8: {error}"
        found = _NOT_A_NUMBER.search(text)
        if found is not None and "javascript" not in kind and "css" not in kind:
            return f"“{found[0]}” in the answer: …{text[max(0, found.start() - 60) : found.end() + 30]}…"
    return None


def judge_error(content: Any) -> str | None:
    """Whether an error has the one shape: message, field and hint, and detail where there is more to say."""
    if not isinstance(content, dict) or set(content) != {"error"} or not isinstance(content["error"], dict):
        return f"an error of another shape: {str(content)[:200]}"
    error = content["error"]
    if not {"message", "field", "hint"} <= set(error) <= {"message", "field", "hint", "detail"}:
        return f"an error of other members: {sorted(error)}"
    if not isinstance(error["message"], str) or not error["message"].strip():
        return "an error without a message"
    if not isinstance(error["field"], str | None) or not isinstance(error["hint"], str | None):
        return "an error whose field or hint is no text"
    if re.search(r"Traceback|<class '|object at 0x|numpy\.|np\.float64", error["message"]):
        return f"an error in a program's words: {error['message'][:200]}"
    return None


def read_strictly(body: bytes) -> Any:
    """JSON in UTF-8 with finite numbers and no key twice. Raises ValueError."""

    def refuse(word: str) -> Any:
        raise ValueError(f"holds {word}")

    def read_float(text: str) -> float:
        number = float(text)
        if not math.isfinite(number):
            raise ValueError(f"holds {text}")
        return number

    def build(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        built = dict(pairs)
        if len(built) != len(pairs):
            raise ValueError("a key stands twice in one object")
        return built

    return json.loads(body.decode("utf-8"), parse_constant=refuse, parse_float=read_float, object_pairs_hook=build)


class LiveTalk:
    """One connection of the live channel, held open from message to message."""

    def __init__(self, app: Any) -> None:
        self.app = app
        self._incoming: asyncio.Queue[dict[str, Any]] = asyncio.Queue()
        self._outgoing: asyncio.Queue[dict[str, Any]] = asyncio.Queue()
        self._task: asyncio.Task[None] | None = None

    async def _open(self) -> None:
        self._incoming, self._outgoing = asyncio.Queue(), asyncio.Queue()
        scope = {
            "type": "websocket",
            "asgi": {"version": "3.0"},
            "http_version": "1.1",
            "scheme": "ws",
            "path": "/live",
            "raw_path": b"/live",
            "query_string": b"",
            "root_path": "",
            "headers": _HEADERS,
            "subprotocols": [],
            "client": ("127.0.0.1", 50000),
            "server": ("127.0.0.1", 8010),
            "state": {},
        }
        self._task = asyncio.create_task(self.app(scope, self._incoming.get, self._outgoing.put))
        await self._incoming.put({"type": "websocket.connect"})
        opened = await self._outgoing.get()
        assert opened["type"] == "websocket.accept", opened

    async def ask(self, text: str) -> tuple[bytes | str | None, float, str | None]:
        """The answer to a message, the seconds it took, and what is wrong with it."""
        if self._task is None or self._task.done():
            await self._open()
        assert self._task is not None
        begun, busy = time.perf_counter(), time.process_time()
        await self._incoming.put({"type": "websocket.receive", "text": text})
        answer = asyncio.create_task(self._outgoing.get())
        await asyncio.wait({answer, self._task}, return_when=asyncio.FIRST_COMPLETED)
        seconds = measure(begun, busy)
        if not answer.done():
            answer.cancel()
            error = None if self._task.cancelled() else self._task.exception()
            self._task = None
            return None, seconds, f"the channel ended: {type(error).__name__}: {str(error)[:200]}"
        message = answer.result()
        if message["type"] != "websocket.send":
            self._task = None
            return None, seconds, f"the channel closed: {message}"
        if message.get("bytes") is not None:
            return message["bytes"], seconds, None
        return message["text"], seconds, judge_live(message["text"])

    async def close(self) -> None:
        """Hang up."""
        if self._task is not None and not self._task.done():
            await self._incoming.put({"type": "websocket.disconnect", "code": 1000})
            await asyncio.wait({self._task}, timeout=5)


def judge_live(text: str) -> str | None:
    """What is wrong with an answer of the live channel; None where nothing is."""
    try:
        content = read_strictly(text.encode("utf-8"))
    except ValueError as error:
        return f"not strict JSON: {error}"
    if content.get("type") not in ("state", "subject", "need", "error"):
        return f"an answer of no known type: {text[:200]}"
    if content["type"] == "error":
        if content["error"].get("message") == UNEXPECTED:
            return "an unexpected error"
        return judge_error({"error": content["error"]})
    found = _NOT_A_NUMBER.search(text)
    return (
        None
        if found is None
        else f"“{found[0]}” in the answer: …{text[max(0, found.start() - 60) : found.end() + 30]}…"
    )


Judge = Callable[[Reply], str | None]
