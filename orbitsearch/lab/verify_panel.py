"""Verify: an orbit of the catalogue or a guess, refined, with every check and its number."""

from __future__ import annotations

import html
import re
from collections.abc import Callable
from pathlib import Path
from typing import Any

import ipywidgets as widgets

from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadRequest
from orbitsearch.lab.host import Figure
from orbitsearch.lab.loop import Worker
from orbitsearch.lab.orbit_detail import OrbitDetail
from orbitsearch.lab.parts import STYLE, Message, answered, button, heading
from orbitsearch.orbit import Orbit, Start, Status, Verdict
from orbitsearch.plots import (
    motion_of,
    multipliers_data,
    multipliers_figure,
    separation_data,
    separation_figure,
    update,
)
from orbitsearch.refine import Refinement, refine, verify_as_given
from orbitsearch.starts import START_SETS, start_set
from orbitsearch.starts_table import read_starts_csv

__all__ = ["VerifyPanel"]

_WIDE = {"description_width": "90px"}
_OUTCOMES = {True: ("✓", "holds"), False: ("✗", "FAILS"), None: ("?", "open")}


class VerifyPanel(widgets.VBox):
    """Check one orbit, see every number of the verdict, keep it.

    Parameters
    ----------
    catalog : path-like
        Catalogue file.
    """

    def __init__(self, catalog: str | Path = "catalog/orbits.db") -> None:
        self.path = Path(catalog)
        self.message = Message("verify")
        self.number = widgets.IntText(
            1, description="orbit", style=_WIDE, tooltip="number in the catalogue",
            layout=widgets.Layout(width="180px"),
        )  # fmt: skip
        self.load = button("Load", "take this orbit of the catalogue", lambda _: self._load())
        self.kind = widgets.Dropdown(
            options=list(START_SETS), description="start set", style=_WIDE,
            tooltip="what the start has in common with others",
        )  # fmt: skip
        self.values = [
            widgets.Text(
                description=name, style=_WIDE, layout=widgets.Layout(width="300px"),
                tooltip=f"{name} of the guess, with all of its digits",
            )
            for name in ("first", "second", "period T")
        ]  # fmt: skip
        self.pasted = widgets.Text(
            placeholder="collinear, 0.34712, 0.53272, 6.3259", description="table row",
            continuous_update=False,
            style=_WIDE, layout=widgets.Layout(width="620px"),
            tooltip="a row of a table: start set, two numbers, period",
        )  # fmt: skip
        self.refine = button(
            "Refine", "go from the guess to an orbit", lambda _: self._work(self._refined)
        )
        self.as_given = button(
            "Verify as given", "check the numbers as they are", lambda _: self._work(self._given)
        )
        self.note = widgets.Text(
            description="note", style=_WIDE, layout=widgets.Layout(width="420px"),
            tooltip="free text, kept with a new record",
        )  # fmt: skip
        self.keep = button("Keep", "file the orbit in the catalogue", lambda _: self._keep())
        self.verdict = widgets.HTML()
        self.detail = OrbitDetail()
        self._figures: list[Figure] = []
        self._place = widgets.HBox([], layout=widgets.Layout(flex_flow="row wrap"))
        self._worker: Worker | None = None
        self.orbit: Orbit | None = None
        self._from_refining = False
        self.kind.observe(lambda _: self._name_values(), "value")
        self.pasted.observe(lambda _: self._paste(), "value")
        self._name_values()
        self.keep.disabled = True
        super().__init__(
            [
                widgets.HBox([self.number, self.load]),
                widgets.HBox(
                    [self.kind, *self.values], layout=widgets.Layout(flex_flow="row wrap")
                ),
                self.pasted,
                widgets.HBox([self.refine, self.as_given]),
                self.message,
                self.verdict,
                widgets.HBox([self.note, self.keep]),
                self._place,
                heading("The orbit"),
                self.detail,
            ]
        )
        self.add_class("lab-verify")

    # ------------------------------------------------------------ the guess

    @answered
    def _name_values(self) -> None:
        for field, letter in zip(self.values, START_SETS[self.kind.value].letters, strict=False):
            field.description = letter

    def set_guess(self, start: Start) -> None:
        """Put a start into the fields."""
        self.kind.value = start.kind
        for field, text in zip(self.values, (*start.parameters, start.period), strict=True):
            field.value = text

    @answered
    def _load(self) -> None:
        with Catalog.open(self.path, create=False) as catalog:
            record = catalog.get(self.number.value)
        self.set_guess(record.orbit.start)
        self._work(self._given)

    @answered
    def _paste(self) -> None:
        text = self.pasted.value.strip()
        if not text:
            return
        cells = re.split(r"[\s,;]+", text.strip(" ,;"))
        if len(cells) < 4:
            raise BadRequest("`table row` must have a start set, two numbers and a period")
        start_set(cells[0].lower())
        row = read_starts_csv("start,p,q,period\n" + ",".join([cells[0].lower(), *cells[1:4]]))[0]
        self.set_guess(Start(row.start, (row.p, row.q), row.period))
        self.message.say("the row was taken over; refine it or verify it as given")

    def _guess(self) -> tuple[str, float, float, float]:
        numbers = []
        for field in self.values:
            try:
                numbers.append(float(field.value))
            except ValueError:
                raise BadRequest(
                    f"`{field.description}` must be a number, got {field.value!r}: type or paste it"
                ) from None
        return (self.kind.value, *numbers)

    # ------------------------------------------------------------ the work

    @answered
    def _work(self, how: Callable[[tuple[str, float, float, float]], Any]) -> None:
        if self._worker is not None and self._worker.running:
            return
        guess = self._guess()
        self._busy(True)
        self.message.say("working; the first time the kernels are compiled, which takes a minute")
        self._worker = Worker(
            lambda: iter([how(guess)]), lambda found: self._take(found[0]), self._fail,
            lambda: self._busy(False),
        )  # fmt: skip
        self._worker.start()

    @staticmethod
    def _refined(guess: tuple[str, float, float, float]) -> Refinement:
        return refine(*guess)

    @staticmethod
    def _given(guess: tuple[str, float, float, float]) -> Orbit | Verdict:
        return verify_as_given(*guess)

    def _busy(self, busy: bool) -> None:
        for one in (self.refine, self.as_given, self.load):
            one.disabled = busy

    def _fail(self, text: str) -> None:
        self.message.say(text, "wrong")

    @answered
    def _take(self, found: Refinement | Orbit | Verdict) -> None:
        said = ""
        self._from_refining = isinstance(found, Refinement)
        if isinstance(found, Refinement):
            said = found.message
            orbit = found.orbit
            verdict = None if orbit is None else orbit.verdict
        else:
            orbit = found if isinstance(found, Orbit) else None
            verdict = found if isinstance(found, Verdict) else found.verdict
        self.orbit = orbit
        self.verdict.value = "" if verdict is None else _verdict_html(verdict)
        may = orbit is not None and orbit.status in (Status.VERIFIED, Status.NOT_CONFIRMED)
        self.keep.disabled = not may
        known = "" if orbit is None or not may else self._whether_known(orbit)
        status = "no orbit" if verdict is None else str(verdict.status)
        self.message.say("; ".join(filter(None, [status, said, known])), "done" if may else "wrong")
        self._draw(orbit if may else None)

    def _whether_known(self, orbit: Orbit) -> str:
        if not self.path.exists():
            return "new to the catalogue"
        with Catalog.open(self.path) as catalog:
            same = catalog.find_same(orbit)
        return "new to the catalogue" if same is None else f"known as orbit {same}"

    def _draw(self, orbit: Orbit | None) -> None:
        self.detail.show(orbit)
        self._place.layout.display = "none"
        if orbit is None:
            return
        motion = motion_of(orbit)
        data = (multipliers_data(orbit), separation_data(motion))
        if not self._figures:
            self._figures = [
                Figure(multipliers_figure(data[0])),
                Figure(separation_figure(data[1])),
            ]
            self._place.children = self._figures
        else:
            for figure, one in zip(self._figures, data, strict=True):
                update(figure.model, one)
        self._place.layout.display = ""

    @answered
    def _keep(self) -> None:
        if self.orbit is None:
            raise BadRequest("there is no orbit to keep: refine a guess first")
        with Catalog.open(self.path) as catalog:
            if not self._from_refining and catalog.find_same(self.orbit) is None:
                raise BadRequest("press Refine first: a new record lists both starts of its orbit")
            added = catalog.add(self.orbit, note=self.note.value.strip())
        self.number.value = added.id
        self.message.say(
            f"filed as orbit {added.id}" if added.new else f"known already, as orbit {added.id}",
            "done",
        )


def _verdict_html(verdict: Verdict) -> str:
    """The verdict as a table: check, value, bound, outcome in a sign and a word."""
    rows = []
    for check in verdict.checks:
        sign, word = _OUTCOMES[check.passed]
        cells = (
            check.name, f"{check.value:.3g}", f"{check.bound:.3g}", f"{sign} {word}", check.note
        )  # fmt: skip
        rows.append("".join(f"<td>{html.escape(cell)}</td>" for cell in cells))
    head = "".join(f"<td>{name}</td>" for name in ("check", "value", "bound", "outcome", ""))
    body = "".join(f"<tr>{row}</tr>" for row in (head, *rows))
    reason = html.escape(f"{verdict.status}: {verdict.reason}")
    return f'{STYLE}<b>{reason}</b><table class="lab-facts lab-verdict">{body}</table>'
