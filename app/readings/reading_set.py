"""Readings resolved against a crystal: checked, and laid out as arrays for the numerics."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from operator import attrgetter
from typing import Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.errors import InputError, located
from app.readings.reading import NEEDS_DIRECTION, NEEDS_SECOND, READING_KINDS, Reading, ReadingKind
from app.tensor.kind import Kind
from app.tensor.pose import Pose, resolve_direction, resolve_directions

FloatArray = npt.NDArray[np.float64]
IntArray = npt.NDArray[np.int64]

MAX_DIRECTION_SIGMA = 30.0
"""Degrees; beyond it the second-order treatment of a bar's turn has no meaning."""

MOST_BATCH_WORK: Final = 2e8
"""Readings times the square of their batches: what weighing them together costs. 2e8 takes about a second."""


@dataclass(frozen=True)
class ReadingSet:
    """N readings in the crystal frame.

    Attributes:
        kinds: shape (N,), positions in READING_KINDS.
        first: shape (N, 3), n as unit vectors; zero where a kind has none.
        second: shape (N, 3), m likewise.
        values: shape (N,); NaN where a value is absent (a plan).
        sigma: shape (N,), or None where no reading has one.
        turn_sigma: shape (N,), the standard deviation of each component of the bar's turn, radians.
        bars: shape (N,), number of the bar; a reading without a bar is a bar of its own.
        batches: shape (N,), number of the batch, −1 for none.
        batch_sigma: relative standard deviation of every batch.
    """

    kinds: IntArray
    first: FloatArray
    second: FloatArray
    values: FloatArray
    sigma: FloatArray | None
    turn_sigma: FloatArray
    bars: IntArray
    batches: IntArray
    batch_sigma: FloatArray

    def __len__(self) -> int:
        return len(self.kinds)

    def has(self, *names: ReadingKind) -> bool:
        """Whether any reading is of one of these kinds."""
        return any(bool(np.any(self.kinds == READING_KINDS.index(name))) for name in names)

    def where(self, name: ReadingKind) -> npt.NDArray[np.bool_]:
        """Which readings are of a kind."""
        places: npt.NDArray[np.bool_] = self.kinds == READING_KINDS.index(name)
        return places


def resolve_readings(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose,
    values_required: bool = True,
) -> ReadingSet:
    """Check readings against each other and the crystal and lay them out as arrays.

    Args:
        crystal: for the directions.
        kind: of the tensor; rods and sheets need a polar symmetric one.
        readings: N of them.
        batches: name → relative standard deviation of its calibration.
        pose: for directions in the specimen frame, where a reading has no pose of its own.
        values_required: False for a plan, whose readings may lack a value.

    Raises:
        InputError: with the field of the first reading that is wrong, like ``readings[3].sigma``.
    """
    known = _check_batches(batches or {})
    try:
        first, second = _resolve_all(crystal, kind, readings, known, pose, values_required)
    except InputError:
        # Whatever is wrong is told of the first reading that has a fault, at its field.
        for index, reading in enumerate(readings):
            with located(f"readings[{index}]"):
                _check_reading(reading, kind, known, values_required)
                for field, given in (("direction", reading.direction), ("second", reading.second)):
                    if given is not None:
                        with located(field):
                            resolve_direction(crystal, given, reading.pose or pose)
        raise
    numbers = {name: number for number, name in enumerate(known)}
    _check_batch_work(readings)
    bars, turn_sigma = _collect_bars(readings)
    return ReadingSet(
        kinds=np.array([READING_KINDS.index(reading.kind) for reading in readings], dtype=np.int64),
        first=first,
        second=second,
        values=np.array([np.nan if reading.value is None else reading.value for reading in readings], dtype=np.float64),
        sigma=_collect_sigma(readings),
        turn_sigma=turn_sigma,
        bars=bars,
        batches=np.array(
            [-1 if reading.batch is None else numbers[reading.batch] for reading in readings], dtype=np.int64
        ),
        batch_sigma=np.array(list(known.values()), dtype=np.float64),
    )


def _resolve_all(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    batches: Mapping[str, float],
    pose: Pose,
    values_required: bool,
) -> tuple[FloatArray, FloatArray]:
    """Check every reading, and the unit vectors (N, 3) of their directions and second directions."""
    poses: dict[int, tuple[Pose, list[int]]] = {}
    for index, reading in enumerate(readings):
        _check_reading(reading, kind, batches, values_required)
        frame = reading.pose or pose
        poses.setdefault(id(frame), (frame, []))[1].append(index)
    found = np.zeros((2, len(readings), 3))
    for frame, members in poses.values():
        for vectors, of in zip(found, (attrgetter("direction"), attrgetter("second")), strict=True):
            places = [index for index in members if of(readings[index]) is not None]
            if places:
                vectors[places] = resolve_directions(crystal, [of(readings[index]) for index in places], frame)
    return found[0], found[1]


def _check_batches(batches: Mapping[str, float]) -> dict[str, float]:
    for name, sigma in batches.items():
        if not np.isfinite(sigma) or not 0.0 <= sigma < 1.0:
            raise InputError(
                f"The calibration error of the batch “{name}” is {sigma:g}.",
                field=f"batches.{name}",
                hint="Give it as a relative standard deviation from 0 up to 1, for example 0.01 for 1 %.",
            )
    return dict(batches)


