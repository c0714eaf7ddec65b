"""The probe: the point under a place of the screen by solving rays in other ways, and what is said along it."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq

from app.errors import InputError
from app.tensor.surface import SurfaceKind
from app.web.probing import ProbePart, find_direction, probe_surface
from tests.web.subjects import ELLIPSOID, MONOCLINIC, PATTERNS, make_subject, random_rotation

KINDS: tuple[SurfaceKind, ...] = ("quadric", "value", "flux")
SUBJECTS = {name: make_subject(matrix) for name, matrix in PATTERNS.items()}


def probe(subject: Any, kind: SurfaceKind, screen: Any, **given: Any) -> Any:
    return probe_surface(subject, subject.scene(kind), screen, ProbePart(**given))


@pytest.mark.parametrize("seed", range(12))
def test_the_near_point_of_an_ellipsoid_by_the_roots_of_a_quadratic(seed: int) -> None:
    """xᵀA x = f² along x = foot + t d is a quadratic in t; its larger root is the point that is seen."""
    scene, screen = SUBJECTS["ellipsoid"].scene("quadric"), random_rotation(seed)
    right, up = np.random.default_rng(seed).uniform(-0.2, 0.2, 2)
    foot = right * screen[0] + up * screen[1]
    form = ELLIPSOID / scene.factor**2
    roots = np.roots([screen[2] @ form @ screen[2], 2 * foot @ form @ screen[2], foot @ form @ foot - 1.0])
    point = foot + np.max(roots.real) * screen[2]
    expected = point / np.linalg.norm(point)
    np.testing.assert_allclose(find_direction(scene, screen, right, up), expected, atol=1e-9)


@pytest.mark.parametrize("name", PATTERNS)
@pytest.mark.parametrize("kind", KINDS)
def test_the_point_found_is_on_the_surface_and_under_the_hand(name: str, kind: SurfaceKind) -> None:
    subject, screen = SUBJECTS[name], random_rotation(3)
    scene = subject.scene(kind)
    found = 0
    for right, up in np.random.default_rng(4).uniform(-scene.reach / 2, scene.reach / 2, (60, 2)).tolist():
        direction = find_direction(scene, screen, right, up)
        assert np.linalg.norm(direction) == pytest.approx(1.0)
        radius = float(scene.radius(direction))
        if not np.isfinite(radius) or np.hypot(*((screen @ direction * radius)[:2] - [right, up])) > 1e-6:
            continue
        found += 1
        # Nothing of the surface is nearer to the viewer on that line: asked of the scene's own test of what is hidden.
        assert not scene.find_hidden((direction * radius + 0.004 * screen[2])[None], screen[2], 400)[0]
    assert found > 10


def test_beside_the_surface_the_probe_slides_along_the_outline() -> None:
    """Far to the right of an ellipsoid: found by scipy on the condition that the line of sight only touches it."""
    scene, screen = SUBJECTS["ellipsoid"].scene("quadric"), random_rotation(8)
    direction = find_direction(scene, screen, 0.9 * scene.reach, 0.0)
    # The direction whose surface comes nearest to the line is in the plane of the line and the middle.
    assert direction @ screen[1] == pytest.approx(0.0, abs=1e-9)
    ratio = lambda turn: float(scene.radius(np.cos(turn) * screen[0] + np.sin(turn) * screen[2]) * np.cos(turn))  # noqa: E731
    slope = lambda turn: ratio(turn + 1e-5) - ratio(turn - 1e-5)  # noqa: E731
    best = brentq(slope, -1.2, 1.2)
    if ratio(best) < 0.9 * scene.reach:
        assert np.arctan2(direction @ screen[2], direction @ screen[0]) == pytest.approx(best, abs=0.02)


def test_what_is_said_along_a_row_of_a_monoclinic_conductor() -> None:
    """Invented; by hand: along x1 the flux is (13.2, 0, 1.85), its angle atan(1.85/13.2), σ of the value that of 11."""
    spread = np.diag([0.3, 0.2, 0.4, 0.1]) ** 2
    free = {"11": 13.2, "22": 24.6, "33": 15.9, "13": 1.85}
    subject = make_subject(free, MONOCLINIC)
    order = [subject.tensor.form.labels.index(label) for label in ("11", "22", "33", "13")]
    covariance = np.zeros((4, 4))
    covariance[np.ix_(order, order)] = spread
    subject = make_subject(free, MONOCLINIC, covariance=covariance)
    found = probe(subject, "value", np.eye(3), direction=[7.0, 0.0, 0.0])
    assert found["direction"] == [1.0, 0.0, 0.0]
    assert found["value"].startswith("13.2(3)")
    assert found["flux_angle"] == pytest.approx(np.rad2deg(np.arctan2(1.85, 13.2)))
    np.testing.assert_allclose(found["flux"], np.array([13.2, 0, 1.85]) / np.hypot(13.2, 1.85))
    assert float(found["size"].split("(")[0]) == pytest.approx(np.hypot(13.2, 1.85), abs=0.06)
    for kind in ("row", "normal"):
        assert 0.0 <= found[kind]["off"] < 10.0


def test_steps_turn_it_on_the_screen() -> None:
    """One of 90° to the right takes the direction toward the viewer to the right; up likewise."""
    subject, screen = SUBJECTS["ellipsoid"], random_rotation(5)
    for steps, row in (([90, 0], 0), ([0, 90], 1)):
        found = probe(subject, "quadric", screen, direction=screen[2].tolist(), steps=steps)
        np.testing.assert_allclose(found["direction"], screen[row], atol=1e-12)
    assert probe(subject, "quadric", screen)["direction"] == pytest.approx(screen[2].tolist())


def test_the_arrows_are_told_apart_by_line_and_end() -> None:
    shapes = probe(SUBJECTS["ellipsoid"], "quadric", random_rotation(6), at=[0.1, 0.05])["shapes"]
    names = [entry["class"].split(" ")[0] for entry in shapes]
    assert {"probe-line", "probe-head", "probe-flux", "probe-flux-end", "probe-foot"} <= set(names)


@pytest.mark.parametrize("kind", KINDS)
def test_a_tensor_of_zeros_has_a_probe_without_flux(kind: SurfaceKind) -> None:
    found = probe(make_subject(np.zeros((3, 3))), kind, random_rotation(7), at=[0.1, 0.1])
    assert found["flux"] is None and found["flux_angle"] is None
    assert found["value"].startswith("0")


@pytest.mark.parametrize("given", [{"at": [1e300, -1e300]}, {"steps": [1e300, 1e300]}, {"direction": [1e-320, 0, 0]}])
@pytest.mark.parametrize("name", PATTERNS)
def test_no_place_makes_a_number_that_is_none(name: str, given: Any) -> None:
    found = probe(SUBJECTS[name], "quadric", random_rotation(9), **given)
    assert np.all(np.isfinite(found["direction"]))
    assert np.linalg.norm(found["direction"]) == pytest.approx(1.0)


def test_the_zero_vector_is_refused() -> None:
    with pytest.raises(InputError) as caught:
        probe(SUBJECTS["ellipsoid"], "quadric", np.eye(3), direction=[0.0, 0.0, 0.0])
    assert caught.value.field == "probe.direction"
