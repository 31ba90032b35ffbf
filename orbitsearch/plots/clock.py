"""The clock of a figure: a phase to choose or to let run, which everything that moves follows.

All of it happens in the browser, without a message to Python: the slider of the phase is the clock,
and whatever moves has a CustomJS on its value.  While the clock runs, a frame is drawn whenever the
browser asks for one; the phase advances by the time that has passed, so a slow machine shows fewer
pictures of the same motion.  It stops when the figure leaves the page, and waits while it cannot be
seen.

`update` replaces data in the order in which it comes.  So that moving things are put where the
clock is, and not where the phase is 0, their CustomJS listens to new data as well, and the source
that it reads comes after those that it writes into.
"""

from __future__ import annotations

from typing import Any, NamedTuple

from bokeh.layouts import row
from bokeh.models import ColumnDataSource, CustomJS, LayoutDOM
from bokeh.models.widgets import Slider, Toggle

from orbitsearch.plots import style

__all__ = ["Clock", "clock"]

# Seconds in which a period is played.
SLOWEST, FASTEST, USUAL = 60, 2, 10

PLAY = """
const run = ++beat.data.run[0]
cb_obj.label = cb_obj.active ? "Pause" : "Play"
let before = null
function frame(now) {
  // Another press of the button has started a loop of its own.
  if (!cb_obj.active || beat.data.run[0] != run) return
  const view = cb_context.index.find_one(cb_obj)
  if (view == null || !view.el.isConnected) {
    cb_obj.active = false
    return
  }
  const seen = view.el.getClientRects().length > 0
  if (before != null && seen) {
    // After a pause in which the browser asked for no frame the motion goes on from where it was.
    const passed = Math.min((now - before) / 1000, 0.25)
    phase.value = (phase.value + passed / pace.value) % 1
  }
  before = now
  requestAnimationFrame(frame)
}
if (cb_obj.active) requestAnimationFrame(frame)
"""


class Clock(NamedTuple):
    """Slider whose value is the phase, from 0 to 1, and a row of it with all other controls."""

    phase: Slider
    controls: LayoutDOM


def clock(data: style.Data, width: int) -> Clock:
    """A clock that stands at 0.

    Parameters
    ----------
    data : dict
        Says under ``"clock phase"`` what the phase is called.
    width : int
        Of all controls together, in pixels; 360 and more.
    """
    # None of these is told to Python: sixty messages a second would be.
    phase = Slider(
        **data["clock phase"],
        start=0.0,
        end=1.0,
        step=0.001,
        value=0.0,
        format="0.000",
        bar_color=style.NEUTRAL,
        width=width - 230,
        **_common("clock phase", "Moment of the period that is shown; arrow keys move it"),
    )
    pace = Slider(
        title="seconds a turn",
        start=FASTEST,
        end=SLOWEST,
        step=1,
        value=USUAL,
        width=130,
        bar_color=style.NEUTRAL,
        **_common("clock pace", "How many seconds the whole motion takes when it is played"),
    )
    button = Toggle(
        label="Play", width=70, **_common("clock button", "Let the bodies run, or stop them")
    )
    beat = ColumnDataSource(name="clock beat", data={"run": [0]}, syncable=False)
    play = CustomJS(args={"phase": phase, "pace": pace, "beat": beat}, code=PLAY)
    button.js_on_change("active", play)
    return Clock(phase, row(button, phase, pace, align="start"))


def _common(name: str, description: str) -> dict[str, Any]:
    return {**style.described(name, description), "syncable": False, "align": "center"}
