"""The three distances between bodies along an orbit, and the least of them.

Lengths are in units of 1/|E|, so that orbits found at different scales can be compared, and on a
logarithmic scale, so that a close passage can be read.
"""

from __future__ import annotations

import numpy as np
from bokeh.models import FixedTicker, LayoutDOM, Range1d
from bokeh.models.tools import HoverTool
from numpy.typing import NDArray

from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit
from orbitsearch.plots import style
from orbitsearch.plots.data import Motion, motion_of

__all__ = ["separation_data", "separation_figure"]

Array = NDArray[np.float64]

# Share of a decade that is left free above and below.
ROOM = 0.1
# Powers of 10 up to which there is room for more ticks between them.
FEW = 4


def separation_data(subject: Orbit | Trajectory | Motion) -> style.Data:
    """Data of `separation_figure`.

    Parameters
    ----------
    subject : Orbit, Trajectory or Motion

    Raises
    ------
    BadRequest
        As `orbitsearch.plots.data.motion_of`.
    """
    motion = motion_of(subject)
    unit = abs(motion.energy) or 1.0
    lengths = unit * _lengths(motion.states)
    low, high = float(lengths.min()), float(lengths.max())
    phase, least, pair = _least(motion)
    least *= unit
    return {
        "separation title": {
            "text": f"Least separation {least:.6g}, of pair {style.PAIRS[pair].label} at "
            f"{motion.phase_label} = {phase:.5f}"
        },
        "separation phase": {"axis_label": motion.phase_label},
        "separation y": _decades(min(least, low), high),
        "separation ticks": {"ticks": _ticks(min(least, low), high)},
        "separation": {
            "phase": motion.times / motion.length,
            **{look.label: lengths[:, k].copy() for k, look in enumerate(style.PAIRS)},
        },
        "separation least": {
            "phase": [phase],
            "length": [least],
            "pair": [style.PAIRS[pair].label],
            "colour": [style.PAIRS[pair].colour],
        },
    }


def separation_figure(data: style.Data, *, width: int = 760, height: int = 200) -> LayoutDOM:
    """Distances along the period; a click on the legend hides one.

    Parameters
    ----------
    data : dict
        From `separation_data`.
    width, height : int
        Of the frame, in pixels.
    """
    plot = style.blank(
        data,
        "separation",
        width=width,
        height=height,
        labels=("", "distance, in 1/|E|"),
        x_range=Range1d(start=-0.02, end=1.02),
        y_range=style.span_model(data, "separation y"),
        y_axis_type="log",
    )
    plot.xaxis.name = "separation phase"
    plot.xaxis.update(**data["separation phase"])
    plot.yaxis.ticker = plot.ygrid.ticker = FixedTicker(
        name="separation ticks", **data["separation ticks"]
    )
    source = style.source(data, "separation")
    for look in style.PAIRS:
        plot.line(
            "phase",
            look.label,
            source=source,
            line_color=look.colour,
            line_dash=look.dash,
            line_width=2,
            legend_label=f"pair {look.label}",
        )
    mark = plot.scatter(
        "phase", "length", source=style.source(data, "separation least"), marker="circle", size=12,
        fill_color=None, line_color="colour", line_width=2,
    )  # fmt: skip
    tips = [("pair", "@pair"), ("phase", "@phase{0.000000}"), ("distance", "@length{0.000000}")]
    plot.add_tools(HoverTool(renderers=[mark], tooltips=tips, visible=False))
    style.dress_legend(plot.legend[0])
    # Beside the frame, where it covers no curve.
    plot.add_layout(plot.legend[0], "right")
    return plot


def _lengths(states: Array) -> Array:
    """Lengths of the sides, shape (k, 3), of states, shape (k, 12)."""
    return np.hypot(states[:, 0:6:2], states[:, 1:6:2])


def _least(motion: Motion) -> tuple[float, float, int]:
    """Phase, length and pair (0, 1, 2) of the least distance; the second half is like the first."""
    events = motion.half.events
    stationary = events.functions >= 5
    times = np.concatenate([[0.0, motion.half.times[-1]], events.times[stationary]])
    ends = motion.half.states(motion.half.times[[0, -1]])
    lengths = _lengths(np.concatenate([ends, events.states[stationary]]))
    row, pair = np.unravel_index(int(np.argmin(lengths)), lengths.shape)
    return float(times[row] / motion.length), float(lengths[row, pair]), int(pair)


def _decades(low: float, high: float) -> dict[str, float]:
    """Ends of a logarithmic range."""
    ends = style.span(float(np.log10(low)) - ROOM, float(np.log10(high)) + ROOM, margin=0.0)
    return {name: 10.0**value for name, value in ends.items()}


def _ticks(low: float, high: float) -> list[float]:
    """Round lengths to write at the axis: 1, 2, 5 times powers of 10, or these alone where many."""
    powers = range(int(np.floor(np.log10(low))), int(np.ceil(np.log10(high))) + 1)
    steps = (1, 2, 5) if len(powers) <= FEW else (1,)
    return [float(f"{step}e{power}") for power in powers for step in steps]
