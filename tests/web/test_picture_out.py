"""Pictures as SVG, read by the standard library's parser of XML and held against the surfaces that they show."""

from __future__ import annotations

import re
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest

from app.errors import InputError
from app.tensor.pose import pose_from_matrix
from app.web.picture_out import Words, clean_text, draw_picture, draw_stereogram_picture, look_along
from app.web.picture_style import THEMES, read_tokens, write_style
from app.web.scene import LIFT
from app.web.turning import View
from tests.web.paths import PIXELS, read_path
from tests.web.subjects import ELLIPSOID, ONE_SHEET, PATTERNS, make_subject, random_rotation, random_view

SVG = "{http://www.w3.org/2000/svg}"
WORDS = Words("Invented", "Conductivity, W/(m·K)", ["Revision 3."])
POSE = pose_from_matrix(random_rotation(4))
KEPT = {"matrix": POSE.matrix.tolist()}


def draw(subject: Any, kind: Any = "quadric", view: View | None = None, words: Words = WORDS, **more: Any) -> str:
    options = {"width": 160.0, "unit": "mm", "theme": "light", **more}
    return draw_picture(subject, kind, POSE, KEPT, view or look_along("usual"), words, **options)


def read(svg: str) -> ElementTree.Element:
    return ElementTree.fromstring(svg.encode())


def list_classes(root: ElementTree.Element) -> list[str]:
    return [entry.get("class", "") for entry in root.iter()]


@pytest.mark.parametrize(
    ("width", "unit"), [(160.0, "mm"), (20.0, "mm"), (1200.0, "mm"), (100.0, "px"), (8000.0, "px")]
)
def test_the_size_is_what_was_asked_for_and_undistorted(width: float, unit: Any) -> None:
    root = read(draw(make_subject(ELLIPSOID), width=width, unit=unit))
    assert root.get("width") == f"{width:g}{unit}"
    height = float((root.get("height") or "").removesuffix(unit))
    _, _, across, down = map(float, (root.get("viewBox") or "").split())
    assert height / width == pytest.approx(down / across, rel=1e-4)


@pytest.mark.parametrize(
    ("width", "unit"), [(19.9, "mm"), (1201, "mm"), (99, "px"), (8001, "px"), (float("nan"), "mm")]
)
def test_a_size_out_of_bounds_is_refused(width: float, unit: Any) -> None:
    with pytest.raises(InputError) as caught:
        draw(make_subject(ELLIPSOID), width=width, unit=unit)
    assert caught.value.field == "width"


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_only_lines_on_the_near_side_are_drawn(seed: int) -> None:
    """Where a line is drawn, the near point of the ellipsoid there has a value of the line: a line behind has not.

    The near point is the larger root of the quadratic on the line of sight, solved here.
    """
    view = random_view(seed)
    subject = make_subject(ELLIPSOID)
    scene = subject.scene("quadric")
    root = read(draw(subject, view=view))
    paths = [entry for entry in root.iter(f"{SVG}path") if re.match(r"lines ", entry.get("class", ""))]
    points = np.concatenate([line for entry in paths for line in read_path(entry.get("d", ""))])
    assert len(points) > 300
    # A line is drawn a little outside the surface.
    points = points / (1.0 + LIFT)
    screen = view.screen(POSE.matrix)
    form = screen @ (ELLIPSOID / scene.factor**2) @ screen.T
    two = form[2, 2]
    one = 2.0 * (points @ form[:2, 2])
    rest = np.einsum("ni,ij,nj->n", points, form[:2, :2], points) - 1.0
    # Next to the outline a line may run on around it by as much as it lies outside the surface, 0.4 %.
    inside = (one**2 - 4.0 * two * rest) / (4.0 * two) > 0.02
    height = (-one + np.sqrt(np.maximum(one**2 - 4.0 * two * rest, 0.0))) / (2.0 * two)
    near = np.column_stack([points, height])
    values = scene.factor**2 / np.einsum("ni,ni->n", near, near)
    off = np.abs(values[:, None] - scene.levels.values).min(axis=1)[inside]
    assert inside.mean() > 0.5
    # Printed to a tenth of a unit; of a line behind, half would be off by a quarter of the step or more.
    assert np.quantile(off / scene.levels.step, 0.995) < 0.1


@pytest.mark.parametrize("kind", ["quadric", "value", "flux"])
@pytest.mark.parametrize("pattern", PATTERNS)
def test_every_surface_of_every_pattern_is_drawn_as_vectors_that_ask_for_nothing(pattern: str, kind: Any) -> None:
    svg = draw(make_subject(PATTERNS[pattern]), kind)
    root = read(svg)
    names = list_classes(root)
    assert "body" in names
    assert any(name.startswith("lines") for name in names)
    minus = any("minus" in name for name in names if name.startswith("lines"))
    assert minus == (kind != "flux" and pattern != "ellipsoid")
    assert {entry.tag.removeprefix(SVG) for entry in root.iter()} <= {
        "svg",
        "title",
        "desc",
        "style",
        "rect",
        "path",
        "text",
        "tspan",
    }
    assert "url(" not in svg
    assert "href" not in svg
    assert "var(" not in svg
    # Nothing that waits for a hand.
    assert not any(re.search("hand|hold", name) for name in names)


def test_an_open_surface_shows_where_it_was_cut() -> None:
    assert "rim" in list_classes(read(draw(make_subject(ONE_SHEET))))
    assert "rim" not in list_classes(read(draw(make_subject(ELLIPSOID))))


