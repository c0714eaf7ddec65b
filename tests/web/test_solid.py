"""Solids, read back by the mesh library and by hand from the bytes, against closed formulas."""

from __future__ import annotations

import io
import json
import struct
import subprocess
import sys
from typing import Any

import numpy as np
import pytest
import trimesh
from scipy.integrate import dblquad

from app.errors import InputError
from app.web.solid import FROM_METRES, Solid, build_solid, describe_solid, write_glb, write_stl
from tests.processes import ROOT, command_environment
from tests.web.subjects import ELLIPSOID, IMAGINARY, ONE_SHEET, TWO_SHEETS, random_rotation

UNIT = "W/(m·K)"


def read_stl(content: bytes) -> trimesh.Trimesh:
    mesh = trimesh.load(io.BytesIO(content), file_type="stl")
    assert isinstance(mesh, trimesh.Trimesh)
    return mesh


def read_chunk(content: bytes) -> dict[str, Any]:
    """The JSON of a GLB by its layout: magic, version, length, then chunks (glTF 2.0, section 4.4)."""
    magic, version, length = struct.unpack("<4sII", content[:12])
    assert (magic, version, length) == (b"glTF", 2, len(content))
    size, kind = struct.unpack("<I4s", content[12:20])
    assert kind == b"JSON"
    found: dict[str, Any] = json.loads(content[20 : 20 + size])
    return found


@pytest.mark.parametrize("matrix", [ELLIPSOID, IMAGINARY])
def test_an_ellipsoid_is_closed_outward_and_has_its_volume(matrix: Any) -> None:
    solid = build_solid(matrix, "quadric", unit=UNIT, size=70.0)
    mesh = read_stl(write_stl(solid))
    assert mesh.is_watertight
    assert mesh.is_winding_consistent
    # 4/3 π abc with the semi-axes 1/√|value|, by numpy's eigenvalues; a mesh inscribed in it is a little smaller.
    semi = 1.0 / np.sqrt(np.abs(np.linalg.eigvalsh(matrix))) * solid.scale
    assert 2.0 * semi.max() == pytest.approx(70.0, rel=1e-9)
    volume = 4.0 / 3.0 * np.pi * np.prod(semi)
    assert 0.998 * volume < mesh.volume < volume
    # Extents along the axes of the file: 2 √((A⁻¹)ii).
    expected = 2.0 * np.sqrt(np.abs(np.diag(np.linalg.inv(matrix)))) * solid.scale
    np.testing.assert_allclose(mesh.extents, expected, rtol=2e-3)


@pytest.mark.parametrize("kind", ["value", "flux"])
def test_the_other_surfaces_are_closed_and_have_their_volume(kind: Any) -> None:
    solid = build_solid(ELLIPSOID, kind, unit=UNIT, size=60.0)
    mesh = read_stl(write_stl(solid))
    assert mesh.is_watertight

    # The volume inside a radius r(n) is the integral of r³/3 over the sphere, by scipy's quadrature.
    def cube(polar: float, turn: float) -> float:
        n = np.array([np.sin(polar) * np.cos(turn), np.sin(polar) * np.sin(turn), np.cos(polar)])
        radius = n @ ELLIPSOID @ n if kind == "value" else float(np.linalg.norm(ELLIPSOID @ n))
        return float(radius**3 / 3.0 * np.sin(polar))

    volume = dblquad(cube, 0.0, 2.0 * np.pi, 0.0, np.pi, epsrel=1e-6)[0] * solid.scale**3
    assert mesh.volume == pytest.approx(volume, rel=3e-3)


@pytest.mark.parametrize("matrix", [ONE_SHEET, TWO_SHEETS])
def test_lobes_of_both_signs_are_closed_outward_bodies(matrix: Any) -> None:
    solid = build_solid(matrix, "value", unit=UNIT)
    assert sorted(solid.bodies) == [-1, 1]
    for sign, (vertices, triangles) in solid.bodies.items():
        body = trimesh.Trimesh(vertices, triangles, process=True)
        assert body.is_watertight
        assert body.volume > 0
        # The sign of the value toward every corner is the body's, by the definition of the surface.
        values = np.einsum("ni,ij,nj->n", vertices, matrix, vertices)
        assert np.all(sign * values >= -1e-9 * np.abs(values).max())


@pytest.mark.parametrize(("matrix", "pieces"), [(ONE_SHEET, (1, 2)), (TWO_SHEETS, (2, 1))])
def test_an_open_quadric_is_cut_and_says_so(matrix: Any, pieces: tuple[int, int]) -> None:
    solid = build_solid(matrix, "quadric", unit=UNIT, size=50.0)
    assert solid.cut == pytest.approx(25.0)
    described = describe_solid(solid)
    assert not described["closed"]
    assert "is cut 25 mm from the centre" in described["sentence"]
    assert b"cut open" in write_stl(solid)[:80]
    # A quadric with one negative value has a sheet in one piece and one in two, and the other way round.
    for (sign, body), count in zip(solid.bodies.items(), pieces, strict=True):
        mesh = trimesh.Trimesh(*body, process=True)
        assert not mesh.is_watertight
        assert mesh.body_count == count, sign
        on_sheet = np.einsum("ni,ij,nj->n", body[0], matrix, body[0]) / solid.scale**2
        np.testing.assert_allclose(on_sheet, sign, atol=1e-6)


