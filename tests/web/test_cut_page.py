"""The Cut page: from a question and two sightings to settings and a part; everything refused at its field."""

from __future__ import annotations

import re
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient
from scipy.optimize import least_squares
from scipy.spatial.transform import Rotation

from app.store import Store
from app.store.document import change_document
from app.web.server import create_app


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


@pytest.fixture
def sample(client: TestClient) -> Any:
    listed = client.get("/api/samples").json()
    found = next(entry for entry in listed if entry["group"] == "2/m")
    return client.get(f"/api/samples/{found['id']}").json()


def post(client: TestClient, sample: Any, **body: Any) -> Any:
    return client.post(f"/api/samples/{sample['id']}/cut", json={"parent": sample["revision"], **body})


def take(client: TestClient, sample: Any, **body: Any) -> Any:
    answer = post(client, sample, **body)
    assert answer.status_code == 200, answer.text
    return answer.json()


def words(text: str) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", text))


def vectors_of(client: TestClient, sample: Any, directions: list[str]) -> np.ndarray:
    body = {
        "crystal": sample["document"]["crystal"],
        "tensor": {"matrix": np.eye(3).tolist()},
        "directions": directions,
    }
    return np.array(client.post("/api/v1/along", json=body).json()["vectors"])


def turn_of(stage: Any, dials: Any) -> np.ndarray:
    turn = Rotation.identity()
    for axis, dial in zip(stage["axes"], dials, strict=True):
        angle = np.deg2rad(axis["sense"] * (dial - axis["zero"]))
        turn = turn * Rotation.from_rotvec(angle * np.array(axis["axis"], dtype=float))
    return np.asarray(turn.as_matrix())


def sight(client: TestClient, sample: Any, stage: Any, mounted: np.ndarray, directions: list[str]) -> Any:
    """Dials that bring each direction of a crystal mounted by a known rotation to the line of sight, by a search."""
    sightings = []
    for text, vector in zip(directions, vectors_of(client, sample, directions), strict=True):
        best = min(
            (
                least_squares(lambda d, v=vector: turn_of(stage, d) @ mounted @ v - stage["sight"], [start, 0, 0])
                for start in (-120.0, 0.0, 120.0)
            ),
            key=lambda found: found.cost,
        )
        assert best.cost < 1e-12
        sightings.append({"direction": text, "angles": [float(dial) for dial in best.x]})
    return sightings


def test_without_a_part_the_page_says_what_to_do(client: TestClient, sample: Any) -> None:
    page = client.get(f"/samples/{sample['id']}/cut")
    assert page.status_code == 200
    assert "No part yet" in page.text
    assert "Make a part" in page.text
    assert "does the top of the head move" in page.text


