"""What the tool gets for every printed value of checks.toml, by the value's id."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache
from typing import Any

import numpy as np
import numpy.typing as npt
from scipy.optimize import minimize_scalar
from scipy.spatial.transform import Rotation
from scipy.special import chdtri
from statsmodels.datasets import longley

from app.consequences.gyration import compute_rotation
from app.consequences.indicatrix import build_indicatrix
from app.consequences.optic_axes import find_optic_axes
from app.consequences.refraction import refract
from app.crystal.crystal import Crystal, build_crystal
from app.crystal.direction import Direction, parse_direction
from app.cutting.attitude import fit_rotation
from app.readings.fit import fit_readings
from app.readings.reading import Reading
from app.readings.solver import solve_least_squares
from app.series.cell_series import CellState, build_cell_series
from app.series.still_directions import find_still_directions
from app.series.strain import compute_strains
from app.tensor.estimate import Estimate
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.principal import find_principal
from app.tensor.region import find_region
from app.tensor.tensor import build_tensor
from tests.crystal.reference import SETTINGS

FloatArray = npt.NDArray[np.float64]

ROOT27 = 3.0 * np.sqrt(3.0)
NYE = np.array([[25.0, 0.0, 0.0], [0.0, 7.0, -ROOT27], [0.0, -ROOT27, 13.0]])
TRICLINIC = ([5.0, 6.0, 7.0, 81.0, 97.0, 104.0], "1")
CALCITE = ([4.9896, 4.9896, 17.061, 90.0, 90.0, 120.0], "-3m")
GYPSUM = {"11": 1.6, "13": 0.0, "22": 42.0, "33": 29.0}
QUARTZ = ([4.9134, 4.9134, 5.4052, 90.0, 90.0, 120.0], "32")


def compute(name: str) -> float:
    """The tool's value for a check."""
    if name in FAMILIES:
        return float(FAMILIES[name](""))
    starts = [start[:-1] for start in FAMILIES if start.endswith("*") and name.startswith(start[:-1])]
    # The longest start is the closest family.
    start = max(starts, key=len)
    return float(FAMILIES[f"{start}*"](name[len(start) :]))


def _nye_value(rest: str) -> float:
    return find_principal(Estimate(NYE, None, "")).values[int(rest) - 1]


def _nye_turn(_: str) -> float:
    axis = find_principal(Estimate(NYE, None, "")).axes[1]
    turned = np.rad2deg(np.arctan2(axis[2], axis[1]))
    # An axis has no sense: the angle is taken between −90° and 90°.
    return float((turned + 90.0) % 180.0 - 90.0)


def _circle(which: str) -> float:
    plane = NYE[1:, 1:]
    if which == "centre":
        return float(np.trace(plane)) / 2.0
    return float(np.hypot((plane[0, 0] - plane[1, 1]) / 2.0, plane[0, 1]))


def _trace(crystal: Crystal, free: dict[str, float]) -> float:
    return float(np.trace(build_tensor(crystal, Kind("polar", "symmetric"), free=free).estimate.matrix))


def _calcite_still(_: str) -> float:
    tensor = build_tensor(build_crystal(*CALCITE), Kind("polar", "symmetric"), free={"11": -5.6, "33": 25.0})
    found = find_still_directions(tensor.estimate)
    return float(found.half_angles[0])


@cache
def _albite() -> list[CellState]:
    return [
        CellState(26.0, (8.141, 12.790, 7.157, 94.225, 116.597, 87.772)),
        CellState(1127.0, (8.278, 12.863, 7.180, 92.780, 116.045, 87.718)),
    ]


def _albite_strain(measure: Any) -> FloatArray:
    return compute_strains(build_cell_series(_albite(), "-1", frame="x3=c x1=a*"), measure).matrices[1]


def _albite_cell(label: str) -> float:
    return 100.0 * float(_albite_strain("linear")[int(label[0]) - 1, int(label[1]) - 1])


def _albite_principal(measure: str) -> Callable[[str], float]:
    return lambda rest: float(np.linalg.eigvalsh(_albite_strain(measure))[::-1][int(rest) - 1])


def _sulfate(axis: str) -> float:
    states = [
        CellState(4.2, (5.16863, 7.86781, 6.46674, 90.0, 90.0, 90.0)),
        CellState(300.0, (5.17471, 7.87563, 6.49517, 90.0, 90.0, 90.0)),
    ]
    strain = compute_strains(build_cell_series(states, "mmm", frame="x1=a x3=c*"), "stretch").matrices[1]
    place = "abc".index(axis)
    return 1e6 * float(strain[place, place]) / (300.0 - 4.2)


def _ghosh(which: str) -> float:
    square = 0.5893**2
    if which == "no":
        permittivity = 1.73358749 + 0.96464345 * square / (square - 0.0194325203) + 1.82831454 * square / (square - 120)
    else:
        permittivity = 1.35859695 + 0.82427830 * square / (square - 0.0106689543) + 0.14429128 * square / (square - 120)
    estimate = Estimate(np.eye(3) * permittivity, None, "")
    return float(refract(build_indicatrix(estimate), estimate, np.array([0.0, 0.0, 1.0])).indices[0])


