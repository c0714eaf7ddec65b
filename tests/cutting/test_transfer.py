"""The turn between bench and saw: a planted one is found, and its uncertainty is that of a simulation."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.spatial.transform import Rotation

from app.cutting.presets import PRESETS, ask_dry_run
from app.cutting.stage import build_axis, turn_about
from app.cutting.transfer import find_transfer
from app.errors import InputError

CUTS = np.array([[1.0, 0, 0], [0, 1, 0], [0, 0, 1], [0.6, 0.8, 0]])


def test_a_planted_turn_is_found() -> None:
    turn = Rotation.from_rotvec(np.deg2rad([0.3, -0.2, 0.5])).as_matrix()
    found = find_transfer(CUTS, CUTS @ turn.T)
    assert found.matrix == pytest.approx(turn, abs=1e-12)
    assert found.sigma == pytest.approx(0.0, abs=1e-6)


def test_the_uncertainty_of_a_further_cut_is_that_of_a_simulation() -> None:
    # Seeded: every cut is off by 0.1° in each of its two components.
    rng = np.random.default_rng(7)
    turn = Rotation.from_rotvec(np.deg2rad([0.3, -0.2, 0.5]))
    missed, claimed = [], []
    further = np.array([0.0, 0.6, 0.8])
    for _ in range(600):
        noise = Rotation.from_rotvec(np.deg2rad(0.1) * rng.normal(size=(4, 3)))
        found = find_transfer(CUTS, noise.apply(turn.apply(CUTS)))
        cut = Rotation.from_rotvec(np.deg2rad(0.1) * rng.normal(size=3)).apply(turn.apply(further))
        off = np.rad2deg(cut - found.matrix @ further)
        missed.append(off - (off @ further) * further)
        claimed.append(found.sigma)
    spread = np.sqrt(np.mean(np.sum(np.square(missed), axis=1)) / 2)
    assert np.sqrt(np.mean(np.square(np.array(claimed, dtype=float)))) == pytest.approx(spread, rel=0.1)


@pytest.mark.parametrize("cuts", [CUTS[:1], np.array([[1.0, 0, 0], [1, 0, 0]])])
def test_too_few_cuts_are_refused(cuts: np.ndarray) -> None:
    with pytest.raises(InputError):
        find_transfer(cuts, cuts)


@pytest.mark.parametrize("preset", PRESETS, ids=[str(preset["name"]) for preset in PRESETS])
def test_the_dry_run_asks_for_what_the_dial_does(preset: dict) -> None:  # type: ignore[type-arg]
    words = {
        "away from the source": [1, 0, 0],
        "toward the source": [-1, 0, 0],
        "left of the beam": [0, 1, 0],
        "right of the beam": [0, -1, 0],
    }
    for given in preset["axes"]:
        for sense in (1, -1):
            axis = build_axis(given["name"], given["axis"], given["low"], given["high"], given["zero"], sense)
            question = ask_dry_run(axis)
            assert "+10" in question
            assert str(given["name"]) in question
            turned = turn_about(axis.vector, axis.find_angle(axis.zero + 10.0))
            top, side = turned @ [0, 0, 1], turned @ [1, 0, 0]
            if "clock" in question:
                # Seen from above, against the clock is right-handed about the upward axis.
                assert ("against" in question) == (side[1] > 0)
            else:
                way = next(vector for text, vector in words.items() if text in question)
                assert top @ way > 0.1
