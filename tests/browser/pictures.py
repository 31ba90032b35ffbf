"""Make the pictures of the README: `python tests/browser/pictures.py`, from our own demo data.

A search of a small window fills a catalogue of its own, the three notebooks are run on it in a real
JupyterLab, and each panel is taken as a picture of few colours.
"""

import sys
import tempfile
from pathlib import Path

from harness import BROWSER_FLAGS, Notebook, find_browser, running_lab
from PIL import Image
from playwright.sync_api import Browser, sync_playwright

from orbitsearch.lab.launch import copy_notebooks

ROOT = Path(__file__).parents[2]
PICTURES = ROOT / "notebooks" / "pictures"
# Tall, so that a whole panel is painted; what is below is cut off.
SIZE = {"width": 1280, "height": 2600}
SHOWN = {"search": 1650, "verify": 1500, "browse": 1950}
COLOURS = 160


def fill(notebook: Notebook, name: str, value: object) -> None:
    """Type into the number field with this description."""
    field = notebook.page.get_by_label(name, exact=True).first
    field.fill(str(value))
    field.press("Enter")


def search(notebook: Notebook) -> None:
    """The default window, searched, with an orbit chosen."""
    fill(notebook, "grid", 80)
    notebook.press("Start")
    notebook.expect_text("lab-message-search", "finished: ")
    rows = notebook.page.locator(".lab-run-table select")
    row = rows.locator("option", has_text="choreography").first
    rows.select_option(value=row.get_attribute("value") or "")
    notebook.page.get_by_role("button", name="together", exact=True).click()


def verify(notebook: Notebook) -> None:
    """The figure-eight."""
    fill(notebook, "table row", "collinear, 0.34712, 0.53272, 6.3259")
    notebook.press("Refine")
    notebook.expect_text("lab-message-verify", "verified")


def browse(notebook: Notebook) -> None:
    """A type and one of its orbits."""
    rows = notebook.page.locator(".lab-orbits select")
    row = rows.locator("option", has_text="choreography").first
    rows.select_option(value=row.get_attribute("value") or "")


def take(browser: Browser, address: str, name: str, dark: bool, folder: Path) -> None:
    """Run a notebook, bring its panel into a state worth showing, take the picture."""
    context = browser.new_context(viewport=SIZE)
    notebook = Notebook(context.new_page(), address, f"{name}.ipynb")
    if dark:
        notebook.command("apputils:change-theme", {"theme": "JupyterLab Dark"})
    notebook.command("application:toggle-left-area")
    notebook.run_all()
    {"search": search, "verify": verify, "browse": browse}[name](notebook)
    panel = notebook.page.locator(f".lab-{name}").first
    panel.evaluate("panel => panel.scrollIntoView()")
    notebook.page.wait_for_timeout(3000)
    path = folder / f"{name}{'-dark' if dark else ''}.png"
    panel.screenshot(path=path)
    whole = Image.open(path).convert("RGB")
    shown = whole.crop((0, 0, whole.width, min(SHOWN[name], whole.height)))
    shown.quantize(COLOURS).save(path, optimize=True)
    if dark:
        notebook.command("apputils:change-theme", {"theme": "JupyterLab Light"})
    notebook.shut_down()
    notebook.check()
    context.close()


def main(folder: Path, themes: tuple[bool, ...]) -> None:
    """All pictures into a folder."""
    folder.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as place, tempfile.TemporaryDirectory() as home:
        copy_notebooks(Path(place))
        with running_lab(Path(place), Path(home)) as address, sync_playwright() as playwright:
            browser = playwright.chromium.launch(executable_path=find_browser(), args=BROWSER_FLAGS)
            for dark in themes:
                for name in ("search", "verify", "browse"):
                    take(browser, address, name, dark, folder)
            browser.close()


if __name__ == "__main__":
    # With a folder named, both themes, to be looked at.
    if len(sys.argv) > 1:
        main(Path(sys.argv[1]), (False, True))
    else:
        main(PICTURES, (False,))
