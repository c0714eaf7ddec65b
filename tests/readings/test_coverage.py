"""How often the intervals and regions of simulated readings hold the truth: 95 % of 2,000 seeded sets."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation
from scipy.stats import chi2, norm

from app.crystal.crystal import build_crystal
from app.crystal.direction import read_direction
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.tensor.kind import build_kind

SETS = 2000
TILT = 0.7
SIGMA = 0.1
TRUE = np.array([[13.2, 0.0, 1.85], [0.0, 24.6, 0.0], [1.85, 0.0, 15.9]])
DIRECTIONS = ["(1 0 0)", "[0 1 0]", "[0 0 1]", "(1 0 1)", "(-1 0 1)", "(1 1 0)", "(0 1 1)", "(-1 1 1)"]


def test_intervals_and_regions_hold_the_truth_as_often_as_they_say() -> None:
    crystal = build_crystal([9.83, 6.41, 7.27, 90, 107.4, 90], "2/m")
    assert crystal.M is not None
    random = np.random.default_rng(2026)
    named = [read_direction(text) for text in DIRECTIONS]
    duals = np.linalg.inv(crystal.M).T
    nominal = np.array([(duals if d.kind == "normal" else crystal.M) @ np.array(d.values) for d in named])
    nominal /= np.linalg.norm(nominal, axis=1, keepdims=True)
    # Two readings on each bar share its turn.
    bars = np.repeat(np.arange(len(named)), 2)
    turns = Rotation.from_rotvec(np.deg2rad(TILT) * random.standard_normal((SETS * len(named), 3))).as_matrix()
    turned = np.einsum("sbij,bj->sbi", turns.reshape(SETS, len(named), 3, 3), nominal)[:, bars]
    values = np.einsum("sbi,ij,sbj->sb", turned, TRUE, turned) + SIGMA * random.standard_normal((SETS, len(bars)))
    truth = TRUE[[0, 0, 1, 2], [0, 2, 1, 2]]
    axis = np.linalg.eigh(TRUE[np.ix_([0, 2], [0, 2])])[1][:, 0]
    inside, holds = np.zeros(4), 0
    for row in values:
        fit = fit_readings(
            crystal,
            build_kind(),
            [
                Reading("along", float(value), named[bar], sigma=SIGMA, direction_sigma=TILT, bar=f"b{bar}")
                for value, bar in zip(row, bars.tolist(), strict=True)
            ],
        )
        assert fit.form.labels == ["11", "13", "22", "33"]
        assert fit.free is not None
        assert fit.free_covariance is not None
        sigma = np.sqrt(np.diag(fit.free_covariance))
        inside += np.abs(fit.free - truth) < norm.ppf(0.975) * sigma
        # The axis in the plane (010) is principal where u A n vanishes, u across it in the plane.
        across = np.array([-axis[1], axis[0]])
        slope = np.array([across[0] * axis[0], across[0] * axis[1] + across[1] * axis[0], 0, across[1] * axis[1]])
        missed = float(slope @ fit.free)
        holds += missed**2 / float(slope @ fit.free_covariance @ slope) < chi2.ppf(0.95, 1)
    for share in [*(inside / SETS).tolist(), holds / SETS]:
        assert share == pytest.approx(0.95, abs=0.02)
