"""One orbit in full: motion, shapes, alignments, and every number, ready to be copied."""

from __future__ import annotations

import ipywidgets as widgets

from orbitsearch.describe import orbit_text
from orbitsearch.lab.host import Figure
from orbitsearch.lab.parts import Message, answered, facts
from orbitsearch.orbit import Orbit
from orbitsearch.plots import (
    alignments_data,
    alignments_figure,
    motion_of,
    orbit_data,
    orbit_figure,
    update,
)

__all__ = ["OrbitDetail", "rows_of"]

# A column of names, and what belongs to them, in the text of an orbit.
_NAMES = 18


class OrbitDetail(widgets.VBox):
    """The figures and numbers of one orbit; empty until one is shown."""

    def __init__(self, size: int = 340) -> None:
        self.message = Message("detail")
        self.orbit: Orbit | None = None
        self.numbers = widgets.HTML()
        self._size = size
        self._figures: list[Figure] = []
        self._place = widgets.VBox([])
        super().__init__([self.message, self._place, self.numbers])
        self.add_class("lab-orbit-detail")

    @answered
    def show(self, orbit: Orbit | None, title: str = "") -> None:
        """Show an orbit, or nothing."""
        self.orbit = orbit
        self.message.say(title)
        self.numbers.value = "" if orbit is None else facts(rows_of(orbit))
        # Not the former orbit's figures beside these numbers, should this one have none.
        self._place.layout.display = "none"
        if orbit is None:
            return
        motion = motion_of(orbit)
        data = (orbit_data(motion), alignments_data(motion))
        if not self._figures:
            # Drawn at the first orbit and only given other data afterwards.
            self._figures = [
                Figure(orbit_figure(data[0], size=self._size)),
                Figure(alignments_figure(data[1])),
            ]
            self._place.children = self._figures
        else:
            for figure, one in zip(self._figures, data, strict=True):
                update(figure.model, one)
        self._place.layout.display = ""


def rows_of(orbit: Orbit) -> list[tuple[str, str, str]]:
    """Names and values of everything about an orbit but its verdict, and what copying gives."""
    start = orbit.start
    whole = {
        "start": " ".join([start.kind, *start.parameters]),
        "period T": start.period,
        "scale-free T*": repr(orbit.scaled_period),
        "energy": repr(orbit.energy),
        "word": orbit.word,
        "syzygy cycle": orbit.cycle,
    }
    if orbit.braid is not None:
        whole["Artin word"] = " ".join(map(str, orbit.braid.braid.artin))
    rows = []
    for line in orbit_text(orbit).split("\nverdict:")[0].splitlines():
        name, value = line[:_NAMES].strip().removesuffix(":"), line[_NAMES:].strip()
        also = value.replace(", T =", "") if name.startswith("also") else ""
        rows.append((name, value, whole.get(name, also)))
    return rows
