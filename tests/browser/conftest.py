"""One JupyterLab and one Chromium for all tests in a browser, and a time limit for each test."""

import os
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from harness import BROWSER_FLAGS, START, Notebook, find_browser, missing, running_lab
from playwright.sync_api import Browser, sync_playwright

from orbitsearch.lab.launch import copy_notebooks

# Doctests would be looked for in it as in a module of its own, by a name that is taken.
collect_ignore = ["conftest.py"]

# Seconds for one test, after which it fails wherever it hangs; a good run needs a tenth.
LIMIT = 300


@pytest.fixture(scope="session")
def lab_folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Folder that JupyterLab shows, with the notebooks of the package in it."""
    folder = tmp_path_factory.mktemp("lab")
    copy_notebooks(folder)
    return folder


@pytest.fixture(scope="session")
def lab_server(lab_folder: Path, tmp_path_factory: pytest.TempPathFactory) -> Iterator[str]:
    """Address of a JupyterLab on that folder."""
    if (reason := missing()) is not None:
        # A machine that tests every change must not pass without having looked.
        if os.environ.get("CI"):
            pytest.fail(f"{reason}; where CI is set, tests in a browser must run")
        pytest.skip(reason)
    with running_lab(lab_folder, tmp_path_factory.mktemp("home")) as address:
        yield address


@pytest.fixture(scope="session")
def browser() -> Iterator[Browser]:
    """A Chromium of this system, without a window."""
    with sync_playwright() as playwright:
        chromium = playwright.chromium.launch(
            executable_path=find_browser(), args=BROWSER_FLAGS, timeout=START * 1000
        )
        yield chromium
        chromium.close()


@pytest.fixture
def limit() -> Iterator[None]:
    """End the test with an error when it hangs."""
    if sys.platform == "win32":
        yield
        return

    def late(_number: int, _frame: object) -> None:
        raise TimeoutError(f"the test took more than {LIMIT} s")

    before = signal.signal(signal.SIGALRM, late)
    signal.alarm(LIMIT)
    yield
    signal.alarm(0)
    signal.signal(signal.SIGALRM, before)


@pytest.fixture
def open_notebook(
    limit: None, lab_server: str, browser: Browser, request: pytest.FixtureRequest
) -> Iterator[Callable[[str], Notebook]]:
    """Function that opens a notebook of the folder in a fresh page; at the end all are checked."""
    opened = []
    context = browser.new_context(viewport={"width": 1280, "height": 1000})

    def open_one(path: str) -> Notebook:
        notebook = Notebook(context.new_page(), lab_server, path)
        opened.append(notebook)
        return notebook

    yield open_one
    for number, notebook in enumerate(opened):
        notebook.screenshot(f"{request.node.name}-end-{number}")
        # The kernels of one test must not slow down the next.
        notebook.shut_down()
    context.close()
    for notebook in opened:
        notebook.check()
