"""Few bars for one cell, and cubes."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from scipy.optimize import nnls

from app.crystal.crystal import Crystal, build_crystal
from app.errors import InputError
from app.readings.candidates import list_candidates, resolve_candidates
from app.readings.cube import DIAGONALS, find_cubes
from app.readings.isolation import isolate_cell
from app.tensor.kind import LABELS, Kind
from app.tensor.pose import IDENTITY
from tests.readings.builders import MONOCLINIC, TETRAGONAL, TRICLINIC, obey, random_units, vector

SYMMETRIC = Kind()
ORTHO_AXES = build_crystal([4, 5, 6, 90, 90, 90], "1")


@pytest.mark.parametrize("crystal", [TRICLINIC, MONOCLINIC, TETRAGONAL], ids=lambda crystal: crystal.group.symbol)
@pytest.mark.parametrize("cell", ["11", "13", "22", "33", "23"])
@pytest.mark.parametrize("max_index", [1, 3])
def test_the_arithmetic_gives_the_cell_of_every_allowed_tensor(crystal: Crystal, cell: str, max_index: int) -> None:
    rng = np.random.default_rng(8)
    candidates = list_candidates(crystal, max_index)
    raw = rng.normal(size=(3, 3))
    matrix = obey(crystal, raw + raw.T)
    if abs(matrix.ravel()[LABELS.index(cell)]) < 1e-12:
        with pytest.raises(InputError, match="at zero") as refused:
            isolate_cell(crystal, SYMMETRIC, cell, candidates)
        assert refused.value.field == "cell"
        return
    found = isolate_cell(crystal, SYMMETRIC, cell, candidates)
    readings = [n @ matrix @ n for n in (crystal.resolve(direction) for direction in found.directions)]
    assert found.weights @ readings == pytest.approx(matrix.ravel()[LABELS.index(cell)], abs=1e-8)
    assert found.variance == pytest.approx(np.sum(np.square(found.weights)))
    assert found.sentence.startswith(f"{cell} = ")
    assert found.sentence.count("y") == len(found.weights)


def test_the_shear_of_two_diagonals() -> None:
    # By hand: along (1 0 1)/√2 and (1 0 −1)/√2 the readings differ by 2 · 13.
    candidates = resolve_candidates(ORTHO_AXES, [vector(n) for n in [*np.eye(3), [1, 0, 1], [1, 0, -1]]], IDENTITY)
    found = isolate_cell(ORTHO_AXES, SYMMETRIC, "13", candidates)
    assert found.weights == pytest.approx([0.5, -0.5])
    assert found.fewest
    assert found.sentence == "13 = 1/2 y (1, 0, 1) − 1/2 y (1, 0, -1)"


def test_no_smaller_set_does() -> None:
    # Reference: non-negative least squares (scipy) with both signs of every column, over all smaller sets.
    rng = np.random.default_rng(3)
    units = np.vstack([random_units(rng, 6), [[0.6, 0, 0.8]], [[0.8, 0, -0.6]], [[0, 0, 1]]])
    listed = resolve_candidates(TRICLINIC, [vector(n) for n in units], IDENTITY)
    found = isolate_cell(TRICLINIC, SYMMETRIC, "13", listed)
    upper = np.triu_indices(3)
    weight = np.where(upper[0] == upper[1], 1.0, np.sqrt(2.0))
    columns = np.array([np.outer(n, n)[upper] * weight for n in units]).T
    wanted = np.zeros(6)
    wanted[2] = np.sqrt(0.5)

    def misses(chosen: tuple[int, ...]) -> float:
        part = columns[:, list(chosen)]
        return float(nnls(np.hstack([part, -part]), wanted)[1])

    fewest = next(size for size in range(1, 7) if any(misses(chosen) < 1e-9 for chosen in combinations(range(9), size)))
    assert len(found.weights) == fewest == 3
    assert found.fewest


def test_of_two_sets_the_one_of_less_variance() -> None:
    # 13 from two bars in the x1-x3 plane at ±φ from x1: 13 = (y₊ − y₋)/(2 sin 2φ), best at 45°.
    angles = np.deg2rad([20, 40, 75])
    units = [[np.cos(a), 0, sign * np.sin(a)] for a in angles for sign in (1, -1)]
    found = isolate_cell(
        ORTHO_AXES, SYMMETRIC, "13", resolve_candidates(ORTHO_AXES, [vector(n) for n in units], IDENTITY)
    )
    assert found.variance == pytest.approx(2 * (1 / (2 * np.sin(2 * angles[1]))) ** 2)


def test_what_cannot_be_isolated() -> None:
    blind = resolve_candidates(TRICLINIC, [vector([1, 0, 0]), vector([0, 1, 0])], IDENTITY)
    with pytest.raises(InputError, match="do not isolate") as refused:
        isolate_cell(TRICLINIC, SYMMETRIC, "33", blind)
    assert refused.value.field == "candidates"
    with pytest.raises(InputError):
        isolate_cell(TRICLINIC, Kind("polar", "general"), "12", list_candidates(TRICLINIC, 1))
    with pytest.raises(InputError, match="no cell"):
        isolate_cell(TRICLINIC, SYMMETRIC, "41", list_candidates(TRICLINIC, 1))


def test_a_cube_of_a_triclinic_crystal_is_as_good_as_any_other() -> None:
    # By hand: in the cube's own axes the information of the thirteen directions parts into volume, differences of the
    # edges and shears, with the sums of n1⁴ and n1² n2² below; it does not hang on how the cube lies.
    lines = DIAGONALS / np.linalg.norm(DIAGONALS, axis=1, keepdims=True)
    fourth = np.einsum("ni,nj->ij", lines**2, lines**2)
    same, mixed = fourth[0, 0], fourth[0, 1]
    parts = [same + 2 * mixed, same - mixed, 2 * mixed]  # volume, difference of edges, shear
    expected = np.sqrt(max(parts) / min(parts))
    cubes = find_cubes(TRICLINIC, SYMMETRIC, 2, most=4)
    assert len(cubes) == 4
    for cube in cubes:
        assert (cube.face_rank, cube.rank) == (3, 6)
        assert cube.condition == pytest.approx(expected)
        assert cube.axes @ cube.axes.T == pytest.approx(np.eye(3), abs=1e-12)
        assert np.linalg.det(cube.axes) == pytest.approx(1.0)
        for face, axis, off in zip(cube.faces, cube.axes, cube.off, strict=True):
            if face is not None:
                angle = np.rad2deg(np.arccos(np.clip(abs(TRICLINIC.resolve(face) @ axis), 0, 1)))
                assert angle == pytest.approx(off, abs=1e-4)
                assert angle <= 1.0


def test_the_best_cube_of_a_tetragonal_crystal() -> None:
    # A cube on (100), (010), (001) sees both cells between its faces alone; on it the 13 readings are, by hand,
    # 1 − n3² and n3² of 11 and 33, in the orthonormal basis (1 − n3²)/√2 and n3².
    best = find_cubes(TETRAGONAL, SYMMETRIC, 1, most=200)
    assert all((cube.face_rank, cube.rank) == (2, 2) for cube in best[:5])
    straight = [cube for cube in best if np.max(np.abs(cube.axes), axis=1) == pytest.approx(1.0)]
    assert len(straight) == 1
    square = (DIAGONALS[:, 2] / np.linalg.norm(DIAGONALS, axis=1)) ** 2
    design = np.column_stack([(1 - square) / np.sqrt(2), square])
    assert straight[0].condition == pytest.approx(np.linalg.cond(design))


@pytest.mark.parametrize(("more", "field"), [({"max_index": 0}, "max_index"), ({"within": 20.0}, "within")])
def test_what_no_cube_can_be_asked_by(more: dict[str, float], field: str) -> None:
    with pytest.raises(InputError) as refused:
        find_cubes(TRICLINIC, SYMMETRIC, **more)  # type: ignore[arg-type]
    assert refused.value.field == field
