"""A search that was stopped or killed goes on where it was, and ends as if nothing had happened."""

import itertools
import multiprocessing
import os
import random
import signal
import subprocess
import sys
import time
from collections import Counter
from collections.abc import Iterator
from pathlib import Path

import pytest
from commands import ROOT

from orbitsearch import runs
from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadRequest
from orbitsearch.runs import Filed, Started, run_search, unfinished
from orbitsearch.search import (
    Candidate,
    Finished,
    Found,
    Rejected,
    SearchRequest,
    TileDone,
    TileSettled,
    search,
)
from orbitsearch.workers import worker_pool

# Five tiles in a row, six orbits, a second.
REQUEST = SearchRequest("collinear", (0.2, 0.6, 0.3, 0.6), (126, 6), 25.0)
STARTS = 126 * 6
# One tile, the figure-eight and its twin.
SMALL = SearchRequest("collinear", (0.3, 0.4, 0.5, 0.6), (8, 8), 12.0)
# Counts of work on tiles, which no stop may change.
WORK = ("starts", "skipped", "steps", "candidates")


@pytest.fixture
def catalog(tmp_path: Path) -> Iterator[Catalog]:
    with Catalog.open(tmp_path / "orbits.db") as opened:
        yield opened


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> tuple[list, dict]:
    """Orbits and counts of one run that nobody stopped."""
    with Catalog.open(tmp_path_factory.mktemp("undisturbed") / "orbits.db") as catalog:
        for _ in run_search(catalog, REQUEST, workers=1):
            pass
        return filed_starts(catalog), catalog.runs()[0].counts


def filed_starts(catalog: Catalog) -> list[list[float]]:
    """Numbers of every start of every orbit filed, as one sorted list."""
    starts = [start for record in catalog.orbits() for start in record.orbit.starts]
    return sorted([start.p, start.q, float(start.period)] for start in starts)


def assert_as_undisturbed(catalog: Catalog, undisturbed: tuple[list, dict]) -> None:
    starts, counts = undisturbed
    found = filed_starts(catalog)
    assert len(found) == len(starts) >= 12
    for one, other in zip(found, starts, strict=True):
        assert one == pytest.approx(other, abs=1e-12, rel=1e-12)
    (run,) = catalog.runs()
    assert run.state == "finished"
    assert run.finished is not None
    assert {key: run.counts.get(key) for key in WORK} == {key: counts.get(key) for key in WORK}
    # A process that has just compiled the kernels rounds otherwise than one that loads them, and
    # Newton's method may take a step more.
    for key in ("newton_iterations", "newton_steps"):
        assert run.counts[key] == pytest.approx(counts[key], rel=0.02)
    assert run.counts["starts"] + run.counts.get("skipped", 0) == STARTS
    assert run.counts["filed"] == counts["filed"] == sum(1 for _ in catalog.orbits())
    assert {record.run_id for record in catalog.orbits()} == {run.id}


def take(catalog: Catalog, events: int, resume: int | None, workers: int = 1) -> tuple[list, bool]:
    """Events of a run that is stopped after so many, and whether it finished before."""
    running = run_search(catalog, REQUEST, workers=workers, resume=resume)
    taken = [*itertools.islice(running, events)]
    running.close()
    return taken, isinstance(taken[-1], Finished)


# ---------------------------------------------------------------- tiles of a search


def test_a_tile_is_settled_when_all_its_orbits_were_handed_out() -> None:
    open_candidates, settled, tile_of_next = Counter(), [], 0
    for event in search(REQUEST, workers=2):
        if isinstance(event, Candidate):
            open_candidates[tile_of_next] += 1
        elif isinstance(event, TileDone):
            assert event.tile == tile_of_next
            tile_of_next += 1
        elif isinstance(event, Found | Rejected):
            # Verdicts keep the order of candidates: this is one of the first tile that has any.
            open_candidates[min(+open_candidates)] -= 1
        elif isinstance(event, TileSettled):
            # Candidates that turn out to be beyond the bound, or a repetition, have no verdict.
            dropped = event.counts["beyond the scaled period"]
            assert open_candidates.pop(event.tile, 0) <= dropped + event.counts["repeated"]
            assert event.tile < tile_of_next
            settled.append(event.tile)
    assert settled == [*range(REQUEST.tiles)]


