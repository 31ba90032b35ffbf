"""From a start alone to an orbit: no period is given, so every nearly fixed state is tried."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies, flow
from orbitsearch.complete import Arc, ends, shoot_arcs
from orbitsearch.errors import BadRequest
from orbitsearch.orbit import Solution, Status
from orbitsearch.refine import Refinement, refine
from orbitsearch.starts import CONDITIONS, StartSet, period_multiple, start_set

__all__ = ["find_near"]

# Nearly fixed states that are tried: those with the least residuals, in a dozen vectors of lanes.
TRIED = 96


@np.errstate(all="ignore")
def find_near(
    start: str, p: float, q: float, scaled_period: float, *, reach: float = 0.02
) -> Refinement:
    """The orbit nearest to a start, whatever its period.

    Parameters
    ----------
    start : str
        Name of the start set.
    p, q : float
        Parameters in its domain.
    scaled_period : float
        Bound on T* of the orbits that are tried.
    reach : float
        A parameter may move no farther than this.

    Returns
    -------
    Refinement
        Of the start that moved least; `Refinement.solution` says how far.

    Raises
    ------
    BadRequest
        For a start outside the domain of its set or not bound, or a bound that is not positive.
    """
    starts = start_set(start)
    x = _state(starts, p, q)
    if not 0 < scaled_period < np.inf:
        raise BadRequest(
            f"`scaled_period` must be a positive number, got {scaled_period}: 40 is a beginning"
        )
    energy = float(bodies.energy(x))
    rate = abs(energy) ** 1.5
    trajectory = flow.track(x, 0.5 * scaled_period / rate)
    nearly = sorted(
        (residual, time, kind)
        for time, kind, residual in ends(trajectory.events, np.inf)
        if np.isfinite(residual) and _scaled(starts, kind, time * rate) <= scaled_period
    )
    guesses = [(kind, p, q, time) for _, time, kind in nearly[:TRIED]]
    arcs = shoot_arcs(starts, guesses, reach=reach)
    good = [arc for arc in arcs if arc.solution.status is Status.CONVERGED]
    if not good:
        reason = f"no orbit of T* up to {scaled_period:g} starts within {reach:g} of {p:g}, {q:g}"
        return Refinement(Solution(Status.DIVERGED, reason), None, False, reason)
    nearest = min(good, key=lambda arc: _moved(arc, p, q))
    moved = _moved(nearest, p, q)
    answer = refine(start, nearest.p, nearest.q, nearest.period(starts))
    solution = replace(answer.solution, moved=moved)
    message = (
        f"{len(good)} of {len(guesses)} nearly closed arcs close; the nearest moved by {moved:.3g}"
    )
    if answer.asked_for is None or answer.status is not Status.VERIFIED:
        message = f"{answer.message}; {message}"
    return replace(answer, solution=solution, message=message)


def _state(starts: StartSet, p: float, q: float) -> NDArray[np.float64]:
    """Standard state of a start that can be on an orbit."""
    inside = bool(starts.inside(np.array([p]), np.array([q]))[0])
    if not (inside and starts.energies(np.array([p]), np.array([q]))[0] < 0):
        raise BadRequest(
            f"`{starts.letters[0]}`, `{starts.letters[1]}` must be a bound start of the"
            f" {starts.name} set, got {p:g}, {q:g}: choose one inside the window"
        )
    return np.asarray(starts.states(np.array([p]), np.array([q]))[0])


def _scaled(starts: StartSet, kind: int, scaled_time: float) -> float:
    """Scale-free period of the orbit that an arc would generate."""
    return period_multiple(starts.own, CONDITIONS[kind]) * scaled_time


def _moved(arc: Arc, p: float, q: float) -> float:
    return max(abs(arc.p - p), abs(arc.q - q))
