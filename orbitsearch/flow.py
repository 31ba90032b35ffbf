"""Motion of given states: to chosen times, with tangents, or as a trajectory to look into.

Thin, vectorised doors to the compiled kernels.  Nothing here raises when a motion ends early: the
status says whether it collided, escaped or ran out of steps.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from orbitsearch import _kernels, bodies
from orbitsearch.orbit import Status

__all__ = [
    "MAX_STEPS",
    "NEAREST",
    "Events",
    "Flow",
    "Trajectory",
    "is_compiled",
    "propagate",
    "track",
]

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

MAX_STEPS = 200_000
"""Integration steps after which a motion is given up; a published orbit of T* = 244 takes 9,200."""
NEAREST = 1e-7
"""Closest approach, over the size of the start, that double precision is trusted to pass."""

STATUS = {
    _kernels.STATUS_DONE: Status.CONVERGED,
    _kernels.STATUS_COLLISION: Status.COLLISION,
    _kernels.STATUS_ESCAPE: Status.ESCAPE,
    _kernels.STATUS_BUDGET: Status.BUDGET,
}
"""Meaning of the kernels' codes; CONVERGED here means that the asked time was reached."""


@dataclass(frozen=True)
class Flow:
    """States carried to their times.

    Attributes
    ----------
    states : ndarray, shape (n, 12)
    tangents : ndarray, shape (n, m, 12)
    status : ndarray of int, shape (n,)
        Keys of `STATUS`.
    steps : ndarray of int, shape (n,)
    """

    states: Array
    tangents: Array
    status: Integers
    steps: Integers


def propagate(
    states: Array,
    times: Array | float,
    tangents: Array | None = None,
    *,
    nearest: float = NEAREST,
    max_steps: int = MAX_STEPS,
) -> Flow:
    """Carry states, and tangents of the flow at them, over their own times.

    Parameters
    ----------
    states : array_like, shape (n, 12)
        Sides and their rates (`orbitsearch.bodies`).
    times : float or array_like, shape (n,)
        May be negative.
    tangents : array_like, shape (n, m, 12), optional
        Directions in which the first variational equations are integrated along.
    nearest : float
        A pair closer than this times the size of its start ends that start (status COLLISION).
    max_steps : int

    Returns
    -------
    Flow

    Notes
    -----
    Taylor series of order 20, eight starts at a time; method and source in `orbitsearch._kernels`.
    """
    x = np.array(states, dtype=np.float64, ndmin=2, order="C")
    n = len(x)
    d = np.zeros((n, 0, 12)) if tangents is None else np.array(tangents, float, order="C")
    # A copy: a read-only view would have the kernel compiled a second time.
    t = np.array(np.broadcast_to(np.asarray(times, dtype=np.float64), (n,)))
    status = np.zeros(n, np.int64)
    steps = np.zeros(n, np.int64)
    work = _kernels.workspace(d.shape[1])
    _kernels.flow(work, x, d, t, nearest * bodies.size(x), max_steps, status, steps)
    return Flow(x, d, status, steps)


@dataclass(frozen=True)
class Events:
    """Events along a trajectory in the order of time.

    Attributes
    ----------
    functions : ndarray of int, shape (k,)
        0 three in line, 1..3 isosceles with that apex, 4 kinetic energy stationary, 5..7 side
        A, B, C stationary.
    times : ndarray, shape (k,)
    states : ndarray, shape (k, 12)
    rates : ndarray, shape (k,)
        Rate of the event function; negative at function 0 when twice the signed area
        (r2 - r1) x (r3 - r1) goes from + to -.
    """

    functions: Integers
    times: Array
    states: Array
    rates: Array


@dataclass(frozen=True)
class Trajectory:
    """One motion with dense output: the Taylor series of every step.

    Attributes
    ----------
    times : ndarray, shape (steps + 1,)
    series : ndarray, shape (steps, 6, 21)
    last : ndarray, shape (12,)
        State at the end.
    status : Status
        CONVERGED when the asked time was reached.
    """

    times: Array
    series: Array
    last: Array
    status: Status

    @property
    def steps(self) -> int:
        """Number of integration steps."""
        return len(self.series)

    def states(self, at: Array) -> Array:
        """States, shape (k, 12), at times `at`, shape (k,), within the trajectory."""
        at = np.ascontiguousarray(at, dtype=np.float64)
        out = np.empty((len(at), 12))
        _kernels.dense(self.times, self.series, at, out)
        return out

    @cached_property
    def events(self) -> Events:
        """Every event after the beginning; one on the beginning itself is not reported."""
        capacity = 64 + 8 * self.steps
        functions, when, states, rates = _kernels.track_events(self.times, self.series, capacity)
        order = np.argsort(when, kind="stable")
        return Events(functions[order], when[order], states[order], rates[order])


def track(
    state: Array, time: float, *, nearest: float = NEAREST, max_steps: int = MAX_STEPS
) -> Trajectory:
    """Follow one state, shape (12,), over a positive time and keep every step.

    Parameters are those of `propagate`; the trajectory also ends when a body escapes.
    """
    x = np.array(state, dtype=np.float64)
    closest = nearest * float(bodies.size(x))
    work = _kernels.workspace()
    capacity = min(1024, max_steps)
    while True:
        times = np.empty(capacity + 1)
        series = np.empty((capacity, 6, _kernels.TERMS))
        last = x.copy()
        steps, code = _kernels.track(work, last, time, closest, times, series)
        # Starting again with more room costs at most the sum of a geometric series.
        if code != _kernels.STATUS_BUDGET or capacity >= max_steps:
            break
        capacity = min(4 * capacity, max_steps)
    return Trajectory(times[: steps + 1].copy(), series[:steps].copy(), last, STATUS[code])


def is_compiled() -> bool:
    """Whether the compiled kernels are on disk already; the first use takes most of a minute."""
    return bool(_kernels.is_cached())  # type: ignore[no-untyped-call]
