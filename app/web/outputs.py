"""What goes out of a sample as a file: tables, CIF, solids, pictures, and a report that opens with no server.

Every file comes as an attachment under a cleaned name, with a type that no browser runs; a report is to be saved and
opened from where it was saved.
"""

from __future__ import annotations

import re
from dataclasses import replace
from typing import Any, Final, Literal

from fastapi import APIRouter, Query, Request, Response

from app.crystal.cif_writing import write_cif
from app.errors import InputError, located
from app.store.document import KeptProperty, change_document, current_property, find_property
from app.store.revisions import Kept
from app.tensor.pose import Pose, read_pose
from app.tensor.surface import SurfaceKind
from app.web import responses
from app.web.answers import JsonAnswer
from app.web.bodies import StrictRoute
from app.web.file_answers import FileAnswer
from app.web.kept import crystal_of, print_own_unit
from app.web.live import subjects
from app.web.picture_out import (
    LengthUnit,
    Sight,
    Words,
    draw_picture,
    draw_stereogram_picture,
    look_along,
)
from app.web.picture_style import Theme
from app.web.report import write_report
from app.web.samples import store_of
from app.web.scene import Subject
from app.web.showing import Link, read_link
from app.web.solid import (
    DEFAULT_DETAIL,
    DEFAULT_SIZE,
    FrameName,
    Solid,
    build_solid,
    describe_solid,
    write_glb,
    write_stl,
)
from app.web.tables_out import print_conditions, write_readings_in_use, write_tensors

_ERRORS: dict[int | str, dict[str, Any]] = {
    **responses.ERROR_RESPONSES,
    404: {"model": responses.ErrorAnswer, "description": "There is no such sample or revision"},
    503: {"model": responses.ErrorAnswer, "description": "Kept work cannot be read"},
}

router = APIRouter(prefix="/api/samples/{sample_id}/out", route_class=StrictRoute, responses=_ERRORS)

CSV: Final = "text/csv; charset=utf-8; header=present"
CIF: Final = "chemical/x-cif"
STL: Final = "model/stl"
GLB: Final = "model/gltf-binary"
SVG: Final = "image/svg+xml"
HTML: Final = "text/html; charset=utf-8"

Revision = Query(None, ge=1, description="number of the revision; the newest where it is left out")
PropertyId = Query(None, alias="property", max_length=500, description="id of the property; else the one looked at")
Surface = Query("quadric", description="which surface of the tensor")
AnySurface = Query(None, description="which surface; else the one looked at")
Looking = Query("usual", description="the usual view, or from x, y or z of the specimen")
WithScene = Query("yes", description="whether the scene is in it, which makes it about 5 MB")
Frame = Query("specimen", description="whose axes the file's x y z are: of the crystal frame, or of the specimen")
Size = Query(DEFAULT_SIZE, description="longest way through the centre, mm; 5 to 1000")
Detail = Query(DEFAULT_DETAIL, description="points per half circle; 16 to 240")
Width = Query(160.0, description="width of the picture in its unit: 20 to 1200 mm, or 100 to 8000 px")
Unit = Query("mm", description="unit of the width")
Colours = Query("light", description="light, dark, or print: black on white")


def _open(request: Request, sample_id: str, revision: int | None, property_id: str | None) -> Kept:
    """The revision, looking at the property that is asked for."""
    kept = store_of(request).samples.get(sample_id, revision)
    if property_id is None:
        return kept
    found = find_property(kept.document, property_id)
    looking = {**kept.document.plain()["looking"], "property": found.id}
    return replace(kept, document=change_document(kept.document, {"looking": looking}))


def _require_property(kept: Kept) -> KeptProperty:
    shown = current_property(kept.document)
    if shown is None:
        raise InputError(
            "This sample has no property yet, so there is nothing to hand over but its cell.",
            field="property",
            hint="Add one in the strip, under property and unit.",
        )
    return shown


def _pose(subject: Subject, kept: Kept) -> Pose:
    with located("pose"):
        return read_pose(kept.document.plain()["pose"], subject.crystal)


def _describe_file(media_type: str) -> dict[str, Any]:
    """What the OpenAPI document says of an answer that is a file."""
    content = {media_type.split(";")[0]: {"schema": {"type": "string", "format": "binary"}}}
    return {"response_class": Response, "responses": {200: {"description": "The file", "content": content}}}


