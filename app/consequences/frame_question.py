"""Which frame did they mean? A published tensor without stated axes, judged by a few readings of one's own.

Every frame rule × relabelling of the cell × way of reading the bars (as plates, nᵀAn, or as long bars, 1/(nᵀA⁻¹n)) is
a candidate. With r the readings less what the candidate predicts, χ² = rᵀV⁻¹r and the weight is proportional to
exp(−χ²/2): the posterior where nothing was known before. V is that of the readings alone; the published tensor counts
as exact. Candidates that come to the same tensor, read in the same way, are one answer and count once, however many
namings lead to it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.special import chdtrc

from app.consequences.frame_candidate import Naming, Placement, place_tensor
from app.consequences.frame_cut import LARGEST_INDEX, NextCut, ReadingKind, choose_next_cut, predict_readings
from app.crystal.crystal import Crystal
from app.errors import InputError
from app.tensor.kind import Kind

FloatArray = npt.NDArray[np.float64]
FIT_LEVEL: Final = 0.001
"""An answer whose χ² would be passed by chance less often than this does not explain the readings."""

SURVIVAL: Final = 0.001
"""An answer below this part of the best one's weight is out."""

MOST_READINGS: Final = 10_000


@dataclass(frozen=True)
class OwnReading:
    """A value that was measured on a bar or plate of one's own.

    Attributes:
        direction: shape (3,), in the crystal's own frame.
        value: what was read, in the unit of the published tensor.
        sigma: its standard deviation, above zero.
        kind: "along" (nᵀAn), "rod" (1/(nᵀA⁻¹n)), or None where that is part of the question.
    """

    direction: FloatArray
    value: float
    sigma: float
    kind: ReadingKind | None = None


@dataclass(frozen=True)
class FrameAnswer:
    """One thing that may have been meant.

    Attributes:
        matrix: shape (3, 3), the published tensor in the crystal's own frame.
        read_as: how the readings without a kind are taken; None where every reading has its own.
        namings: the frames that come to this tensor, the plainest first.
        forbidden: part of the tensor (Frobenius) that the crystal's symmetry forbids there.
        predicted: shape (m,), of the readings.
        chi2: rᵀV⁻¹r.
        p_value: of a larger χ² by chance, at as many degrees of freedom as readings.
        weight: of all answers together 1.
        survives: whether it explains the readings and is not far less likely than the best one.
        sentence: what it would mean.
    """

    matrix: FloatArray
    read_as: ReadingKind | None
    namings: tuple[Naming, ...]
    forbidden: float
    predicted: FloatArray
    chi2: float
    p_value: float
    weight: float
    survives: bool
    sentence: str


@dataclass(frozen=True)
class FrameQuestion:
    """The answers, the likeliest first, and what would settle it.

    Attributes:
        answers: every different answer.
        next_cut: None where one answer survives or none does, and where no cut within reach tells the survivors apart.
        candidates: how many frames, with relabellings and ways of reading, were looked at.
        sentence: the result in words.
    """

    answers: tuple[FrameAnswer, ...]
    next_cut: NextCut | None
    candidates: int
    sentence: str

    @property
    def survivors(self) -> tuple[FrameAnswer, ...]:
        """The answers that the readings leave."""
        return tuple(answer for answer in self.answers if answer.survives)


def ask_frame(
    crystal: Crystal,
    published: npt.ArrayLike,
    readings: Sequence[OwnReading],
    *,
    kind: Kind | None = None,
    covariance: npt.ArrayLike | None = None,
    published_cell: npt.ArrayLike | None = None,
    any_edges: bool = False,
    max_index: int = 3,
    sigma: float | None = None,
) -> FrameQuestion:
    """Weigh every frame that a published tensor may refer to against readings of one's own.

    Args:
        crystal: with a cell; readings refer to its frame.
        published: shape (3, 3), in a frame that is not stated.
        readings: at least one.
        kind: of the tensor, default polar and symmetric.
        covariance: V, shape (m, m), of the readings; default the squares of their sigma.
        published_cell: printed beside the tensor; default the crystal's own cell.
        any_edges: whether the edges may have been named in any order and sense.
        max_index: of the rows and normals that the next cut is chosen from, 1 to 6.
        sigma: expected of the next reading; default the median of the readings'.

    Raises:
        InputError: no readings, values that are not finite, a sigma that is not above zero, a V that is no covariance,
            a limiting group, a published cell that does not match.
    """
    if not 1 <= max_index <= LARGEST_INDEX:
        raise InputError(f"The largest index of a next cut is 1 to {LARGEST_INDEX}.", field="max_index")
    directions, values, sigmas = _lay_out(readings)
    whitener = _whiten(sigmas, covariance)
    expected = float(np.median(sigmas)) if sigma is None else sigma
    if not (expected > 0.0 and np.isfinite(expected)):
        raise InputError("The expected standard deviation is a finite number above zero.", field="sigma")
    placements = place_tensor(crystal, published, kind, published_cell=published_cell, any_edges=any_edges)
    open_kinds = any(reading.kind is None for reading in readings)
    ways: tuple[ReadingKind | None, ...] = ("along", "rod") if open_kinds else (None,)
    answers = []
    for placement in placements:
        for way in ways:
            as_rods = np.array([(reading.kind or way) == "rod" for reading in readings])
            predicted = predict_readings(placement.matrix, directions, as_rods)
            if not np.all(np.isfinite(predicted)):
                continue
            with np.errstate(over="ignore"):
                chi2 = float(np.sum(np.square(whitener @ (values - predicted))))
            answers.append((placement, way, predicted, chi2))
    if not answers or not np.isfinite(min(entry[3] for entry in answers)):
        raise InputError(
            "No frame gives these readings a value to compare with.",
            field="readings",
            hint="A long bar has no value where the tensor has no inverse; check the values and their unit.",
        )
    # Of equal χ² (to rounding) the plainer reading comes first, as it was laid out.
    answers.sort(key=lambda entry: round(entry[3], 9))
    chi2s = np.array([entry[3] for entry in answers])
    relative = np.exp(-(chi2s - chi2s[0]) / 2.0)
    weights = relative / np.sum(relative)
    built = tuple(
        _build_answer(placement, way, predicted, chi2, float(weight), bool(share >= SURVIVAL))
        for (placement, way, predicted, chi2), weight, share in zip(answers, weights, relative, strict=True)
    )
    survivors = [answer for answer in built if answer.survives]
    next_cut = None
    if len(survivors) > 1:
        # Read as the others are: where it is open how, each answer has its own way.
        kinds = {reading.kind for reading in readings}
        next_kind = kinds.pop() if len(kinds) == 1 else (None if open_kinds else "along")
        next_cut = choose_next_cut(
            crystal,
            [answer.matrix for answer in survivors],
            [next_kind or answer.read_as for answer in survivors],
            np.array([answer.weight for answer in survivors]),
            expected,
            max_index,
        )
    count = sum(len(placement.namings) for placement in placements) * len(ways)
    return FrameQuestion(built, next_cut, count, _say_result(survivors, next_cut))