def test_a_part_is_made_and_its_miscut_is_that_of_the_call(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    target = {"by": "direction", "direction": "(-2 0 1)"}
    answer = take(client, made, change={"target": target, "tolerance": {"half_angle": 1.0}, "name": "B4"})
    call = client.post(
        "/api/v1/miscut",
        json={
            "crystal": sample["document"]["crystal"],
            "tensor": {"free": sample["document"]["properties"][0]["tensor"]["free"]},
            "direction": "(-2 0 1)",
            "half_angle": 1.0,
        },
    ).json()
    text = words(answer["result"])
    assert f"lowest in the cone {call['lowest']:.6g}" in text
    assert f"highest in the cone {call['highest']:.6g}" in text
    assert answer["headline"].startswith("B4, along n(−201): 12.4")
    assert answer["sample"]["document"]["parts"][0]["target"] == target


def test_a_tolerance_of_the_value_gives_the_largest_miscut(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    answer = take(client, made, change={"tolerance": {"value": 0.1}})
    assert "largest miscut for that" in words(answer["result"])
    assert "half_angle" not in answer["part"]["tolerance"]


@pytest.mark.parametrize(
    ("change", "field"),
    [
        ({"target": {"by": "direction", "direction": "{100}"}}, "change.target.direction"),
        ({"target": {"by": "offcut", "from": "(0 0 1)", "toward": "[1 0 0]"}}, "change.target.tilt"),
        ({"edge": "(0 0 1)"}, "change.edge"),
        ({"size": [1, 0, 1]}, "change.size[1]"),
        ({"name": " "}, "change.name"),
        ({"tolerance": {"half_angle": 1, "value": 1}}, "change.tolerance"),
        ({"tolerance": {"half_angle": 91}}, "change.tolerance.half_angle"),
    ],
)
def test_what_is_wrong_with_a_part_is_told_at_its_field(
    client: TestClient, sample: Any, change: Any, field: str
) -> None:
    made = take(client, sample, make=True)["sample"]
    refused = post(client, made, change=change)
    assert refused.status_code == 422, refused.text
    assert refused.json()["error"]["field"] == field
    assert client.get(f"/api/samples/{sample['id']}").json()["revision"] == made["revision"]


def test_a_principal_axis_that_is_not_determined_is_no_target(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    free = dict.fromkeys(("11", "22", "33"), 10.0) | {"13": 0.0}
    round_one = client.post(
        f"/api/samples/{sample['id']}/edit",
        json={"parent": made["revision"], "change": {"tensor": {"free": free}}},
    ).json()
    refused = post(client, round_one, change={"target": {"by": "principal", "axis": 1}})
    assert refused.status_code == 422
    assert "not determined" in refused.json()["error"]["message"]


def test_two_sightings_give_settings_that_put_the_face_to_the_blade(client: TestClient, sample: Any) -> None:
    stage = client.get("/api/stages").json()[0]
    mounted = Rotation.from_euler("xyz", [8, -6, 25], degrees=True).as_matrix()
    # The crystal is mounted with n(100) near the line of sight.
    nearly = Rotation.align_vectors([stage["sight"]], vectors_of(client, sample, ["(1 0 0)"]))[0].as_matrix()
    mounted = mounted @ nearly
    made = take(client, sample, make=True)["sample"]
    aimed = take(client, made, change={"target": {"by": "direction", "direction": "(1 0 0)"}, "edge": "[0 1 0]"})[
        "sample"
    ]
    sightings = sight(client, sample, stage, mounted, ["(1 0 0)", "(1 1 0)"])
    answer = take(client, aimed, sightings=sightings)
    dials = re.findall(r"<i>([^<]+)</i> <b>([+−][\d.]+)°</b>", answer["result"])
    assert [name for name, _ in dials] == [axis["name"] for axis in stage["axes"]]
    numbers = [float(text.replace("−", "-")) for _, text in dials]
    placed = turn_of(stage, numbers) @ mounted @ vectors_of(client, sample, ["(1 0 0)"])[0]
    # Printed to the dial's step of 0.1°.
    assert np.rad2deg(np.arccos(min(1.0, abs(float(placed @ stage["blade"]))))) < 0.15
    assert "cannot tell the crystal from its mirror image" in words(answer["mounting"])


def test_sightings_are_refused_at_their_place(client: TestClient, sample: Any) -> None:
    refused = post(client, sample, sightings=[{"direction": "(1 0 0)", "angles": [1, 2]}])
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "sightings[0].angles"
    refused = post(client, sample, sightings=[{"direction": "(0 0 0)", "angles": [1, 2, 3]}])
    assert refused.json()["error"]["field"] == "sightings[0].direction"


def test_stages_belong_to_the_laboratory(client: TestClient, sample: Any) -> None:
    stages = [
        {key: value for key, value in stage.items() if key != "questions"} for stage in client.get("/api/stages").json()
    ]
    assert [stage["name"] for stage in stages] == ["Turn and two arcs", "One arc", "Three circles"]
    first = client.get("/api/stages").json()[0]["questions"][1]
    stages[0]["axes"][1]["sense"] = -1
    kept = client.post("/api/stages", json={"stages": stages})
    assert kept.status_code == 200, kept.text
    second = client.get("/api/stages").json()[0]["questions"][1]
    assert {first.split("move ")[1], second.split("move ")[1]} == {
        "to the left of the beam?",
        "to the right of the beam?",
    }
    other = client.post("/api/samples", json={"name": "another"}).json()
    assert client.get(f"/api/samples/{other['id']}/cut").json()["stage"]["axes"][1]["sense"] == -1
    stages[0]["axes"][1]["low"] = 99
    refused = client.post("/api/stages", json={"stages": stages})
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "stages[0].axes[1].high"


def test_seeking_lists_what_meets_the_conditions(client: TestClient, sample: Any) -> None:
    key = sample["document"]["properties"][0]["id"]
    answer = client.post(
        f"/api/samples/{sample['id']}/cut/seek", json={"conditions": [{"property": key, "target": "max"}]}
    ).json()
    assert 'data-cut="[0 1 0]"' in answer["result"]
    none = client.post(f"/api/samples/{sample['id']}/cut/seek", json={"conditions": [{"property": key, "target": 99}]})
    assert "99" in none.json()["sentence"]
    refused = client.post(
        f"/api/samples/{sample['id']}/cut/seek", json={"conditions": [{"property": "gone", "target": 1}]}
    )
    assert refused.status_code in (404, 422)


def test_the_workshop_s_sheet_asks_for_sightings_first_and_is_superseded_by_a_change(
    client: TestClient, sample: Any
) -> None:
    made = take(client, sample, make=True)["sample"]
    page = client.get(f"/samples/{sample['id']}/cut/sheet")
    assert "not sighted on the stage yet" in page.text
    stage = client.get("/api/stages").json()[0]
    mounted = Rotation.align_vectors([stage["sight"]], vectors_of(client, sample, ["(0 0 1)"]))[0].as_matrix()
    sighted = take(client, made, sightings=sight(client, sample, stage, mounted, ["(0 0 1)", "(0 1 1)"]))["sample"]
    text = words(client.get(f"/samples/{sample['id']}/cut/sheet").text)
    for wanted in (
        "Do not cut if",
        "Check reflection",
        "turn +0.0°",
        "lower arc",
        "Order of cuts",
        "Local rules",
        "kerf 0.3 mm",
    ):
        assert wanted in text, wanted
    frozen = client.post(f"/samples/{sample['id']}/cut/sheets?revision={sighted['revision']}", follow_redirects=False)
    assert frozen.status_code == 303, frozen.text
    address = frozen.headers["location"]
    assert "superseded" not in client.get(address).text.lower().replace("superseded.", "")
    take(client, sighted, change={"kerf": 0.5})
    after = client.get(address).text
    assert "superseded" in after.lower()
    assert "kerf 0.3 mm" in words(after)


def test_the_check_reflection_obeys_bragg_s_law(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    stage = client.get("/api/stages").json()[0]
    mounted = Rotation.align_vectors([stage["sight"]], vectors_of(client, sample, ["(0 0 1)"]))[0].as_matrix()
    take(client, made, sightings=sight(client, sample, stage, mounted, ["(0 0 1)", "(0 1 1)"]))
    text = words(client.get(f"/samples/{sample['id']}/cut/sheet").text)
    found = re.search(r"spacing ([\d.]+) Å, order (\d+), 2θ ([\d.]+)° at ([\d.]+) Å", text)
    assert found is not None, text
    spacing, order, two_theta, wavelength = (float(part) for part in found.groups())
    # d(001) of a monoclinic cell is c sin β.
    assert spacing == pytest.approx(7.27 * np.sin(np.deg2rad(107.4)), abs=1e-4)
    assert order * wavelength == pytest.approx(2 * spacing * np.sin(np.deg2rad(two_theta / 2)), rel=1e-3)


def test_spots_on_a_film_give_sightings_of_the_mounted_crystal(client: TestClient, sample: Any) -> None:
    # Spots of a crystal mounted by a known turn, by the law of reflection, on a film 30 mm before it.
    mounted = Rotation.from_euler("xyz", [12, -7, 33], degrees=True).as_matrix()
    every = product(range(-3, 4), range(-2, 3), range(-3, 4))
    texts = [f"({h} {k} {m})" for h, k, m in every if np.gcd.reduce([h, k, m]) == 1]
    beam = np.array([1.0, 0, 0])
    spots = []
    for normal in vectors_of(client, sample, texts) @ mounted.T:
        ray = beam - 2 * (beam @ normal) * normal
        if normal[0] < 0 and ray[0] < -0.5:
            spots.append([round(float(-ray[1] / -ray[0] * 30), 2), round(float(ray[2] / -ray[0] * 30), 2)])
    assert len(spots) >= 5
    answer = client.post(
        f"/api/samples/{sample['id']}/cut/spots",
        json={"spots": spots, "distance": 30, "side": "back", "angles": [0, 0, 0], "tolerance": 0.3},
    )
    assert answer.status_code == 200, answer.text
    best = answer.json()["assignments"][0]
    assert best["matched"] == len(spots)
    taken = take(client, sample, sightings=best["sightings"])
    assert "rms 0" in words(taken["mounting"]) or "rms 0.0" in words(taken["mounting"])
    assert taken["sample"]["document"]["sightings"][0]["toward"] == pytest.approx(best["sightings"][0]["toward"])
    refused = client.post(
        f"/api/samples/{sample['id']}/cut/spots", json={"spots": spots, "distance": 30, "angles": [0]}
    )
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "angles"


def test_what_was_achieved_becomes_the_direction_of_the_part_s_readings(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    change = {
        "name": "B4",
        "target": {"by": "direction", "direction": "(0 0 1)"},
        "achieved": {"tilt": 1.2, "toward": "[0 1 0]", "sigma": 0.1},
        "tolerance": {"half_angle": 0.5},
    }
    answer = take(client, made, change=change)
    assert "not within what was allowed" in words(answer["form"])
    given = take(client, answer["sample"], give_readings=True)["sample"]
    moved = next(reading for reading in given["document"]["readings"] if reading.get("bar") == "B4")
    normal, along_b = vectors_of(client, sample, ["(0 0 1)", "[0 1 0]"])
    vector = np.array(moved["direction"]["xyz"])
    assert np.rad2deg(np.arccos(vector @ normal)) == pytest.approx(1.2, abs=1e-6)
    assert vector @ along_b > 0
    assert moved["direction_sigma"] == 0.1
    # B4 is a bar of the demonstration's readings; a part of another name has none.
    other = take(client, given, change={"name": "nameless"})["sample"]
    refused = post(client, other, give_readings=True)
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "give_readings"


def test_the_next_sighting_is_named_with_its_dials(client: TestClient, sample: Any) -> None:
    stage = client.get("/api/stages").json()[0]
    mounted = Rotation.align_vectors([stage["sight"]], vectors_of(client, sample, ["(1 0 0)"]))[0].as_matrix()
    answer = take(client, sample, sightings=sight(client, sample, stage, mounted, ["(1 0 0)", "(1 1 0)"]))
    wanted = r"Sight n ?\([^)]+\) next: it decides the hand\. It will be at turn [+−]"
    assert re.search(wanted, words(answer["mounting"]))


def test_a_compensated_cut_keeps_its_value_over_temperature(client: TestClient, sample: Any) -> None:
    # A second, invented state of the same property at 395 K; the change between them is zero on a cone.
    document = sample["document"]
    key = document["properties"][0]["id"]
    hot = {**document["properties"][0], "id": "hot", "conditions": {"temperature": 395}}
    free = document["properties"][0]["tensor"]["free"]
    hot["tensor"] = {"free": {"11": free["11"] + 1.0, "13": free["13"], "22": free["22"] - 2.0, "33": free["33"] + 0.5}}
    store: Store = client.app.state.store  # type: ignore[attr-defined]
    kept = store.samples.get(sample["id"])
    properties = [*(entry.plain() for entry in kept.document.properties), hot]
    store.samples.save(sample["id"], change_document(kept.document, {"properties": properties}), kept.revision)
    page = client.get(f"/samples/{sample['id']}/cut")
    assert "change of Thermal conductivity per kelvin, 295 to 395 K" in page.text
    answer = client.post(
        f"/api/samples/{sample['id']}/cut/seek",
        json={
            "conditions": [
                {"property": f"rate:{key}:hot", "target": 0},
                {"property": key, "target": "max"},
            ]
        },
    )
    assert answer.status_code == 200, answer.text
    found = re.search(r'data-cut-vector="\[([^\]]+)\]', answer.json()["result"])
    assert found is not None
    vector = np.array([float(part) for part in found[1].split(",")])
    change = np.array([[1.0, 0, 0], [0, -2.0, 0], [0, 0, 0.5]])
    assert vector @ change @ vector == pytest.approx(0.0, abs=1e-9)


def test_cuts_that_no_other_beats_are_marked(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)
    rows = re.findall(r'<tr( class="unbeaten")?><th scope="row">(.*?)</th>', made["result"])
    marked = {words(name).replace("◆", "").strip() for chosen, name in rows if chosen}
    # Of one property, wished large, the best cut is the principal axis of the largest value, which b is.
    assert "p 1" in marked
    assert "[010]" in marked
    key = sample["document"]["properties"][0]["id"]
    small = take(client, made["sample"], wishes={key: "smallest"})
    rows = re.findall(r'<tr( class="unbeaten")?><th scope="row">(.*?)</th>', small["result"])
    assert {words(name).replace("◆", "").strip() for chosen, name in rows if chosen} == {"p 3"}


def test_a_finished_part_calibrates_the_saw(client: TestClient, sample: Any) -> None:
    stage = client.get("/api/stages").json()[0]
    mounted = Rotation.align_vectors([stage["sight"]], vectors_of(client, sample, ["(0 0 1)"]))[0].as_matrix()
    now = take(client, sample, make=True)["sample"]
    now = take(client, now, sightings=sight(client, sample, stage, mounted, ["(0 0 1)", "(0 1 1)"]))["sample"]
    for direction, toward in (("(0 0 1)", "[0 1 0]"), ("(0 1 1)", "[1 0 0]")):
        change = {
            "target": {"by": "direction", "direction": direction},
            "achieved": {"tilt": 0.5, "toward": toward},
            "edge": "[1 0 0]",
        }
        now = take(client, now, change=change)["sample"]
        answer = take(client, now, calibrate=True)
    kept = client.get("/api/stages").json()[0]["transfer"]
    assert len(kept) == 2
    for cut in kept:
        off = np.rad2deg(np.arccos(np.array(cut["wanted"]) @ np.array(cut["achieved"])))
        assert off == pytest.approx(0.5, abs=1e-6)
    assert answer["stage"]["id"] == stage["id"]


def test_a_wedge_is_told_apart_from_the_tilt(client: TestClient, sample: Any) -> None:
    made = take(client, sample, make=True)["sample"]
    text = words(take(client, made, change={"wedge": 0.1})["result"])
    # Across 5 mm a wedge of 0.1° makes 5 mm × tan 0.1° = 8.73 µm.
    assert "8.73 µm" in text
    assert "second face" in text
