"""The search: choose a window, let the map fill, follow any start, meet the orbits."""

from __future__ import annotations

import html
import time
from collections import Counter
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import ipywidgets as widgets
from bokeh.events import SelectionGeometry, Tap
from bokeh.models import LayoutDOM

from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadRequest, OrbitsearchError
from orbitsearch.lab.controls import WindowControls
from orbitsearch.lab.host import Figure
from orbitsearch.lab.loop import Worker
from orbitsearch.lab.parts import (
    STYLE,
    Message,
    answered,
    button,
    choice_list,
    heading,
    quiet,
    shown_number,
)
from orbitsearch.lab.start_view import StartView
from orbitsearch.orbit import Orbit, Status
from orbitsearch.plots.style import update
from orbitsearch.plots.window import (
    LAYERS,
    Mark,
    chosen_data,
    map_data,
    marks_data,
    nearest_mark,
    window_data,
    window_figure,
)
from orbitsearch.plots.window_map import WindowMap
from orbitsearch.runs import Filed, Known, Started, run_search, unfinished
from orbitsearch.search import Rejected, SearchRequest, TileDone

__all__ = ["SearchPanel"]

# A tap means a mark within this share of the shown ranges: about half its size on the screen.
MARK = 60.0
# Longer lists are slow to draw; Browse has filters for them.
LISTED = 500


