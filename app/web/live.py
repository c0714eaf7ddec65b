"""The live channel: absolute turns come in over a WebSocket, what the page shows goes out.

Messages in: {"type": "tensor", "sample", "revision"?} makes a kept sample's tensor known; {"type": "turn", "hash",
"seq", "pose", "view", …} asks how it looks; {"type": "surface", "hash", "surface"} asks for the geometry, which comes
as a binary message (``app.web.scene.pack_scene``). A hash that is not known, after a restart say, is answered with
{"type": "need", "hash", "seq"}. Each message carries all that it needs; nothing is kept but a cache of tensors.
"""

from __future__ import annotations

import asyncio
import hashlib
import json
from collections import OrderedDict
from typing import Any, Literal

import numpy as np
from fastapi import APIRouter, WebSocket, WebSocketDisconnect
from pydantic import Field, TypeAdapter, ValidationError

from app.errors import InputError
from app.store.canonical import plain
from app.store.document import SampleDocument, current_property
from app.tensor.pose import read_pose
from app.tensor.principal import find_principal
from app.tensor.surface import SurfaceKind
from app.web.answers import JsonAnswer
from app.web.bodies import parse_object
from app.web.error_answers import explain
from app.web.followed import find_followed
from app.web.kept import crystal_for, crystal_of, entry_of, print_own_unit, tensor_of
from app.web.limits import MAX_MESSAGE_BYTES
from app.web.parts import Number, Part, Pose, Text, ThreeByThree
from app.web.posed import describe_pose, describe_subject
from app.web.probing import ProbePart, probe_surface
from app.web.scene import Subject, pack_scene
from app.web.settling import find_settling, fingerprint_readings
from app.web.showing import turn_part
from app.web.sought import find_answer, fingerprint_answer
from app.web.stereogram_frame import DiscTurn, turn_on_disc
from app.web.turning import (
    Caught,
    Hold,
    as_pose,
    build_view,
    catch,
    keep_pose,
    look,
    put_axis,
    spin,
    spin_by_hand,
    turn_by_hand,
)

router = APIRouter()

MOST_SUBJECTS = 32
LARGEST_SEQ = 2**53


class TensorMessage(Part):
    """Make the tensor of a kept sample known."""

    type: Literal["tensor"]
    sample: Text
    revision: int | None = None
    at: Number | None = Field(None, description="value of the variable of its series; null is the kept tensor")


class SurfaceMessage(Part):
    """Ask for the geometry of a surface."""

    type: Literal["surface"]
    hash: Text
    surface: SurfaceKind


class ViewPart(Part):
    """From where one looks: what is held, and the matrix of an earlier answer (none is the usual view)."""

    hold: Hold = "specimen"
    matrix: ThreeByThree | None = None


class TurnPart(Part):
    """The whole turn since the press: one of a drag of the block, of a ring, or key steps about a specimen axis."""

    drag: list[Number] | None = Field(None, min_length=2, max_length=2, description="right and up, radians")
    ring: Literal["x", "y", "z"] | None = Field(None, description="the drag is of this axis's ring")
    steps: list[Number] | None = Field(None, min_length=3, max_length=3, description="degrees right, up, about z")
    disc: DiscTurn | None = Field(None, description="the drag is in the stereogram")


class PutPart(Part):
    """Put a specimen axis on a direction, another toward a second one."""

    axis: Literal["x", "y", "z"]
    on: Text
    # A list of JSON is taken for the pair; strictly it would be none.
    toward: tuple[Literal["x", "y", "z"], Text] | None = Field(None, strict=False)


class TurnMessage(Part):
    """Ask how the tensor looks in a pose and view."""

    type: Literal["turn"]
    hash: Text
    seq: int
    pose: Pose
    view: ViewPart = ViewPart()
    turn: TurnPart | None = None
    put: PutPart | None = None
    look: list[Number] | None = Field(None, min_length=2, max_length=2, description="right and up, radians")
    hold: Hold | None = Field(None, description="hold this from now on; the picture stays")
    surface: SurfaceKind = "quadric"
    catch: bool = False
    way: Number | None = Field(
        None, ge=0, le=1, description="part of the turn from the crystal frame to the pose to show; the pose stays"
    )
    probe: ProbePart | None = Field(None, description="what the tensor does along a direction; none where it is off")


