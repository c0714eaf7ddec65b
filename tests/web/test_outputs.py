"""The routes of what goes out: status, type, name, and content as outside readers see it."""

from __future__ import annotations

import csv
import io
from typing import Any
from xml.etree import ElementTree

import gemmi
import numpy as np
import pytest
import trimesh
from fastapi.testclient import TestClient

from app.web.server import create_app

HOSTILE = '../</script><script>alert(1)</script>"><img src=x onerror=alert(1)>\u202e'


NAMES = {"2/m": "Demonstration crystal", "mmm": "Second demonstration crystal"}


@pytest.fixture(scope="module")
def kept(tmp_path_factory: pytest.TempPathFactory) -> TestClient:
    app = create_app(tmp_path_factory.mktemp("out"))
    client = TestClient(app, base_url="http://127.0.0.1", raise_server_exceptions=False)
    client.get("/")
    return client


def find(client: TestClient, group: str) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["name"] == NAMES[group])
    return client.get(f"/api/samples/{found['id']}").json()


def copy(client: TestClient, group: str) -> Any:
    """A copy that a test may change."""
    return client.post("/api/samples", json={"from": find(client, group)["id"], "name": "Copy"}).json()


def edit(client: TestClient, sample: Any, change: dict[str, Any]) -> Any:
    answer = client.post(f"/api/samples/{sample['id']}/edit", json={"parent": sample["revision"], "change": change})
    assert answer.status_code == 200, answer.text
    return answer.json()


def take(client: TestClient, sample: Any, what: str, **query: Any) -> Any:
    return client.get(f"/api/samples/{sample['id']}/out/{what}", params=query)


FILES = {
    "tensors.csv": ("text/csv; charset=utf-8; header=present", "Demonstration crystal tensors.csv"),
    "readings.csv": ("text/csv; charset=utf-8; header=present", "Demonstration crystal readings.csv"),
    "cell.cif": ("chemical/x-cif", "Demonstration crystal cell.cif"),
    "surface.stl": ("model/stl", "Demonstration crystal quadric-specimen-50mm.stl"),
    "surface.glb": ("model/gltf-binary", "Demonstration crystal quadric-specimen-50mm.glb"),
    "picture.svg": ("image/svg+xml", "Demonstration crystal quadric.svg"),
    "stereogram.svg": ("image/svg+xml", "Demonstration crystal stereogram.svg"),
    "report.html": ("text/html; charset=utf-8", "Demonstration crystal report.html"),
}


@pytest.mark.parametrize("what", FILES)
def test_a_file_has_its_type_and_name_and_is_to_be_saved(kept: TestClient, what: str) -> None:
    answer = take(kept, find(kept, "2/m"), what)
    media_type, name = FILES[what]
    assert answer.status_code == 200
    assert answer.headers["content-type"] == media_type
    assert answer.headers["content-disposition"].startswith(f'attachment; filename="{name}"; ')
    assert answer.headers["x-content-type-options"] == "nosniff"
    assert "default-src 'self'" in answer.headers["content-security-policy"]


@pytest.mark.parametrize("what", [*FILES, "surface"])
def test_a_sample_or_revision_or_property_that_is_not_there_is_told(kept: TestClient, what: str) -> None:
    sample = find(kept, "2/m")
    assert kept.get(f"/api/samples/none/out/{what}").status_code == 404
    if what != "picture.svg":
        assert take(kept, sample, what, revision=99).status_code == 404
    # The picture takes a link's words, where a revision that is not there is an error of the query.
    else:
        answer = take(kept, sample, what, revision=99)
        assert (answer.status_code, answer.json()["error"]["field"]) == (422, "revision")
    if what not in ("tensors.csv", "cell.cif"):
        answer = take(kept, sample, what, property="none")
        assert (answer.status_code, answer.json()["error"]["field"]) == (422, "property")


