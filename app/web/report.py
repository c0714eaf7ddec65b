"""A report of a sample as one file that opens with no server: numbers, pictures, and the scene to look around in.

The file holds its style, its data and the plotting script once, and forbids itself every request by a policy in its
head, which also lets no script run but the two that are in it by their hashes. Whatever a sample's texts say, they
stand as text.
"""

from __future__ import annotations

import base64
import hashlib
from dataclasses import replace
from functools import cache
from typing import Any, Final

import numpy as np
import numpy.typing as npt
from markupsafe import Markup

from app.errors import HalfturnError
from app.store import Store
from app.store.document import KeptProperty, SampleDocument, change_document, current_property
from app.store.revisions import Kept
from app.store.sheets import PART_KEY
from app.tensor.pose import read_pose
from app.tensor.surface import SurfaceKind
from app.version import VERSION
from app.web.cut_view import describe_cut
from app.web.kept import print_own_unit
from app.web.kept_parts import list_parts
from app.web.live import subjects
from app.web.pages import embed_json, templates
from app.web.picture_out import BOX, draw_poles, draw_scene, look_along, write_surface_style
from app.web.picture_style import SCENE_SHEET, STEREOGRAM_SHEET, Theme, read_tokens, write_style
from app.web.posed import describe_pose, render_cells
from app.web.readings_view import describe_kept
from app.web.report_scene import build_scene_data
from app.web.resources import plotly_script, static_folder
from app.web.sheet_page import build_sheet
from app.web.stages import list_stages
from app.web.tables_out import print_conditions

FloatArray = npt.NDArray[np.float64]

MOST_PARTS: Final = 12
MOST_PROPERTIES: Final = 24
MOST_READINGS: Final = 2000
"""A report is to be read; a longer table is handed over as CSV, which the report then says."""


def write_report(store: Store, kept: Kept, *, with_scene: bool = True) -> str:
    """The report of a revision's property that is looked at, as one HTML document.

    Args:
        store: where its sheets and the stages of its parts are kept.
        kept: the revision.
        with_scene: whether the plotting script and the scene are in it.

    Raises:
        InputError: the sample has no property, or its crystal or tensor cannot be computed.
    """
    sheet = build_sheet(kept)
    document = kept.document
    subject = subjects.take(document)
    given = document.plain()["pose"]
    pose = read_pose(given, subject.crystal)
    wanted = document.looking.get("surface")
    kind: SurfaceKind = wanted if wanted in ("quadric", "value", "flux") else "quadric"
    view = look_along("usual")
    described = describe_pose(subject, kind, pose, given, view)
    readings = _describe_readings(kept)
    scripts = (_read_plotting_script(), _read_own_script()) if with_scene else ()
    left, top, right, bottom = BOX
    return templates.get_template("report.html").render(
        version=VERSION,
        policy=_write_policy(scripts),
        style=Markup(write_page_style()),
        sheet=sheet,
        sample=document.name,
        notes=document.notes,
        tags=list(document.tags),
        locked=_list_locked(sheet["cells"]),
        picture=Markup(draw_scene(subject, kind, pose, view, described["overlay"])),
        box=f"{left:g} {top:g} {right - left:g} {bottom - top:g}",
        surface=kind,
        stereogram=Markup(draw_poles(subject, pose)),
        readings=readings,
        others=_describe_others(document),
        parts=_describe_parts(store, kept),
        more_parts=max(0, len(document.parts) - MOST_PARTS),
        sheets=_list_sheets(store, kept.sample_id),
        scripts=[Markup(script) for script in scripts],
        scene=embed_json(build_scene_data(subject, kind, pose, view)) if with_scene else None,
    )


def _write_policy(scripts: tuple[str, ...]) -> str:
    """No request anywhere; of scripts only these."""
    hashes = [f"'sha256-{base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()}'" for text in scripts]
    allowed = " ".join(hashes) or "'none'"
    return (
        f"default-src 'none'; script-src {allowed}; style-src 'unsafe-inline'; img-src data: blob:; "
        "base-uri 'none'; form-action 'none'"
    )


@cache
def _read_plotting_script() -> str:
    text = plotly_script().read_text(encoding="utf-8")
    # What ends or confuses a script element must not stand in one; the minified file has none of it.
    lowered = text.lower()
    if "</script" in lowered or "<!--" in lowered:
        text = text.replace("<!--", "<\\!--").replace("</script", "<\\/script").replace("</SCRIPT", "<\\/SCRIPT")
    return text.replace("\r\n", "\n").replace("\r", "\n")


