"""What the front page says in a pose: numbers worked out apart from the project, exact forms by sympy, plain numpy."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from app.crystal.crystal import build_crystal
from app.tensor.form import build_form
from app.tensor.kind import Kind
from app.tensor.pose import Pose, read_pose
from app.tensor.quadric import name_quadric
from app.web.posed import describe_pose, describe_subject, render_cells, render_matrix, render_number
from app.web.scene import Subject
from app.web.turning import Caught, View, build_view
from tests.crystal.reference import CELLS, SETTING_NAMES, SETTINGS, find_exact_form
from tests.web.subjects import ELLIPSOID, ONE_SHEET, PATTERNS, make_subject, random_rotation

FloatArray = npt.NDArray[np.float64]

# Invented data; the answers were computed apart from this project.
WORKED_CELL = (12.214, 3.0371, 5.7981, 90.0, 103.83, 90.0)
WORKED = np.array([[13.2, 0.0, 1.85], [0.0, 24.6, 0.0], [1.85, 0.0, 15.9]])
SIGMAS = np.array([0.08, 0.06, 0.2, 0.09])
"""Of 11, 13, 22 and 33."""
WORKED_CRYSTAL = build_crystal(WORKED_CELL, "2/m")
SUBJECT = make_subject(WORKED, WORKED_CRYSTAL, covariance=np.diag(SIGMAS**2), other="rod")
BARE = make_subject(WORKED, WORKED_CRYSTAL, other="rod")
ON_NORMAL: dict[str, Any] = {"exact": ["z", "(-2 0 1)"], "toward": ["x", "[0 1 0]"]}

seeds = st.integers(0, 2**32 - 1)


def describe(subject: Subject, kept: dict[str, Any], view: View | None = None, **more: Any) -> dict[str, Any]:
    pose = read_pose(kept, subject.crystal)
    return describe_pose(subject, "quadric", pose, kept, view or build_view("specimen", None), **more)


def read_number(number: dict[str, str]) -> float:
    """A printed number read back, powers of ten included."""
    text = number["whole"] + number["rest"]
    power = number["spread"].partition("×10")[2] if "×10" in number["spread"] else text.partition("×10")[2]
    plain = text.partition("×10")[0].replace("−", "-")
    exponent = power.translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻", "0123456789-"))
    return float(plain) * 10.0 ** float(exponent or 0)


# Numbers --------------------------------------------------------------------------------------------------------------


def test_a_number_comes_in_three_parts_that_align_on_the_point() -> None:
    assert render_number(12.4783, 0.0812) == {"text": "12.48(8)", "whole": "12", "rest": ".48", "spread": "(8)"}
    assert render_number(-5.5, None) == {"text": "−5.5", "whole": "−5", "rest": ".5", "spread": ""}
    assert render_number(1300.0, 200.0) == {"text": "1300(200)", "whole": "1300", "rest": "", "spread": "(200)"}


@given(st.floats(-1e6, 1e6), st.one_of(st.none(), st.floats(1e-3, 1e3), st.just(float("nan"))))
def test_the_parts_are_the_whole(value: float, sigma: float | None) -> None:
    number = render_number(value, sigma)
    assert number["whole"] + number["rest"] + number["spread"] == number["text"]
    assert "." not in number["whole"]
    if sigma is None or np.isnan(sigma):
        assert "(" not in number["text"]
        assert read_number(number) == pytest.approx(value, rel=1e-5, abs=1e-300)
    else:
        # Rounded where its uncertainty begins: no farther away than half of the last place, which is below σ.
        assert abs(read_number(number) - value) <= 0.5 * sigma


# Cells ----------------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", SETTING_NAMES)
@pytest.mark.parametrize(("parity", "intrinsic"), [("polar", "symmetric"), ("axial", "general")])
def test_cells_are_free_tied_or_zero_by_the_exact_form(name: str, parity: str, intrinsic: str) -> None:
    setting = SETTINGS[SETTING_NAMES.index(name)]
    frame = "x3=[1 1 1] x1=(1 -1 0)" if setting.family == "rhombohedral" else None
    crystal = build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=frame)
    kind = Kind(parity, intrinsic)  # type: ignore[arg-type]
    free, basis = find_exact_form(name, parity, intrinsic)
    values = np.sqrt([2.0, 3.0, 5.0, 7.0, 11.0, 13.0, 17.0, 19.0, 23.0])[: len(free)]
    matrix = np.tensordot(values, basis, axes=1) if len(free) else np.zeros((3, 3))
    cells = np.array(render_cells(make_subject(matrix, crystal, kind)), dtype=object).ravel()
    for position, cell in enumerate(cells):
        assert cell["label"] == f"{position // 3 + 1}{position % 3 + 1}"
        number = read_number(cell["number"])
        assert number == pytest.approx(matrix.ravel()[position], rel=5e-6, abs=1e-12)
        if position in free:
            assert cell["state"] == "free"
        elif len(free) == 0 or not np.any(basis[:, position // 3, position % 3]):
            assert (cell["state"], cell["number"]["text"]) == ("zero", "0")
        else:
            assert cell["state"] == "tied"
            assert cell["because"].startswith(f"tied, {cell['label']} = {cell['equals']}: ")


def test_a_locked_cell_names_the_half_turn() -> None:
    # About x2 the half-turn takes x1 to −x1 and keeps x2, so cell 12 turns into its negative.
    because = render_cells(SUBJECT)[0][1]["because"]
    assert because == "zero: the half-turn about x2 turns 12 into −12"


@settings(max_examples=25, deadline=None)
@given(seeds)
def test_posed_cells_are_c_t_ct_with_their_sigma(seed: int) -> None:
    pose = random_rotation(seed)
    posed = pose @ WORKED @ pose.T
    # Each posed cell is Σ free · (C B Cᵀ), B the basis of 2/m by hand: independent free cells add in squares.
    basis = np.zeros((4, 3, 3))
    basis[0, 0, 0] = basis[2, 1, 1] = basis[3, 2, 2] = 1.0
    basis[1, 0, 2] = basis[1, 2, 0] = 1.0
    sigma = np.sqrt(np.sum(((pose @ basis @ pose.T) * SIGMAS[:, None, None]) ** 2, axis=0))
    for row, cells in enumerate(render_cells(SUBJECT, Pose(pose))):
        for column, cell in enumerate(cells):
            assert cell["label"] == "xyz"[row] + "xyz"[column]
            assert abs(read_number(cell["number"]) - posed[row, column]) <= 0.5 * sigma[row, column]
            shown = cell["number"]["text"].partition("(")[2].rstrip(")")
            decimals = len(cell["number"]["rest"].lstrip("."))
            assert float(shown) * 10.0**-decimals == pytest.approx(sigma[row, column], rel=0.34)


def test_a_matrix_of_its_own_prints_as_the_subjects_does() -> None:
    form = build_form(WORKED_CRYSTAL, Kind())
    assert render_matrix(WORKED_CRYSTAL, form, SUBJECT.tensor.estimate) == render_cells(SUBJECT)


# What stays while the specimen is turned ------------------------------------------------------------------------------


def test_principal_axes_say_what_holds_them_and_how_far_they_may_turn() -> None:
    first, second, third = describe_subject(SUBJECT)["principal"]
    # 2/m holds the axis along b, a row and a normal at once.
    assert (first["locked"], first["lines"]) == (True, ["held by symmetry: [010], n(010)"])
    assert first["value"] == "24.6(2)"
    # Mohr's circle by hand: 14.55 ± √(1.35² + 1.85²).
    radius = np.hypot(1.35, 1.85)
    for entry, value in ((second, 14.55 + radius), (third, 14.55 - radius)):
        assert not entry["locked"]
        assert float(entry["value"].partition("(")[0]) == pytest.approx(value, abs=0.01)
    # tan 2θ = 2 T13/(T11 − T33), by hand: dθ = ((T11 − T33) dT13 − T13 d(T11 − T33))/((T11 − T33)² + 4 T13²).
    gap = 13.2 - 15.9
    sigma = np.hypot(gap * 0.06, 1.85 * np.hypot(0.08, 0.09)) / (gap**2 + 4 * 1.85**2)
    shown = 1.96 * np.rad2deg(sigma)
    assert second["lines"][-1] == f"±{shown:.1f}° toward p3"
    assert third["lines"][-1] == f"±{shown:.1f}° toward p2"


def test_without_uncertainty_no_turn_is_named() -> None:
    for entry in describe_subject(BARE)["principal"]:
        assert "±" not in " ".join(entry["lines"])
        assert "(" not in entry["value"]


@pytest.mark.parametrize(
    ("values", "lines"),
    [
        ((3.0, 2.0, 2.0), {1: "any direction in the plane across p1", 2: "any direction in the plane across p1"}),
        ((3.0, 3.0, 2.0), {0: "any direction in the plane across p3", 1: "any direction in the plane across p3"}),
        ((2.0, 2.0, 2.0), {0: "any direction", 1: "any direction", 2: "any direction"}),
    ],
)
def test_an_axis_that_is_not_determined_is_not_shown_as_one(
    values: tuple[float, float, float], lines: dict[int, str]
) -> None:
    principal = describe_subject(make_subject(np.diag(values)))["principal"]
    for number, entry in enumerate(principal):
        if number in lines:
            assert entry["lines"] == [lines[number]]
            assert not entry["locked"]
        else:
            assert "any" not in " ".join(entry["lines"])


def test_without_a_cell_axes_are_told_by_angles() -> None:
    crystal = build_crystal(None, "∞m")
    subject = make_subject(np.diag([2.0, 2.0, 5.0]), crystal)
    described = describe_subject(subject)
    assert described["principal"][0]["lines"] == ["90.0° from x1, 90.0° from x2, 0.0° from x3"]
    assert described["frame"].startswith("x3 along the infinite axis")
    assert "from x1" in describe(subject, {"axis": [0, 0, 1], "angle": 0})["where"]


@pytest.mark.parametrize(
    ("family", "group", "axis", "names"),
    [
        ("monoclinic b", "2/m", "b", ["b"]),
        ("monoclinic c", "m", "c", ["c"]),
        ("monoclinic b", "2", "b", []),
        ("orthorhombic", "mm2", None, ["a", "b"]),
        ("orthorhombic", "mmm", None, ["a", "b", "c"]),
        # Mirrors of 3m1 lie across a, b and a + b; those of 31m contain these and lie across [210], [120], [1−10].
        ("hexagonal", "3m1", None, ["a", "b", "[110]"]),
        ("hexagonal", "31m", None, ["[120]", "[1−10]", "[210]"]),
        ("cubic", "m-3m", None, []),
    ],
)
def test_mirrors_are_named_by_the_row_that_they_lie_across(
    family: str, group: str, axis: str | None, names: list[str]
) -> None:
    crystal = build_crystal(CELLS[family], group, unique_axis=axis if group in ("2", "m", "2/m") else None)
    found = describe_subject(make_subject(np.diag([3.0, 2.0, 1.0]), crystal))["mirrors"]
    # A mirror has no sense: [1−10] and [−110] are one.
    assert sorted(name.replace("−110", "1−10") for name in found) == sorted(names)


def test_a_mirror_without_a_cell_is_across_an_axis_of_the_frame() -> None:
    assert describe_subject(make_subject(np.eye(3), build_crystal(None, "∞/m")))["mirrors"] == ["x3"]


@pytest.mark.parametrize("name", PATTERNS)
def test_negative_values_are_announced_where_there_are_some(name: str) -> None:
    matrix = PATTERNS[name]
    described = describe_subject(make_subject(matrix))
    negative = bool(np.min(np.linalg.eigvalsh(matrix)) < 0)
    assert described["negative"] == negative
    for kind in ("quadric", "value"):
        assert ("negative" in described["surfaces"][kind]["words"]) == negative
    assert described["surfaces"]["quadric"]["lead"] == "Long is small."
    assert described["surfaces"]["value"]["lead"] == described["surfaces"]["flux"]["lead"] == "Long is large."
    assert described["quadric"] == name_quadric(np.linalg.eigvalsh(matrix))


def test_the_words_for_an_ellipsoid_say_which_axis_is_longest() -> None:
    words = describe_subject(BARE)["surfaces"]["quadric"]["words"]
    assert "longest along p3, where the value is smallest" in words
    # Of equal least values none is the longest.
    words = describe_subject(make_subject(np.diag([3.0, 2.0, 2.0])))["surfaces"]["quadric"]["words"]
    assert "p3" not in words
    assert "shortest where the value is largest" in words


def test_the_zero_tensor_has_nothing_to_draw() -> None:
    described = describe_subject(make_subject(np.zeros((3, 3))))
    assert "nothing to draw" in described["surfaces"]["quadric"]["words"]
    assert "nothing to draw" in described["surfaces"]["value"]["words"]
    assert not described["negative"]


def test_the_step_in_words_is_that_of_the_lines_drawn() -> None:
    for subject in (SUBJECT, make_subject(ELLIPSOID), make_subject(1e-4 * ELLIPSOID)):
        step = subject.scene("quadric").levels.step
        assert float(describe_subject(subject)["step"]) == pytest.approx(step)


@pytest.mark.parametrize(("other", "words"), [("rod", "long bar"), ("plate", "wide plate"), (None, None)])
def test_the_other_body_is_named(other: str | None, words: str | None) -> None:
    subject = make_subject(WORKED, WORKED_CRYSTAL, other=other)
    assert describe_subject(subject)["other"] == words
    rods = [row["rod"] for row in describe(subject, ON_NORMAL)["along"]]
    assert all((rod is None) == (other is None) for rod in rods)


def test_what_a_subject_is_stands_beside_it() -> None:
    described = describe_subject(SUBJECT)
    assert described["hash"] == SUBJECT.key
    assert described["unit"] == "W/(m·K)"
    assert described["frame"] == "x3 along c, x2 along b*, x1 = x2 × x3"
    assert described["shape"] == "biaxial"
    assert described["has_region"]
    assert not describe_subject(BARE)["has_region"]


# In a pose ------------------------------------------------------------------------------------------------------------


def test_the_worked_crystal_along_the_normal_of_its_plane() -> None:
    # Invented data; computed apart from this project: n(−201) reads 13.195526, a long bar 12.981096, and the flux
    # leaves a gradient along n by 7.966857°.
    answer = describe(BARE, ON_NORMAL)
    x, _, z = answer["along"]
    assert read_number(z["value"]) == pytest.approx(13.195526, abs=1e-4)
    assert read_number(z["rod"]) == pytest.approx(12.981096, abs=1e-4)
    assert z["flux"] == "8.0°"
    # x lies along b, a principal axis: the flux stays with the gradient.
    assert (read_number(x["value"]), x["flux"]) == (pytest.approx(24.6), "0.0°")
    assert answer["sentence"]["text"].startswith("Along z, on n(−201): 13.1955 W/(m·K).")
    assert "a long bar would read 12.9811." in answer["sentence"]["text"]
    assert answer["rest"] == "z: on n(−201)"
    assert answer["where"] == "z on n(−201), x as near [010] as it can be, y = z × x"


@settings(max_examples=25, deadline=None)
@given(seeds)
def test_numbers_follow_the_pose(seed: int) -> None:
    pose = random_rotation(seed)
    answer = describe(BARE, {"matrix": pose.tolist()})
    np.testing.assert_allclose(answer["pose"]["matrix"], pose, atol=1e-12)
    np.testing.assert_allclose(answer["posed"], pose @ WORKED @ pose.T, atol=1e-12)
    inverse = np.linalg.inv(WORKED)
    for axis, row in zip(pose, answer["along"], strict=True):
        assert read_number(row["value"]) == pytest.approx(axis @ WORKED @ axis, rel=1e-5)
        assert read_number(row["rod"]) == pytest.approx(1.0 / (axis @ inverse @ axis), rel=1e-5)
        flux = WORKED @ axis
        off = np.rad2deg(np.arccos(np.clip(flux @ axis / np.linalg.norm(flux), -1, 1)))
        assert float(row["flux"].rstrip("°")) == pytest.approx(off, abs=0.051)
    assert [row["axis"] for row in answer["along"]] == ["x", "y", "z"]


@settings(max_examples=15, deadline=None)
@given(seeds)
def test_sigma_along_an_axis_is_that_of_the_free_cells(seed: int) -> None:
    pose = random_rotation(seed)
    for axis, row in zip(pose, describe(SUBJECT, {"matrix": pose.tolist()})["along"], strict=True):
        # nᵀTn = n1² T11 + 2 n1 n3 T13 + n2² T22 + n3² T33.
        weights = np.array([axis[0] ** 2, 2 * axis[0] * axis[2], axis[1] ** 2, axis[2] ** 2])
        sigma = float(np.linalg.norm(weights * SIGMAS))
        assert row["value"]["text"] == render_number(float(axis @ WORKED @ axis), sigma)["text"]


@settings(max_examples=15, deadline=None)
@given(seeds, seeds, st.sampled_from(["specimen", "crystal"]))
def test_the_camera_looks_along_the_line_of_sight(seed: int, other: int, hold: Any) -> None:
    pose, view = random_rotation(seed), View(hold, random_rotation(other))
    answer = describe(BARE, {"matrix": pose.tolist()}, view)
    eye, up = np.array(answer["camera"]["eye"]), np.array(answer["camera"]["up"])
    # In the crystal frame: what is toward the viewer and what is up, by the view's own rows.
    rows = view.matrix @ pose if hold == "specimen" else view.matrix
    np.testing.assert_allclose(eye / np.linalg.norm(eye), rows[2], atol=1e-12)
    np.testing.assert_allclose(up / np.linalg.norm(up), rows[1], atol=1e-12)
    assert answer["view"] == {"hold": hold, "matrix": view.matrix.tolist()}


@settings(max_examples=15, deadline=None)
@given(seeds)
def test_the_ruler_is_a_linear_scale(seed: int) -> None:
    for subject, matrix in ((BARE, WORKED), (make_subject(ONE_SHEET), ONE_SHEET)):
        ruler = describe(subject, {"matrix": random_rotation(seed).tolist()})["ruler"]
        written = [(tick["at"], float(tick["text"].replace("−", "-"))) for tick in ruler["ticks"] if tick["text"]]
        places, values = np.array(written).T
        slope, start = np.polyfit(places, values, 1)
        np.testing.assert_allclose(slope * places + start, values, atol=1e-3 * slope)
        principal = np.linalg.eigvalsh(matrix)[::-1]
        found = [slope * entry["at"] + start for entry in ruler["principal"]]
        np.testing.assert_allclose(found, principal, atol=1e-3 * slope)
        assert [entry["name"] for entry in ruler["principal"]] == ["1", "2", "3"]
        assert [entry["name"] for entry in ruler["axes"]] == ["x", "y", "z"]
        pose = random_rotation(seed)
        along = [pose[axis] @ matrix @ pose[axis] for axis in range(3)]
        np.testing.assert_allclose([slope * entry["at"] + start for entry in ruler["axes"]], along, atol=1e-3 * slope)
        everything = [entry["at"] for part in ruler.values() for entry in part]
        assert min(everything) >= 0.0
        assert max(everything) <= 1.0


def test_a_scale_without_any_spread_still_stands() -> None:
    for matrix in (np.eye(3), np.zeros((3, 3)), -2.0 * np.eye(3)):
        ruler = describe(make_subject(matrix), {"axis": [0, 0, 1], "angle": 0})["ruler"]
        places = [entry["at"] for entry in ruler["principal"] + ruler["axes"]]
        assert all(place == places[0] and 0.0 <= place <= 1.0 for place in places)


@pytest.mark.parametrize(
    ("kept", "where"),
    [
        (
            {"from": "(-2 0 1)", "tilt": 1.3, "toward": "[0 1 0]"},
            "z 1.3° off n(−201) toward [010], x as near [010] as it can be, y = z × x",
        ),
        (
            {"from": "(-2 0 1)", "tilt": 4, "toward": "[0 1 0]", "x": "(0 0 1)"},
            "z 4.0° off n(−201) toward [010], x as near n(001) as it can be, y = z × x",
        ),
        (
            {"from": "[0 0 1]", "tilt": 0, "toward": "[0 1 0]"},
            "z on [001], x as near [010] as it can be, y = z × x",
        ),
        ({"exact": ["z", "[0 0 1]"], "toward": ["y", "[0 1 0]"]}, "z on [001]; x on n(100); y = z × x"),
        # x on a, which is square to b, so z is along a × b, which is c*.
        ({"exact": ["y", "[0 1 0]"], "toward": ["x", "[1 0 0]"]}, "z on n(001); x on [100]; y = z × x"),
        ({"axis": [0, 0, 1], "angle": 0}, "z on [001]; x on n(100); y = z × x"),
        (
            {"from": "[0 0 1]", "tilt": 1, "toward": [0, 1, 0]},
            "z 1.0° off [001]; x 1.0° off n(010); y = z × x",
        ),
    ],
)
def test_where_the_specimen_stands_in_words(kept: dict[str, Any], where: str) -> None:
    # In 2/m with x3 along c and x2 along b: x1 is along a*, the normal of (1 0 0), and b is both row and normal.
    assert describe(BARE, kept)["where"] == where


def test_a_direction_that_the_user_named_is_kept_in_the_words() -> None:
    # (8 0 -4) is the plane (2 0 -1); the words keep what was put there.
    assert "n(80−4)" in describe(BARE, {"exact": ["z", "(8 0 -4)"], "toward": ["x", "[0 1 0]"]})["where"]


def test_what_is_caught_is_said() -> None:
    assert describe(BARE, ON_NORMAL)["caught"] is None
    assert describe(BARE, ON_NORMAL, caught=Caught("z", "(-2 0 1)"))["caught"] == "z: on n(−201)"
    assert describe(BARE, ON_NORMAL, caught=Caught("y", "[1 1 0]"))["caught"] == "y: on [110]"
    assert describe(BARE, ON_NORMAL, caught=Caught("x", "−p2"))["caught"] == "x: on −p2"


def test_the_kept_pose_goes_back_as_it_came() -> None:
    assert describe(BARE, ON_NORMAL)["pose"]["kept"] == ON_NORMAL


@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_numbers_do_not_depend_on_the_surface_or_the_view(kind: Any) -> None:
    pose = read_pose(ON_NORMAL, WORKED_CRYSTAL)
    one = describe_pose(BARE, "quadric", pose, ON_NORMAL, build_view("specimen", None))
    other = describe_pose(BARE, kind, pose, ON_NORMAL, View("crystal", random_rotation(4)))
    for key in ("pose", "posed", "cells", "along", "ruler", "sentence", "where", "rest"):
        assert one[key] == other[key]


def test_values_stand_at_the_tips() -> None:
    answer = describe(SUBJECT, ON_NORMAL)
    tips = {entry["class"]: entry["runs"] for entry in answer["overlay"]["texts"]}
    for number, letter in enumerate("xyz"):
        value = answer["along"][number]["value"]["text"]
        assert tips[f"tip tip-{letter}"] == [[letter, "symbol"], [f" {value}", "value"]]
    assert tips["tip-place"] == [["on n(−201)", "plain"]]


def test_a_tensor_without_an_inverse_has_no_bar_and_no_angle() -> None:
    subject = make_subject({"11": 4.0, "22": 1.0, "33": 0.0}, build_crystal(CELLS["orthorhombic"], "mmm"), other="rod")
    along = describe(subject, {"axis": [0, 0, 1], "angle": 0})["along"]
    assert [row["rod"] for row in along] == [None, None, None]
    # Along x3 there is no effect, so there is no angle to it.
    assert [row["flux"] for row in along] == ["0.0°", "0.0°", "–"]
