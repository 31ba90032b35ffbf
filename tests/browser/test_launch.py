"""The lab's start: notebooks are copied and never overwritten, and what is missing is said."""

import json
import os
import re
import sys
from pathlib import Path

import pytest

from orbitsearch.errors import BadRequest, OrbitsearchError
from orbitsearch.lab import launch


@pytest.fixture
def shipped(monkeypatch):
    notebooks = {"a.ipynb": b"{}", "b.ipynb": b"[]"}
    monkeypatch.setattr(launch, "shipped_notebooks", lambda: notebooks)
    return notebooks


def test_notebooks_are_copied_once_and_never_overwritten(tmp_path, shipped):
    folder = tmp_path / "new" / "folder"
    assert launch.copy_notebooks(folder) == ["a.ipynb: copied", "b.ipynb: copied"]
    assert {f.name: f.read_bytes() for f in folder.iterdir()} == shipped
    (folder / "a.ipynb").write_bytes(b"mine")
    lines = launch.copy_notebooks(folder)
    assert lines == ["a.ipynb: yours is kept as it is", "b.ipynb: there already"]
    assert (folder / "a.ipynb").read_bytes() == b"mine"


def test_what_ships_is_what_the_repository_has():
    root = Path(launch.__file__).parents[2]
    there = {f.name: f.read_bytes() for f in (root / "notebooks").glob("*.ipynb")}
    assert launch.shipped_notebooks() == there


def test_a_file_is_no_folder(tmp_path):
    (tmp_path / "file").touch()
    with pytest.raises(BadRequest, match="`folder` must be a folder"):
        launch.copy_notebooks(tmp_path / "file")


def test_what_is_not_installed_is_said_in_one_line(tmp_path, monkeypatch):
    monkeypatch.setattr(launch, "NEEDED", ("json", "no_such_library"))
    line = "the lab needs no_such_library: install with pip install 'orbitsearch[lab]'"
    with pytest.raises(OrbitsearchError, match=f"^{re.escape(line)}$"):
        launch.start_lab(tmp_path / "new")
    assert not (tmp_path / "new").exists()


def test_the_command_says_what_was_asked_for(tmp_path):
    command = launch.lab_command(tmp_path, open_browser=False, port=9999)
    assert command[:3] == [sys.executable, "-m", "jupyterlab"]
    assert {"--no-browser", "--port=9999", "--ServerApp.port_retries=0"} <= set(command)
    assert not [
        word for word in launch.lab_command(tmp_path) if "browser" in word or "port" in word
    ]


def test_a_user_s_own_settings_stay(monkeypatch):
    monkeypatch.setenv("JUPYTER_CONFIG_PATH", "theirs")
    with launch.lab_settings() as environment:
        ours, theirs = environment["JUPYTER_CONFIG_PATH"].split(os.pathsep)
        assert theirs == "theirs"
        file = Path(ours) / "labconfig" / "default_setting_overrides.json"
        assert json.loads(file.read_text(encoding="utf-8")) == launch.SETTINGS
    assert not Path(ours).exists()


def test_start_lab_waits_for_jupyterlab_and_returns_its_code(tmp_path, monkeypatch, shipped):
    said = []
    code = "import sys; sys.exit(7)"
    monkeypatch.setattr(launch, "lab_command", lambda *options: [sys.executable, "-c", code])
    assert launch.start_lab(tmp_path, say=said.append) == 7
    assert said == ["a.ipynb: copied", "b.ipynb: copied"]