def _read_own_script() -> str:
    return (static_folder() / "report-scene.js").read_text(encoding="utf-8").replace("\r\n", "\n")


@cache
def write_page_style() -> str:
    """The style of the report: the pages' tokens, the rules of their pictures, and its own sheet."""
    parts = []
    for theme, before, after in (
        ("light", "", ""),
        ("dark", "@media (prefers-color-scheme: dark) {", "}"),
        ("print", "@media print {", "}"),
    ):
        tokens = read_tokens(_as_theme(theme))
        rules = ";".join(f"--{name}:{value}" for name, value in tokens.items())
        parts.append(f"{before}:root{{{rules}}}{after}")
    parts.append(write_style(SCENE_SHEET, None, "picture") + write_surface_style(None, "picture"))
    parts.append(write_style(STEREOGRAM_SHEET, None, "poles"))
    parts.append((static_folder() / "report.css").read_text(encoding="utf-8"))
    return "\n".join(parts).replace("</", "<\\/")


def _as_theme(name: str) -> Theme:
    return "dark" if name == "dark" else "print" if name == "print" else "light"


def _list_locked(cells: list[list[dict[str, Any]]]) -> list[dict[str, str]]:
    """The cells that symmetry holds, with what they equal and why; cells of one reason stand together."""
    found: dict[tuple[str, str], list[str]] = {}
    for cell in (cell for row in cells for cell in row):
        if cell["state"] == "free":
            continue
        equals = "0" if cell["state"] == "zero" else f"= {cell['equals']}"
        found.setdefault((equals, str(cell["because"])), []).append(cell["label"])
    return [
        {"labels": ", ".join(labels), "equals": equals, "because": because}
        for (equals, because), labels in found.items()
    ]


def _describe_readings(kept: Kept) -> dict[str, Any]:
    """The readings as the Readings page shows them, and how many there are too many for a report."""
    content = describe_kept(kept)
    content["more"] = max(0, len(content["grid"]) - MOST_READINGS)
    content["grid"] = content["grid"][:MOST_READINGS]
    content["residuals"] = content["residuals"][:MOST_READINGS]
    return content


def _look_at(document: SampleDocument, **looking: str) -> SampleDocument:
    return change_document(document, {"looking": {**document.plain()["looking"], **looking}})


def _describe_others(document: SampleDocument) -> list[dict[str, Any]]:
    """The other properties with their tensors in the crystal frame, or why there is none."""
    shown = current_property(document)
    return [
        _describe_other(document, kept)
        for kept in document.properties[:MOST_PROPERTIES]
        if shown is None or kept.id != shown.id
    ]


def _describe_other(document: SampleDocument, kept: KeptProperty) -> dict[str, Any]:
    unit = print_own_unit(kept.unit)
    about = {
        "name": kept.name,
        "unit": "" if unit == "1" else unit,
        "conditions": print_conditions(kept),
        "source": kept.source,
        "cells": None,
        "frame": "",
        "problem": None,
    }
    try:
        subject = subjects.take(_look_at(document, property=kept.id))
        return {**about, "cells": render_cells(subject), "frame": subject.crystal.frame_sentence}
    except HalfturnError as error:
        return {**about, "problem": error.message}


def _describe_parts(store: Store, kept: Kept) -> list[dict[str, Any]]:
    """The parts to cut, with what the Cut page says of each."""
    stages = list_stages(store)
    found = []
    for part in list_parts(kept.document)[:MOST_PARTS]:
        about = {
            "name": part["name"],
            "shape": part["shape"],
            "headline": "",
            "second_line": "",
            "dials": [],
            "size": "",
        }
        try:
            content = describe_cut(replace(kept, document=_look_at(kept.document, part=part["id"])), stages)
            about |= {"headline": content["headline"], "second_line": content["second_line"]}
            solutions = (content.get("settings") or {}).get("solutions") or []
            about["dials"] = solutions[0]["dials"] if solutions else []
        except HalfturnError as error:
            about |= {"headline": f"{part['name']} cannot be worked out.", "second_line": error.message}
        found.append(about)
    return found


def _list_sheets(store: Store, sample_id: str) -> list[dict[str, Any]]:
    return [
        {
            "number": sheet.number,
            "what": sheet.content.get("part") if sheet.content.get(PART_KEY) else sheet.content.get("property", ""),
            "revision": sheet.revision,
            "created": sheet.created[:16].replace("T", " "),
            "superseded": sheet.superseded,
        }
        for sheet in store.sheets.list(sample_id)
    ]
