"""The plain page in a browser."""

from __future__ import annotations

import pytest
from axe_playwright_python.sync_playwright import Axe
from playwright.sync_api import Page, expect


def test_it_shows_its_heading_and_leads_to_the_openapi_document(page: Page) -> None:
    page.goto("/calls")
    expect(page.get_by_role("heading", level=1)).to_be_visible()
    expect(page.get_by_role("link", name="OpenAPI document")).to_have_attribute("href", "/openapi.json")
    paper = page.evaluate("getComputedStyle(document.documentElement).backgroundColor")
    assert paper == "rgb(243, 243, 234)", "the style sheet arrived"


@pytest.mark.parametrize("scheme", ["light", "dark"])
@pytest.mark.parametrize("width", [390, 1024, 2560])
def test_it_fits_and_has_no_accessibility_violation(page: Page, width: int, scheme: str) -> None:
    page.set_viewport_size({"width": width, "height": 844})
    page.emulate_media(color_scheme="dark" if scheme == "dark" else "light")
    page.goto("/calls")
    assert page.evaluate("document.documentElement.scrollWidth - window.innerWidth") <= 0
    violations = Axe().run(page).response["violations"]
    assert [violation["id"] for violation in violations] == []


def test_the_plotting_script_draws_under_the_policy(page: Page) -> None:
    """The scene's kinds of trace work without inline scripts and without `eval`."""
    page.goto("/calls")
    page.evaluate("document.addEventListener('securitypolicyviolation', e => console.error(e.violatedDirective))")
    page.add_script_tag(url="/static/plotly.min.js")
    # From a timer, because what a driver evaluates itself is exempt from the policy.
    page.evaluate(
        """() => {
        const ground = document.createElement('div');
        ground.style.cssText = 'width: 300px; height: 300px';
        document.body.append(ground);
        const corners = {x: [0, 1, 0, 0], y: [0, 0, 1, 0], z: [0, 0, 0, 1]};
        const traces = [
            {type: 'mesh3d', ...corners, i: [0, 0, 0, 1], j: [1, 2, 3, 2], k: [2, 3, 1, 3]},
            {type: 'scatter3d', mode: 'lines', ...corners},
        ];
        setTimeout(() => Plotly.newPlot(ground, traces).then(() => { document.title = 'drawn'; },
                                                             error => console.error(String(error))), 0);
    }"""
    )
    expect(page).to_have_title("drawn", timeout=20_000)
    expect(page.locator(".gl-container canvas").first).to_be_visible()
