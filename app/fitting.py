"""The command ``halfturn fit``: a crystal and a table of readings become a tensor."""

from __future__ import annotations

import argparse
import json
import re
import sys
from pathlib import Path
from typing import Any, Final

from app.errors import InputError

EXIT_DONE: Final = 0
EXIT_UNDETERMINED: Final = 1

_PUT: Final = re.compile(r"([xyz])\s*=\s*(\[[^\]]*\]|\([^)]*\))")


def add_fit_command(commands: Any) -> None:
    """Add ``fit`` to the subcommands of the command line."""
    parser: argparse.ArgumentParser = commands.add_parser(
        "fit",
        help="from a crystal and a table of readings to a tensor with its uncertainty",
        description="Fit the tensor that a crystal's symmetry allows to readings on cut bars. Exit status: 0 done, "
        "1 the readings do not determine the tensor, 2 bad input.",
    )
    source = parser.add_argument_group("the crystal: a CIF, or cell and group")
    source.add_argument("--cif", type=Path, metavar="FILE", help="cell and group from a CIF")
    source.add_argument("--block", metavar="NAME", help="which data block of the CIF")
    source.add_argument("--cell", metavar='"A B C ALPHA BETA GAMMA"', help="six numbers, angstrom and degrees")
    source.add_argument("--group", metavar="SYMBOL", help="point, space or limiting group")
    source.add_argument("--unique-axis", choices=("a", "b", "c"), help="for the short symbols 2, m, 2/m; default b")
    source.add_argument("--frame", metavar="RULE", help='default "x3=c x2=b*"')
    readings = parser.add_argument_group("the readings")
    readings.add_argument("--readings", type=Path, required=True, metavar="FILE.csv", help="table with a header")
    readings.add_argument("--property", metavar="KEY", help="a property of the catalogue, such as thermal_conductivity")
    readings.add_argument("--parity", choices=("polar", "axial"), help="default polar, or the property's")
    readings.add_argument(
        "--intrinsic", choices=("symmetric", "general", "antisymmetric"), help="default symmetric, or the property's"
    )
    readings.add_argument("--unit", help="convert the readings to this unit")
    readings.add_argument(
        "--batch", action="append", default=[], metavar="NAME=SIGMA", help="relative σ of a batch's calibration"
    )
    readings.add_argument(
        "--temperature-span", type=float, default=None, metavar="K", help="widest span taken for one temperature"
    )
    answer = parser.add_argument_group("the answer")
    answer.add_argument(
        "--pose",
        help='specimen frame: "z=(-2 0 1) x=[0 1 0]" (the first exact, the second as near as can be), or a pose '
        "of the interface as JSON",
    )
    answer.add_argument("--json", action="store_true", help="print the answer of the call /api/v1/fit")
    parser.set_defaults(run=run_fit)


def run_fit(options: argparse.Namespace) -> int:
    """Fit, print, and tell by the exit status whether there is a tensor."""
    from app import notebook
    from app.readings.report import print_unseen

    crystal = _read_crystal(options)
    pose_given = _read_pose(options.pose)
    pose = notebook.define_pose(crystal, pose_given)
    parity, intrinsic = _read_kind(options)
    span = {} if options.temperature_span is None else {"temperature_span": options.temperature_span}
    table = notebook.read_readings(options.readings, unit=options.unit, **span)
    if options.property is not None and table.unit is not None:
        from app.catalogue.units import check_unit

        check_unit(options.property, table.unit)
    fit = notebook.fit_readings(
        crystal,
        table.readings,
        parity=parity,
        intrinsic=intrinsic,
        batches=_read_batches(options.batch),
        pose=pose,
        unit=table.unit,
    )
    for note in table.notes:
        print(f"halfturn: {note}", file=sys.stderr)
    if options.json:
        from app.web.rendering import render_fit

        print(json.dumps({**render_fit(crystal, fit, pose), "unit": table.unit}, ensure_ascii=False, allow_nan=False))
    elif fit.determined:
        shown = None if pose_given is None else pose
        print(notebook.print_fit(crystal, fit, readings=table.readings, pose=shown))
    if fit.determined:
        return EXIT_DONE
    print("halfturn: the readings do not determine the tensor.", *print_unseen(fit), sep="\n", file=sys.stderr)
    return EXIT_UNDETERMINED


def _read_crystal(options: argparse.Namespace) -> Any:
    from app import notebook

    if options.cif is not None:
        if options.cell or options.group or options.unique_axis:
            raise InputError(
                "A CIF states cell and group itself.", field="--cif", hint="Give --cif, or --cell and --group."
            )
        return notebook.read_crystal(options.cif, block=options.block, frame=options.frame)
    if options.group is None:
        raise InputError("There is no crystal.", field="--group", hint="Give --cif FILE, or --cell and --group.")
    if options.block is not None:
        raise InputError("A block is one of a CIF.", field="--block", hint="Give --cif FILE with it.")
    cell = None
    if options.cell is not None:
        try:
            cell = [float(part) for part in options.cell.replace(",", " ").split()]
        except ValueError:
            raise InputError(
                f"The cell “{options.cell}” is not six numbers.",
                field="--cell",
                hint='Like "9.83 6.41 7.27 90 107.4 90".',
            ) from None
    return notebook.define_crystal(cell, options.group, unique_axis=options.unique_axis, frame=options.frame)


def _read_kind(options: argparse.Namespace) -> tuple[str, str]:
    parity, intrinsic = "polar", "symmetric"
    if options.property is not None:
        from app.catalogue.listing import find_property

        found = find_property(options.property)
        parity, intrinsic = found.parity, found.intrinsic
        if found.is_field:
            raise InputError(
                f"{found.name} is put on the crystal, not a property of it: symmetry locks none of its cells.",
                field="--property",
                hint="Fit it with --group 1 and no property.",
            )
    return options.parity or parity, options.intrinsic or intrinsic


def _read_pose(text: str | None) -> dict[str, Any] | None:
    if text is None:
        return None
    if text.lstrip().startswith("{"):
        try:
            read: dict[str, Any] = json.loads(text)
        except ValueError as error:
            raise InputError(f"The pose is not JSON: {error}.", field="--pose") from None
        return read
    parts = _PUT.findall(text)
    if len(parts) != 2 or re.sub(r"[\s,;]+", "", _PUT.sub("", text)):
        raise InputError(
            f"The pose “{text}” cannot be read.",
            field="--pose",
            hint='Write it like "z=(-2 0 1) x=[0 1 0]", or as JSON.',
        )
    return {"exact": list(parts[0]), "toward": list(parts[1])}


def _read_batches(given: list[str]) -> dict[str, float]:
    batches: dict[str, float] = {}
    for text in given:
        name, equals, sigma = text.rpartition("=")
        try:
            batches[name.strip()] = float(sigma)
        except ValueError:
            equals = ""
        if not equals:
            raise InputError(
                f"The batch “{text}” cannot be read.", field="--batch", hint='Write it like "furnace 2=0.01".'
            )
    return batches
