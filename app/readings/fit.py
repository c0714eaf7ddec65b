"""From readings to a tensor: generalised least squares in the allowed space, with what the readings cannot see.

A. C. Aitken, Proc. R. Soc. Edinburgh 55 (1935) 42, for generalised least squares. V depends on the tensor through
tilts and calibration errors, so it is computed at the current estimate and the solution repeated until nothing
changes; rods and sheets, which are not linear, are linearised at each step (Gauss-Newton).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Final, Literal

import numpy as np
import numpy.typing as npt
from scipy.special import chdtrc

from app.crystal.crystal import Crystal
from app.errors import InputError
from app.readings.prediction import is_meaningful, isotropic_rows, linear_rows, predict
from app.readings.reading import Reading
from app.readings.reading_set import ReadingSet, resolve_readings
from app.readings.solver import Solution, solve_least_squares
from app.readings.symmetry import SymmetryTest, test_symmetry
from app.readings.unseen import Unseen, describe_unseen
from app.readings.whitening import Whitening, build_whitening
from app.tensor.estimate import Estimate, build_estimate
from app.tensor.form import Form, build_form
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose
from app.tensor.principal import Principal, find_principal

FloatArray = npt.NDArray[np.float64]

MAX_STEPS: Final = 200
STEP_TOLERANCE: Final = 1e-12
FULL_LEVERAGE: Final = 1e-9
"""A residual whose variance is below this part of its reading's own is held at zero by the fit."""


@dataclass(frozen=True)
class ReadingResults:
    """What the fit says of each reading, all of shape (N,).

    Attributes:
        predicted: with the mean shift of a tilted bar.
        residual: observed − predicted.
        standardised: residual over its own standard deviation; NaN at leverage 1 or where no σ is known.
        leverage: the part that each reading has in its own prediction.
        sigma_used: the whole standard deviation of each reading, tilt and batch included; NaN where none is known.
    """

    predicted: FloatArray
    residual: FloatArray
    standardised: FloatArray
    leverage: FloatArray
    sigma_used: FloatArray


@dataclass(frozen=True)
class Fit:
    """A tensor from readings, or what stands in its way.

    Attributes:
        form: the allowed cells.
        determined: whether the readings determine every free cell; where False, all that follows from a tensor is None.
        rank: number of combinations that the readings see.
        condition: of the whitened design on the orthonormal basis; None where undetermined.
        undetermined: the combinations that no reading sees.
        free, free_covariance: shape (k,) and (k, k); covariance None without degrees of freedom or sigma.
        estimate: the matrix with its covariance over all nine cells, crystal frame.
        chi2, dof, p_value, scale: of the residuals; p_value None without sigma, scale √(chi2/dof) None at dof 0.
        covariance_from: "sigma", "scatter" or None.
        readings: per reading.
        principal: axes and values.
        symmetry_test: against the same readings without symmetry; None where it cannot tell.
        notes: sentences that the answer must be read with.
    """

    form: Form
    determined: bool
    rank: int
    condition: float | None
    undetermined: tuple[Unseen, ...]
    free: FloatArray | None
    free_covariance: FloatArray | None
    estimate: Estimate | None
    chi2: float | None
    dof: int | None
    p_value: float | None
    scale: float | None
    covariance_from: Literal["sigma", "scatter"] | None
    readings: ReadingResults | None
    principal: Principal | None
    symmetry_test: SymmetryTest | None
    notes: tuple[str, ...]


def fit_readings(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
    unit: str | None = None,
) -> Fit:
    """Fit the allowed tensor of a crystal to readings.

    Args:
        crystal: fixes the allowed space and the frame.
        kind: of the tensor.
        readings: in one unit.
        batches: name → relative standard deviation of the calibration that a batch shares.
        pose: for directions in the specimen frame.
        unit: carried through to the estimate.

    Returns:
        A Fit. Readings that do not determine the tensor are an answer, not an error.

    Raises:
        InputError: a reading that is wrong in itself, or readings that no tensor can give.
    """
    taken = resolve_readings(crystal, kind, readings, batches=batches, pose=pose)
    return fit_reading_set(crystal, kind, taken, unit=unit)


def fit_reading_set(crystal: Crystal, kind: Kind, taken: ReadingSet, *, unit: str | None = None) -> Fit:
    """Fit the allowed tensor of a crystal to readings that are laid out already; otherwise as ``fit_readings``."""
    form = build_form(crystal, kind)
    basis = form.orthonormal.reshape(form.count, 9)
    first_weights = 1.0 if taken.sigma is None else 1.0 / taken.sigma
    linear = linear_rows(taken)
    start_design = isotropic_rows(taken, linear) @ _columns(basis)
    start = solve_least_squares(
        (start_design.T * first_weights).T, taken.values * first_weights, unweighted=start_design
    )
    if start.rank < form.count:
        return _report_undetermined(crystal, form, start)
    coordinates, whitening, solution, settled = _iterate(taken, basis, start.solution, linear)
    if solution.rank < form.count:
        return _report_undetermined(crystal, form, solution)
    return _report(crystal, form, taken, linear, coordinates, whitening, solution, unit, settled)


def _columns(basis: FloatArray) -> FloatArray:
    """The basis (k, 9) as columns, laid out so that a product of many rows with it is fast."""
    return np.ascontiguousarray(basis.T)


