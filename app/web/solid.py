"""The surface of a property as a solid to print (STL) and to show (GLB), to a stated scale.

STL has no unit of length; millimetres are usual, and its header says so. GLB is in metres with y up, as glTF 2.0
(Khronos Group, section 3.4) asks: its geometry is in millimetres of the chosen frame, under a node that turns z up and
scales it down. The mesh library is imported when the first file is made, since it takes long to load.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final, Literal

import numpy as np
import numpy.typing as npt

from app.errors import InputError
from app.tensor.quadric import name_quadric
from app.tensor.surface import Surface, SurfaceKind, build_surface

if TYPE_CHECKING:
    from trimesh import Trimesh

FloatArray = npt.NDArray[np.float64]
FrameName = Literal["crystal", "specimen"]

DEFAULT_SIZE: Final = 50.0
SMALLEST_SIZE: Final = 5.0
LARGEST_SIZE: Final = 1000.0
DEFAULT_DETAIL: Final = 96
LOWEST_DETAIL: Final = 16
HIGHEST_DETAIL: Final = 240
THINNEST: Final = 0.002
"""The shortest extent over the longest below which a surface is a blade or a needle that nothing can print."""

HEADER_LENGTH: Final = 80
COLOURS: Final = {1: ("positive values", (0x1C, 0x4F, 0x96, 0xFF)), -1: ("negative values", (0xB2, 0x34, 0x10, 0xFF))}
"""Names and colours of the bodies: the two of the pages."""

FROM_METRES: Final = np.array([[1e-3, 0, 0, 0], [0, 0, 1e-3, 0], [0, -1e-3, 0, 0], [0, 0, 0, 1.0]])
"""From millimetres with z up to metres with y up."""


@dataclass(frozen=True, eq=False)
class Solid:
    """A surface at its printed size.

    Attributes:
        kind: which surface.
        frame: whose axes x y z of the file are: x1 x2 x3 of the crystal, or x y z of the specimen.
        scale: millimetres per unit of the surface's own length.
        length_unit: that unit, printed.
        size: the longest way through the centre, mm.
        extents: along the three axes of the file, mm, shape (3,).
        cut: mm from the centre at which open sheets end; None where every sheet is closed.
        bodies: by sheet, +1 and −1, vertices (n, 3) in mm and triangles (m, 3), outward.
    """

    kind: SurfaceKind
    frame: FrameName
    scale: float
    length_unit: str
    size: float
    extents: FloatArray
    cut: float | None
    bodies: dict[int, tuple[FloatArray, npt.NDArray[np.int32]]]

    @property
    def scale_text(self) -> str:
        """The scale as a text for a header or a page."""
        return f"{self.scale:.6g} mm per {self.length_unit}"


def build_solid(
    matrix: FloatArray,
    kind: SurfaceKind,
    *,
    pose: FloatArray | None = None,
    unit: str = "",
    size: float = DEFAULT_SIZE,
    detail: int = DEFAULT_DETAIL,
) -> Solid:
    """A surface of a tensor, to scale.

    Args:
        matrix: shape (3, 3), in the crystal frame.
        kind: "quadric", "value" or "flux", see ``app.tensor.surface``.
        pose: C, shape (3, 3); the solid then stands in the specimen frame. None: in the crystal frame.
        unit: printed unit of the tensor.
        size: the longest way through the centre, mm.
        detail: points per half circle.

    Raises:
        InputError: size or detail out of bounds; the tensor is zero, or its surface is flat or too thin for a solid.
    """
    if not SMALLEST_SIZE <= size <= LARGEST_SIZE:
        raise InputError(
            f"A solid of {size:g} mm cannot be asked for.",
            field="size",
            hint=f"Give {SMALLEST_SIZE:g} to {LARGEST_SIZE:g} mm for its longest way through the centre.",
        )
    if not LOWEST_DETAIL <= detail <= HIGHEST_DETAIL:
        raise InputError(f"The detail is {LOWEST_DETAIL} to {HIGHEST_DETAIL} points per half circle.", field="detail")
    surface = build_surface(matrix, kind, detail)
    _refuse_flat(surface, matrix, kind)
    # In parts of the largest coordinate, since the square of a very large or small one has no number.
    peak = float(np.max(np.abs(surface.vertices)))
    shape = surface.vertices / peak
    grown = size / (2.0 * float(np.max(np.linalg.norm(shape, axis=1))))
    scale = grown / peak
    if not (np.isfinite(scale) and scale > 0):
        raise InputError(
            "The values are too large or too small for a scale in mm.",
            field="surface",
            hint="Give them in a unit in which they are neither.",
        )
    vertices = shape * grown
    if pose is not None:
        vertices = vertices @ pose.T
    _refuse_thin(vertices, size)
    bodies = {sign: _pick(surface, vertices, sign) for sign in (1, -1) if np.any(surface.sheets == sign)}
    cut = None if surface.cut_at is None else surface.cut_at / peak * grown
    extents = np.ptp(vertices, axis=0)
    frame: FrameName = "crystal" if pose is None else "specimen"
    return Solid(kind, frame, scale, _name_length(kind, unit), size, extents, cut, bodies)


def _name_length(kind: SurfaceKind, unit: str) -> str:
    """The unit of the radius: of a quadric it is 1/√value."""
    if kind != "quadric":
        return unit or "1"
    return f"1/√({unit})" if unit else "1"


def _refuse_flat(surface: Surface, matrix: FloatArray, kind: SurfaceKind) -> None:
    if len(surface.vertices) == 0:
        zero = not np.any(matrix)
        reason = "The tensor is zero" if zero else "The symmetric part of the tensor is zero"
        other = "" if zero or kind == "flux" else " The flux surface shows the antisymmetric part."
        raise InputError(f"{reason}: it has no surface of this kind.", field="surface", hint=f"Give it values.{other}")
    if kind == "quadric":
        values = np.asarray(np.linalg.eigvalsh((matrix + matrix.T) / 2.0)[::-1], dtype=np.float64)
        name = name_quadric(values)
        if name in ("parallel planes", "imaginary planes"):
            raise InputError(
                "The quadric is a pair of planes, which is no solid: only one principal value is not zero.",
                field="surface",
                hint="Take the value or the flux surface.",
            )


def _refuse_thin(vertices: FloatArray, size: float) -> None:
    # Extents along the surface's own axes, which the axes of the file need not be.
    spread = np.linalg.eigh(vertices.T @ vertices)[1]
    extents = np.ptp(vertices @ spread, axis=0)
    thinnest = float(np.min(extents))
    if thinnest < THINNEST * size:
        raise InputError(
            f"At {size:g} mm this surface would be {thinnest:.2g} mm thick at its thickest: a blade or a needle, no "
            "solid.",
            field="surface",
            hint="Take another of the three surfaces.",
        )


def _pick(surface: Surface, vertices: FloatArray, sign: int) -> tuple[FloatArray, npt.NDArray[np.int32]]:
    chosen = surface.sheets == sign
    numbers = np.cumsum(chosen) - 1
    triangles = surface.triangles[chosen[surface.triangles[:, 0]]]
    return vertices[chosen], numbers[triangles].astype(np.int32)


def describe_solid(solid: Solid) -> dict[str, Any]:
    """What a page and a file say of a solid."""
    x, y, z = (float(extent) for extent in solid.extents)
    names = [COLOURS[sign][0] for sign in solid.bodies]
    closed = solid.cut is None
    sentence = (
        f"{solid.scale_text}; {x:.4g} × {y:.4g} × {z:.4g} mm along "
        f"{'x1 x2 x3' if solid.frame == 'crystal' else 'x y z'}; {' and '.join(names)}. "
    )
    sentence += (
        "The surface is closed."
        if closed
        else f"The surface runs to infinity and is cut {solid.cut:.4g} mm from the centre: it is open and has no "
        "thickness; give it a wall before printing."
    )
    return {
        "surface": solid.kind,
        "frame": solid.frame,
        "scale": solid.scale,
        "scale_text": solid.scale_text,
        "length_unit": solid.length_unit,
        "size": solid.size,
        "extents": [x, y, z],
        "closed": closed,
        "cut_at": solid.cut,
        "bodies": names,
        "triangles": sum(len(triangles) for _, triangles in solid.bodies.values()),
        "sentence": sentence,
    }


def write_stl(solid: Solid) -> bytes:
    """A binary STL in millimetres; its header states surface, scale and frame."""
    from trimesh import Trimesh
    from trimesh.exchange.stl import export_stl

    parts = list(solid.bodies.values())
    starts = np.cumsum([0, *(len(vertices) for vertices, _ in parts)])[:-1]
    vertices = np.concatenate([vertices for vertices, _ in parts])
    triangles = np.concatenate([part + start for (_, part), start in zip(parts, starts, strict=True)])
    content: bytes = export_stl(Trimesh(vertices, triangles, process=False))
    return _write_header(solid) + content[HEADER_LENGTH:]


def _write_header(solid: Solid) -> bytes:
    # A binary file must not begin with "solid", by which the text form is known. What matters most comes first.
    whole = "" if solid.cut is None else ", cut open"
    text = f"mm; {solid.kind}, {solid.frame} frame; {solid.scale_text}{whole}"
    plain = text.replace("√", "sqrt").replace("·", ".").replace("µ", "u").replace("μ", "u").replace("Å", "A")
    return plain.encode("ascii", "replace")[:HEADER_LENGTH].ljust(HEADER_LENGTH)


def write_glb(solid: Solid, extras: dict[str, Any] | None = None) -> bytes:
    """A binary glTF: one named mesh with its own material for each sheet; scale, frame and ``extras`` in its scene."""
    from trimesh import Scene, Trimesh
    from trimesh.visual import TextureVisuals
    from trimesh.visual.material import PBRMaterial

    described = describe_solid(solid)
    scene = Scene(metadata={**described, **(extras or {})})
    for sign, (vertices, triangles) in solid.bodies.items():
        name, colour = COLOURS[sign]
        material = PBRMaterial(
            name=name,
            baseColorFactor=np.array(colour, dtype=np.uint8),
            metallicFactor=0.0,
            roughnessFactor=0.6,
            doubleSided=solid.cut is not None,
        )
        body: Trimesh = Trimesh(vertices, triangles, process=False, visual=TextureVisuals(material=material))
        scene.add_geometry(body, node_name=name, geom_name=name, transform=FROM_METRES)
    content: bytes = scene.export(file_type="glb", include_normals=True)
    return content
