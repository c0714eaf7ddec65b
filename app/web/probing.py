"""The probe: a direction that is moved over the surface, with what the tensor does along it.

A place on the screen becomes a direction by following the line of sight to the surface; beside the surface the probe
goes to the direction whose surface comes nearest to that line, so that it slides along the outline.
"""

from __future__ import annotations

from typing import Annotated, Any, Final, Literal

import numpy as np
import numpy.typing as npt
from pydantic import Field

from app.crystal.direction import typeset_indices
from app.crystal.lattice import find_nearest
from app.errors import InputError
from app.tensor.printing import print_value
from app.tensor.sentence import print_angle
from app.tensor.values import compute_flux, compute_flux_angles, compute_values
from app.web.parts import Number, Part
from app.web.scene import Scene, Subject
from app.web.strokes import Shape, shape, write_head, write_line, write_ring
from app.web.turning import roll_ball

FloatArray = npt.NDArray[np.float64]

SAMPLES: Final = 480
HALVINGS: Final = 44
ARROW: Final = 0.34
"""World length of the probe's arrows beyond the surface."""


class ProbePart(Part):
    """Where the probe is: on a direction, moved on from there by key steps or to a place on the screen."""

    direction: Annotated[list[Number], Field(min_length=3, max_length=3)] | None = Field(
        None, description="vector in the crystal frame; none is toward the viewer"
    )
    at: Annotated[list[Number], Field(min_length=2, max_length=2)] | None = Field(
        None, description="right and up from the middle of the picture, world lengths"
    )
    steps: Annotated[list[Number], Field(min_length=2, max_length=2)] | None = Field(
        None, description="degrees right and up on the screen"
    )


def find_direction(scene: Scene, screen: FloatArray, right: float, up: float) -> FloatArray:
    """The direction, unit vector (3,) in the crystal frame, of the surface's point nearest to the viewer at a place.

    Args:
        scene: whose surface.
        screen: right, up and toward the viewer as rows, in the crystal frame.
        right, up: from the middle, world lengths. Places outside the picture count as its rim.
    """
    size = float(np.hypot(right, up))
    if size > 2.0 * scene.reach:
        right, up = right / size * 2.0 * scene.reach, up / size * 2.0 * scene.reach
    foot = right * screen[0] + up * screen[1]
    span = np.linspace(1.02, -1.02, SAMPLES) * scene.reach
    outside = _measure(scene, foot, screen[2], span)
    change = np.flatnonzero(np.sign(outside[1:]) != np.sign(outside[:-1]))
    if len(change):
        near, far = float(span[change[0]]), float(span[change[0] + 1])
        sign = np.sign(outside[change[0]])
        for _ in range(HALVINGS):
            middle = (near + far) / 2.0
            if np.sign(_measure(scene, foot, screen[2], np.array([middle]))[0]) == sign:
                near = middle
            else:
                far = middle
        found = near
    else:
        found = float(span[int(np.argmin(np.abs(outside)))])
    point = foot + found * screen[2]
    length = float(np.linalg.norm(point))
    return np.asarray(point / length if length > 1e-12 else screen[2])


def _measure(scene: Scene, foot: FloatArray, toward: FloatArray, span: FloatArray) -> FloatArray:
    """How far outside the surface points of a line of sight lie: the share of their own distance, −1 to 1."""
    points = foot + span[:, None] * toward
    sizes = np.linalg.norm(points, axis=1)
    units = points / np.maximum(sizes, 1e-300)[:, None]
    radii = np.nan_to_num(scene.radius(units), nan=np.inf, posinf=np.inf)
    # Of an open sheet what is beyond its cut counts as inside, as it is between the sheets.
    return np.where(np.isinf(radii), -1.0, (sizes - radii) / np.where(np.isinf(radii), 1.0, sizes + radii + 1e-300))


