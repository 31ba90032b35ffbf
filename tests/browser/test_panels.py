"""The lab as a user has it: from an empty catalogue to a kept, found and exported orbit."""

import json
from collections.abc import Callable
from pathlib import Path

import pytest
from harness import Notebook
from playwright.sync_api import expect

from orbitsearch.catalog import Catalog

pytestmark = [pytest.mark.browser, pytest.mark.xdist_group("browser")]

OpenNotebook = Callable[[str], Notebook]

# The window of the figure-eight (C. Moore, PRL 70 (1993) 3675) and its twin.
WINDOW = ((0.3, 0.4), (0.5, 0.6))


@pytest.fixture
def catalog(lab_folder: Path) -> Path:
    """The notebooks' catalogue, which is not there yet."""
    path = lab_folder / "orbits.db"
    for file in lab_folder.glob("orbits.db*"):
        file.unlink()
    return path


def drag_slider(notebook: Notebook, name: str, ends: tuple[float, float], reach: float) -> None:
    """Drag both handles of a range slider to about these values."""
    label = notebook.page.locator(".widget-label").get_by_text(name, exact=True)
    slider = notebook.page.locator(".widget-slider", has=label).first
    slider.scroll_into_view_if_needed()
    track = slider.locator(".noUi-base").bounding_box()
    assert track is not None
    # The upper one first: it has to make room.
    for handle, value in ((1, ends[1]), (0, ends[0])):
        box = slider.locator(".noUi-handle").nth(handle).bounding_box()
        assert box is not None
        middle = box["y"] + box["height"] / 2
        notebook.page.mouse.move(box["x"] + box["width"] / 2, middle)
        notebook.page.mouse.down()
        notebook.page.mouse.move(track["x"] + track["width"] * value / reach, middle, steps=8)
        notebook.page.mouse.up()


def set_number(notebook: Notebook, name: str, value: float) -> None:
    """Type into the number field with this description."""
    field = notebook.page.get_by_label(name, exact=True).first
    field.fill(str(value))
    field.press("Enter")


def small_search(notebook: Notebook) -> None:
    """Search a small window, set by the sliders, until it is finished."""
    notebook.run_all()
    notebook.wait_plot("window figure")
    for name, ends in zip(("a", "b"), WINDOW, strict=True):
        drag_slider(notebook, name, ends, 0.92)
    set_number(notebook, "grid", 8)
    set_number(notebook, "T* up to", 12)
    set_number(notebook, "processes", 1)
    notebook.press("Start")
    notebook.expect_text("lab-message-search", "finished: ")


def chosen(notebook: Notebook, name: str) -> str:
    """Text of the row that is chosen in a list."""
    picked = notebook.page.locator(f".{name} select").evaluate("s => s.selectedOptions[0]?.text")
    return str(picked)


def test_from_an_empty_catalogue_to_an_exported_orbit(
    open_notebook: OpenNotebook, lab_folder: Path, catalog: Path
) -> None:
    search = open_notebook("search.ipynb")
    small_search(search)
    with Catalog.open(catalog) as filed:
        orbits = {record.id: record.orbit for record in filed.orbits()}
    eight = next(id for id, orbit in orbits.items() if orbit.choreography)

    # The orbit's mark on the map leads to its row, and its motion is shown.
    start = orbits[eight].start
    search.tap("window figure", start.p, start.q)
    search.expect_text("lab-message-search", f"orbit {eight}: ")
    assert "choreography" in chosen(search, "lab-run-table")
    # A tap elsewhere follows that start, which is no orbit.
    search.tap("window figure", 0.32, 0.55)
    search.expect_text("lab-start-view", "0.32")

    verify = open_notebook("verify.ipynb")
    verify.run_all()
    set_number(verify, "orbit", eight)
    verify.press("Load")
    verify.expect_text("lab-message-verify", f"verified; known as orbit {eight}")
    verify.expect_text("lab-verdict", "closure")
    verify.press("Keep")
    verify.expect_text("lab-message-verify", f"known already, as orbit {eight}")

    browse = open_notebook("browse.ipynb")
    browse.run_all()
    browse.expect_text("lab-message-browse", f"{len(orbits)} of {len(orbits)} orbits")
    types = browse.page.locator(".lab-kinds select")
    row = types.locator("option", has_text="(LR)^3").first
    types.select_option(value=row.get_attribute("value") or "")
    browse.expect_text("lab-message-browse", f"2 of {len(orbits)} orbits")
    listed = browse.page.locator(".lab-orbits select")
    row = listed.locator("option", has_text="choreography").first
    listed.select_option(value=row.get_attribute("value") or "")
    browse.expect_text("lab-message-detail", f"orbit {eight}, filed")

    turn_the_sphere(browse)
    play_and_stop(browse)

    browse.press("JSON")
    browse.expect_text("lab-message-browse", "2 orbits written to")
    written = json.loads((lab_folder / "selection.json").read_text(encoding="utf-8"))
    assert eight in [orbit["id"] for orbit in written]