def test_the_specimen_frame_is_the_pose() -> None:
    pose = random_rotation(5)
    here, there = (build_solid(ELLIPSOID, "quadric", pose=turn) for turn in (None, pose))
    assert (here.frame, there.frame) == ("crystal", "specimen")
    np.testing.assert_allclose(there.bodies[1][0], here.bodies[1][0] @ pose.T, atol=1e-9)
    # On the quadric of the turned tensor, C A Cᵀ.
    turned = pose @ ELLIPSOID @ pose.T
    points = there.bodies[1][0] / there.scale
    np.testing.assert_allclose(np.einsum("ni,ij,nj->n", points, turned, points), 1.0, atol=1e-9)


def test_the_layout_of_the_stl_and_its_header() -> None:
    solid = build_solid(ELLIPSOID, "quadric", unit=UNIT)
    content = write_stl(solid)
    (count,) = struct.unpack("<I", content[80:84])
    assert len(content) == 84 + 50 * count
    header = content[:80].decode("ascii")
    assert not header.startswith("solid")
    assert header.startswith("mm; quadric, crystal frame; ")
    assert f"{solid.scale:.6g} mm per 1/sqrt(W/(m.K))" in header


def test_the_glb_has_a_body_and_a_material_for_each_sheet_in_metres_with_y_up() -> None:
    solid = build_solid(ONE_SHEET, "value", unit=UNIT, size=50.0)
    content = write_glb(solid, {"sample": "</script>", "property": "Invented"})
    read = read_chunk(content)
    assert sorted(mesh["name"] for mesh in read["meshes"]) == ["negative values", "positive values"]
    colours = {entry["name"]: entry["pbrMetallicRoughness"]["baseColorFactor"] for entry in read["materials"]}
    assert colours["positive values"] != colours["negative values"]
    extras = read["scenes"][0]["extras"]
    assert extras["scale"] == pytest.approx(solid.scale)
    assert (extras["length_unit"], extras["frame"], extras["sample"]) == (UNIT, "crystal", "</script>")
    scene = trimesh.load(io.BytesIO(content), file_type="glb")
    assert isinstance(scene, trimesh.Scene)
    # The frame's z is the file's y, and millimetres are metres.
    np.testing.assert_allclose(scene.extents, solid.extents[[0, 2, 1]] / 1000.0, rtol=1e-5)
    assert np.linalg.det(FROM_METRES[:3, :3]) > 0
    # Bodies touch in the middle, where corners may be one: the faces still close.
    for name, body in scene.geometry.items():
        assert trimesh.Trimesh(body.vertices, body.faces, process=True).is_watertight, name


@pytest.mark.parametrize(
    ("matrix", "kind", "said"),
    [
        (np.zeros((3, 3)), "quadric", "The tensor is zero"),
        (np.zeros((3, 3)), "flux", "The tensor is zero"),
        (np.array([[0.0, 1, 2], [-1, 0, 3], [-2, -3, 0]]), "quadric", "symmetric part of the tensor is zero"),
        (np.diag([4.0, 0.0, 0.0]), "quadric", "pair of planes"),
        (np.diag([0.0, -4.0, 0.0]), "quadric", "pair of planes"),
        (np.diag([1.0, 1.0, 1e8]), "quadric", "mm thick"),
        (np.diag([1.0, 1e8, 1e8]), "quadric", "mm thick"),
    ],
)
def test_what_is_no_solid_is_refused_with_the_reason(matrix: Any, kind: Any, said: str) -> None:
    with pytest.raises(InputError, match=said) as caught:
        build_solid(matrix, kind)
    assert caught.value.field == "surface"
    assert caught.value.hint


@pytest.mark.parametrize(
    ("more", "field"),
    [
        ({"size": 4.9}, "size"),
        ({"size": 1001.0}, "size"),
        ({"size": float("nan")}, "size"),
        ({"detail": 15}, "detail"),
        ({"detail": 241}, "detail"),
    ],
)
def test_size_and_detail_have_bounds(more: Any, field: str) -> None:
    with pytest.raises(InputError) as caught:
        build_solid(ELLIPSOID, "quadric", **more)
    assert caught.value.field == field


@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
def test_degenerate_tensors_that_are_solids_are_made(kind: Any) -> None:
    for values in ([2.0, 2.0, 2.0], [3.0, 3.0, 1.0], [3.0, 1.0, 0.0], [3.0, 0.0, -1.0]):
        turn = random_rotation(2)
        solid: Solid = build_solid(turn @ np.diag(values) @ turn.T, kind)
        mesh = read_stl(write_stl(solid))
        assert mesh.is_watertight == (solid.cut is None), (kind, values)
        assert np.isfinite(mesh.vertices).all()
        assert 2 * np.linalg.norm(mesh.vertices, axis=1).max() == pytest.approx(50.0, rel=1e-5)


@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
@pytest.mark.parametrize("factor", [1e-290, 1e290])
def test_the_shape_does_not_depend_on_the_unit(kind: Any, factor: float) -> None:
    usual, other = build_solid(ONE_SHEET, kind), build_solid(ONE_SHEET * factor, kind)
    # A quadric's radius goes with 1/√value, the others' with the value.
    power = 0.5 if kind == "quadric" else -1.0
    assert other.scale == pytest.approx(usual.scale * factor**power, rel=1e-9)
    np.testing.assert_allclose(other.bodies[1][0], usual.bodies[1][0], atol=1e-6)
    assert (other.cut is None) == (usual.cut is None)


def test_the_mesh_library_is_not_loaded_at_the_start() -> None:
    code = "import sys, app.web.server; print('trimesh' in sys.modules)"
    ran = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, env=command_environment(), capture_output=True, text=True, check=True
    )
    assert ran.stdout.strip() == "False"
