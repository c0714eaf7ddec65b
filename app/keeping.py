"""The commands ``halfturn check``, ``backup``, ``restore`` and ``schema``, which see to kept work."""

from __future__ import annotations

import argparse
import json
import os
import sys
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Final

from app.errors import InputError

EXIT_DONE: Final = 0
EXIT_FAULTY: Final = 1


def user_data_folder() -> Path:
    """Where this platform keeps a user's data for this tool; not made yet."""
    home = Path.home()
    if sys.platform == "win32":
        return Path(os.environ.get("LOCALAPPDATA") or home / "AppData" / "Local") / "Halfturn"
    if sys.platform == "darwin":
        return home / "Library" / "Application Support" / "Halfturn"
    # The XDG convention: a path that is not absolute is to be ignored.
    stated = Path(os.environ.get("XDG_DATA_HOME", ""))
    return (stated if stated.is_absolute() else home / ".local" / "share") / "halfturn"


def data_folder(options: argparse.Namespace) -> Path:
    """The folder of kept work that a command line names, or the usual one. Raises InputError where it is none."""
    folder: Path = (options.data or user_data_folder()).expanduser().absolute()
    if folder.exists() and not folder.is_dir():
        raise InputError(f"{folder} is not a folder.", field="--data", hint="Name a folder; it is made when needed.")
    return folder


def add_keeping_commands(commands: Any) -> None:
    """Add the four to the subcommands of the command line."""
    check = _add(
        commands,
        "check",
        run_check,
        "look through the kept work without changing it",
        "Look through the file of kept work without changing it: the database's pages and references, the hash of "
        "every revision, and whether every document can be read. Exit status: 0 sound, 1 something is wrong.",
    )
    check.add_argument("file", nargs="?", type=Path, metavar="FILE", help="a backup to look through instead")
    backup = _add(
        commands,
        "backup",
        run_backup,
        "copy the kept work, also while it is served",
        "Copy the file of kept work as of one moment, also while it is served, and look through the copy. Nothing is "
        "ever overwritten. Exit status: 0 done, 1 something is wrong with the copy or none could be made.",
    )
    backup.add_argument(
        "file", nargs="?", type=Path, metavar="FILE", help="the copy, or a folder for it; default: beside the original"
    )
    restore = _add(
        commands,
        "restore",
        run_restore,
        "put a backup in the place of the kept work",
        "Look through FILE and put a copy of it in the place of the kept work. What is there now is moved aside under "
        "a dated name, not deleted. Refused while the kept work is served. Exit status: 0 done, 1 FILE is not sound or "
        "cannot be put there, 2 bad input or not wanted.",
    )
    restore.add_argument("file", type=Path, metavar="FILE", help="the backup")
    restore.add_argument("--yes", action="store_true", help="do not ask")
    schema = commands.add_parser(
        "schema",
        help="print the JSON Schema of the document in which samples go out and come in",
        description="Print the JSON Schema (draft 2020-12) of the document in which samples go out and come in.",
    )
    schema.set_defaults(run=run_schema)


def _add(commands: Any, name: str, run: Any, brief: str, description: str) -> argparse.ArgumentParser:
    parser: argparse.ArgumentParser = commands.add_parser(name, help=brief, description=description)
    # What stands before the command is kept where nothing stands behind it.
    parser.add_argument(
        "--data", type=Path, default=argparse.SUPPRESS, metavar="DIR", help="the folder of kept work, as for serving"
    )
    parser.set_defaults(run=run)
    return parser


def run_check(options: argparse.Namespace) -> int:
    """Print what the file holds and what is wrong with it."""
    from app.store.checking import check_file
    from app.store.database import FILE_NAME

    report = check_file(options.file or data_folder(options) / FILE_NAME)
    print(report.path, *report.describe(), sep="\n")
    return EXIT_DONE if report.is_sound else EXIT_FAULTY


def run_backup(options: argparse.Namespace) -> int:
    """Make the copy, say where it is and what it holds."""
    from app.store.replacing import back_up

    report = back_up(data_folder(options), options.file, datetime.now(UTC))
    print(report.path, *report.describe(), sep="\n")
    return EXIT_DONE if report.is_sound else EXIT_FAULTY


def run_restore(options: argparse.Namespace) -> int:
    """Look through the backup, ask, and put it in place."""
    from app.store.checking import check_file
    from app.store.database import FILE_NAME
    from app.store.replacing import put_back

    folder = data_folder(options)
    coming = check_file(options.file)
    print(coming.path, *coming.describe(), sep="\n")
    if not coming.is_sound:
        print("halfturn: nothing was changed; restore takes sound files only.", file=sys.stderr)
        return EXIT_FAULTY
    present = folder / FILE_NAME
    if present.exists():
        print("In the place of:", present, *check_file(present).describe(), sep="\n")
    if not options.yes and not _ask():
        print("halfturn: nothing was changed.", file=sys.stderr)
        return 2
    aside = put_back(folder, options.file, datetime.now(UTC))
    print(f"Restored to {present}.")
    if aside is not None:
        print(f"What was there before is kept as {aside}.")
    return EXIT_DONE


def _ask() -> bool:
    if not sys.stdin.isatty():
        raise InputError("Nobody is there to be asked.", field="--yes", hint="Give --yes to restore without asking.")
    return input("Restore it? [y/N] ").strip().lower() in ("y", "yes")


def run_schema(_options: argparse.Namespace) -> int:
    """Print the schema."""
    from app.store.exchange_shapes import write_schema

    print(json.dumps(write_schema(), ensure_ascii=False, indent=2))
    return EXIT_DONE
