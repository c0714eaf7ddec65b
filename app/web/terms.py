"""The glossary: every term of the field that the pages use, in one line, with its source.

Where a source is a book, the line is in our words. "Common practice" is what laboratories do without a document that
is the origin of it. Sources by short name: Nye is J. F. Nye, Physical Properties of Crystals (1957); Tables A and
Tables D are International Tables for Crystallography, volumes A (2016) and D (2006); GUM is JCGM 100:2008.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from markupsafe import Markup, escape


@dataclass(frozen=True)
class Term:
    """A term: its key in templates, as it is printed, one line, and where that is from."""

    key: str
    name: str
    line: str
    source: str


COMMON: Final = "common practice"

TERMS: Final[tuple[Term, ...]] = tuple(
    Term(*entry)
    for entry in (
        (
            "crystal-frame",
            "crystal frame",
            "Three axes at right angles, x1 x2 x3, tied to the edges of the cell by a rule that is always shown.",
            "Nye, chapter I; the rule itself must be stated, since several are in use",
        ),
        (
            "specimen-frame",
            "specimen frame",
            "Three axes at right angles, x y z, along the edges of the block that is cut.",
            COMMON,
        ),
        (
            "tensor",
            "tensor of rank two",
            "Nine numbers that give an effect with a direction from a cause with a direction, in whatever frame.",
            "Nye, chapter I",
        ),
        (
            "field-tensor",
            "field tensor",
            "A stress or an applied strain: it is put on the crystal and need not have the crystal's symmetry.",
            "Nye, chapter V",
        ),
        (
            "neumann",
            "Neumann's principle",
            "A property has at least the symmetry of the crystal's point group, so symmetry locks cells.",
            "Nye, chapter I, section 4; Tables D, section 1.1.4",
        ),
        (
            "locked-cell",
            "locked cell",
            "A cell that the point group holds at zero or ties to another cell.",
            "from Neumann's principle, Nye, chapter I",
        ),
        (
            "free-cell",
            "free cell",
            "A cell that no operation of the group decides; only measuring can.",
            "from Neumann's principle, Nye, chapter I",
        ),
        (
            "dot-diagram",
            "dot diagram",
            "Heavy dots where a cell is not zero, small where it is; lines join equal ones, open if the sign changes.",
            "Nye, table 3 and appendix E",
        ),
        (
            "half-turn",
            "half-turn",
            "The two-fold axis: a turn by 180° that leaves the crystal as it was.",
            "Tables A, section 1.2",
        ),
        (
            "point-group",
            "point group",
            "The turns, mirrors and inversions that leave the crystal as it was, shifts left out.",
            "Tables A, section 3.2",
        ),
        (
            "unique-axis",
            "unique axis",
            "In a monoclinic crystal the one axis that symmetry holds, usually b.",
            "Tables A, section 2.1",
        ),
        (
            "plane-normal",
            "normal of a plane, (hkl)",
            "The direction at right angles to a plane; in oblique cells it is not the row with the same indices.",
            "Tables A, section 1.3",
        ),
        (
            "row",
            "row, [uvw]",
            "The direction that runs u steps along a, v along b and w along c.",
            "Tables A, section 1.3",
        ),
        (
            "principal-axes",
            "principal axes",
            "Three directions at right angles along which effect and cause are parallel.",
            "Nye, chapter I, section 4",
        ),
        (
            "biaxial",
            "biaxial",
            "Three principal values that differ; uniaxial: two are equal; isotropic: all are.",
            "Nye, chapter XIII",
        ),
        (
            "quadric",
            "quadric",
            "The surface with radius 1/√value along each direction, so that long is small.",
            "Nye, chapter I, section 4",
        ),
        (
            "value-surface",
            "value surface",
            "The surface whose radius is the value along each direction.",
            "Nye, chapter I, section 6, as a picture of nᵀAn",
        ),
        (
            "flux",
            "flux",
            "The effect that a cause of one along a direction brings; it mostly leaves by another direction.",
            "Nye, chapters I and XI",
        ),
        (
            "long-bar",
            "long bar",
            "A bar so slender that the effect must run along it; it reads another number than a plate does.",
            "Nye, chapter XI",
        ),
        (
            "wide-plate",
            "wide plate",
            "A plate so thin that the cause stands across it; it reads another number than a bar does.",
            "Nye, chapter XI",
        ),
        (
            "bunge",
            "Bunge angles",
            "Turns about z, the new x and the new z that take the specimen frame onto the crystal frame.",
            "H.-J. Bunge, Texture Analysis in Materials Science (1982), section 2.1.2",
        ),
        (
            "pose",
            "pose",
            "How the specimen's axes stand in the crystal.",
            "a word of this tool; a rotation matrix, common practice",
        ),
        (
            "sigma",
            "standard deviation, σ",
            "How far a number is likely to be off: 12.48(8) has 0.08, counted in its last digits.",
            "GUM, section 7.2.2",
        ),
        (
            "covariance",
            "covariance",
            "How the errors of two numbers go together; needed to carry σ through any turn.",
            "GUM, section 5.2",
        ),
        (
            "region",
            "region of an axis",
            "All directions that an axis may have by the readings, at 95 %.",
            COMMON,
        ),
        (
            "residual",
            "residual",
            "What was read less what the fitted tensor says; in units of σ it should seldom pass two.",
            COMMON,
        ),
        (
            "chi-squared",
            "χ²",
            "The sum of squared residuals in units of σ; near the number to spare when σ is right.",
            COMMON,
        ),
        (
            "to-spare",
            "to spare",
            "Readings less unknowns, the degrees of freedom; with none to spare a fit proves nothing.",
            COMMON,
        ),
        (
            "leverage",
            "leverage",
            "How much a reading decides its own fitted value; near 1 nothing else checks it.",
            "D. C. Hoaglin and R. E. Welsch, The American Statistician 32 (1978) 17",
        ),
        (
            "condition",
            "condition",
            "How many times errors of readings may grow in the worst combination of cells.",
            "common practice in numerical work",
        ),
        (
            "batch",
            "batch",
            "Readings that share one calibration and so one error.",
            COMMON,
        ),
        (
            "twin",
            "twin",
            "Two crystals grown as one, the second turned by a law; a bar through both reads a mean.",
            "Tables D, section 3.3",
        ),
        (
            "rocking",
            "rocking angle",
            "The setting at which a reflection is strongest; at three azimuths or more it gives a face's normal.",
            COMMON,
        ),
        (
            "miscut",
            "miscut",
            "The angle between the normal of a cut face and the direction that was wanted.",
            COMMON,
        ),
        (
            "kerf",
            "kerf",
            "The width of material that the blade takes away.",
            "common practice in workshops",
        ),
        (
            "stage",
            "stage",
            "The holder with turning axes in which a crystal is sighted and brought to the blade.",
            COMMON,
        ),
        (
            "sighting",
            "sighting",
            "The dial readings at which a known direction of the crystal faces a known way.",
            COMMON,
        ),
        (
            "stereogram",
            "stereogram",
            "Directions as points of a flat disc, seen from one pole of a sphere.",
            "Tables A, section 3.2.1",
        ),
        (
            "expansion",
            "thermal expansion",
            "The strain for each kelvin: a symmetric tensor, found from how the cell changes.",
            "Nye, chapter VI",
        ),
        (
            "strain",
            "strain",
            "The relative change of lengths and angles between two states, as a symmetric tensor.",
            "Nye, chapter VI",
        ),
        (
            "still-direction",
            "direction that keeps its length",
            "Where a tensor has values of both signs, a cone of directions has the value zero.",
            "Nye, chapter I, section 4, of quadrics with two signs",
        ),
        (
            "indicatrix",
            "indicatrix",
            "The quadric of the inverse permittivity: its section across a ray has both refractive indices.",
            "Nye, chapter XIII",
        ),
        (
            "optic-axis",
            "optic axis",
            "A direction in which light sees one refractive index only.",
            "Nye, chapter XIII",
        ),
        (
            "frozen-sheet",
            "frozen sheet",
            "A sheet with a number that keeps what it said, whatever changes afterwards.",
            "a word of this tool; document control, common practice",
        ),
        (
            "revision",
            "revision",
            "One state of a sample; every change makes a new one and none is lost.",
            "a word of this tool",
        ),
    )
)

_BY_KEY: Final = {entry.key: entry for entry in TERMS}


def find_term(key: str) -> Term:
    """The term with a key. Raises KeyError: a template that names no term is a defect."""
    return _BY_KEY[key]


def link_term(key: str, text: str | None = None) -> Markup:
    """A term within a sentence: a link to its line, which a script shows beside it.

    Args:
        key: which term.
        text: what stands in the sentence; the term's name where that is None.
    """
    entry = find_term(key)
    shown = entry.name if text is None else text
    return Markup('<a class="term" href="/glossary#{}" data-term="{}">{}</a>').format(key, key, escape(shown))