def test_a_tensor_without_a_surface_still_has_its_block_and_words() -> None:
    root = read(draw(make_subject(np.zeros((3, 3)))))
    assert "body" not in list_classes(root)
    assert "edge" in list_classes(root)


@pytest.mark.parametrize(("sight", "axes"), [("x", (1, 2)), ("y", (None, 2)), ("z", (0, 1))])
def test_a_view_from_an_axis_has_it_toward_the_reader(sight: Any, axes: Any) -> None:
    view = look_along(sight)
    np.testing.assert_array_equal(view.matrix[2], np.eye(3)["xyz".index(sight)])
    assert np.linalg.det(view.matrix) == pytest.approx(1.0)
    np.testing.assert_array_equal(view.matrix[1], np.eye(3)[axes[1]])


def test_the_words_say_frame_unit_and_property_and_hostile_ones_stay_words() -> None:
    hostile = Words('</title><script>alert(1)</script>"><img onerror=x>\x00\x0b', "]]> & <b>", ["</svg>" * 40])
    root = read(draw(make_subject(ELLIPSOID), words=hostile))
    text = " ".join(" ".join(entry.itertext()) for entry in root.iter(f"{SVG}text"))
    assert "</title><script>alert(1)</script>" in text
    assert root.find(f"{SVG}script") is None
    plain = " ".join(" ".join(entry.itertext()) for entry in read(draw(make_subject(ELLIPSOID))).iter(f"{SVG}text"))
    for wanted in (
        "Invented",
        "W/(m·K)",
        "x3 along c, x2 along b*",
        "Specimen frame: z",
        "long is small",
        "Lines of equal",
    ):
        assert wanted in plain, wanted
    assert clean_text("a<b>&\"'\x07\ufffe") == "a&lt;b&gt;&amp;&quot;&#x27;"


def test_long_names_stay_within_the_picture() -> None:
    words = Words("W" * 400, "i " * 300, ["x" * 3000])
    root = read(draw(make_subject(ELLIPSOID), words=words))
    captions = [entry for entry in root.iter(f"{SVG}text") if "caption" in entry.get("class", "")]
    assert len(captions) < 24
    assert max(len("".join(entry.itertext())) for entry in captions) < 150


@pytest.mark.parametrize("theme", THEMES)
def test_a_theme_has_its_own_colours_and_no_others(theme: Any) -> None:
    svg = draw(make_subject(ONE_SHEET), theme=theme)
    used = {colour.lower() for colour in re.findall(r"#[0-9a-fA-F]{6}\b", svg)}
    assert used <= {colour for colour in read_tokens(theme).values() if colour.startswith("#")}
    if theme == "print":
        # Black on white: every colour is a grey.
        assert all(colour[1:3] == colour[3:5] == colour[5:7] for colour in used)
    assert read_tokens(theme)["paper"] in used


def test_styles_keep_to_their_scope() -> None:
    for sheet in ("tensor.css", "stereogram.css"):
        style = write_style(sheet, None, "picture")
        for selectors in re.findall(r"([^{}]+)\{", style):
            assert all(one.strip().startswith(".picture ") for one in selectors.split(",")), selectors
        assert "@media" not in style


def test_the_stereogram_stands_alone_and_nothing_in_it_can_be_pressed() -> None:
    svg = draw_stereogram_picture(make_subject(ELLIPSOID), POSE, WORDS, width=900, unit="px", theme="print")
    root = read(svg)
    assert root.get("width") == "900px"
    names = list_classes(root)
    assert "stereo-rim" in names
    assert sum(name.startswith("stereo-mark specimen") for name in names) == 3
    assert sum(name.startswith("stereo-mark principal") for name in names) == 3
    assert "tabindex" not in svg
    assert "var(" not in svg
    # The principal axes stand where the equal-angle projection puts them: tan(θ/2), x3 toward and x2 to the right.
    axes = np.linalg.eigh(ELLIPSOID)[1].T
    expected = []
    for axis in axes * np.where(axes[:, 2:] < 0, -1.0, 1.0):
        radius = 100.0 * np.tan(np.arccos(axis[2]) / 2.0)
        flat = np.array([axis[1], axis[0]]) / np.hypot(axis[0], axis[1])
        expected.append(radius * flat)
    marks = [
        entry.get("transform", "") for entry in root.iter() if entry.get("class", "").startswith("stereo-mark princ")
    ]
    places = [[float(number) for number in re.findall(r"-?[\d.]+", text)] for text in marks]
    np.testing.assert_allclose(sorted(places), sorted(np.array(expected).tolist()), atol=0.06)


def test_one_unit_of_the_drawing_is_what_the_scene_says() -> None:
    """The fill reaches as far as the ellipsoid does: 1/√(smallest value across the sight), to scale."""
    subject, view = make_subject(ELLIPSOID), look_along("usual")
    root = read(draw(subject, view=view))
    (body,) = [entry for entry in root.iter(f"{SVG}path") if entry.get("class") == "body"]
    numbers = np.array([float(number) for number in re.findall(r"-?[\d.]+", body.get("d", ""))]).reshape(-1, 2)
    screen = view.screen(POSE.matrix)
    scene = subject.scene("quadric")
    # Half extents of an ellipsoid along the axes of the screen: √((S A⁻¹ Sᵀ)ii).
    expected = 2 * np.sqrt(np.diag(screen @ np.linalg.inv(ELLIPSOID) @ screen.T))[:2] * scene.factor * PIXELS
    np.testing.assert_allclose(np.ptp(numbers, axis=0), expected, rtol=0.01)
