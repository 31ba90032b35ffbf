"""Searches and imports that file what they find: where solver and catalogue meet.

Every orbit is filed the moment it is verified, in a transaction of its own, so that a run that is
stopped or killed loses at most what was not verified yet.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Generator, Iterable, Iterator
from contextlib import closing
from dataclasses import dataclass

from orbitsearch.catalog import Catalog
from orbitsearch.catalog_rows import lacks_kind
from orbitsearch.errors import BadRequest
from orbitsearch.identity import START_EQUAL
from orbitsearch.orbit import Orbit, Start, Status
from orbitsearch.records import Added
from orbitsearch.refine import refine
from orbitsearch.search import Event, Finished, Found, SearchRequest, TileDone, search
from orbitsearch.starts_table import RowOfStarts

__all__ = ["Filed", "ImportedRow", "Known", "Started", "import_rows", "run_search"]


@dataclass(frozen=True)
class Started:
    """The run has a number in the catalogue; the first event of all."""

    run: int


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


def run_search(
    catalog: Catalog, request: SearchRequest, *, workers: int | None = None
) -> Generator[Event | Started | Filed | Known, None, None]:
    """Search a window and file what is found.

    Parameters
    ----------
    catalog : Catalog
    request : SearchRequest
    workers : int, optional
        As for `orbitsearch.search.search`.

    Yields
    ------
    `Started`, then the events of `orbitsearch.search.search`, with `Filed` after each `Found`, and
    `Known`.

    Notes
    -----
    The run is a row of the catalogue from the beginning; its state becomes ``finished`` at the end,
    ``stopped`` when the iterator is closed before or Ctrl-C arrives, and ``failed`` on an error.
    """
    run_id = catalog.start_run(request.to_json())
    met: list[Known] = []

    def known(start: Start) -> bool:
        near = catalog.find_start(start.kind, start.p, start.q, START_EQUAL)
        if not near or not _is_complete(catalog.get(near[0].id).orbit):
            return False
        met.append(Known(start, near[0].id))
        return True

    counts: Counter[str] = Counter()
    state = "stopped"
    try:
        yield Started(run_id)
        with closing(search(request, known=known, workers=workers)) as events:
            for event in events:
                yield event
                while met:
                    counts["known"] += 1
                    yield met.pop(0)
                if isinstance(event, Found):
                    added: Added = catalog.add(event.orbit, run_id)
                    counts["filed" if added.new else "known"] += 1
                    yield Filed(event.orbit, *added)
                elif isinstance(event, TileDone):
                    counts += event.counts
                elif isinstance(event, Finished):
                    mine = {key: counts[key] for key in ("filed", "known")}
                    counts = event.counts | Counter(mine)
                    state = "finished"
    except Exception:
        state = "failed"
        raise
    finally:
        catalog.finish_run(run_id, dict(counts), state)


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
