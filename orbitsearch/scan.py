"""From a grid of starts to candidates: residuals indexed by events, zeros between neighbours.

Every start of a tile is integrated and its events are recorded.  The n-th event of a kind depends
smoothly on the start wherever none is born or lost, so in a triangle of neighbouring starts its two
residuals are nearly linear: if zero lies inside the triangle of the residuals, it has a preimage
between the starts, and that is a candidate.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np
from numpy.typing import NDArray

from orbitsearch import _kernels, bodies, flow
from orbitsearch.starts import CONDITIONS, StartSet, period_multiple

__all__ = ["Candidates", "Outcomes", "Scan", "candidates", "scan"]

Array = NDArray[np.float64]
Integers = NDArray[np.int64]

NEAREST = 1e-5
"""Closest approach, over the size of the start, at which a scan gives a start up."""

# Events kept for a start: at least, and per unit of T*.  The densest arcs of the four default
# windows have 2.4 a unit of T*; a start with more than its room ends with status BUDGET.
CAPACITY = 500
CAPACITY_RATE = 12
# Neighbouring events correspond when their scaled times differ by less than this share.
SAME_TIME = 0.3
# How far outside the triangle (in barycentric units) a zero may lie: the residuals are not linear.
SLACK = 1.0
# An event before this scaled time belongs to the start itself.
TOO_EARLY = 1e-3
# Kinds of events at which the three bodies are in line, one for each body in the middle.  Kind 8 is
# a second look at the same alignments.
ALIGNMENTS = (1, 2, 3)


@dataclass(frozen=True)
class Scan:
    """Events of a rectangular grid of starts.

    Attributes
    ----------
    p, q : ndarray, shape (n, m)
    valid : ndarray of bool, shape (n, m)
        Starts that were integrated: inside the domain, and bound (E < 0).
    status : ndarray of int, shape (n, m)
        Keys of `orbitsearch.flow.STATUS`; -1 where not valid.
    lifetime : ndarray, shape (n, m)
        Scaled time |E|^(3/2) t followed: half the scaled period for a start that stayed together,
        the end of the last step for one that did not; NaN where not valid.
    alignments : ndarray of int, shape (n, m)
        How often the three bodies were in line in that time, not counting the start itself; -1
        where not valid.
    nearest : ndarray, shape (n, m)
        Least distance of two bodies over the size of the start, seen at the start and at the ends
        of steps; NaN where not valid.  Steps follow the pace of the closest pair: measured, it is
        up to 0.3 % above the true least distance.  The last step may end after the lifetime.
    steps : int
    tables : dict
        For each kind of event an array of shape (n*m, k, 3): scaled time and two residuals of the
        k-th event of that kind, NaN after the last.
    """

    p: Array
    q: Array
    valid: NDArray[np.bool_]
    status: Integers
    lifetime: Array
    alignments: Integers
    nearest: Array
    steps: int
    tables: dict[int, Array]


# Compared by identity: arrays have no single answer to ==.
@dataclass(frozen=True, eq=False)
class Outcomes:
    """What became of the starts of a part of a grid, in few bytes.

    Attributes
    ----------
    rows, columns : tuple of int
        Half-open ranges of indices in the whole grid, along its first and second parameter.
    status : ndarray of int8
        As in `Scan`, like the others of shape (rows[1] - rows[0], columns[1] - columns[0]).
    lifetime : ndarray of float32
    alignments : ndarray of int16
    nearest : ndarray of float32
    """

    rows: tuple[int, int]
    columns: tuple[int, int]
    status: NDArray[np.int8]
    lifetime: NDArray[np.float32]
    alignments: NDArray[np.int16]
    nearest: NDArray[np.float32]

    @classmethod
    def of(cls, seen: Scan, rows: tuple[int, int], columns: tuple[int, int]) -> Outcomes:
        """The outcomes of a scan, which are those of these rows and columns of the whole grid."""
        return cls(
            rows, columns,
            seen.status.astype(np.int8), seen.lifetime.astype(np.float32),
            seen.alignments.astype(np.int16), seen.nearest.astype(np.float32),
        )  # fmt: skip


@dataclass(frozen=True)
class Candidates:
    """Guesses for the solver, each an arc of that time from (p, q) to the condition `kind`."""

    p: Array = field(default_factory=lambda: np.empty(0))
    q: Array = field(default_factory=lambda: np.empty(0))
    time: Array = field(default_factory=lambda: np.empty(0))
    kind: Integers = field(default_factory=lambda: np.empty(0, np.int64))

    def __len__(self) -> int:
        return len(self.p)


def _tables(
    counts: Integers, kinds: Integers, times: Array, first: Array, second: Array
) -> dict[int, Array]:
    """Events sorted by kind: arrays of shape (starts, k, 3) padded with NaN."""
    tables = {}
    seen = np.arange(kinds.shape[1])[None, :] < counts[:, None]
    for kind in CONDITIONS:
        mine = seen & (kinds == kind)
        number = np.cumsum(mine, axis=1) - 1
        table = np.full((len(counts), int(mine.sum(axis=1).max(initial=0)), 3), np.nan)
        start, column = np.nonzero(mine)
        place = (start, number[start, column])
        for channel, values in enumerate((times, first, second)):
            table[(*place, np.full(len(start), channel))] = values[start, column]
        tables[kind] = table
    return tables


def scan(starts: StartSet, p: Array, q: Array, scaled_period: float) -> Scan:
    """Integrate a grid of starts over half the scaled period and record their events.

    Parameters
    ----------
    starts : StartSet
    p, q : array, shape (n,) and (m,)
        Values of the two parameters; the grid is their product.
    scaled_period : float
        Bound on T* = T |E|^(3/2) of the orbits looked for.

    Returns
    -------
    Scan
    """
    pp, qq = np.meshgrid(p, q, indexing="ij")
    flat_p, flat_q = pp.ravel(), qq.ravel()
    energy = starts.energies(flat_p, flat_q)
    valid = starts.inside(flat_p, flat_q) & (energy < 0)
    index = np.flatnonzero(valid)
    x = starts.states(flat_p[index], flat_q[index])
    size = bodies.size(x)
    rate = np.abs(energy[index]) ** 1.5
    n = len(index)
    codes, steps, counts = (np.zeros(n, np.int64) for _ in range(3))
    capacity = max(CAPACITY, int(CAPACITY_RATE * scaled_period))
    kinds = np.zeros((n, capacity), np.int64)
    # Zeros, not what was in memory before: what no event fills is multiplied along with the rest.
    when, first, second = (np.zeros((n, capacity)) for _ in range(3))
    # The kernel replaces both: by the time reached, by the least distance seen.
    time, nearest = 0.5 * scaled_period / rate, NEAREST * size
    _kernels.scan(
        _kernels.workspace(), x, time, nearest, flow.MAX_STEPS, codes, steps, counts,
        kinds, when, first, second,
    )  # fmt: skip
    width = int(counts.max(initial=0))
    tables = {}
    for kind, table in _tables(
        counts, kinds[:, :width], when[:, :width] * rate[:, None],
        first[:, :width], second[:, :width],
    ).items():  # fmt: skip
        full = np.full((len(flat_p), *table.shape[1:]), np.nan)
        full[index] = table
        tables[kind] = full
    # Not rate times time where nothing ended early: rounding would tell equal lifetimes apart.
    lifetime = np.where(codes == _kernels.STATUS_DONE, 0.5 * scaled_period, rate * time)
    in_line = np.concatenate([tables[kind][index, :, 0] for kind in ALIGNMENTS], axis=1)
    alignments = np.isfinite(in_line).sum(axis=1)

    def whole(values: Array | Integers, nothing: float) -> Any:
        """Values of the valid starts spread over the grid."""
        grid = np.full(len(flat_p), nothing, values.dtype)
        grid[index] = values
        return grid.reshape(pp.shape)

    return Scan(
        pp, qq, valid.reshape(pp.shape), whole(codes, -1), whole(lifetime, np.nan),
        whole(alignments, -1), whole(nearest / size, np.nan), int(steps.sum()), tables,
    )  # fmt: skip


def _triangles(n: int, m: int) -> Integers:
    """Corner indices, shape (k, 3), of the two triangles of each cell of an n by m grid."""
    corner = (np.arange(n - 1)[:, None] * m + np.arange(m - 1)[None, :]).ravel()
    lower = np.stack([corner, corner + m, corner + 1], axis=1)
    upper = np.stack([corner + m + 1, corner + 1, corner + m], axis=1)
    return np.concatenate([lower, upper])


def candidates(starts: StartSet, grid: Scan, scaled_period: float) -> Candidates:
    """Zeros of the residuals between neighbouring starts of a scan.

    Only arcs are returned whose orbit would have T* up to `scaled_period`; from one triangle and
    kind each event number gives at most one.
    """
    n, m = grid.p.shape
    corners = _triangles(n, m)
    p, q = grid.p.ravel(), grid.q.ravel()
    found = []
    for kind, table in grid.tables.items():
        multiple = period_multiple(starts.own, CONDITIONS[kind])
        at = table[corners]  # (triangle, corner, event number, channel)
        tau = at[..., 0]
        with np.errstate(invalid="ignore", divide="ignore"):
            middle = tau.mean(axis=1)
            spread = tau.max(axis=1) - tau.min(axis=1)
            alike = (spread < SAME_TIME * middle) & (middle > TOO_EARLY)
            alike &= multiple * middle <= scaled_period * (1 + SAME_TIME)
            triangle, number = np.nonzero(alike)
            r = at[triangle, :, number, 1:]  # (k, corner, residual)
            edge1, edge2 = r[:, 1] - r[:, 0], r[:, 2] - r[:, 0]
            area = edge1[:, 0] * edge2[:, 1] - edge1[:, 1] * edge2[:, 0]
            w1 = (-r[:, 0, 0] * edge2[:, 1] + r[:, 0, 1] * edge2[:, 0]) / area
            w2 = (-edge1[:, 0] * r[:, 0, 1] + edge1[:, 1] * r[:, 0, 0]) / area
            weights = np.stack([1.0 - w1 - w2, w1, w2], axis=1)
            inside = np.all(weights >= -SLACK, axis=1)
        weights, triangle, number = weights[inside], triangle[inside], number[inside]
        guess_p = np.sum(weights * p[corners[triangle]], axis=1)
        guess_q = np.sum(weights * q[corners[triangle]], axis=1)
        scaled = np.sum(weights * tau[triangle, :, number], axis=1)
        energy = starts.energies(guess_p, guess_q)
        good = starts.inside(guess_p, guess_q) & (energy < 0) & (scaled > 0)
        good &= multiple * scaled <= scaled_period
        time = scaled[good] / np.abs(energy[good]) ** 1.5
        found.append((guess_p[good], guess_q[good], time, np.full(int(good.sum()), kind)))
    columns = [np.concatenate(column) for column in zip(*found, strict=True)]
    order = np.argsort(columns[2], kind="stable")
    return Candidates(*(column[order] for column in columns))
