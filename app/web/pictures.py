"""The small picture of a quadric in the list of samples: its outline and lines of equal value, as SVG."""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import numpy.typing as npt

from app.errors import HalfturnError
from app.store.canonical import canonical_json
from app.store.document import KeptCrystal, KeptProperty
from app.store.revisions import Summary
from app.tensor.principal import find_principal
from app.tensor.surface_lines import choose_levels, outline, value_lines
from app.web.kept import crystal_for, crystal_of, entry_of, tensor_of

FloatArray = npt.NDArray[np.float64]

SIGHT = np.array([0.80, 0.46, 0.39]) / np.linalg.norm([0.80, 0.46, 0.39])
_HALF = 46.0
_EMPTY = (
    '<svg class="quadric" viewBox="-50 -50 100 100" role="img" aria-label="No quadric">'
    '<circle class="q-none" r="30"/></svg>'
)


def draw_quadric(summary: Summary) -> str:
    """The picture for one line of the list; an empty ring where there is nothing to draw."""
    if summary.property is None:
        return _EMPTY
    key = canonical_json({"crystal": summary.crystal, "property": summary.property})
    return _draw_cached(key)


@lru_cache(maxsize=256)
def _draw_cached(key: bytes) -> str:
    import json

    content = json.loads(key)
    crystal_data, property_data = content["crystal"], content["property"]
    try:
        kept = KeptProperty.model_validate(property_data)
        crystal = KeptCrystal.model_validate(crystal_data)
        built = crystal_for(crystal_of(crystal), crystal, entry_of(kept))
        estimate = tensor_of(built, kept).estimate
        symmetric = (estimate.matrix + estimate.matrix.T) / 2.0
        if not np.any(symmetric):
            return _EMPTY
        return _draw(symmetric, [float(v) for v in find_principal(estimate).values])
    except HalfturnError:
        return _EMPTY


def _draw(matrix: FloatArray, values: list[float]) -> str:
    up = np.array([0.0, 0.0, 1.0]) - SIGHT * SIGHT[2]
    up /= np.linalg.norm(up)
    plane = np.array([np.cross(up, SIGHT), up])
    levels = choose_levels(min(values), max(values), 12).values
    lines = value_lines(matrix, "quadric", levels, points=700) if len(levels) else []
    edges = outline(matrix, SIGHT, 73)
    everything = [line.points for line in (*lines, *edges)]
    if not everything:
        return _EMPTY
    reach = max(float(np.max(np.linalg.norm(points @ plane.T, axis=1))) for points in everything)
    parts = []
    for edge in edges:
        kind = "q-outline" if edge.sheet > 0 else "q-outline q-negative"
        parts.append(f'<path class="{kind}" d="{_path(edge.points @ plane.T / reach)}"/>')
    for line in lines:
        # Seen where the outward normal, sheet · A x, faces the reader.
        facing = line.sheet * (line.points @ matrix) @ SIGHT > 0
        for piece in _pieces(line.points, facing):
            kind = "q-line" if line.sheet > 0 else "q-line q-negative"
            parts.append(f'<path class="{kind}" d="{_path(piece @ plane.T / reach)}"/>')
    words = "Quadric with principal values " + ", ".join(f"{value:.4g}" for value in values)
    return f'<svg class="quadric" viewBox="-50 -50 100 100" role="img" aria-label="{words}">{"".join(parts)}</svg>'


def _pieces(points: FloatArray, seen: npt.NDArray[np.bool_]) -> list[FloatArray]:
    breaks = np.flatnonzero(np.diff(seen.astype(int))) + 1
    return [
        part
        for part, visible in zip(np.split(points, breaks), np.split(seen, breaks), strict=True)
        if visible[0] and len(part) > 1
    ]


def _path(flat: FloatArray) -> str:
    return "M" + "L".join(f"{_HALF * x:.1f} {-_HALF * y:.1f}" for x, y in flat)
