"""The search: a window of starts in, a stream of findings out.

The grid is cut into tiles.  A worker scans a tile, finds its candidates and refines them; new arcs
are completed and verified by workers too; this process only recognises repetitions and keeps
order.  Findings come as an iterator of events, so a command, a notebook or a script can show
progress, file what is found, and stop at any event without losing anything.

Results do not depend on the number of workers: tiles and orbits are taken in order, whoever
finishes first.
"""

from __future__ import annotations

import math
from collections import Counter, deque
from collections.abc import Callable, Generator, Iterator
from concurrent.futures import Executor, Future
from dataclasses import asdict, dataclass, field
from typing import Any

import numpy as np

from orbitsearch import flow
from orbitsearch.complete import Arc, complete, make_arc
from orbitsearch.errors import BadRequest
from orbitsearch.identity import START_EQUAL
from orbitsearch.orbit import Orbit, Start, Status, Verdict
from orbitsearch.refine import refine
from orbitsearch.scan import candidates, scan
from orbitsearch.shoot import shoot
from orbitsearch.starts import CONDITIONS, StartSet, start_set
from orbitsearch.workers import check_workers, result_of, worker_pool

__all__ = [
    "Candidate",
    "Event",
    "Finished",
    "Found",
    "Rejected",
    "SearchRequest",
    "TileDone",
    "search",
]

# Cells along the side of a tile: enough candidates to keep all lanes busy, few enough that stopping
# waits for a second or two.
TILE = 25
# A guess may move this many cells; farther away another triangle has found the same orbit.
REACH_CELLS = 8.0
LARGEST_GRID = 50_000_000
LOOK = 512


@dataclass(frozen=True)
class SearchRequest:
    """What to search.

    Attributes
    ----------
    start : str
        Name of the start set.
    window : tuple of float
        (p0, p1, q0, q1), the ranges of its two parameters.
    grid : tuple of int
        Number of starts along each parameter.
    scaled_period : float
        Bound on T* = T |E|^(3/2) of the orbits looked for; arcs reach half of it.

    Raises
    ------
    BadRequest
        When a rule is broken; see the messages.
    """

    start: str
    window: tuple[float, float, float, float]
    grid: tuple[int, int]
    scaled_period: float

    def __post_init__(self) -> None:
        starts = start_set(self.start)
        p0, p1, q0, q1 = self.window
        if not all(math.isfinite(value) for value in self.window):
            raise BadRequest(f"`window` must hold finite numbers: {_numbers(self.window)}")
        for letter, low, high in zip(starts.letters, (p0, q0), (p1, q1), strict=True):
            if not low < high:
                raise BadRequest(
                    f"`window` must go from low to high in {letter}: {low:g} to {high:g};"
                    " exchange the two numbers"
                )
        if min(self.grid) < 2:
            raise BadRequest(f"`grid` must be at least 2 each way: {self.grid[0]} x {self.grid[1]}")
        if self.grid[0] * self.grid[1] > LARGEST_GRID:
            raise BadRequest(
                f"`grid` must not pass {LARGEST_GRID:,} starts: {self.grid[0]} x {self.grid[1]};"
                " search the window in parts"
            )
        if not (math.isfinite(self.scaled_period) and 0 < self.scaled_period <= 1000):
            raise BadRequest(
                f"`scaled-period` must be above 0 and at most 1000: {self.scaled_period:g}"
            )
        if not self._has_bound_starts(starts):
            raise BadRequest(
                f"`window` must hold bound starts (E < 0) of the {self.start} set:"
                f" {_numbers(self.window)}; try {_numbers(starts.window)}"
            )

    def _has_bound_starts(self, starts: StartSet) -> bool:
        # At most LOOK starts each way, edges included: what a huge grid alone could show is less
        # than a five-hundredth of the window.
        p, q = np.meshgrid(
            np.linspace(*self.window[:2], min(self.grid[0], LOOK)),
            np.linspace(*self.window[2:], min(self.grid[1], LOOK)),
            indexing="ij",
        )
        with np.errstate(all="ignore"):
            bound = starts.energies(p.ravel(), q.ravel()) < 0
        return bool((bound & starts.inside(p.ravel(), q.ravel())).any())

    @property
    def tiles(self) -> int:
        """Number of tiles."""
        return len(_blocks(self.grid[0])) * len(_blocks(self.grid[1]))

    def to_json(self) -> dict[str, Any]:
        """Plain JSON value."""
        return asdict(self)


