"""Where to search: start set, window, grid, bound on the period; by sliders or exact numbers."""

from __future__ import annotations

from collections.abc import Callable

import ipywidgets as widgets

from orbitsearch.lab.loop import on_kernel_loop
from orbitsearch.lab.parts import quiet
from orbitsearch.search import SearchRequest
from orbitsearch.starts import START_SETS, start_set
from orbitsearch.workers import check_workers

__all__ = ["WindowControls"]

Window = tuple[float, float, float, float]

# Ranges that the sliders cover; the number fields take anything.
_REACH: dict[str, Window] = {
    "collinear": (0.0, 0.92, 0.0, 0.92),
    "isosceles": (0.0, 3.0, 0.0, 1.2),
    "rest": (0.0, 0.5, 0.0, 0.87),
    "perpendicular": (0.0, 1.0, 0.0, 3.0),
}
_STEP = 0.001
_WIDE = {"description_width": "90px"}


class WindowControls(widgets.VBox):
    """Controls for a `SearchRequest`; sliders and number fields follow each other.

    Parameters
    ----------
    on_change : callable
        Called once after each change of start set or window.
    """

    def __init__(self, on_change: Callable[[], object] = lambda: None) -> None:
        self.start = widgets.Dropdown(
            options=list(START_SETS), description="start set", style=_WIDE,
            tooltip="what the starts have in common",
        )  # fmt: skip
        self.sliders = [
            widgets.FloatRangeSlider(
                step=_STEP, readout=False, continuous_update=True, style=_WIDE,
                layout=widgets.Layout(width="340px"), tooltip="range of this parameter",
            )
            for _ in range(2)
        ]  # fmt: skip
        self.ends = [
            widgets.FloatText(
                layout=widgets.Layout(width="110px"), tooltip="exact end of the range", step=_STEP
            )
            for _ in range(4)
        ]
        for end, name in zip(self.ends, ("from", "to", "from", "to"), strict=True):
            end.description, end.style = name, {"description_width": "32px"}
        self.grid = widgets.BoundedIntText(
            60, min=2, max=2000, description="grid", style=_WIDE, tooltip="starts along each side",
            layout=widgets.Layout(width="170px"),
        )  # fmt: skip
        self.scaled_period = widgets.BoundedFloatText(
            30.0, min=0.1, max=1000.0, description="T* up to", style=_WIDE,
            tooltip="bound on the scale-free period", layout=widgets.Layout(width="170px"),
        )  # fmt: skip
        self.workers = widgets.BoundedIntText(
            check_workers(None), min=1, max=256, description="processes", style=_WIDE,
            tooltip="worker processes", layout=widgets.Layout(width="170px"),
        )  # fmt: skip
        for slider, name in zip(self.sliders, ("first", "second"), strict=True):
            slider.add_class(f"lab-slider-{name}")
        self._listening = True
        self._on_change = on_change
        self.start.observe(lambda _: self._take_set(), "value")
        for k, slider in enumerate(self.sliders):
            slider.observe(lambda _, k=k: self._follow_slider(k), "value")
        for end in self.ends:
            end.observe(lambda _: self._follow_ends(), "value")
        self._take_set()
        rows = [
            widgets.HBox([slider, *self.ends[2 * k : 2 * k + 2]])
            for k, slider in enumerate(self.sliders)
        ]
        numbers = widgets.HBox([self.grid, self.scaled_period, self.workers])
        super().__init__([self.start, *rows, numbers])

    @property
    def window(self) -> Window:
        """(p0, p1, q0, q1) as the number fields have it."""
        a, b, c, d = (float(end.value) for end in self.ends)
        return a, b, c, d

    def set_window(self, window: Window) -> None:
        """Put a window into fields and sliders."""
        with quiet(self):
            for end, value in zip(self.ends, window, strict=True):
                end.value = float(f"{value:.10g}")
        self._follow_ends()

    def request(self) -> SearchRequest:
        """What is asked for; BadRequest when it breaks a rule."""
        grid = (int(self.grid.value), int(self.grid.value))
        return SearchRequest(self.start.value, self.window, grid, float(self.scaled_period.value))

    @on_kernel_loop
    def _take_set(self) -> None:
        starts, reach = start_set(self.start.value), _REACH[self.start.value]
        with quiet(self):
            for k, slider in enumerate(self.sliders):
                slider.description = starts.letters[k]
                low, high = reach[2 * k : 2 * k + 2]
                # Never a minimum above the maximum, not even between two assignments.
                slider.min, slider.max = min(slider.min, low), max(slider.max, high)
                slider.value = starts.window[2 * k : 2 * k + 2]
                slider.min, slider.max = low, high
        self.set_window(starts.window)

    @on_kernel_loop
    def _follow_slider(self, k: int) -> None:
        if not self._listening:
            return
        with quiet(self):
            # Its own two fields: the others may hold exact numbers.
            ends = self.ends[2 * k : 2 * k + 2]
            for end, value in zip(ends, self.sliders[k].value, strict=True):
                end.value = float(f"{value:.10g}")
        self._on_change()

    @on_kernel_loop
    def _follow_ends(self) -> None:
        if not self._listening:
            return
        a, b, c, d = self.window
        with quiet(self):
            for slider, (low, high) in zip(self.sliders, ((a, b), (c, d)), strict=True):
                if slider.min <= low <= high <= slider.max:
                    slider.value = (low, high)
        self._on_change()
