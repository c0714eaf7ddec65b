"""What the front page shows of a subject, in words and numbers: once per tensor, and again in every pose."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import numpy.typing as npt

from app.crystal.crystal import Crystal
from app.crystal.direction import format_indices, parse_direction, typeset_indices
from app.crystal.lattice import find_nearest
from app.tensor.estimate import Estimate
from app.tensor.form import Form
from app.tensor.kind import LABELS
from app.tensor.lock import CellLock, explain_cells
from app.tensor.pose import AXIS_LETTERS, Pose
from app.tensor.printing import print_value
from app.tensor.quadric import name_quadric
from app.tensor.sentence import (
    ON,
    Along,
    Place,
    join_runs,
    place_direction,
    print_along,
    print_angle,
    split_spread,
    write_sentence,
)
from app.tensor.surface import SurfaceKind
from app.tensor.surface_lines import choose_levels
from app.tensor.values import compute_flux, compute_flux_angles, compute_values
from app.web.matrix_views import view_cell, view_sigma
from app.web.overlay import draw_overlay
from app.web.rendering import render_pose
from app.web.ruler import render_ruler
from app.web.scene import Subject
from app.web.turning import Caught, View, names_of

FloatArray = npt.NDArray[np.float64]

REGION_FACTOR: Final = 1.96
"""Half width of a 95 % interval in standard deviations: what the ± of an axis in a plane of symmetry holds."""


def render_number(value: float, sigma: float | None) -> dict[str, str]:
    """A printed number in three parts, so that columns align on the point: whole, rest, spread."""
    return _part_number(print_value(value, view_sigma(sigma)))


def _part_number(printed: str) -> dict[str, str]:
    head, spread = split_spread(printed)
    whole, point, rest = head.partition(".")
    return {"text": printed, "whole": whole, "rest": point + rest, "spread": spread}


def render_cells(subject: Subject, pose: Pose | None = None) -> list[list[dict[str, Any]]]:
    """Nine cells in rows: label, state, reason, what it equals, and the number."""
    estimate = subject.tensor.estimate
    if pose is not None:
        estimate = estimate.turn(pose.matrix, "specimen frame")
    return render_matrix(subject.crystal, subject.tensor.form, estimate, pose)


def render_matrix(
    crystal: Crystal, form: Form, estimate: Estimate, pose: Pose | None = None
) -> list[list[dict[str, Any]]]:
    """Nine cells in rows, as ``render_cells`` has them, of an estimate in the crystal frame, or in a pose's."""
    sigmas = estimate.sigma_matrix
    locks = explain_cells(crystal, form, None if pose is None else pose.matrix)
    cells = [
        _render_cell(
            LABELS[place] if pose is None else AXIS_LETTERS[place // 3] + AXIS_LETTERS[place % 3],
            lock,
            float(estimate.matrix.flat[place]),
            None if sigmas is None else float(sigmas.flat[place]),
            form.free,
        )
        for place, lock in enumerate(locks)
    ]
    return [cells[0:3], cells[3:6], cells[6:9]]


def _render_cell(
    label: str, lock: CellLock, value: float, sigma: float | None, free: tuple[int, ...]
) -> dict[str, Any]:
    number = render_number(0.0, None) if lock.state == "zero" else render_number(value, sigma)
    shown = {"label": label, "state": lock.state, "because": lock.because, "equals": lock.equals, "number": number}
    return {**shown, **view_cell(label, lock, value, sigma, free)}


def describe_subject(subject: Subject) -> dict[str, Any]:
    """Everything that stays while the specimen is turned."""
    values = subject.principal.values
    return {
        "hash": subject.key,
        "unit": subject.unit,
        "frame": subject.crystal.frame_sentence,
        "cells": render_cells(subject),
        "principal": _render_principal(subject),
        "shape": subject.principal.shape,
        "quadric": name_quadric(values),
        "surfaces": {
            "quadric": {"lead": "Long is small.", "words": _describe_quadric(subject)},
            "value": {"lead": "Long is large.", "words": _describe_value_surface(subject)},
            "flux": {"lead": "Long is large.", "words": FLUX_WORDS},
        },
        "mirrors": [_name_mirror(subject, normal) for normal in subject.mirrors],
        "negative": bool(np.any(values < 0)),
        "has_region": bool(subject.regions),
        "settling": subject.settling.sentence,
        "followed": subject.followed,
        "answer": None if subject.answer is None else subject.answer.sentence,
        "other": {"rod": "long bar", "plate": "wide plate", None: None}[subject.other],
        "step": _print_step(subject),
    }


def _print_step(subject: Subject) -> str:
    values = subject.principal.values
    return f"{choose_levels(float(values[2]), float(values[0]), 26).step:.6g}"


def _name_mirror(subject: Subject, normal: FloatArray) -> str:
    if subject.crystal.M is None:
        return "x" + str(int(np.argmax(np.abs(normal))) + 1)
    near = find_nearest(subject.crystal, normal, "row").text
    letters = {"[1 0 0]": "a", "[0 1 0]": "b", "[0 0 1]": "c"}
    return letters.get(near.replace("-", ""), typeset_indices(near))


def _render_principal(subject: Subject) -> list[dict[str, Any]]:
    principal, answer = subject.principal, []
    for number in range(3):
        sigma = None if principal.sigma is None else float(principal.sigma[number])
        lines = [_say_arbitrary(subject, number)] if principal.arbitrary[number] else _say_axis(subject, number)
        answer.append(
            {
                "name": str(number + 1),
                "value": render_number(float(principal.values[number]), sigma)["text"],
                "locked": subject.fixed[number] and not principal.arbitrary[number],
                "lines": lines,
            }
        )
    return answer


def _say_arbitrary(subject: Subject, number: int) -> str:
    if subject.principal.shape == "isotropic":
        return "any direction"
    alone = next(index for index in range(3) if not subject.principal.arbitrary[index])
    return f"any direction in the plane across p{alone + 1}"


def _say_axis(subject: Subject, number: int) -> list[str]:
    axis = subject.principal.axes[number]
    if subject.crystal.M is None:
        return [place_direction(subject.crystal, axis).text]
    row, plane = (find_nearest(subject.crystal, axis, kind) for kind in ("row", "normal"))
    held = "held by symmetry: " if subject.fixed[number] else ""
    named = []
    for near in (row, plane):
        shown = typeset_indices(near.text)
        named.append(shown if near.off < ON else f"{shown} {print_angle(near.off)} off")
    lines = [held + ", ".join(named)]
    sigmas = subject.principal.axis_sigma
    if not subject.fixed[number] and sigmas is not None:
        turns = [
            (other, REGION_FACTOR * float(sigmas[number, other]))
            for other in range(3)
            if other != number and np.isfinite(sigmas[number, other]) and sigmas[number, other] > 1e-9
        ]
        if turns:
            lines.append(", ".join(f"±{print_angle(size)} toward p{other + 1}" for other, size in turns))
    return lines


def _describe_quadric(subject: Subject) -> str:
    values, arbitrary = subject.principal.values, subject.principal.arbitrary
    name = name_quadric(values)
    if name == "none":
        return "The tensor is zero: there is nothing to draw."
    if np.any(values < 0):
        return (
            "The radius is 1/√|value|. Dashed lines over dots mark the sheet of negative values; between the sheets "
            "the value passes through zero, and both are cut where they run to infinity."
        )
    if arbitrary[2]:
        return "The radius is 1/√value, so the surface is shortest where the value is largest."
    return "The radius is 1/√value, so the surface is longest along p3, where the value is smallest."


FLUX_WORDS: Final = (
    "The radius is the size of the effect, |A n|, for a cause of one along that direction; its lines are of equal "
    "value, which is the part of the effect along the cause."
)


def _describe_value_surface(subject: Subject) -> str:
    if not np.any(subject.principal.values):
        return "The tensor is zero: there is nothing to draw."
    if np.any(subject.principal.values < 0):
        return "The radius is the size of the value. Dashed lines over dots mark the lobes of negative values."
    return "The radius is the value along that direction."


def describe_pose(
    subject: Subject, kind: SurfaceKind, pose: Pose, kept: dict[str, Any], view: View, caught: Caught | None = None
) -> dict[str, Any]:
    """Everything that changes with pose and view.

    Args:
        subject, kind: what is shown, with which surface.
        pose: where the specimen stands.
        kept: the pose as it is kept, which names directions that the user put an axis on.
        view: from where one looks.
        caught: what an axis lies on by the catch.
    """
    names = names_of(kept)
    places = [place_direction(subject.crystal, pose.matrix[axis], names.get("xyz"[axis])) for axis in range(3)]
    estimate = subject.tensor.estimate
    along = print_along(estimate, pose.matrix, subject.other)
    lines = write_sentence(
        "z", places[2], pose.matrix[2], estimate, subject.principal, subject.unit, subject.other, along[2]
    )
    posed = estimate.turn(pose.matrix, "specimen frame")
    labels = {
        letter: {"value": along[axis].value, "place": places[axis].text if places[axis].indices else ""}
        for axis, letter in enumerate(AXIS_LETTERS)
    }
    screen = view.screen(pose.matrix)
    return {
        "pose": {**render_pose(pose), "kept": kept},
        "view": {"hold": view.hold, "matrix": view.matrix.tolist()},
        "camera": {"eye": (2.0 * screen[2]).tolist(), "up": screen[1].tolist()},
        "posed": posed.matrix.tolist(),
        "cells": render_matrix(subject.crystal, subject.tensor.form, posed, pose),
        "along": _render_along(subject, pose, along),
        "ruler": render_ruler(subject, compute_values(estimate.matrix, pose.matrix)),
        "sentence": {"lines": [[list(run) for run in line] for line in lines], "text": join_runs(*lines)},
        "where": _say_where(pose, kept, places),
        "caught": None if caught is None else f"{caught.axis}: on {_typeset(caught.on)}",
        "rest": f"z: {places[2].text}",
        "overlay": draw_overlay(subject, subject.scene(kind), pose.matrix, view, labels),
    }


def _typeset(name: str) -> str:
    return typeset_indices(name) if name[0] in "[(" else name


def _render_along(subject: Subject, pose: Pose, along: list[Along]) -> list[dict[str, Any]]:
    matrix = subject.tensor.estimate.matrix
    flux = compute_flux_angles(pose.matrix, compute_flux(matrix, pose.matrix))
    return [
        {
            "axis": letter,
            "value": _part_number(printed.value),
            "rod": None if printed.other is None else _part_number(printed.other),
            "flux": f"{angle:.1f}°" if np.isfinite(angle) else "–",
        }
        for letter, printed, angle in zip(AXIS_LETTERS, along, flux.tolist(), strict=True)
    ]


def _say_where(pose: Pose, kept: dict[str, Any], places: list[Place]) -> str:
    """The specimen frame in words."""
    z = f"z {places[2].text}"
    if "from" in kept and isinstance(kept.get("toward"), str) and places[2].off >= ON:
        z += f" toward {_print_given(kept['toward'])}"
    near = kept.get("x", kept.get("toward")) if "from" in kept else None
    if "exact" in kept and kept["exact"][0] == "z" and kept["toward"][0] == "x":
        near = kept["toward"][1]
    if isinstance(near, str):
        return f"{z}, x as near {_print_given(near)} as it can be, y = z × x"
    return f"{z}; x {places[0].text}; y = z × x"


def _print_given(text: str) -> str:
    direction = parse_direction(text)
    if direction.kind == "row" or direction.kind == "normal":
        return typeset_indices(format_indices(direction.kind, direction.values))
    return text