def _check_batch_work(readings: Sequence[Reading]) -> None:
    used = len({reading.batch for reading in readings} - {None})
    if len(readings) * used**2 > MOST_BATCH_WORK:
        most = int((MOST_BATCH_WORK / len(readings)) ** 0.5)
        raise InputError(
            f"{len(readings)} readings may share at most {most} calibrated batches; they are in {used}.",
            field="batches",
            hint="Fit in parts, or give fewer batches a calibration error.",
        )


def _check_reading(reading: Reading, kind: Kind, batches: Mapping[str, float], values_required: bool) -> None:
    name = reading.kind
    if name not in READING_KINDS:
        raise InputError(
            f"A reading cannot be of the kind “{name}”.", field="kind", hint=f"It is {', '.join(READING_KINDS)}."
        )
    if name in ("rod", "sheet") and (kind.intrinsic != "symmetric" or kind.parity != "polar"):
        raise InputError(
            f"A {name} reading is of a conductivity-like tensor: polar and symmetric.",
            field="kind",
            hint="For a tensor that is not, give readings of the kinds along and across.",
        )
    for field, needs, given in (
        ("direction", NEEDS_DIRECTION, reading.direction),
        ("second", NEEDS_SECOND, reading.second),
    ):
        if name in needs and given is None:
            raise InputError(f"A reading of the kind {name} needs a {field}.", field=field)
        if name not in needs and given is not None:
            raise InputError(
                f"A reading of the kind {name} takes no {field}.",
                field=field,
                hint="Leave it out, or correct the kind.",
            )
    if reading.value is None:
        if values_required:
            raise InputError("The reading has no value.", field="value")
    elif not math.isfinite(reading.value):
        raise InputError("The value is not a finite number.", field="value")
    elif name in ("rod", "sheet") and reading.value <= 0:
        raise InputError(
            f"A {name} reading is {reading.value:g}, but what it measures is positive.",
            field="value",
            hint="Correct the value or the kind.",
        )
    if reading.sigma is not None and not (math.isfinite(reading.sigma) and reading.sigma > 0):
        raise InputError(f"The standard deviation is {reading.sigma:g}; it must be positive.", field="sigma")
    turn = reading.direction_sigma
    if turn is not None and not 0 <= turn <= MAX_DIRECTION_SIGMA:
        raise InputError(
            f"The standard deviation of the direction is {turn:g}°.",
            field="direction_sigma",
            hint=f"It lies between 0 and {MAX_DIRECTION_SIGMA:g}°.",
        )
    for field, value in (("direction_sigma", turn), ("batch", reading.batch)):
        if value is not None and reading.sigma is None:
            raise InputError(
                f"“{field}” needs the reading's own standard deviation beside it.",
                field=field,
                hint="Give sigma for every reading, or leave direction_sigma and batch out.",
            )
    if reading.batch is not None and reading.batch not in batches:
        raise InputError(
            f"The batch “{reading.batch}” has no calibration error.",
            field="batch",
            hint="List it in batches with its relative standard deviation.",
        )


def _collect_sigma(readings: Sequence[Reading]) -> FloatArray | None:
    without = [index for index, reading in enumerate(readings) if reading.sigma is None]
    if len(without) == len(readings):
        return None
    if without:
        raise InputError(
            "Some readings carry a standard deviation and this one does not.",
            field=f"readings[{without[0]}].sigma",
            hint="Give sigma for every reading or for none.",
        )
    return np.array([reading.sigma for reading in readings], dtype=np.float64)


def _collect_bars(readings: Sequence[Reading]) -> tuple[IntArray, FloatArray]:
    """Number of every reading's bar, and the standard deviation of its turn in radians."""
    names = dict.fromkeys(reading.bar for reading in readings if reading.bar is not None)
    numbers = {name: number for number, name in enumerate(names)}
    turn_of_bar: dict[str, float] = {}
    for index, reading in enumerate(readings):
        if reading.bar is None or reading.direction_sigma is None:
            continue
        known = turn_of_bar.setdefault(reading.bar, reading.direction_sigma)
        if known != reading.direction_sigma:
            raise InputError(
                f"The bar “{reading.bar}” has two standard deviations of its direction, {known:g}° and "
                f"{reading.direction_sigma:g}°.",
                field=f"readings[{index}].direction_sigma",
                hint="A bar has one random turn, so one value; or give the pieces different bar names.",
            )
    bars = np.zeros(len(readings), dtype=np.int64)
    turns = np.zeros(len(readings))
    for index, reading in enumerate(readings):
        if reading.bar is None:
            bars[index] = len(numbers) + index
            turns[index] = reading.direction_sigma or 0.0
        else:
            # A reading that does not repeat its bar's value shares the bar's turn all the same.
            bars[index] = numbers[reading.bar]
            turns[index] = turn_of_bar.get(reading.bar, 0.0)
    return bars, np.deg2rad(turns)
