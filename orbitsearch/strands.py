"""World lines of the three bodies as strands: what winds round what, and in which order.

A motion without collisions can be replaced by a path of straight pieces as long as no body is moved
through another on the way.  It is enough that during a piece no side (a vector from one body to
another) changes by as much as its own length at the beginning: motion and straight piece then lie
in one convex set without collisions.  Whether it does is not judged from samples, which may miss a
turn between two of them, but bounded: the dense output is a polynomial on every step of the
integrator, and the sum of the sizes of its terms is more than its speed can ever be.

A braid is written in the generators of Artin: seen along a line, σ_i exchanges the bodies at the
places i and i + 1, counterclockwise (E. Artin, Ann. Math. 48 (1947) 101-126, from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import permutations

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Status

__all__ = [
    "MOST_PIECES",
    "artin_word",
    "divide",
    "may_turn",
    "refuse_collision",
    "swept",
    "world_lines",
]

Array = NDArray[np.float64]
Complex = NDArray[np.complex128]
Mask = NDArray[np.bool_]
Pieces = tuple[NDArray[np.int64], Array, Array, Array]
"""Step of each piece, shape (k,), its length in time (k,), and the states at both ends (k, 12)."""

MOST_PIECES = 1_000_000
"""Pieces after which a motion is not divided further; a hundred megabytes of states."""

# Largest turn of a side during one piece, in radians.
TURN = 0.5
# Two bodies are taken to meet where rounding alone decides on which side they pass.
MEETING = 8 * float(np.finfo(float).eps)


def swept(trajectory: Trajectory) -> Array:
    """Angles that the sides sweep along a trajectory, whole turns included.

    Parameters
    ----------
    trajectory : Trajectory

    Returns
    -------
    ndarray, shape (3,)
        Radians, counterclockwise positive, for the pairs 12, 23 and 31.

    Raises
    ------
    BadRequest
        When the trajectory runs into a collision.

    Examples
    --------
    Three bodies that circle at the corners of an equilateral triangle, for a period.

    >>> import numpy as np
    >>> from orbitsearch import bodies, flow
    >>> z = np.exp(2j * np.pi * np.arange(3) / 3)
    >>> r, v = (np.stack([w.real, w.imag], axis=-1) for w in (z, 3**-0.25 * 1j * z))
    >>> period = 2 * np.pi * 3**0.25
    >>> (swept(flow.track(bodies.bodies_to_sides(r, v), period)) / (2 * np.pi)).round(9)
    array([1., 1., 1.])
    """
    times = divide(trajectory, may_turn(trajectory))
    sides = trajectory.states(times)[:, :6].reshape(-1, 3, 2) @ np.array([1.0, 1.0j])
    # No increment is larger than TURN, so none is a turn short.
    return np.asarray(np.angle(sides[1:] * sides[:-1].conj()).sum(axis=0))


def world_lines(trajectory: Trajectory) -> tuple[Array, Array]:
    """Places of the bodies, close enough for straight lines to braid as the motion does.

    Parameters
    ----------
    trajectory : Trajectory

    Returns
    -------
    times : ndarray, shape (n,)
        From the beginning to the end, with every step of the integrator among them.
    positions : ndarray, shape (n, 3, 2)

    Raises
    ------
    BadRequest
        When the trajectory runs into a collision.
    """
    times = divide(trajectory, may_turn(trajectory))
    return times, bodies.sides_to_bodies(trajectory.states(times))[0]


def artin_word(positions: Array, angle: float = 0.0) -> tuple[int, ...]:
    """Braid of a closed path of straight pieces, in Artin's generators.

    Parameters
    ----------
    positions : array_like, shape (n, 3, 2)
        Corners of the path.  The last is the first again, or the first with bodies exchanged, up to
        a quarter of the least distance at the beginning; the rest is closed by a straight piece.
    angle : float
        Direction of the line on which the bodies are seen, in radians.

    Returns
    -------
    tuple of int
        i for σ_i, the counterclockwise exchange of the bodies at places i and i + 1 along the line,
        -i for its inverse, i = 1 or 2, in order of time.  Not reduced.  Another angle gives a
        conjugate braid.

    Raises
    ------
    BadRequest
        When `positions` has another shape or is not finite, when two bodies meet on the path, or
        when the path is not closed.

    Notes
    -----
    Bodies above each other on the line are told apart by their heights, as if the line were turned
    counterclockwise by next to nothing.  Then every piece starts and ends with a definite order.
    One or two pairs that have changed order leave one way only to do it by neighbours; all three
    can do it in two ways, and the first to change decides.

    Examples
    --------
    Bodies 1 and 2 exchange places, twice, while 3 rests on their right.

    >>> import numpy as np
    >>> turn = np.exp(1j * np.linspace(0, 2 * np.pi, 9))
    >>> z = np.stack([-turn, turn, np.full(9, 3.0)], axis=1)
    >>> artin_word(np.stack([z.real, z.imag], axis=-1))
    (1, 1)
    """
    relative = _relative(_closed(_seen_along(positions, angle)))
    ahead = np.where(relative.real != 0.0, relative.real, relative.imag) > 0.0
    changes = ahead[1:] != ahead[:-1]
    turns = (relative[:-1].conj() * relative[1:]).imag
    sizes = np.abs(relative[:-1]) * np.abs(relative[1:])
    meet = np.any(changes & (np.abs(turns) <= MEETING * sizes), axis=1)
    if meet.any():
        row = int(np.argmax(meet))
        raise BadRequest(
            f"`positions` must keep the bodies apart, two meet between rows {row} and {row + 1}: "
            "sample the motion more finely there"
        )
    word: list[int] = []
    for n in np.flatnonzero(changes.any(axis=1)):
        along = relative[n : n + 2].real
        moments = along[0] / np.where(changes[n], along[0] - along[1], 1.0)
        word.extend(_exchanges(ahead[n], changes[n], moments, turns[n] > 0.0))
    return tuple(word)


def refuse_collision(trajectory: Trajectory, name: str = "trajectory") -> None:
    """Raise BadRequest for a trajectory that ends in a collision: there its topology ends, too.

    Parameters
    ----------
    trajectory : Trajectory
    name : str
        What the caller calls it.
    """
    if trajectory.status is Status.COLLISION:
        raise BadRequest(
            f"`{name}` must not run into a collision, it does at time {trajectory.times[-1]:.9g}: "
            "stop before it, or choose another start"
        )


def divide(trajectory: Trajectory, too_long: Callable[[Pieces], Mask]) -> Array:
    """Times at which to look at a motion so that no piece between neighbours is too long.

    Parameters
    ----------
    trajectory : Trajectory
    too_long : callable
        Tells of pieces which are to be halved, shape (k,).

    Returns
    -------
    ndarray, shape (n,)
        Steps of the integrator and what was put between them, in order.

    Raises
    ------
    BadRequest
        When the trajectory runs into a collision, or more than `MOST_PIECES` are needed.
    """
    refuse_collision(trajectory)
    begin, end = trajectory.times[:-1], trajectory.times[1:]
    step = np.arange(len(begin))
    states = trajectory.states(trajectory.times)
    before, after = states[:-1], states[1:]
    times = [trajectory.times]
    total = len(begin)
    while True:
        halve = too_long((step, end - begin, before, after))
        total += int(np.count_nonzero(halve))
        if total > MOST_PIECES:
            raise BadRequest(
                f"`trajectory` must need no more than {MOST_PIECES} pieces, its "
                f"{trajectory.steps} steps need more: follow it for a shorter time, or sample it "
                "more coarsely"
            )
        if not halve.any():
            return np.sort(np.concatenate(times))
        step, begin, end = step[halve], begin[halve], end[halve]
        before, after = before[halve], after[halve]
        middle = 0.5 * (begin + end)
        state = trajectory.states(middle)
        times.append(middle)
        step = np.concatenate([step, step])
        begin, end = np.concatenate([begin, middle]), np.concatenate([middle, end])
        before, after = np.concatenate([before, state]), np.concatenate([state, after])


def may_turn(trajectory: Trajectory) -> Callable[[Pieces], Mask]:
    """Rule for `divide`: a side may turn by more than `TURN` during the piece.

    Where the rule lets a piece pass, straight lines may also replace the motion (see the head of
    this module).

    Parameters
    ----------
    trajectory : Trajectory

    Returns
    -------
    callable
    """
    coefficients = trajectory.series.reshape(trajectory.steps, 3, 2, -1)
    sizes = np.hypot(coefficients[:, :, 0], coefficients[:, :, 1])
    lengths = np.diff(trajectory.times)[:, None, None]
    order = np.arange(1, sizes.shape[-1])
    fastest = np.sum(sizes[..., 1:] * order * lengths ** (order - 1), axis=-1)

    def too_long(pieces: Pieces) -> Mask:
        step, duration, before, _ = pieces
        distances = np.hypot(before[:, 0:6:2], before[:, 1:6:2])
        # Within this share of its length from where it was, a side has turned by less than TURN.
        moved = fastest[step] * duration[:, None]
        return np.asarray(np.any(moved > np.sin(TURN) * distances, axis=1))

    return too_long


def _seen_along(positions: Array, angle: float) -> Complex:
    """The path in complex numbers, shape (n, 3): real part along the line, imaginary across it."""
    r = np.asarray(positions, dtype=np.float64)
    if r.ndim != 3 or r.shape[1:] != (3, 2) or len(r) < 2:
        raise BadRequest(
            f"`positions` must have shape (n, 3, 2) with n of 2 or more, got {r.shape}: give the "
            "places of three bodies, row after row"
        )
    if not (np.isfinite(r).all() and np.isfinite(angle)):
        raise BadRequest(
            "`positions` and `angle` must be finite, got infinity or NaN: stop before it"
        )
    path = (r @ np.array([1.0, 1.0j])) * np.exp(-1j * angle)
    apart = np.all(_relative(path) != 0.0, axis=1)
    if not apart.all():
        raise BadRequest(
            f"`positions` must keep the bodies apart, two coincide in row {np.argmin(apart)}: a "
            "braid has no collisions, choose another motion"
        )
    return np.asarray(path)


def _relative(path: Complex) -> Complex:
    """Second body of each of the pairs 12, 23, 31 as seen from the first, shape (n, 3)."""
    # The bodies are seen along the line first and subtracted then: the signs of the differences of
    # three numbers are an order, whatever the rounding.
    return np.asarray(np.roll(path, -1, axis=1) - path)


def _closed(path: Complex) -> Complex:
    """The path with its first row, bodies exchanged as the last has them, at the end."""
    first, last = path[0], path[-1]
    least = float(np.min(np.abs(_relative(path[:1]))))
    ends = [first[list(order)] for order in permutations(range(3))]
    gaps = [float(np.max(np.abs(end - last))) for end in ends]
    best = int(np.argmin(gaps))
    # Nearer than that, no body can be moved through another on the last straight piece.
    if gaps[best] > 0.25 * least:
        raise BadRequest(
            f"`positions` must end where they begin, bodies exchanged or not, got a gap of "
            f"{gaps[best]:.3g} with bodies {least:.3g} apart: follow the motion for a whole period"
        )
    return np.concatenate([path, ends[best][None]])


def _exchanges(ahead: Mask, changes: Mask, moments: Array, counterclockwise: Mask) -> list[int]:
    """Letters of one straight piece, from the pairs that change order, all of shape (3,).

    `ahead` says of each of the pairs 12, 23, 31 whether its second body is ahead at the beginning.
    """
    # Pair p is (p, p + 1): a body's place is the number of bodies that it is ahead of.
    places = [int(~ahead[p]) + int(ahead[(p + 2) % 3]) for p in range(3)]
    left = sorted(np.flatnonzero(changes), key=lambda p: float(moments[p]))
    letters = []
    while left:
        # The earliest of those that are neighbours.  The outer two are not as long as the middle
        # body is between them, whatever rounding makes of three moments that are one.
        pair = next(p for p in left if abs(places[p] - places[(p + 1) % 3]) == 1)
        i, j = pair, (pair + 1) % 3
        letter = min(places[i], places[j]) + 1
        letters.append(letter if counterclockwise[pair] else -letter)
        places[i], places[j] = places[j], places[i]
        left.remove(pair)
    return letters
