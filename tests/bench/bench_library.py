"""The numeric core beside the leanest numpy that does the same."""

from __future__ import annotations

import itertools
import math
from typing import Any

import numpy as np
import pytest
import scipy.linalg

from app.crystal.crystal import build_crystal
from app.crystal.direction import Direction
from app.readings.campaign import build_plan, plan_campaign
from app.readings.candidates import resolve_candidates
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.tensor import form as forms
from app.tensor.kind import Kind
from app.tensor.pose import IDENTITY, pose_from_axis_angle, turn_tensors
from app.tensor.surface import build_surface
from app.tensor.values import compute_values
from tests.bench.conftest import Beside, time_call
from tests.crystal.reference import SETTINGS

MATRIX = np.array([[12.4, 0.3, -0.8], [0.3, 9.1, 0.5], [-0.8, 0.5, 14.2]])
CRYSTAL = build_crystal((7.2, 8.1, 9.3, 82.0, 96.0, 104.0), "1")
POLAR = Kind("polar", "symmetric")


def test_pose_a_million_tensors(beside: Beside) -> None:
    tensors = np.random.default_rng(1).normal(size=(1_000_000, 3, 3))
    pose = pose_from_axis_angle(np.array([1.0, 2.0, 3.0]) / math.sqrt(14.0), 40.0).matrix
    # C T Cᵀ is one product of rows of nine by a matrix of nine by nine: the layout that matmul likes best.
    rows, both = tensors.reshape(-1, 9), np.kron(pose, pose).T.copy()
    assert np.allclose((rows @ both).reshape(-1, 3, 3)[:50], turn_tensors(tensors, pose)[:50])
    beside.compare(
        "posing 1,000,000 tensors", lambda: turn_tensors(tensors, pose), lambda: np.matmul(rows, both), 1.1, rounds=15
    )


def test_values_along_a_million_directions(beside: Beside) -> None:
    directions = np.random.default_rng(2).normal(size=(1_000_000, 3))
    directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    assert np.allclose(
        compute_values(MATRIX, directions[:9]), [direction @ MATRIX @ direction for direction in directions[:9]]
    )
    beside.compare(
        "values along 1,000,000 directions",
        lambda: compute_values(MATRIX, directions),
        lambda: np.einsum("ij,ij->i", directions @ MATRIX, directions),
        1.1,
        rounds=15,
    )


def test_first_use_of_every_form(beside: Beside) -> None:
    crystals = [
        build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)  # type: ignore[arg-type]
        for setting in SETTINGS
    ]
    by_class = {crystal.group.symbol: crystal for crystal in crystals}
    limits = [build_crystal(None, symbol) for symbol in ("∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m")]
    kinds = [
        Kind(parity, intrinsic)  # type: ignore[arg-type]
        for parity, intrinsic in itertools.product(("polar", "axial"), ("symmetric", "general"))
    ]
    # One setting of each of the 32 classes, and the seven limits.
    classes = [by_class[symbol] for symbol in CLASSES] + limits

    def build_all() -> None:
        forms._build_cached.cache_clear()
        for crystal, kind in itertools.product(classes, kinds):
            forms.build_form(crystal, kind)

    build_all()
    taken = time_call(build_all)
    beside.tell("form of 32 + 7 groups × 4 kinds, first use, ms", taken * 1e3, 50.0, unit=" ms")


CLASSES = (
    *("1", "-1", "2", "m", "2/m", "222", "mm2", "mmm", "4", "-4", "4/m", "422", "4mm", "-42m", "4/mmm"),
    *("3", "-3", "321", "3m1", "-3m1", "6", "-6", "6/m", "622", "6mm", "-6m2", "6/mmm"),
    *("23", "m-3", "432", "-43m", "m-3m"),
)