def probe_surface(subject: Subject, scene: Scene, screen: FloatArray, given: ProbePart) -> dict[str, Any]:
    """What the tensor does along the probe, and the marks that show it.

    Returns:
        ``direction`` (unit vector, crystal frame), ``row`` and ``normal`` (name and angle, None without a cell),
        ``value`` and ``size`` of the flux as text, ``flux`` (unit vector or None), ``flux_angle`` in degrees or None,
        ``radius`` in world lengths or None, ``reach`` of the surface, ``shapes``, and ``at`` and ``steps``
        as they were asked for.
    """
    direction = screen[2]
    if given.direction is not None:
        vector = np.array(given.direction, dtype=np.float64)
        largest = float(np.max(np.abs(vector)))
        if largest == 0.0:
            raise InputError("The probe cannot be on the zero vector.", field="probe.direction")
        direction = vector / largest / np.linalg.norm(vector / largest)
    if given.at is not None:
        direction = find_direction(scene, screen, given.at[0], given.at[1])
    if given.steps is not None:
        right, up = (float(np.deg2rad(part % 360.0)) for part in given.steps)
        direction = screen.T @ (roll_ball(right, up) @ (screen @ direction))
    direction = direction / np.linalg.norm(direction)
    estimate = subject.tensor.estimate
    value = float(compute_values(estimate.matrix, direction))
    sigma = estimate.value_sigma(direction)
    flux = compute_flux(estimate.matrix, direction)
    size = float(np.linalg.norm(flux))
    angle = float(compute_flux_angles(direction, flux))
    radius = float(scene.radius(direction))
    unit = f" {subject.unit}" if subject.unit else ""
    near: dict[str, Any] = {"row": None, "normal": None}
    kinds: tuple[Literal["row", "normal"], ...] = ("row", "normal")
    for kind in kinds:
        if subject.crystal.M is not None:
            found = find_nearest(subject.crystal, direction, kind)
            near[kind] = {"name": typeset_indices(found.text), "off": found.off, "text": print_angle(found.off)}
    size_sigma = None
    if size > 0.0:
        size_sigma = estimate.value_sigma(direction, flux / size)
    return {
        "direction": direction.tolist(),
        "at": given.at,
        "steps": given.steps,
        **near,
        "value": print_value(value, None if sigma is None else float(sigma)) + unit,
        "size": print_value(size, None if size_sigma is None else float(size_sigma)) + unit,
        "flux": (flux / size).tolist() if size > 0.0 else None,
        "flux_angle": angle if np.isfinite(angle) else None,
        "flux_text": print_angle(angle) if np.isfinite(angle) else "there is none",
        "radius": radius if np.isfinite(radius) else None,
        "reach": scene.reach,
        "shapes": _draw_probe(scene, screen, direction, flux / size if size > 0.0 else None, radius),
    }


def _draw_probe(
    scene: Scene, screen: FloatArray, direction: FloatArray, flux: FloatArray | None, radius: float
) -> list[Shape]:
    """Arrows of the direction (full line) and of the flux (dashed, open end) from the point on the surface."""
    point = direction * (radius if np.isfinite(radius) else scene.reach)
    start = screen @ point
    away = " away" if start[2] < 0 else ""
    shapes = []
    if flux is not None:
        end = screen @ (point + ARROW * flux)
        shapes.append(shape("front", "halo", write_line(start, end)))
        shapes.append(shape("front", f"probe-flux{away}", write_line(start, end)))
        shapes.append(shape("front", "probe-flux-end", write_head(end, end - start, 13.0, 5.0)))
    end = screen @ (point + ARROW * direction)
    shapes.append(shape("front", "halo", write_line(start, end)))
    shapes.append(shape("front", f"probe-line{away}", write_line(start, end)))
    shapes.append(shape("front", "probe-head", write_head(end, end - start, 13.0, 5.0)))
    shapes.append(shape("front", "probe-foot", write_ring(start, 5.5)))
    return [entry for entry in shapes if entry["d"]]
