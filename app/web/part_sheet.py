"""The workshop's sheet of a part: signed dials, order of cuts, what to check, and when not to cut."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
from fastapi import APIRouter, Request, Response
from fastapi.responses import RedirectResponse

from app.crystal.crystal import Crystal
from app.crystal.direction import parse_direction
from app.crystal.lattice import find_nearest
from app.errors import ConflictError, HalfturnError, InputError
from app.store import Store
from app.store.document import current_property
from app.store.revisions import Kept
from app.store.sheets import PART_KEY, hash_inputs
from app.tensor.principal import find_principal
from app.tensor.sentence import print_angle
from app.version import VERSION
from app.web.cut_target import find_target
from app.web.cut_view import describe_cut
from app.web.kept import crystal_for, crystal_of, entry_of, tensor_of
from app.web.pages import render_page, templates
from app.web.samples import store_of
from app.web.sheet_page import CAUTIONS, HASH_SHOWN
from app.web.stages import list_stages
from app.web.typesetting import set_overbars

router = APIRouter(include_in_schema=False)

WAVELENGTH: Final = 1.540593
"""Copper Kα1 in angstrom (International Tables for Crystallography, vol. C, table 4.2.2.1; from memory)."""

RMS_LIMIT: Final = 1.0
"""Degrees of rms of the sightings beyond which nobody should cut; common practice, no source."""


def build_part_sheet(store: Store, kept: Kept) -> dict[str, Any]:
    """Everything that the sheet prints, as plain data.

    Raises:
        InputError: there is no part, or it cannot be worked out, or the crystal is not sighted on the stage yet.
    """
    content = describe_cut(kept, list_stages(store))
    part, shown = content["part"], current_property(kept.document)
    if part is None or shown is None:
        raise InputError("There is no part to print a sheet of.", hint="Make one on the Cut page.")
    if content["problem"] is not None:
        raise InputError(content["problem"]["message"], hint=content["problem"]["hint"])
    settings, attitude = content["settings"], content["attitude"]
    if settings is None:
        raise InputError(
            "The crystal is not sighted on the stage yet, so there are no settings to print.",
            hint="Sight two directions on the Cut page.",
        )
    if not settings["solutions"]:
        raise InputError(
            f"The target is not within reach of the stage: the closest is {settings['closest']['off']} off.",
            hint="Remount the crystal, or allow equivalents or either sense on the Cut page.",
        )
    crystal = crystal_of(kept.document.crystal)
    first = settings["solutions"][0]
    return {
        PART_KEY: part["id"],
        "kind": "part",
        "sample": kept.document.name,
        "part": part["name"],
        "revision": kept.revision,
        "version": VERSION,
        "property": shown.name,
        "group": crystal.group.symbol + (f", unique {crystal.group.unique_axis}" if crystal.group.unique_axis else ""),
        "cell": None if crystal.cell is None else [f"{value:.6g}" for value in crystal.cell.parameters],
        "headline": content["headline"],
        "second_line": content["second_line"],
        "target": set_overbars(content["target"]["name"]),
        "edge": set_overbars(str(part["edge"])),
        "shape": part["shape"],
        "size": content["result"]["size"],
        "raw": content["result"]["raw"],
        "kerf": f"{part['kerf']:g}",
        "stock": f"{part['stock']:g}",
        "stage": content["stage"]["name"],
        "dials": first["dials"],
        "sensitivity": first["sensitivity"],
        "direction": set_overbars(first["direction"]),
        "rms": attitude["rms"],
        "hand": attitude["hand"],
        "cuts": [
            {**cut, "normal": set_overbars(cut["normal"]), "edge": set_overbars(cut["edge"])}
            for cut in content["result"]["cuts"]
        ],
        "check": _find_check(crystal, kept, part),
        "limits": _list_limits(content, part),
        "drawing": content["result"]["drawing"],
        "blade": content["result"]["blade"],
        "reads": content["result"]["reads"],
        "unit": content["unit"],
        "cautions": list(CAUTIONS),
        "inputs": hash_inputs(kept.document, shown.id, part["id"]),
    }


def _find_check(crystal: Crystal, kept: Kept, part: dict[str, Any]) -> dict[str, str] | None:
    """A reflection that proves the face: the target's plane, else the nearest one of low index; Bragg's law."""
    if crystal.M is None:
        return None
    shown = current_property(kept.document)
    assert shown is not None
    estimate = tensor_of(crystal_for(crystal, kept.document.crystal, entry_of(shown)), shown).estimate
    target = find_target(crystal, find_principal(estimate), kept.document, part["target"])
    near = find_nearest(crystal, target.vector, "normal", 4)
    indices = np.array(parse_direction(near.text).values)
    spacing = 1.0 / float(np.linalg.norm(crystal.reciprocal @ indices))
    order = 1
    while WAVELENGTH * order / (2 * spacing) <= np.sin(np.deg2rad(12.0)):
        order += 1
    sine = WAVELENGTH * order / (2 * spacing)
    if sine >= 1:
        return None
    return {
        "plane": set_overbars(near.text),
        "off": print_angle(near.off),
        "spacing": f"{spacing:.4f}",
        "order": str(order),
        "two_theta": f"{2 * np.rad2deg(np.arcsin(sine)):.2f}",
        "wavelength": f"{WAVELENGTH:.5f}",
    }


def _list_limits(content: dict[str, Any], part: dict[str, Any]) -> list[str]:
    """When not to cut, with numbers."""
    allowed = content["tolerance"]["half_angle"]
    limits = [
        f"the check reflection of the face is more than {allowed} away from where it belongs",
        f"the sightings disagree by more than {RMS_LIMIT:g}° (here {content['attitude']['rms']})",
        "a dial cannot be set to the value above, or its sense was not confirmed by the dry run",
    ]
    if content["attitude"]["hand"].startswith("These"):
        limits.append("the hand of the crystal matters for this part: two sightings do not tell it")
    if float(part["kerf"]) <= 0:
        limits.append("the kerf of the blade is not known")
    return limits


@router.get("/samples/{sample_id}/cut/sheet")
def part_sheet_page(sample_id: str, request: Request) -> Response:
    """The draft of the workshop's sheet of the part that is looked at."""
    store = store_of(request)
    kept = store.samples.get(sample_id)
    try:
        draft, problem = build_part_sheet(store, kept), None
    except HalfturnError as error:
        draft, problem = None, {"message": error.message, "hint": error.hint}
    frozen = [
        {
            "number": sheet.number,
            "revision": sheet.revision,
            "created": sheet.created[:16].replace("T", " "),
            "superseded": sheet.superseded,
            "part": sheet.content.get("part", ""),
        }
        for sheet in store.sheets.list(sample_id)
        if sheet.content.get(PART_KEY)
    ]
    return render_page(
        request, "part_sheet.html", sample_id, "cut", draft=draft, problem=problem, frozen=frozen, hash_shown=HASH_SHOWN
    )


@router.post("/samples/{sample_id}/cut/sheets")
def freeze_part_sheet(sample_id: str, revision: int, request: Request) -> Response:
    """Freeze the sheet of the revision that the reader saw. Raises ConflictError where the sample has moved on."""
    store = store_of(request)
    kept = store.samples.get(sample_id)
    if kept.revision != revision:
        raise ConflictError(
            f"The sample stands at revision {kept.revision} now, and this sheet shows revision {revision}.",
            hint="Open the sheet again, look at the draft, and freeze that.",
            detail={"newest": kept.revision},
        )
    content = build_part_sheet(store, kept)
    shown = current_property(kept.document)
    content["printed"] = str(vars(templates.get_template("part_sheet_body.html").module)["printed"](content))
    assert shown is not None
    sheet = store.sheets.freeze(sample_id, revision, shown.id, content)
    return RedirectResponse(f"/sheets/{sheet.number}", status_code=303)
