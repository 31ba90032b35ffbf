"""The file of a catalogue: who may open it, several writers at once, a writer that is killed."""

import os
import re
import signal
import sqlite3
import subprocess
import sys
import tempfile
import threading
from collections.abc import Callable, Iterator
from concurrent.futures import ThreadPoolExecutor
from contextlib import closing, contextmanager
from pathlib import Path

import pytest
import sample_orbits
from sample_orbits import figure_eight, numbered

import orbitsearch.orbit
from orbitsearch import catalog_file, migrations
from orbitsearch.catalog import Catalog
from orbitsearch.errors import BadCatalog

CURRENT = len(migrations.STEPS)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A catalogue with one record, closed."""
    with Catalog.open(tmp_path / "orbits.db") as catalog:
        catalog.add(figure_eight())
        return catalog.path


def run_sql(path: Path, *statements: str) -> None:
    """Change a file behind the catalogue's back."""
    connection = sqlite3.connect(path, isolation_level=None)
    for statement in statements:
        connection.execute(statement)
    connection.close()


# --- what cannot be opened ----------------------------------------------------------------------


def not_sqlite(path: Path) -> None:
    path.write_text("start,p,q,period\n" * 100)


def of_another_program(path: Path) -> None:
    run_sql(path, "CREATE TABLE songs (title)")


def numbered_by_another_program(path: Path) -> None:
    run_sql(path, "PRAGMA application_id = 12345")


def newer(path: Path) -> None:
    Catalog.open(path).close()
    run_sql(path, f"PRAGMA user_version = {CURRENT + 1}")


def damaged(path: Path) -> None:
    with Catalog.open(path) as catalog:
        catalog.add(figure_eight())
    with path.open("r+b") as file:
        file.seek(100)
        file.write(b"\xff" * 3000)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (Path.mkdir, r"^`path` must be a file, \S+ is a folder: name a file inside of it$"),
        (lambda path: None, r"^there is no catalogue \S+: check `path`, or make one by"),
        (not_sqlite, r"^`path` must be an SQLite file, \S+ is something else: name another file$"),
        (of_another_program, r"^`path` must be a catalogue, \S+ is .* another program: name"),
        (numbered_by_another_program, r"^`path` must be a catalogue, \S+ is .* another program"),
        (newer, rf"^catalogue \S+ has schema version {CURRENT + 1}, .* knows {CURRENT}: install"),
        (damaged, r"^catalogue \S+ is damaged \(.*\): restore a copy of the file$"),
    ],
    ids=lambda value: getattr(value, "__name__", "") if callable(value) else "",
)
def test_what_is_no_catalogue_is_told_in_one_line(
    tmp_path: Path, make: Callable[[Path], None], message: str
) -> None:
    place = tmp_path / "place.db"
    make(place)
    before = place.read_bytes() if place.is_file() else None
    with pytest.raises(BadCatalog, match=message) as caught:
        Catalog.open(place, create=False)
    assert str(place) in str(caught.value)
    assert "\n" not in str(caught.value)
    assert before == (place.read_bytes() if place.is_file() else None)


def test_a_missing_folder_is_made_only_on_request(tmp_path: Path) -> None:
    place = tmp_path / "a" / "b" / "orbits.db"
    with pytest.raises(BadCatalog, match="there is no catalogue"):
        Catalog.open(place, create=False)
    assert not place.parent.exists()
    with Catalog.open(place) as catalog:
        assert catalog.add(figure_eight()).new
    assert place.is_file()


