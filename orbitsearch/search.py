"""The search: a window of starts in, a stream of findings out.

The grid is cut into tiles.  A worker scans a tile, finds its candidates and refines them; new arcs
are completed and verified by workers too; this process only recognises repetitions and keeps
order.  Findings come as an iterator of events, so a command, a notebook or a script can show
progress, file what is found, and stop at any event without losing anything.

Results do not depend on the number of workers: tiles and orbits are taken in order, whoever
finishes first.
"""

from __future__ import annotations

import itertools
import math
from collections import Counter, deque
from collections.abc import Callable, Collection, Generator, Iterator
from concurrent.futures import Executor, Future
from dataclasses import asdict, dataclass, field
from typing import Any, Self

import numpy as np

from orbitsearch import flow
from orbitsearch.complete import Arc, complete, make_arc
from orbitsearch.errors import BadRequest
from orbitsearch.identity import START_EQUAL
from orbitsearch.orbit import Orbit, Start, Status, Verdict
from orbitsearch.refine import refine
from orbitsearch.scan import Outcomes, candidates, scan
from orbitsearch.shoot import shoot
from orbitsearch.starts import CONDITIONS, StartSet, start_set
from orbitsearch.workers import check_workers, result_of, worker_pool

__all__ = [
    "TILE",
    "Candidate",
    "Event",
    "Finished",
    "Found",
    "Rejected",
    "SearchRequest",
    "TileDone",
    "TileSettled",
    "search",
]

TILE = 25
"""Cells along the side of a tile: enough candidates to keep all lanes busy, few enough that there
is something new to look at every second."""
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

    @classmethod
    def from_json(cls, value: Any) -> Self:
        """The request that `to_json` gave as this value.

        Raises
        ------
        BadRequest
            When the value is no request, or one that breaks a rule.
        """
        try:
            p0, p1, q0, q1 = map(float, value["window"])
            n, m = map(int, value["grid"])
            start, scaled_period = str(value["start"]), float(value["scaled_period"])
        except (KeyError, TypeError, ValueError, OverflowError):
            raise BadRequest(
                f"a request must have start, window, grid and scaled_period: {value}; search anew"
            ) from None
        return cls(start, (p0, p1, q0, q1), (n, m), scaled_period)


@dataclass(frozen=True)
class TileDone:
    """A tile was scanned and its candidates were worked off; counts are those of the tile.

    Outcomes are those of all its starts, also of those on the edges it shares with its neighbours;
    counts leave out the edges that belong to an earlier tile.
    """

    tile: int
    tiles: int
    counts: Counter[str]
    outcomes: Outcomes


@dataclass(frozen=True)
class TileSettled:
    """Every orbit that came of a tile was handed out; counts say what became of its arcs."""

    tile: int
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
    """The whole window is done; counts of this whole search."""

    counts: Counter[str]


Event = TileDone | TileSettled | Candidate | Found | Rejected | Finished


@dataclass(frozen=True)
class _Tile:
    counts: Counter[str]
    outcomes: Outcomes
    arcs: list[Arc] = field(default_factory=list)


@dataclass(frozen=True)
class _Sent:
    """An arc on its way through verification, and where to count what becomes of it."""

    start: Start
    future: Future[Orbit | Verdict]
    counts: Counter[str]


