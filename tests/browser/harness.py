"""A notebook in JupyterLab in a browser, as a test sees it: cells, figures, clicks, the console.

Nothing in here waits without a limit.  What the page reports as an error, and every request that
would leave this machine, is kept and makes the test fail at its end (`Notebook.check`).
"""

import importlib.util
import json
import os
import shutil
import socket
import subprocess
import sys
import time
import urllib.request
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

import nbformat
from playwright.sync_api import Locator, Page, expect

from orbitsearch.lab.launch import NEEDED, lab_command, lab_settings

BROWSERS = ("chromium", "chromium-browser", "google-chrome")
BROWSER_FLAGS = [
    "--no-sandbox",
    "--disable-gpu",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
]
# Seconds.  Machines that run tests are shared; a good run needs a tenth of these.
START = 90.0
STEP = 60.0

# Finds the view of a plot by its model's name, and says where its frame is on the page.
FIND_PLOT = """
const plot = (name) => {
  for (const root of globalThis.Bokeh?.index.roots ?? [])
    if (root.el.isConnected)
      for (const view of Bokeh.index.query((v) => v.model.name === name && v.frame !== undefined))
        if (view.el.isConnected) return view;
  return null;
};
"""


def find_browser() -> str | None:
    """Path of a Chromium of this system."""
    return next((path for name in BROWSERS if (path := shutil.which(name))), None)


def free_port() -> int:
    """A port of this machine that nobody listens on."""
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@contextmanager
def running_lab(folder: Path, home: Path) -> Iterator[str]:
    """JupyterLab on a folder, as `start_lab` would start it but away from the user's settings.

    Yields
    ------
    str
        Its address.
    """
    port = free_port()
    command = [*lab_command(folder, open_browser=False, port=port), "--expose-app-in-browser"]
    command += ["--ServerApp.ip=127.0.0.1", "--IdentityProvider.token="]
    with lab_settings() as environment, (home / "server.log").open("wb") as log:
        environment |= {"HOME": str(home), "IPYTHONDIR": str(home / "ipython")}
        for name in ("CONFIG", "DATA", "RUNTIME"):
            environment[f"JUPYTER_{name}_DIR"] = str(home / name.lower())
        # The server's own warnings are not ours, and its kernels must import this package.
        environment.pop("PYTHONWARNINGS", None)
        server = subprocess.Popen(command, env=environment, stdout=log, stderr=subprocess.STDOUT)
        try:
            _wait_for_server(server, port, home / "server.log")
            yield f"http://127.0.0.1:{port}"
        finally:
            server.terminate()
            try:
                server.wait(20)
            except subprocess.TimeoutExpired:
                server.kill()
                server.wait(20)


def _wait_for_server(server: subprocess.Popen[bytes], port: int, log: Path) -> None:
    end = time.monotonic() + START
    while time.monotonic() < end and server.poll() is None:
        try:
            with urllib.request.urlopen(f"http://127.0.0.1:{port}/api", timeout=5):
                return
        except OSError:
            time.sleep(0.2)
    raise AssertionError(f"JupyterLab did not start:\n{log.read_text(errors='replace')[-4000:]}")


def write_notebook(path: Path, *cells: str) -> Path:
    """Write a notebook of code cells."""
    notebook = nbformat.v4.new_notebook(cells=[nbformat.v4.new_code_cell(cell) for cell in cells])
    notebook.metadata["kernelspec"] = {
        "name": "python3",
        "display_name": "Python 3 (ipykernel)",
        "language": "python",
    }
    nbformat.write(notebook, path)
    return path


def execute(path: Path) -> Any:
    """Run a notebook from top to bottom in its folder, without a page; return what it became."""
    # In a process of its own: its warnings are not ours.
    code = (
        "import sys, nbformat, nbclient;"
        "n = nbformat.read(sys.argv[1], 4);"
        "where = {'metadata': {'path': sys.argv[2]}};"
        "nbclient.NotebookClient(n, timeout=120, kernel_name='python3', resources=where).execute();"
        "nbformat.write(n, sys.argv[1])"
    )
    command = [sys.executable, "-c", code, str(path), str(path.parent)]
    done = subprocess.run(command, capture_output=True, text=True, timeout=200, check=False)
    assert done.returncode == 0, done.stderr
    return nbformat.read(path, 4)


