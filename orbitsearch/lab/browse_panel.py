"""Browse: the catalogue by braid type and by filters, linked plots, one orbit in full, export."""

from __future__ import annotations

from collections.abc import Callable
from functools import partial
from pathlib import Path
from typing import Any, NamedTuple

import ipywidgets as widgets

from orbitsearch import tables
from orbitsearch.catalog import Catalog
from orbitsearch.describe import record_text
from orbitsearch.errors import BadRequest, OrbitsearchError
from orbitsearch.lab.host import Figure
from orbitsearch.lab.loop import Worker
from orbitsearch.lab.orbit_detail import OrbitDetail
from orbitsearch.lab.parts import STYLE, Message, answered, button, choice_list, heading, quiet
from orbitsearch.plots.catalog_plots import (
    law_data,
    law_figure,
    points_of,
    starts_data,
    starts_figure,
)
from orbitsearch.plots.page import catalog_page, figure_page
from orbitsearch.plots.selection import select
from orbitsearch.plots.style import update
from orbitsearch.records import Kind, Record
from orbitsearch.starts import START_SETS
from orbitsearch.symmetry import NAMES
from orbitsearch.turns import cycle_text
from orbitsearch.words import contains

__all__ = ["BrowsePanel"]

# Longer lists are slow to draw and nobody reads them; the filters are there for that.
LISTED = 500
ANY = "any"
_WIDE = {"description_width": "80px"}


class _Read(NamedTuple):
    """What was read of a catalogue; `types` has the number of its kind for each record."""

    records: list[Record]
    kinds: list[Kind]
    types: dict[int, int | None]


