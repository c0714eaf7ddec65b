"""Line charts: every point at its place, ticks round, what is unknown not drawn."""

from __future__ import annotations

import re
from xml.etree import ElementTree

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from app.web.charts import Curve, Points, draw_chart, list_ticks


def points_of(path: str) -> np.ndarray:
    return np.array([[float(part) for part in pair] for pair in re.findall(r"(-?[\d.]+) (-?[\d.]+)", path)])


def draw(*curves: Curve, **more: object) -> ElementTree.Element:
    text = draw_chart(list(curves), x_name="T, K", y_name="10⁻⁶/K", title="A <title> & more", **more)  # type: ignore[arg-type]
    return ElementTree.fromstring(text)


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6), st.integers(2, 12))
def test_ticks_are_round_and_within_the_bounds(low: float, span: float, most: int) -> None:
    high = low + span
    ticks = list_ticks(low, high, most)
    assert len(ticks) <= most + 1
    assert np.all(ticks >= low - 1e-6 * span)
    assert np.all(ticks <= high + 1e-6 * span)
    if len(ticks) > 1:
        step = ticks[1] - ticks[0]
        lead = step / 10 ** np.floor(np.log10(step) + 1e-9)
        assert min(abs(lead - round_one) for round_one in (1, 2, 5, 10)) < 1e-4


def test_a_straight_line_is_drawn_straight_between_its_ends() -> None:
    x = np.linspace(0, 10, 5)
    figure = draw(Curve(x, 3 * x + 1))
    path = points_of(figure.find("path[@class='chart-curve solid']").get("d"))  # type: ignore[union-attr,arg-type]
    slopes = np.diff(path[:, 1]) / np.diff(path[:, 0])
    assert slopes == pytest.approx(np.full(4, slopes[0]), abs=0.01)
    assert path[0, 1] > path[-1, 1]


def test_a_gap_breaks_the_line_and_an_unknown_band_is_not_drawn() -> None:
    x = np.arange(5.0)
    figure = draw(Curve(x, np.array([0, 1, np.nan, 1, 0]), spread=np.full(5, np.nan)))
    line = figure.find("path[@class='chart-curve solid']").get("d")  # type: ignore[union-attr]
    assert line is not None
    assert line.count("M") == 2
    assert figure.find("path[@class='chart-band']") is None


def test_a_band_is_two_standard_deviations_to_either_side() -> None:
    x = np.array([0.0, 1.0])
    figure = draw(Curve(x, np.array([10.0, 10.0]), spread=np.array([1.0, 1.0])), Curve(x, np.array([8.0, 12.0])))
    band = points_of(figure.find("path[@class='chart-band']").get("d"))  # type: ignore[union-attr,arg-type]
    line = points_of(figure.findall("path[@class='chart-curve solid']")[1].get("d"))  # type: ignore[arg-type]
    # The second curve runs from 8 to 12, which are 10 − 2σ and 10 + 2σ.
    assert {round(value, 1) for value in band[:, 1]} == {round(value, 1) for value in line[:, 1]}


def test_what_lies_beyond_the_measured_range_is_hatched() -> None:
    x = np.linspace(0, 10, 11)
    assert draw(Curve(x, x), measured=(0.0, 10.0)).find("path[@class='chart-beyond']") is None
    figure = draw(Curve(x, x), measured=(2.0, 8.0))
    assert len(figure.findall("path[@class='chart-beyond']")) == 2


def test_names_at_the_ends_do_not_overlap_and_text_is_escaped() -> None:
    x = np.array([0.0, 1.0])
    figure = draw(*(Curve(x, np.array([0.0, 1.0 + 1e-3 * k]), f"p{k}") for k in range(1, 4)), Curve(x, x - 5, "a < b"))
    places = sorted(float(text.get("y", "0")) for text in figure.findall("text[@class='chart-end']"))
    assert min(np.diff(places)) >= 14.9
    assert figure.get("aria-label") == "A <title> & more"


@pytest.mark.parametrize("value", [0.0, 1e-30, -1e30])
def test_a_constant_draws(value: float) -> None:
    x = np.array([0.0, 1.0])
    figure = draw(Curve(x, np.full(2, value)), marked=0.5)
    assert "nan" not in ElementTree.tostring(figure, encoding="unicode").lower()


def test_points_have_bars_of_one_standard_deviation() -> None:
    text = draw_chart(
        [],
        [Points(np.array([0.0, 1.0]), np.array([0.0, 2.0]), np.array([1.0, 1.0]))],
        x_name="x",
        y_name="y",
        title="t",
    )
    figure = ElementTree.fromstring(text)
    rings = figure.findall("g/circle")
    bars = [float(part) for part in re.findall(r"[ V](-?[\d.]+)", figure.find("path[@class='chart-bar']").get("d"))]  # type: ignore[union-attr,arg-type]
    apart = float(rings[0].get("cy", "0")) - float(rings[1].get("cy", "0"))
    # Two units apart, and a bar reaches one unit up and down.
    assert bars[1] - bars[0] == pytest.approx(-apart, abs=0.3) or abs(bars[1] - bars[0]) == pytest.approx(
        apart, abs=0.3
    )