def _walk_off(degrees: float) -> float:
    estimate = Estimate(np.diag(np.square([1.65835, 1.65835, 1.48640])), None, "")
    angle = np.deg2rad(degrees)
    found = refract(build_indicatrix(estimate), estimate, np.array([np.sin(angle), 0.0, np.cos(angle)]))
    assert found.walk_off is not None
    return float(np.max(found.walk_off))


def _largest_walk_off(_: str) -> float:
    found = minimize_scalar(lambda angle: -_walk_off(angle), bounds=(20.0, 70.0), method="bounded")
    return -float(found.fun)


def _two_v(*indices: float) -> Callable[[str], float]:
    def compute_angle(_: str) -> float:
        estimate = Estimate(np.diag(np.square(indices)), None, "")
        two_v = find_optic_axes(build_indicatrix(estimate), estimate).two_v
        assert two_v is not None
        return two_v

    return compute_angle


def _conical(_: str) -> float:
    """The flux of all waves along an optic axis is a cone that has the axis on it; its opening is the largest angle."""
    matrix = np.diag(np.square([1.5326, 1.6863, 1.6908]))
    estimate = Estimate(matrix, None, "")
    axis = find_optic_axes(build_indicatrix(estimate), estimate).axes[0]
    across = np.linalg.svd(axis[None])[2][1:]
    turns = np.linspace(0.0, np.pi, 4001)
    fields = (np.cos(turns)[:, None] * across[0] + np.sin(turns)[:, None] * across[1]) @ np.linalg.inv(matrix)
    # The ray is across E and H, so it leaves the wave normal as E leaves D.
    along = fields @ axis
    leans = np.arctan2(np.abs(along), np.linalg.norm(fields - along[:, None] * axis, axis=1))
    return float(np.rad2deg(np.max(leans)))


def _rotation(_: str) -> float:
    gyration = Estimate(np.diag([-5.82e-5, -5.82e-5, 12.96e-5]), None, "")
    return compute_rotation(gyration, np.array([0.0, 0.0, 1.0]), 510.0, 1.5482).power


def _no_rotation(_: str) -> float:
    return float(find_still_directions(Estimate(np.diag([-5.82, -5.82, 12.96]), None, "")).half_angles[0])


def _angle(crystal: tuple[list[float], str], first: str, second: str) -> Callable[[str], float]:
    def measure(_: str) -> float:
        made = build_crystal(*crystal)
        one, other = (made.resolve(parse_direction(text)) for text in (first, second))
        return float(np.rad2deg(np.arctan2(np.linalg.norm(np.cross(one, other)), one @ other)))

    return measure


def _twin(_: str) -> float:
    crystal = build_crystal(*CALCITE)
    normal, c = (crystal.resolve(parse_direction(text)) for text in ("(104)", "[001]"))
    mirrored = c - 2.0 * normal * (c @ normal)
    return float(np.rad2deg(np.arccos(abs(c @ mirrored))))


def _set_of_six(name: str) -> FloatArray:
    golden = (1.0 + np.sqrt(5.0)) / 2.0
    axes = np.eye(3)
    faces = np.array([[1, 1, 0], [1, -1, 0], [1, 0, 1], [1, 0, -1], [0, 1, 1], [0, 1, -1]]) / np.sqrt(2.0)
    if name == "icosahedral":
        rows = [[0, 1, golden], [0, -1, golden], [1, golden, 0], [-1, golden, 0], [golden, 0, 1], [-golden, 0, 1]]
        return np.array(rows) / np.hypot(1.0, golden)
    return faces if name == "face" else np.concatenate([axes, faces[[0, 2, 4]]])


def _six(name: str) -> Any:
    directions = _set_of_six("icosahedral" if name.endswith("variance") else name)
    readings = [Reading("along", 1.0, Direction("vector", tuple(row)), sigma=1.0) for row in directions.tolist()]
    fit = fit_readings(build_crystal(*TRICLINIC), Kind("polar", "symmetric"), readings)
    assert fit.estimate is not None
    assert fit.estimate.sigma_matrix is not None
    if name == "diagonal-variance":
        return fit.estimate.sigma_matrix[0, 0] ** 2
    return fit.estimate.sigma_matrix[0, 1] ** 2 if name == "off-variance" else fit.condition


@cache
def _longley() -> tuple[FloatArray, FloatArray]:
    data = longley.load()
    design = np.column_stack([np.ones(16), np.asarray(data.exog, dtype=float)])
    observed = np.asarray(data.endog, dtype=float)
    # The columns are so unlike that the condition is 5·10⁹: all of it is wanted.
    found = solve_least_squares(design, observed, tolerance=1e-14)
    residual = observed - design @ found.solution
    scale = float(residual @ residual) / (16 - 7)
    return found.solution, np.sqrt(scale * np.diag(found.covariance))


