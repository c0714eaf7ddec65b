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
from app.web.showing import Link, read_link
from app.web.turning import build_view

router = APIRouter(include_in_schema=False)


def build_content(document: Any, at: float | None = None, link: Link | None = None) -> dict[str, Any]:
    """What the template shows of a document: the subject and its first picture, or the sentence that says why not.

    Args:
        document: the sample.
        at: a value of the variable of its series; None is the tensor as kept.
        link: a pose, view and surface that take the place of the kept ones.
    """
    try:
        subject = subjects.take(document, at)
        try:
            kept = plain(document.pose) if link is None or link.pose is None else link.pose
            pose = read_pose(kept, subject.crystal)
        except HalfturnError:
            pose = IDENTITY
            kept = {"matrix": pose.matrix.tolist()}
        wanted = document.looking.get("surface")
        surface: SurfaceKind = wanted if wanted in ("quadric", "value", "flux") else "quadric"
        view = build_view("specimen", None)
        if link is not None:
            surface, view = link.surface or surface, link.view
        first = describe_pose(subject, surface, pose, kept, view)
        return {"subject": describe_subject(subject), "first": {**first, "surface": surface}, "problem": None}
    except HalfturnError as error:
        return {"subject": None, "first": None, "problem": {"message": error.message, "hint": error.hint}}


@router.get("/samples/{sample_id}/tensor")
def tensor_page(sample_id: str, request: Request) -> Response:
    """The tensor of a sample's current property, in the state that a link names where one was followed."""
    link = read_link(request.query_params, store_of(request).samples, sample_id)
    content = build_content(link.kept.document, link.at, link)
    block = embed_json({"subject": content["subject"], "first": content["first"]})
    newest = store_of(request).samples.get(sample_id).revision
    more = {"link_notices": link.notices, "newest": newest, "content_json": block, **content}
    return render_page(request, "tensor.html", sample_id, "tensor", link.kept, **more)
