"""JupyterLab on a folder that has the notebooks of the lab in it.

The notebooks belong to whoever works in the folder: they are copied there once and never written
again.  JupyterLab runs as a process of its own, without anything that would ask the network.
"""

import contextlib
import importlib.util
import json
import os
import subprocess
import sys
import tempfile
from collections.abc import Callable, Iterator
from importlib import resources
from pathlib import Path

from orbitsearch.errors import BadRequest, OrbitsearchError

__all__ = ["copy_notebooks", "lab_command", "lab_settings", "shipped_notebooks", "start_lab"]

# What the lab imports, and pip does not install without being asked.
NEEDED = ("jupyterlab", "ipywidgets", "anywidget", "bokeh")

# JupyterLab asks on its first start whether it may fetch news, over the middle of the page.
SETTINGS = {
    "@jupyterlab/apputils-extension:notification": {
        "fetchNews": "false",
        "checkForUpdates": False,
    }
}


def shipped_notebooks() -> dict[str, bytes]:
    """Notebooks that come with the package, by name of file."""
    inside = resources.files("orbitsearch") / "_notebooks"
    # In a clone they are at its root, where they are edited; a wheel has a copy (pyproject.toml).
    clone = Path(__file__).parents[2] / "notebooks"
    folder = inside if inside.is_dir() else clone
    if not folder.is_dir():
        return {}
    found = [f for f in folder.iterdir() if f.name.endswith(".ipynb")]
    return {f.name: f.read_bytes() for f in sorted(found, key=lambda f: f.name)}


def copy_notebooks(folder: Path) -> list[str]:
    """Put the shipped notebooks into a folder, and leave alone what is there already.

    Parameters
    ----------
    folder : Path
        Made, with its parents, if there is none.

    Returns
    -------
    list of str
        One line a notebook that says what was done with it.
    """
    if folder.exists() and not folder.is_dir():
        raise BadRequest(f"`folder` must be a folder, and this is a file: {folder}")
    folder.mkdir(parents=True, exist_ok=True)
    lines = []
    for name, content in shipped_notebooks().items():
        target = folder / name
        try:
            # "x" refuses a file that is there, also one that came a moment ago.
            with target.open("xb") as file:
                file.write(content)
            lines.append(f"{name}: copied")
        except FileExistsError:
            same = target.is_file() and target.read_bytes() == content
            lines.append(f"{name}: there already" if same else f"{name}: yours is kept as it is")
    return lines


def lab_command(folder: Path, open_browser: bool = True, port: int | None = None) -> list[str]:
    """Words of the command that starts JupyterLab."""
    command = [sys.executable, "-m", "jupyterlab", f"--ServerApp.root_dir={folder.resolve()}"]
    command += ["--LabApp.news_url=None"]
    command += ["--LabApp.check_for_updates_class=jupyterlab.NeverCheckForUpdate"]
    # The list of extensions to install comes from the network.
    command += ["--LabApp.extension_manager=readonly"]
    # Ctrl-C ends it, without a question that nobody expects.
    command += ["--ServerApp.answer_yes=True"]
    if not open_browser:
        command += ["--no-browser"]
    if port is not None:
        # The port that was asked for, or none.
        command += [f"--port={port}", "--ServerApp.port_retries=0"]
    if getattr(os, "geteuid", lambda: 1)() == 0:
        # In a container there may be no other user, and JupyterLab refuses without this.
        command += ["--allow-root"]
    return command


@contextlib.contextmanager
def lab_settings() -> Iterator[dict[str, str]]:
    """Environment in which JupyterLab has our settings as defaults; a user's own still win."""
    with tempfile.TemporaryDirectory(prefix="orbitsearch-lab-") as folder:
        file = Path(folder) / "labconfig" / "default_setting_overrides.json"
        file.parent.mkdir()
        file.write_text(json.dumps(SETTINGS), encoding="utf-8")
        before = os.environ.get("JUPYTER_CONFIG_PATH")
        path = os.pathsep.join([folder, before] if before else [folder])
        yield {**os.environ, "JUPYTER_CONFIG_PATH": path}


def start_lab(
    folder: Path,
    open_browser: bool = True,
    port: int | None = None,
    say: Callable[[str], object] | None = None,
) -> int:
    """Copy the notebooks into a folder, start JupyterLab there, and wait until it ends.

    Parameters
    ----------
    folder : Path
        Where the notebooks are copied to, and which JupyterLab shows.
    open_browser : bool
        Whether JupyterLab opens a page by itself; it prints its address in any case.
    port : int, optional
        By default 8888, or the next one that is free.
    say : callable, optional
        Gets a line for each notebook.

    Returns
    -------
    int
        Exit code of JupyterLab.

    Raises
    ------
    OrbitsearchError
        JupyterLab or what the notebooks import is not installed.
    """
    missing = [name for name in NEEDED if importlib.util.find_spec(name) is None]
    if missing:
        raise OrbitsearchError(
            f"the lab needs {', '.join(missing)}: install with pip install 'orbitsearch[lab]'"
        )
    for line in copy_notebooks(folder):
        if say is not None:
            say(line)
    with lab_settings() as environment:
        command = lab_command(folder, open_browser, port)
        process = subprocess.Popen(command, env=environment)
        try:
            while True:
                # Ctrl-C reaches JupyterLab as well, which takes its time to end the kernels.
                with contextlib.suppress(KeyboardInterrupt):
                    return process.wait()
        finally:
            if process.poll() is None:
                process.terminate()
                process.wait()