def _lay_out(readings: Sequence[OwnReading]) -> tuple[FloatArray, FloatArray, FloatArray]:
    if not 1 <= len(readings) <= MOST_READINGS:
        raise InputError(
            f"The question needs readings, at least one and at most {MOST_READINGS}.",
            field="readings",
            hint="A few along directions that are no axes of symmetry tell most.",
        )
    for index, reading in enumerate(readings):
        length = float(np.linalg.norm(reading.direction))
        if not (np.isfinite(length) and length > 0.0):
            raise InputError("A direction is three finite numbers, not all zero.", field=f"readings[{index}].direction")
        if not np.isfinite(reading.value):
            raise InputError("A reading is a finite number.", field=f"readings[{index}].value")
        if not (reading.sigma > 0.0 and np.isfinite(reading.sigma)):
            raise InputError(
                "A reading's standard deviation is a finite number above zero.", field=f"readings[{index}].sigma"
            )
    directions = np.array([reading.direction for reading in readings], dtype=np.float64)
    unit = directions / np.linalg.norm(directions, axis=1, keepdims=True)
    return unit, np.array([reading.value for reading in readings]), np.array([reading.sigma for reading in readings])


def _whiten(sigmas: FloatArray, covariance: npt.ArrayLike | None) -> FloatArray:
    """W with W V Wᵀ = 1."""
    if covariance is None:
        whitener: FloatArray = np.diag(1.0 / sigmas)
        return whitener
    given = np.asarray(covariance, dtype=np.float64)
    refusal = InputError(
        f"The covariance of the readings is {len(sigmas)} rows of {len(sigmas)} finite numbers, symmetric and positive "
        "definite.",
        field="covariance",
    )
    if given.shape != (len(sigmas), len(sigmas)) or not np.all(np.isfinite(given)):
        raise refusal
    if np.max(np.abs(given - given.T)) > 1e-9 * np.max(np.abs(given)):
        raise refusal
    try:
        factor = np.linalg.cholesky((given + given.T) / 2.0)
    except np.linalg.LinAlgError:
        raise refusal from None
    inverse: FloatArray = np.linalg.inv(factor)
    return inverse


def _build_answer(
    placement: Placement, way: ReadingKind | None, predicted: FloatArray, chi2: float, weight: float, near: bool
) -> FrameAnswer:
    p_value = float(chdtrc(len(predicted), chi2))
    said = {"along": "; the readings are of plates", "rod": "; the readings are of long bars", None: ""}[way]
    return FrameAnswer(
        matrix=placement.matrix,
        read_as=way,
        namings=placement.namings,
        forbidden=placement.forbidden,
        predicted=predicted,
        chi2=chi2,
        p_value=p_value,
        weight=weight,
        survives=near and p_value >= FIT_LEVEL,
        sentence=f"They meant {placement.namings[0].sentence}{said}.",
    )


def _say_result(survivors: Sequence[FrameAnswer], next_cut: NextCut | None) -> str:
    if not survivors:
        return (
            "No frame explains these readings: the tensor is of another crystal or condition, or values, units or "
            "standard deviations are wrong."
        )
    if len(survivors) == 1:
        return f"One frame is left. {survivors[0].sentence}"
    if next_cut is None:
        return f"{len(survivors)} answers are left, and no cut of low indices tells them apart."
    return f"{len(survivors)} answers are left; a reading along {next_cut.direction} tells them apart best."
