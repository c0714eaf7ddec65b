"""A wheel carries templates and static files, and works from any working directory."""

from __future__ import annotations

import subprocess
import sys
import zipfile
from pathlib import Path

import pytest

from tests.processes import ROOT

PROBE = """
import app.cli
from pathlib import Path
from app.web.resources import static_folder, templates_folder
from app.web.server import create_app

package = Path(app.cli.__file__).parent
assert package != Path({checkout!r}), package
assert static_folder() == package / "static", static_folder()
assert templates_folder() == package / "templates", templates_folder()
create_app()
print("complete")
"""


def run(*command: str, **options: str | Path | dict[str, str]) -> str:
    done = subprocess.run(command, capture_output=True, text=True, timeout=300, **options)  # type: ignore[call-overload]
    assert done.returncode == 0, done.stderr
    return str(done.stdout)


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    pytest.importorskip("hatchling", reason="hatchling, of the test extra, builds the wheel")
    folder = tmp_path_factory.mktemp("wheel")
    pip = (sys.executable, "-m", "pip", "--quiet", "--disable-pip-version-check")
    run(*pip, "wheel", "--no-deps", "--no-build-isolation", "--wheel-dir", str(folder), str(ROOT))
    (built,) = folder.glob("*.whl")
    return built


def tracked(folder: str) -> set[str]:
    return {
        f"app/{path.relative_to(ROOT).as_posix()}" if folder != "app" else path.relative_to(ROOT).as_posix()
        for path in (ROOT / folder).rglob("*")
        if path.is_file() and "__pycache__" not in path.parts
    }


def test_the_wheel_holds_everything_and_nothing_else(wheel: Path) -> None:
    with zipfile.ZipFile(wheel) as archive:
        names = {name for name in archive.namelist() if ".dist-info/" not in name}
    assert names == tracked("app") | tracked("static") | tracked("templates")


def test_the_installed_wheel_works_elsewhere(wheel: Path, tmp_path: Path) -> None:
    target = tmp_path / "installed"
    pip = (sys.executable, "-m", "pip", "--quiet", "--disable-pip-version-check")
    run(*pip, "install", "--no-deps", "--no-index", "--target", str(target), str(wheel))
    probe = tmp_path / "probe.py"
    probe.write_text(PROBE.format(checkout=str(ROOT / "app")))
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    environment = {"PYTHONPATH": str(target), "PATH": ""}
    assert run(sys.executable, str(probe), cwd=elsewhere, env=environment) == "complete\n"
    entry = next(target.glob("*.dist-info")) / "entry_points.txt"
    assert "halfturn = app.cli:main" in entry.read_text()
