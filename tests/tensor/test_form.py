"""Which cells a group leaves free, in every setting and frame, against exact and numerical null spaces."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.spatial.transform import Rotation

from app.crystal.crystal import Crystal, build_crystal
from app.tensor.form import (
    average_group,
    build_form,
    build_form_of_rotations,
    express_cells,
    find_fixed_axes,
    snap_coefficients,
)
from app.tensor.kind import Kind
from tests.crystal.reference import (
    CELLS,
    SETTING_NAMES,
    SETTINGS,
    Setting,
    build_textbook_basis,
    close_group,
    find_exact_form,
    find_first_independent,
    find_numeric_space,
)

KINDS = [
    (parity, intrinsic) for parity in ("polar", "axial") for intrinsic in ("symmetric", "general", "antisymmetric")
]
LIMITING = ("∞", "∞m", "∞2", "∞/m", "∞/mm", "∞∞", "∞∞m")
RULES = [
    f"x{i + 1}={direct} x{j + 1}={reciprocal}*"
    for i in range(3)
    for j in range(3)
    if i != j
    for direct in "abc"
    for reciprocal in "abc"
    if direct != reciprocal
]


def make_kind(kind: tuple[str, str]) -> Kind:
    return Kind(*kind)  # type: ignore[arg-type]


def build(setting: Setting, frame: str | None = None) -> Crystal:
    return build_crystal(setting.cell, setting.symbol, unique_axis=setting.unique_axis, frame=frame)


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_forms_against_exact_null_spaces(setting: Setting) -> None:
    # sympy over the fractions, from generators written by hand; see tests/crystal/reference.py.
    frame = "x3=[1 1 1] x1=(1 -1 0)" if setting.family == "rhombohedral" else "x3=c x2=b*"
    crystal = build(setting, frame)
    for kind in KINDS:
        form = build_form(crystal, make_kind(kind))
        free, basis = find_exact_form(setting.name, *kind)
        assert form.free == free, kind
        assert form.basis == pytest.approx(basis, abs=1e-12), kind


def place_axes(cell: tuple[float, ...], rule: str) -> np.ndarray:
    """M of a letter rule: the textbook basis turned so that the row and the normal lie where the rule says."""
    textbook = build_textbook_basis(cell)
    row = textbook[:, "abc".index(rule[3])]
    normal = np.linalg.inv(textbook).T[:, "abc".index(rule[8])]
    axes = np.zeros((3, 3))
    first, second = int(rule[1]) - 1, int(rule[6]) - 1
    third = 3 - first - second
    axes[first], axes[second] = row / np.linalg.norm(row), normal / np.linalg.norm(normal)
    axes[third] = np.cross(axes[(third + 1) % 3], axes[(third + 2) % 3])
    return axes @ textbook


OBLIQUE = [
    "1",
    "m unique a",
    "2/m unique b",
    "2 unique c",
    "mm2",
    "-4",
    "32",
    "3m rhombohedral",
    "-3 rhombohedral",
    "622",
    "23",
]


@pytest.mark.parametrize("rule", RULES)
def test_forms_in_every_frame_against_numerical_null_spaces(rule: str) -> None:
    for name in OBLIQUE:
        setting = SETTINGS[SETTING_NAMES.index(name)]
        basis = place_axes(setting.cell, rule)
        inverse = np.linalg.inv(basis)
        generators = [basis @ matrix @ inverse for matrix in setting.matrices]
        crystal = build(setting, rule)
        for kind in KINDS:
            form = build_form(crystal, make_kind(kind))
            space = find_numeric_space(generators, *kind)
            assert form.count == round(np.trace(space)), (name, kind)
            assert form.free == find_first_independent(space), (name, kind)
            flat = form.orthonormal.reshape(-1, 9)
            assert flat.T @ flat == pytest.approx(space, abs=1e-9), (name, kind)


@pytest.mark.parametrize("order", [5, 11])
@pytest.mark.parametrize("symbol", LIMITING)
def test_limiting_groups_by_another_stand_in(symbol: str, order: int) -> None:
    # Hermann's theorem: for a tensor of rank two any axis of order above two does what the infinite one does; here a
    # five- and an eleven-fold axis, and for all turns two of them askew (the interface's code has a seven-fold one).
    turn = Rotation.from_euler("Z", 360.0 / order, degrees=True).as_matrix()
    askew = Rotation.from_rotvec(np.deg2rad(360.0 / order) * np.array([0.6, 0.48, 0.64])).as_matrix()
    along, across, half = np.diag([1.0, 1, -1]), np.diag([-1.0, 1, 1]), np.diag([1.0, -1, -1])
    generators = {
        "∞": [turn],
        "∞m": [turn, across],
        "∞2": [turn, half],
        "∞/m": [turn, along],
        "∞/mm": [turn, along, across],
        "∞∞": [turn, askew],
        "∞∞m": [turn, askew, -np.eye(3)],
    }[symbol]
    crystal = build_crystal(None, symbol)
    for kind in KINDS:
        form = build_form(crystal, make_kind(kind))
        space = find_numeric_space(generators, *kind)
        flat = form.orthonormal.reshape(-1, 9)
        assert form.free == find_first_independent(space), kind
        assert flat.T @ flat == pytest.approx(space, abs=1e-10), kind


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_the_average_is_a_projector_that_every_operation_leaves_alone(setting: Setting) -> None:
    crystal = build(setting)
    assert crystal.M is not None
    members = [crystal.M @ matrix @ np.linalg.inv(crystal.M) for matrix in close_group(setting.matrices)]
    for kind in KINDS:
        projector = average_group(crystal.rotations, make_kind(kind))
        assert projector @ projector == pytest.approx(projector, abs=1e-12)
        assert pytest.approx(projector, abs=1e-12) == projector.T
        for matrix in members:
            sign = np.linalg.det(matrix) if kind[0] == "axial" else 1.0
            assert sign * np.kron(matrix, matrix) @ projector == pytest.approx(projector, abs=1e-12)


@settings(max_examples=60, deadline=None)
@given(
    st.sampled_from(SETTINGS),
    st.sampled_from(KINDS),
    st.lists(st.floats(-1e3, 1e3), min_size=9, max_size=9),
)
def test_making_a_tensor_obey(setting: Setting, kind: tuple[str, str], cells: list[float]) -> None:
    crystal = build(setting)
    form = build_form(crystal, make_kind(kind))
    matrix = np.array(cells).reshape(3, 3)
    obeying = form.project(matrix)
    # The nearest allowed tensor by definition: the average over the group and the inner symmetry, here in loops.
    total = np.zeros((3, 3))
    for rotation in crystal.rotations:
        total += rotation @ matrix @ rotation.T * (np.linalg.det(rotation) if kind[0] == "axial" else 1.0)
    total /= len(crystal.rotations)
    if kind[1] != "general":
        total = (total + (1 if kind[1] == "symmetric" else -1) * total.T) / 2
    assert obeying == pytest.approx(total, abs=1e-9)
    assert form.project(obeying) == pytest.approx(obeying, abs=1e-9)
    # The free cells hold all there is, and those that the basis gives back.
    assert form.expand(form.pick(obeying)) == pytest.approx(obeying, abs=1e-8)
    values = np.arange(1.0, form.count + 1)
    assert form.pick(form.expand(values)) == pytest.approx(values, abs=1e-12)
    coordinates = np.linspace(-1, 1, form.count)
    allowed = np.tensordot(coordinates, form.orthonormal, axes=1)
    assert form.free_from_orthonormal @ coordinates == pytest.approx(form.pick(allowed), abs=1e-12)


def random_poses(count: int, seed: int) -> np.ndarray:
    return Rotation.random(count, random_state=np.random.RandomState(seed)).as_matrix()


SPECIAL_POSES = [
    np.eye(3),
    np.array([[0.0, 1, 0], [0, 0, 1], [1, 0, 0]]),
    np.diag([1.0, -1, -1]),
    Rotation.from_euler("Z", 45.0, degrees=True).as_matrix(),
    Rotation.from_euler("X", 30.0, degrees=True).as_matrix(),
]


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_posed_cells_are_those_of_the_turned_tensor(setting: Setting) -> None:
    crystal = build(setting)
    generator = np.random.default_rng(3)
    for kind in KINDS:
        form = build_form(crystal, make_kind(kind))
        free = generator.normal(size=form.count)
        tensor = np.einsum("k,kij->ij", free, form.basis)
        for pose in [*SPECIAL_POSES, *random_poses(1, 4)]:
            cells = express_cells(form, pose)
            posed = (pose @ tensor @ pose.T).ravel()
            assert cells.terms @ free == pytest.approx(posed, abs=1e-11)
            # States by numpy's rank of ever more rows of the turned space.
            both = np.kron(pose, pose)
            independent = find_first_independent(both @ form.basis.reshape(-1, 9).T) if form.count else ()
            for position in range(9):
                state = cells.states[position]
                if position in independent:
                    assert state == "free"
                    continue
                vanishes = np.max(np.abs(cells.terms[position]), initial=0.0) < 1e-9
                assert state == ("zero" if vanishes else "tied")
                if state == "tied":
                    relation = cells.relations[position]
                    assert set(relation) <= {cell for cell in independent if cell < position}
                    value = sum(coefficient * posed[cell] for cell, coefficient in relation.items())
                    assert value == pytest.approx(posed[position], abs=1e-9)


@pytest.mark.parametrize("rule", RULES)
@pytest.mark.parametrize("family", ["monoclinic b", "rhombohedral"])
def test_tied_cells_of_oblique_frames_add_up(family: str, rule: str) -> None:
    crystal = build_crystal(CELLS[family], {"monoclinic b": "2/m", "rhombohedral": "-3m"}[family], frame=rule)
    form = build_form(crystal, Kind("polar", "general"))
    free = np.random.default_rng(8).normal(size=form.count)
    cells = express_cells(form)
    matrix = form.expand(free)
    assert cells.terms @ free == pytest.approx(matrix.ravel(), abs=1e-12)
    for rotation in crystal.rotations:
        assert rotation @ matrix @ rotation.T == pytest.approx(matrix, abs=1e-11)


X1, X2, X3 = np.eye(3)
DIAGONALS = [(X1 + X2) / np.sqrt(2), (X1 - X2) / np.sqrt(2), X3]


@pytest.mark.parametrize(
    ("name", "kind", "axes"),
    [
        # Nye, ch. I, section 4 (from memory): which axes of the quadric each system fixes.
        ("1", ("polar", "symmetric"), []),
        ("-1", ("polar", "general"), []),
        ("2/m unique a", ("polar", "symmetric"), [X1]),
        ("2/m unique b", ("polar", "symmetric"), [X2]),
        ("m unique b", ("polar", "general"), [X2]),
        ("2 unique c", ("polar", "symmetric"), [X3]),
        ("mmm", ("polar", "symmetric"), [X1, X2, X3]),
        ("m2m", ("polar", "general"), [X1, X2, X3]),
        ("4", ("polar", "general"), [X3]),
        ("-42m", ("polar", "symmetric"), [X3]),
        ("-3m", ("polar", "symmetric"), [X3]),
        ("6", ("polar", "general"), [X3]),
        ("m-3m", ("polar", "symmetric"), []),
        ("23", ("polar", "general"), []),
        # By hand from the forms of the axial tensors: 11 = −22 has the edges, a lone 12 the diagonals between them;
        # both together turn within the plane; class m's 12 and 23 hold no axis.
        ("-42m", ("axial", "symmetric"), [X1, X2, X3]),
        ("-4m2", ("axial", "symmetric"), DIAGONALS),
        ("mm2", ("axial", "symmetric"), DIAGONALS),
        ("-4", ("axial", "symmetric"), [X3]),
        ("m unique b", ("axial", "symmetric"), []),
        ("222", ("axial", "symmetric"), [X1, X2, X3]),
        ("mmm", ("axial", "symmetric"), []),
        # An antisymmetric tensor has no symmetric part.
        ("mmm", ("polar", "antisymmetric"), []),
        ("4", ("polar", "antisymmetric"), []),
    ],
)
def test_axes_that_symmetry_fixes(name: str, kind: tuple[str, str], axes: list[np.ndarray]) -> None:
    crystal = build(SETTINGS[SETTING_NAMES.index(name)])
    found = find_fixed_axes(build_form(crystal, make_kind(kind)))
    assert found.shape == (len(axes), 3)
    for axis in axes:
        assert any(abs(row @ axis) == pytest.approx(1.0, abs=1e-12) for row in found)


@pytest.mark.parametrize("setting", SETTINGS, ids=SETTING_NAMES)
def test_fixed_axes_are_principal_in_every_allowed_tensor(setting: Setting) -> None:
    crystal = build(setting, "x1=a x3=c*")
    generator = np.random.default_rng(9)
    for kind in KINDS:
        form = build_form(crystal, make_kind(kind))
        axes = find_fixed_axes(form)
        drawn = [form.expand(generator.normal(size=form.count)) for _ in range(6)]
        for matrix in drawn:
            symmetric = (matrix + matrix.T) / 2
            for axis in axes:
                assert np.linalg.norm(np.cross(symmetric @ axis, axis)) < 1e-11
        # And no other: an axis common to two unrelated tensors without equal values is among them.
        if form.count >= 2:
            values, vectors = np.linalg.eigh((drawn[0] + drawn[0].T) / 2)
            for index in range(3):
                axis = vectors[:, index]
                common = all(np.linalg.norm(np.cross((matrix + matrix.T) / 2 @ axis, axis)) < 1e-10 for matrix in drawn)
                alone = np.sum(np.abs(values - values[index]) < 1e-9) == 1
                listed = any(abs(row @ axis) > 1 - 1e-9 for row in axes)
                assert listed == bool(common and alone)


def test_halves_that_come_out_with_rounding_are_exact() -> None:
    snapped = snap_coefficients(np.array([0.5 + 1e-15, -1.0 - 3e-14, 1e-17, -0.0, 0.8660254037844386]))
    assert snapped.tolist() == [0.5, -1.0, 0.0, 0.0, 0.8660254037844386]
    assert not np.signbit(snapped[3])


def test_forms_are_one_for_equal_groups() -> None:
    # The same group from different cells has the same form: tetragonal cells of any shape.
    first = build_form(build_crystal([5, 5, 7, 90, 90, 90], "4"), Kind("polar", "general"))
    second = build_form(build_crystal([900.0, 900.0, 0.5, 90, 90, 90], "4"), Kind("polar", "general"))
    assert first.free == second.free == (0, 1, 8)
    assert np.array_equal(first.basis, second.basis)
    assert build_form_of_rotations(np.eye(3)[None], Kind()).count == 6
