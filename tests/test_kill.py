"""A search that is killed or stopped loses nothing it has filed, and leaves nothing behind."""

import itertools
import os
import random
import re
import signal
import sqlite3
import subprocess
import time
from collections.abc import Iterator
from contextlib import closing, contextmanager
from pathlib import Path

import pytest
from commands import program

from orbitsearch.catalog import Catalog
from orbitsearch.identity import same_orbit
from orbitsearch.orbit import Orbit, Status
from orbitsearch.runs import run_search
from orbitsearch.search import SearchRequest
from orbitsearch.verify import BOUNDS

pytestmark = pytest.mark.skipif(os.name != "posix", reason="signals as on POSIX systems")

REQUEST = SearchRequest("collinear", (0.0, 0.6, 0.0, 0.6), (60, 60), 25.0)
WINDOW = ("--window", 0, 0.6, 0, 0.6, "--grid", 60, "--scaled-period", 25)
# Long enough for any machine to get somewhere; a search takes seconds.
PATIENCE = 300.0


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory: pytest.TempPathFactory) -> list[Orbit]:
    with Catalog.open(tmp_path_factory.mktemp("undisturbed") / "orbits.db") as catalog:
        for _ in run_search(catalog, REQUEST, workers=2):
            pass
        return [record.orbit for record in catalog.orbits()]


@contextmanager
def searching(catalog: Path, *more: object) -> Iterator[subprocess.Popen[str]]:
    """The program at work with two workers, in a group of processes of its own."""
    started = program(
        "search", *WINDOW, "--workers", 2, "--catalog", catalog, *more, cwd=catalog.parent,
        start_new_session=True,
    )  # fmt: skip
    try:
        with started:
            yield started
    finally:
        if started.poll() is None:
            started.kill()


def filed(catalog: Path) -> int:
    """Number of orbits in a catalogue that another process may be making this moment."""
    if not catalog.exists():
        return 0
    try:
        with closing(sqlite3.connect(f"file:{catalog}?mode=ro", uri=True)) as connection:
            return int(connection.execute("SELECT count(*) FROM orbits").fetchone()[0])
    except sqlite3.OperationalError:
        return 0


def wait_until_filed(catalog: Path, started: subprocess.Popen[str], orbits: int) -> None:
    deadline = time.monotonic() + PATIENCE
    while filed(catalog) < orbits:
        assert started.poll() is None, started.communicate()
        assert time.monotonic() < deadline
        time.sleep(0.01)


def children(pid: int) -> list[int]:
    """Processes started by a process; Linux says so in a file."""
    listing = Path(f"/proc/{pid}/task/{pid}/children")
    return [int(child) for child in listing.read_text().split()] if listing.exists() else []


def gone(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] == "Z"
    except (FileNotFoundError, ProcessLookupError):
        return True


def assert_workers_end(workers: list[int]) -> None:
    deadline = time.monotonic() + 10.0
    while time.monotonic() < deadline and not all(map(gone, workers)):
        time.sleep(0.05)
    left = [pid for pid in workers if not gone(pid)]
    for pid in left:
        os.kill(pid, signal.SIGKILL)
    assert left == [], "workers outlive their search"


def whole_orbits(catalog: Path) -> list[Orbit]:
    """Orbits of a catalogue, each of them complete."""
    with closing(sqlite3.connect(catalog)) as connection:
        assert connection.execute("PRAGMA integrity_check").fetchall() == [("ok",)]
    with Catalog.open(catalog, create=False) as store:
        orbits = [record.orbit for record in store.orbits()]
    for orbit in orbits:
        assert orbit.status in (Status.VERIFIED, Status.NOT_CONFIRMED)
        assert len(orbit.verdict.checks) == len(BOUNDS)
        assert orbit.start in orbit.starts
        assert len(orbit.starts) == 2
    return orbits


def assert_same_orbits(found: list[Orbit], expected: list[Orbit]) -> None:
    assert [orbit.scaled_period for orbit in found] == pytest.approx(
        [orbit.scaled_period for orbit in expected], rel=1e-9
    )
    for one in expected:
        assert sum(same_orbit(one, other) for other in found) == 1
    for one, other in itertools.combinations(found, 2):
        assert not same_orbit(one, other)


def kill_and_run_again(path: Path, expected: list[Orbit], chance: random.Random) -> None:
    """Kill a search at a random moment, look at what is left, and search once more."""
    # Before the first orbit, or after any but the last.
    orbits = chance.randrange(len(expected))
    with searching(path) as started:
        wait_until_filed(path, started, orbits)
        time.sleep(chance.uniform(0.0, 0.3))
        workers = children(started.pid)
        started.kill()
        # Not `communicate`: a worker that lives on would keep the pipes open.
        ended = started.wait()
        assert ended in (-signal.SIGKILL, 0)
        assert_workers_end(workers)
    if path.exists():
        left = whole_orbits(path)
        assert len(left) >= orbits
        for one in left:
            assert sum(same_orbit(one, other) for other in expected) == 1
        with Catalog.open(path) as catalog:
            states = [run.state for run in catalog.runs()]
        # After its last orbit a search may have got to its end before the signal.
        assert states in ([], ["running"]) or len(left) == len(expected)
        assert ended != 0 or states == ["finished"]
    with searching(path) as started:
        started.communicate()
    assert started.returncode == 0
    assert_same_orbits(whole_orbits(path), expected)


