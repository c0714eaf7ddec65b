"""Values of 1e-30 and 1e30: every answer scales with the tensor, or the call is refused; angles do not change at all.

All answers of a tensor are homogeneous: of degree one (values, flux, rods), zero (axes, angles, half-angles) or minus a
half (radii of the quadric). A power of two changes no digit of a double, so the answers must agree to the last bits.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest

from tests.hard.conftest import Ask

CRYSTAL = {"cell": [12.214, 3.0371, 5.7981, 90, 103.83, 90], "group": "2/m"}
CELLS = {"11": 13.2, "13": 1.85, "22": 24.6, "33": 15.9}
COVARIANCE = [[0.0064, 0, 0, 0.001], [0, 0.0036, 0, 0], [0, 0, 0.04, 0], [0.001, 0, 0, 0.0081]]
DIRECTIONS = ["(-2 0 1)", "[1 1 1]", [0.3, -0.4, 0.5]]
SCALES = [2.0**-100, 2.0**100, 2.0**-300, 2.0**300]
"""1e-30 and 1e30 nearly, and beyond."""


def scaled(factor: float) -> dict[str, Any]:
    free = {label: value * factor for label, value in CELLS.items()}
    covariance = [[entry * factor * factor for entry in row] for row in COVARIANCE]
    return {"crystal": CRYSTAL, "tensor": {"free": free, "covariance": covariance}}


def near(found: Any, wanted: Any, factor: float) -> bool:
    """Whether two answers agree, the first divided by the factor."""
    one, two = np.array(found, dtype=float) / factor, np.array(wanted, dtype=float)
    return bool(
        np.allclose(one, two, rtol=1e-12, atol=1e-12 * max(1e-300, float(np.nanmax(np.abs(two)))), equal_nan=True)
    )


@pytest.mark.parametrize("factor", SCALES)
def test_state_and_along_scale(factor: float, ask: Ask) -> None:
    one, many = ask("state", scaled(1.0)), ask("state", scaled(factor))
    for key in ("matrix", "posed", "sigma_matrix", "sigma_posed"):
        assert near(many[key], one[key], factor), key
    assert near(many["principal"]["values"], one["principal"]["values"], factor)
    assert near(many["principal"]["sigma"], one["principal"]["sigma"], factor)
    assert near(many["principal"]["axes"], one["principal"]["axes"], 1)
    assert near(many["principal"]["axis_sigma"], one["principal"]["axis_sigma"], 1)
    assert many["quadric"] == one["quadric"] == "ellipsoid"
    one, many = (ask("along", {**scaled(f), "directions": DIRECTIONS}) for f in (1.0, factor))
    for key in ("values", "flux", "rod", "sigma", "rod_sigma"):
        assert near(many[key], one[key], factor), key
    assert near(many["angle"], one["angle"], 1)


@pytest.mark.parametrize("factor", SCALES)
def test_miscut_seek_and_region_scale(factor: float, ask: Ask) -> None:
    one, many = (ask("miscut", {**scaled(f), "direction": "(-2 0 1)", "half_angle": 1}) for f in (1.0, factor))
    for key in ("nominal", "lowest", "highest", "slope", "sigma"):
        assert near(many[key], one[key], factor), key
    one, many = (ask("miscut", {**scaled(f), "direction": "[0 1 0]", "tolerance": 0.05 * f}) for f in (1.0, factor))
    assert many["half_angle"] == pytest.approx(one["half_angle"], rel=1e-9)
    one, many = (
        ask("seek", {"crystal": CRYSTAL, "conditions": [{"tensor": scaled(f)["tensor"], "target": 17 * f}]})
        for f in (1.0, factor)
    )
    assert many["fraction_below"] == pytest.approx(one["fraction_below"], rel=1e-9)
    assert [entry["direction"] for entry in many["planes"]] == [entry["direction"] for entry in one["planes"]]
    assert near(many["cone"]["half_angles"], one["cone"]["half_angles"], 1)
    one, many = (ask("region", {**scaled(f), "directions": ["[1 0 2]", [1, 0, 0.3]]}) for f in (1.0, factor))
    assert near([c or 0 for c in many["chi2"]], [c or 0 for c in one["chi2"]], 1)


@pytest.mark.parametrize("factor", SCALES)
def test_fit_and_campaign_scale(factor: float, ask: Ask) -> None:
    def body(f: float) -> dict[str, Any]:
        rows = ["(1 0 0)", "[0 1 0]", "[0 0 1]", "(-2 0 1)", "[1 0 1]", "(1 1 0)"]
        values = [13.1, 24.5, 15.8, 13.3, 17.2, 19.9]
        readings = [
            {
                "kind": "rod" if number % 2 else "along",
                "direction": row,
                "value": value * f,
                "sigma": 0.1 * f,
                "direction_sigma": 0.7,
                "batch": "x",
            }
            for number, (row, value) in enumerate(zip(rows, values, strict=True))
        ]
        return {"crystal": CRYSTAL, "tensor": {}, "readings": readings, "batches": {"x": 0.01}}

    one, many = ask("fit", body(1.0)), ask("fit", body(factor))
    assert near(many["values"], one["values"], factor)
    assert near(many["sigma_matrix"], one["sigma_matrix"], factor)
    assert many["chi2"] == pytest.approx(one["chi2"], rel=1e-6)
    assert many["p_value"] == pytest.approx(one["p_value"], rel=1e-6)
    assert many["condition"] == pytest.approx(one["condition"], rel=1e-6)
    one, many = (
        ask(
            "campaign",
            {
                **scaled(f),
                "add": 3,
                "candidates": {"max_index": 1},
                "sigma": 0.1 * f,
                "direction_sigma": 0.5,
                "criterion": "D",
            },
        )
        for f in (1.0, factor)
    )
    assert near(many["sigma_after"], one["sigma_after"], factor)


@pytest.mark.parametrize("factor", SCALES)
@pytest.mark.parametrize(("kind", "degree"), [("value", 1.0), ("flux", 1.0), ("quadric", -0.5)])
def test_surfaces_scale(kind: str, degree: float, factor: float, ask: Ask) -> None:
    one, many = (ask("surface", {**scaled(f), "surface": kind, "detail": 10}) for f in (1.0, factor))
    assert many["triangles"] == one["triangles"]
    assert near(many["vertices"], one["vertices"], factor**degree)
    assert near(many["value"], one["value"], factor)


@pytest.mark.parametrize("factor", SCALES)
def test_conversion_scales(factor: float, ask: Ask) -> None:
    other = {**CRYSTAL, "frame": "x1=a x3=c*"}
    one, many = (
        ask(
            "convert",
            {
                "from": CRYSTAL,
                "tensor": {"free": scaled(f)["tensor"]["free"]},
                "to": other,
                "basis": np.eye(3).tolist(),
            },
        )
        for f in (1.0, factor)
    )
    assert near(many["matrix"], one["matrix"], factor)


@pytest.mark.parametrize("size", [1e155, 1e200, 1e290, 1e-155, 1e-200, 1e-290, 1e-310])
@pytest.mark.parametrize("route", ["state", "along", "surface", "miscut", "seek", "optics"])
def test_beyond_the_range_answers_are_right_or_refused(route: str, size: float, client: Any) -> None:
    tensor = {"matrix": (size * np.diag([1.0, 2.0, 3.0])).tolist()}
    body: dict[str, Any] = {"crystal": {"cell": [5, 6, 7, 90, 90, 90], "group": "mmm"}, "tensor": tensor}
    more = {
        "along": {"directions": ["[0 1 0]"]},
        "surface": {"surface": "value", "detail": 8},
        "miscut": {"direction": "[0 1 0]", "half_angle": 0},
        "optics": {"direction": "[0 0 1]"},
    }
    body |= more.get(route, {})
    if route == "seek":
        body = {"crystal": body["crystal"], "conditions": [{"tensor": tensor, "target": "max"}]}
    answer = client.post(f"/api/v1/{route}", json=body)
    content = answer.json()
    if answer.status_code == 422:
        assert content["error"]["message"] and content["error"]["hint"]
        return
    found, wanted = {
        "state": lambda: (content["principal"]["values"], [3 * size, 2 * size, size]),
        "along": lambda: (content["values"], [2 * size]),
        "surface": lambda: ([max(content["value"])], [3 * size]),
        "miscut": lambda: ([content["nominal"]], [2 * size]),
        "seek": lambda: (content["ranges"][0], [size, 3 * size]),
        "optics": lambda: (content["indices"], [np.sqrt(2 * size), np.sqrt(size)]),
    }[route]()
    assert found == pytest.approx(wanted, rel=1e-12)
