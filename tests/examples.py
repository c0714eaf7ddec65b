"""Where the invented examples lie that ship with the package."""

from pathlib import Path

import app

EXAMPLES = Path(app.__file__).parent / "examples"