_messages: TypeAdapter[TensorMessage | SurfaceMessage | TurnMessage] = TypeAdapter(
    TensorMessage | SurfaceMessage | TurnMessage
)


class Subjects:
    """Subjects by their hash, the least lately used forgotten first."""

    def __init__(self) -> None:
        self._kept: OrderedDict[str, Subject] = OrderedDict()

    def find(self, key: str) -> Subject | None:
        """The subject with a hash, or None."""
        subject = self._kept.get(key)
        if subject is not None:
            self._kept.move_to_end(key)
        return subject

    def take(self, document: SampleDocument, at: float | None = None) -> Subject:
        """The subject of a document's current property, at a value of its series where one is given.

        Raises InputError where it has none.
        """
        kept = current_property(document)
        if kept is None:
            raise InputError("The sample has no property yet.", field="property", hint="Choose one.")
        entry = entry_of(kept)
        content = json.dumps(
            [
                document.crystal.plain(),
                kept.tensor.plain(),
                kept.unit,
                kept.kind,
                list(document.part),
                fingerprint_readings(document, kept),
                fingerprint_answer(document),
                [plain(entry) for entry in document.series],
                at,
            ],
            sort_keys=True,
        )
        key = hashlib.sha256(content.encode()).hexdigest()[:24]
        known = self.find(key)
        if known is not None:
            return known
        crystal = crystal_for(crystal_of(document.crystal), document.crystal, entry)
        followed = find_followed(document, crystal, kept)
        tensor = tensor_of(crystal, kept)
        if at is not None and followed is not None:
            tensor = followed.take(crystal, kept, at)
        other: Literal["rod", "plate", None] = None
        if entry.long_bar == "rod":
            other = "rod"
        elif entry.plate == "rod":
            other = "plate"
        unit = print_own_unit(kept.unit)
        subject = Subject(
            key,
            crystal,
            tensor,
            find_principal(tensor.estimate),
            "" if unit == "1" else unit,
            other,
            document.part,
            find_settling(crystal, document, kept),
            None if followed is None else followed.describe(at),
            find_answer(crystal_of(document.crystal), document),
        )
        self._kept[key] = subject
        while len(self._kept) > MOST_SUBJECTS:
            self._kept.popitem(last=False)
        return subject


subjects = Subjects()


def answer_turn(subject: Subject, message: TurnMessage) -> dict[str, Any]:
    """How a subject looks after a turn or a look."""
    kept = message.pose.model_dump(by_alias=True, exclude_none=True)
    pose = read_pose(kept, subject.crystal)
    view = build_view(message.view.hold, message.view.matrix)
    caught: Caught | None = None
    if message.put is not None:
        kept = put_axis(subject.crystal, pose.matrix, message.put.axis, message.put.on, message.put.toward)
        pose = read_pose(kept, subject.crystal)
    if message.turn is not None:
        matrix, about = pose.matrix, None
        if message.turn.drag is not None:
            right, up = message.turn.drag
            if message.turn.ring is None:
                matrix = turn_by_hand(matrix, view, right, up)
            else:
                about = "xyz".index(message.turn.ring)
                matrix = spin_by_hand(matrix, view, about, right, up)
        if message.turn.steps is not None:
            right, up, about_z = message.turn.steps
            matrix = turn_by_hand(matrix, view, float(np.deg2rad(right)), float(np.deg2rad(up)))
            matrix = spin(matrix, 2, about_z)
        if message.turn.disc is not None:
            matrix = turn_on_disc(subject.crystal, matrix, message.turn.disc)
        if message.catch:
            matrix, caught = catch(subject.crystal, subject.principal, matrix, about)
        pose = as_pose(matrix)
        kept = keep_pose(pose.matrix, caught)
    if message.look is not None:
        view = look(view, *message.look)
    if message.hold is not None:
        view = view.exchange(message.hold, pose.matrix)
    if message.way is not None and message.way < 1:
        part = as_pose(turn_part(pose.matrix, message.way))
        answer = describe_pose(subject, message.surface, part, {"matrix": part.matrix.tolist()}, view)
        answer["pose"] = {**answer["pose"], "kept": kept}
    else:
        answer = describe_pose(subject, message.surface, pose, kept, view, caught)
    if message.probe is not None:
        shown = np.array(answer["pose"]["matrix"])
        found = probe_surface(subject, subject.scene(message.surface), view.screen(shown), message.probe)
        answer["overlay"]["shapes"] += found.pop("shapes")
        answer["probe"] = found
    return {"type": "state", "hash": subject.key, "seq": message.seq, "way": message.way, **answer}


