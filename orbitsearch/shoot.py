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

from orbitsearch import _kernels, bodies, flow
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

# Outcomes by number, so that a whole batch can be judged at once.
RUNNING = -1
OUTCOMES = (
    Status.CONVERGED,
    Status.DIVERGED,
    Status.COLLISION,
    Status.ESCAPE,
    Status.DEGENERATE,
    Status.BUDGET,
)
_CONVERGED, _DIVERGED, _COLLISION, _ESCAPE, _DEGENERATE, _BUDGET = range(len(OUTCOMES))

# All conditions in the order of their numbers, stacked for batches with mixed ends.
_NUMBERS = sorted(CONDITIONS)
_FORMS = np.array([CONDITIONS[k].forms for k in _NUMBERS])
_DEGREES = np.array([CONDITIONS[k].degrees for k in _NUMBERS])


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
    rows = np.searchsorted(_NUMBERS, kinds)
    gradient = np.einsum("nmij,nj->nmi", _FORMS[rows], x)
    scale = bodies.size(x)[:, None] ** _DEGREES[rows]
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


class _Batch:
    """Guesses on their way: where each stands, and how it ended if it did."""

    def __init__(self, starts: StartSet, kinds: Integers, p: Array, q: Array, time: Array) -> None:
        n = len(p)
        self.starts = starts
        self.kinds = kinds
        self.at = np.array([p, q], dtype=np.float64)
        self.guess = self.at.copy()
        self.time = np.array(time, dtype=np.float64)
        self.status = np.full(n, RUNNING, dtype=np.int64)
        self.residual = np.full(n, np.inf)
        self.error = np.full(n, np.inf)
        self.iterations, self.steps, self.stalled = (np.zeros(n, np.int64) for _ in range(3))

    @property
    def active(self) -> Integers:
        """Indices of the guesses that have not ended."""
        return np.flatnonzero(self.status == RUNNING)

    def iterate(self, reach: float, patience: int) -> None:
        """One Newton iteration of every active guess."""
        i = self.active
        p, q = self.at[:, i]
        f, jacobian, moved = _residuals_and_jacobian(self.starts, self.kinds[i], p, q, self.time[i])
        delta, singular = _solve(jacobian, f)
        size = np.max(np.abs(delta), axis=1)
        self.iterations[i] += 1
        self.steps[i] += moved.steps
        self.residual[i] = np.max(np.abs(f), axis=1)
        self.stalled[i] = np.where(size < 0.7 * self.error[i], 0, self.stalled[i] + 1)
        self.status[i] = np.select(
            [
                moved.status == _kernels.STATUS_COLLISION,
                moved.status == _kernels.STATUS_BUDGET,
                singular | ~np.isfinite(size),
                (size == 0.0) | ((size < POLISHING) & (size > 0.5 * self.error[i])),
                self.stalled[i] > patience,
            ],
            [_COLLISION, _BUDGET, _DEGENERATE, _CONVERGED, _DIVERGED],
            default=RUNNING,
        )
        going = self.status[i] == RUNNING
        self._correct(i[going], delta[going], size[going], reach)

    def _correct(self, i: Integers, delta: Array, size: Array, reach: float) -> None:
        """Apply corrections, cut to a part of the reach, and end those that leave it."""
        with np.errstate(divide="ignore"):
            largest = np.max(np.abs(delta[:, :2]), axis=1)
            cut = np.minimum(1.0, np.minimum(0.25 * reach / largest, 0.1 / np.abs(delta[:, 2])))
        self.error[i] = np.minimum(self.error[i], size)
        self.at[:, i] += cut * delta[:, :2].T
        self.time[i] *= 1.0 + cut * delta[:, 2]
        p, q = self.at[:, i]
        gone = np.max(np.abs(self.at[:, i] - self.guess[:, i]), axis=0) > reach
        gone |= ~self.starts.inside(p, q)
        gone |= ~(self.starts.energies(p, q) < 0)
        self.status[i[gone]] = _ESCAPE

    def shots(self) -> Shots:
        """Outcome; what is still active has used up its iterations."""
        status = [OUTCOMES[code] if code != RUNNING else Status.BUDGET for code in self.status]
        p, q = self.at
        return Shots(
            p, q, self.time, status, self.residual, self.error, self.iterations, self.steps
        )


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
    batch = _Batch(starts, kinds, p, q, time)
    for _ in range(max_iterations):
        if not len(batch.active):
            break
        batch.iterate(reach, patience)
    return batch.shots()
