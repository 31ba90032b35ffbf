"""Figures in a real JupyterLab: what Python sets is on the page, what a user does is in Python."""

import time

import pytest
from harness import write_notebook

pytestmark = [pytest.mark.browser, pytest.mark.xdist_group("browser")]

SETUP = """
import threading
import ipywidgets as widgets
import numpy as np
from bokeh.models import ColumnDataSource
from bokeh.plotting import figure
from orbitsearch.lab.host import Figure
from orbitsearch.lab.loop import Worker, on_kernel_loop

def shown(name, text="nothing"):
    label = widgets.Label(text)
    label.add_class(name)
    return label
"""

POINTS = """
source = ColumnDataSource({"x": [1, 2, 3], "y": [1, 2, 3]})
plot = figure(name="points", width=420, height=300, tools="tap,pan",
              x_range=(0, 4), y_range=(0, 8))
plot.scatter("x", "y", source=source, size=20)
slider = widgets.IntSlider(description="shift", max=4)
answer, where = shown("answer"), shown("where")

@on_kernel_loop
def moved(change):
    source.data = {"x": [1, 2, 3], "y": [y + change["new"] for y in (1, 2, 3)]}

def picked(attr, old, new):
    thread = threading.current_thread() is threading.main_thread()
    answer.value = f"picked {new} of {list(source.data['y'])}, main thread: {thread}"

def panned(attr, old, new):
    where.value = f"starts at {new:.2f}"

slider.observe(moved, "value")
source.selected.on_change("indices", picked)
plot.x_range.on_change("start", panned)
view = Figure(plot)
widgets.VBox([slider, view, answer, where])
"""


def shift(notebook, times=1):
    handle = notebook.slider("shift")
    handle.focus()
    for _ in range(times):
        handle.press("ArrowRight")


def wait_column(notebook, name, column, values):
    get = f"plot('{name}').model.renderers[0].data_source.data"
    get = f"({get}.get ? {get}.get('{column}') : {get}['{column}'])"
    notebook.until(f"String(Array.from({get})) === '{','.join(map(str, values))}'")


def test_a_slider_moves_points_and_a_tap_is_answered(open_notebook, lab_folder):
    write_notebook(lab_folder / "points.ipynb", SETUP, POINTS)
    notebook = open_notebook("points.ipynb")
    notebook.run_all()
    notebook.wait_plot("points")
    assert notebook.column("points", "y") == [1, 2, 3]
    shift(notebook, 2)
    wait_column(notebook, "points", "y", [3, 4, 5])
    notebook.tap("points", 2, 4)
    notebook.expect_text("answer", "picked [1] of [3, 4, 5], main thread: True")
    notebook.drag("points", (2, 6), (3, 6))
    notebook.expect_text("where", "starts at -1.0")
    # The last word of a drag arrives too, whatever was left out on the way.
    start = notebook.plot("points", "view.model.x_range.start")
    notebook.expect_text("where", f"starts at {start:.2f}")


@pytest.mark.parametrize("saved", [True, False])
def test_a_page_that_is_loaded_again_shows_the_present_state(open_notebook, lab_folder, saved):
    name = f"reload-{saved}.ipynb"
    path = write_notebook(lab_folder / name, SETUP, POINTS)
    notebook = open_notebook(name)
    notebook.run_all()
    notebook.wait_plot("points")
    if saved:
        notebook.save()
    # Neither BokehJS nor data in the file.
    assert path.stat().st_size < 20_000
    shift(notebook, 1)
    wait_column(notebook, "points", "y", [2, 3, 4])
    notebook.tap("points", 3, 4)
    notebook.expect_text("answer", "picked [2]")
    notebook.reload()
    if not saved:
        # The page has no outputs then; one cell shows the figure that is still there.
        assert notebook.page.locator(".answer").count() == 0
        notebook.type_and_run("widgets.VBox([slider, view, answer, where])")
    notebook.wait_plot("points")
    assert notebook.column("points", "y") == [2, 3, 4]
    selected = "Array.from(view.model.renderers[0].data_source.selected.indices)"
    assert notebook.plot("points", selected) == [2]
    shift(notebook, 2)
    wait_column(notebook, "points", "y", [4, 5, 6])
    notebook.tap("points", 1, 4)
    notebook.expect_text("answer", "picked [0] of [4, 5, 6], main thread: True")


def test_after_a_restart_the_cells_work_again(open_notebook, lab_folder):
    write_notebook(lab_folder / "restart.ipynb", SETUP, POINTS)
    notebook = open_notebook("restart.ipynb")
    notebook.run_all()
    notebook.wait_plot("points")
    notebook.restart()
    notebook.run_all()
    notebook.wait_plot("points")
    shift(notebook, 1)
    wait_column(notebook, "points", "y", [2, 3, 4])
    notebook.tap("points", 2, 3)
    notebook.expect_text("answer", "picked [1] of [2, 3, 4]")