@pytest.mark.parametrize("seed", range(3))
def test_a_killed_search_leaves_whole_orbits_and_can_be_run_again(
    tmp_path: Path, undisturbed, seed
) -> None:
    kill_and_run_again(tmp_path / "orbits.db", undisturbed, random.Random(seed))


@pytest.mark.slow
@pytest.mark.parametrize("seed", range(100, 120))
def test_twenty_killed_searches_leave_whole_orbits(tmp_path: Path, undisturbed, seed) -> None:
    kill_and_run_again(tmp_path / "orbits.db", undisturbed, random.Random(seed))


def test_a_search_killed_twice_ends_with_the_same_orbits(tmp_path: Path, undisturbed) -> None:
    path = tmp_path / "orbits.db"
    for orbits in (2, 5):
        with searching(path) as started:
            wait_until_filed(path, started, orbits)
            started.kill()
            started.wait()
    with searching(path) as started:
        started.communicate()
    assert_same_orbits(whole_orbits(path), undisturbed)
    with Catalog.open(path) as catalog:
        assert [run.state for run in catalog.runs()] == ["running", "running", "finished"]


def told(err: str, path: Path) -> int:
    """Number of orbits in the one line that a stopped search ends with."""
    line = r"orbitsearch: stopped; the (\d+) orbits found so far are kept in (.+)\n"
    match = re.fullmatch(line, err)
    assert match, err
    assert match[2] == str(path)
    return int(match[1])


@pytest.mark.parametrize(
    ("number", "send"),
    [
        # Ctrl-C of a terminal reaches the workers, too; a batch system asks the parent alone.
        pytest.param(signal.SIGINT, os.killpg, id="ctrl-c"),
        pytest.param(signal.SIGINT, os.kill, id="interrupt"),
        pytest.param(signal.SIGTERM, os.kill, id="terminate"),
    ],
)
def test_a_stopped_search_keeps_what_it_found_and_says_so(
    tmp_path: Path, undisturbed, number, send
) -> None:
    path = tmp_path / "orbits.db"
    with searching(path) as started:
        wait_until_filed(path, started, 2)
        workers = children(started.pid)
        send(started.pid, number)
        out, err = started.communicate()
    assert started.returncode == 130
    kept = whole_orbits(path)
    assert 2 <= len(kept) < len(undisturbed)
    said = told(err, path)
    assert said == len(kept)
    assert out.splitlines()[-1] == f"{said} new, 0 known orbits; catalogue {path}, run 1"
    assert_workers_end(workers)
    with Catalog.open(path) as catalog:
        (run,) = catalog.runs()
    assert run.state == "stopped"
    assert run.counts is not None
    assert run.counts["filed"] in (len(kept), len(kept) - 1)
    assert 0 < run.counts["starts"] < 3600


@pytest.mark.skipif(not Path("/proc/self/task").exists(), reason="children are told by Linux")
@pytest.mark.parametrize("seconds", [0.0, 0.1, 0.4, 1.0])
def test_ctrl_c_while_workers_start_is_one_line_too(tmp_path: Path, seconds) -> None:
    # Workers take a second to import what they need, and used to be interrupted in the middle.
    path = tmp_path / "orbits.db"
    with searching(path) as started:
        while not children(started.pid):
            time.sleep(0.001)
        time.sleep(seconds)
        workers = children(started.pid)
        os.killpg(started.pid, signal.SIGINT)
        _, err = started.communicate()
    assert started.returncode == 130
    assert filed(path) - told(err, path) in (0, 1)
    assert_workers_end(workers)


def test_an_impatient_second_interrupt_ends_it_all_the_same(tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    with searching(path) as started:
        wait_until_filed(path, started, 1)
        workers = children(started.pid)
        for _ in range(3):
            os.killpg(started.pid, signal.SIGINT)
            time.sleep(0.05)
        _, err = started.communicate(timeout=PATIENCE)
    assert started.returncode == 130
    assert told(err, path) == len(whole_orbits(path))
    assert_workers_end(workers)


def test_a_stopped_search_speaks_of_its_own_run_only(tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    with searching(path) as started:
        wait_until_filed(path, started, 1)
        with Catalog.open(path) as catalog:
            later = catalog.start_run({"start": "rest"})
            catalog.finish_run(later, {"starts": 123456})
        started.send_signal(signal.SIGINT)
        out, _ = started.communicate()
    assert out.splitlines()[-1].endswith(f"catalogue {path}, run 1")
    assert "123,456" not in out
