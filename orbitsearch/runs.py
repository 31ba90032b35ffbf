"""Searches and imports that file what they find: where solver and catalogue meet.

Every orbit is filed the moment it is verified, in a transaction of its own, so that a run that is
stopped or killed loses at most what was not verified yet.  The row of a run says how far it came,
so that it can go on from there.
"""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Generator, Iterable, Iterator
from contextlib import closing
from dataclasses import dataclass
from typing import Any, TypeGuard

from orbitsearch.catalog import Catalog
from orbitsearch.catalog_provenance import TILES
from orbitsearch.catalog_rows import lacks_kind
from orbitsearch.errors import BadRequest
from orbitsearch.identity import START_EQUAL
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.records import Added
from orbitsearch.refine import refine
from orbitsearch.search import (
    TILE,
    Event,
    Finished,
    Found,
    SearchRequest,
    TileDone,
    TileSettled,
    search,
)
from orbitsearch.starts_table import RowOfStarts

__all__ = [
    "Filed",
    "ImportedRow",
    "Known",
    "Started",
    "Unfinished",
    "import_rows",
    "run_search",
    "unfinished",
]

NOTE_SECONDS = 2.0
"""A killed search has to do again what it did in that time."""
# Keys of a run's counts that say which tiles are done, which are counted but not done, and how
# large tiles are, without which their numbers mean nothing.
DONE, BEGUN, SIDE = TILES + "done", TILES + "begun", TILES + "side"


@dataclass(frozen=True)
class Started:
    """The run has a number in the catalogue; the first event of all.

    A run that goes on has some tiles done before.
    """

    run: int
    done: int = 0


@dataclass(frozen=True)
class Filed:
    """An orbit was filed: under which number, and whether that record is new."""

    orbit: Orbit
    id: int
    new: bool


@dataclass(frozen=True)
class Known:
    """A start was met that the catalogue already lists under this number."""

    start: Start
    id: int


@dataclass(frozen=True)
class ImportedRow:
    """What became of one row of a published table."""

    row: RowOfStarts
    status: Status
    id: int | None
    new: bool
    message: str


@dataclass(frozen=True)
class Unfinished:
    """A run that was stopped, failed or was killed, and how far it came.

    Attributes
    ----------
    run : int
        Number of the run.
    request : SearchRequest
    counts : Counter
        What came of the tiles that are done or begun.
    done : frozenset of int
        Tiles of which every orbit is filed.
    begun : frozenset of int
        Tiles that were scanned and counted, of which some orbits were under way.
    """

    run: int
    request: SearchRequest
    counts: Counter[str]
    done: frozenset[int]
    begun: frozenset[int]


def unfinished(catalog: Catalog, run: int) -> Unfinished:
    """A run of the catalogue that `run_search` may resume.

    Parameters
    ----------
    catalog : Catalog
    run : int
        Number of the run.

    Returns
    -------
    Unfinished

    Raises
    ------
    BadRequest
        When there is no such run, it is finished, or its request cannot be read.
    """
    found = catalog.unfinished_run(run)
    try:
        request = SearchRequest.from_json(found.request)
    except BadRequest as problem:
        raise BadRequest(
            f"`resume` must name a run whose request can be read, run {run}: {problem}"
        ) from None
    noted = found.counts or {}
    counts = Counter({key: n for key, n in noted.items() if isinstance(n, int) and key != SIDE})
    done, begun = noted.get(DONE), noted.get(BEGUN)
    if noted.get(SIDE) == TILE and _are_tiles(done, request) and _are_tiles(begun, request):
        return Unfinished(run, request, counts, frozenset(done), frozenset(begun))
    # Nobody noted its tiles, or another version cut them differently: all of them come again, and
    # what was filed is known.
    kept = Counter({key: counts[key] for key in ("filed", "known") if counts[key]})
    return Unfinished(run, request, kept, frozenset(), frozenset())


def _are_tiles(numbers: Any, request: SearchRequest) -> TypeGuard[list[int]]:
    return isinstance(numbers, list) and all(
        isinstance(tile, int) and 0 <= tile < request.tiles for tile in numbers
    )


class _Progress:
    """How far a run came, as its row in the catalogue says it.

    Orbits of a tile come long after its `TileDone`, whenever a worker has verified them.  A tile is
    done at its `TileSettled`: that stands behind all its arcs in the one queue of the search, and
    `run_search` files each orbit before it asks for the next event.  An arc that the search dropped
    as a repetition or as known needs no waiting either: what it repeats was sent earlier, what is
    known was filed.

    Until then the tile is begun: counted, but scanned again when the run is resumed, and then not
    counted a second time.  So starts add up to the whole grid however often a run was stopped.
    """

    def __init__(self, before: Unfinished | None) -> None:
        self.counts = Counter[str]() if before is None else before.counts.copy()
        self.done = set[int]() if before is None else set(before.done)
        self.begun = set[int]() if before is None else set(before.begun)
        self._noted = time.monotonic()

    def take(self, event: Event) -> None:
        """Count a tile, or what became of its arcs."""
        if isinstance(event, TileDone) and event.tile not in self.begun:
            self.begun.add(event.tile)
            self.counts += event.counts
        elif isinstance(event, TileSettled):
            self.done.add(event.tile)
            self.begun.remove(event.tile)
            # Known starts are counted as they are met.
            self.counts += Counter({key: n for key, n in event.counts.items() if key != "known"})

    def note(self, catalog: Catalog, run: int) -> None:
        """Write it into the row of the run, when the last time was a while ago."""
        if time.monotonic() - self._noted > NOTE_SECONDS:
            catalog.note_progress(run, self.to_json())
            self._noted = time.monotonic()

    def to_json(self) -> dict[str, Any]:
        """The counts of the row."""
        return {**self.counts, DONE: sorted(self.done), BEGUN: sorted(self.begun), SIDE: TILE}


