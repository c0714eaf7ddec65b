"""The front page: sentence, matrices and column painted on the server, so that they read without any script."""

from __future__ import annotations

from typing import Any

from fastapi import APIRouter, Request, Response

from app.errors import HalfturnError
from app.store.canonical import plain
from app.tensor.pose import IDENTITY, read_pose
from app.tensor.surface import SurfaceKind
from app.web.live import subjects
from app.web.pages import embed_json, render_page
from app.web.posed import describe_pose, describe_subject
from app.web.samples import store_of
from app.web.turning import build_view

router = APIRouter(include_in_schema=False)


def build_content(document: Any, at: float | None = None) -> dict[str, Any]:
    """What the template shows of a document: the subject and its first picture, or the sentence that says why not."""
    try:
        subject = subjects.take(document, at)
        try:
            kept = plain(document.pose)
            pose = read_pose(kept, subject.crystal)
        except HalfturnError:
            pose = IDENTITY
            kept = {"matrix": pose.matrix.tolist()}
        wanted = document.looking.get("surface")
        surface: SurfaceKind = wanted if wanted in ("quadric", "value", "flux") else "quadric"
        first = describe_pose(subject, surface, pose, kept, build_view("specimen", None))
        return {"subject": describe_subject(subject), "first": {**first, "surface": surface}, "problem": None}
    except HalfturnError as error:
        return {"subject": None, "first": None, "problem": {"message": error.message, "hint": error.hint}}


@router.get("/samples/{sample_id}/tensor")
def tensor_page(sample_id: str, request: Request, at: float | None = None) -> Response:
    """The tensor of a sample's current property, at a value of its series where one is given."""
    content = build_content(store_of(request).samples.get(sample_id).document, at)
    block = embed_json({"subject": content["subject"], "first": content["first"]})
    return render_page(request, "tensor.html", sample_id, "tensor", content_json=block, **content)
