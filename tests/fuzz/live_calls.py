"""The live channel under mutated messages, on one connection that must never end by itself."""

from __future__ import annotations

import json
from dataclasses import dataclass

from tests.fuzz.calls import Ground
from tests.fuzz.client import LONGEST_CALL, LiveTalk

HASHES_KEPT = 12


@dataclass(frozen=True)
class Told:
    """One message, its answer's time, and what is wrong with it."""

    text: str
    seconds: float
    fault: str | None
    kind: str


async def talk(ground: Ground, live: LiveTalk) -> Told:
    """Send one mutated message; now and then a good one first, so that there are fingerprints to ask for."""
    if not ground.hashes or ground.random.random() < 0.02:
        await _learn(ground, live, ground.make_opening())
    text = ground.make_message()
    answer, seconds, fault = await live.ask(text)
    if fault is None and seconds > LONGEST_CALL:
        _, again, _ = await live.ask(text)
        if again > LONGEST_CALL:
            fault = f"took {min(seconds, again):.1f} s"
    kind = "bytes" if isinstance(answer, bytes) else "nothing"
    if isinstance(answer, str):
        content = json.loads(answer)
        kind = content["type"]
        _remember(ground, content)
    return Told(text, seconds, fault, kind)


async def _learn(ground: Ground, live: LiveTalk, text: str) -> None:
    answer, _, _ = await live.ask(text)
    if isinstance(answer, str):
        _remember(ground, json.loads(answer))


def _remember(ground: Ground, content: dict[str, object]) -> None:
    if content.get("type") == "subject" and isinstance(content.get("hash"), str):
        ground.hashes = [*ground.hashes, str(content["hash"])][-HASHES_KEPT:]