def run_notebook(folder: Path, *cells: str) -> list[str]:
    """Run code cells in a kernel and return what each of them printed."""
    run = execute(write_notebook(folder / "notebook.ipynb", *cells))
    return ["".join(o.get("text", "") for o in cell.outputs) for cell in run.cells]


class Notebook:
    """One notebook, open in one page.

    Parameters
    ----------
    page : Page
        A fresh page of the browser.
    address : str
        Of the server.
    path : str
        Of the notebook, below the server's folder.
    """

    def __init__(self, page: Page, address: str, path: str) -> None:
        self.page = page
        self.errors: list[str] = []
        self.outside: list[str] = []
        page.set_default_timeout(STEP * 1000)
        page.on("console", self._heard)
        page.on("pageerror", lambda error: self.errors.append(str(error)))
        page.on("request", self._requested)
        # A notebook that is not saved asks whether it may be left.
        page.on("dialog", lambda dialog: dialog.accept())
        # A workspace that was used before would open what was open then.
        page.goto(f"{address}/lab/workspaces/{uuid.uuid4().hex}/tree/{path}")
        self.wait_idle()

    def _heard(self, message: Any) -> None:
        if message.type == "error":
            self.errors.append(f"{message.text} ({message.location.get('url')})")

    def _requested(self, request: Any) -> None:
        url = urlsplit(request.url)
        if url.scheme not in ("data", "blob", "about") and url.hostname != "127.0.0.1":
            self.outside.append(request.url)

    def check(self) -> None:
        """Fail if the page reported an error or asked for anything outside this machine."""
        assert not self.outside, f"requests to the network: {self.outside}"
        assert not self.errors, "errors in the console:\n" + "\n".join(self.errors)

    # ------------------------------------------------------------ kernel and cells

    def wait_idle(self) -> None:
        """Wait until a kernel is there and has nothing to do."""
        # The indicator in the toolbar says idle before there is a kernel.
        self.page.get_by_text("Python 3 (ipykernel) | Idle").first.wait_for()

    def command(self, name: str, arguments: dict[str, Any] | None = None) -> None:
        """Run a command of JupyterLab, and wait for its end."""
        call = f"jupyterapp.commands.execute({json.dumps(name)}, {json.dumps(arguments or {})})"
        self.evaluate(f"await {call}; return null")

    def run_all(self) -> None:
        """Run all cells, and wait until the last has ended."""
        self.command("notebook:run-all-cells")
        self.wait_idle()

    def type_and_run(self, code: str) -> None:
        """Put a cell below the last one, and run it."""
        self.evaluate(
            "const panel = jupyterapp.shell.currentWidget.content;"
            "panel.activeCellIndex = panel.widgets.length - 1; return null"
        )
        self.command("notebook:insert-cell-below")
        self.evaluate(
            "jupyterapp.shell.currentWidget.content.activeCell.model.sharedModel.setSource("
            f"{json.dumps(code)}); return null"
        )
        self.command("notebook:run-cell")
        self.wait_idle()

    def restart(self) -> None:
        """Restart the kernel, without a question."""
        self.evaluate(
            "const panel = jupyterapp.shell.currentWidget;"
            "await panel.sessionContext.session.kernel.restart(); return null"
        )
        self.wait_idle()

    def reload(self) -> None:
        """Load the page again, as a user does; the kernel lives on."""
        self.page.reload()
        self.wait_idle()

    def shut_down(self) -> None:
        """End the kernel."""
        self.evaluate("await jupyterapp.shell.currentWidget.sessionContext.shutdown(); return null")

    def save(self) -> None:
        """Save the notebook, outputs included."""
        self.command("docmanager:save")

    def evaluate(self, body: str) -> Any:
        """Value of the body of an asynchronous JavaScript function."""
        limit = f"new Promise((_, no) => setTimeout(() => no(new Error('limit')), {STEP * 1000}))"
        return self.page.evaluate(f"() => Promise.race([(async () => {{{body}}})(), {limit}])")

    def until(self, condition: str) -> None:
        """Wait until a JavaScript expression is true; `plot(name)` finds the view of a plot."""
        self.page.wait_for_function(f"() => {{ {FIND_PLOT} return {condition} }}", polling=100)

    def text(self, name: str) -> str:
        """Text of the widget with this class (`add_class`)."""
        return self.page.locator(f".{name}").first.inner_text()

    def expect_text(self, name: str, text: str) -> None:
        """Wait until the widget with this class shows a text."""
        expect(self.page.locator(f".{name}").first).to_contain_text(text, timeout=STEP * 1000)

    def slider(self, name: str) -> Locator:
        """Handle of the slider with this description, to be moved by the arrow keys."""
        # Sliders of ipywidgets have a label, but no name for assistive techniques.
        label = self.page.locator(".widget-label").get_by_text(name, exact=True)
        return self.page.locator(".widget-slider", has=label).get_by_role("slider").first

    def press(self, name: str) -> None:
        """Click on the button with this description."""
        self.page.get_by_role("button", name=name, exact=True).first.click()

    # ------------------------------------------------------------ figures

    def wait_plot(self, name: str) -> None:
        """Bring the plot whose Bokeh model has this name into sight; wait until it is painted."""
        # JupyterLab lays out what is in sight, so that nothing is painted below.
        found = f"plot({json.dumps(name)})"
        self.until(f"{found} !== null")
        self.evaluate(f"{FIND_PLOT} {found}.el.scrollIntoView({{block: 'center'}}); return null")
        self.until(f"{found}.model.document?.is_idle")

    def plot(self, name: str, expression: str) -> Any:
        """Value of a JavaScript expression of `view`, the view of the plot of this name."""
        return self.evaluate(
            f"{FIND_PLOT} const view = plot({json.dumps(name)}); return {expression}"
        )

    def pixel(self, name: str, x: float, y: float) -> tuple[float, float]:
        """Where on the page a point of a plot is, which is brought into sight."""
        self.wait_plot(name)
        at = self.plot(
            name,
            "(() => { const box = view.canvas_view.el.getBoundingClientRect(); return ["
            f"box.left + view.frame.x_scale.compute({x}),"
            f"box.top + view.frame.y_scale.compute({y})] }})()",
        )
        return at[0], at[1]

    def tap(self, name: str, x: float, y: float) -> None:
        """Click on a point of a plot."""
        self.page.mouse.click(*self.pixel(name, x, y))
        # Bokeh takes another click within 300 ms for a double one.
        self.page.wait_for_timeout(400)

    def drag(
        self, name: str, start: tuple[float, float], end: tuple[float, float], steps: int = 10
    ) -> None:
        """Press at one point of a plot, move to another, release."""
        first, last = self.pixel(name, *start), self.pixel(name, *end)
        self.page.mouse.move(*first)
        self.page.mouse.down()
        self.page.mouse.move(*last, steps=steps)
        self.page.mouse.up()

    def column(self, name: str, column: str) -> list[float]:
        """A column of the first glyph of a plot, as the page has it."""
        data = "view.model.renderers[0].data_source.data"
        get = f"({data}.get ? {data}.get({json.dumps(column)}) : {data}[{json.dumps(column)}])"
        return list(self.plot(name, f"Array.from({get})"))

    def screenshot(self, name: str) -> None:
        """Save what the page shows, in the folder ORBITSEARCH_SCREENSHOTS if that is set."""
        folder = os.environ.get("ORBITSEARCH_SCREENSHOTS")
        if folder:
            Path(folder).mkdir(parents=True, exist_ok=True)
            self.page.screenshot(path=Path(folder) / f"{name}.png")


def missing() -> str | None:
    """Why there can be no test in a browser here; None if there can."""
    if find_browser() is None:
        return f"none of {', '.join(BROWSERS)} is installed"
    absent = [name for name in NEEDED if importlib.util.find_spec(name) is None]
    return f"{', '.join(absent)} is not installed" if absent else None
