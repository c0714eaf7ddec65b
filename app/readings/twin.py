"""A twin law with a fraction: what the readings of a twinned crystal say of one individual and of how much is turned.

A bar that holds many lamellae of both individuals reads the average by volume, (1 − f) A + f R A Rᵀ, R the law. Where
that average runs through no more combinations than A has cells (as when R carries the form into itself, so that a cell
and 1 − 2f are seen only as their product), neither the fraction nor the cells concerned have an answer.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize_scalar
from scipy.special import chdtrc

from app.crystal.crystal import Crystal
from app.crystal.group import find_group
from app.errors import InputError
from app.readings.fit import Fit, fit_readings
from app.readings.reading import Reading
from app.readings.report import describe_suggestion
from app.tensor.form import Form, build_form
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, Pose

FloatArray = npt.NDArray[np.float64]

SEEN: Final = 1e-6
"""Relative size below which a combination counts as unseen, as in the fit."""
GRID: Final = 401
NOISE: Final = 3.841458820694124
"""χ² that one quantity exceeds by chance once in twenty times; a fraction that costs less is not told from another."""


@dataclass(frozen=True)
class TwinFit:
    """Fraction and cells of one individual, or what is seen instead.

    Attributes:
        form: of one individual.
        fraction: f, 0 to 1, part that the law has turned; None where it is refused.
        fraction_sigma: to first order; None likewise.
        free: shape (k,), of the individual; NaN where a cell is refused.
        free_covariance: shape (k, k); None where the fraction is refused.
        others: further fractions that the readings do not tell from ``fraction``.
        average: shape (3, 3), the average by volume as read; crystal frame.
        chi2, dof: of the readings under the law; None where the fraction is refused.
        p_value: of so great a gain over no twinning by chance, f being bounded by 0; None where it is refused.
        sentence: the result.
    """

    form: Form
    fraction: float | None
    fraction_sigma: float | None
    free: FloatArray
    free_covariance: FloatArray | None
    others: tuple[float, ...]
    average: FloatArray
    chi2: float | None
    dof: int | None
    p_value: float | None
    sentence: str


@dataclass(frozen=True)
class _Seen:
    """What the readings say of the average, whitened: sees (1 − f) untwinned a + f turned a."""

    untwinned: FloatArray
    turned: FloatArray
    observed: FloatArray

    def mix(self, fraction: float) -> FloatArray:
        return (1.0 - fraction) * self.untwinned + fraction * self.turned

    def solve(self, fraction: float) -> tuple[FloatArray, float]:
        design = self.mix(fraction)
        found: FloatArray = np.asarray(np.linalg.lstsq(design, self.observed, rcond=SEEN)[0], dtype=np.float64)
        missed = self.observed - design @ found
        return found, float(missed @ missed)

    def cost(self, fraction: float) -> float:
        return self.solve(fraction)[1]

    def derive(self, fraction: float, free: FloatArray) -> FloatArray:
        """The whitened derivatives by the k cells and the fraction, (m, k + 1)."""
        return np.column_stack([self.mix(fraction), (self.turned - self.untwinned) @ free])


def fit_twin(
    crystal: Crystal,
    kind: Kind,
    readings: Sequence[Reading],
    law: FloatArray,
    *,
    batches: Mapping[str, float] | None = None,
    pose: Pose = IDENTITY,
) -> TwinFit:
    """Fit one individual's cells and the fraction that a twin law has turned.

    The readings are first fitted by an average without symmetry; that fit and its covariance carry all that readings
    along, across and between directions say. Of rods and sheets the law of mixing is taken for the average too.

    Args:
        law: shape (3, 3), rotation that carries the first individual into the second, active, crystal frame. A
            reflection has the effect of the half-turn about its normal on a second-rank tensor.

    Raises:
        InputError: a law that changes no tensor of the form; readings that do not determine the average, or that give
            no covariance for it.
    """
    form = build_form(crystal, kind)
    basis = form.basis
    images = law @ basis @ law.T
    if form.count == 0 or float(np.max(np.abs(images - basis))) < SEEN:
        raise InputError(
            f"The law is one that {crystal.group.symbol} allows already, or changes no tensor of its form.",
            field="law",
            hint="Readings of a second-rank tensor cannot see this twin.",
        )
    bare = replace(crystal, rotations=np.eye(3)[None], group=find_group("1"))
    whole = fit_readings(bare, kind, readings, batches=batches, pose=pose)
    if whole.estimate is None or whole.free is None:
        would = describe_suggestion(whole.undetermined[0]) if whole.undetermined else "a reading in another direction"
        raise InputError(
            "The readings do not determine the average of the individuals, which is held to no symmetry.",
            field="readings",
            hint=f"{would.capitalize()} would help.",
        )
    if whole.free_covariance is None:
        raise InputError(
            "A fraction is judged against the uncertainty of the readings, and there is none.",
            field="readings",
            hint="Give each reading a σ, or take readings to spare.",
        )
    seen = _whiten(whole, basis, images)
    unseen = _find_unseen(seen, form.count)
    if unseen is not None:
        return _refuse(form, whole, seen, unseen)
    return _fit(form, whole, seen, len(readings))


def _whiten(whole: Fit, basis: FloatArray, images: FloatArray) -> _Seen:
    assert whole.free is not None
    assert whole.free_covariance is not None
    bare = whole.form.basis.reshape(whole.form.count, -1)
    # Every tensor of the kind is a sum of the bare form's basis, so this is exact.
    onto = np.linalg.pinv(bare.T)
    lower = np.linalg.cholesky(whole.free_covariance)
    parts = [np.linalg.solve(lower, onto @ matrices.reshape(len(matrices), -1).T) for matrices in (basis, images)]
    return _Seen(parts[0], parts[1], np.linalg.solve(lower, whole.free))


def _find_unseen(seen: _Seen, count: int) -> FloatArray | None:
    """The change of (cells, fraction) that alters no reading at a general tensor and fraction; None if there is none.

    General: drawn at random, so that no accident of the values decides.
    """
    random = np.random.default_rng(1)
    derivatives = seen.derive(0.2 + 0.1 * random.random(), random.standard_normal(count))
    sizes = np.linalg.norm(derivatives, axis=0)
    _, values, turned = np.linalg.svd(derivatives / np.where(sizes > 0, sizes, 1.0))
    kept = np.zeros(count + 1)
    kept[: len(values)] = values
    blind = turned[kept <= SEEN * values[0]]
    return blind if len(blind) else None


def _refuse(form: Form, whole: Fit, seen: _Seen, unseen: FloatArray) -> TwinFit:
    assert whole.estimate is not None
    lost = np.max(np.abs(unseen[:, :-1]), axis=0) > SEEN
    found, _ = seen.solve(0.0)
    labels = [label for label, gone in zip(form.labels, lost, strict=True) if gone]
    return TwinFit(
        form,
        None,
        None,
        np.where(lost, np.nan, found),
        None,
        (),
        whole.estimate.matrix,
        None,
        None,
        None,
        f"Under this law the readings see the fraction and {_join(labels)} only together, so neither is told. An "
        "untwinned piece, or the fraction from diffraction or an etched face, would settle it.",
    )


def _fit(form: Form, whole: Fit, seen: _Seen, count: int) -> TwinFit:
    assert whole.estimate is not None
    fractions = np.linspace(0.0, 1.0, GRID)
    costs = np.array([seen.solve(float(fraction))[1] for fraction in fractions])
    valleys = []
    for place in range(GRID):
        if costs[place] <= np.min(costs[max(0, place - 1) : place + 2]):
            bounds = (fractions[max(0, place - 1)], fractions[min(GRID - 1, place + 1)])
            best = minimize_scalar(
                lambda f: seen.solve(f)[1], bounds=bounds, method="bounded", options={"xatol": 1e-10}
            )
            ends = [float(best.x), float(fractions[place])]
            valleys.append(min(ends, key=lambda f: seen.solve(f)[1]))
    valleys.sort(key=lambda f: seen.solve(f)[1])
    fraction = valleys[0]
    free, cost = seen.solve(fraction)
    if float(np.max(costs)) - cost < NOISE:
        found = np.full(form.count, np.nan)
        sentence = (
            "The readings do not tell one fraction from another: the tensor is too nearly one that the law leaves."
        )
        return TwinFit(
            form, None, None, found, None, (), whole.estimate.matrix, None, None, None, f"{sentence} Smaller σ would."
        )
    others = [
        other for other in valleys[1:] if seen.solve(other)[1] - cost < NOISE and abs(other - fraction) > 2 / GRID
    ]
    derivatives = seen.derive(fraction, free)
    covariance: FloatArray = np.asarray(np.linalg.inv(derivatives.T @ derivatives), dtype=np.float64)
    sigma = float(np.sqrt(covariance[-1, -1]))
    gained = max(0.0, float(costs[0]) - cost)
    # The fraction cannot lie below 0: half of what chance brings lies there (H. Chernoff, Ann. Math. Statist. 25, 573).
    p_value = 0.5 * float(chdtrc(1, gained)) if gained > 0 else 1.0
    sentence = (
        f"The law has turned {fraction:.3f} of the crystal, σ {sigma:.2g}; no twinning at all has p = {p_value:.2g}."
    )
    if others:
        told = _join([f"{other:.3f}" for other in others])
        sentence += f" The readings do not tell this fraction from {told}."
    return TwinFit(
        form,
        fraction,
        sigma,
        free,
        covariance[:-1, :-1],
        tuple(others),
        whole.estimate.matrix,
        _add(whole.chi2, cost),
        count - form.count - 1,
        p_value,
        sentence,
    )


def _add(chi2: float | None, cost: float) -> float | None:
    return None if chi2 is None else chi2 + cost


def _join(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