@dataclass(frozen=True)
class TileDone:
    """A tile was scanned and its candidates were worked off; counts are those of the tile."""

    tile: int
    tiles: int
    counts: Counter[str]


@dataclass(frozen=True)
class Candidate:
    """A converged start that is not known yet and goes on to verification."""

    start: Start
    condition: str


@dataclass(frozen=True)
class Found:
    """A periodic orbit, verified or marked as not confirmed."""

    orbit: Orbit


@dataclass(frozen=True)
class Rejected:
    """A converged start that failed verification."""

    start: Start
    verdict: Verdict


@dataclass(frozen=True)
class Finished:
    """The whole window is done; counts of the whole search."""

    counts: Counter[str]


Event = TileDone | Candidate | Found | Rejected | Finished


@dataclass(frozen=True)
class _Tile:
    counts: Counter[str]
    arcs: list[Arc] = field(default_factory=list)


def _numbers(values: tuple[float, ...]) -> str:
    return " ".join(f"{value:g}" for value in values)


def _blocks(n: int) -> list[tuple[int, int]]:
    """First and last index of the blocks of at most TILE cells along n starts."""
    count = math.ceil((n - 1) / TILE)
    edges = np.linspace(0, n - 1, count + 1).round().astype(int)
    return list(zip(edges[:-1].tolist(), edges[1:].tolist(), strict=True))


def _scan_tile(request: SearchRequest, tile: int) -> _Tile:
    """Work of one tile: scan, candidates, Newton, and one arc for each distinct start."""
    starts = start_set(request.start)
    rows, columns = _blocks(request.grid[0]), _blocks(request.grid[1])
    i, j = divmod(tile, len(columns))
    p = np.linspace(*request.window[:2], request.grid[0])
    q = np.linspace(*request.window[2:], request.grid[1])
    # Neighbouring tiles share the starts of their common edge.
    mine_p = p[rows[i][0] : rows[i][1] + 1]
    mine_q = q[columns[j][0] : columns[j][1] + 1]
    seen = scan(starts, mine_p, mine_q, request.scaled_period)
    found = candidates(starts, seen, request.scaled_period)
    # Starts of a common edge are counted in the first tile that has them.
    valid, status = (values[int(i > 0) :, int(j > 0) :] for values in (seen.valid, seen.status))
    cell = max(p[1] - p[0], q[1] - q[0])
    shots = shoot(starts, found.kind, found.p, found.q, found.time, reach=REACH_CELLS * cell)
    counts: Counter[str] = Counter(
        starts=int(valid.sum()),
        skipped=int((~valid).sum()),
        steps=seen.steps,
        candidates=len(found),
        newton_iterations=int(shots.iterations.sum()),
        newton_steps=int(shots.steps.sum()),
    )
    for code, ending in flow.STATUS.items():
        if ending is not Status.CONVERGED:
            counts[f"starts ended by {ending}"] += int((status == code).sum())
    arcs: list[Arc] = []
    for k, ending in enumerate(shots.status):
        counts[f"candidates {ending}"] += 1
        if ending is not Status.CONVERGED:
            continue
        arc = make_arc(shots, k, int(found.kind[k]))
        energy = float(starts.energies(shots.p[k : k + 1], shots.q[k : k + 1])[0])
        if arc.period(starts) * abs(energy) ** 1.5 > request.scaled_period:
            counts["beyond the scaled period"] += 1
        elif any(_close(arc, other) for other in arcs):
            counts["repeated"] += 1
        else:
            arcs.append(arc)
    return _Tile(counts, arcs)


def _close(one: Arc, other: Arc) -> bool:
    return max(abs(one.p - other.p), abs(one.q - other.q)) < START_EQUAL


def _complete(start: str, arc: Arc) -> Orbit | Verdict:
    return complete(start_set(start), arc)


def _warm_up() -> None:
    """Compile every kernel here, so that the workers load them instead of each compiling them."""
    starts = start_set("collinear")
    corner = np.array([0.34, 0.35])
    scan(starts, corner, corner, 1.0)
    refine("collinear", 0.34712, 0.53272, 6.32591)


