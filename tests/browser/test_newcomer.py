"""A newcomer's whole job on a triclinic sample of their own, by pointing: every field and button is clicked.

The readings are drawn once from an invented tensor by its definition, apart from the tool's own code, so the test knows
what the pages must come to.
"""

from __future__ import annotations

import re
from typing import Any

import httpx
import numpy as np
from playwright.sync_api import Page, expect

from tests.processes import Served

CELL = {"a": 7.31, "b": 8.86, "c": 6.05, "alpha": 83.2, "beta": 106.9, "gamma": 97.4}
TRUE = np.array([[3.10, 0.22, -0.35], [0.22, 4.05, 0.18], [-0.35, 0.18, 2.40]])
DIRECTIONS = ("[1 0 0]", "[0 1 0]", "[0 0 1]", "[1 1 0]", "[1 0 1]", "[0 1 1]", "[1 -1 0]", "[1 0 -1]", "[1 1 1]")


def build_basis() -> np.ndarray:
    """a, b, c as columns with x3 along c and x2 along b*, by the definition of both."""
    a, b, c = CELL["a"], CELL["b"], CELL["c"]
    alpha, beta, gamma = (np.deg2rad(CELL[name]) for name in ("alpha", "beta", "gamma"))
    # First in any frame: c along z, a in the plane of x and z.
    first = np.array([a * np.sin(beta), 0.0, a * np.cos(beta)])
    along_z = b * np.cos(alpha)
    along_x = (a * b * np.cos(gamma) - first[2] * along_z) / first[0]
    second = np.array([along_x, np.sqrt(b**2 - along_x**2 - along_z**2), along_z])
    # b* is across a and c, which here is y; so x1 is x and x3 is z already.
    return np.column_stack([first, second, np.array([0.0, 0.0, c])])


def write_table() -> str:
    """Readings along rows with seeded noise of 0.01 on the invented tensor."""
    random = np.random.default_rng(12)
    basis = build_basis()
    lines = ["kind,direction,value,sigma,bar"]
    for number, text in enumerate(DIRECTIONS):
        direction = basis @ np.array([float(index) for index in text.strip("[]").split()])
        direction /= np.linalg.norm(direction)
        value = direction @ TRUE @ direction + random.normal(scale=0.01)
        lines.append(f"along,{text},{value:.3f},0.01,B{number + 1}")
    return "\n".join(lines)


def click_and_type(page: Page, selector: str, text: str) -> None:
    """Point at a field, mark what is in it by three clicks, and type."""
    field = page.locator(selector)
    field.click(click_count=3)
    page.keyboard.type(text)


def fetch(served: Served, sample: str) -> Any:
    return httpx.get(f"{served.url}api/samples/{sample}").json()


def test_a_newcomer_gets_to_the_workshop_sheet_by_pointing(page: Page, served: Served) -> None:
    page.goto("/samples", wait_until="networkidle")
    click_and_type(page, "#new-name", "boule T3")
    page.locator("#new-name").locator("xpath=ancestor::form").get_by_role("button").click()
    page.wait_for_url(re.compile("/tensor$"))
    page.wait_for_load_state("networkidle")
    sample = page.url.split("/")[-2]

    # The crystal.
    page.locator("#crystal > summary").click()
    for name, value in CELL.items():
        click_and_type(page, f"#cell-{name}", str(value))
    click_and_type(page, "#group", "-1")
    page.locator("#crystal-form button[type=submit]").first.click()
    expect(page.locator("#strip-group")).to_contain_text(re.compile("[−-]1"))
    page.locator("#crystal > summary").click()

    # The property.
    page.get_by_role("button", name="Choose a property").click()
    click_and_type(page, "#kind", "Thermal conductivity")
    click_and_type(page, "#unit", "W/(m K)")
    page.locator("#property-dialog button[type=submit]").click()
    expect(page.locator("#property-dialog")).to_be_hidden()

    # The readings, pasted.
    page.locator("nav a[href$='/readings']").click()
    page.wait_for_load_state("networkidle")
    page.get_by_text("As text", exact=True).click()
    page.locator("#table").click()
    page.locator("#table").fill(write_table())
    page.get_by_role("button", name="Take this table").click()
    expect(page.get_by_role("heading", level=1)).to_contain_text("9 readings give 6 cells")
    page.locator(".use button").click()
    page.wait_for_url(re.compile("/tensor$"))
    found = fetch(served, sample)["document"]["properties"][0]["tensor"]["free"]
    for row, column in ((0, 0), (0, 1), (0, 2), (1, 1), (1, 2), (2, 2)):
        # Nine readings of σ 0.01 on six cells: none is known worse than to 0.03.
        assert abs(found[f"{row + 1}{column + 1}"] - TRUE[row, column]) < 0.06, (row, column)

    # A part, two sightings, the workshop's sheet.
    page.locator("nav a[href$='/cut']").click()
    page.wait_for_load_state("networkidle")
    page.get_by_role("button", name="Make a part").click()
    expect(page.locator("#target-direction")).to_be_visible()
    click_and_type(page, "#target-direction", "(1 1 0)")
    page.locator("#target-direction").press("Tab")
    expect(page.locator("#headline")).to_contain_text("along n(110)")
    dials = {"(1 0 0)": ("10", "-3", "2"), "(0 1 0)": None}
    normals = np.linalg.inv(build_basis())
    angle = np.rad2deg(np.arccos(normals[0] @ normals[1] / np.linalg.norm(normals[0]) / np.linalg.norm(normals[1])))
    dials["(0 1 0)"] = (f"{10 - angle:.2f}", "-3", "2")
    for direction, values in dials.items():
        page.get_by_label("Direction of a new sighting").click()
        page.keyboard.type(direction)
        for number, value in enumerate(values or ()):
            page.locator(f"#sighting-new-{number}").click()
            page.keyboard.type(value)
        page.get_by_role("button", name="Take the sightings").click()
        expect(page.get_by_label("Direction of a new sighting")).to_have_value("")
    expect(page.locator(".settings .dials")).to_contain_text("turn")
    page.get_by_role("link", name="Sheet for the workshop").click()
    page.wait_for_url(re.compile("/cut/sheet$"))
    page.get_by_role("button", name="Freeze this sheet").click()
    page.wait_for_url(re.compile(r"/sheets/\d+$"))
    expect(page.locator(".paper-sheet")).to_contain_text("boule T3")
    expect(page.locator(".paper-sheet")).to_contain_text("Local rules and licensed practice")
