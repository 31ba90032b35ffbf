"""The alignments of an orbit along its period: when, which body is in the middle, which way.

One row for each body, a triangle for each alignment: it points down where the shape crosses the
equator of the shape sphere from above, so that bodies 1, 2, 3 run counterclockwise before and
clockwise after, and up where it comes from below.
"""

from __future__ import annotations

import textwrap

from bokeh.models import FixedTicker, LayoutDOM, Range1d
from bokeh.models.tools import HoverTool

from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit
from orbitsearch.period import Period
from orbitsearch.plots import style
from orbitsearch.plots.data import Motion, motion_of
from orbitsearch.syzygies import Syzygy, least_margins, period_syzygies, syzygies

__all__ = ["alignments_data", "alignments_figure"]

# Letters of a cycle that are written out in the title.
LETTERS = 36
# Letters of a title that go on one line.
LINE = 100
# From this number of alignments on, marks are made smaller.
MANY = 80


def alignments_data(subject: Orbit | Trajectory | Motion) -> style.Data:
    """Data of `alignments_figure`.

    Parameters
    ----------
    subject : Orbit, Trajectory or Motion
        Where alignments cannot be told, as of a motion into a collision, the title says why.

    Raises
    ------
    BadRequest
        As `orbitsearch.plots.data.motion_of`.
    """
    motion = motion_of(subject)
    try:
        found = _alignments(motion)
        title = _title(motion, found)
    except BadRequest as why:
        found, title = [], textwrap.fill(f"No alignments to tell: {why}", LINE)
    return {
        "alignments title": {"text": title},
        "alignments phase": {"axis_label": motion.phase_label},
        "alignments": {
            "phase": [s.time / motion.length for s in found],
            "middle": [s.middle for s in found],
            "marker": ["inverted_triangle" if s.direction > 0 else "triangle" for s in found],
            "turn": [_turn(s.direction) for s in found],
            "colour": [style.BODIES[s.middle - 1].colour for s in found],
            "angle": [s.angle for s in found],
            "distance": [s.distance for s in found],
            "size": [12.0 if len(found) < MANY else 8.0] * len(found),
        },
    }


def alignments_figure(data: style.Data, *, width: int = 760, height: int = 120) -> LayoutDOM:
    """Rows of alignments, with their margins where the pointer is.

    Parameters
    ----------
    data : dict
        From `alignments_data`.
    width, height : int
        Of the frame, in pixels.
    """
    plot = style.blank(
        data,
        "alignments",
        width=width,
        height=height,
        labels=("", "in the middle"),
        tools="xbox_zoom,reset,save",
        x_range=Range1d(start=-0.02, end=1.02),
        y_range=Range1d(start=3.6, end=0.4),
    )
    plot.xaxis.name = "alignments phase"
    plot.xaxis.update(**data["alignments phase"])
    plot.yaxis.ticker = plot.ygrid.ticker = FixedTicker(ticks=[1, 2, 3])
    source = style.source(data, "alignments")
    plot.line("phase", "middle", source=source, line_color=style.NEUTRAL, line_alpha=0.5)
    marks = plot.scatter(
        "phase", "middle", source=source, marker="marker", size="size", color="colour"
    )
    plot.add_tools(HoverTool(renderers=[marks], tooltips=_tooltips(), visible=False))
    return plot


def _alignments(motion: Motion) -> list[Syzygy]:
    if isinstance(motion.course, Period):
        return period_syzygies(motion.course.own, motion.course.half)
    return syzygies(motion.course)


def _title(motion: Motion, found: list[Syzygy]) -> str:
    count = f"{len(found)} alignments" if len(found) != 1 else "1 alignment"
    if not found:
        return "No alignments"
    angle, distance = least_margins(found)
    margins = f"least angle {angle:.3g}, least distance {distance:.3g}, in radians"
    if motion.orbit is None:
        return f"{count}; {margins}"
    cycle = motion.orbit.cycle
    shown = cycle if len(cycle) <= LETTERS else f"{cycle[:LETTERS]}… ({len(cycle)} letters)"
    return f"{count} in a period, reduced cycle {shown or 'empty'}\n{margins}"


def _turn(direction: int) -> str:
    before, after = ("counterclockwise", "clockwise")[:: 1 if direction > 0 else -1]
    return f"{before} before, {after} after"


def _tooltips() -> list[tuple[str, str]]:
    return [
        ("in the middle", "@middle"),
        ("phase", "@phase{0.000000}"),
        ("bodies 1, 2, 3", "@turn"),
        ("angle with the equator", "@angle{0.0000} rad"),
        ("from a collision point", "@distance{0.0000} rad"),
    ]