class _Search:
    """State of one running search: what is known, what is under way, what was counted."""

    def __init__(
        self, request: SearchRequest, known: Callable[[Start], bool], pool: Executor
    ) -> None:
        self.request = request
        self.starts = start_set(request.start)
        self.known = known
        self.pool = pool
        self.counts: Counter[str] = Counter()
        self.seen: list[tuple[float, float]] = []
        self.found: list[tuple[float, float]] = []
        self.under_way: deque[tuple[Start, Future[Orbit | Verdict]]] = deque()

    def _is_new(self, arc: Arc) -> bool:
        """Whether no such start was met in this run or is in the catalogue."""
        if self._near(self.seen, (arc.p, arc.q)):
            self.counts["repeated"] += 1
            return False
        self.seen.append((arc.p, arc.q))
        if self.known(self._start(arc)):
            self.counts["known"] += 1
            return False
        return True

    @staticmethod
    def _near(places: list[tuple[float, float]], place: tuple[float, float]) -> bool:
        if not places:
            return False
        return bool(np.abs(np.array(places) - place).max(axis=1).min() < START_EQUAL)

    def _start(self, arc: Arc) -> Start:
        return Start.from_floats(self.request.start, arc.p, arc.q, arc.period(self.starts))

    def take_tile(self, tile: int, result: _Tile) -> Iterator[Event]:
        """Count a tile, send its new arcs on to verification."""
        self.counts += result.counts
        for arc in result.arcs:
            if self._is_new(arc):
                start = self._start(arc)
                yield Candidate(start, CONDITIONS[arc.kind].label)
                self.under_way.append((start, self.pool.submit(_complete, self.request.start, arc)))
        yield TileDone(tile, self.request.tiles, result.counts)

    def take_orbits(self, wait: bool) -> Iterator[Event]:
        """Verified orbits in the order they were sent, those that are ready or all."""
        while self.under_way and (wait or self.under_way[0][1].done()):
            start, future = self.under_way.popleft()
            outcome = result_of(future)
            verdict = outcome if isinstance(outcome, Verdict) else outcome.verdict
            if isinstance(outcome, Verdict) or verdict.status is Status.REJECTED:
                self.counts["rejected"] += 1
                self.counts[f"rejected: {verdict.reason.split(' is ')[0]}"] += 1
                yield Rejected(start, verdict)
                continue
            if outcome.scaled_period > self.request.scaled_period:
                self.counts["beyond the scaled period"] += 1
                continue
            places = [(s.p, s.q) for s in outcome.starts if s.kind == self.request.start]
            if any(self._near(self.found, place) for place in places):
                # Its other start was under way before this process knew that the two are one.
                self.counts["repeated"] += 1
                continue
            self.found += places
            self.seen += places
            self.counts[str(verdict.status)] += 1
            yield Found(outcome)


def search(
    request: SearchRequest,
    *,
    known: Callable[[Start], bool] = lambda _: False,
    workers: int | None = None,
) -> Generator[Event, None, None]:
    """Search a window for periodic orbits.

    Parameters
    ----------
    request : SearchRequest
    known : callable
        Told a converged start; True leaves it out as known.  It is asked after the events before
        it were consumed, so it may look at what those were filed as.
    workers : int, optional
        Worker processes; by default one for each core.  1 works in this process.

    Notes
    -----
    Workers are started afresh, so a script that searches with more than one needs the usual
    ``if __name__ == "__main__":`` around what it does.

    Yields
    ------
    TileDone, Candidate, Found, Rejected
        As they happen, tiles in order; closing the iterator stops the workers.
    Finished
        Last, with the counts of everything.
    """
    workers = check_workers(workers)
    if workers > 1:
        _warm_up()
    with worker_pool(workers) as pool:
        run = _Search(request, known, pool)
        pending: deque[tuple[int, Future[_Tile]]] = deque()
        following = 0
        while following < request.tiles or pending:
            # A few tiles ahead keep every worker busy without letting verification starve.
            while following < request.tiles and len(pending) < 2 * workers:
                pending.append((following, pool.submit(_scan_tile, request, following)))
                following += 1
            tile, future = pending.popleft()
            yield from run.take_tile(tile, result_of(future))
            yield from run.take_orbits(wait=False)
        yield from run.take_orbits(wait=True)
    yield Finished(run.counts)
