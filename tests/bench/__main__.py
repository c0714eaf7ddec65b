"""``python -m tests.bench [pytest options]``: every measured case beside its floor, with the table of ratios."""

from __future__ import annotations

import sys

import pytest

# In one process and with the plug-in that the tests do without.
OPTIONS = [
    "-o",
    "addopts=--import-mode=importlib",
    "-o",
    "python_files=bench_*.py",
    "-p",
    "no:cacheprovider",
    "-q",
    "-s",
    "--benchmark-quiet",
]
NAMED = any(argument.startswith("tests/bench") for argument in sys.argv[1:])

if __name__ == "__main__":
    sys.exit(pytest.main([*OPTIONS, *(sys.argv[1:] if NAMED else ["tests/bench", *sys.argv[1:]])]))
