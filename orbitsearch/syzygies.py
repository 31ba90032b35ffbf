"""Syzygies: the moments when the three bodies are in line, with margins.

On the shape sphere a motion crosses the equator there, on the arc named after the body in the
middle.  Each crossing has two margins, which say how far the motion may be deformed:

* the *distance* to the nearest collision point.  A curve that is moved across a collision point
  passes it on the other side: the body in the middle is another one, and so is the type of the
  motion.  The distance is the margin of the type, as far as crossings show it: a curve may also
  come near a collision point without being in line there, which the least separation tells.
* the *angle* between curve and equator.  Where it is small, the curve only grazes the equator, and
  a small change may make two crossings into none.  Those two are of one arc and in opposite
  directions, so they cancel: the sequence of syzygies is another one, but the reduced cycle and
  the word are not.  The angle is the margin of the sequence.

Crossings are the integrator's own event roots.  Of a periodic orbit only half a period is
integrated: an orbit that starts in a start set also meets it half a period later, and its second
half is the first one under the set's reversing symmetry.  Errors then grow with the square root of
the multiplier only, and no crossing can be counted twice or lost at the seam where the period
closes.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from itertools import pairwise
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Status
from orbitsearch.shape import collision_distances, shape, shape_velocity
from orbitsearch.starts import Condition
from orbitsearch.strands import refuse_collision
from orbitsearch.symmetry import Reversal

__all__ = ["Syzygy", "crossings", "least_margins", "period_syzygies", "syzygies"]

Array = NDArray[np.float64]

# An alignment closer than this share of the time to one of its ends is the end itself.
SEAM = 1e-7
# A motion whose shape is never farther from the equator than this, nor leaves it by more than this
# share of the rate at which the sides change, moves along it: what is left of both is rounding.
IN_LINE = 1e-10


class Syzygy(NamedTuple):
    """One crossing of the equator.

    Attributes
    ----------
    middle : int
        Body in the middle, 1 to 3.
    direction : int
        +1 when twice the signed area (r2 - r1) x (r3 - r1) goes from + to -, else -1.
    time : float
        Since the beginning.
    angle : float
        Between curve and equator, in [0, π/2].
    distance : float
        From the nearest collision point, in radians on the shape sphere, up to π/3.
    """

    middle: int
    direction: int
    time: float
    angle: float
    distance: float


def syzygies(trajectory: Trajectory) -> list[Syzygy]:
    """Alignments along any trajectory in order of time.

    Parameters
    ----------
    trajectory : Trajectory

    Returns
    -------
    list of Syzygy
        Those at times from 0, included, to the end, not included, both to 1e-7 of the whole time.
        So a period that starts in line has its start once, as the first, and pieces of one motion
        can be joined.

    Raises
    ------
    BadRequest
        When the trajectory runs into a collision, when it stays in line all the time, or when two
        neighbouring crossings have the same direction.

    Examples
    --------
    The figure-eight, which starts with body 3 midway between the others.

    >>> from orbitsearch import flow, starts
    >>> a, b, period = 0.3471168881189269, 0.5327249453880302, 6.325913982926212
    >>> x = starts.start_set("collinear").states(np.array([a]), np.array([b]))[0]
    >>> found = syzygies(flow.track(x, period))
    >>> [f"{s.middle}{'-+'[s.direction > 0]}" for s in found]
    ['3+', '1-', '2+', '3-', '1+', '2-']
    >>> [round(s.time / period * 6, 9) for s in found]
    [0.0, 1.0, 2.0, 3.0, 4.0, 5.0]
    """
    refuse_collision(trajectory)
    _refuse_motion_in_line(trajectory)
    end = float(trajectory.times[-1])
    times, states = _alignments(trajectory)
    inner = (times > SEAM * end) & (times < (1.0 - SEAM) * end)
    times, states = times[inner], states[inner]
    first = trajectory.states(trajectory.times[:1])
    area, rate = _area(first)
    if abs(area[0]) < SEAM * end * abs(rate[0]):
        times, states = np.concatenate([[0.0], times]), np.concatenate([first, states])
    found = _described(times, states)
    _check_directions(found, "trajectory")
    return found


def period_syzygies(own: Condition, half: Trajectory) -> list[Syzygy]:
    """Alignments of one period of an orbit, in order of time.

    Parameters
    ----------
    own : Condition
        The condition that the orbit starts in.
    half : Trajectory
        Its first half period.

    Returns
    -------
    list of Syzygy
        Over the whole period.  For a start in line the first is the start itself.

    Raises
    ------
    BadRequest
        When the trajectory ends before half a period or stays in line all the time, or when two
        neighbouring crossings have the same direction, as they may where the motion does not close.
    """
    refuse_collision(half, "half")
    if half.status is not Status.CONVERGED:
        raise BadRequest(
            f"`half` must be half a period, it ended as {half.status} at time "
            f"{half.times[-1]:.9g}: follow a start that is periodic"
        )
    _refuse_motion_in_line(half)
    end = float(half.times[-1])
    times, states = _alignments(half)
    if own.aligned:
        inner = (times > SEAM * end) & (times < (1.0 - SEAM) * end)
        times = np.concatenate([[0.0], times[inner], [end]])
        first = half.states(half.times[:1])
        states = np.concatenate([first, states[inner], half.last[None]])
    there = _described(times, states)
    # The two ends of the half are fixed by the reversal: they are their own mirror images.
    mirrored = there[1:-1] if own.aligned else there
    found = there + [_mirrored(own.reversal, s, 2.0 * end) for s in reversed(mirrored)]
    # Their number is even, so the last and the first are a pair that alternates, too.
    _check_directions(found, "half")
    return found


def crossings(found: Iterable[Syzygy]) -> list[tuple[int, int]]:
    """Middle bodies and directions alone, as `orbitsearch.words.free_group_word` takes them."""
    return [(s.middle, s.direction) for s in found]


def least_margins(found: Iterable[Syzygy]) -> tuple[float, float]:
    """Least angle and least distance over a list of syzygies; infinite where there are none.

    Examples
    --------
    >>> least_margins([Syzygy(3, 1, 0.0, 1.2, 0.4), Syzygy(1, -1, 2.0, 0.9, 0.7)])
    (0.9, 0.4)
    """
    every = list(found)
    return (
        min((s.angle for s in every), default=math.inf),
        min((s.distance for s in every), default=math.inf),
    )


def _area(states: Array) -> tuple[Array, Array]:
    """Twice the signed area, A x B, and its rate, each of shape (k,)."""
    (ax, ay, bx, by), (au, av, bu, bv) = states[:, :4].T, states[:, 6:10].T
    return ax * by - ay * bx, au * by - av * bx + ax * bv - ay * bu


def _alignments(trajectory: Trajectory) -> tuple[Array, Array]:
    """Times and states, (k,) and (k, 12), of the roots of the signed area."""
    events = trajectory.events
    in_line = events.functions == 0
    return events.times[in_line], events.states[in_line]


def _described(times: Array, states: Array) -> list[Syzygy]:
    """Syzygies at given times, (k,), in given states, (k, 12)."""
    _, rates = _area(states)
    # The longest side is opposite to the middle body: A to 3, B to 1, C to 2.
    lengths = np.hypot(states[:, 0:6:2], states[:, 1:6:2])
    middles = np.array([3, 1, 2])[np.argmax(lengths, axis=1)]
    velocity = shape_velocity(states)
    angles = np.arctan2(np.abs(velocity[:, 2]), np.hypot(velocity[:, 0], velocity[:, 1]))
    distances = np.min(collision_distances(states), axis=1)
    return [
        Syzygy(int(middle), 1 if rate < 0 else -1, float(time), float(angle), float(distance))
        for middle, rate, time, angle, distance in zip(
            middles, rates, times, angles, distances, strict=True
        )
    ]


def _mirrored(reversal: Reversal, syzygy: Syzygy, period: float) -> Syzygy:
    """The one at T - t that answers one at t: body relabelled, direction as time runs back.

    Swapping two bodies and mirroring the plane each turn the sign of the area, and running back
    turns the direction of its change.  Angle and distance are the same.
    """
    swapped = sum(i != image for i, image in enumerate(reversal.permutation)) == 2
    flips = swapped + (reversal.plane == "mirror") + 1
    return syzygy._replace(
        middle=reversal.permutation[syzygy.middle - 1] + 1,
        direction=syzygy.direction * (-1) ** flips,
        time=period - syzygy.time,
    )


def _refuse_motion_in_line(trajectory: Trajectory) -> None:
    """Raise BadRequest for a motion along the equator, whose crossings would be rounding."""
    states = trajectory.states(trajectory.times)
    heights = np.abs(shape(states)[:, 2])
    rates = np.linalg.norm(states[:, 6:], axis=1) / np.linalg.norm(states[:, :6], axis=1)
    climbs = np.abs(shape_velocity(states)[:, 2])
    if np.all(heights <= IN_LINE) and np.all(climbs <= IN_LINE * rates):
        raise BadRequest(
            "the three bodies stay in line all the time, so there are no crossings to tell: take a "
            "motion that leaves the line"
        )


def _check_directions(found: Sequence[Syzygy], name: str) -> None:
    """Raise BadRequest where two neighbours cross the equator in one direction."""
    for one, other in pairwise(found):
        if one.direction == other.direction:
            raise BadRequest(
                f"`{name}` must cross the line of the bodies in alternate directions, it has "
                f"{one.direction:+d} at times {one.time:.9g} and {other.time:.9g}: a crossing was "
                "missed or the motion does not close, refine the start"
            )
