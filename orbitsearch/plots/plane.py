"""The orbit in the plane: paths of the three bodies, and the bodies on their way along them.

Bodies that share a curve have it drawn once, in grey; a body that has a curve of its own has it in
its own colour.  An orbit that comes back turned is shown in the frame that turns with it, where its
curves close, or else as it is.  Behind each body fades the piece of its path that it has just run
through.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from bokeh.core.properties import value
from bokeh.layouts import column
from bokeh.models import ColumnDataSource, CustomJS, LayoutDOM
from bokeh.plotting import figure
from numpy.typing import NDArray

from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit, Status
from orbitsearch.plots import style
from orbitsearch.plots.clock import Clock, clock
from orbitsearch.plots.data import Motion, motion_of

__all__ = ["plane_data", "plane_figure"]

Array = NDArray[np.float64]

# Share of the period that fades behind a body, and straight pieces to draw it.
TRAIL, PIECES = 0.06, 48

PLACE = """
const m = motion.data, last = m.phase.length - 1
const periodic = facts.data.periodic[0] == 1, length = facts.data.trail[0]

// Place among the samples, a whole number and a part, of a phase.
function place_of(u) {
  let low = 0, high = last
  while (high - low > 1) {
    const middle = (low + high) >> 1
    if (m.phase[middle] <= u) low = middle; else high = middle
  }
  const gap = m.phase[high] - m.phase[low]
  return low + (gap > 0 ? Math.min(Math.max((u - m.phase[low]) / gap, 0), 1) : 0)
}

function at(column, place) {
  // Before its beginning a periodic motion is where it is before its end.
  const p = place < 0 ? (periodic ? place + last : 0) : place
  const k = Math.min(Math.floor(p), last - 1), part = p - k
  return column[k] + part * (column[k + 1] - column[k])
}