@router.get(
    "/tensors.csv",
    summary="Every tensor of a sample as CSV, with σ, frames, conditions and covariances",
    **_describe_file(CSV),
)
def tensors_csv(sample_id: str, request: Request, revision: int | None = Revision) -> Response:
    """One number per row: nine cells in the crystal frame and in the specimen frame, free cells, covariance."""
    kept = _open(request, sample_id, revision, None)
    _require_property(kept)
    return FileAnswer(write_tensors(kept.document), CSV, kept.document.name, "tensors.csv")


@router.get(
    "/readings.csv",
    summary="The readings of a property as CSV, which the table of readings takes back",
    **_describe_file(CSV),
)
def readings_csv(
    sample_id: str, request: Request, revision: int | None = Revision, property_id: str | None = PropertyId
) -> Response:
    """Those in use; those set aside follow as comments with their reasons."""
    kept = _open(request, sample_id, revision, property_id)
    shown = _require_property(kept)
    return FileAnswer(write_readings_in_use(kept.document, shown), CSV, kept.document.name, "readings.csv")


@router.get(
    "/cell.cif",
    summary="The cell with its standard uncertainties and the group, as CIF",
    **_describe_file(CIF),
)
def cell_cif(sample_id: str, request: Request, revision: int | None = Revision) -> Response:
    """The crystal frame stands in a comment, since a CIF has no name for it; refused for a limiting group."""
    kept = _open(request, sample_id, revision, None)
    crystal = crystal_of(kept.document.crystal)
    remarks = [f"Sample: {kept.document.name}, revision {kept.revision}."]
    text = write_cif(crystal, name=kept.document.name, remarks=remarks)
    return FileAnswer(text, CIF, kept.document.name, "cell.cif")


def _build(
    kept: Kept, surface: SurfaceKind, frame: FrameName, size: float, detail: int
) -> tuple[Solid, dict[str, Any]]:
    """The solid, and what else its file says."""
    shown = _require_property(kept)
    subject = subjects.take(kept.document)
    pose = _pose(subject, kept) if frame == "specimen" else None
    matrix = None if pose is None else pose.matrix
    solid = build_solid(
        subject.tensor.estimate.matrix, surface, pose=matrix, unit=subject.unit, size=size, detail=detail
    )
    about = {
        "sample": kept.document.name,
        "revision": kept.revision,
        "property": shown.name,
        "unit": print_own_unit(shown.unit),
        "crystal_frame": subject.crystal.frame_sentence,
        "specimen_axes": None if matrix is None else matrix.tolist(),
    }
    return solid, about


@router.get("/surface", summary="What a solid of the surface would be: scale, extents in mm, whether it is closed")
def surface(
    sample_id: str,
    request: Request,
    revision: int | None = Revision,
    property_id: str | None = PropertyId,
    surface: SurfaceKind = Surface,
    frame: FrameName = Frame,
    size: float = Size,
    detail: int = Detail,
) -> JsonAnswer:
    """The same as the files state; ``scale`` is mm per unit of the surface's own length."""
    kept = _open(request, sample_id, revision, property_id)
    solid, about = _build(kept, surface, frame, size, detail)
    return JsonAnswer({**about, **describe_solid(solid)})


@router.get(
    "/surface.stl",
    summary="The surface of a tensor as a solid in mm, binary STL",
    **_describe_file(STL),
)
def surface_stl(
    sample_id: str,
    request: Request,
    revision: int | None = Revision,
    property_id: str | None = PropertyId,
    surface: SurfaceKind = Surface,
    frame: FrameName = Frame,
    size: float = Size,
    detail: int = Detail,
) -> Response:
    """The header of the file, its name and the header X-Halfturn-Scale state the scale."""
    kept = _open(request, sample_id, revision, property_id)
    solid, _ = _build(kept, surface, frame, size, detail)
    return _answer_solid(write_stl(solid), STL, kept, solid, "stl")


@router.get(
    "/surface.glb",
    summary="The surface of a tensor to look at, binary glTF 2.0",
    **_describe_file(GLB),
)
def surface_glb(
    sample_id: str,
    request: Request,
    revision: int | None = Revision,
    property_id: str | None = PropertyId,
    surface: SurfaceKind = Surface,
    frame: FrameName = Frame,
    size: float = Size,
    detail: int = Detail,
) -> Response:
    """One body with its own material for each sheet; the scene's extras state scale, frame and unit."""
    kept = _open(request, sample_id, revision, property_id)
    solid, about = _build(kept, surface, frame, size, detail)
    return _answer_solid(write_glb(solid, about), GLB, kept, solid, "glb")


