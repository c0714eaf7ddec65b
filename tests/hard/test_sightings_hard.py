"""Nearly collinear sightings, weights over twelve orders, stages at 0 and at 180 degrees.

Two sightings δ radians apart hold the turn about them to ε/δ; below a limit the call refuses.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from mpmath import mpf
from scipy.spatial.transform import Rotation

from tests.hard import reference as exact
from tests.hard.conftest import Ask

CELL = [8.141, 12.79, 7.157, 94.225, 116.597, 87.772]
TRICLINIC = {"cell": CELL, "group": "-1"}
TURN = Rotation.from_euler("zxz", [0.4, 0.9, -1.3]).as_matrix()


def sight(direction: Any, off: Any = (0.0, 0.0, 0.0), **more: Any) -> dict[str, Any]:
    """A sighting of a crystal vector where the turn puts it, and a little off."""
    return {
        "direction": list(map(float, direction)),
        "seen": (TURN @ np.array(direction, dtype=float) + off).tolist(),
        **more,
    }


def fit_exactly(sightings: list[dict[str, Any]]) -> exact.matrix:
    directions = [exact.unit(entry["direction"]) for entry in sightings]
    seen = [exact.unit(entry["seen"]) for entry in sightings]
    return exact.attitude(directions, seen, [entry.get("weight", 1.0) for entry in sightings])


@pytest.mark.parametrize("apart", [1.0, 1e-1, 1e-2, 1e-3, 1e-4, 1e-5])
def test_nearly_collinear_sightings(apart: float, ask: Ask) -> None:
    sightings = [sight([0.3, 0.2, 1.0]), sight([0.3 + apart, 0.2, 1.0], [0, 0.01 * apart, 0])]
    answer = ask("align", {"crystal": TRICLINIC, "sightings": sightings})
    wanted = fit_exactly(sightings)
    # The turn is determined by the small cross product: the second singular value of the sum of squares is δ².
    assert exact.difference(answer["matrix"], wanted) < 60 * exact.EPS / min(apart, 1) ** 2
    U = np.array(answer["matrix"])
    assert pytest.approx(np.eye(3), abs=8 * exact.EPS) == U.T @ U
    assert np.linalg.det(U) == pytest.approx(1.0)
    n = [exact.unit(entry["seen"]) for entry in sightings]
    assert answer["measured"][0] == pytest.approx(float(exact.angle_between(*n)), rel=20 * exact.EPS / apart)


@pytest.mark.parametrize("apart", [1e-9, 1e-12, 1e-15, 0.0])
def test_sightings_along_one_line_are_refused(apart: float, ask: Ask) -> None:
    for sign in (1, -1):
        sightings = [sight([0.3, 0.2, 1.0]), sight([sign * (0.3 + apart), sign * 0.2, sign * 1.0])]
        error = ask("align", {"crystal": TRICLINIC, "sightings": sightings}, refused=True)
        assert error["field"].startswith("sightings")
        assert "parallel" in error["hint"] or "parallel" in error["message"]


@pytest.mark.parametrize("orders", [0, 3, 6, 9, 12])
def test_weights_over_many_orders(orders: int, ask: Ask) -> None:
    light = 10.0**-orders
    sightings = [
        sight([1, 0, 0], [0, 0, 1e-3], weight=1.0),
        sight([0, 1, 0], [1e-3, 0, 2e-3], weight=light),
        sight([0.2, 0.3, 1], [0, -2e-3, 0], weight=light),
        sight([1, 1, 0.1], [0, 0, -1e-3], weight=float(np.sqrt(light))),
    ]
    answer = ask("align", {"crystal": TRICLINIC, "sightings": sightings})
    # The turn about the heavy sighting is held by √light and less of the sum: it is known to ε over that.
    assert exact.difference(answer["matrix"], fit_exactly(sightings)) < 60 * exact.EPS / float(np.sqrt(light))


@pytest.mark.parametrize("factor", [1e-12, 1e-6, 1e6, 1e12])
def test_a_common_factor_of_all_weights_changes_nothing(factor: float, ask: Ask) -> None:
    base = [sight([1, 0, 0], [0, 0, 1e-3]), sight([0, 1, 0], [1e-3, 0, 0]), sight([0, 0, 1], [0, 1e-3, 0])]
    plain = ask("align", {"crystal": TRICLINIC, "sightings": base})
    heavy = ask("align", {"crystal": TRICLINIC, "sightings": [{**entry, "weight": factor} for entry in base]})
    assert np.array(heavy["matrix"]) == pytest.approx(np.array(plain["matrix"]), abs=1e-14)
    assert heavy["rms"] == pytest.approx(plain["rms"], rel=1e-9)


@pytest.mark.parametrize("residual", [1e-4, 1e-7, 1e-10])
def test_tiny_residuals_are_told(residual: float, ask: Ask) -> None:
    sightings = [sight([1, 0, 0], TURN @ [0, 0, residual]), sight([0, 1, 0]), sight([0, 0, 1])]
    answer = ask("align", {"crystal": TRICLINIC, "sightings": sightings})
    U = fit_exactly(sightings)
    for entry, found in zip(sightings, answer["residuals"], strict=True):
        wanted = exact.angle_between(U * exact.unit(entry["direction"]), exact.unit(entry["seen"]))
        assert exact.difference(found, wanted) < np.rad2deg(60 * exact.EPS)


@pytest.mark.parametrize("turn", [0, 1e-10, 1e-5, 30, 89.99999999, 90, 179.99999, 180 - 1e-10, 180])
def test_one_axis_brings_a_target_that_is_so_many_degrees_away(turn: float, ask: Ask) -> None:
    angle = exact.radians(mpf(float(turn)))
    target = [float(exact.cos(angle)), float(-exact.sin(angle)), 0.0]
    axes = [{"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180}]
    body = {"crystal": TRICLINIC, "U": np.eye(3).tolist(), "axes": axes, "target": target, "toward": [1, 0, 0]}
    solutions = ask("stage", body)["solutions"]
    assert solutions
    found = solutions[0]["angles"][0]
    wanted = exact.angle_between(exact.unit(target), exact.vector([1, 0, 0]))
    assert abs(found) == pytest.approx(float(wanted), abs=2e-13)
    assert solutions[0]["travel"] == pytest.approx(abs(found), abs=1e-12)


@pytest.mark.parametrize("off", [1e-12, 1e-9, 1e-6])
def test_a_target_along_an_axis_of_the_stage(off: float, ask: Ask) -> None:
    # An axis does not move what lies along it; what is nearly along it can be moved hardly.
    axes = [
        {"name": "turn", "axis": [0, 0, 1], "low": -180, "high": 180},
        {"name": "arc", "axis": [1, 0, 0], "low": -30, "high": 30},
    ]
    body = {"crystal": TRICLINIC, "U": np.eye(3).tolist(), "axes": axes, "target": [off, 0, 1], "toward": [0, 0, 1]}
    answer = ask("stage", body)
    for solution in answer["solutions"]:
        turn, arc = (np.deg2rad(angle) for angle in solution["angles"])
        turned = Rotation.from_euler("z", turn).as_matrix() @ Rotation.from_euler("x", arc).as_matrix() @ [off, 0, 1]
        assert np.linalg.norm(turned - [0, 0, 1]) < 2e-6
    if not answer["solutions"]:
        assert answer["closest"]["off"] == pytest.approx(np.rad2deg(off), rel=1e-3, abs=1e-12)


def test_a_setting_that_is_no_turn_is_refused(ask: Ask) -> None:
    axes = [{"name": "turn", "axis": [0, 0, 1]}]
    for U in (np.diag([1, 1, -1.0]), np.eye(3) * (1 + 1e-4), np.zeros((3, 3)), np.eye(3) * 1e200):
        body = {"crystal": TRICLINIC, "U": U.tolist(), "axes": axes, "target": [1, 0, 0], "toward": [1, 0, 0]}
        assert ask("stage", body, refused=True)["field"].startswith("U")
