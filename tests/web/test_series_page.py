"""The Series page: a table of cells in, the expansion at any value out, kept with the sample."""

from __future__ import annotations

import re
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from fastapi.testclient import TestClient

from app.web.server import create_app

# An invented cubic crystal whose edge grows as a0 (1 + α (T − 300)), α = 2e-5/K, exactly.
EDGE, RATE = 5.0, 2e-5
CUBIC = "temperature,a\n" + "".join(f"{t},{EDGE * (1 + RATE * (t - 300)):.6f}(5)\n" for t in (200, 250, 300, 350, 400))


@pytest.fixture
def client(tmp_path: Path) -> TestClient:
    return TestClient(create_app(tmp_path), base_url="http://127.0.0.1")


@pytest.fixture
def cubic(client: TestClient) -> Any:
    made = client.post("/api/samples", json={"name": "cube"}).json()
    crystal = {"cell": [5, 5, 5, 90, 90, 90], "group": "m-3m", "frame": "x3=c x2=b*"}
    answer = client.post(
        f"/api/samples/{made['id']}/edit", json={"parent": made["revision"], "change": {"crystal": crystal}}
    )
    assert answer.status_code == 200, answer.text
    return answer.json()


def change(client: TestClient, sample: Any, **named: Any) -> Any:
    return client.post(
        f"/api/samples/{sample['id']}/series", json={"parent": sample["revision"], "change": named, "at": 300}
    )


def words(text: str) -> str:
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", text))


def test_without_a_table_the_page_says_what_to_do(client: TestClient, cubic: Any) -> None:
    page = client.get(f"/samples/{cubic['id']}/series")
    assert page.status_code == 200
    assert "No series yet" in page.text
    assert "drop a set of CIFs" in page.text


def test_cells_give_the_expansion_and_are_kept(client: TestClient, cubic: Any) -> None:
    answer = change(client, cubic, table=CUBIC)
    assert answer.status_code == 200, answer.text
    given = answer.json()
    # 20 × 10⁻⁶/K along every axis at the reference, three times that for the volume.
    assert "At 300 K: 20.0" in given["headline"]
    assert "volume 60.0" in given["headline"]
    assert given["sample"]["document"]["series"][0]["table"] == CUBIC
    page = client.get(f"/samples/{cubic['id']}/series?at=300")
    assert "Expansion at 300 K" in words(page.text)
    assert page.text.count('class="chart"') == 2


def test_a_value_beyond_the_measured_range_is_marked(client: TestClient, cubic: Any) -> None:
    change(client, cubic, table=CUBIC)
    answer = client.get(f"/api/samples/{cubic['id']}/series?at=410").json()
    assert "410 K lies beyond what was measured" in answer["headline"]
    assert "no uncertainty covers that" in words(answer["result"])
    assert "beyond what was measured" not in client.get(f"/api/samples/{cubic['id']}/series?at=390").json()["headline"]


def test_the_tensor_at_a_temperature_is_used_as_the_sample_s_own(client: TestClient, cubic: Any) -> None:
    given = change(client, cubic, table=CUBIC).json()
    used = client.post(
        f"/api/samples/{cubic['id']}/series/use", json={"parent": given["sample"]["revision"], "at": 300}
    )
    assert used.status_code == 200, used.text
    sample = used.json()["sample"]
    assert sample["derived"]["property"]["key"] == "thermal_expansion"
    assert np.array(sample["derived"]["state"]["matrix"]) == pytest.approx(20.0 * np.eye(3), abs=1e-6)
    assert "at 300 K" in sample["document"]["properties"][-1]["source"]


def test_a_bad_table_is_told_by_line_and_column_and_nothing_is_kept(client: TestClient, cubic: Any) -> None:
    refused = change(client, cubic, table="temperature,a\n300,five\nx,5\n")
    assert refused.status_code == 422
    error = refused.json()["error"]
    assert error["field"].startswith("change.table")
    assert {(problem["line"], problem["column"]) for problem in error["detail"]["problems"]} == {
        (2, "a"),
        (3, "temperature"),
    }
    assert client.get(f"/api/samples/{cubic['id']}").json()["revision"] == cubic["revision"]


def test_too_high_a_degree_is_refused_at_its_field(client: TestClient, cubic: Any) -> None:
    given = change(client, cubic, table=CUBIC).json()["sample"]
    refused = change(client, given, degree=6)
    assert refused.status_code == 422
    assert refused.json()["error"]["field"] == "change.degree"


def test_angles_of_faces_and_strains_are_followed(client: TestClient) -> None:
    listed = client.get("/api/samples").json()
    sample = client.get(f"/api/samples/{next(e['id'] for e in listed if e['group'] == '2/m')}").json()
    # Invented: only the angle β moves, by 0.01° per 10 K. The faces (100) and (001) meet at 180° − β.
    table = "temperature,a,b,c,beta\n" + "".join(
        f"{t},9.83(1),6.41(1),7.27(1),{107.4 + 0.001 * (t - 300):.4f}(5)\n" for t in (200, 300, 400)
    )
    answer = change(client, sample, table=table, faces=[["(1 0 0)", "(0 0 1)"]], reference=300)
    assert answer.status_code == 200, answer.text
    text = words(answer.json()["result"])
    assert "n(100) to n(001) 72.6000" in text
    assert "Strain (stretch) from 300.0" in text
    refused = change(client, answer.json()["sample"], faces=[["(0 0 0)", "(0 0 1)"]])
    assert refused.status_code == 422 or "has only zeros" in refused.json()["problem"]["message"]


def test_a_set_of_cifs_gives_cells_and_temperatures(client: TestClient, cubic: Any) -> None:
    def cif(t: float) -> str:
        edge = EDGE * (1 + RATE * (t - 300))
        return (
            f"data_at{t:.0f}\n"
            + "".join(f"_cell_length_{name} {edge:.5f}(2)\n" for name in "abc")
            + "_cell_angle_alpha 90\n_cell_angle_beta 90\n_cell_angle_gamma 90\n"
            f"_space_group_name_H-M_alt 'P m -3 m'\n_diffrn_ambient_temperature {t}\n"
        )

    answer = client.post(
        f"/api/samples/{cubic['id']}/series/cifs",
        json={"parent": cubic["revision"], "texts": [cif(t) for t in (200, 300, 400)]},
    )
    assert answer.status_code == 200, answer.text
    assert "20.0" in answer.json()["headline"]
    missing = client.post(
        f"/api/samples/{cubic['id']}/series/cifs",
        json={"parent": answer.json()["sample"]["revision"], "texts": [cif(200), "data_x\n_cell_length_a 5\n"]},
    )
    assert missing.status_code == 422
    assert missing.json()["error"]["field"].startswith("cifs[1]")


def test_an_old_revision_is_not_overwritten(client: TestClient, cubic: Any) -> None:
    assert change(client, cubic, table=CUBIC).status_code == 200
    assert change(client, cubic, table="").status_code == 409
