"""The motion over one whole period of an orbit, from half of it.

An orbit starts in a start set and is fixed there by a reversing symmetry: run backwards it is
itself, bodies exchanged and the plane turned or mirrored.  So the second half of the period is the
first one seen under that symmetry, and only half has to be integrated.  An unstable orbit
multiplies the errors of its start by the square root of its multiplier that way instead of by the
multiplier, and what would fly apart before it comes round is still drawn closed.

Some orbits come back turned.  With φ the angle after a period T, x(t + T) = R(φ) x(t), and with Q
the symmetry of the start, x(-t) = Q x(t), the second half is x(T - t) = R(φ) Q x(t).  Seen from a
frame that turns evenly by φ in a period all curves close.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from orbitsearch import bodies, flow
from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.starts import Condition, start_set

__all__ = [
    "Period",
    "follow",
    "frame_angle",
    "motion_from",
    "period_states",
    "spread_times",
    "start_state",
    "turned_back",
]

Array = NDArray[np.float64]


@dataclass(frozen=True)
class Period:
    """One period of an orbit, to look into at any time.

    Attributes
    ----------
    half : Trajectory
        The first half, integrated.
    own : Condition
        What the start fulfils; its reversal makes the second half.
    time : float
        The period T.
    rotation : float
        Angle by which the orbit has turned after it.
    """

    half: Trajectory
    own: Condition
    time: float
    rotation: float

    def states(self, at: ArrayLike) -> Array:
        """States, shape (k, 12), at times `at`, shape (k,), from 0 to T."""
        at = np.asarray(at, dtype=np.float64)
        late = at > 0.5 * self.time
        end = float(self.half.times[-1])
        x = self.half.states(np.clip(np.where(late, self.time - at, at), 0.0, end))
        x[late] = self.reversed(x[late])
        return x

    def reversed(self, x: Array) -> Array:
        """States at T - t, shape (k, 12), for those at t, shape (k, 12)."""
        plane = self.own.plane_matrix(self.half.states(self.half.times[:1])[0])
        r, v = bodies.sides_to_bodies(x)
        to = list(self.own.reversal.permutation)
        image_r, image_v = np.empty_like(r), np.empty_like(v)
        image_r[:, to], image_v[:, to] = r @ plane.T, -v @ plane.T
        return bodies.turned(bodies.bodies_to_sides(image_r, image_v), self.rotation)

    def spread(self, count: int) -> Array:
        """Times from 0 to T as `spread_times` takes them: `count`, or one more to be odd."""
        first = spread_times(self.half, count // 2 + 1)
        return np.concatenate([first, self.time - first[-2::-1]])


def follow(orbit: Orbit) -> Period:
    """Follow an orbit over half its period.

    Parameters
    ----------
    orbit : Orbit

    Returns
    -------
    Period

    Raises
    ------
    BadRequest
        When the motion ends before half a period.

    Examples
    --------
    Half a period after it started with body 3 midway between 1 and 2 the figure-eight is so again.

    >>> from orbitsearch.refine import refine
    >>> eight = follow(refine("collinear", 0.34712, 0.53272, 6.3259).orbit)
    >>> x = eight.states([0.5 * eight.time])[0]
    >>> bool(np.allclose(x[2:4], x[4:6], atol=1e-12))
    True
    """
    return _followed(orbit.start, orbit.rotation)


# The figures of one orbit all ask for the same motion, one after the other.
@lru_cache(maxsize=8)
def _followed(start: Start, rotation: float) -> Period:
    time = float(start.period)
    half = flow.track(start_state(start), 0.5 * time)
    if half.status is not Status.CONVERGED:
        raise BadRequest(
            f"`orbit` must be one that can be followed for half its period {time:.9g}, it ended "
            f"as {half.status} at time {half.times[-1]:.9g}: refine its start first"
        )
    return Period(half, start_set(start.kind).own, time, rotation)


def period_states(orbit: Orbit, count: int) -> tuple[Array, Array]:
    """States along one period, close together where the motion is fast.

    Parameters
    ----------
    orbit : Orbit
    count : int
        About how many.

    Returns
    -------
    times : ndarray, shape (n,)
        From 0 to T, both included.
    states : ndarray, shape (n, 12)
        In the inertial frame; `turned_back` takes them to one that turns.

    Raises
    ------
    BadRequest
        As `follow`, and when `count` is less than 2.
    """
    period = follow(orbit)
    times = period.spread(count)
    return times, period.states(times)


def start_state(start: Start) -> Array:
    """The state, shape (12,), that a start stands for."""
    return np.asarray(start_set(start.kind).states(np.array([start.p]), np.array([start.q]))[0])


def motion_from(kind: str, p: float, q: float, time: float) -> Trajectory:
    """Motion of any start, periodic or not.

    Parameters
    ----------
    kind : str
        Name of the start set.
    p, q : float
        Its two parameters.
    time : float
        How long to follow it; positive.

    Returns
    -------
    Trajectory
        Until `time`, or until it ends: its status says how.

    Raises
    ------
    BadRequest
        When the start set is not known, or an argument is no finite number or not positive.

    Examples
    --------
    >>> str(motion_from("rest", 0.1, 0.2, 50.0).status)
    'escape'
    """
    starts = start_set(kind)
    for name, value in zip((*starts.letters, "time"), (p, q, time), strict=True):
        if not np.isfinite(value):
            raise BadRequest(f"`{name}` must be a finite number: {value}")
    if not time > 0.0:
        raise BadRequest(f"`time` must be positive, got {time}: give how long to follow the motion")
    return flow.track(starts.states(np.array([p]), np.array([q]))[0], time)


def spread_times(trajectory: Trajectory, count: int) -> Array:
    """Times, shape (count,), from the beginning to the end of a motion, dense where it is fast.

    They are spread evenly over the steps of the integrator, which are short in close passages.

    Raises
    ------
    BadRequest
        When `count` is less than 2.
    """
    if count < 2:
        raise BadRequest(f"`count` must be 2 or more, got {count}: a few hundred draw a curve")
    steps = np.arange(trajectory.steps + 1)
    places = np.linspace(0.0, trajectory.steps, count)
    return np.asarray(np.interp(places, steps, trajectory.times))


def frame_angle(orbit: Orbit) -> float:
    """Angle by which a frame must turn in a period for the curves of an orbit to close in it.

    Any whole turn more would do, too.  Where the symmetry is known the one is taken in which
    bodies that can share a curve do so.  0 for an orbit that closes in the inertial frame.
    """
    if not orbit.rotation:
        return 0.0
    whole = 0 if orbit.symmetry is None else orbit.symmetry.frame_turns
    return orbit.rotation + 2.0 * np.pi * whole


def turned_back(times: Array, states: Array, rate: float) -> Array:
    """States, shape (k, 12), with the sides and rates as a frame sees them that turns evenly.

    Parameters
    ----------
    times : ndarray, shape (k,)
    states : ndarray, shape (k, 12)
    rate : float
        Angle of the frame per unit of time.

    Returns
    -------
    ndarray, shape (k, 12)
        Rates are only turned: they stay those against the inertial frame.

    Examples
    --------
    >>> x = np.zeros((1, 12))
    >>> x[0, :2] = 0.0, 1.0
    >>> turned_back(np.array([1.0]), x, 0.5 * np.pi)[0, :2].round(9)
    array([1., 0.])
    """
    turn = np.exp(-1j * rate * np.asarray(times))[:, None]
    z = (states[:, 0::2] + 1j * states[:, 1::2]) * turn
    return np.stack([z.real, z.imag], axis=-1).reshape(states.shape)