const now = place_of(phase.value)
const ago = phase.value - length
const begin = ago >= 0 ? place_of(ago) : (periodic ? place_of(ago + 1) - last : 0)
const dots = bodies.data, t = trail.data, pieces = t.x0.length / 3
for (let i = 0; i < 3; i++) {
  const x = m["x" + (i + 1)], y = m["y" + (i + 1)]
  dots.x[i] = at(x, now)
  dots.y[i] = at(y, now)
  for (let j = 0; j < pieces; j++) {
    const from = begin + (now - begin) * j / pieces
    const to = begin + (now - begin) * (j + 1) / pieces
    const k = i * pieces + j
    t.x0[k] = at(x, from)
    t.y0[k] = at(y, from)
    t.x1[k] = at(x, to)
    t.y1[k] = at(y, to)
  }
}
trail.change.emit()
bodies.change.emit()
"""


def plane_data(subject: Orbit | Trajectory | Motion, *, turning: bool = True) -> style.Data:
    """Data of `plane_figure`.

    Parameters
    ----------
    subject : Orbit, Trajectory or Motion
        An orbit over its period, or any motion as far as it was followed.
    turning : bool
        Whether an orbit that comes back turned is seen from the frame that turns with it.

    Raises
    ------
    BadRequest
        As `orbitsearch.plots.data.motion_of`.
    """
    motion = motion_of(subject)
    r = motion.positions(turning)
    x, y = style.equal_spans(r[..., 0], r[..., 1])
    return {
        "clock phase": {"title": motion.phase_label},
        "plane title": {"text": _title(motion, turning)},
        "plane x": x,
        "plane y": y,
        **_paths(motion.curves(turning)),
        "plane bodies": {
            "x": style.places(r[0, :, 0]),
            "y": style.places(r[0, :, 1]),
            "label": [look.label for look in style.BODIES],
            "colour": [look.colour for look in style.BODIES],
            "marker": [look.marker for look in style.BODIES],
            # A triangle has less room for its number, and has it lower.
            "size": [17.0, 17.0, 24.0],
            "drop": [0.5, 0.5, 2.5],
        },
        "plane trail": _trail(r[0]),
        "plane facts": {"periodic": [int(motion.orbit is not None)], "trail": [TRAIL]},
        # Last: the browser then puts the bodies where the clock is.
        "plane motion": {
            "phase": motion.times / motion.length,
            **{f"x{look.label}": style.places(r[:, i, 0]) for i, look in enumerate(style.BODIES)},
            **{f"y{look.label}": style.places(r[:, i, 1]) for i, look in enumerate(style.BODIES)},
        },
    }


def plane_figure(data: style.Data, *, size: int = 420, time: Clock | None = None) -> LayoutDOM:
    """Paths in the plane with the bodies on them.

    Parameters
    ----------
    data : dict
        From `plane_data`.
    size : int
        Side of the square frame, in pixels.
    time : Clock, optional
        The clock that moves the bodies, where the layout has one already.

    Returns
    -------
    LayoutDOM
        The figure alone when there is a `time`, else with a clock below.
    """
    plot = style.blank(
        data,
        "plane",
        width=size,
        height=size,
        labels=("x", "y"),
        x_range=style.span_model(data, "plane x"),
        y_range=style.span_model(data, "plane y"),
    )
    motion = style.source(data, "plane motion")
    for look in style.BODIES:
        _draw_path(plot, data, look, motion)
    trail = style.source(data, "plane trail")
    plot.segment(
        "x0", "y0", "x1", "y1",
        source=trail, color="colour", alpha="alpha", line_width=5, line_cap="butt",
    )  # fmt: skip
    bodies = style.source(data, "plane bodies")
    plot.scatter(
        "x", "y", source=bodies, marker="marker", size="size", color="colour", line_color="#000000"
    )
    plot.text(
        "x", "y", text="label", source=bodies, y_offset="drop",
        text_align="center", text_baseline="middle", text_color="#000000",
        text_font=value(style.FONT), text_font_size="11px", text_font_style="bold",
    )  # fmt: skip
    own = time or clock(data, size + 50)
    args = {"motion": motion, "facts": style.source(data, "plane facts"), "phase": own.phase}
    place = CustomJS(args={**args, "bodies": bodies, "trail": trail}, code=PLACE)
    own.phase.js_on_change("value", place)
    # Data equal to what is there change nothing and are not reported, so all three are listened to.
    for source in (bodies, trail, motion):
        source.js_on_change("data", place)
    return plot if time else column(plot, own.controls)


def _title(motion: Motion, turning: bool) -> str:
    if motion.orbit is None:
        ending = "" if motion.status is Status.CONVERGED else f", ends as {motion.status}"
        return f"Plane: followed for L = {motion.length:.6g}{ending}"
    angle = motion.orbit.rotation
    if not angle:
        return f"Plane: one period, T = {motion.length:.9g}"
    if turning:
        return f"Plane: T = {motion.length:.9g}, in the frame that turns with it"
    return f"Plane: T = {motion.length:.9g}, comes back turned by {np.degrees(angle):.3f}°"


def _paths(curves: tuple[tuple[int, ...], ...]) -> style.Data:
    """Which paths are drawn, and how: of bodies that share one only that of the first."""
    found: style.Data = {}
    for bodies in curves:
        shared = len(bodies) > 1
        for i in bodies:
            look = style.BODIES[i]
            found[f"plane path {look.label}"] = {"visible": i == bodies[0]}
            found[f"plane path {look.label} look"] = {
                "line_color": style.NEUTRAL if shared else look.colour,
                "line_dash": "solid" if shared else look.dash,
            }
    return found


def _draw_path(plot: figure, data: style.Data, look: style.Look, motion: ColumnDataSource) -> None:
    name = f"plane path {look.label}"
    drawn = plot.line(
        f"x{look.label}", f"y{look.label}", source=motion, line_width=1.5, line_alpha=0.9
    )
    drawn.update(name=name, **data[name])
    drawn.glyph.update(name=f"{name} look", **data[f"{name} look"])


def _trail(r: Array) -> dict[str, Any]:
    """Columns of the pieces behind the bodies: three times `PIECES`, of no length yet."""
    x, y = np.repeat(r, PIECES, axis=0).T
    return {
        "x0": style.places(x),
        "y0": style.places(y),
        "x1": style.places(x),
        "y1": style.places(y),
        "alpha": np.tile(np.linspace(0.0, 0.7, PIECES), 3),
        "colour": [look.colour for look in style.BODIES for _ in range(PIECES)],
    }
