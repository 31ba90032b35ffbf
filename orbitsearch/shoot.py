"""Symmetric shooting: Newton's method for starts whose motion meets a start set again.

Unknowns are the two parameters and the time t of the arc, equations the three residuals of the end
condition; the arc is a half, quarter, sixth or twelfth of the period.  The Jacobian comes from the
first variational equations.  Many guesses are worked on at once, eight to a vector of the kernel.

Failing is the usual outcome in a search, so it must be cheap: a guess that leaves its
neighbourhood, or whose residual does not shrink, is given up within a few iterations.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from orbitsearch import bodies, flow
from orbitsearch.orbit import Status
from orbitsearch.starts import CONDITIONS, StartSet

__all__ = ["REASONS", "Shots", "shoot"]

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

REASONS = {
    Status.CONVERGED: "the end condition holds to rounding",
    Status.DIVERGED: "Newton's corrections did not shrink",
    Status.COLLISION: "two bodies came closer than double precision is trusted to pass",
    Status.ESCAPE: "the guess left the neighbourhood it was given or the domain of its start set",
    Status.DEGENERATE: "the end conditions do not determine the start (singular Jacobian)",
    Status.BUDGET: "the iterations or integration steps ran out",
}
"""One sentence for each way a shot can end."""

# A correction below this is polishing: iterate until it stops shrinking, then call it converged.
POLISHING = 1e-9
# Residuals (free of scale) of a converged arc stay below this times the growth along it.
SETTLED = 1e-12


@dataclass(frozen=True)
class Shots:
    """Outcome of n shots.

    Attributes
    ----------
    p, q, time : ndarray, shape (n,)
        Last parameters and arc times.
    status : list of Status
    residual : ndarray, shape (n,)
        Largest residual of the end condition, free of scale.
    error : ndarray, shape (n,)
        Size of the last Newton correction of the parameters: what they are uncertain by.
    iterations : ndarray of int, shape (n,)
    steps : ndarray of int, shape (n,)
        Integration steps.
    """

    p: Array
    q: Array
    time: Array
    status: list[Status]
    residual: Array
    error: Array
    iterations: Integers
    steps: Integers


def _residuals_and_jacobian(
    starts: StartSet, kinds: Integers, p: Array, q: Array, t: Array
) -> tuple[Array, Array, flow.Flow]:
    """Residuals, shape (n, 3), and derivatives by p, q, ln t, shape (n, 3, 3)."""
    moved = flow.propagate(starts.states(p, q), t, starts.tangents(p, q))
    x = moved.states
    forms = np.array([CONDITIONS[k].forms for k in sorted(CONDITIONS)])
    degrees = np.array([CONDITIONS[k].degrees for k in sorted(CONDITIONS)])
    rows = np.searchsorted(sorted(CONDITIONS), kinds)
    gradient = np.einsum("nmij,nj->nmi", forms[rows], x)
    scale = bodies.size(x)[:, None] ** degrees[rows]
    along = (t[:, None] * bodies.flow_direction(x))[:, None, :]
    directions = np.concatenate([moved.tangents, along], axis=1)
    jacobian = np.einsum("nmi,nki->nmk", gradient, directions) / scale[:, :, None]
    residual = 0.5 * np.einsum("nmi,ni->nm", gradient, x) / scale
    return residual, jacobian, moved


def _solve(jacobian: Array, residual: Array) -> tuple[Array, NDArray[np.bool_]]:
    """Newton corrections, shape (n, 3), and which Jacobians are singular to working precision."""
    with np.errstate(all="ignore"):
        # Rows span many orders when an arc is unstable; balanced, the determinant means something.
        weight = np.linalg.norm(jacobian, axis=2)
        balanced = jacobian / weight[:, :, None]
        bad = ~(np.abs(np.linalg.det(balanced)) > 1e-15)
        balanced[bad] = np.eye(3)
        right = np.where(bad[:, None], 0.0, -residual / weight)
        return np.linalg.solve(balanced, right[:, :, None])[:, :, 0], bad


def shoot(
    starts: StartSet,
    kinds: Integers,
    p: Array,
    q: Array,
    time: Array,
    *,
    reach: float = 0.05,
    patience: int = 3,
    max_iterations: int = 25,
) -> Shots:
    """Newton's method from n guesses (p, q, time), each with its own end condition.

    Parameters
    ----------
    starts : StartSet
    kinds : array of int, shape (n,)
        Numbers of the end conditions, keys of `orbitsearch.starts.CONDITIONS`.
    p, q, time : array, shape (n,)
    reach : float
        A guess whose parameters move farther than this is given up (status ESCAPE).
    patience : int
        Iterations in a row that may fail to improve on the smallest correction.
    max_iterations : int

    Returns
    -------
    Shots

    Notes
    -----
    Corrections are cut to a quarter of `reach` and to a tenth of the time.  The iteration ends when
    a correction below 1e-9 no longer halves the one before: what is left is rounding, and its size
    is reported as the error.
    """
    n = len(p)
    p, q, time = (np.array(v, dtype=np.float64) for v in (p, q, time))
    p0, q0 = p.copy(), q.copy()
    status = [Status.BUDGET] * n
    residual = np.full(n, np.inf)
    error = np.full(n, np.inf)
    iterations = np.zeros(n, np.int64)
    steps = np.zeros(n, np.int64)
    stalled = np.zeros(n, np.int64)
    active = np.arange(n)
    for _ in range(max_iterations):
        if not len(active):
            break
        f, jacobian, moved = _residuals_and_jacobian(
            starts, kinds[active], p[active], q[active], time[active]
        )
        iterations[active] += 1
        steps[active] += moved.steps
        delta, singular = _solve(jacobian, f)
        size = np.max(np.abs(delta), axis=1)
        keep = []
        for row, i in enumerate(active):
            ended = flow.STATUS[int(moved.status[row])]
            if ended is not Status.CONVERGED:
                status[i] = ended
                continue
            largest = float(np.max(np.abs(f[row])))
            if singular[row] or not np.isfinite(size[row]):
                status[i] = Status.DEGENERATE
                residual[i] = largest
                continue
            polishing = size[row] < POLISHING
            if polishing and size[row] > 0.5 * error[i]:
                status[i] = Status.CONVERGED
                continue
            stalled[i] = 0 if size[row] < 0.7 * error[i] else stalled[i] + 1
            if stalled[i] > patience:
                status[i] = Status.DIVERGED
                residual[i] = largest
                continue
            cut = min(
                1.0,
                0.25 * reach / max(abs(delta[row, 0]), abs(delta[row, 1]), 1e-300),
                0.1 / max(abs(delta[row, 2]), 1e-300),
            )
            error[i] = min(error[i], size[row])
            residual[i] = largest
            p[i] += cut * delta[row, 0]
            q[i] += cut * delta[row, 1]
            time[i] *= 1.0 + cut * delta[row, 2]
            if size[row] == 0.0:
                status[i] = Status.CONVERGED
                continue
            if max(abs(p[i] - p0[i]), abs(q[i] - q0[i])) > reach:
                status[i] = Status.ESCAPE
                continue
            keep.append(i)
        active = np.array(keep, dtype=np.int64)
        if len(active):
            valid = starts.inside(p[active], q[active]) & (
                starts.energies(p[active], q[active]) < 0
            )
            for i in active[~valid]:
                status[i] = Status.ESCAPE
            active = active[valid]
    return Shots(p, q, time, status, residual, error, iterations, steps)