@pytest.mark.parametrize("what", [name for name in [*FILES, "surface"] if name != "cell.cif"])
def test_a_sample_without_a_property_has_only_its_cell(kept: TestClient, what: str) -> None:
    sample = kept.post("/api/samples", json={"name": "Bare"}).json()
    answer = take(kept, sample, what)
    assert answer.status_code == 422
    assert "no property" in answer.json()["error"]["message"]
    assert take(kept, sample, "cell.cif").status_code == 200


def test_readings_out_and_in_again_change_nothing(kept: TestClient) -> None:
    sample = copy(kept, "2/m")
    first = take(kept, sample, "readings.csv").text
    body = {"parent": sample["revision"], "text": first}
    assert kept.post(f"/api/samples/{sample['id']}/readings/table", json=body).status_code == 200
    again = kept.get(f"/api/samples/{sample['id']}").json()
    assert again["document"]["readings"] == sample["document"]["readings"]
    assert take(kept, sample, "readings.csv").text == first


def test_the_tensors_are_those_of_the_sample(kept: TestClient) -> None:
    sample = find(kept, "mmm")
    rows = list(csv.DictReader(io.StringIO(take(kept, sample, "tensors.csv").text, newline="")))
    posed = [float(row["value"]) for row in rows if row["quantity"] == "cell" and row["frame"] == "specimen"]
    np.testing.assert_allclose(np.reshape(posed, (3, 3)), sample["derived"]["state"]["posed"], atol=1e-9)


def test_the_cif_is_read_by_gemmi(kept: TestClient) -> None:
    block = gemmi.cif.read_string(take(kept, find(kept, "2/m"), "cell.cif").text).sole_block()
    structure = gemmi.make_small_structure_from_block(block)
    assert structure.cell.parameters == pytest.approx((9.83, 6.41, 7.27, 90, 107.4, 90))
    assert structure.spacegroup.point_group_hm() == "2/m"


def test_a_limiting_group_has_no_cif_and_all_else(kept: TestClient) -> None:
    sample = kept.post("/api/samples", json={"name": "Ceramic"}).json()
    sample = edit(kept, sample, {"crystal": {"cell": None, "group": "∞m"}})
    answer = take(kept, sample, "cell.cif")
    assert (answer.status_code, answer.json()["error"]["field"]) == (422, "group")
    assert "has no cell" in answer.json()["error"]["message"]
    sample = edit(kept, sample, {"property": {"kind": "thermal_conductivity"}})
    sample = edit(kept, sample, {"free": {"11": "2.0", "33": "3.0"}})
    for what in FILES:
        if what != "cell.cif":
            assert take(kept, sample, what).status_code == 200, what


@pytest.mark.parametrize("frame", ["crystal", "specimen"])
def test_the_solid_has_the_size_that_its_description_states(kept: TestClient, frame: str) -> None:
    sample = find(kept, "2/m")
    query = {"frame": frame, "size": 80, "detail": 40}
    said = take(kept, sample, "surface", **query).json()
    assert (said["size"], said["closed"], said["frame"], said["bodies"]) == (80, True, frame, ["positive values"])
    answer = take(kept, sample, "surface.stl", **query)
    mesh = trimesh.load(io.BytesIO(answer.content), file_type="stl")
    assert isinstance(mesh, trimesh.Trimesh)
    np.testing.assert_allclose(mesh.extents, said["extents"], rtol=1e-5)
    assert mesh.is_watertight
    assert len(mesh.faces) == said["triangles"]
    # The longest way is along the smallest principal value, 1/√value, to the scale.
    smallest = min(sample["derived"]["state"]["principal"]["values"])
    assert said["scale"] * 2 / np.sqrt(smallest) == pytest.approx(80, rel=1e-9)
    assert answer.headers["x-halfturn-scale"] == f"{said['scale']:.6g} mm per 1/\\u221a(W/(m\\xb7K))"
    scene = trimesh.load(io.BytesIO(take(kept, sample, "surface.glb", **query).content), file_type="glb")
    np.testing.assert_allclose(scene.extents, np.array(said["extents"])[[0, 2, 1]] / 1000, rtol=1e-5)