class BrowsePanel(widgets.VBox):
    """Look through a catalogue.

    Parameters
    ----------
    catalog : path-like
        Catalogue file.
    """

    def __init__(self, catalog: str | Path = "catalog/orbits.db") -> None:
        self.path = Path(catalog)
        self.message = Message("browse")
        self.refresh = button(
            "Refresh",
            "read the catalogue again, with what others have added",
            lambda _: self.read(),
        )
        self._make_filters()
        self.kinds = choice_list("braid types: choose one to see its orbits", rows=9)
        self.kinds.add_class("lab-kinds")
        self.orbits = choice_list("orbits that meet the filters", rows=12)
        self.orbits.add_class("lab-orbits")
        self.detail = OrbitDetail()
        self._records: dict[int, Record] = {}
        self._kinds: list[Kind] = []
        self._types: dict[int, int | None] = {}
        self._listening = True
        self._worker: Worker | None = None
        kind = self.shown_set.value
        self.law = Figure(law_figure(law_data([])))
        self.starts = Figure(starts_figure(starts_data([], kind)))
        self._listen()
        super().__init__(self._arranged())
        self.add_class("lab-browse")
        self.read()

    # ------------------------------------------------------------ arrangement

    def _make_filters(self) -> None:
        def choice(name: str, options: list[Any], text: str) -> Any:
            return widgets.Dropdown(
                options=options, description=name, style=_WIDE, tooltip=text,
                layout=widgets.Layout(width="250px"),
            )  # fmt: skip

        self.set = choice("start set", [ANY, *START_SETS], "with a start in this set")
        self.symmetry = choice("symmetry", [ANY, *NAMES], "with this symmetry")
        self.stable = choice("stability", [ANY, "stable", "unstable"], "linear stability")
        self.source = choice("published", [ANY, "matched", "not matched"], "matched to a table row")
        self.word = widgets.Text(
            description="word has", style=_WIDE, layout=widgets.Layout(width="250px"),
            placeholder="abAB", continuous_update=False,
            tooltip="letters that the free-group word contains",
        )  # fmt: skip
        self.periods = widgets.FloatRangeSlider(
            value=(0.0, 100.0), min=0.0, max=100.0, step=0.5, description="T*", style=_WIDE,
            continuous_update=False, layout=widgets.Layout(width="400px"),
            tooltip="range of the scale-free period",
        )  # fmt: skip
        self.shown_set = choice("plane of", list(START_SETS), "start set of the plot")

    def _arranged(self) -> list[Any]:
        wrapped = widgets.Layout(flex_flow="row wrap")
        filters = widgets.HBox(
            [self.set, self.symmetry, self.stable, self.source, self.word, self.periods],
            layout=wrapped,
        )
        self.name = widgets.Text(
            "selection", description="file name", style=_WIDE, tooltip="without its ending",
            layout=widgets.Layout(width="280px"),
        )  # fmt: skip
        exports = [
            button(label, text, partial(self._write, ending))
            for label, ending, text in (
                ("CSV", "csv", "write the listed orbits as CSV"),
                ("JSON", "json", "write the listed orbits as JSON"),
                ("LaTeX", "tex", "write the listed orbits as a LaTeX table"),
                ("HTML", "html", "write one page with figures that needs no network"),
            )
        ]
        return [
            widgets.HTML(STYLE),
            widgets.HBox([self.refresh, self.message]),
            heading("Braid types"),
            self.kinds,
            heading("Orbits"),
            filters,
            self.orbits,
            widgets.HBox([self.name, *exports], layout=wrapped),
            self.shown_set,
            widgets.HBox([self.law, self.starts], layout=wrapped),
            heading("One orbit"),
            self.detail,
        ]

    def _listen(self) -> None:
        for one in (self.set, self.symmetry, self.stable, self.source, self.word, self.periods):
            one.observe(lambda _: self._filter(), "value")
        self.kinds.observe(lambda _: self._filter(), "value")
        self.orbits.observe(lambda _: self._choose(), "value")
        self.shown_set.observe(lambda _: self._draw(), "value")
        self._listen_to(self.law.model.select_one({"name": "law orbits"}))
        self._listen_to(self.starts.model.select_one({"name": "starts orbits"}))

    def _listen_to(self, source: Any) -> None:
        def changed(attr: str, old: list[int], new: list[int]) -> None:  # noqa: ARG001
            self._pick(source, new)

        source.selected.on_change("indices", changed)

    # ------------------------------------------------------------ reading

    @answered
    def read(self) -> None:
        """Read the catalogue again, in the background."""
        if self._worker is not None and self._worker.running:
            return
        self.message.say("reading the catalogue")
        self._worker = Worker(lambda: iter([self._load()]), self._take, self._fail)
        self._worker.start()

    def _load(self) -> _Read:
        if not self.path.exists():
            return _Read([], [], {})
        with Catalog.open(self.path, create=False) as catalog:
            records, kinds = [*catalog.orbits()], catalog.kinds()
        # Found once: a choice of type asks every record for its own.
        number = {kind.braid: n for n, kind in enumerate(kinds)}
        known = ((record.id, record.orbit.braid) for record in records)
        types = {id: number.get(one.braid.canonical()) for id, one in known if one is not None}
        return _Read(records, kinds, types)

    def _fail(self, text: str) -> None:
        self.message.say(text, "wrong")

    @answered
    def _take(self, found: list[_Read]) -> None:
        chosen = None if self.kinds.value is None else self._kinds[self.kinds.value].braid
        records, self._kinds, self._types = found[-1]
        self._records = {record.id: record for record in records}
        longest = max((record.orbit.scaled_period for record in records), default=99.0)
        whole = self.periods.value[1] >= self.periods.max
        every = (f"all types ({len(records)} orbits)", None)
        with quiet(self):
            self.periods.max = float(int(longest) + 1)
            if whole:
                self.periods.value = (self.periods.value[0], self.periods.max)
            rows = ((_kind_row(kind), n) for n, kind in enumerate(self._kinds))
            self.kinds.options = [every, *rows]
            # The same type, wherever it stands now.
            self.kinds.value = next(
                (n for n, kind in enumerate(self._kinds) if kind.braid == chosen), None
            )
        self._filter()

    # ------------------------------------------------------------ filters

    @property
    def listed(self) -> list[Record]:
        """Records that meet all filters, by T*."""
        return [record for record in self._records.values() if self._meets(record)]

    def _meets(self, record: Record) -> bool:
        orbit = record.orbit
        low, high = self.periods.value
        names = () if orbit.symmetry is None else orbit.symmetry.names
        word = self.word.value.strip()
        return (
            low <= orbit.scaled_period <= high
            and (self.set.value == ANY or any(s.kind == self.set.value for s in orbit.starts))
            and (self.symmetry.value == ANY or self.symmetry.value in names)
            and (
                self.stable.value == ANY
                or orbit.stability.stable == (self.stable.value == "stable")
            )
            and (
                self.source.value == ANY or bool(record.sources) == (self.source.value == "matched")
            )
            and self.kinds.value in (None, self._types.get(record.id))
            and (not word or contains(orbit.word, word))
        )

    @answered
    def _filter(self) -> None:
        if not self._listening:
            return
        records = self.listed
        chosen = self.orbits.value
        shown = records[:LISTED]
        with quiet(self):
            self.orbits.options = [(_orbit_row(record), record.id) for record in shown]
            self.orbits.value = chosen if any(r.id == chosen for r in shown) else None
        if not self._records:
            self.message.say(
                f"no orbits in {self.path} yet: run a search, or keep one from the verify notebook"
            )
        else:
            more = f", the first {LISTED} are listed" if len(records) > LISTED else ""
            self.message.say(f"{len(records)} of {len(self._records)} orbits{more}")
        self._draw(records)

    @answered
    def _draw(self, records: list[Record] | None = None) -> None:
        records = self.listed if records is None else records
        kind = self.shown_set.value
        stable = [record.id for record in records if record.orbit.stability.stable]
        with quiet(self):
            update(self.law.model, law_data(records))
            update(self.starts.model, starts_data(points_of(records, kind), kind, stable))
        self._select(self.orbits.value)

    # ------------------------------------------------------------ choosing

    @answered
    def _pick(self, source: Any, indices: list[int]) -> None:
        """Something was selected in a plot."""
        # A tap may come after what it was on has been filtered away.
        if not self._listening or not indices or indices[0] >= len(source.data["id"]):
            return
        id = int(source.data["id"][indices[0]])
        if any(value == id for _, value in self.orbits.options):
            self.orbits.value = id
            return
        self._select(id)
        self._show(id)

    @answered
    def _choose(self) -> None:
        if not self._listening or self.orbits.value is None:
            return
        self._select(self.orbits.value)
        self._show(self.orbits.value)

    def _select(self, id: int | None) -> None:
        """Mark an orbit in both plots, without listening to what they answer."""
        with quiet(self):
            for figure in (self.law, self.starts):
                select(figure.model, [] if id is None else [id])

    def _show(self, id: int) -> None:
        self.detail.show(self._records[id].orbit, record_text(self._records[id]).splitlines()[0])

    # ------------------------------------------------------------ export

    @answered
    def _write(self, ending: str, _clicked: Any = None) -> None:
        records = self.listed
        if not records:
            raise BadRequest("no orbit meets the filters: there is nothing to write")
        write: dict[str, Callable[[list[Record]], str]] = {
            "csv": tables.to_csv,
            "json": tables.to_json,
            "tex": tables.to_latex,
            "html": self._page,
        }
        path = Path(f"{self.name.value.strip() or 'selection'}.{ending}")
        try:
            path.write_text(write[ending](records), encoding="utf-8")
        except (OSError, ValueError) as problem:
            raise OrbitsearchError(f"`file name`: {path}: {problem}; choose another") from None
        self.message.say(f"{len(records)} orbits written to {path.resolve()}", "done")

    @staticmethod
    def _page(records: list[Record]) -> str:
        if len(records) == 1:
            return figure_page(records[0], record_text(records[0]))
        return catalog_page(records, record_text)


def _kind_row(kind: Kind) -> str:
    cycle = cycle_text(kind.braid.cycle)
    cycle = cycle if len(cycle) <= 28 else f"{cycle[:22]}.. ({len(kind.braid.cycle)})"
    return (
        f"{kind.count:>5} orbits  {kind.braid.kind:<14} {cycle:<30} e {kind.braid.exponent_sum:<4}"
        f" T* from {kind.shortest:<10.6g} {kind.choreographies} choreographies,"
        f" {kind.stable} stable"
    )


def _orbit_row(record: Record) -> str:
    orbit = record.orbit
    symmetry = orbit.symmetry.title if orbit.symmetry else ""
    word = orbit.word if len(orbit.word) <= 24 else f"{orbit.word[:18]}.. ({len(orbit.word)})"
    return (
        f"{record.id:>6}  T* {orbit.scaled_period:<12.9g} {word or '(empty)':<26}"
        f" {orbit.stability.kind:<30} {symmetry}"
    )
