"""One motion as its figures share it: an orbit over its period, or any start for a while.

Every figure of an orbit shows the same motion over the same phase t/T, so it is sampled in one
place.  A start that is not periodic, or not known to be, is shown over the time it was followed, L:
there the phase is t/L.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies
from orbitsearch.errors import BadRequest
from orbitsearch.flow import Trajectory
from orbitsearch.orbit import Orbit, Status
from orbitsearch.period import Period, follow, frame_angle, spread_times, turned_back
from orbitsearch.shape import sample, shape

__all__ = ["Motion", "motion_of"]

Array = NDArray[np.float64]

# Samples to each step of the integrator: a step of the Taylor series of order 20 turns a curve by
# about a quarter of a right angle, which eight straight lines draw as round.
PER_STEP = 8
FEWEST, MOST = 601, 40_001
# A preview has to be quick: this many samples are drawn before the hand moves on.
MOST_PREVIEW = 8_001
# Motions of more steps than this have samples enough for the shape sphere, too.
LONG = 1_000


@dataclass(frozen=True)
class Motion:
    """What the figures of one motion are made from.

    Attributes
    ----------
    course : Period or Trajectory
        The motion itself.
    orbit : Orbit or None
        None for a start that was only followed.
    length : float
        Period, or time that was followed.
    """

    course: Period | Trajectory
    orbit: Orbit | None
    length: float

    @property
    def half(self) -> Trajectory:
        """What was integrated: half the period, or all of a motion that is not periodic."""
        return self.course.half if isinstance(self.course, Period) else self.course

    @property
    def status(self) -> Status:
        """CONVERGED where the motion does not end before its time."""
        return self.half.status

    @property
    def phase_label(self) -> str:
        """What the phase is called on an axis."""
        return "t / T" if self.orbit else "t / L"

    @property
    def energy(self) -> float:
        """Energy, by which lengths can be brought to the unit 1/|E|."""
        return float(bodies.energy(self.states[0]))

    @cached_property
    def times(self) -> Array:
        """Times, shape (n,), dense where the motion is fast."""
        if isinstance(self.course, Period):
            count = min(max(PER_STEP * 2 * self.half.steps, FEWEST), MOST)
            return self.course.spread(count)
        count = min(max(PER_STEP * self.half.steps, FEWEST), MOST_PREVIEW)
        return spread_times(self.course, count)

    @cached_property
    def states(self) -> Array:
        """States at these times, shape (n, 12), in the inertial frame."""
        return self.course.states(self.times)

    def positions(self, turning: bool) -> Array:
        """Places of the bodies, shape (n, 3, 2).

        Parameters
        ----------
        turning : bool
            Whether they are seen from the frame in which the curves of a periodic orbit close.
        """
        x = self.states
        if turning and self.orbit is not None:
            x = turned_back(self.times, x, frame_angle(self.orbit) / self.length)
        return bodies.sides_to_bodies(x)[0]

    def curves(self, turning: bool) -> tuple[tuple[int, ...], ...]:
        """Bodies, numbered from 0, by the curve that they run along.

        Examples
        --------
        >>> from orbitsearch.refine import refine
        >>> motion_of(refine("collinear", 0.34712, 0.53272, 6.3259).orbit).curves(turning=True)
        ((0, 1, 2),)
        """
        apart = ((0,), (1,), (2,))
        if self.orbit is None or self.orbit.symmetry is None:
            return apart
        symmetry = self.orbit.symmetry
        # Where a frame has to turn for the curves to close, the inertial one shows none shared.
        if symmetry.curves == 3 or (not turning and frame_angle(self.orbit) != 0.0):
            return apart
        if symmetry.curves == 1:
            return ((0, 1, 2),)
        alone = next(i for i, image in enumerate(symmetry.permutation) if i == image)
        return tuple(sorted(((alone,), tuple(i for i in range(3) if i != alone))))

    def shape_track(self) -> tuple[Array, Array]:
        """Phases, shape (m,), and points of the shape sphere, shape (m, 3), close together."""
        # `sample` refuses a motion into a collision, where it would need ever more points.
        if self.status is Status.COLLISION or self.half.steps > LONG:
            return self.times / self.length, shape(self.states)
        times, points = sample(self.half)
        if isinstance(self.course, Period):
            times = np.concatenate([times, self.length - times[-2::-1]])
            points = shape(self.course.states(times))
        return times / self.length, points


def motion_of(subject: Orbit | Trajectory | Motion) -> Motion:
    """The motion of an orbit over its period, or a trajectory as it is.

    Parameters
    ----------
    subject : Orbit, Trajectory or Motion
        Of a motion itself nothing is computed again.

    Raises
    ------
    BadRequest
        As `orbitsearch.period.follow`.
    """
    if isinstance(subject, Motion):
        return subject
    if isinstance(subject, Orbit):
        period = follow(subject)
        return Motion(period, subject, period.time)
    if not subject.steps:
        raise BadRequest(
            f"`subject` must move at least a step, it ended as {subject.status} at once: choose "
            "another start"
        )
    return Motion(subject, None, float(subject.times[-1]))