def test_an_open_surface_is_said_to_be_open(kept: TestClient) -> None:
    said = take(kept, find(kept, "mmm"), "surface").json()
    assert said["closed"] is False
    assert said["cut_at"] == pytest.approx(25.0)
    assert said["bodies"] == ["positive values", "negative values"]


@pytest.mark.parametrize(
    ("what", "query", "field"),
    [
        ("surface.stl", {"size": 4}, "size"),
        ("surface.stl", {"size": "nan"}, "size"),
        ("surface.stl", {"size": "1e400"}, "size"),
        ("surface.glb", {"detail": 4000}, "detail"),
        ("surface.glb", {"surface": "ball"}, "surface"),
        ("surface", {"frame": "laboratory"}, "frame"),
        ("picture.svg", {"width": 5}, "width"),
        ("picture.svg", {"unit": "px", "width": 9000}, "width"),
        ("picture.svg", {"unit": "inch"}, "unit"),
        ("picture.svg", {"colours": "pink"}, "colours"),
        ("picture.svg", {"sight": "w"}, "sight"),
        ("picture.svg", {"view": "1,2,3"}, "view"),
        ("picture.svg", {"pose": "{}"}, "pose"),
        ("picture.svg", {"at": "x"}, "at"),
        ("stereogram.svg", {"width": "inf"}, "width"),
        ("report.html", {"scene": "maybe"}, "scene"),
        ("tensors.csv", {"revision": 0}, "revision"),
    ],
)
def test_a_wrong_question_is_refused_at_its_field(
    kept: TestClient, what: str, query: dict[str, Any], field: str
) -> None:
    answer = take(kept, find(kept, "2/m"), what, **query)
    assert answer.status_code == 422, answer.text
    error = answer.json()["error"]
    assert error["field"] == field
    assert "left out" not in error["message"]


def test_the_picture_follows_a_link(kept: TestClient) -> None:
    sample = find(kept, "2/m")
    usual = take(kept, sample, "picture.svg", width=300, unit="px").text
    turned = take(kept, sample, "picture.svg", width=300, unit="px", pose='{"matrix":[[1,0,0],[0,1,0],[0,0,1]]}').text
    along = take(kept, sample, "picture.svg", width=300, unit="px", view="1,0,0,0,1,0,0,0,1").text
    named = take(kept, sample, "picture.svg", width=300, unit="px", sight="z").text
    assert ElementTree.fromstring(usual.encode()).get("width") == "300px"
    assert len({usual, turned, along}) == 3
    assert along == named
    assert "13.20(8)" in turned


def test_another_property_is_handed_over_when_it_is_named(kept: TestClient) -> None:
    sample = copy(kept, "2/m")
    sample = edit(kept, sample, {"property": {"kind": "thermal_expansion"}})
    sample = edit(kept, sample, {"free": {"11": "1", "13": "0", "22": "-2", "33": "3"}})
    ids = [entry["id"] for entry in sample["document"]["properties"]]
    closed = [take(kept, sample, "surface", property=entry).json()["closed"] for entry in ids]
    assert closed == [True, False]


def test_hostile_names_never_reach_a_header_or_a_path(kept: TestClient) -> None:
    sample = copy(kept, "2/m")
    kept.post(f"/api/samples/{sample['id']}/rename", json={"name": HOSTILE})
    for what in FILES:
        answer = take(kept, sample, what)
        assert answer.status_code == 200, what
        header = answer.headers["content-disposition"]
        name = header.partition('filename="')[2].partition('"')[0]
        assert not set(name) & set("/\\<>"), header
        assert "%2F" not in header.upper(), header


def test_the_panel_says_what_each_file_is_for(kept: TestClient) -> None:
    sample = find(kept, "2/m")
    page = kept.get(f"/samples/{sample['id']}/sheet").text
    for what in FILES:
        assert f"/api/samples/{sample['id']}/out/{what}" in page, what
    assert "STL is in millimetres" in page
