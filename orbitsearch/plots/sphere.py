"""The track of an orbit on the shape sphere, seen from any side.

The sphere is drawn as from far away: a disc.  What lies on the near side is solid, on the far side
dashed or pale.  It turns with a drag, as a globe whose poles stay on the middle line, and with two
sliders, which reach every view from the keyboard.  The sliders are also where the view is kept.
The browser does the turning; the first view is computed here, because a notebook tells no figure
when it is ready.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from bokeh.core.properties import value
from bokeh.layouts import column, row
from bokeh.models import ColumnDataSource, CustomJS, LayoutDOM, Range1d
from bokeh.models.widgets import Slider
from bokeh.plotting import figure
from numpy.typing import ArrayLike, NDArray

from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit
from orbitsearch.plots import style
from orbitsearch.plots.clock import Clock, clock
from orbitsearch.plots.data import Motion, motion_of
from orbitsearch.shape import COLLISIONS, EULER, POLES

__all__ = ["project", "sphere_data", "sphere_figure"]

Array = NDArray[np.float64]

TURN, TILT = 20, 25
"""Direction of the first view: degrees round the poles, and above the equator."""

# How pale the far side is.
PALE = 0.5
# Names of points to the right of this are written on their left, where there is room.
EDGE = 0.3
ROOM = 1.12

DRAW = """
const a = turn.value * Math.PI / 180, b = tilt.value * Math.PI / 180
const ca = Math.cos(a), sa = Math.sin(a), cb = Math.cos(b), sb = Math.sin(b)

function seen(d, i) {
  const p = d.n1[i], q = d.n2[i], r = d.n3[i]
  return [q * ca - p * sa, r * cb - sb * (p * ca + q * sa), r * sb + cb * (p * ca + q * sa)]
}

function draw_curve(source) {
  const d = source.data
  for (let i = 0; i < d.n1.length; i++) {
    const [x, y, depth] = seen(d, i), near = depth >= 0
    d.near_x[i] = near ? x : NaN
    d.near_y[i] = near ? y : NaN
    d.far_x[i] = near ? NaN : x
    d.far_y[i] = near ? NaN : y
  }
  source.change.emit()
}

function draw_points(source) {
  const d = source.data
  for (let i = 0; i < d.n1.length; i++) {
    const [x, y, depth] = seen(d, i)
    d.x[i] = x
    d.y[i] = y
    d.alpha[i] = depth >= 0 ? 1 : PALE
    if (d.align == null) continue
    d.align[i] = x > EDGE ? "right" : "left"
    d.offset[i] = x > EDGE ? -8 : 8
  }
  source.change.emit()
}

function move_to(u) {
  const d = track.data
  let low = 0, high = d.phase.length - 1
  while (high - low > 1) {
    const middle = (low + high) >> 1
    if (d.phase[middle] <= u) low = middle; else high = middle
  }
  const gap = d.phase[high] - d.phase[low]
  const part = gap > 0 ? Math.min(Math.max((u - d.phase[low]) / gap, 0), 1) : 0
  const n = [d.n1, d.n2, d.n3].map((c) => c[low] + part * (c[high] - c[low]))
  const length = Math.hypot(...n)
  now.data.n1[0] = n[0] / length
  now.data.n2[0] = n[1] / length
  now.data.n3[0] = n[2] / length
}
""".replace("PALE", str(PALE)).replace("EDGE", str(EDGE))

MOVE = DRAW + "\nmove_to(phase.value)\ndraw_points(now)\n"
TURN_ALL = (
    DRAW
    + """
