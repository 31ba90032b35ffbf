"""Plane and shape sphere side by side, moved by one clock."""

from __future__ import annotations

from bokeh.layouts import column, row
from bokeh.models import LayoutDOM

from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit
from orbitsearch.plots.clock import clock
from orbitsearch.plots.data import Motion, motion_of
from orbitsearch.plots.plane import plane_data, plane_figure
from orbitsearch.plots.sphere import sphere_data, sphere_figure
from orbitsearch.plots.style import Data

__all__ = ["orbit_data", "orbit_figure"]


def orbit_data(subject: Orbit | Trajectory | Motion, *, turning: bool = True) -> Data:
    """Data of `orbit_figure`: that of plane and sphere, with the parameters of `plane_data`."""
    motion = motion_of(subject)
    return {**plane_data(motion, turning=turning), **sphere_data(motion)}


def orbit_figure(data: Data, *, size: int = 400) -> LayoutDOM:
    """The motion in the plane and on the shape sphere.

    Parameters
    ----------
    data : dict
        From `orbit_data`.
    size : int
        Side of both frames, in pixels; together with axes they take about twice that and 100.
    """
    time = clock(data, 2 * size + 60)
    plane, sphere = (draw(data, size=size, time=time) for draw in (plane_figure, sphere_figure))
    return column(row(plane, sphere), time.controls)
