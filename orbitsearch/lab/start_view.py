"""One start, periodic or not: its motion while the hand moves, and the way from it to an orbit."""

from __future__ import annotations

from collections.abc import Callable

import ipywidgets as widgets
import numpy as np

from orbitsearch.errors import BadRequest
from orbitsearch.lab.host import Figure
from orbitsearch.lab.loop import Worker
from orbitsearch.lab.parts import Message, answered, button, heading, quiet
from orbitsearch.nearby import find_near
from orbitsearch.orbit import Orbit, Status
from orbitsearch.period import motion_from
from orbitsearch.plots import orbit_data, orbit_figure, update
from orbitsearch.refine import Refinement
from orbitsearch.starts import start_set
from orbitsearch.syzygies import syzygies

__all__ = ["StartView"]

# Scaled time that a start is followed for.
USUAL, LONGEST = 8.0, 60.0
_WIDE = {"description_width": "90px"}
SHOWN_SYZYGIES = 60


class StartView(widgets.VBox):
    """Motion from any start of a set, live while its two sliders move.

    Parameters
    ----------
    on_orbit : callable
        Called with each `Orbit` that refining from here gives.
    on_start : callable
        Called with (p, q) whenever the start changes.
    """

    def __init__(
        self,
        on_orbit: Callable[[Orbit], object] = lambda _: None,
        on_start: Callable[[float, float], object] = lambda *_: None,
    ) -> None:
        self.kind = "collinear"
        self.bound = 30.0
        self._on_orbit, self._on_start = on_orbit, on_start
        self._listening = True
        self.message = Message("start")
        self.sliders = [
            widgets.FloatSlider(
                min=0.0, max=1.0, step=1e-5, readout_format=".6f", style=_WIDE,
                layout=widgets.Layout(width="420px"), tooltip="this parameter of the start",
            )
            for _ in range(2)
        ]  # fmt: skip
        self.time = widgets.FloatSlider(
            USUAL, min=1.0, max=LONGEST, step=0.5, description="t |E|^(3/2)", style=_WIDE,
            layout=widgets.Layout(width="420px"), tooltip="how long to follow it, scaled",
        )  # fmt: skip
        self.refine = button(
            "Refine from here", "find the nearest periodic orbit", lambda _: self._refine()
        )
        self._worker: Worker | None = None
        data = orbit_data(motion_from("collinear", 0.35, 0.53, 6.0))
        self.figure = Figure(orbit_figure(data, size=300))
        for slider in (*self.sliders, self.time):
            slider.observe(lambda _: self.draw(), "value")
        self.show("collinear", 0.35, 0.53)
        super().__init__(
            [heading("A start"), *self.sliders, self.time, self.refine, self.message, self.figure]
        )
        self.add_class("lab-start-view")

    def show(self, kind: str, p: float, q: float) -> None:
        """Go to a start of a set."""
        starts = start_set(kind)
        self.kind = kind
        # The picture is drawn once, when both are in place.
        with quiet(self):
            for slider, letter, value in zip(self.sliders, starts.letters, (p, q), strict=True):
                slider.description = letter
                slider.max = max(1.0, 1.5 * value)
                slider.value = value
        self.draw()

    @property
    def place(self) -> tuple[float, float]:
        """The two parameters."""
        return self.sliders[0].value, self.sliders[1].value

    @answered
    def draw(self) -> None:
        """Follow the start and draw its motion."""
        if not self._listening:
            return
        p, q = self.place
        self._on_start(p, q)
        starts = start_set(self.kind)
        energy = float(starts.energies(np.array([p]), np.array([q]))[0])
        if not (-np.inf < energy < 0 and starts.inside(np.array([p]), np.array([q]))[0]):
            raise BadRequest(f"no bound start here: E = {energy:.4g}; move towards the middle")
        motion = motion_from(self.kind, p, q, self.time.value / abs(energy) ** 1.5)
        update(self.figure.model, orbit_data(motion))
        self.message.say(_story(motion))

    @answered
    def _refine(self) -> None:
        if self._worker is not None and self._worker.running:
            return
        p, q = self.place
        kind, bound = self.kind, self.bound
        self.refine.disabled = True
        self.message.say("looking for the nearest orbit")
        self._worker = Worker(
            lambda: iter([find_near(kind, p, q, bound)]), self._take, self._fail, self._end
        )
        self._worker.start()

    @answered
    def _take(self, answers: list[Refinement]) -> None:
        (answer,) = answers
        # The orbit first: showing it may say something of its motion, which matters less.
        if answer.asked_for is not None:
            self._on_orbit(answer.asked_for)
        self.message.say(answer.message, "wrong" if answer.asked_for is None else "done")

    def _fail(self, text: str) -> None:
        self.message.say(text, "wrong")

    def _end(self) -> None:
        self.refine.disabled = False


def _story(motion: object) -> str:
    """What a motion did, in a line."""
    status, time = motion.status, float(motion.times[-1])  # type: ignore[attr-defined]
    ending = {
        Status.CONVERGED: "stays together so far",
        Status.ESCAPE: f"a body escapes at t = {time:.4g}",
        Status.COLLISION: f"two bodies meet at t = {time:.4g}",
        Status.BUDGET: f"out of steps at t = {time:.4g}",
    }[status]
    if status is Status.COLLISION:
        return ending
    try:
        seen = "".join(str(one.middle) for one in syzygies(motion))  # type: ignore[arg-type]
    except BadRequest as problem:
        return f"{ending}; {problem}"
    cut = seen if len(seen) <= SHOWN_SYZYGIES else f"{seen[:SHOWN_SYZYGIES]}..."
    return f"{ending}; {len(seen)} alignments: {cut or 'none'}"
