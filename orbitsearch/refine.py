"""From a guess to an orbit with its verdict, and in words where the guess led."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies, flow
from orbitsearch.complete import Arc, complete, ends, shoot_arcs
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Orbit, Solution, Status, Verdict
from orbitsearch.starts import CONDITIONS, StartSet, period_multiple, start_set
from orbitsearch.verify import verify

__all__ = ["Refinement", "refine", "verify_as_given"]

Array = NDArray[np.float64]

# Share of the period within which an arc's end may lie from where the guess puts it.
TIMING = 0.03
# A guess counts as answered by another orbit when a parameter or the period moved by more.
ELSEWHERE = 1e-3
ELSEWHERE_PERIOD = 1e-2
# Longest T* that is worth a try in double precision.
LONGEST = 10_000.0


@dataclass(frozen=True)
class Refinement:
    """Answer to a guess.

    Attributes
    ----------
    solution : Solution
        How Newton ended and how far it moved.
    orbit : Orbit or None
        None when there is no periodic orbit to show.
    elsewhere : bool
        Whether the orbit found is plainly another one than asked for.
    message : str
        The outcome in one sentence.
    """

    solution: Solution
    orbit: Orbit | None
    elsewhere: bool
    message: str

    @property
    def asked_for(self) -> Orbit | None:
        """The orbit, when it is the one asked for and may be filed: verified or not confirmed."""
        if self.orbit is None or self.elsewhere or self.orbit.status is Status.REJECTED:
            return None
        return self.orbit

    @property
    def status(self) -> Status:
        """Status of the verdict, or of the solver when it found nothing."""
        return self.solution.status if self.orbit is None else self.orbit.status


def _standard(
    starts: StartSet, p: float, q: float, period: float
) -> tuple[float, float, float, str]:
    """The guess in standard form, with a note when that is not how it was given.

    Papers choose signs and labels in their own ways; only what has no standard form is refused.
    """
    names = (*starts.letters, "period")
    for name, value in zip(names, (p, q, period), strict=True):
        if not np.isfinite(value):
            raise BadRequest(f"`{name}` must be a finite number: {value}")
    if period <= 0:
        raise BadRequest(
            f"`period` must be positive: {period}; give the period at the start's scale"
        )
    given_period = period
    given = f"`{starts.letters[0]}`, `{starts.letters[1]}` = {p}, {q}"
    with np.errstate(all="ignore"):
        x = starts.states(np.array([p]), np.array([q]))[0]
        energy = float(bodies.energy(x))
        standard = bool(starts.inside(np.array([p]), np.array([q]))[0])
        if not standard:
            p, q, unit = starts.parameters_of(x, starts.own.body)
            period /= unit**1.5
    if not (np.isfinite(period) and starts.inside(np.array([p]), np.array([q]))[0]):
        raise BadRequest(
            f"{given} lie outside the domain of {starts.name} starts; its standard form is"
            " described by `orbitsearch starts`"
        )
    if not energy < 0:
        raise BadRequest(
            f"{given} must be bound, E < 0: E = {energy:.6g}; choose smaller velocities"
        )
    scaled = given_period * abs(energy) ** 1.5
    if not scaled <= LONGEST:
        raise BadRequest(
            f"`period` must be at most T* = {LONGEST:g}: {given_period:g} is T* = {scaled:.6g};"
            " give one turn round the orbit"
        )
    note = "" if standard else f"in standard form {p:.10g} {q:.10g}, T = {period:.10g}; "
    return p, q, period, note


@np.errstate(all="ignore")
def refine(start: str, p: float, q: float, period: float, *, reach: float = 0.05) -> Refinement:
    """Refine a guess to an orbit at full double accuracy, verified.

    Parameters
    ----------
    start : str
        Name of the start set.
    p, q : float
        Guess of its two parameters; five digits of a published table are typical.  Signs or labels
        other than those of standard form are brought to it.
    period : float
        Guess of the period, good to a few parts in a hundred.
    reach : float
        A parameter may move no farther than this.

    Returns
    -------
    Refinement

    Raises
    ------
    BadRequest
        For numbers that are not finite, a period that is not positive, an unknown or unbound start.
    """
    starts = start_set(start)
    p, q, period, note = _standard(starts, p, q, period)
    x = starts.states(np.array([p]), np.array([q]))[0]
    trajectory = flow.track(x, 0.5 * period * (1 + TIMING))
    guesses = [(starts.own.kind, p, q, 0.5 * period)]
    for time, kind, _ in ends(trajectory.events, np.inf):
        multiple = period_multiple(starts.own, CONDITIONS[kind])
        if abs(multiple * time / period - 1.0) < TIMING:
            guesses.append((kind, p, q, time))
    arcs = [_moved(starts, arc, p, q, period) for arc in shoot_arcs(starts, guesses, reach=reach)]
    good = [arc for arc in arcs if arc.solution.status is Status.CONVERGED]
    if not good:
        solution = arcs[0].solution
        return Refinement(solution, None, False, f"{note}no orbit found: {solution.reason}")
    arc = min(good, key=lambda a: _distance(a.solution))
    orbit = complete(starts, arc)
    if isinstance(orbit, Verdict):
        solution = replace(arc.solution, status=orbit.status, reason=orbit.reason)
        return Refinement(solution, None, False, f"{note}no orbit found: {orbit.reason}")
    solution = _moved_to(orbit, p, q, period)
    return _answer(replace(orbit, solution=solution), solution, note)


@np.errstate(all="ignore")
def verify_as_given(start: str, p: float, q: float, period: float) -> Orbit | Verdict:
    """Verdict on a start and its period exactly as given, without refining them.

    Parameters and errors are those of `refine`.

    Returns
    -------
    Orbit
        With its verdict; published rows of few digits fail on closure.
    Verdict
        When the motion cannot be followed over the period.
    """
    starts = start_set(start)
    p, q, period, _ = _standard(starts, p, q, period)
    return verify(starts, p, q, 0.5 * period, starts.own.kind)


def _distance(solution: Solution) -> float:
    return max(solution.moved, abs(solution.period_moved))


def _moved(starts: StartSet, arc: Arc, p: float, q: float, period: float) -> Arc:
    moved = max(abs(arc.p - p), abs(arc.q - q))
    change = arc.period(starts) / period - 1.0
    return replace(arc, solution=replace(arc.solution, moved=moved, period_moved=change))


def _moved_to(orbit: Orbit, p: float, q: float, period: float) -> Solution:
    moved = max(abs(orbit.start.p - p), abs(orbit.start.q - q))
    assert orbit.solution is not None
    return replace(orbit.solution, moved=moved, period_moved=orbit.period / period - 1.0)


def _answer(orbit: Orbit, solution: Solution, note: str) -> Refinement:
    """Put in words where the guess led."""
    elsewhere = solution.moved > ELSEWHERE or abs(solution.period_moved) > ELSEWHERE_PERIOD
    times = 1.0 / (1.0 + solution.period_moved)
    if solution.moved <= ELSEWHERE and round(times) > 1 and abs(times - round(times)) < 0.05:
        elsewhere = False
        message = f"the least period is 1/{round(times)} of the period given"
    elif elsewhere:
        message = (
            f"landed on a different orbit than asked: a parameter moved by {solution.moved:.3g},"
            f" the period by {solution.period_moved:+.3%}"
        )
    else:
        message = (
            f"parameters moved by at most {solution.moved:.3g}, the period by"
            f" {solution.period_moved:+.2g} of itself"
        )
    if orbit.status is not Status.VERIFIED:
        message = f"{orbit.status}: {orbit.verdict.reason}; {message}"
    return Refinement(solution, orbit, elsewhere, note + message)