class SearchPanel(widgets.VBox):
    """Search a window of starts into a catalogue.

    Parameters
    ----------
    catalog : path-like
        Catalogue file; it is made when the first search begins.
    """

    def __init__(self, catalog: str | Path = "catalog/orbits.db") -> None:
        self.path = Path(catalog)
        self.message = Message("search")
        self.controls = WindowControls(self._new_window)
        self.start = button("Start", "search this window", lambda _: self._begin())
        self.stop = button("Stop", "stop; what was found is kept", lambda _: self._halt())
        self.resume = button("Resume", "go on where a search stopped", lambda _: self._go_on())
        self.progress = widgets.IntProgress(
            description="tiles", layout=widgets.Layout(width="420px")
        )
        self.tells = widgets.HTML(STYLE)
        self.layer = widgets.ToggleButtons(
            options=list(LAYERS), description="map shows",
            style={"button_width": "100px"}, tooltips=list(LAYERS.values()),
        )  # fmt: skip
        self.table = choice_list("orbits that this search met", rows=8)
        self.table.add_class("lab-run-table")
        self.view = StartView(on_orbit=self._meet, on_start=self._mark)
        self._map = self._blank(self.controls.request())
        self._states: dict[int, str] = {}
        self._rejected: list[Mark] = []
        self._orbits: dict[int, Orbit] = {}
        self._listening = True
        self.figure = Figure(self._listening_map())
        self._listen()
        self._worker: Worker | None = None
        self._rest()
        self._look_for_stopped()
        super().__init__(self._arranged())
        self.add_class("lab-search")

    # ------------------------------------------------------------ arrangement

    def _arranged(self) -> list[Any]:
        knobs = widgets.HBox([self.start, self.stop, self.resume, self.progress])
        left = widgets.VBox([self.layer, self.figure, heading("Orbits of this search"), self.table])
        left.layout.flex = "0 0 auto"
        return [
            self.controls,
            knobs,
            self.message,
            self.tells,
            widgets.HBox([left, self.view], layout=widgets.Layout(flex_flow="row wrap")),
        ]

    def _listening_map(self) -> LayoutDOM:
        """The map, with what to do when it is clicked on.

        Bokeh takes note of event callbacks when a figure enters its document, and not afterwards.
        """
        layout = window_figure(window_data(self._map))
        plot: Any = layout.select_one({"name": "window figure"})
        plot.on_event(Tap, self._tap)
        plot.on_event(SelectionGeometry, self._box)
        return layout

    def _listen(self) -> None:
        self.layer.observe(lambda _: self._redraw(), "value")
        self.table.observe(lambda _: self._choose_row(), "value")

    @property
    def _mark_source(self) -> Any:
        return self.figure.model.select_one({"name": "window marks"})

    @staticmethod
    def _blank(request: SearchRequest) -> WindowMap:
        return WindowMap.blank(request.start, request.window, request.grid, request.scaled_period)

    # ------------------------------------------------------------ running

    @property
    def running(self) -> bool:
        """Whether a search is under way."""
        return self._worker is not None and self._worker.running

    @answered
    def _begin(self) -> None:
        self._search(self.controls.request(), None)

    @answered
    def _go_on(self) -> None:
        if self.running:
            return
        run = self._stopped_run()
        if run is None:
            raise BadRequest("no search of this catalogue was stopped: start one")
        with Catalog.open(self.path) as catalog:
            request = unfinished(catalog, run.id).request
        self.controls.start.value = request.start
        self.controls.set_window(request.window)
        self.controls.grid.value = request.grid[0]
        self.controls.scaled_period.value = request.scaled_period
        self._search(request, run.id)

    def _search(self, request: SearchRequest, resume: int | None) -> None:
        if self.running:
            return
        self._map = self._blank(request)
        self._orbits, self._states, self._rejected = {}, {}, []
        self._counts: Counter[str] = Counter()
        self._new, self._known, self._done = set[int](), set[int](), 0
        self._began = time.monotonic()
        self.view.bound = request.scaled_period
        self.progress.max, self.progress.value = request.tiles, 0
        self._show_window()
        self._list()
        self.message.say("starting; the first time the kernels are compiled, which takes a minute")
        workers = int(self.controls.workers.value)

        def work() -> Iterator[Any]:
            with Catalog.open(self.path) as catalog:
                for event in run_search(catalog, request, workers=workers, resume=resume):
                    if isinstance(event, Known):
                        # Read here: the kernel's loop has better things to do.
                        event = Filed(catalog.get(event.id).orbit, event.id, False)
                    yield event

        self._worker = Worker(work, self._take, self._fail, self._end)
        self._worker.start()
        self._rest()

    @answered
    def _halt(self) -> None:
        if self._worker is not None and self.running:
            self._worker.stop()
            self.message.say("stopping")

    @answered
    def _take(self, events: list[Any]) -> None:
        for event in events:
            self._take_one(event)
        if any(isinstance(event, TileDone) for event in events):
            update(self.figure.model, map_data(self._map, self.layer.value))
        if any(isinstance(event, Filed | Rejected) for event in events):
            self._draw_marks()
            self._list()
        self._tell()

    def _take_one(self, event: Any) -> None:
        if isinstance(event, Started):
            self.progress.value = event.done
            before = f"; the map shows what follows the {event.done} tiles of before"
            if self._worker is None or not self._worker.stopping:
                self.message.say(f"searching{before if event.done else ''}")
        elif isinstance(event, TileDone):
            self._done += 1
            self.progress.value += 1
            self._counts += event.counts
            outcomes = event.outcomes
            self._map.fill(outcomes.rows[0], outcomes.columns[0], outcomes)
        elif isinstance(event, Filed):
            if event.id not in self._new:
                (self._new if event.new else self._known).add(event.id)
            self._add_orbit(event.id, event.orbit, "new" if event.id in self._new else "known")
        elif isinstance(event, Rejected):
            self._counts[f"rejected: {event.verdict.reason.split(' is ')[0]}"] += 1
            self._rejected.append(Mark(event.start.p, event.start.q, "rejected"))

    def _add_orbit(self, id: int, orbit: Orbit, state: str) -> None:
        self._orbits[id] = orbit
        unsure = orbit.status is Status.NOT_CONFIRMED
        self._states[id] = "not confirmed" if unsure else state

    def _fail(self, text: str) -> None:
        self.message.say(text, "wrong")

    @answered
    def _end(self) -> None:
        assert self._worker is not None
        found = f"{len(self._new)} new and {len(self._known)} known orbits"
        if self._worker.error is None:
            stopped = self.progress.value < self.progress.max or self._worker.stopping
            self.message.say(f"{'stopped' if stopped else 'finished'}: {found}", "done")
        self._list()
        self._rest()
        self._look_for_stopped()

    def _rest(self) -> None:
        self.start.disabled = self.running
        self.stop.disabled = not self.running
        if self.running:
            self.resume.disabled = True

    def _stopped_run(self) -> Any:
        """The last search of the catalogue that can be gone on with."""
        if not self.path.exists():
            return None
        with Catalog.open(self.path) as catalog:
            runs = [run for run in catalog.runs() if run.state in ("stopped", "running", "failed")]
        return runs[-1] if runs else None

    def _look_for_stopped(self) -> None:
        try:
            run = None if self.running else self._stopped_run()
        except (OrbitsearchError, OSError) as problem:
            self.message.say(str(problem), "wrong")
            run = None
        self.resume.disabled = run is None
        self.resume.description = "Resume" if run is None else f"Resume run {run.id}"
        # A killed run says it is running, and so does one that another notebook is at.
        doubt = run is not None and run.state == "running"
        self.resume.tooltip = (
            "go on where a search stopped; another notebook may still be at this one"
            if doubt
            else "go on where a search stopped"
        )

    # ------------------------------------------------------------ what is shown

    def _tell(self) -> None:
        passed = time.monotonic() - self._began
        to_do = self.progress.max - self.progress.value
        left = f", about {passed / self._done * to_do:.0f} s left" if to_do and self._done else ""
        parts = [
            f"{self.progress.value} of {self.progress.max} tiles{left}",
            f"{self._counts['starts']:,} starts, {self._counts['candidates']:,} candidates",
            f"{len(self._new)} new, {len(self._known)} known orbits",
            *(
                f"{count} {reason}"
                for reason, count in self._counts.most_common()
                if reason.startswith("rejected")
            ),
        ]
        self.tells.value = f'{STYLE}<div class="lab-tells">{html.escape("; ".join(parts))}</div>'

    def _list(self) -> None:
        """Rows of the table, the chosen one kept."""
        chosen = self.table.value
        orbits = [*self._orbits.items()]
        if not self.running:
            # Not while it grows: rows would move away under the pointer.
            orbits.sort(key=lambda item: item[1].scaled_period)
        with quiet(self):
            self.table.options = [(_row(id, orbit), id) for id, orbit in orbits[:LISTED]]
            shown = {id for id, _ in orbits[:LISTED]}
            self.table.value = chosen if chosen in shown else None

    def _all_marks(self) -> list[Mark]:
        """Every start of the shown set, of orbits and of what was rejected."""
        found = [
            Mark(start.p, start.q, self._states[id], id, orbit.scaled_period, orbit.word)
            for id, orbit in self._orbits.items()
            for start in orbit.starts or (orbit.start,)
            if start.kind == self._map.start
        ]
        return found + self._rejected

    def _draw_marks(self) -> None:
        update(self.figure.model, marks_data(self._all_marks()))
        self._select_mark()

    @answered
    def _redraw(self) -> None:
        update(self.figure.model, map_data(self._map, self.layer.value))

    @answered
    def _new_window(self) -> None:
        """Show the window that is asked for, while no search fills the map."""
        # The controls tell of their first window while the rest is still being made.
        if not hasattr(self, "figure") or self.running:
            return
        try:
            request = self.controls.request()
        except BadRequest as problem:
            # Half a window is typed at a time.
            self.message.say(str(problem))
            return
        self.message.say("")
        self.view.bound = request.scaled_period
        if (request.start, request.window) == (self._map.start, self._map.window):
            return
        self._map = self._blank(request)
        self._rejected = []
        if self.view.kind != request.start:
            p0, p1, q0, q1 = request.window
            self.view.show(request.start, 0.5 * (p0 + p1), 0.5 * (q0 + q1))
        self._show_window()

    def _show_window(self) -> None:
        """Draw the map anew, its ranges included."""
        here = self.view.place if self.view.kind == self._map.start else None
        data = window_data(self._map, self.layer.value, self._all_marks(), here)
        update(self.figure.model, data)
        self._select_mark()

    def _mark(self, p: float, q: float) -> None:
        """Put the cross where the start is, if it is one of this map."""
        if hasattr(self, "figure"):
            here = (p, q) if self.view.kind == self._map.start else None
            update(self.figure.model, chosen_data(here))

    # ------------------------------------------------------------ what is chosen

    @answered
    def _tap(self, event: Any) -> None:
        """Choose the orbit under the pointer, or follow the start that is there."""
        # By place, not by what the page has selected: that comes apart from the tap, and by numbers
        # that a running search may have changed meanwhile.
        plot, marks = event.model, self._all_marks()
        reach = [(one.end - one.start) / MARK for one in (plot.x_range, plot.y_range)]
        nearest = nearest_mark(marks, event.x, event.y, (reach[0], reach[1]))
        if nearest is None:
            self.view.show(self._map.start, max(0.0, event.x), max(0.0, event.y))
        elif (id := marks[nearest].id) is None:
            self.view.show(self._map.start, marks[nearest].p, marks[nearest].q)
        elif self.table.value != id and any(value == id for _, value in self.table.options):
            self.table.value = id
        else:
            self._show_orbit(id)

    @answered
    def _box(self, event: Any) -> None:
        """Take the part of the map in a box as the window."""
        if not event.final or event.geometry.get("type") != "rect" or self.running:
            return
        box = [event.geometry[key] for key in ("x0", "x1", "y0", "y1")]
        p0, p1 = sorted(max(0.0, value) for value in box[:2])
        q0, q1 = sorted(max(0.0, value) for value in box[2:])
        self.controls.set_window((p0, p1, q0, q1))

    @answered
    def _choose_row(self) -> None:
        if self._listening and self.table.value is not None:
            self._show_orbit(self.table.value)

    def _show_orbit(self, id: int) -> None:
        """Follow an orbit from its start on this map, and say what it is."""
        orbit = self._orbits[id]
        self._select_mark()
        start = next((s for s in orbit.starts if s.kind == self._map.start), orbit.start)
        self.view.show(start.kind, start.p, start.q)
        self.view.time.value = min(self.view.time.max, max(1.0, orbit.scaled_period))
        symmetry = "" if orbit.symmetry is None else f", {orbit.symmetry.title}"
        self.message.say(
            f"orbit {id}: T* = {orbit.scaled_period:.10g}, {orbit.stability.kind}{symmetry};"
            " the verify and browse notebooks show it in full"
        )

    def _select_mark(self) -> None:
        id = self.table.value
        marks = self._all_marks()
        self._mark_source.selected.indices = [
            i for i, mark in enumerate(marks) if id is not None and mark.id == id
        ]

    @answered
    def _meet(self, orbit: Orbit) -> None:
        """An orbit was refined from a start: file it and show it with the others."""
        if orbit.status not in (Status.VERIFIED, Status.NOT_CONFIRMED):
            return
        with Catalog.open(self.path) as catalog:
            added = catalog.add(orbit)
        self._add_orbit(added.id, orbit, "new" if added.new else "known")
        self._draw_marks()
        self._list()
        self.table.value = added.id


def _row(id: int, orbit: Orbit) -> str:
    """An orbit in a line of a list."""
    symmetry = orbit.symmetry.title if orbit.symmetry else ""
    word = orbit.word if len(orbit.word) <= 20 else f"{orbit.word[:14]}.. ({len(orbit.word)})"
    return (
        f"{id:>5}  T* {shown_number(orbit.scaled_period):<9} {word or '(empty)':<22}"
        f" {orbit.stability.kind:<29} {symmetry:<21} {orbit.status}"
    )
