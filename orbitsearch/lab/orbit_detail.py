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

# Names after which a number stands that others have to reproduce.
_COPIED = ("start", "period T", "scale-free T*", "energy", "word", "syzygy cycle", "Artin word")
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
        self.numbers.value = "" if orbit is None else facts(rows_of(orbit_text(orbit)))
        self._place.layout.display = "none" if orbit is None else ""
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
            return
        for figure, one in zip(self._figures, data, strict=True):
            update(figure.model, one)


def rows_of(text: str) -> list[tuple[str, str, bool]]:
    """Names and values of an orbit's text, without its verdict, and whether to copy them."""
    rows = []
    for line in text.split("\nverdict:", maxsplit=1)[0].splitlines():
        name, value = line[:_NAMES].strip().removesuffix(":"), line[_NAMES:].strip()
        rows.append((name, value, name in _COPIED or name.startswith("also")))
    return rows