def test_counts_of_tiles_and_arcs_are_all_there_is() -> None:
    *events, last = search(REQUEST, workers=1)
    parts = [event.counts for event in events if isinstance(event, TileDone | TileSettled)]
    assert sum(parts, Counter()) == last.counts


def test_tiles_that_are_done_are_left_out() -> None:
    *events, last = search(REQUEST, workers=1, done={0, 3, 1})
    tiles = [event for event in events if isinstance(event, TileDone)]
    assert [tile.tile for tile in tiles] == [2, 4]
    assert {tile.tiles for tile in tiles} == {REQUEST.tiles}
    assert last.counts["starts"] == sum(tile.counts["starts"] for tile in tiles) < STARTS
    (nothing,) = search(REQUEST, workers=1, done=range(REQUEST.tiles))
    assert nothing == Finished(Counter())


@pytest.mark.parametrize("tile", [-1, 5])
def test_done_must_hold_tiles(tile) -> None:
    with pytest.raises(BadRequest, match=rf"`done` must hold tiles from 0 to 4: {tile}"):
        next(search(REQUEST, workers=1, done=[0, tile]))


# ---------------------------------------------------------------- stop and resume


@pytest.mark.parametrize("seed", range(3))
def test_a_run_stopped_again_and_again_ends_as_if_undisturbed(
    catalog: Catalog, undisturbed, seed
) -> None:
    chance = random.Random(seed)
    done: frozenset[int] = frozenset()
    run, finished, stops = None, False, 0
    while not finished:
        events, finished = take(catalog, chance.randrange(5, 14), run)
        assert isinstance(events[0], Started)
        assert run in (None, events[0].run)
        assert events[0].done == len(done)
        run = events[0].run
        again = {event.tile for event in events if isinstance(event, TileDone)}
        assert not again & done, "scanned again"
        stops += 1
        if not finished:
            assert catalog.runs()[0].state == "stopped"
            left = unfinished(catalog, run)
            assert left.request == REQUEST
            assert left.done >= done | {e.tile for e in events if isinstance(e, TileSettled)}
            done = left.done
            assert left.counts["filed"] == sum(1 for _ in catalog.orbits())
            assert (left.counts["starts"] > 0) == bool(left.done | left.begun)
    assert stops >= 3
    assert_as_undisturbed(catalog, undisturbed)


@pytest.mark.parametrize("events", [1, 2, 8, 20])
def test_with_two_workers_as_well(catalog: Catalog, undisturbed, events) -> None:
    taken, _ = take(catalog, events, None, workers=2)
    done = unfinished(catalog, 1).done
    assert multiprocessing.active_children() == []
    more, finished = take(catalog, 1000, 1, workers=2)
    assert finished
    assert not done & {event.tile for event in more if isinstance(event, TileDone)}
    both = {event.tile for event in taken + more if isinstance(event, TileDone)}
    assert both == {*range(REQUEST.tiles)}
    assert_as_undisturbed(catalog, undisturbed)


def test_a_run_that_goes_on_is_running(catalog: Catalog) -> None:
    take(catalog, 3, None)
    (stopped,) = catalog.runs()
    running = run_search(catalog, REQUEST, workers=1, resume=1)
    next(running)
    (run,) = catalog.runs()
    assert (stopped.state, run.state, run.finished) == ("stopped", "running", None)
    assert (run.id, run.started, run.request) == (1, stopped.started, stopped.request)
    assert run.counts == stopped.counts
    running.close()
    assert catalog.runs()[0].state == "stopped"