def run_search(
    catalog: Catalog,
    request: SearchRequest,
    *,
    workers: int | None = None,
    resume: int | None = None,
) -> Generator[Event | Started | Filed | Known, None, None]:
    """Search a window and file what is found.

    Parameters
    ----------
    catalog : Catalog
    request : SearchRequest
    workers : int, optional
        As for `orbitsearch.search.search`.
    resume : int, optional
        Number of a run of this catalogue with the same request (see `unfinished`) that was stopped,
        failed or was killed.  It goes on: tiles that are done are left out, counts add up.

    Yields
    ------
    `Started`, then the events of `orbitsearch.search.search`, with `Filed` after each `Found`, and
    `Known`.

    Notes
    -----
    The run is a row of the catalogue from the beginning; its state becomes ``finished`` at the end,
    ``stopped`` when the iterator is closed before or Ctrl-C arrives, and ``failed`` on an error.
    A run that is killed stays ``running``, and cannot be told from one that another process is at:
    who resumes that one has both search the same tiles, and counts that fit neither.

    Raises
    ------
    BadRequest
        When `resume` names no run that may go on, or one with another request.
    """
    before = None if resume is None else unfinished(catalog, resume)
    if before is None:
        run_id = catalog.start_run(request.to_json())
    else:
        run_id = before.run
        if before.request != request:
            raise BadRequest(
                f"`request` must be that of run {run_id} to resume it: {before.request.to_json()};"
                " take it from there"
            )
    progress = _Progress(before)
    if before is not None:
        # A killed process may have filed more than it had noted.
        filed = catalog.reopen_run(run_id)
        progress.counts |= Counter(filed=filed)
    met: list[Known] = []

    def known(start: Start) -> bool:
        near = catalog.find_start(start.kind, start.p, start.q, START_EQUAL)
        if not near or not _is_complete(catalog.get(near[0].id).orbit):
            return False
        met.append(Known(start, near[0].id))
        return True

    state = "stopped"
    try:
        yield Started(run_id, len(progress.done))
        done = frozenset(progress.done)
        with closing(search(request, known=known, workers=workers, done=done)) as events:
            for event in events:
                progress.take(event)
                progress.note(catalog, run_id)
                if isinstance(event, Finished):
                    state = "finished"
                yield event
                while met:
                    progress.counts["known"] += 1
                    yield met.pop(0)
                if isinstance(event, Found):
                    added: Added = catalog.add(event.orbit, run_id)
                    progress.counts["filed" if added.new else "known"] += 1
                    yield Filed(event.orbit, *added)
    except Exception:
        state = "failed"
        raise
    finally:
        catalog.finish_run(run_id, progress.to_json(), state)


def _is_complete(orbit: Orbit) -> bool:
    """Whether meeting an orbit again could add nothing to its record.

    A record of an early version may lack its type, and one that lists starts of fewer sets than it
    runs through may be one of two that are the same orbit.
    """
    if lacks_kind(orbit) or orbit.symmetry is None:
        return False
    return {start.kind for start in orbit.starts} >= orbit.symmetry.reversals.keys()


def import_rows(
    catalog: Catalog, rows: Iterable[RowOfStarts], citation: str
) -> Iterator[ImportedRow]:
    """Refine the rows of a published table and match them to the catalogue.

    Parameters
    ----------
    catalog : Catalog
    rows : iterable of RowOfStarts
    citation : str
        Where the table was published; kept with each row.

    Yields
    ------
    ImportedRow
        One for each row, in order.  A row that fails is recorded with its reason, and has no id.
    """
    for row in rows:
        record: Added | None = None
        try:
            answer = refine(row.start, float(row.p), float(row.q), float(row.period))
        except BadRequest as problem:
            status, message = Status.REJECTED, str(problem)
        else:
            status, message = answer.status, answer.message
            if answer.asked_for is not None:
                record = catalog.add(answer.asked_for)
            elif answer.orbit is not None:
                status = Status.REJECTED
        catalog.add_source(
            None if record is None else record.id,
            citation, row.label, row.start, row.p, row.q, row.period, message,
        )  # fmt: skip
        number, new = (None, False) if record is None else record
        yield ImportedRow(row, status, number, new, message)