def turn_the_sphere(notebook: Notebook) -> None:
    """Drag on the sphere: it turns, without the kernel."""
    notebook.wait_plot("sphere figure")
    turn = notebook.page.get_by_role("group", name="Turn the sphere").first
    before = turn.inner_text()
    notebook.drag("sphere figure", (0.0, 0.2), (0.6, 0.2))
    expect(turn).not_to_have_text(before)


def phase(notebook: Notebook) -> float:
    """Where the clock of the figures stands."""
    return float(
        notebook.evaluate(
            "const found = Bokeh.documents.map((d) => d.get_model_by_name('clock phase'))"
            ".filter((m) => m != null); return found.at(-1).value"
        )
    )


def play_and_stop(notebook: Notebook) -> None:
    """Let the bodies run, and stop them."""
    notebook.press("Play")
    notebook.page.wait_for_timeout(1000)
    running = phase(notebook)
    assert running > 0.0
    notebook.press("Pause")
    notebook.page.wait_for_timeout(200)
    stopped = phase(notebook)
    notebook.page.wait_for_timeout(500)
    assert phase(notebook) == stopped >= running


def test_a_search_is_stopped_and_resumed(open_notebook: OpenNotebook, catalog: Path) -> None:
    notebook = open_notebook("search.ipynb")
    notebook.run_all()
    set_number(notebook, "grid", 150)
    set_number(notebook, "T* up to", 20)
    notebook.press("Start")
    notebook.expect_text("lab-tells", " of 36 tiles")
    # A running search blocks nothing: another control answers meanwhile.
    notebook.page.get_by_role("button", name="syzygies", exact=True).click()
    notebook.press("Stop")
    notebook.expect_text("lab-message-search", "stopped: ")
    with Catalog.open(catalog) as filed:
        assert [run.state for run in filed.runs()] == ["stopped"]
        kept = len(list(filed.orbits()))
    set_number(notebook, "processes", 2)
    notebook.press("Resume run 1")
    notebook.expect_text("lab-message-search", "finished: ")
    with Catalog.open(catalog) as filed:
        assert [run.state for run in filed.runs()] == ["finished"]
        assert len(list(filed.orbits())) >= max(kept, 5)


def marks_on_the_map(notebook: Notebook) -> int:
    """Number of orbits that the page shows on the map."""
    return int(
        notebook.evaluate(
            "const found = Bokeh.documents.map((d) => d.get_model_by_name('window marks'))"
            ".filter((m) => m != null).at(-1);"
            "return (found.data.get ? found.data.get('id') : found.data.id).length"
        )
    )


def test_a_page_that_is_loaded_again_shows_the_present_state(
    open_notebook: OpenNotebook, catalog: Path
) -> None:
    notebook = open_notebook("search.ipynb")
    small_search(notebook)
    marks = marks_on_the_map(notebook)
    assert marks >= 2
    notebook.save()
    notebook.reload()
    notebook.wait_plot("window figure")
    assert marks_on_the_map(notebook) == marks
    notebook.expect_text("lab-message-search", "finished: ")
    # And it still works.
    notebook.tap("window figure", 0.32, 0.55)
    notebook.expect_text("lab-start-view", "0.32")