def test_a_run_that_failed_may_go_on(catalog: Catalog, monkeypatch) -> None:
    def full(*_: object) -> None:
        raise OSError("no space")

    with monkeypatch.context() as patch:
        patch.setattr(catalog, "add", full)
        with pytest.raises(OSError, match="no space"):
            list(run_search(catalog, REQUEST, workers=1))
    assert catalog.runs()[0].state == "failed"
    assert unfinished(catalog, 1).done == frozenset()
    _, finished = take(catalog, 1000, 1)
    assert finished
    assert catalog.runs()[0].counts["starts"] == STARTS


# A search that kills its own process at a chosen event, as hard as can be.
KILLED = """
import os, signal, sys
from orbitsearch import runs
from orbitsearch.catalog import Catalog
from orbitsearch.search import SearchRequest
runs.NOTE_SECONDS = 0.0
path, name, count, workers, resume = sys.argv[1:]
request = SearchRequest("collinear", (0.2, 0.6, 0.3, 0.6), (126, 6), 25.0)
left = int(count)
with Catalog.open(path) as catalog:
    resume = int(resume) or None
    for event in runs.run_search(catalog, request, workers=int(workers), resume=resume):
        left -= type(event).__name__ == name
        if left == 0:
            os.kill(os.getpid(), signal.SIGKILL)
"""


@pytest.mark.skipif(os.name != "posix", reason="signals as on POSIX systems")
@pytest.mark.parametrize(
    ("name", "workers"),
    [
        ("TileSettled", 1),
        ("Filed", 2),
        pytest.param("Found", 1, marks=pytest.mark.slow),
        pytest.param("TileDone", 2, marks=pytest.mark.slow),
    ],
)
def test_a_killed_run_goes_on(tmp_path: Path, undisturbed, name, workers) -> None:
    path = tmp_path / "orbits.db"
    done: frozenset[int] = frozenset()
    for count, resume in ((2, 0), (1, 1)):
        killed = subprocess.run(
            [sys.executable, "-c", KILLED, path, name, str(count), str(workers), str(resume)],
            env={**os.environ, "PYTHONPATH": str(ROOT)},
            check=False,
        )
        assert killed.returncode == -signal.SIGKILL
        with Catalog.open(path) as catalog:
            (run,) = catalog.runs()
            assert (run.state, run.finished) == ("running", None)
            left = unfinished(catalog, 1)
            assert left.done >= done
            done = left.done
    if name == "TileSettled":
        assert len(done) == 3
    with Catalog.open(path) as catalog:
        events, finished = take(catalog, 1000, 1)
        assert finished
        assert not done & {event.tile for event in events if isinstance(event, TileDone)}
        assert_as_undisturbed(catalog, undisturbed)


def test_progress_is_noted_at_most_every_two_seconds(catalog: Catalog, monkeypatch) -> None:
    clock = itertools.count(0.0, 0.3)
    noted: list[float] = []
    write = catalog.note_progress

    def note(run: int, counts: dict) -> None:
        noted.append(now())
        write(run, counts)
        assert unfinished(catalog, run).done == frozenset(counts["tiles_done"])

    def now() -> float:
        return next(clock)

    monkeypatch.setattr(catalog, "note_progress", note)
    monkeypatch.setattr(runs.time, "monotonic", now)
    for _ in run_search(catalog, REQUEST, workers=1):
        pass
    assert len(noted) >= 2
    assert min(b - a for a, b in itertools.pairwise(noted)) > runs.NOTE_SECONDS


# ---------------------------------------------------------------- requests that cannot go on


@pytest.mark.parametrize("run", [1, -7, 2**70])
def test_there_must_be_such_a_run(catalog: Catalog, run) -> None:
    with pytest.raises(BadRequest, match=rf"`resume` must name a run .*, got {run}: list the"):
        next(run_search(catalog, SMALL, workers=1, resume=run))
    with pytest.raises(BadRequest, match="`resume` must name a run"):
        catalog.reopen_run(run)
    assert catalog.runs() == []