def make_readings(count: int, per_bar: int = 1, tilt: float | None = None) -> tuple[list[Reading], np.ndarray]:
    """Seeded readings along random directions, and the design matrix on the six free cells."""
    random = np.random.default_rng(count)
    bars = random.normal(size=(-(-count // per_bar), 3))
    bars /= np.linalg.norm(bars, axis=1, keepdims=True)
    directions = np.repeat(bars, per_bar, axis=0)[:count]
    if per_bar > 1:
        directions = directions + 0.3 * random.normal(size=directions.shape)
        directions /= np.linalg.norm(directions, axis=1, keepdims=True)
    values = np.einsum("ij,ij->i", directions @ MATRIX, directions) + 0.05 * random.normal(size=count)
    first, second = np.triu_indices(3)
    design = np.where(first == second, 1.0, 2.0) * directions[:, first] * directions[:, second]
    readings = [
        Reading(
            kind="along",
            direction=Direction("vector", tuple(direction.tolist())),  # type: ignore[arg-type]
            value=float(value),
            sigma=0.05,
            **({} if tilt is None else {"direction_sigma": tilt, "bar": f"B{number // per_bar}"}),
        )
        for number, (direction, value) in enumerate(zip(directions, values, strict=True))
    ]
    return readings, design


def fit_time(count: int) -> float:
    readings, _ = make_readings(count)
    return time_call(lambda: fit_readings(CRYSTAL, POLAR, readings), 5)


def test_fit_of_ten_thousand_readings(beside: Beside) -> None:
    readings, design = make_readings(10_000)
    observed = np.array([reading.value for reading in readings])
    beside.compare(
        "fit of 10,000 readings without bars",
        lambda: fit_readings(CRYSTAL, POLAR, readings),
        lambda: np.linalg.lstsq(design, observed, rcond=None),
        1.0,
        rounds=9,
    )


def test_fit_time_against_size(beside: Beside) -> None:
    sizes = (5_000, 20_000, 100_000)
    times = [fit_time(size) for size in sizes]
    exponent = np.polyfit(np.log(sizes), np.log(times), 1)[0]
    beside.tell("fit, time against size up to 100,000: exponent", float(exponent), 1.1)


def test_fit_of_two_hundred_bars(beside: Beside) -> None:
    readings, design = make_readings(2_000, per_bar=10, tilt=0.4)
    covariance = np.diag(np.full(2_000, 0.05**2))
    for bar in range(200):
        inside = slice(10 * bar, 10 * bar + 10)
        covariance[inside, inside] += 0.001
    beside.compare(
        "fit with 200 bars of 10 readings",
        lambda: fit_readings(CRYSTAL, POLAR, readings),
        lambda: scipy.linalg.cho_factor(covariance),
        2.0,
        rounds=9,
    )
    assert design.shape == (2_000, 6)


@pytest.mark.parametrize(("kind", "surface"), [("ellipsoid", "quadric"), ("value", "value"), ("flux", "flux")])
def test_mesh(beside: Beside, kind: str, surface: Any) -> None:
    def trigonometry() -> np.ndarray:
        polar, around = np.linspace(0.0, np.pi, 100)[:, None], np.linspace(0.0, 2.0 * np.pi, 200)[None, :]
        sines = np.sin(polar)
        return np.stack([sines * np.cos(around), sines * np.sin(around), np.cos(polar) + 0.0 * around], axis=-1)

    beside.compare(
        f"mesh at 100 × 200, {kind}",
        lambda: build_surface(MATRIX, surface, 100),
        trigonometry,
        1.5,
        rounds=60,
    )


def plan_time(candidates: int, picks: int) -> float:
    directions = np.random.default_rng(candidates).normal(size=(candidates, 3))
    listed = [Direction("vector", tuple(row)) for row in directions.tolist()]
    plan = build_plan(CRYSTAL, POLAR, [], resolve_candidates(CRYSTAL, listed, IDENTITY), 0.1)
    criterion = plan.read_criterion("D")
    return time_call(lambda: plan_campaign(plan, criterion, picks), 3)


def test_next_cuts_against_candidates_and_picks(beside: Beside) -> None:
    for name, cases, sizes in (
        ("candidates up to 10,000, 12 picks", [(1_000, 12), (3_000, 12), (10_000, 12)], (1_000, 3_000, 10_000)),
        ("picks up to 48, 10,000 candidates", [(10_000, 12), (10_000, 24), (10_000, 48)], (12, 24, 48)),
    ):
        times = [plan_time(*case) for case in cases]
        exponent = float(np.polyfit(np.log(sizes), np.log(times), 1)[0])
        beside.tell(f"next cuts, {name}: exponent", exponent, 1.1, f"{times[-1] * 1e3:.0f} ms")