@dataclass(frozen=True)
class _EndOfTile:
    """Stands in the queue behind the arcs of a tile."""

    tile: int
    counts: Counter[str]


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
    (top, bottom), (left, right) = rows[i], columns[j]
    seen = scan(starts, p[top : bottom + 1], q[left : right + 1], request.scaled_period)
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
    return _Tile(counts, Outcomes.of(seen, (top, bottom + 1), (left, right + 1)), arcs)


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
        self.under_way: deque[_Sent | _EndOfTile] = deque()

    def _is_new(self, arc: Arc, counts: Counter[str]) -> bool:
        """Whether no such start was met in this run or is in the catalogue."""
        if self._near(self.seen, (arc.p, arc.q)):
            counts["repeated"] += 1
            return False
        self.seen.append((arc.p, arc.q))
        if self.known(self._start(arc)):
            counts["known"] += 1
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
        counts: Counter[str] = Counter()
        for arc in result.arcs:
            if self._is_new(arc, counts):
                start = self._start(arc)
                yield Candidate(start, CONDITIONS[arc.kind].label)
                future = self.pool.submit(_complete, self.request.start, arc)
                self.under_way.append(_Sent(start, future, counts))
        self.under_way.append(_EndOfTile(tile, counts))
        yield TileDone(tile, self.request.tiles, result.counts, result.outcomes)

    def take_orbits(self, wait: bool) -> Iterator[Event]:
        """Verified orbits in the order they were sent, those that are ready or all.

        A tile is settled when its end comes out of the queue.  Whatever was dropped on the way as
        a repetition repeats an arc that stood before it, so that has been handed out as well.
        """
        while self.under_way:
            first = self.under_way[0]
            if isinstance(first, _Sent) and not (wait or first.future.done()):
                return
            self.under_way.popleft()
            if isinstance(first, _EndOfTile):
                self.counts += first.counts
                yield TileSettled(first.tile, first.counts)
            else:
                yield from self._take_orbit(first)

    def _take_orbit(self, sent: _Sent) -> Iterator[Event]:
        outcome = result_of(sent.future)
        verdict = outcome if isinstance(outcome, Verdict) else outcome.verdict
        if isinstance(outcome, Verdict) or verdict.status is Status.REJECTED:
            sent.counts["rejected"] += 1
            sent.counts[f"rejected: {verdict.reason.split(' is ')[0]}"] += 1
            yield Rejected(sent.start, verdict)
            return
        if outcome.scaled_period > self.request.scaled_period:
            sent.counts["beyond the scaled period"] += 1
            return
        places = [(s.p, s.q) for s in outcome.starts if s.kind == self.request.start]
        if any(self._near(self.found, place) for place in places):
            # Its other start was under way before this process knew that the two are one.
            sent.counts["repeated"] += 1
            return
        self.found += places
        self.seen += places
        sent.counts[str(verdict.status)] += 1
        yield Found(outcome)


def search(
    request: SearchRequest,
    *,
    known: Callable[[Start], bool] = lambda _: False,
    workers: int | None = None,
    done: Collection[int] = (),
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
    done : collection of int, optional
        Numbers of tiles to leave out, because an earlier search has settled them (`TileSettled`).
        What came of those must be `known`.

    Notes
    -----
    Workers are started afresh, so a script that searches with more than one needs the usual
    ``if __name__ == "__main__":`` around what it does.

    Yields
    ------
    TileDone, TileSettled, Candidate, Found, Rejected
        As they happen, tiles in order; closing the iterator stops the workers.
    Finished
        Last, with the counts of everything that this search did.

    Raises
    ------
    BadRequest
        When `workers` or `done` breaks a rule.
    """
    workers = check_workers(workers)
    if wrong := [tile for tile in done if not 0 <= tile < request.tiles]:
        raise BadRequest(f"`done` must hold tiles from 0 to {request.tiles - 1}: {wrong[0]}")
    left = iter(sorted(set(range(request.tiles)) - set(done)))
    # A few tiles ahead keep every worker busy without letting verification starve; alone, this
    # process would only be late to tell of the first.
    ahead = 2 * workers if workers > 1 else 1
    if workers > 1:
        _warm_up()
    with worker_pool(workers) as pool:
        run = _Search(request, known, pool)
        pending: deque[tuple[int, Future[_Tile]]] = deque()
        while True:
            for tile in itertools.islice(left, ahead - len(pending)):
                pending.append((tile, pool.submit(_scan_tile, request, tile)))
            if not pending:
                break
            tile, future = pending.popleft()
            yield from run.take_tile(tile, result_of(future))
            yield from run.take_orbits(wait=False)
        yield from run.take_orbits(wait=True)
    yield Finished(run.counts)