def test_a_finished_run_does_not_go_on(catalog: Catalog) -> None:
    for _ in run_search(catalog, SMALL, workers=1):
        pass
    before = catalog.runs()
    with pytest.raises(BadRequest, match=r"`resume` must name .*, run 1 is finished: search anew"):
        next(run_search(catalog, SMALL, workers=1, resume=1))
    with pytest.raises(BadRequest, match="run 1 is finished"):
        catalog.reopen_run(1)
    assert catalog.runs() == before


def test_the_request_must_be_the_same(catalog: Catalog) -> None:
    take(catalog, 2, None)
    with pytest.raises(BadRequest, match=r"`request` must be that of run 1 .*25.0}; take it from"):
        next(run_search(catalog, SMALL, workers=1, resume=1))
    assert catalog.runs()[0].state == "stopped"


@pytest.mark.parametrize(
    "request_json",
    [
        {"start": "rest"},
        SMALL.to_json() | {"window": [1, 2, 3]},
        SMALL.to_json() | {"grid": ["many", 8]},
        SMALL.to_json() | {"scaled_period": None},
        SMALL.to_json() | {"start": "square"},
        SMALL.to_json() | {"grid": [1, 8]},
        ["collinear"],
    ],
)
def test_the_request_must_be_readable(catalog: Catalog, request_json) -> None:
    run = catalog.start_run(request_json)
    with pytest.raises(BadRequest, match=r"`resume` .* request can be read, run 1: ") as caught:
        unfinished(catalog, run)
    assert "\n" not in str(caught.value)
    assert catalog.runs()[0].state == "running"


def test_requests_survive_the_catalogue(catalog: Catalog) -> None:
    run = catalog.start_run(REQUEST.to_json())
    assert unfinished(catalog, run).request == REQUEST


@pytest.mark.parametrize(
    "tiles",
    [
        {},
        {"tiles_done": [0], "tiles_begun": [], "tiles_side": 10},
        {"tiles_done": [5], "tiles_begun": [], "tiles_side": 25},
        {"tiles_done": "all", "tiles_begun": [], "tiles_side": 25},
    ],
    ids=["of an early version", "cut differently", "no such tile", "no list"],
)
def test_without_usable_tiles_everything_is_searched_again(catalog: Catalog, tiles) -> None:
    run = catalog.start_run(SMALL.to_json())
    catalog.finish_run(run, {"starts": 1000, "known": 3, "filed": 0} | tiles, "stopped")
    events = [*run_search(catalog, SMALL, workers=1, resume=run)]
    assert sum(isinstance(event, TileDone) for event in events) == 1
    assert sum(isinstance(event, Filed) for event in events) == 2
    counts = catalog.runs()[0].counts
    assert (counts["starts"], counts["known"], counts["filed"]) == (64, 3, 2)


def test_lists_of_tiles_stay_out_of_the_counts_that_are_shown(catalog: Catalog) -> None:
    take(catalog, 12, None)
    (run,) = catalog.runs()
    assert run.counts["starts"] > 0
    assert all(isinstance(n, int) and not key.startswith("tiles_") for key, n in run.counts.items())
    assert catalog.unfinished_run(1).counts["tiles_done"] == sorted(unfinished(catalog, 1).done)


# ---------------------------------------------------------------- leaving early


def test_who_leaves_early_does_not_wait_for_what_workers_do() -> None:
    pool_of_two = worker_pool(2)
    pool = pool_of_two.__enter__()
    sleeping = [pool.submit(time.sleep, 600) for _ in range(6)]
    while not sleeping[1].running():
        time.sleep(0.01)
    begun = time.monotonic()
    assert not pool_of_two.__exit__(KeyboardInterrupt, KeyboardInterrupt(), None)
    # Measured 0.02 s; other programs may want the machine as well.
    assert time.monotonic() - begun < 60.0
    assert multiprocessing.active_children() == []


def test_who_leaves_at_the_end_lets_workers_finish() -> None:
    with worker_pool(2) as pool:
        begun = pool.submit(time.sleep, 0.5)
        while not begun.running():
            time.sleep(0.01)
    assert begun.done()
    assert begun.exception() is None
