"""From a guess to an orbit with its verdict: the shortest arc, both starts, every check.

Two moments of an orbit's period are fixed by reversing symmetries, up to its own symmetries: the
start and the end of its shortest arc between start sets.  So an orbit has at most two starts, and
the shortest arc, a half to a twelfth of the period, is also the best conditioned way to its digits.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from orbitsearch import flow
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Orbit, Solution, Start, Status, Verdict
from orbitsearch.shoot import REASONS, Shots, shoot
from orbitsearch.starts import CONDITIONS, StartSet, period_multiple, set_of, start_set
from orbitsearch.verify import verify

__all__ = ["Arc", "Refinement", "complete", "make_arc", "refine", "verify_as_given"]

Array = NDArray[np.float64]

# An event whose residuals are below this may be an earlier end of the arc; Newton then decides.
NEARLY_FIXED = 1e-3
# How far Newton may move a start that is already refined, and still have found the same orbit.
SAME_START = 1e-7
# Share of the period within which an arc's end may lie from where the guess puts it.
TIMING = 0.03
# A guess counts as answered by another orbit when a parameter or the period moved by more.
ELSEWHERE = 1e-3
ELSEWHERE_PERIOD = 1e-2


@dataclass(frozen=True)
class Arc:
    """A refined arc: from the start (p, q) of a set over `time` to the end condition `kind`."""

    p: float
    q: float
    time: float
    kind: int
    solution: Solution

    def period(self, starts: StartSet) -> float:
        """Period of the orbit that the arc generates."""
        return period_multiple(starts.own, CONDITIONS[self.kind]) * self.time


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
    def status(self) -> Status:
        """Status of the verdict, or of the solver when it found nothing."""
        return self.solution.status if self.orbit is None else self.orbit.status


def make_arc(shots: Shots, i: int, kind: int) -> Arc:
    """Arc number i of a batch of shots with end condition `kind`."""
    scale = max(abs(float(shots.p[i])), abs(float(shots.q[i])))
    error = max(float(shots.error[i]), np.finfo(float).eps * scale)
    solution = Solution(
        status=shots.status[i],
        reason=REASONS[shots.status[i]],
        condition=CONDITIONS[kind].label,
        residual=float(shots.residual[i]),
        iterations=int(shots.iterations[i]),
        steps=int(shots.steps[i]),
        digits=float(-np.log10(error / scale)) if np.isfinite(error) else 0.0,
    )
    return Arc(float(shots.p[i]), float(shots.q[i]), float(shots.time[i]), kind, solution)


def _shoot(
    starts: StartSet, guesses: list[tuple[int, float, float, float]], reach: float
) -> list[Arc]:
    """Arcs from guesses (kind, p, q, time), whatever their status."""
    if not guesses:
        return []
    kinds, p, q, time = (np.array(column) for column in zip(*guesses, strict=True))
    shots = shoot(starts, kinds.astype(np.int64), p, q, time, reach=reach)
    return [make_arc(shots, i, int(kinds[i])) for i in range(len(guesses))]


def _ends(events: flow.Events, before: float) -> list[tuple[float, int, float]]:
    """(time, kind, largest residual) of every event that a condition is looked for at."""
    found = []
    for condition in CONDITIONS.values():
        mine = (events.functions == condition.event) & (events.times < before)
        residuals = np.abs(condition.residuals(events.states[mine])).max(axis=-1, initial=0.0)
        found += [
            (float(t), condition.kind, float(r))
            for t, r in zip(events.times[mine], residuals, strict=True)
        ]
    return found


def _shortest(starts: StartSet, arc: Arc) -> Arc:
    """The shortest arc of the same orbit from the same start: itself, or one that ends earlier."""
    x = starts.states(np.array([arc.p]), np.array([arc.q]))[0]
    trajectory = flow.track(x, arc.time)
    if trajectory.status is not Status.CONVERGED:
        return arc
    earlier = [
        (kind, arc.p, arc.q, time)
        for time, kind, residual in _ends(trajectory.events, arc.time * (1 - 1e-6))
        if residual < NEARLY_FIXED
    ]
    better = [
        other
        for other in _shoot(starts, earlier, reach=SAME_START)
        if other.solution.status is Status.CONVERGED and other.time < arc.time * (1 - 1e-6)
    ]
    return min(better, key=lambda other: other.time, default=arc)


def _other_start(starts: StartSet, arc: Arc) -> Start | None:
    """The start at the far end of a shortest arc, refined from there in its own set."""
    end = CONDITIONS[arc.kind]
    there = set_of(end)
    x = starts.states(np.array([arc.p]), np.array([arc.q]))
    last = flow.propagate(x, arc.time).states[0]
    p, q, unit = there.parameters_of(last, end.body)
    # Seen from there the arc runs back to the condition it came from; standard form may have
    # exchanged the labels, so each body of that set is tried.
    back = [
        (condition.kind, p, q, arc.time / unit**1.5)
        for condition in set_of(starts.own).conditions()
    ]
    tried = [
        other
        for other in _shoot(there, back, reach=1e-5)
        if other.solution.status is Status.CONVERGED
    ]
    if not tried:
        return None
    best = min(tried, key=lambda other: max(abs(other.p - p), abs(other.q - q)))
    return Start.from_floats(there.name, best.p, best.q, best.period(there))


def complete(starts: StartSet, arc: Arc) -> Orbit | Verdict:
    """Everything about the orbit that a converged arc generates, with its verdict.

    Returns
    -------
    Orbit
        Refined over its shortest arc, with both its starts.
    Verdict
        When it cannot be followed over its period.
    """
    shortest = _shortest(starts, arc)
    found = verify(starts, shortest.p, shortest.q, shortest.time, shortest.kind)
    if isinstance(found, Verdict):
        return found
    other = _other_start(starts, shortest)
    listed = (found.start,) if other is None else _distinct(found.start, other)
    solution = replace(
        shortest.solution,
        iterations=arc.solution.iterations + shortest.solution.iterations * (shortest is not arc),
        moved=arc.solution.moved,
        period_moved=arc.solution.period_moved,
    )
    return replace(found, starts=listed, solution=solution)


def _distinct(first: Start, other: Start) -> tuple[Start, ...]:
    """Both starts, or one where the orbit comes back to the same standard form."""
    same = first.kind == other.kind and max(abs(first.p - other.p), abs(first.q - other.q)) < 1e-6
    return (first,) if same else (first, other)


def _check_guess(starts: StartSet, p: float, q: float, period: float) -> None:
    names = (*starts.letters, "period")
    for name, value in zip(names, (p, q, period), strict=True):
        if not np.isfinite(value):
            raise BadRequest(f"`{name}` must be a finite number: {value}")
    if period <= 0:
        raise BadRequest(
            f"`period` must be positive: {period}; give the period at the start's scale"
        )
    at = np.array([p]), np.array([q])
    if not starts.inside(*at)[0]:
        raise BadRequest(
            f"`{starts.letters[0]}`, `{starts.letters[1]}` = {p}, {q} lie outside the domain of"
            f" {starts.name} starts; its standard form is described by `orbitsearch starts`"
        )
    energy = float(starts.energies(*at)[0])
    if energy >= 0:
        raise BadRequest(
            f"`{starts.letters[0]}`, `{starts.letters[1]}` = {p}, {q} must be bound, E < 0:"
            f" E = {energy:.6g}; choose smaller velocities"
        )


def refine(start: str, p: float, q: float, period: float, *, reach: float = 0.05) -> Refinement:
    """Refine a guess to an orbit at full double accuracy, verified.

    Parameters
    ----------
    start : str
        Name of the start set.
    p, q : float
        Guess of its two parameters; five digits of a published table are typical.
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
    _check_guess(starts, p, q, period)
    x = starts.states(np.array([p]), np.array([q]))[0]
    trajectory = flow.track(x, 0.5 * period * (1 + TIMING))
    guesses = [(starts.own.kind, p, q, 0.5 * period)]
    for time, kind, _ in _ends(trajectory.events, np.inf):
        multiple = period_multiple(starts.own, CONDITIONS[kind])
        if abs(multiple * time / period - 1.0) < TIMING:
            guesses.append((kind, p, q, time))
    arcs = [_moved(starts, arc, p, q, period) for arc in _shoot(starts, guesses, reach=reach)]
    good = [arc for arc in arcs if arc.solution.status is Status.CONVERGED]
    if not good:
        solution = arcs[0].solution
        return Refinement(solution, None, False, f"no orbit found: {solution.reason}")
    arc = min(good, key=lambda a: _distance(a.solution))
    orbit = complete(starts, arc)
    if isinstance(orbit, Verdict):
        solution = replace(arc.solution, status=orbit.status, reason=orbit.reason)
        return Refinement(solution, None, False, f"no orbit found: {orbit.reason}")
    solution = _moved_to(orbit, p, q, period)
    return _answer(replace(orbit, solution=solution), solution)


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
    _check_guess(starts, p, q, period)
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


def _answer(orbit: Orbit, solution: Solution) -> Refinement:
    """Put in words where the guess led."""
    elsewhere = solution.moved > ELSEWHERE or abs(solution.period_moved) > ELSEWHERE_PERIOD
    times = 1.0 / (1.0 + solution.period_moved)
    if solution.moved <= ELSEWHERE and round(times) > 1 and abs(times - round(times)) < 0.05:
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
    return Refinement(solution, orbit, elsewhere, message)
