"""Rocking angles, achieved normals, rod or plate."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import curve_fit
from scipy.spatial.transform import Rotation

from app.errors import InputError
from app.readings.rocking import find_achieved_direction, fit_rocking, judge_piece

AZIMUTHS = np.array([0.0, 60.0, 120.0, 180.0, 240.0, 300.0])


def cosine(azimuth: np.ndarray, offset: float, tilt: float, phi: float) -> np.ndarray:
    return np.asarray(offset + tilt * np.cos(np.deg2rad(azimuth - phi)))


def test_a_planted_cosine_is_found_with_the_uncertainties_of_another_library() -> None:
    rng = np.random.default_rng(5)
    angles = cosine(AZIMUTHS, 17.3, 0.82, 41.0) + 0.02 * rng.normal(size=6)
    found = fit_rocking(AZIMUTHS, angles, 0.02)
    best, covariance = curve_fit(cosine, AZIMUTHS, angles, p0=[17, 1, 30], sigma=np.full(6, 0.02), absolute_sigma=True)
    assert (found.offset, found.tilt, found.azimuth) == pytest.approx(tuple(best), abs=1e-5)
    assert (found.offset_sigma, found.tilt_sigma, found.azimuth_sigma) == pytest.approx(
        tuple(np.sqrt(np.diag(covariance))), rel=1e-4
    )
    assert found.dof == 3


def test_without_sigma_the_scatter_tells_it_and_three_readings_tell_none() -> None:
    rng = np.random.default_rng(6)
    angles = cosine(AZIMUTHS, 10.0, 0.5, -120.0) + 0.03 * rng.normal(size=6)
    found = fit_rocking(AZIMUTHS, angles)
    _, covariance = curve_fit(cosine, AZIMUTHS, angles, p0=[10, 0.5, -100])
    assert found.tilt_sigma == pytest.approx(float(np.sqrt(covariance[1, 1])), rel=1e-3)
    exact = fit_rocking(AZIMUTHS[:3], cosine(AZIMUTHS[:3], 10.0, 0.5, -120.0))
    assert (exact.tilt, exact.azimuth) == pytest.approx((0.5, -120.0))
    assert exact.tilt_sigma is None


def test_a_tilt_that_is_not_told_from_zero_has_no_azimuth_to_trust() -> None:
    found = fit_rocking(AZIMUTHS, 10.0 + 0.001 * np.array([1, -1, 1, -1, 1, -1]), 0.1)
    assert found.azimuth_sigma is None


@pytest.mark.parametrize("azimuths", [[0, 120], [0, 0, 120], [0, 360, 720]])
def test_too_few_azimuths_are_refused(azimuths: list[float]) -> None:
    with pytest.raises(InputError) as caught:
        fit_rocking(azimuths, [1.0] * len(azimuths))
    assert caught.value.field == "azimuths"


def test_the_achieved_normal_leans_by_the_tilt_toward_the_azimuth() -> None:
    nominal = np.array([0.0, 0.6, 0.8])
    reference = np.array([1.0, 0.2, -0.1])
    achieved = find_achieved_direction(nominal, reference, 2.5, 70.0)
    assert np.rad2deg(np.arccos(achieved @ nominal)) == pytest.approx(2.5)
    # The same by two rotations of another library: lean toward azimuth 0, then turn about the nominal normal.
    flat = reference - nominal * (nominal @ reference)
    flat /= np.linalg.norm(flat)
    lean = Rotation.from_rotvec(np.deg2rad(2.5) * np.cross(nominal, flat))
    turn = Rotation.from_rotvec(np.deg2rad(70.0) * nominal)
    assert achieved == pytest.approx(turn.apply(lean.apply(nominal)), abs=1e-12)
    with pytest.raises(InputError):
        find_achieved_direction(nominal, 2 * nominal, 1.0, 0.0)


@pytest.mark.parametrize(
    ("size", "kind"),
    [
        ((20, 3, 2), "rod"),
        ((15, 3, 3), "rod"),
        ((14, 3, 3), "between"),
        ((8, 8, 0.5), "plate"),
        ((5, 5, 0.6), "between"),
    ],
)
def test_rod_or_plate_is_decided_by_the_usual_ratios(size: tuple[float, float, float], kind: str) -> None:
    # Common practice, no source: five times as long as wide, ten times as wide as thick.
    found, sentence = judge_piece(*size)
    assert found == kind
    assert "averaged" in sentence or kind in sentence


def test_a_size_is_above_zero() -> None:
    with pytest.raises(InputError) as caught:
        judge_piece(1.0, 0.0, 1.0)
    assert caught.value.field == "width"
