"""The command line: ``halfturn``, also ``python -m app``.

Without a subcommand it serves. Whatever is slow to import is imported by the command that needs it.
"""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from pathlib import Path

from app.errors import InputError, StoreError
from app.fitting import add_fit_command
from app.keeping import add_keeping_commands, data_folder, user_data_folder
from app.version import VERSION

DEFAULT_PORT = 8010
TOKEN_SETTING = "HALFTURN_TOKEN"
EXIT_DONE = 0
EXIT_NOT_KEPT = 1
EXIT_BAD_INPUT = 2


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command and return its exit status."""
    options = build_parser().parse_args(arguments)
    try:
        status: int = options.run(options)
    except InputError as error:
        print(f"halfturn: {error}", *_list_problems(error), sep="\n", file=sys.stderr)
        return EXIT_BAD_INPUT
    except StoreError as error:
        print(f"halfturn: {error}", file=sys.stderr)
        return EXIT_NOT_KEPT
    return status


def _list_problems(error: InputError) -> list[str]:
    """Every bad row of a table, where the error tells of several."""
    problems = error.detail.get("problems", []) if isinstance(error.detail, dict) else []
    return [
        f"  line {problem['line']}{', ' + problem['column'] if problem.get('column') else ''}: {problem['reason']}"
        for problem in problems
        if "line" in problem
    ]


def build_parser() -> argparse.ArgumentParser:
    """The whole command line; each subcommand sets ``run``, a function from its options to an exit status."""
    parser = argparse.ArgumentParser(
        prog="halfturn",
        description="Tensor properties of single crystals. Without a command: serve the pages and open the browser.",
    )
    parser.add_argument("--version", action="version", version=f"Halfturn {VERSION}")
    serving = parser.add_argument_group("serving")
    serving.add_argument(
        "--port", type=_port, default=DEFAULT_PORT, metavar="N", help=f"0 takes any free one; default {DEFAULT_PORT}"
    )
    serving.add_argument("--no-browser", action="store_true", help="do not open the browser")
    serving.add_argument(
        "--data", type=Path, metavar="DIR", help=f"where stored work is kept; default {user_data_folder()}"
    )
    serving.add_argument(
        "--host",
        default="127.0.0.1",
        metavar="ADDRESS",
        help="listen on this address of the machine, 0.0.0.0 for all; other machines can then reach it, a token is "
        "demanded and nothing is encrypted; default 127.0.0.1, this machine alone",
    )
    serving.add_argument(
        "--token",
        metavar="TEXT",
        help=f"demand this token; better put into the environment as {TOKEN_SETTING}, since others on this machine can "
        "read a command line; made and printed where --host needs one and none is given",
    )
    parser.set_defaults(run=run_serve)
    commands = parser.add_subparsers(title="commands", metavar="COMMAND")
    add_fit_command(commands)
    add_keeping_commands(commands)
    return parser


def run_serve(options: argparse.Namespace) -> int:
    """Serve the pages and the calls until stopped."""
    data_dir = data_folder(options)
    # The matrices of this tool are small: sharing one among threads costs more than it brings, and makes turns uneven.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    from app.web.access import check_token
    from app.web.serving import serve

    stated = options.token if options.token is not None else os.environ.get(TOKEN_SETTING) or None
    token = None if stated is None else check_token(stated)
    serve(options.port, data_dir, open_browser=not options.no_browser, host=options.host, token=token)
    return EXIT_DONE


def _port(text: str) -> int:
    if not (text.isascii() and text.isdigit() and int(text) <= 65535):
        raise argparse.ArgumentTypeError(f"{text!r} is not a port: give a whole number from 0 to 65535")
    return int(text)
