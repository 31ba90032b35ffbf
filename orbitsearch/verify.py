"""The verdict: every check a periodic orbit must pass, with its number and its bound.

Lengths are measured in 1/|E| and velocities in |E|^(1/2), so that nothing depends on the scale of
the start.  A check fails when its value passes the bound although double precision could have held
it; where the orbit is so unstable that rounding alone may pass the bound, the check stays open and
the record says "not confirmed".
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies, flow, stability
from orbitsearch.classify import Classification, classify
from orbitsearch.errors import BadRequest
from orbitsearch.independent import by_bodies, by_sides
from orbitsearch.orbit import Check, Orbit, Start, Status, Verdict
from orbitsearch.starts import CONDITIONS, Condition, StartSet, period_multiple

__all__ = ["BOUNDS", "verify"]

Array = NDArray[np.float64]

BOUNDS = {
    "closure": 1e-7,
    "independent closure": 1e-6,
    "closure in sides": 1e-7,
    "least period": 1e-5,
    "energy drift": 1e-10,
    "angular momentum": 1e-10,
    "least separation": 1e-6,
    "multipliers": 1e-5,
    "windings": 1e-3,
}
"""Bound of each check; of least period and least separation a lower, of the others an upper one."""

# Rounding of the start and of the time of one period, over the norm of the monodromy matrix.
ROUNDING = 1e-15
# Stands for the outcome of an integration that gave up.
LOST = 1e99
# A value up to this many times what rounding was seen to do may be due to it.
BENEFIT = 30.0
# Directions in which the start is turned to see what rounding does to the motion: the lanes of one
# vector, so they cost nothing.
_DIRECTIONS = np.arange(8.0)


@dataclass(frozen=True)
class _Motion:
    """The orbit integrated once: over a period with its monodromy, over half with every step."""

    begin: Array
    end: Array
    period: float
    energy: float
    rotation: float
    noise: float
    half: flow.Trajectory


def _decide(name: str, value: float, noise: float, note: str = "") -> Check:
    """Upper bound: passed, failed, or open when rounding alone may have made the value."""
    bound = BOUNDS[name]
    if value <= bound:
        return Check(name, value, bound, True, note)
    if value <= BENEFIT * noise:
        return Check(name, value, bound, None, "too unstable for double precision to decide")
    return Check(name, value, bound, False, note)


def _second_opinions(motion: _Motion) -> tuple[Check, Check]:
    """Closure by DOP853 in two sets of coordinates; the noise is how much they differ."""
    x, period, energy = motion.begin, motion.period, motion.energy
    inertial, sides = (
        bodies.turned(integrate(x, period), -motion.rotation) for integrate in (by_bodies, by_sides)
    )
    # An integration that gave up says nothing: a closure, and a noise, beyond all bounds.
    noise, *closures = (
        float(np.nan_to_num(bodies.distance(a, b, energy), nan=LOST))
        for a, b in ((inertial, sides), (x, inertial), (x, sides))
    )
    return (
        _decide("independent closure", closures[0], noise, "scipy DOP853, inertial frame"),
        _decide("closure in sides", closures[1], noise, "scipy DOP853, sides"),
    )


def _least_period(motion: _Motion, closure: float) -> Check:
    """Nearest the orbit comes to its start, up to a rotation, after T/n for every possible n."""
    bound = BOUNDS["least period"]
    # Each turn has two alignments at least, unless the orbit has none at all.
    alignments = int(np.count_nonzero(motion.half.events.functions == 0))
    n = np.arange(2, max(alignments + 1, 2) + 1)
    best, which = np.inf, 0
    for k, state in zip(n, motion.half.states(motion.period / n), strict=True):
        turned = bodies.turned(state, -bodies.turn_between(motion.begin, state))
        distance = bodies.distance(motion.begin, turned, motion.energy)
        if distance < best:
            best, which = distance, int(k)
    note = f"nearest at T/{which}"
    if best > bound and best <= 10 * closure:
        # It comes as near before the period as it does after it.
        return Check("least period", best, bound, None, note)
    return Check("least period", best, bound, best > bound, note)


def _least_separation(motion: _Motion) -> float:
    """Least distance of two bodies along the orbit, in units of 1/|E|."""
    events = motion.half.events
    stationary = events.states[events.functions >= 5]
    states = np.vstack([stationary, motion.begin, motion.half.last])
    sides = states[:, :6].reshape(-1, 3, 2)
    return float(np.linalg.norm(sides, axis=2).min() * abs(motion.energy))


def _integrate(x: Array, period: float, relative: bool) -> _Motion | Verdict:
    """The motion and the noise in it, or why it cannot be followed."""
    half = flow.track(x, 0.5 * period)
    whole = flow.propagate(np.array([bodies.turned(x, a) for a in _DIRECTIONS]), period)
    for status in (half.status, *(flow.STATUS[int(code)] for code in whole.status)):
        if status is not Status.CONVERGED:
            return Verdict(Status.REJECTED, f"cannot be followed over its period: {status}")
    energy = float(bodies.energy(x))
    ends = [bodies.turned(end, -a) for end, a in zip(whole.states, _DIRECTIONS, strict=True)]
    noise = max(bodies.distance(ends[0], end, energy) for end in ends[1:])
    rotation = bodies.turn_between(x, ends[0]) if relative else 0.0
    # An axis that comes back to itself to rounding has not turned at all.
    rotation = 0.0 if abs(rotation) < 1e-8 else rotation
    return _Motion(x, ends[0], period, energy, rotation, noise, half)


def verify(starts: StartSet, p: float, q: float, time: float, kind: int) -> Orbit | Verdict:
    """Verdict on one refined arc, with everything that is known of its orbit.

    Parameters
    ----------
    starts : StartSet
    p, q : float
        Parameters of the start.
    time : float
        Time of the arc from the start to the end condition.
    kind : int
        End condition, key of `orbitsearch.starts.CONDITIONS`.

    Returns
    -------
    Orbit
        With `Orbit.status` ``verified``, ``not confirmed`` or ``rejected``.
    Verdict
        When the motion cannot even be followed over the period.

    Notes
    -----
    Checks: closure of all bodies after T in the inertial frame (or after the stated rotation); no
    return after T/n for n up to half the number of alignments; drift of energy and angular
    momentum; closure by scipy's DOP853; least separation; Floquet multipliers by two computations;
    windings by two computations.
    """
    own, stop = starts.own, CONDITIONS[kind]
    period = period_multiple(own, stop) * time
    x = starts.states(np.array([p]), np.array([q]))[0]
    relative = own.reversal.plane == stop.reversal.plane == "mirror"
    motion = _integrate(x, period, relative)
    if isinstance(motion, Verdict):
        return motion
    arc = stability.Arc(x, motion.half.states(np.array([time]))[0], time, own, stop)
    traces, errors = stability.symmetric_traces(arc)
    kind_of, problem = _classify(own, motion)
    checks = _checks(motion, traces, kind_of)
    verdict = _verdict(checks)
    # Only half a period is read: of a motion that does not close, the rest is another one.
    if problem and verdict.status is not Status.REJECTED:
        reason = f"its alignments cannot be read: {problem}"
        return Verdict(Status.REJECTED, reason, checks)
    start = Start.from_floats(starts.name, p, q, period)
    return Orbit(
        start=start,
        energy=motion.energy,
        angular_momentum=float(bodies.angular_momentum(x)),
        rotation=motion.rotation,
        scaled_period=period * abs(motion.energy) ** 1.5,
        closure=verdict.value("closure"),
        least_separation=verdict.value("least separation"),
        syzygies=kind_of.syzygies if kind_of else "",
        cycle=kind_of.cycle if kind_of else "",
        word=kind_of.word if kind_of else "",
        choreography=kind_of is not None and "choreography" in kind_of.symmetry.names,
        braid=kind_of.braid if kind_of else None,
        symmetry=kind_of.symmetry if kind_of else None,
        margins=kind_of.margins if kind_of else None,
        stability=stability.classify(traces, errors),
        verdict=verdict,
        starts=(start,),
    )


def _classify(own: Condition, motion: _Motion) -> tuple[Classification | None, str]:
    """Kind of the orbit, or why it has none."""
    try:
        return classify(own, motion.half, motion.rotation), ""
    except BadRequest as problem:
        return None, str(problem)


def _checks(
    motion: _Motion, traces: tuple[complex, complex], kind_of: Classification | None
) -> tuple[Check, ...]:
    """Every line of the verdict; `traces` are those computed from one arc."""
    x, energy = motion.begin, motion.energy
    direct, blur, growth = stability.direct_traces(x, motion.period, motion.rotation)
    noise = growth * ROUNDING + motion.noise
    closure = bodies.distance(x, bodies.turned(motion.end, -motion.rotation), energy)
    along = motion.half.states(motion.half.times)
    drift = float(np.abs(bodies.energy(along) / energy - 1.0).max())
    momentum = float(np.abs(bodies.angular_momentum(along)).max() * np.sqrt(abs(energy)))
    separation, least = _least_separation(motion), BOUNDS["least separation"]
    difference = stability.trace_difference(traces, direct)
    return (
        _decide("closure", closure, noise),
        *_second_opinions(motion),
        _least_period(motion, closure),
        # Beside a close approach energy is the small difference of two large numbers.
        _decide("energy drift", drift, ROUNDING / separation),
        _decide("angular momentum", momentum, 0.0),
        Check("least separation", separation, least, separation > least),
        _decide("multipliers", difference, blur + growth * noise, "two computations"),
        *([_windings(kind_of, noise)] if kind_of else []),
    )


def _windings(kind_of: Classification, noise: float) -> Check:
    """How far the windings are from integers; infinite where the alignments ask for others."""
    note = "" if kind_of.braid else "not those of the alignments"
    return _decide("windings", kind_of.winding_error, noise, note)


def _verdict(checks: tuple[Check, ...]) -> Verdict:
    failed = [c for c in checks if c.passed is False]
    unsettled = [c.name for c in checks if c.passed is None]
    if failed:
        c = failed[0]
        note = f" ({c.note})" if c.note else ""
        reason = f"{c.name} is {c.value:.3g}{note}, bound {c.bound:.3g}"
        return Verdict(Status.REJECTED, reason, checks)
    if unsettled:
        reason = f"too unstable for double precision to decide: {', '.join(unsettled)}"
        return Verdict(Status.NOT_CONFIRMED, reason, checks)
    return Verdict(Status.VERIFIED, "every check passed", checks)
