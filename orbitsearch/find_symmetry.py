"""The symmetry group of an orbit, found by comparing states.

A state decides the motion, so a symmetry of an orbit is seen at one moment: T/6, T/3 or T/2 later
the state is the first one relabelled, turned, perhaps mirrored, or it is not.  Shifts have order
1, 2, 3 or 6 (`orbitsearch.symmetry`), so these three moments show all of them.  Half a period is
enough, and half as unstable; the reversal of the start does the rest.
"""

from __future__ import annotations

import math
from itertools import permutations, product
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.flow import Trajectory
from orbitsearch.starts import CONDITIONS, Condition
from orbitsearch.symmetry import Symmetry

__all__ = ["TOLERANCE", "find_symmetry"]

Array = NDArray[np.float64]

TOLERANCE = 1e-5
"""Largest difference of two states that count as equal, positions in 1/|E| and velocities in
|E|^(1/2).  The figure-eight's twin misses the choreography by 7e-3."""

_IDENTITY = (0, 1, 2)
_PERMUTATIONS = tuple((i, j, k) for i, j, k in permutations(_IDENTITY))


class _Shift(NamedTuple):
    """How a later state is the first one again."""

    permutation: tuple[int, int, int]
    mirror: bool
    turn: float
    deviation: float


def find_symmetry(own: Condition, half: Trajectory, rotation: float) -> Symmetry:
    """Group of an orbit that starts in a start set.

    Parameters
    ----------
    own : Condition
        The condition that the orbit starts in.
    half : Trajectory
        Its first half period.
    rotation : float
        Angle by which the orbit has turned after a period, 0 when it closes.

    Returns
    -------
    Symmetry
        Every symmetry that holds to `TOLERANCE`, with the largest departure among them.
    """
    period = 2.0 * float(half.times[-1])
    sixths = half.states(np.linspace(0.0, 0.5, 4) * period)
    energy = float(bodies.energy(sixths[0]))
    shift, order = _Shift(_IDENTITY, False, 0.0, 0.0), 1
    for k in (1, 2, 3):
        nearest = _nearest_image(sixths[0], sixths[k], energy)
        if nearest.deviation <= TOLERANCE:
            shift, order = nearest, 6 // k
            break
    states = half.states(np.linspace(0.0, 0.5, order + 1) * period)
    label, residual = _fixed_by(states[1], own)
    turn, frame_turns = _turns(shift, order, rotation)
    others = [_fixed_by(state, own)[1] for state in states]
    return Symmetry(
        order=order,
        permutation=shift.permutation,
        mirror=shift.mirror,
        turn=turn,
        frame_turns=frame_turns,
        ends=(own.label, label),
        deviation=max(shift.deviation, residual, *others),
    )


def _nearest_image(x: Array, y: Array, energy: float) -> _Shift:
    """Which relabelled, mirrored and turned image of x is nearest to y.

    Not the identity: shapes that come back unchanged have made a whole period already.
    """
    best = _Shift(_IDENTITY, False, 0.0, math.inf)
    for permutation, mirror in product(_PERMUTATIONS, (False, True)):
        if permutation == _IDENTITY and not mirror:
            continue
        image = bodies.relabelled(x, permutation, mirror)
        turn = bodies.turn_between(image, y)
        deviation = bodies.distance(bodies.turned(image, turn), y, energy)
        if deviation < best.deviation:
            best = _Shift(permutation, mirror, turn, deviation)
    return best


def _fixed_by(x: Array, own: Condition) -> tuple[str, float]:
    """Label of the condition that a state comes nearest to, and its largest residual."""
    # The own one first: where two hold equally well, none is better.
    conditions = [own, *(c for c in CONDITIONS.values() if c is not own)]
    residuals = [float(np.abs(c.residuals(x)).max()) for c in conditions]
    best = int(np.argmin(residuals))
    return conditions[best].label, residuals[best]


def _turns(shift: _Shift, order: int, rotation: float) -> tuple[float, int]:
    """Angle that the shift turns by in the frame of the orbit, and turns that undo it."""
    if shift.mirror or order == 1:
        # A mirror's angle is that of its axis, which depends on how the orbit lies in the plane.
        return 0.0, 0
    turns = round((order * shift.turn - rotation) / (2.0 * math.pi))
    if rotation:
        return 0.0, turns
    # Half a turn is the same either way round.
    turns = abs(turns) if order == 2 else turns
    return 2.0 * math.pi * turns / order, turns