def test_a_file_in_the_way_of_the_folder_is_told(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(
        BadCatalog, match=r"^the folder of catalogue .* cannot be made \(.*\): choo"
    ):
        Catalog.open(tmp_path / "file" / "deep" / "orbits.db")


def test_a_name_with_odd_letters_is_a_name(tmp_path: Path) -> None:
    place = tmp_path / "odd ?mode=ro#100% é.db"
    with Catalog.open(str(place)) as catalog:
        catalog.add(figure_eight())
    assert place.is_file()


def test_a_writer_that_does_not_let_go_is_told(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(catalog_file, "BUSY_SECONDS", 0.2)
    with Catalog.open(path) as catalog:
        other = sqlite3.connect(path, isolation_level=None)
        other.execute("BEGIN IMMEDIATE")
        with pytest.raises(BadCatalog, match=r"kept busy by another process for .*: try again"):
            catalog.add(numbered(1))
        assert len(list(catalog.orbits())) == 1
        other.close()
        assert catalog.add(numbered(1)).new


def test_a_full_disk_is_told_and_leaves_what_was_filed(path: Path) -> None:
    with Catalog.open(path) as catalog:
        pages = catalog._connection.execute("PRAGMA page_count").fetchone()[0]
        catalog._connection.execute(f"PRAGMA max_page_count = {pages}")
        filed = 0
        with pytest.raises(BadCatalog, match=r"cannot grow \(.*\): free some space"):  # noqa: PT012
            for n in range(100):
                catalog.add(numbered(n))
                filed += 1
        starts = [numbered(n).starts for n in range(filed)]
        assert [record.orbit.starts for record in catalog.orbits()][1:] == starts
        assert not catalog._connection.in_transaction


def test_a_connection_has_the_settings_that_safety_rests_on(path: Path) -> None:
    with Catalog.open(path) as catalog:
        settings = {
            name: catalog._connection.execute(f"PRAGMA {name}").fetchone()[0]
            for name in ("journal_mode", "busy_timeout", "foreign_keys", "application_id")
        }
    assert settings == {
        "journal_mode": "wal",
        "busy_timeout": 30_000,
        "foreign_keys": 1,
        "application_id": migrations.APPLICATION_ID,
    }


# --- without write permission -------------------------------------------------------------------


@contextmanager
def unprivileged() -> Iterator[Path]:
    """A folder of an ordinary user, and that user's permissions (root may write anywhere)."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        root = os.geteuid() == 0
        if root:
            os.chown(folder, 65534, -1)
            os.seteuid(65534)
        try:
            yield folder
        finally:
            folder.chmod(0o755)
            if root:
                os.seteuid(0)


@pytest.mark.parametrize("of", ["file", "folder", "file and folder"])
def test_without_write_permission_a_catalogue_is_read_but_not_written(of: str) -> None:
    with unprivileged() as folder:
        place = folder / "orbits.db"
        with Catalog.open(place) as catalog:
            catalog.add(figure_eight())
        if "file" in of:
            place.chmod(0o444)
        if "folder" in of:
            folder.chmod(0o555)
        with Catalog.open(place) as catalog:
            assert catalog.read_only
            assert [record.id for record in catalog.orbits(word="abAB")] == [1]
            assert catalog.get(1).orbit.start == figure_eight().start
            assert catalog.find_same(figure_eight()) == 1
            with pytest.raises(BadCatalog, match=r"^catalogue \S+ is open for reading only: check"):
                catalog.add(numbered(1))
        assert [p.name for p in Path(folder).iterdir()] == ["orbits.db"] or of == "file"


def test_a_reader_without_write_permission_sees_what_a_writer_files_meanwhile() -> None:
    with unprivileged() as folder, Catalog.open(folder / "orbits.db") as writer:
        writer.add(figure_eight())
        writer.path.chmod(0o444)
        with Catalog.open(writer.path) as reader:
            assert reader.read_only
            writer.add(numbered(1))
            assert len(list(reader.orbits())) == 2


def test_a_folder_without_write_permission_is_told() -> None:
    with unprivileged() as folder:
        folder.chmod(0o555)
        with pytest.raises(BadCatalog, match=r"cannot be made, its folder is not writable: choose"):
            Catalog.open(folder / "orbits.db")
        with pytest.raises(
            BadCatalog, match=r"cannot be made \(Permission denied\): choose a `path`"
        ):
            Catalog.open(folder / "deep" / "orbits.db")


def test_a_file_without_read_permission_is_told() -> None:
    with unprivileged() as folder:
        place = folder / "orbits.db"
        Catalog.open(place).close()
        place.chmod(0o000)
        with pytest.raises(BadCatalog, match=r"cannot be opened or written \(.*\): check the perm"):
            Catalog.open(place)


def test_an_older_file_without_write_permission_is_told() -> None:
    with unprivileged() as folder:
        place = folder / "orbits.db"
        run_sql(place, "VACUUM")
        place.chmod(0o444)
        with pytest.raises(
            BadCatalog, match=rf"has schema version 0 .* to {CURRENT}, but .*: make"
        ):
            Catalog.open(place)


# --- versions -----------------------------------------------------------------------------------


@pytest.mark.parametrize("create", [True, False])
@pytest.mark.parametrize("statement", [None, "VACUUM", "PRAGMA journal_mode = WAL"])
def test_a_file_of_version_0_is_brought_up_to_date(
    tmp_path: Path, statement: str | None, create: bool
) -> None:
    place = tmp_path / "orbits.db"
    place.touch()
    if statement is not None:
        run_sql(place, statement)
    with Catalog.open(place, create=create) as catalog:
        assert migrations.read_version(catalog._connection) == CURRENT
        assert catalog.add(figure_eight()).new


def test_opening_again_migrates_nothing(path: Path) -> None:
    before = path.read_bytes()
    with Catalog.open(path) as catalog:
        assert migrations.migrate(catalog._connection) == 0
        assert len(list(catalog.orbits())) == 1
    assert path.read_bytes() == before


def test_a_step_that_another_process_is_making_is_waited_for(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    inside, go_on = threading.Event(), threading.Event()

    def slow_step(connection: sqlite3.Connection) -> None:
        inside.set()
        go_on.wait(10)
        connection.execute("CREATE TABLE once (id INTEGER)")

    monkeypatch.setattr(migrations, "STEPS", (slow_step,))

    def migrate() -> int:
        with closing(sqlite3.connect(tmp_path / "new.db", isolation_level=None)) as connection:
            return migrations.migrate(connection)

    with ThreadPoolExecutor(2) as pool:
        first = pool.submit(migrate)
        assert inside.wait(10)
        second = pool.submit(migrate)
        # The second now waits for the lock; let it, or the test would prove nothing.
        with pytest.raises(TimeoutError):
            second.result(0.3)
        go_on.set()
        assert (first.result(10), second.result(10)) == (1, 0)


def test_a_step_that_fails_leaves_the_version_before_it(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def half_a_step(connection: sqlite3.Connection) -> None:
        connection.execute("CREATE TABLE half (id INTEGER)")
        connection.execute("DELETE FROM orbits")
        connection.execute("CREATE TABLE half (id INTEGER)")

    def whole_step(connection: sqlite3.Connection) -> None:
        connection.execute("ALTER TABLE orbits ADD COLUMN braid TEXT NOT NULL DEFAULT ''")

    monkeypatch.setattr(migrations, "STEPS", (*migrations.STEPS, whole_step, half_a_step))
    with pytest.raises(BadCatalog, match="cannot be used: table half already exists; check"):
        Catalog.open(path)
    connection = sqlite3.connect(path)
    assert migrations.read_version(connection) == CURRENT + 1
    tables = {row[0] for row in connection.execute("SELECT name FROM sqlite_master")}
    assert "half" not in tables
    assert connection.execute("SELECT braid FROM orbits").fetchall() == [("",)]
    connection.close()


# --- several processes --------------------------------------------------------------------------

FOLDERS = [str(Path(module.__file__ or "").parents[up]) for module, up in (
    (orbitsearch.orbit, 1), (sample_orbits, 0),
)]  # fmt: skip


def start_child(script: str, *arguments: object) -> subprocess.Popen[str]:
    """Run a script in a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-c", script, *map(str, arguments)],
        env={**os.environ, "PYTHONPATH": os.pathsep.join(FOLDERS)},
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )


ADD_FIFTY = """
import sys
from orbitsearch.catalog import Catalog
from sample_orbits import numbered
orbits = [numbered(n) for n in range(50)]
print("ready", flush=True)
sys.stdin.readline()
with Catalog.open(sys.argv[1]) as catalog:
    for orbit in orbits:
        added = catalog.add(orbit)
        print(added.id, int(added.new))
"""


def test_two_processes_file_fifty_orbits_once_each(tmp_path: Path) -> None:
    # They also race to make the file and its tables.
    place = tmp_path / "orbits.db"
    children = [start_child(ADD_FIFTY, place) for _ in range(2)]
    for child in children:
        assert child.stdout is not None
        assert child.stdout.readline() == "ready\n"
    for child in children:
        assert child.stdin is not None
        child.stdin.write("go\n")
        child.stdin.flush()
    outputs = [child.communicate(timeout=120)[0] for child in children]
    assert [child.returncode for child in children] == [0, 0]
    rows = [[tuple(map(int, line.split())) for line in out.splitlines()] for out in outputs]
    assert [id for id, _ in rows[0]] == [id for id, _ in rows[1]]
    assert [new + other for (_, new), (_, other) in zip(*rows, strict=True)] == [1] * 50
    with Catalog.open(place) as catalog:
        records = list(catalog.orbits())
    assert [r.orbit.cycle for r in records] == [numbered(n).cycle for n in range(50)]
    assert all(len(r.orbit.starts) == 2 for r in records)


ADD_AND_DIE = """
import os, signal, sys
from orbitsearch.catalog import Catalog
from sample_orbits import numbered
seen = 0
def die(statement):
    global seen
    seen += statement.startswith(sys.argv[2])
    if seen == int(sys.argv[3]):
        os.kill(os.getpid(), signal.SIGKILL)
with Catalog.open(sys.argv[1]) as catalog:
    catalog._connection.set_trace_callback(die)
    for n in range(50):
        print(catalog.add(numbered(n)).id, flush=True)
"""


@pytest.mark.parametrize(
    ("statement", "count", "whole"),
    [
        ("INSERT INTO orbits", 5, 4),
        ("INSERT INTO starts", 9, 4),
        ("INSERT INTO starts", 10, 4),
        ("COMMIT", 5, 4),
        ("BEGIN", 6, 5),
    ],
)
def test_a_killed_writer_leaves_whole_records_only(
    tmp_path: Path, statement: str, count: int, whole: int
) -> None:
    place = tmp_path / "orbits.db"
    child = start_child(ADD_AND_DIE, place, statement, count)
    output, _ = child.communicate(timeout=60)
    assert child.returncode == -signal.SIGKILL
    assert output.split() == [str(id) for id in range(1, whole + 1)]
    with Catalog.open(place, create=False) as catalog:
        assert catalog._connection.execute("PRAGMA integrity_check").fetchone() == ("ok",)
        assert catalog._connection.execute("PRAGMA foreign_key_check").fetchall() == []
        records = list(catalog.orbits())
        assert [r.orbit.starts for r in records] == [numbered(n).starts for n in range(whole)]
        assert catalog.add(numbered(whole)).new


def test_a_killed_maker_leaves_a_file_that_opens(tmp_path: Path) -> None:
    place = tmp_path / "orbits.db"
    script = re.sub(
        r"(?s)with Catalog.*",
        "import sqlite3\n"
        "from orbitsearch import migrations\n"
        "connection = sqlite3.connect(sys.argv[1], isolation_level=None)\n"
        "connection.set_trace_callback(die)\n"
        "migrations.migrate(connection)\n",
        ADD_AND_DIE,
    )
    child = start_child(script, place, "PRAGMA user_version =", 1)
    child.communicate(timeout=60)
    assert child.returncode == -signal.SIGKILL
    with Catalog.open(place, create=False) as catalog:
        assert catalog.add(figure_eight()).new


def test_readers_do_not_wait_for_a_writer(tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    with Catalog.open(path) as catalog:
        catalog.add(figure_eight())
    with closing(sqlite3.connect(path, isolation_level=None)) as writer:
        writer.execute("BEGIN IMMEDIATE")
        statements: list[str] = []
        with Catalog.open(path, create=False) as catalog:
            catalog._connection.set_trace_callback(statements.append)
            assert len([*catalog.orbits()]) == 1
        writer.execute("ROLLBACK")
    assert not any(s.startswith("BEGIN IMMEDIATE") for s in statements)


@pytest.mark.parametrize(
    ("damage", "message"),
    [
        ("UPDATE orbits SET record = '{'", r"^record 1 of the catalogue is damaged"),
        ("UPDATE orbits SET record = '{}'", r"^record 1 of the catalogue is damaged"),
        ("DELETE FROM starts", r"^record 1 of the catalogue is damaged"),
    ],
)
def test_a_damaged_record_is_named(tmp_path: Path, damage: str, message: str) -> None:
    path = tmp_path / "orbits.db"
    with Catalog.open(path) as catalog:
        catalog.add(figure_eight())
    with closing(sqlite3.connect(path)) as connection, connection:
        connection.execute(damage)
    with Catalog.open(path) as catalog:
        with pytest.raises(BadCatalog, match=message):
            catalog.get(1)
        with pytest.raises(BadCatalog, match=message):
            [*catalog.orbits()]


def test_a_damaged_run_is_named(tmp_path: Path) -> None:
    path = tmp_path / "orbits.db"
    with Catalog.open(path) as catalog:
        catalog.start_run({"start": "rest"})
    with closing(sqlite3.connect(path)) as connection, connection:
        connection.execute("UPDATE runs SET request = 'x'")
    with Catalog.open(path) as catalog, pytest.raises(BadCatalog, match=r"^run 1 .* is damaged"):
        catalog.runs()