def _chi2(degrees: str) -> float:
    """Two degrees by the bound of a region of directions; the others by the function that the tool takes it from."""
    if degrees == "2":
        crystal = build_crystal(*TRICLINIC)
        tensor = build_tensor(
            crystal, Kind("polar", "symmetric"), matrix=np.diag([1.0, 2.0, 4.0]), covariance=1e-4 * np.eye(6)
        )
        return float(find_region(crystal, tensor, 0.95).bound)
    return float(chdtri(int(degrees), 0.05))


def _attitude(_: str) -> float:
    seen = np.array([[0.8190, -0.5282, 0.2242], [-0.3138, -0.1584, 0.9362]])
    reference = np.array([[1.0, 0.0, 0.0], [0.0, 0.0, 1.0]])
    seen /= np.linalg.norm(seen, axis=1, keepdims=True)
    fitted = fit_rotation(reference, seen, np.ones(2))
    # 3-2-1 by 30°, 20°, −10° turns the axes; vectors go over by its transpose.
    true = Rotation.from_euler("ZYX", [30.0, 20.0, -10.0], degrees=True).as_matrix().T
    return float(np.rad2deg(Rotation.from_matrix(fitted @ true.T).magnitude()))


def _count(rest: str) -> float:
    for setting in SETTINGS:
        for parity in ("polar", "axial"):
            for intrinsic in ("symmetric", "general"):
                if rest == f"{setting.symbol}-{parity}-{intrinsic}":
                    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis)
                    return build_form(crystal, Kind(parity, intrinsic)).count  # type: ignore[arg-type]
    raise LookupError(rest)


CLASSES = (
    *("1", "-1", "2", "m", "2/m", "222", "mm2", "mmm", "4", "-4", "4/m", "422", "4mm", "-42m", "4/mmm"),
    *("3", "-3", "32", "3m", "-3m", "6", "-6", "6/m", "622", "6mm", "-6m2", "6/mmm"),
    *("23", "m-3", "432", "-43m", "m-3m"),
)


def _gyration_classes(_: str) -> float:
    systems = {"cubic": [5.0] * 3 + [90.0] * 3, "hexagonal": [5.0, 5.0, 7.0, 90.0, 90.0, 120.0]}
    shapes = [systems["cubic"], systems["hexagonal"]]
    count = 0
    for symbol in CLASSES:
        # Every class has a cell that both these shapes, or one of them, obey.
        cell = shapes[1] if symbol[:1] in "36" or symbol[:2] in ("-3", "-6") else shapes[0]
        count += build_form(build_crystal(cell, symbol), Kind("axial", "symmetric")).count > 0
    return count


FAMILIES: dict[str, Callable[[str], float]] = {
    "nye-value-*": _nye_value,
    "nye-turn": _nye_turn,
    "nye-*": _circle,
    "quartz-volume": lambda _: _trace(build_crystal(*QUARTZ), {"11": 13.65, "33": 7.50}),
    "gypsum-volume": lambda _: _trace(build_crystal([5.7, 15.2, 6.5, 90.0, 118.4, 90.0], "2/m"), GYPSUM),
    "calcite-still": _calcite_still,
    "albite-principal-*": _albite_principal("linear"),
    "albite-stretch-*": _albite_principal("stretch"),
    "albite-cleavage": _angle(([8.138, 12.789, 7.156, 94.33, 116.57, 87.65], "-1"), "(001)", "(010)"),
    "albite-*": _albite_cell,
    "sulfate-*": _sulfate,
    "calcite-no": lambda _: _ghosh("no"),
    "calcite-ne": lambda _: _ghosh("ne"),
    "calcite-walk": lambda _: _walk_off(45.0),
    "calcite-walk-largest": _largest_walk_off,
    "aragonite-2v": _two_v(1.530, 1.680, 1.685),
    "anhydrite-2v": _two_v(1.570, 1.575, 1.614),
    "gypsum-2v": _two_v(1.5205, 1.5226, 1.5296),
    "conical": _conical,
    "quartz-rotation": _rotation,
    "quartz-no-rotation": _no_rotation,
    "calcite-cleavage": _angle(CALCITE, "(104)", "(-1 1 4)"),
    "calcite-twin": _twin,
    "quartz-rm": _angle(QUARTZ, "(1 0 -1 1)", "(1 0 -1 0)"),
    "quartz-rz": _angle(QUARTZ, "(1 0 -1 1)", "(0 1 -1 1)"),
    "quartz-rc": _angle(QUARTZ, "(101)", "(0 0 0 1)"),
    "topaz-prism": _angle(([4.6499, 8.7968, 8.3909, 90.0, 90.0, 90.0], "mmm"), "(110)", "(1-10)"),
    "six-*": _six,
    "longley-b*": lambda rest: float(_longley()[0][int(rest)]),
    "longley-s*": lambda rest: float(_longley()[1][int(rest)]),
    "chi2-*": _chi2,
    "attitude": _attitude,
    "count-*": _count,
    "gyration-classes": _gyration_classes,
}
