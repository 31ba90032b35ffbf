"""Alignments of the three bodies along a period, from the integrator's own event roots.

Only half a period is integrated: an orbit that starts in a start set also meets it half a period
later, and its second half is the first one under the set's reversing symmetry.  Errors then grow
with the square root of the multiplier only, and no crossing can be counted twice or lost at the
seam where the period closes.
"""

from __future__ import annotations

from orbitsearch import _kernels
from orbitsearch.flow import Trajectory
from orbitsearch.starts import Condition, Reversal

__all__ = ["crossings"]

# An alignment closer than this share of the half period to one of its ends is the end itself.
SEAM = 1e-7


def _mirrored(reversal: Reversal, body: int, direction: int) -> tuple[int, int]:
    """Crossing at T - t that answers one at t: body relabelled, direction as time runs back.

    Swapping two bodies and mirroring the plane each turn the sign of the area, and running back
    turns the direction of its change.
    """
    swapped = sum(i != image for i, image in enumerate(reversal.permutation)) == 2
    flips = swapped + (reversal.plane == "mirror") + 1
    return reversal.permutation[body - 1] + 1, direction * (-1) ** flips


def _crossing(state: object, rate: float) -> tuple[int, int]:
    kind, _, _ = _kernels._kind_and_residuals(0, state)
    return int(kind), 1 if rate < 0 else -1


def crossings(own: Condition, half: Trajectory) -> list[tuple[int, int]]:
    """Alignments of one period in order of time.

    Parameters
    ----------
    own : Condition
        The condition that the orbit starts in.
    half : Trajectory
        Its first half period.

    Returns
    -------
    list of (int, int)
        Middle body, and +1 when twice the signed area (r2 - r1) x (r3 - r1) goes from + to -, else
        -1.  For a start in line the first crossing is the start itself.
    """
    end = half.times[-1]
    events = half.events
    inner = [
        _crossing(state, rate)
        for function, time, state, rate in zip(
            events.functions, events.times, events.states, events.rates, strict=True
        )
        if function == 0 and (not own.aligned or SEAM * end < time < (1 - SEAM) * end)
    ]
    back = [_mirrored(own.reversal, *crossing) for crossing in reversed(inner)]
    if not own.aligned:
        return inner + back
    first, last = (
        _crossing(state, _kernels._event(0, *state)[1])
        for state in (half.states(half.times[:1])[0], half.last)
    )
    return [first, *inner, last, *back]