def read_message(text: str) -> TensorMessage | SurfaceMessage | TurnMessage:
    """A message in one of its three shapes. Raises InputError."""
    encoded = text.encode()
    if len(encoded) > MAX_MESSAGE_BYTES:
        raise InputError(
            f"The message is too large: it has {len(encoded)} bytes and may have {MAX_MESSAGE_BYTES}.",
            hint="A turn takes about one kilobyte.",
        )
    content = parse_object(encoded)
    models: dict[Any, Any] = {"tensor": TensorMessage, "surface": SurfaceMessage, "turn": TurnMessage}
    kind = content.get("type")
    model = models.get(kind) if isinstance(kind, str) else None
    if model is None:
        raise InputError("The message has no known type.", field="type", hint="It is tensor, surface or turn.")
    try:
        message: TensorMessage | SurfaceMessage | TurnMessage = model.model_validate(content)
    except ValidationError as error:
        first = error.errors()[0]
        place = ".".join(str(part) for part in first["loc"])
        raise InputError(f"{place or 'The message'}: {first['msg']}", field=place or None) from None
    return message


def answer_message(socket: WebSocket, text: str) -> dict[str, Any] | bytes:
    """The answer to one message."""
    message = read_message(text)
    if isinstance(message, TensorMessage):
        kept = socket.app.state.store.samples.get(message.sample, message.revision)
        subject = subjects.take(kept.document, message.at)
        return {"type": "subject", "sample": message.sample, "revision": kept.revision, **describe_subject(subject)}
    known = subjects.find(message.hash)
    if known is None:
        return {"type": "need", "hash": message.hash, "seq": getattr(message, "seq", None)}
    if isinstance(message, SurfaceMessage):
        return pack_scene(known, message.surface)
    return answer_turn(known, message)


@router.websocket("/live")
async def live(socket: WebSocket) -> None:
    """Answer messages in their order until the page goes away."""
    await socket.accept()
    while True:
        try:
            text = await socket.receive_text()
        except (WebSocketDisconnect, KeyError):
            return
        try:
            answer = answer_message(socket, text)
            sent = answer if isinstance(answer, bytes) else write_answer(answer)
        except Exception as error:
            # Nothing that a message holds may end the channel: the page would lose the turn under its hand.
            told = explain(error)
            body = {"message": told.message, "field": told.field, "hint": told.hint}
            sent = write_answer({"type": "error", "seq": _find_seq(text), "error": body})
        if isinstance(sent, bytes):
            await socket.send_bytes(sent)
        else:
            await socket.send_text(sent)
        # Messages that already wait are received without a pause: other pages have their turn between them.
        await asyncio.sleep(0)


def write_answer(answer: dict[str, Any]) -> str:
    """An answer as strict JSON. Raises InputError where a number in it is not finite."""
    return bytes(JsonAnswer(answer).body).decode()


def _find_seq(text: str) -> int | None:
    """The sequence number of a message that could not be answered, so that the page knows which."""
    try:
        seq = json.loads(text).get("seq")
    except (ValueError, AttributeError, RecursionError):
        return None
    return seq if isinstance(seq, int) and abs(seq) < LARGEST_SEQ else None
