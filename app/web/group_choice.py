"""Picking a group by system and class: data for the strip, each setting with its meaning."""

from __future__ import annotations

from typing import Final

_Setting = tuple[str, str | None, str]

SYSTEMS: Final[tuple[tuple[str, tuple[tuple[str, tuple[_Setting, ...]], ...]], ...]] = (
    ("triclinic", (("1", (("1", None, "no symmetry"),)), ("-1", (("-1", None, "inversion only"),)))),
    (
        "monoclinic",
        tuple(
            (symbol, tuple((symbol, axis, f"unique axis {axis}: {words} {axis}") for axis in ("b", "c", "a")))
            for symbol, words in (
                ("2", "the half-turn is about"),
                ("m", "the mirror is across"),
                ("2/m", "half-turn about, mirror across,"),
            )
        ),
    ),
    (
        "orthorhombic",
        (
            ("222", (("222", None, "half-turns about a, b and c"),)),
            (
                "mm2",
                (
                    ("mm2", None, "the half-turn is about c"),
                    ("m2m", None, "the half-turn is about b"),
                    ("2mm", None, "the half-turn is about a"),
                ),
            ),
            ("mmm", (("mmm", None, "mirrors across a, b and c"),)),
        ),
    ),
    (
        "tetragonal",
        (
            *((symbol, ((symbol, None, "the four-fold axis is c"),)) for symbol in ("4", "-4", "4/m", "422", "4mm")),
            (
                "-42m",
                (("-42m", None, "half-turns about a and b"), ("-4m2", None, "mirrors across a and b")),
            ),
            ("4/mmm", (("4/mmm", None, "the four-fold axis is c"),)),
        ),
    ),
    (
        "trigonal",
        (
            ("3", (("3", None, "the three-fold axis is c, or [1 1 1] of a rhombohedral cell"),)),
            ("-3", (("-3", None, "the three-fold axis is c, or [1 1 1] of a rhombohedral cell"),)),
            ("32", (("321", None, "half-turns about a and b"), ("312", None, "half-turns between a and b"))),
            ("3m", (("3m1", None, "mirrors across a and b"), ("31m", None, "mirrors that contain a and b"))),
            ("-3m", (("-3m1", None, "mirrors across a and b"), ("-31m", None, "mirrors that contain a and b"))),
        ),
    ),
    (
        "hexagonal",
        (
            *((symbol, ((symbol, None, "the six-fold axis is c"),)) for symbol in ("6", "-6", "6/m", "622", "6mm")),
            (
                "-6m2",
                (("-6m2", None, "mirrors across a and b"), ("-62m", None, "half-turns about a and b")),
            ),
            ("6/mmm", (("6/mmm", None, "the six-fold axis is c"),)),
        ),
    ),
    (
        "cubic",
        tuple(
            (symbol, ((symbol, None, "three-fold axes along the body diagonals"),))
            for symbol in ("23", "m-3", "432", "-43m", "m-3m")
        ),
    ),
    (
        "limiting",
        tuple(
            (symbol, ((symbol, None, words),))
            for symbol, words in (
                ("∞", "any turn about x3"),
                ("∞m", "with mirrors through x3"),
                ("∞2", "with half-turns across x3"),
                ("∞/m", "with a mirror across x3"),
                ("∞/mm", "with both kinds of mirror"),
                ("∞∞", "any turn, no mirror"),
                ("∞∞m", "any turn, with mirrors"),
            )
        ),
    ),
)


def list_choices() -> list[dict[str, object]]:
    """Every setting in one list: {system, class, group, unique_axis, words}."""
    return [
        {"system": system, "class": name, "group": group, "unique_axis": axis, "words": words}
        for system, classes in SYSTEMS
        for name, settings in classes
        for group, axis, words in settings
    ]
