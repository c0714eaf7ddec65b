"""Drawings of a part: the block with its axes and sizes, and the blade with the kept side hatched."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

import numpy as np

SIGHT: Final = np.array([[-0.819, 0.574, 0.0], [-0.222, -0.317, 0.922], [0.529, 0.755, 0.387]])
"""Right, up and toward the viewer as rows, in the part's frame."""

HALF: Final = 74.0
SMALLEST: Final = 0.1


def draw_part(size: Sequence[str], shape: str) -> str:
    """The block in the part's frame with x, y, z and its sizes; to scale but for edges below a tenth of the longest."""
    lengths = np.array([float(edge) for edge in size])
    half = np.maximum(lengths / float(np.max(lengths)), SMALLEST)
    half /= float(np.linalg.norm(half))
    corners = np.array([[(i >> axis & 1) * 2 - 1 for axis in range(3)] for i in range(8)]) * half
    flat = HALF * corners @ SIGHT[:2].T
    parts = []
    nearest = int(np.argmax(corners @ SIGHT[2]))
    farthest = 7 - nearest
    for start in range(8):
        for axis in range(3):
            end = start ^ (1 << axis)
            if end < start:
                continue
            hidden = farthest in (start, end)
            (x, y), (u, v) = flat[start], flat[end]
            name = "part-far" if hidden else "part-edge"
            parts.append(f'<path class="{name}" d="M{x:.1f} {-y:.1f}L{u:.1f} {-v:.1f}"/>')
    for axis, letter in enumerate("xyz"):
        tip = np.eye(3)[axis] * (half[axis] + 0.34)
        root = np.eye(3)[axis] * half[axis]
        (x, y), (u, v) = HALF * root @ SIGHT[:2].T, HALF * tip @ SIGHT[:2].T
        parts.append(f'<path class="part-axis" d="M{x:.1f} {-y:.1f}L{u:.1f} {-v:.1f}"/>')
        parts.append(
            f'<text class="part-name" x="{u * 1.12:.1f}" y="{-v * 1.12 + 4:.1f}" text-anchor="middle">'
            f'<tspan class="sy">{letter}</tspan> {size[axis]} mm</text>'
        )
    return (
        f'<svg class="part-drawing" viewBox="-150 -118 300 236" role="img" '
        f'aria-label="The {shape}, {" by ".join(size)} millimetres along x, y and z">{"".join(parts)}</svg>'
    )


def draw_blade(kerf: float, stock: float) -> str:
    """The blade seen along its face: the kept side hatched, the polishing stock and the kerf named."""
    hatch = "".join(f"M{x} 78L{x + 56} 22" for x in range(-34, 96, 11))
    return (
        '<svg class="blade-drawing" viewBox="0 0 300 116" role="img" '
        f'aria-label="The blade removes {kerf:g} mm; on the kept side {stock:g} mm stay for polishing">'
        '<clipPath id="kept-side"><path d="M12 22H130V78H12Z"/></clipPath>'
        f'<path class="blade-hatch" clip-path="url(#kept-side)" d="{hatch}"/>'
        '<path class="part-edge" d="M12 22H138V78H12"/>'
        '<path class="part-far" d="M130 22V78"/>'
        '<path class="blade" d="M142 8H152V92H142Z"/>'
        '<path class="part-edge" d="M156 22H288M156 78H288M156 22V78"/>'
        '<path class="dimension" d="M130 98H138M142 104H152"/>'
        '<text x="71" y="54" text-anchor="middle">kept side</text>'
        '<text x="222" y="54" text-anchor="middle">falls away</text>'
        f'<text x="126" y="101" text-anchor="end">stock {stock:g} mm</text>'
        f'<text x="158" y="108">kerf {kerf:g} mm</text></svg>'
    )