WORK = """
count, other, ended = shown("count", "0"), shown("other"), shown("ended")
ramp = np.tile(np.arange(400) % 251, (400, 1)).astype(np.uint8)
field = ColumnDataSource({"image": [ramp]})
picture = figure(name="picture", width=420, height=300, x_range=(0, 1), y_range=(0, 1))
picture.image("image", x=0, y=0, dw=1, dh=1, source=field,
              palette="Viridis256")
seen = []

def work():
    number = 0
    while True:
        number += 1
        threading.Event().wait(0.001)
        yield number

def arrived(numbers):
    seen.extend(numbers)
    count.value = str(len(seen))
    field.data = {"image": [np.roll(ramp, -len(seen), axis=1)]}

worker = Worker(work, arrived, on_end=lambda: setattr(
    ended, "value", f"ended, in order: {seen == list(range(1, len(seen) + 1))}"))
begin, stop = widgets.Button(description="begin"), widgets.Button(description="stop")
begin.on_click(on_kernel_loop(lambda button: worker.start()))
stop.on_click(on_kernel_loop(lambda button: worker.stop()))
button = widgets.Button(description="knock")
button.on_click(on_kernel_loop(lambda button: setattr(other, "value", f"at {len(seen)}")))
widgets.VBox([widgets.HBox([begin, stop, button]), Figure(picture), count, other, ended])
"""


def test_other_widgets_answer_while_a_long_work_runs(open_notebook, lab_folder):
    write_notebook(lab_folder / "work.ipynb", SETUP, WORK)
    notebook = open_notebook("work.ipynb")
    notebook.run_all()
    notebook.wait_plot("picture")
    notebook.press("begin")
    notebook.until("Number(document.querySelector('.count').innerText) > 50")
    notebook.press("knock")
    notebook.expect_text("other", "at ")
    before = int(notebook.text("count"))
    assert int(notebook.text("other").removeprefix("at ")) <= before
    # The page follows: the picture is the count of some moments ago.
    notebook.until(f"Number(document.querySelector('.count').innerText) > {before + 50}")
    # Work that began on one page goes on when the page is loaded again.
    notebook.save()
    notebook.reload()
    notebook.wait_plot("picture")
    before = int(notebook.text("count"))
    notebook.until(f"Number(document.querySelector('.count').innerText) > {before + 50}")
    notebook.press("stop")
    notebook.expect_text("ended", "ended, in order: True")
    total = int(notebook.text("count"))
    image = "plot('picture').model.renderers[0].data_source.data"
    image = f"({image}.get ? {image}.get('image') : {image}.image)[0]"
    notebook.until(f"{image}[0] === {total % 400 % 251} && {image}.length === 160000")


TABS = """
def small(name, **options):
    plot = figure(name=name, height=250, x_range=(0, 2), y_range=(0, 2), **options)
    plot.scatter([1], [1], size=20)
    return plot

wide = small("wide", sizing_mode="stretch_width")
tabs = widgets.Tab([Figure(small("first", width=300)), Figure(wide)], titles=["one", "two"])
tabs
"""
AGAIN = "again = Figure(small('twice', width=300))\nwidgets.HBox([again, again])"


def test_a_figure_in_a_hidden_tab_fills_it_when_it_is_shown(open_notebook, lab_folder):
    write_notebook(lab_folder / "tabs.ipynb", SETUP, TABS, AGAIN)
    notebook = open_notebook("tabs.ipynb")
    notebook.run_all()
    notebook.wait_plot("first")
    notebook.page.get_by_role("tab", name="two", exact=True).click()
    notebook.wait_plot("wide")
    notebook.until("plot('wide').el.getBoundingClientRect().width > 400")
    notebook.until("plot('wide').frame.bbox.width > 300")
    # One figure in two places, of which each follows the other.
    notebook.wait_plot("twice")
    count = "[...Bokeh.index.query((v) => v.model.name === 'twice' && v.frame)]"
    notebook.until(f"{count}.length === 2")
    notebook.evaluate(f"{count}[0].model.title = null; {count}[0].model.x_range.start = -1")
    notebook.until(f"{count}.every((v) => v.model.x_range.start === -1)")


BROKEN = """
source = ColumnDataSource({"x": [1], "y": [1]})
plot = figure(name="broken", width=300, height=250, tools="tap")
plot.scatter("x", "y", source=source, size=30)

def picked(attr, old, new):
    raise ValueError(f"cannot do {new}")

source.selected.on_change("indices", picked)
Figure(plot)
"""


def test_a_callback_that_raises_is_seen_in_the_console(open_notebook, lab_folder):
    write_notebook(lab_folder / "broken.ipynb", SETUP, BROKEN)
    notebook = open_notebook("broken.ipynb")
    notebook.run_all()
    notebook.tap("broken", 1, 1)
    deadline = time.monotonic() + 30
    while not notebook.errors and time.monotonic() < deadline:
        notebook.page.wait_for_timeout(100)
    assert len(notebook.errors) == 1
    assert "ValueError: cannot do [0]" in notebook.errors.pop()
