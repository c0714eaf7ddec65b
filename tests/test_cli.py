"""The command line, apart from serving itself."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from app.cli import main, user_data_folder
from app.version import VERSION
from tests.processes import command_environment


def test_the_version(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(["--version"])
    assert ended.value.code == 0
    assert capsys.readouterr().out == f"Halfturn {VERSION}\n"


@pytest.mark.parametrize("port", ["-1", "65536", "eight", "1.5", "８０"])
def test_a_port_that_is_none(port: str, capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main([f"--port={port}"])
    assert ended.value.code == 2
    assert "0 to 65535" in capsys.readouterr().err


def test_data_must_be_a_folder(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    file = tmp_path / "file"
    file.write_text("")
    assert main(["--no-browser", "--port", "0", "--data", str(file)]) == 2
    assert "--data" in capsys.readouterr().err


def test_the_data_folder_follows_the_platform(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    # The XDG base directory specification: absolute paths count, others are ignored; the default is ~/.local/share.
    monkeypatch.setattr(sys, "platform", "linux")
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setenv("XDG_DATA_HOME", str(tmp_path / "xdg"))
    assert user_data_folder() == tmp_path / "xdg" / "halfturn"
    for ignored in ("relative/path", ""):
        monkeypatch.setenv("XDG_DATA_HOME", ignored)
        assert user_data_folder() == tmp_path / ".local" / "share" / "halfturn"
    monkeypatch.setattr(sys, "platform", "darwin")
    assert user_data_folder() == tmp_path / "Library" / "Application Support" / "Halfturn"
    monkeypatch.setattr(sys, "platform", "win32")
    monkeypatch.setenv("LOCALAPPDATA", str(tmp_path / "local"))
    assert user_data_folder() == tmp_path / "local" / "Halfturn"


def test_help_does_not_wait_for_the_server_to_be_imported(tmp_path: Path) -> None:
    code = "import sys, app.cli; app.cli.build_parser(); print('fastapi' in sys.modules, 'scipy' in sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=tmp_path,
        env=command_environment(),
        capture_output=True,
        text=True,
        check=True,
        timeout=30,
    )
    assert done.stdout.split() == ["False", "False"]