def _iterate(
    taken: ReadingSet, basis: FloatArray, start: FloatArray, linear: FloatArray
) -> tuple[FloatArray, Whitening, Solution, bool]:
    """Repeat the solution at the current estimate until the step vanishes."""
    coordinates, columns = _choose_start(taken, basis, start), _columns(basis)
    for _ in range(MAX_STEPS):
        matrix = (coordinates @ basis).reshape(3, 3)
        prediction = predict(taken, matrix, linear)
        whitening = build_whitening(taken, matrix, prediction.values)
        design = prediction.rows @ columns
        residual = whitening.whiten(taken.values - prediction.values)
        solution = solve_least_squares(whitening.whiten(design), residual, unweighted=design)
        step = solution.solution
        size = float(np.linalg.norm(coordinates)) or float(np.linalg.norm(step)) or 1.0
        if np.linalg.norm(step) <= STEP_TOLERANCE * size or solution.rank < len(basis):
            return coordinates, whitening, solution, True
        coordinates = coordinates + _shorten(taken, basis, coordinates, step)
    return coordinates, whitening, solution, False


def _choose_start(taken: ReadingSet, basis: FloatArray, start: FloatArray) -> FloatArray:
    if is_meaningful(taken, (start @ basis).reshape(3, 3)):
        return start
    positive = taken.values[taken.where("rod") | taken.where("sheet")]
    return basis @ (np.eye(3) * float(np.median(positive))).ravel()


def _shorten(taken: ReadingSet, basis: FloatArray, coordinates: FloatArray, step: FloatArray) -> FloatArray:
    """The step, halved until rods and sheets keep their meaning."""
    for _ in range(60):
        if is_meaningful(taken, ((coordinates + step) @ basis).reshape(3, 3)):
            return step
        step = step / 2.0
    raise InputError(
        "No tensor with three positive principal values fits these rods and sheets.",
        field="readings",
        hint="Check the values and which of them are rods, sheets or values along a direction.",
    )


def _report_undetermined(crystal: Crystal, form: Form, solution: Solution) -> Fit:
    unseen = describe_unseen(crystal, form, solution.unseen)
    missing = "one combination is" if len(unseen) == 1 else f"{len(unseen)} combinations are"
    note = (
        f"The readings see {solution.rank} of {form.count} independent cells; {missing} unseen, so there is no tensor."
    )
    return Fit(
        form,
        False,
        solution.rank,
        None,
        unseen,
        None,
        None,
        None,
        None,
        None,
        None,
        None,
        None,
        None,
        None,
        None,
        (note,),
    )


def _report(
    crystal: Crystal,
    form: Form,
    taken: ReadingSet,
    linear: FloatArray,
    coordinates: FloatArray,
    whitening: Whitening,
    solution: Solution,
    unit: str | None,
    settled: bool,
) -> Fit:
    basis = form.orthonormal.reshape(form.count, 9)
    matrix = (coordinates @ basis).reshape(3, 3)
    prediction = predict(taken, matrix, linear)
    design = prediction.rows @ _columns(basis)
    residual = taken.values - prediction.values
    whitened = whitening.whiten(residual)
    chi2, dof = float(whitened @ whitened), len(taken) - form.count
    scale = float(np.sqrt(chi2 / dof)) if dof > 0 else None
    notes: list[str] = []
    if not settled:
        notes.append(
            "The fit did not settle: tilts and calibration errors are too large for the spread of the readings."
        )
    if dof == 0:
        notes.append(
            "There are as many readings as free cells, so the tensor fits them exactly, and that proves nothing."
        )
    covariance_from: Literal["sigma", "scatter"] | None
    variance: float | None
    if taken.sigma is not None:
        covariance_from, variance = "sigma", 1.0
    elif scale is not None:
        covariance_from, variance = "scatter", scale**2
    else:
        covariance_from = variance = None
        notes.append("Without sigma and without readings to spare, nothing tells the uncertainty: no covariance.")
    to_free = form.free_from_orthonormal
    free = to_free @ coordinates
    free_covariance = None if variance is None else to_free @ (variance * solution.covariance) @ to_free.T
    estimate = build_estimate(form, free, free_covariance, crystal.frame_sentence, unit)
    return Fit(
        form=form,
        determined=True,
        rank=solution.rank,
        condition=solution.condition,
        undetermined=(),
        free=free,
        free_covariance=free_covariance,
        estimate=estimate,
        chi2=chi2,
        dof=dof,
        p_value=float(chdtrc(dof, chi2)) if taken.sigma is not None and dof > 0 else None,
        scale=scale,
        covariance_from=covariance_from,
        readings=_judge_readings(design, prediction.values, residual, whitening, solution, variance),
        principal=find_principal(estimate),
        symmetry_test=test_symmetry(crystal, form, taken, coordinates, whitening),
        notes=tuple(notes),
    )


def _judge_readings(
    design: FloatArray,
    predicted: FloatArray,
    residual: FloatArray,
    whitening: Whitening,
    solution: Solution,
    variance: float | None,
) -> ReadingResults:
    spread = design @ solution.covariance
    # The hat matrix X C Xᵀ V⁻¹ has on its diagonal the part of each reading in its own prediction.
    weighted = whitening.whiten_transposed(whitening.whiten(design))
    leverage = np.sum(spread * weighted, axis=1)
    left = whitening.variances - np.sum(spread * design, axis=1)
    unknown = np.full(len(residual), np.nan)
    if variance is None:
        return ReadingResults(predicted, residual, unknown, leverage, unknown)
    held = left <= FULL_LEVERAGE * whitening.variances
    deviation = np.sqrt(variance * np.where(held, 1.0, left))
    usable = ~held & (deviation > 0)
    standardised = np.where(usable, residual / np.where(usable, deviation, 1.0), np.nan)
    return ReadingResults(predicted, residual, standardised, leverage, np.sqrt(variance * whitening.variances))