def _answer_solid(content: bytes, media_type: str, kept: Kept, solid: Solid, ending: str) -> Response:
    # The last word of a name survives shortening, so what it states is one word.
    what = f"{solid.kind}-{solid.frame}-{solid.size:g}mm.{ending}"
    scale = solid.scale_text.encode("ascii", "backslashreplace").decode("ascii")
    return FileAnswer(content, media_type, kept.document.name, what, **{"X-Halfturn-Scale": scale})


def _describe(kept: Kept, shown: KeptProperty) -> Words:
    """What stands around a picture of a sample."""
    unit = print_own_unit(shown.unit)
    parts = [shown.name, "" if unit == "1" else unit, print_conditions(shown)]
    below = [f"Source: {shown.source.rstrip('.')}."] if shown.source else []
    below.append(f"Revision {kept.revision}, {kept.time[:16].replace('T', ' ')} UTC.")
    return Words(kept.document.name, ", ".join(part for part in parts if part), below)


@router.get(
    "/picture.svg",
    summary="The picture of the front page as SVG, at a chosen size",
    **_describe_file(SVG),
)
def picture_svg(
    sample_id: str,
    request: Request,
    property_id: str | None = PropertyId,
    surface: SurfaceKind | None = AnySurface,
    sight: Sight = Looking,
    width: float = Width,
    unit: LengthUnit = Unit,
    colours: Theme = Colours,
) -> Response:
    """The state is that of a link to the front page: ``revision``, ``pose``, ``hold``, ``view`` and ``at`` as there.

    Raises:
        InputError: something in the query cannot be taken; nothing is left out in silence.
    """
    link = read_link(request.query_params, store_of(request).samples, sample_id)
    notices = [notice for notice in link.notices if not notice.startswith("The link's property")]
    if notices:
        raise _refuse_notice(notices[0])
    kept = _open(request, sample_id, link.kept.revision, property_id)
    shown = _require_property(kept)
    subject = subjects.take(kept.document, link.at)
    view = look_along(sight) if "view" not in request.query_params and "hold" not in request.query_params else link.view
    given = kept.document.plain()["pose"] if link.pose is None else link.pose
    with located("pose"):
        pose = read_pose(given, subject.crystal)
    kind = surface or _find_surface(kept, link)
    words = _describe(kept, shown)
    drawn = draw_picture(subject, kind, pose, given, view, words, width=width, unit=unit, theme=colours)
    return FileAnswer(drawn, SVG, kept.document.name, f"{kind}.svg")


def _refuse_notice(notice: str) -> InputError:
    """What a page leaves out with a notice is refused here: a file shows what was asked for, or there is none."""
    found = re.match(r"The link's (\w+) was left out \((.*)\): ", notice)
    name, reason = (found[1], found[2]) if found else (None, notice)
    return InputError(
        f"The {name or 'address'} cannot be taken: {reason.rstrip('.')}.",
        field=name,
        hint="Correct it, or leave it out.",
    )


def _find_surface(kept: Kept, link: Link) -> SurfaceKind:
    wanted = link.surface or kept.document.looking.get("surface")
    found: SurfaceKind = wanted if wanted in ("quadric", "value", "flux") else "quadric"
    return found


@router.get(
    "/stereogram.svg",
    summary="The stereogram of a tensor as SVG, at a chosen size",
    **_describe_file(SVG),
)
def stereogram_svg(
    sample_id: str,
    request: Request,
    revision: int | None = Revision,
    property_id: str | None = PropertyId,
    width: float = Width,
    unit: LengthUnit = Unit,
    colours: Theme = Colours,
) -> Response:
    """Symmetry elements, planes of low index, principal axes, specimen axes and lines of equal value."""
    kept = _open(request, sample_id, revision, property_id)
    shown = _require_property(kept)
    subject = subjects.take(kept.document)
    drawn = draw_stereogram_picture(
        subject, _pose(subject, kept), _describe(kept, shown), width=width, unit=unit, theme=colours
    )
    return FileAnswer(drawn, SVG, kept.document.name, "stereogram.svg")


@router.get(
    "/report.html",
    summary="One file that opens with no server: numbers, pictures, and the scene",
    **_describe_file(HTML),
)
def report_html(
    sample_id: str,
    request: Request,
    revision: int | None = Revision,
    property_id: str | None = PropertyId,
    scene: Literal["yes", "no"] = WithScene,
) -> Response:
    """Without a script it still says everything but the scene; it asks for nothing from anywhere."""
    store = store_of(request)
    kept = _open(request, sample_id, revision, property_id)
    _require_property(kept)
    return FileAnswer(write_report(store, kept, with_scene=scene == "yes"), HTML, kept.document.name, "report.html")
