"""Meshes against the equations that define the surfaces, integrals known in closed form or by quadrature, topology."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import dblquad, quad
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components
from scipy.spatial.transform import Rotation

from app.errors import InputError
from app.tensor.surface import CUT_FACTOR, Surface, build_surface

# Principal values with, for the sheets +1 and −1, the pieces that the geometry of quadrics gives: Nye, Physical
# Properties of Crystals, ch. I, section 4, from memory, and for vanishing values the cylinders and planes that are
# their limits. "closed" has Euler characteristic 2, "disc" 1, "belt" 0.
PATTERNS = {
    "ellipsoid": ((1.3, 2.0, 5.0), ["closed"], []),
    "spheroid": ((2.0, 2.0, 0.4), ["closed"], []),
    "sphere": ((3.0, 3.0, 3.0), ["closed"], []),
    "one-sheet hyperboloid": ((3.0, 1.1, -0.7), ["belt"], ["disc", "disc"]),
    "two-sheet hyperboloid": ((0.8, -1.0, -6.0), ["disc", "disc"], ["belt"]),
    "imaginary ellipsoid": ((-1.0, -2.0, -5.0), [], ["closed"]),
    "elliptic cylinder": ((2.0, 0.5, 0.0), ["belt"], []),
    "hyperbolic cylinder": ((2.0, -0.5, 0.0), ["disc", "disc"], ["disc", "disc"]),
    "imaginary cylinder": ((-2.0, -0.5, 0.0), [], ["belt"]),
    "parallel planes": ((1.7, 0.0, 0.0), ["disc", "disc"], []),
    "imaginary planes": ((-1.7, 0.0, 0.0), [], ["disc", "disc"]),
}
EULER = {"closed": 2, "disc": 1, "belt": 0}


def turn(values: tuple[float, float, float], seed: int) -> np.ndarray:
    axes = Rotation.random(rng=seed).as_matrix()
    return axes @ np.diag(values) @ axes.T


def evaluate(matrix: np.ndarray, vectors: np.ndarray) -> np.ndarray:
    return np.einsum("ni,ij,nj->n", vectors, matrix, vectors)


def describe_pieces(triangles: np.ndarray, count: int) -> list[tuple[int, int]]:
    """Euler characteristic and number of edges with one triangle, of each connected piece of an oriented manifold."""
    directed = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]])
    assert len(np.unique(directed, axis=0)) == len(directed), "two triangles run along an edge in the same sense"
    assert np.all(directed[:, 0] != directed[:, 1])
    assert np.array_equal(np.unique(triangles), np.arange(count)), "a vertex without triangle"
    edges, shared = np.unique(np.sort(directed, axis=1), axis=0, return_counts=True)
    assert np.max(shared) <= 2
    graph = coo_array((np.ones(len(edges)), (edges[:, 0], edges[:, 1])), shape=(count, count))
    pieces, labels = connected_components(graph, directed=False)
    found = []
    for piece in range(pieces):
        own = labels[edges[:, 0]] == piece
        faces = int(np.sum(labels[triangles[:, 0]] == piece))
        found.append((int(np.sum(labels == piece)) - int(np.sum(own)) + faces, int(np.sum(shared[own] == 1))))
    return found


def rim_vertices(triangles: np.ndarray) -> np.ndarray:
    directed = np.concatenate([triangles[:, [0, 1]], triangles[:, [1, 2]], triangles[:, [2, 0]]])
    edges, shared = np.unique(np.sort(directed, axis=1), axis=0, return_counts=True)
    return np.unique(edges[shared == 1])


def sum_volume(surface: Surface) -> float:
    return float(np.sum(np.linalg.det(surface.vertices[surface.triangles]))) / 6.0


def sum_area(surface: Surface, sheet: int) -> float:
    corners = surface.vertices[surface.triangles[surface.sheets[surface.triangles[:, 0]] == sheet]]
    crosses = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    return float(np.sum(np.linalg.norm(crosses, axis=1))) / 2.0


@pytest.mark.parametrize("name", PATTERNS)
@pytest.mark.parametrize("seed", range(4))
def test_quadric_vertices_satisfy_the_equation(name, seed):
    # Reference: the definition x A x = ±1, evaluated with the matrix as given.
    matrix = turn(PATTERNS[name][0], seed)
    surface = build_surface(matrix, "quadric", 24)
    assert np.allclose(evaluate(matrix, surface.vertices), surface.sheets, rtol=1e-9, atol=0.0)
    directions = surface.vertices / np.linalg.norm(surface.vertices, axis=1)[:, None]
    assert np.allclose(surface.values, evaluate(matrix, directions), rtol=1e-9, atol=0.0)


@pytest.mark.parametrize("name", PATTERNS)
@pytest.mark.parametrize("detail", [8, 9, 30])
def test_quadric_pieces_edges_and_orientation(name, detail):
    # Reference: what each quadric is, see PATTERNS; outside is where sheet · xᵀA x grows, along its gradient.
    values, positive, negative = PATTERNS[name]
    matrix = turn(values, 5)
    surface = build_surface(matrix, "quadric", detail)
    for sheet, expected in ((1, positive), (-1, negative)):
        own = surface.triangles[surface.sheets[surface.triangles[:, 0]] == sheet]
        assert np.all(surface.sheets[own] == sheet)
        numbers, local = np.unique(own, return_inverse=True)
        assert len(numbers) == np.sum(surface.sheets == sheet)
        found = describe_pieces(local.reshape(-1, 3), len(numbers)) if len(own) else []
        assert [euler for euler, _ in found] == [EULER[piece] for piece in expected]
        assert all(
            (open_edges == 0) == (piece == "closed") for (_, open_edges), piece in zip(found, expected, strict=True)
        )
        corners = surface.vertices[own]
        normals = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        assert np.all(np.sum(normals * (sheet * np.mean(corners, axis=1) @ matrix), axis=1) > 0.0)
    spacing = np.linalg.norm(
        surface.vertices[surface.triangles] - surface.vertices[np.roll(surface.triangles, 1, 1)], axis=2
    )
    assert np.min(spacing) > 1e-3 * np.max(spacing), "doubled vertices or slivers"


@pytest.mark.parametrize("name", PATTERNS)
def test_open_sheets_end_exactly_at_the_cut(name):
    # Reference: the rule as documented, 2.5 times the largest finite semi-axis 1/√|value|.
    values, positive, negative = PATTERNS[name]
    surface = build_surface(turn(values, 2), "quadric", 20)
    radii = np.linalg.norm(surface.vertices, axis=1)
    if "closed" in positive + negative:
        assert surface.cut_at is None
        return
    finite = [abs(value) for value in values if value]
    assert surface.cut_at == pytest.approx(CUT_FACTOR / np.sqrt(min(finite)), rel=1e-14)
    rim = rim_vertices(surface.triangles)
    assert np.allclose(radii[rim], surface.cut_at, rtol=1e-13, atol=0.0)
    assert np.allclose(surface.values[rim], surface.sheets[rim] / surface.cut_at**2, rtol=1e-14, atol=0.0)
    assert np.max(np.delete(radii, rim)) < surface.cut_at * (1 - 1e-6)


def test_the_zero_tensor_and_a_purely_antisymmetric_one_have_no_quadric():
    # Reference: xᵀA x vanishes identically for both.
    turned = Rotation.random(rng=8).as_matrix()
    antisymmetric = turned @ np.array([[0.0, -3.0, 1.0], [3.0, 0.0, 2.0], [-1.0, -2.0, 0.0]]) @ turned.T
    for matrix in (np.zeros((3, 3)), antisymmetric):
        for kind in ("quadric", "value"):
            surface = build_surface(matrix, kind)
            assert surface.vertices.shape == (0, 3) and surface.triangles.shape == (0, 3)
            assert len(surface.values) == len(surface.sheets) == 0 and surface.cut_at is None
    assert build_surface(np.zeros((3, 3)), "flux").vertices.shape == (0, 3)


def test_every_real_sheet_shows_whatever_the_proportions():
    # Reference: a belt's waist and a cap's vertex lie at the semi-axes, so all of them must lie within the cut.
    for values in ((1.0, 1e-4, -1e4), (1e4, -1.0, -1e-4), (1e-6, -1.0, 0.0), (5.0, 4.0, -1e-5)):
        surface = build_surface(turn(values, 1), "quadric", 16)
        assert set(surface.sheets) == {1, -1}
        radii = np.linalg.norm(surface.vertices, axis=1)
        for sheet in (1, -1):
            shown = radii[surface.sheets == sheet]
            nearest = min(1.0 / np.sqrt(abs(value)) for value in values if value * sheet > 0)
            assert np.min(shown) == pytest.approx(nearest, rel=1e-6)


def test_ellipsoid_volume_converges_to_the_closed_form():
    # Reference: 4/3 π / √(det A), the volume of xᵀA x = 1; an inscribed mesh falls short by O(1/detail²).
    matrix = turn((0.7, 2.0, 11.0), 3)
    exact = 4.0 / 3.0 * np.pi / np.sqrt(np.linalg.det(matrix))
    errors = [1.0 - sum_volume(build_surface(matrix, "quadric", detail)) / exact for detail in (20, 40, 80)]
    assert 0 < errors[2] < 2e-3
    assert errors[0] / errors[1] == pytest.approx(4.0, rel=0.05)
    assert errors[1] / errors[2] == pytest.approx(4.0, rel=0.05)


def test_hyperboloid_areas_against_quadrature():
    # Reference: scipy's quadrature of the surfaces of revolution ρ² = (1 + h z²)/l and l ρ² = h z² − 1, l = 0.9,
    # h = 1.6, each to the radius of the cut.
    l_across, h_along = 0.9, 1.6
    surface = build_surface(turn((l_across, l_across, -h_along), 7), "quadric", 160)
    square = surface.cut_at**2

    def ring(z: float, sign: float) -> float:
        radius_square = (h_along * z * z + sign) / l_across
        return 2.0 * np.pi * np.sqrt(radius_square + (h_along * z / l_across) ** 2)

    belt_end = np.sqrt((square - 1 / l_across) / (1 + h_along / l_across))
    cap_end = np.sqrt((square + 1 / l_across) / (1 + h_along / l_across))
    belt = quad(ring, -belt_end, belt_end, args=(1.0,))[0]
    caps = 2.0 * quad(ring, 1 / np.sqrt(h_along), cap_end, args=(-1.0,))[0]
    assert sum_area(surface, 1) == pytest.approx(belt, rel=5e-4)
    assert sum_area(surface, -1) == pytest.approx(caps, rel=5e-4)


@pytest.mark.parametrize("name", PATTERNS)
def test_value_surface_radius_value_and_sign(name):
    # Reference: the definition, radius |nᵀAn| along n with that value, evaluated with the matrix as given.
    values, positive, negative = PATTERNS[name]
    matrix = turn(values, 9)
    surface = build_surface(matrix, "value", 30)
    assert surface.cut_at is None
    radii = np.linalg.norm(surface.vertices, axis=1)
    assert np.allclose(radii, np.abs(surface.values), rtol=1e-12, atol=1e-12)
    outside = radii > 0.0
    directions = surface.vertices[outside] / radii[outside, None]
    assert np.allclose(evaluate(matrix, directions), surface.values[outside], rtol=1e-9, atol=1e-12)
    assert np.all(surface.values * surface.sheets >= 0.0)
    assert np.all(surface.values[~outside] == 0.0)
    assert np.all(np.ptp(surface.sheets[surface.triangles], axis=1) == 0)
    # Reference for the topology: the lobes are those of the quadric's sheets, each closed in the origin.
    pieces = describe_pieces(surface.triangles, len(radii))
    assert pieces == [(2, 0)] * len(positive + negative)
    assert np.linalg.det(surface.vertices[surface.triangles]).min() > -1e-12


def test_value_surface_volume_by_quadrature():
    # Reference: scipy's double quadrature of ∫ |nᵀAn|³/3 over the sphere, positive and negative part apart.
    values = (1.4, 0.5, -0.9)
    surface = build_surface(turn(values, 11), "value", 120)

    def radius_cubed(azimuth: float, height: float, sheet: float) -> float:
        across = 1.0 - height * height
        value = values[2] * height**2 + across * (values[0] * np.cos(azimuth) ** 2 + values[1] * np.sin(azimuth) ** 2)
        return max(sheet * value, 0.0) ** 3 / 3.0

    for sheet in (1, -1):
        exact = 8.0 * dblquad(radius_cubed, 0.0, 1.0, 0.0, np.pi / 2.0, args=(float(sheet),), epsabs=1e-7)[0]
        own = surface.triangles[surface.sheets[surface.triangles[:, 0]] == sheet]
        assert np.sum(np.linalg.det(surface.vertices[own])) / 6.0 == pytest.approx(exact, rel=2e-3)


@pytest.mark.parametrize(
    "matrix",
    [
        np.array([[118.2, -6.9, 1.1], [9.3, 121.6, -0.8], [0.4, 0.9, 85.3]]),
        np.array([[0.0, -3.0, 1.0], [3.0, 0.0, 2.0], [-1.0, -2.0, 0.0]]),
        np.outer([1.0, 2.0, -1.0], [0.3, 0.0, 4.0]),
        -np.eye(3),
    ],
    ids=["general", "antisymmetric", "rank one", "inversion"],
)
def test_flux_surface(matrix):
    # Reference: the definition, radius |A n| along n, with all of A; rank one is two lobes that meet in the origin.
    surface = build_surface(matrix, "flux", 30)
    scale = np.max(np.abs(matrix))
    radii = np.linalg.norm(surface.vertices, axis=1)
    assert np.allclose(radii, surface.values, rtol=1e-12, atol=0.0)
    assert np.all(surface.sheets == 1) and surface.cut_at is None
    outside = radii > 1e-9 * scale
    directions = surface.vertices[outside] / radii[outside, None]
    effects = np.linalg.norm(directions @ matrix.T, axis=1)
    assert np.allclose(effects, surface.values[outside], rtol=1e-9, atol=1e-12 * scale)
    pieces = describe_pieces(surface.triangles, len(radii))
    assert pieces == [(2, 0)] * (2 if np.linalg.matrix_rank(matrix) == 1 else 1)


def test_only_the_flux_surface_shows_the_antisymmetric_part():
    # Reference: nᵀWn = 0 for antisymmetric W, so adding it leaves quadric and value surface as they are.
    matrix = turn((1.0, 2.0, -3.0), 4)
    extra = np.array([[0.0, 0.5, -0.25], [-0.5, 0.0, 1.0], [0.25, -1.0, 0.0]])
    for kind in ("quadric", "value"):
        plain, added = (build_surface(cells, kind, 12) for cells in (matrix, matrix + extra))
        assert np.allclose(plain.vertices, added.vertices, atol=1e-9)
    plain, added = (build_surface(cells, "flux", 12) for cells in (matrix, matrix + extra))
    assert np.max(added.values) > np.max(plain.values) + 0.1


@pytest.mark.parametrize("power", [-300, -30, 30, 299])
@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_extreme_sizes_only_scale(power, kind):
    # Reference: dimensions. A → s A takes the quadric to 1/√s of its size, the others to s times theirs.
    matrix = turn((3.0, 1.1, -0.7), 6)
    factor = 10.0**power
    plain, scaled = build_surface(matrix, kind, 16), build_surface(matrix * factor, kind, 16)
    assert np.all(np.isfinite(scaled.vertices)) and np.all(np.isfinite(scaled.values))
    expected = factor**-0.5 if kind == "quadric" else factor
    size = np.max(np.abs(plain.vertices))
    assert np.allclose(scaled.vertices / expected, plain.vertices, rtol=1e-9, atol=1e-12 * size)
    assert np.allclose(scaled.values / factor, plain.values, rtol=1e-9, atol=1e-12 * size)


@pytest.mark.parametrize("detail", [8, 400])
@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_coarsest_and_finest(detail, kind):
    # Reference: "points per half circle", so a closed mesh has near detail · 2 detail vertices for each sheet.
    surface = build_surface(turn((3.0, 1.1, -0.7), 6), kind, detail)
    sheets = 1 if kind == "flux" else 2
    assert 0.7 < len(surface.vertices) / (sheets * 2 * detail * detail) < 1.6
    assert np.all(np.isfinite(surface.vertices))
    assert surface.triangles.dtype == np.int32 and surface.sheets.dtype == np.int8
    assert surface.triangles.min() == 0 and surface.triangles.max() == len(surface.vertices) - 1


cells = st.one_of(st.floats(-1e3, 1e3), st.sampled_from([0.0, 0.0, 1.0, -1.0, 1e-30, 1e30]), st.floats(-1e200, 1e200))


@settings(max_examples=150, deadline=None)
@given(st.lists(cells, min_size=9, max_size=9), st.sampled_from(["quadric", "value", "flux"]), st.integers(8, 20))
def test_any_matrix_gives_a_sound_mesh(numbers, kind, detail):
    # Reference: the definitions, as inequalities that hold whatever the numbers.
    matrix = np.array(numbers).reshape(3, 3)
    surface = build_surface(matrix, kind, detail)
    count = len(surface.vertices)
    assert np.all(np.isfinite(surface.vertices)) and np.all(np.isfinite(surface.values))
    assert len(surface.values) == len(surface.sheets) == count
    if count:
        assert surface.triangles.min() == 0 and surface.triangles.max() == count - 1
        assert np.all(surface.values * surface.sheets >= 0.0)
        assert np.allclose(surface.axes @ surface.axes.T, np.eye(3), atol=1e-12)
        assert np.linalg.det(surface.axes) == pytest.approx(1.0, abs=1e-12)
        assert all(euler in (0, 1, 2) for euler, _ in describe_pieces(surface.triangles, count))
    if surface.cut_at is not None:
        assert np.max(np.linalg.norm(surface.vertices / surface.cut_at, axis=1)) <= 1.0 + 1e-9
    if kind == "quadric" and count:
        scale = np.max(np.abs(matrix))
        reach = np.sum(np.square(surface.vertices * np.sqrt(scale)), axis=1)
        off = evaluate(matrix / scale, surface.vertices * np.sqrt(scale)) - surface.sheets
        assert np.all(np.abs(off) <= 3e-9 * np.maximum(reach, 1.0))


@pytest.mark.parametrize(
    ("matrix", "kind", "detail", "field"),
    [
        (np.eye(2), "quadric", 60, "matrix"),
        ([[1, 2, 3], [4, 5, 6], [7, 8, float("nan")]], "quadric", 60, "matrix"),
        ([[1, 2, 3], [4, 5, "x"], [7, 8, 9]], "value", 60, "matrix"),
        (1e305 * np.eye(3), "flux", 60, "matrix"),
        (np.eye(3), "sphere", 60, "surface"),
        (np.eye(3), "quadric", 7, "detail"),
        (np.eye(3), "quadric", 401, "detail"),
        (np.eye(3), "quadric", 20.5, "detail"),
        (np.eye(3), "quadric", True, "detail"),
    ],
)
def test_bad_input_is_refused_where_it_stands(matrix, kind, detail, field):
    with pytest.raises(InputError) as caught:
        build_surface(matrix, kind, detail)
    assert caught.value.field == field