move_to(phase.value)
for (const source of [grid, equator, track]) draw_curve(source)
for (const source of [marks, now]) draw_points(source)
"""
)
GRASP = "pointer.data.x[0] = cb_obj.sx; pointer.data.y[0] = cb_obj.sy"
DRAG = """
// Half the disc is a radian at its middle; what is under the pointer there stays under it.
const step = 180 / Math.PI / radius, p = pointer.data
const around = turn.value - (cb_obj.sx - p.x[0]) * step
const up = tilt.value + (cb_obj.sy - p.y[0]) * step
p.x[0] = cb_obj.sx
p.y[0] = cb_obj.sy
turn.value = around - 360 * Math.round(around / 360)
tilt.value = Math.min(90, Math.max(-90, up))
"""


def project(n: ArrayLike, turn: float = TURN, tilt: float = TILT) -> tuple[Array, Array, Array]:
    """Places on the disc, and depth.

    Parameters
    ----------
    n : array_like, shape (k, 3)
        Points of the sphere.
    turn, tilt : float
        Direction from which it is seen, in degrees: round the poles from the first axis, and above
        the equator.

    Returns
    -------
    x, y, depth : ndarray, shape (k,)
        To the right, upwards, and towards the reader: negative on the far side.

    Examples
    --------
    >>> [float(c[0]) for c in project([[1.0, 0.0, 0.0]], turn=0, tilt=0)]
    [0.0, 0.0, 1.0]
    """
    a, b = np.radians([turn, tilt])
    right = [-np.sin(a), np.cos(a), 0.0]
    up = [-np.sin(b) * np.cos(a), -np.sin(b) * np.sin(a), np.cos(b)]
    towards = [np.cos(b) * np.cos(a), np.cos(b) * np.sin(a), np.sin(b)]
    x, y, depth = np.array([right, up, towards]) @ np.asarray(n, dtype=np.float64).T
    return x, y, depth


def sphere_data(subject: Orbit | Trajectory | Motion) -> style.Data:
    """Data of `sphere_figure`.

    Parameters
    ----------
    subject : Orbit, Trajectory or Motion
        An orbit over its period, or any motion as far as it was followed.

    Raises
    ------
    BadRequest
        As `orbitsearch.plots.data.motion_of`.
    """
    motion = motion_of(subject)
    phases, points = motion.shape_track()
    return {
        "clock phase": {"title": motion.phase_label},
        "sphere title": {"text": "Shape sphere: drag to turn it"},
        "sphere now": _points(points[:1]),
        # Last: the browser then shows all of it from where it is seen now.
        "sphere track": {"phase": phases, **_curve(points)},
    }


def sphere_figure(data: style.Data, *, size: int = 380, time: Clock | None = None) -> LayoutDOM:
    """The shape sphere with the track of the motion and its present shape.

    Parameters
    ----------
    data : dict
        From `sphere_data`.
    size : int
        Side of the square that holds the disc, in pixels.
    time : Clock, optional
        The clock that moves the shape, where the layout has one already.

    Returns
    -------
    LayoutDOM
        With the sliders of the view, and with a clock below where there is no `time`.
    """
    plot = _round_frame(data, size)
    sources = {
        "grid": ColumnDataSource(name="sphere grid", data=_curve(_meridians())),
        "equator": ColumnDataSource(name="sphere equator", data=_curve(_equator())),
        "track": style.source(data, "sphere track"),
        "marks": ColumnDataSource(name="sphere marks", data=_marks()),
        "now": style.source(data, "sphere now"),
    }
    _draw(plot, sources)
    own = time or clock(data, size + 20)
    turn, tilt = _view_sliders(size)
    args = {**sources, "turn": turn, "tilt": tilt, "phase": own.phase}
    move = CustomJS(args=args, code=MOVE)
    own.phase.js_on_change("value", move)
    sources["now"].js_on_change("data", move)
    turn_all = CustomJS(args=args, code=TURN_ALL)
    turn.js_on_change("value", turn_all)
    tilt.js_on_change("value", turn_all)
    sources["track"].js_on_change("data", turn_all)
    _let_drag(plot, turn, tilt, size)
    below = [row(turn, tilt)] + ([] if time else [own.controls])
    return column(plot, *below)


def _round_frame(data: style.Data, size: int) -> figure:
    """Square frame without axes that nothing can zoom, with the outline of the sphere."""
    plot = style.blank(
        data,
        "sphere",
        width=size,
        height=size,
        labels=("", ""),
        tools="save",
        x_range=Range1d(start=-ROOM, end=ROOM),
        y_range=Range1d(start=-ROOM, end=ROOM),
    )
    plot.axis.visible = False
    plot.grid.visible = False
    plot.outline_line_color = None
    plot.circle(0, 0, radius=1, fill_color=None, line_color=style.NEUTRAL, line_width=1.5)
    return plot


def _draw(plot: figure, sources: dict[str, ColumnDataSource]) -> None:
    """Curves and points from the faint to what is to be seen first."""
    for name, colour, width, near, far in (
        ("grid", style.NEUTRAL, 1, 0.35, 0.0),
        ("equator", style.NEUTRAL, 1.5, 1.0, 0.8),
        ("track", style.ACCENT, 2, 1.0, 0.8),
    ):
        source = sources[name]
        plot.line(
            "far_x", "far_y", source=source, line_color=colour, line_alpha=far, line_dash=[3, 4]
        )
        plot.line(
            "near_x", "near_y", source=source, line_color=colour, line_alpha=near, line_width=width
        )
    plot.scatter(
        "x", "y", source=sources["marks"], marker="marker", size=9,
        fill_color=None, line_color=style.NEUTRAL, line_width=2, line_alpha="alpha",
    )  # fmt: skip
    plot.text(
        "x", "y", text="label", source=sources["marks"], x_offset="offset", y_offset="drop",
        text_align="align", text_color=style.NEUTRAL, text_alpha="alpha",
        text_font=value(style.FONT), text_font_size="11px",
    )  # fmt: skip
    plot.scatter(
        "x", "y", source=sources["now"], marker="circle", size=13,
        fill_color=style.ACCENT, line_color="#000000", fill_alpha="alpha", line_alpha="alpha",
    )  # fmt: skip


def _view_sliders(size: int) -> tuple[Slider, Slider]:
    """Sliders that keep the view; what they say stays in the browser."""
    common: dict[str, Any] = {
        "step": 1,
        "format": "0",
        "width": size // 2 - 10,
        "bar_color": style.NEUTRAL,
        "syncable": False,
    }
    turn = Slider(
        title="turn, degrees",
        start=-180,
        end=180,
        value=TURN,
        **style.described("sphere turn", "Turn the sphere round its poles; arrow keys move it"),
        **common,
    )
    tilt = Slider(
        title="tilt, degrees",
        start=-90,
        end=90,
        value=TILT,
        **style.described("sphere tilt", "Look from above or below; arrow keys move it"),
        **common,
    )
    return turn, tilt


def _let_drag(plot: figure, turn: Slider, tilt: Slider, size: int) -> None:
    """Have a drag turn the sphere: what is under the pointer stays there, near the middle."""
    pointer = ColumnDataSource(name="sphere pointer", data={"x": [0.0], "y": [0.0]}, syncable=False)
    plot.js_on_event("panstart", CustomJS(args={"pointer": pointer}, code=GRASP))
    args = {"pointer": pointer, "turn": turn, "tilt": tilt, "radius": 0.5 * size / ROOM}
    plot.js_on_event("pan", CustomJS(args=args, code=DRAG))


def _curve(n: Array) -> dict[str, Any]:
    """Columns of a curve on the sphere, shape (k, 3): its points, and where they are seen."""
    x, y, depth = project(n)
    near = depth >= 0.0
    return {
        **{f"n{i + 1}": style.places(n[:, i]) for i in range(3)},
        "near_x": style.places(np.where(near, x, np.nan)),
        "near_y": style.places(np.where(near, y, np.nan)),
        "far_x": style.places(np.where(near, np.nan, x)),
        "far_y": style.places(np.where(near, np.nan, y)),
    }


def _points(n: Array) -> dict[str, Any]:
    """Columns of single points, shape (k, 3)."""
    x, y, depth = project(n)
    return {
        **{f"n{i + 1}": style.places(n[:, i]) for i in range(3)},
        "x": style.places(x),
        "y": style.places(y),
        "alpha": np.where(depth >= 0.0, 1.0, PALE),
    }


def _marks() -> dict[str, Any]:
    """The points that every shape sphere has, with their names."""
    named = [
        *((n, f"{pair[0]}, {pair[1]} collide", "x", 16.0) for pair, n in COLLISIONS.items()),
        *((n, f"{body} midway", "circle", -6.0) for body, n in EULER.items()),
        *((n, f"equilateral, {sense}", "triangle", -6.0) for sense, n in POLES.items()),
    ]
    points, labels, markers, drops = zip(*named, strict=True)
    columns = _points(np.array(points))
    right = columns["x"] > EDGE
    return {
        **columns,
        "label": list(labels),
        "marker": list(markers),
        # Names below and above the equator stay apart when it is seen from the side.
        "drop": list(drops),
        "align": ["right" if there else "left" for there in right],
        "offset": np.where(right, -8.0, 8.0),
    }


def _equator() -> Array:
    angle = np.linspace(0.0, 2.0 * np.pi, 181)
    return np.stack([np.cos(angle), np.sin(angle), np.zeros_like(angle)], axis=-1)


def _meridians() -> Array:
    """Isosceles triangles: great circles through the poles and collision points, NaN between."""
    angle = np.linspace(0.0, 2.0 * np.pi, 121)[:, None]
    pole = np.array([0.0, 0.0, 1.0])
    gap = np.full((1, 3), np.nan)
    circles = [
        np.concatenate([np.cos(angle) * n + np.sin(angle) * pole, gap]) for n in COLLISIONS.values()
    ]
    return np.concatenate(circles)
