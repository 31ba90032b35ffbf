"""From a converged arc to the complete orbit: the shortest arc, the verdict, both starts.

Two moments of an orbit's period are fixed by reversing symmetries, up to its own symmetries: the
start and the end of its shortest arc between start sets.  So an orbit has at most two starts, and
the shortest arc, a half to a twelfth of the period, is also the best conditioned way to its digits.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from orbitsearch import flow
from orbitsearch.identity import START_APART, START_EQUAL, start_distance
from orbitsearch.orbit import Orbit, Solution, Start, Status, Verdict
from orbitsearch.shoot import REASONS, Shots, shoot
from orbitsearch.starts import CONDITIONS, StartSet, period_multiple, set_of
from orbitsearch.verify import verify

__all__ = ["Arc", "complete", "ends", "make_arc", "shoot_arcs"]

Array = NDArray[np.float64]

# An event whose residuals are below this may be an earlier end of the arc; Newton then decides.
NEARLY_FIXED = 1e-3


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


def shoot_arcs(
    starts: StartSet, guesses: list[tuple[int, float, float, float]], reach: float
) -> list[Arc]:
    """Arcs from guesses (kind, p, q, time), whatever their status."""
    if not guesses:
        return []
    kinds, p, q, time = (np.array(column) for column in zip(*guesses, strict=True))
    shots = shoot(starts, kinds.astype(np.int64), p, q, time, reach=reach)
    return [make_arc(shots, i, int(kinds[i])) for i in range(len(guesses))]


def ends(events: flow.Events, before: float) -> list[tuple[float, int, float]]:
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
        for time, kind, residual in ends(trajectory.events, arc.time * (1 - 1e-6))
        if residual < NEARLY_FIXED
    ]
    better = [
        other
        for other in shoot_arcs(starts, earlier, reach=START_EQUAL)
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
        for other in shoot_arcs(there, back, reach=1e-5)
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
    return (first,) if start_distance(first, other) < START_APART else (first, other)
